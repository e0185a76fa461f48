package line

import (
	"fmt"
	"math"
)

// Spacing of the tables. In ln n the emissivity of a line that is half collisional
// and half radiative is ln(1 + e^x) plus a linear part, whose fourth derivative is
// at most 1/8; cubic interpolation in four points errs by (3/128) h^4 of it. The
// populations hardly depend on temperature: linear interpolation errs by 1.4e-5.
// The ion fraction does, and is interpolated apart, in four points.
// TestTable measures what results.
const (
	tableDensity     = 0.25               // ln n: (3/128) h^4 / 8 = 1.1e-5
	tableTemperature = 0.0125 * math.Ln10 // ln T
	tableHeight      = 0.05               // heightCoordinate
)

// heightCoordinate is x = (r^2 - 1)^(1/4). The populations depend on height
// through ln J. Near the surface J has terms in s = sqrt(1 - 1/r^2) and s^2 ln s,
// which are smooth in the square root of s; far out ln J tends to -4 ln x.
func heightCoordinate(r float64) float64 {
	return math.Sqrt(math.Sqrt((r - 1) * (r + 1)))
}

// heightOf is the inverse of heightCoordinate.
func heightOf(x float64) float64 { return math.Sqrt(1 + x*x*x*x) }

// An axis is a uniform grid of at least four points, or of one.
type axis struct {
	lo, h, per float64 // per = 1/h
	n          int
}

// newAxis covers lo..hi at a spacing of at most h with pad more points at each
// end that may have them.
func newAxis(lo, hi, h float64, padLow, padHigh int) axis {
	cells := int(math.Ceil((hi - lo) / h * (1 - 1e-12)))
	if cells < 1 {
		cells = 1
	} else {
		h = (hi - lo) / float64(cells)
	}
	if short := 3 - (cells + padLow + padHigh); short > 0 {
		h *= float64(cells) / float64(cells+short)
		cells += short
	}
	return axis{lo - float64(padLow)*h, h, 1 / h, cells + 1 + padLow + padHigh}
}

func (a *axis) at(i int) float64 { return a.lo + float64(i)*a.h }

// stencil returns the first of four points around x, their Lagrange weights, and
// x in units of the spacing from the first point of the axis.
func (a *axis) stencil(x float64) (i int, w [4]float64, u float64) {
	u = (x - a.lo) * a.per
	i = min(max(int(u)-1, 0), a.n-4)
	o := u - float64(i+1)
	p, q, s := o+1, o-1, o-2
	return i, [4]float64{-o * q * s * (1. / 6), p * q * s * 0.5, -p * o * s * 0.5, p * o * q * (1. / 6)}, u
}

// A Table is a Model tabulated in (ln n, ln T, height) with cubic interpolation
// of ln j, for the millions of evaluations of a synthesis. It implements Emitter,
// does not allocate, is immutable and safe for concurrent use. Its emissivities
// differ from the model's by less than 1e-4 (relative) everywhere in its range.
// Outside its range it gives NaN.
type Table struct {
	rng     Range
	n, t, x axis
	flat    bool      // one temperature
	lnJ     []float64 // ln of j/n of the two lines, ion fraction 1: temperature, height, density, line
	lnIons  []float64 // ln of the ion fraction: temperature
}

