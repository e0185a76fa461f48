// Package filter describes the transmission of the tunable filter, which the
// camera applies and the inversion has to know.
package filter

import "math"

// Wavelength offsets are in any one unit (nm or km/s) throughout.

// EFolding returns the 1/e half-width of a Gaussian of the given full width at
// half maximum: w = FWHM / (2 sqrt(ln 2)).
func EFolding(fwhm float64) float64 { return fwhm / (2 * math.Sqrt(math.Ln2)) }

// Gaussian returns the part of a line of unit energy that passes a Gaussian
// filter of unit peak transmission: a Gaussian line of 1/e half-width w centred
// at u seen through a filter of 1/e half-width wf centred at d is itself Gaussian
// in d - u, with the widths added in quadrature.
func Gaussian(d, u, w, wf float64) float64 {
	s2 := w*w + wf*wf
	return wf / math.Sqrt(s2) * math.Exp(-(d-u)*(d-u)/s2)
}

// EquivalentWidth returns the integral of the transmission: Gaussian at 0 stages,
// one order of the birefringent filter otherwise.
func EquivalentWidth(stages int, fwhm float64) float64 {
	if stages == 0 {
		return math.Sqrt(math.Pi) * EFolding(fwhm)
	}
	b := NewBirefringent(stages, fwhm)
	return b.Period / float64(b.n)
}

// A Birefringent filter is a stack of n stages, each with twice the retardation of the
// one before, between polarisers (Lyot 1944, Ann. Astrophys. 7, 31, from memory). Its
// transmission
//
//	prod over k < n of cos^2(2^k pi x / P) = [sin(N pi x/P) / (N sin(pi x/P))]^2
//	= 1/N sum over |m| < N of (1 - |m|/N) cos(2 pi m x/P),  N = 2^n,
//
// is a finite sum of cosines, P its period, the distance of its orders.
type Birefringent struct {
	Period float64
	n      int // N
}

// NewBirefringent returns the filter of that many stages (one or more) with the given
// full width at half maximum.
func NewBirefringent(stages int, fwhm float64) Birefringent {
	n := 1 << stages
	// Half maximum at x = P y/pi, by bisection: the transmission falls up to P/N.
	lo, hi := 0.0, math.Pi/float64(n)
	for range 60 {
		y := (lo + hi) / 2
		if s := math.Sin(float64(n)*y) / (float64(n) * math.Sin(y)); s*s > 0.5 {
			lo = y
		} else {
			hi = y
		}
	}
	return Birefringent{Period: fwhm * math.Pi / (2 * lo), n: n}
}

// Transmission at an offset from the middle of the pass-band.
func (b Birefringent) Transmission(x float64) float64 {
	t := 1.0
	for k := 1; k < b.n; k *= 2 {
		c := math.Cos(float64(k) * math.Pi * x / b.Period)
		t *= c * c
	}
	return t
}

// Series returns, appended to c[:0], the coefficients of cos(2 pi m (d-u)/P) from
// m = 0 on, whose sum is the part of a line of unit energy that passes the filter
// centred at d: the line, a Gaussian of 1/e half-width w centred at u, damps each
// cosine by its own transform exp(-(pi m w/P)^2), exactly. The series ends where its
// terms fall below 1e-8 of the sum.
func (b Birefringent) Series(c []float64, w float64) []float64 {
	c = append(c[:0], 1/float64(b.n))
	q := math.Pi * w / b.Period
	for m := 1; m < b.n; m++ {
		x := 2 / float64(b.n) * (1 - float64(m)/float64(b.n)) * math.Exp(-q*q*float64(m)*float64(m))
		if x < 1e-8*c[0] {
			break
		}
		c = append(c, x)
	}
	return c
}

// Line returns the part of a line of unit energy that passes: what Gaussian is for a
// Gaussian filter.
func (b Birefringent) Line(d, u, w float64) float64 {
	sum := 0.0
	for m, c := range b.Series(nil, w) {
		sum += c * math.Cos(2*math.Pi*float64(m)*(d-u)/b.Period)
	}
	return sum
}
