package invert

import (
	"fmt"
	"math"
	"sort"

	"offplane/scenarios/units"
	"offplane/synth/filter"
	"offplane/synth/obs"
)

const lightSpeed = units.LightSpeed / 1e5 // [km/s]

// A gaussian turns the intensities at the tunings of one line into the Gaussian
// I exp[-(x-v)^2/w^2] through them (Tian et al. 2013, Sol. Phys. 288, 637): a
// parabola a + b x + c x^2 through the logarithms, exact for three tunings and
// unweighted least squares for more. x is the Doppler offset of a tuning from the
// rest wavelength [km/s], red shift positive.
//
// A Gaussian line through a Gaussian filter is a Gaussian again, so the method is
// exact for one; w still holds the filter.
type gaussian struct {
	x       []float64
	a, b, c []float64 // the parabola's coefficients as weights of ln I
	reach   float64   // largest |x|
	filter  float64   // 1/e half-width of the filter [km/s]; 0: not known, or not Gaussian
	table   []calibration
	rest    float64 // [nm]
}

func newGaussian(tunings []obs.Tuning) (*gaussian, error) {
	n := len(tunings)
	if n < 3 {
		return nil, fmt.Errorf("line has %d tunings: a Gaussian needs three or more", n)
	}
	g := &gaussian{x: make([]float64, n), a: make([]float64, n), b: make([]float64, n), c: make([]float64, n)}
	var s [5]float64
	for k, t := range tunings {
		rest := t.Wavelength - t.Offset
		if !(rest > 0) {
			return nil, fmt.Errorf("tuning %d of line %d: rest wavelength %g nm: want a positive one", t.Index, t.Line, rest)
		}
		g.x[k] = lightSpeed * t.Offset / rest
		g.rest = rest
		if t.Stages == 0 {
			g.filter = max(g.filter, lightSpeed*filter.EFolding(t.FilterFWHM)/rest)
		}
		g.reach = max(g.reach, math.Abs(g.x[k]))
		if k > 0 && !(g.x[k] > g.x[k-1]) {
			return nil, fmt.Errorf("tuning %d of line %d: wavelengths have to ascend", t.Index, t.Line)
		}
	}
	// Normal equations of the parabola in x/reach, solved by cofactors.
	for _, x := range g.x {
		u := x / g.reach
		p := 1.0
		for i := range s {
			s[i] += p
			p *= u
		}
	}
	m := [3][3]float64{{s[0], s[1], s[2]}, {s[1], s[2], s[3]}, {s[2], s[3], s[4]}}
	cof := func(i, j int) float64 {
		i1, i2, j1, j2 := (i+1)%3, (i+2)%3, (j+1)%3, (j+2)%3
		return m[i1][j1]*m[i2][j2] - m[i1][j2]*m[i2][j1]
	}
	det := m[0][0]*cof(0, 0) + m[0][1]*cof(0, 1) + m[0][2]*cof(0, 2)
	for k, x := range g.x {
		u := x / g.reach
		row := func(i int) float64 { return (cof(0, i) + cof(1, i)*u + cof(2, i)*u*u) / det }
		g.a[k], g.b[k], g.c[k] = row(0), row(1)/g.reach, row(2)/(g.reach*g.reach)
	}
	if t := tunings[0]; t.Stages > 0 && t.FilterFWHM > 0 {
		g.calibrate(filter.NewBirefringent(t.Stages, lightSpeed*t.FilterFWHM/g.rest))
	}
	return g, nil
}

// A calibration is what the fit makes of a line of known width that rests in the middle
// of the tunings, through a filter that is not Gaussian. The Doppler shift is left as it
// is: its scale is off by one or two per cent.
type calibration struct {
	fitted, width float64 // 1/e half-widths [km/s]
	energy        float64 // of the line over fitted peak times fitted width [1/(km/s)]
}

// calibrate fills the table for widths from a tenth of the outermost tuning to four
// times it.
func (g *gaussian) calibrate(b filter.Birefringent) {
	middle := g.x[len(g.x)/2]
	I := make([]float64, len(g.x))
	for w := g.reach / 10; w < 4*g.reach; w *= 1.05 {
		for k, x := range g.x {
			I[k] = b.Line(x, middle, w)
		}
		p := g.fit(I)
		if n := len(g.table); p.ok && (n == 0 || p.w > g.table[n-1].fitted) {
			g.table = append(g.table, calibration{p.w, w, 1 / (p.peak * p.w)})
		}
	}
}

// calibrated returns the table's entry for a fitted width, that of the nearest end
// beyond it.
func (g *gaussian) calibrated(w float64) calibration {
	i := sort.Search(len(g.table), func(i int) bool { return g.table[i].fitted >= w })
	switch i {
	case 0:
		return g.table[0]
	case len(g.table):
		return g.table[i-1]
	}
	a, b := g.table[i-1], g.table[i]
	u := (w - a.fitted) / (b.fitted - a.fitted)
	return calibration{w, a.width + u*(b.width-a.width), a.energy + u*(b.energy-a.energy)}
}

// lineWidth returns the width of the line without the filter's; false if it is narrower
// than the filter can tell.
func (g *gaussian) lineWidth(w float64) (float64, bool) {
	if len(g.table) > 0 {
		c := g.calibrated(w)
		return c.width, w >= g.table[0].fitted
	}
	d := w*w - g.filter*g.filter
	return math.Sqrt(max(d, 0)), d > 0
}

