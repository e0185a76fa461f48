package line

import (
	"errors"
	"fmt"
	"math"
)

// The densities between which Density looks, electrons per cm^3.
const (
	LowestDensity  = 1e4
	HighestDensity = 1e10
)

// A RatioError says that no density in range gives a ratio.
type RatioError struct {
	Ratio     float64
	Low, High float64 // the ratios that can be reached at this temperature and height
	Above     bool    // above High; else below Low
}

func (e *RatioError) Error() string {
	side := "below"
	if e.Above {
		side = "above"
	}
	return fmt.Sprintf("ratio %.4g is %s the range %.4g..%.4g that can be reached", e.Ratio, side, e.Low, e.High)
}

// ErrAmbiguous says that the ratio is no monotonic function of the density, so
// that a ratio does not give one density.
var ErrAmbiguous = errors.New("line: the ratio does not rise or fall with density throughout; it gives no single density")

// ErrNoRange says that an Emitter has no emissivities at a temperature and height.
var ErrNoRange = errors.New("line: no emissivities at this temperature and height")

// ranger is an Emitter that knows where it answers; Model and Table do.
type ranger interface{ Range() Range }

// densities returns ln of the lowest and highest density to look at.
func densities(e Emitter) (lo, hi float64) {
	lo, hi = LowestDensity, HighestDensity
	if g, ok := e.(ranger); ok {
		b := g.Range().Density
		lo, hi = max(lo, b[0]), min(hi, b[1])
	}
	return lo, hi
}

// lnRatio is ln of the energy ratio j2/j1.
func lnRatio(e Emitter, n, t, r float64) float64 {
	j1, j2 := e.Emissivities(n, t, r)
	return math.Log(j2 / j1)
}

// Density returns the electron density n [cm^-3] at which the energy ratio
// j(1079.8)/j(1074.7) of e equals ratio at temperature t [K] and heliocentric
// distance r [solar radii], and slope = d ln n / d ln ratio, the factor by which a
// small relative error of the ratio grows.
//
// It looks between LowestDensity and HighestDensity, or in the density range of e
// if e has a method Range, with no other demand on e than that the ratio is
// monotonic. Errors: *RangeError (t or r, where e has a Range), ErrNoRange,
// *RatioError, ErrAmbiguous; n and slope are then NaN.
func Density(e Emitter, ratio, t, r float64) (n, slope float64, err error) {
	nan := math.NaN()
	lo, hi := densities(e)
	if g, ok := e.(ranger); ok {
		b := g.Range()
		if err := b.check(lo, t, r); err != nil {
			return nan, nan, err
		}
	}
	// Nodes half a natural logarithm apart: the ratio turns from one slope to
	// another over a factor of a few in density, so a turn between two nodes that
	// leaves them in order is a fold no measurement could see.
	steps := max(int(math.Ceil(2*math.Log(hi/lo))), 4)
	at := func(i int) float64 {
		switch i {
		case 0:
			return lo
		case steps:
			return hi
		}
		return lo * math.Pow(hi/lo, float64(i)/float64(steps))
	}
	ys := make([]float64, steps+1)
	for i := range ys {
		ys[i] = lnRatio(e, at(i), t, r)
		if math.IsNaN(ys[i]) {
			return nan, nan, ErrNoRange
		}
	}
	sign := 1.0
	if ys[steps] < ys[0] {
		sign = -1
	}
	for i := range steps {
		if !(sign*(ys[i+1]-ys[i]) > 0) {
			return nan, nan, ErrAmbiguous
		}
	}
	y := math.Log(ratio)
	low, high := min(ys[0], ys[steps]), max(ys[0], ys[steps])
	if !(y >= low && y <= high) { // also NaN
		return nan, nan, &RatioError{ratio, math.Exp(low), math.Exp(high), y > high}
	}
	i := 0
	for i < steps-1 && sign*(ys[i+1]-y) < 0 {
		i++
	}
	x := root(func(x float64) float64 { return sign * (lnRatio(e, math.Exp(x), t, r) - y) },
		math.Log(at(i)), math.Log(at(i+1)), sign*(ys[i]-y), sign*(ys[i+1]-y))
	n = min(max(math.Exp(x), lo), hi) // exp(log(lo)) may miss lo by a rounding error
	p1, p2 := Exponents(e, n, t, r)
	return n, 1 / (p2 - p1), nil
}

// root finds the zero of a rising f between a and b, f(a) = fa <= 0 <= fb = f(b),
// by regula falsi with the Illinois modification (Dowell & Jarratt 1971, BIT 11,
// 168), to rounding.
func root(f func(float64) float64, a, b, fa, fb float64) float64 {
	if fa == 0 {
		return a
	}
	if fb == 0 {
		return b
	}
	side := 0
	for range 200 {
		x := (a*fb - b*fa) / (fb - fa)
		if !(x > a && x < b) {
			x = (a + b) / 2
		}
		if x == a || x == b || b-a < 1e-13 {
			return x
		}
		switch fx := f(x); {
		case fx == 0 || math.IsNaN(fx): // NaN: the end of the range, met by rounding
			return x
		case fx < 0:
			a, fa = x, fx
			if side < 0 {
				fb /= 2
			}
			side = -1
		default:
			b, fb = x, fx
			if side > 0 {
				fa /= 2
			}
			side = 1
		}
	}
	return (a + b) / 2
}
