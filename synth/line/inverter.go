package line

import "math"

// A Reason says why an Inverter gave no density.
type Reason uint8

const (
	Found         Reason = iota // it did
	BelowRange                  // the ratio is below what the densities in range can give
	AboveRange                  // the ratio is above it
	OutsideHeight               // the height is outside the inverter's
	NoRatio                     // the ratio is not positive, or is NaN
)

func (r Reason) String() string {
	return [...]string{"found", "ratio below range", "ratio above range", "height outside range", "no ratio"}[r]
}

// An Inverter reads densities off ratios at one temperature, for the millions of
// pixels of a map. It tabulates ln ratio over (ln n, height), interpolates with
// cubics and solves the cubic for the density, which stays accurate where the
// ratio hardly depends on it. It is immutable, safe for concurrent use and does
// not allocate.
//
// ln n agrees with Density on the same Emitter to 1e-4: for a Model at every
// density in range (slopes up to 1000), for a Table, whose interpolation has
// kinks of its own, where the slope is below 100. Prefer a Model: the table is
// built in some 20 ms.
type Inverter struct {
	n, x    axis
	height  [2]float64
	falling float64   // -1: the ratio falls with density
	lnRatio []float64 // times falling; density, height
}

// Spacing of the inverter's table; the error of ln ratio goes with the fourth
// power and appears in ln n times the slope.
const (
	inverterDensity = 0.1
	inverterHeight  = 0.02
)

// NewInverter prepares an inverter at temperature t [K] for heliocentric distances
// rmin..rmax [solar radii]. Errors are those of Density: the ratio has to be
// monotonic in density at every height.
func NewInverter(e Emitter, t, rmin, rmax float64) (*Inverter, error) {
	lo, hi := densities(e)
	if g, ok := e.(ranger); ok {
		b := g.Range()
		for _, r := range []float64{rmin, rmax} {
			if err := b.check(lo, t, r); err != nil {
				return nil, err
			}
		}
	}
	if !(rmin >= 1 && rmin <= rmax && rmax < math.Inf(1)) {
		return nil, &RangeError{"heliocentric distance", "solar radii", rmin, 1, rmax}
	}
	v := &Inverter{
		n:      newAxis(math.Log(lo), math.Log(hi), inverterDensity, 0, 0),
		x:      newAxis(heightCoordinate(rmin), heightCoordinate(rmax), inverterHeight, 0, 0),
		height: [2]float64{rmin, rmax},
	}
	if rmin == rmax {
		v.x = axis{lo: v.x.lo, n: 1}
	}
	v.lnRatio = make([]float64, v.n.n*v.x.n)
	for i := range v.n.n {
		n := math.Exp(v.n.at(i))
		n = min(max(n, lo), hi) // the ends exactly, in spite of rounding
		for k := range v.x.n {
			r := min(max(heightOf(v.x.at(k)), rmin), rmax)
			y := lnRatio(e, n, t, r)
			if math.IsNaN(y) {
				return nil, ErrNoRange
			}
			v.lnRatio[i*v.x.n+k] = y
		}
	}
	v.falling = 1
	if v.lnRatio[len(v.lnRatio)-1] < v.lnRatio[v.x.n-1] {
		v.falling = -1
	}
	for i := range v.lnRatio {
		v.lnRatio[i] *= v.falling
		if i >= v.x.n && !(v.lnRatio[i] > v.lnRatio[i-v.x.n]) {
			return nil, ErrAmbiguous
		}
	}
	return v, nil
}

// Density returns what the function Density returns at the inverter's temperature;
// n and slope are NaN unless the reason is Found.
func (v *Inverter) Density(ratio, r float64) (n, slope float64, why Reason) {
	nan := math.NaN()
	if !(ratio > 0 && ratio < math.Inf(1)) {
		return nan, nan, NoRatio
	}
	if !(r >= v.height[0] && r <= v.height[1]) {
		return nan, nan, OutsideHeight
	}
	y := v.falling * math.Log(ratio)
	ix, wx := 0, [4]float64{1}
	if v.x.n > 1 {
		ix, wx, _ = v.x.stencil(heightCoordinate(r))
	}
	at := func(i int) float64 {
		row := v.lnRatio[i*v.x.n+ix:]
		if v.x.n == 1 {
			return row[0]
		}
		return wx[0]*row[0] + wx[1]*row[1] + wx[2]*row[2] + wx[3]*row[3]
	}
	lo, hi := 0, v.n.n-1
	below, above := BelowRange, AboveRange
	if v.falling < 0 {
		below, above = above, below
	}
	switch {
	case y < at(lo):
		return nan, nan, below
	case y > at(hi):
		return nan, nan, above
	}
	for hi-lo > 1 {
		mid := int(uint(lo+hi) / 2)
		if at(mid) <= y {
			lo = mid
		} else {
			hi = mid
		}
	}
	// The cubic through four densities around the cell, as a polynomial in
	// u = (ln n - ln n of point i+1)/h (Newton's divided differences).
	i := min(max(lo-1, 0), v.n.n-4)
	y0, y1, y2, y3 := at(i), at(i+1), at(i+2), at(i+3)
	c1 := y2 - y0/3 - y1/2 - y3/6
	c2 := (y0+y2)/2 - y1
	c3 := (y3 - y0 + 3*(y1-y2)) / 6
	a, b := float64(lo-i-1), float64(lo-i)
	u := (a + b) / 2
	for range 60 {
		f := y1 - y + u*(c1+u*(c2+u*c3))
		if f > 0 {
			b = u
		} else {
			a = u
		}
		d := c1 + u*(2*c2+u*3*c3)
		next := u - f/d
		if !(next >= a && next <= b) {
			next = (a + b) / 2
		}
		if math.Abs(next-u) < 1e-12 {
			u = next
			break
		}
		u = next
	}
	d := c1 + u*(2*c2+u*3*c3)
	return math.Exp(v.n.at(i+1) + u*v.n.h), v.falling * v.n.h / d, Found
}