// A reading is what the inversion needs of a line.
type reading struct {
	peak       float64 // through the filter, background removed [unit of the frames]
	v          float64 // Doppler shift [km/s]
	width      float64 // 1/e half-width without the filter's [km/s]
	energy     float64 // in the unit of the frames, up to a factor common to both lines
	ok, narrow bool    // narrow: narrower than the filter can tell
	// Variances of the Doppler shift [(km/s)^2] and of the logarithm of the energy, for
	// one frame.
	shiftVar, energyVar float64
}

// reading turns a fit to intensities I of variances s2 into what the inversion needs.
func (g *gaussian) reading(p profile, I, s2 []float64) reading {
	if !p.ok {
		return reading{}
	}
	width, ok := g.lineWidth(p.w)
	return reading{
		peak: p.peak, v: p.v, width: width, narrow: !ok, ok: true, energy: p.peak * p.w * g.energyScale(p.w),
		shiftVar: g.shiftVariance(p, I, s2), energyVar: g.energyVariance(p, I, s2),
	}
}

// A profile is a fitted Gaussian.
type profile struct {
	peak    float64 // [unit of the frames]
	v, w    float64 // Doppler shift and 1/e half-width, filter included [km/s]
	ok      bool
	b, c, y float64 // parabola; y = ln peak
}

// fit fits the intensities, one per tuning. A profile with an intensity that is
// not positive, without a maximum, or with its centre far outside the tunings is
// not ok.
func (g *gaussian) fit(I []float64) profile {
	var a, b, c float64
	for k, i := range I {
		if !(i > 0) || math.IsInf(i, 1) {
			return profile{}
		}
		l := math.Log(i)
		a += g.a[k] * l
		b += g.b[k] * l
		c += g.c[k] * l
	}
	if !(c < 0) {
		return profile{}
	}
	v := -b / (2 * c)
	if math.Abs(v) > 2*g.reach {
		return profile{}
	}
	y := a - b*b/(4*c)
	return profile{peak: math.Exp(y), v: v, w: math.Sqrt(-1 / c), ok: true, b: b, c: c, y: y}
}

// doppler is fit for the Doppler shifts alone of frames at three tunings, two logarithms
// each; bad marks those that are not ok.
func (g *gaussian) doppler(i1, i2, i3 []float32, v []float64, bad []bool) {
	b1, b3, c1, c3, limit := g.b[0], g.b[2], g.c[0], g.c[2], 2*g.reach
	i2, i3, v, bad = i2[:len(i1)], i3[:len(i1)], v[:len(i1)], bad[:len(i1)]
	for i, y1 := range i1 {
		y2, y3 := i2[i], i3[i]
		v[i], bad[i] = 0, true
		if !(y1 > 0 && y2 > 0 && y3 > 0) || y1 > math.MaxFloat32 || y2 > math.MaxFloat32 || y3 > math.MaxFloat32 {
			continue
		}
		r := 1 / float64(y2)
		l1, l3 := ln(float64(y1)*r), ln(float64(y3)*r)
		c := float64(c1*l1) + float64(c3*l3)
		if !(c < 0) {
			continue
		}
		x := -(float64(b1*l1) + float64(b3*l3)) / (2 * c)
		v[i], bad[i] = x, !(math.Abs(x) <= limit)
	}
}

// shiftVariance returns the variance of the Doppler shift [(km/s)^2] when the
// intensities I have the variances s2: exact first-order propagation.
func (g *gaussian) shiftVariance(p profile, I, s2 []float64) float64 {
	sum := 0.0
	for k := range I {
		d := (-g.b[k] + p.b*g.c[k]/p.c) / (2 * p.c) // dv/dln I
		sum += d * d * s2[k] / (I[k] * I[k])
	}
	return sum
}

// energyVariance returns the variance of the logarithm of the line's energy,
// sqrt(pi) peak w, likewise.
func (g *gaussian) energyVariance(p profile, I, s2 []float64) float64 {
	sum := 0.0
	for k := range I {
		d := g.a[k] - p.b*g.b[k]/(2*p.c) + p.b*p.b*g.c[k]/(4*p.c*p.c) - g.c[k]/(2*p.c)
		sum += d * d * s2[k] / (I[k] * I[k])
	}
	return sum
}

// energyScale times peak times w is the line's energy in the unit of the frames,
// up to a factor common to both lines: what a filter of unit peak transmission
// lets through of a line of energy E is E filter/w at its peak if both are Gaussian.
func (g *gaussian) energyScale(w float64) float64 {
	switch {
	case len(g.table) > 0:
		return g.calibrated(w).energy
	case g.filter > 0:
		return 1 / g.filter
	}
	return g.rest
}

// A photonNoise gives the variance of an intensity: alpha I + beta. Averaged over
// the exposures of a line. The background was measured for as long as the line, so its
// photons count twice.
type photonNoise struct {
	known       bool
	alpha, beta float64
	frames      int // that were not lost
}

func newPhotonNoise(es []obs.Exposure) photonNoise {
	n := photonNoise{known: len(es) > 0}
	for _, e := range es {
		if e.Exposure > 0 {
			n.frames++
		}
	}
	if n.frames == 0 { // nothing known
		n.frames = len(es)
	}
	for _, e := range es {
		if !(e.Electrons > 0) {
			return photonNoise{frames: n.frames}
		}
		n.alpha += 1 / e.Electrons
		n.beta += 2*e.Background/e.Electrons + e.ReadNoise*e.ReadNoise/(e.Electrons*e.Electrons)
	}
	n.alpha /= float64(len(es))
	n.beta /= float64(len(es))
	return n
}

// variances fills s2 with the variances of one frame's intensities.
func (n photonNoise) variances(I, s2 []float64) {
	for k, i := range I {
		s2[k] = n.alpha*max(i, 0) + n.beta
	}
}
