package line

import "math"

// derivative is d f/dx at x by differences of fourth order with step h; where f
// is NaN on one side, the end of a range, by one-sided differences.
func derivative(f func(x float64) (float64, float64), x, h float64) (d1, d2 float64) {
	var a, b [5]float64
	for i := range a {
		a[i], b[i] = f(x + float64(i-2)*h)
	}
	if !math.IsNaN(a[0] + a[1] + a[3] + a[4]) {
		diff := func(y *[5]float64) float64 { return (8*(y[3]-y[1]) - (y[4] - y[0])) / (12 * h) }
		return diff(&a), diff(&b)
	}
	if math.IsNaN(a[3] + a[4]) {
		h = -h
	}
	for i := range a {
		a[i], b[i] = f(x + float64(i)*h)
	}
	diff := func(y *[5]float64) float64 {
		return (-25*y[0] + 48*y[1] - 36*y[2] + 16*y[3] - 3*y[4]) / (12 * h)
	}
	return diff(&a), diff(&b)
}

// A step of 0.01 in a logarithm makes the error of fourth order about 1e-9 and
// that of rounding about 1e-13.
const step = 0.01

// Exponents returns p = d ln j / d ln n of the two lines at fixed temperature
// t [K] and heliocentric distance r [solar radii]; NaN outside the range of e.
func Exponents(e Emitter, n, t, r float64) (p1, p2 float64) {
	return derivative(func(x float64) (float64, float64) {
		d := n
		if x != 0 { // exactly n in the middle, so that the ends of a range work
			d = n * math.Exp(x)
		}
		j1, j2 := e.Emissivities(d, t, r)
		return math.Log(j1), math.Log(j2)
	}, 0, step)
}

// RadialSlopes returns q = -d ln j / d ln r of the two lines at r [solar radii]
// in a corona of temperature t [K] whose electron density is n(r) [cm^-3]: the
// fall of the density and that of the disc's radiation together.
func RadialSlopes(e Emitter, n func(r float64) float64, t, r float64) (q1, q2 float64) {
	d1, d2 := derivative(func(x float64) (float64, float64) {
		s := r
		if x != 0 {
			s = r * math.Exp(x)
		}
		j1, j2 := e.Emissivities(n(s), t, s)
		return math.Log(j1), math.Log(j2)
	}, 0, step/2)
	return -d1, -d2
}

// A PowerLaw is a test double for tests with closed-form answers, not a physical
// model: j_k = J0 (n/N0)^P_k, whatever the temperature and height.
type PowerLaw struct {
	J0     float64 // [erg cm^-3 s^-1 sr^-1] of both lines at density N0
	N0     float64 // [cm^-3]
	P1, P2 float64
}

// Emissivities implements Emitter.
func (p PowerLaw) Emissivities(n, t, r float64) (j1, j2 float64) {
	return p.J0 * math.Pow(n/p.N0, p.P1), p.J0 * math.Pow(n/p.N0, p.P2)
}