// Table tabulates the model over a range; a range of one temperature makes a
// smaller and faster table. The whole range must be finite and within the model's.
func (m *Model) Table(over Range) (*Table, error) {
	ends := [][2]float64{over.Density, over.Temperature, over.Height}
	for _, b := range ends {
		if !(b[0] <= b[1]) || math.IsInf(b[1], 0) {
			return nil, fmt.Errorf("range %v..%v of a table is not finite and ascending", b[0], b[1])
		}
	}
	for i := range 2 {
		if err := m.rng.check(over.Density[i], over.Temperature[i], over.Height[i]); err != nil {
			return nil, err
		}
	}
	t := &Table{rng: over, flat: over.Temperature[0] == over.Temperature[1]}
	// The rates may be solved a little outside the range of densities, and at any
	// greater height, so those ends are padded and every cell has a centred
	// stencil. There are no rates outside the range of temperatures.
	t.n = newAxis(math.Log(over.Density[0]), math.Log(over.Density[1]), tableDensity, 1, 1)
	t.x = newAxis(heightCoordinate(over.Height[0]), heightCoordinate(over.Height[1]), tableHeight, 0, 1)
	// inside undoes a rounding error at the ends.
	inside := func(temp float64) float64 {
		return min(max(temp, m.rng.Temperature[0]), m.rng.Temperature[1])
	}
	if t.flat {
		t.t = axis{lo: math.Log(over.Temperature[0]), n: 1}
	} else {
		lo, hi := math.Log(over.Temperature[0]), math.Log(over.Temperature[1])
		// A short range still gets four points: they reach back into the model's range.
		if floor := 3 * tableTemperature / 4; hi-lo < floor {
			all := [2]float64{math.Log(m.rng.Temperature[0]), math.Log(m.rng.Temperature[1])}
			lo = max(all[0], min(lo, all[1]-floor))
			hi = min(all[1], lo+floor)
		}
		t.t = newAxis(lo, hi, tableTemperature, 0, 0)
	}
	t.lnJ = make([]float64, 2*t.t.n*t.x.n*t.n.n)
	c, work, p := make([]float64, m.n*m.n), make([]float64, m.n*m.n), make([]float64, m.n)
	at := 0
	for i := range t.t.n {
		temp := inside(math.Exp(t.t.at(i)))
		m.coefficients(temp, c)
		ions := m.ionsPerElectron(temp)
		if !t.flat {
			t.lnIons = append(t.lnIons, math.Log(m.IonFraction(temp)))
			ions /= m.IonFraction(temp)
		}
		for k := range t.x.n {
			j := m.MeanIntensity(heightOf(t.x.at(k)))
			for l := range t.n.n {
				m.solve(math.Exp(t.n.at(l)), c, j, work, p)
				t.lnJ[at] = math.Log(ions * m.PerIon(0, p))
				t.lnJ[at+1] = math.Log(ions * m.PerIon(1, p))
				at += 2
			}
		}
	}
	return t, nil
}

// Range returns where the table answers.
func (t *Table) Range() Range { return t.rng }

// Emissivities implements Emitter.
func (t *Table) Emissivities(n, temp, r float64) (j1, j2 float64) {
	if !t.rng.holds(n, temp, r) {
		return math.NaN(), math.NaN()
	}
	ln := math.Log(n)
	in, wn, _ := t.n.stencil(ln)
	ix, wx, _ := t.x.stencil(heightCoordinate(r))
	at, wt, temps := ix*t.n.n+in, [2]float64{1}, 1
	if !t.flat {
		i, w, u := t.t.stencil(math.Log(temp))
		y := (*[4]float64)(t.lnIons[i:])
		ln += w[0]*y[0] + w[1]*y[1] + w[2]*y[2] + w[3]*y[3]
		cell := min(max(int(u), 0), t.t.n-2)
		u -= float64(cell)
		wt, temps = [2]float64{1 - u, u}, 2
		at += cell * t.x.n * t.n.n
	}
	// Sum over temperature and height first: eight independent chains of sums, two
	// lines at four densities.
	var v0, v1, v2, v3, v4, v5, v6, v7 float64
	for i := range temps {
		for k := range wx {
			w := wt[i] * wx[k]
			y := (*[8]float64)(t.lnJ[2*(at+k*t.n.n):])
			v0 += w * y[0]
			v1 += w * y[1]
			v2 += w * y[2]
			v3 += w * y[3]
			v4 += w * y[4]
			v5 += w * y[5]
			v6 += w * y[6]
			v7 += w * y[7]
		}
		at += t.x.n * t.n.n
	}
	a := wn[0]*v0 + wn[1]*v2 + wn[2]*v4 + wn[3]*v6
	b := wn[0]*v1 + wn[1]*v3 + wn[2]*v5 + wn[3]*v7
	return math.Exp(ln + a), math.Exp(ln + b)
}
