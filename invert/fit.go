package invert

import (
	"fmt"
	"math"

	"offplane/synth/filter"
	"offplane/synth/obs"
)

// A fitter fits a Gaussian line on a constant background to the intensities at four or
// more tunings by least squares, with the filter's own shape: Levenberg-Marquardt on
// four unknowns with exact derivatives (Marquardt 1963, J. SIAM 11, 431, from memory).
type fitter struct {
	x      []float64 // of the tunings [km/s]
	reach  float64
	filter float64 // 1/e half-width of a Gaussian filter [km/s]; 0: not known
	rest   float64
	shape  *filter.Birefringent // nil: Gaussian
	c      []float64            // scratch
}

// leastTunings of a fit with background.
const leastTunings = 4

func newFitter(g *gaussian, tunings []obs.Tuning) (*fitter, error) {
	if len(g.x) < leastTunings {
		return nil, fmt.Errorf("inversion: background: line %d has %d tunings: a fit with background needs %d or more", tunings[0].Line, len(g.x), leastTunings)
	}
	f := &fitter{x: g.x, reach: g.reach, filter: g.filter, rest: g.rest}
	if t := tunings[0]; t.Stages > 0 && t.FilterFWHM > 0 {
		b := filter.NewBirefringent(t.Stages, lightSpeed*t.FilterFWHM/g.rest)
		f.shape = &b
	}
	return f, nil
}

// A shape is what is fitted: line, Doppler shift and width [km/s], background. With a
// Gaussian filter line is the peak and width that of line and filter together,
// otherwise line is the energy and width the line's own.
type shape [4]float64

// A fitted is a fit and its covariance, for weights that are one over the variances.
type fitted struct {
	shape
	cov [4][4]float64
	ok  bool
}

// value returns the model at x and its derivatives.
func (f *fitter) value(s *shape, x float64, d *[4]float64) float64 {
	if f.shape == nil {
		u := (x - s[1]) / s[2]
		e := math.Exp(-u * u)
		*d = [4]float64{e, 2 * s[0] * e * u / s[2], 2 * s[0] * e * u * u / s[2], 1}
		return s[0]*e + s[3]
	}
	*d = [4]float64{3: 1}
	q := math.Pi / f.shape.Period
	for m, c := range f.c {
		sin, cos := math.Sincos(2 * q * float64(m) * (x - s[1]))
		d[0] += c * cos
		d[1] += s[0] * c * 2 * q * float64(m) * sin
		d[2] -= s[0] * c * cos * 2 * q * q * float64(m) * float64(m) * s[2]
	}
	return s[0]*d[0] + s[3]
}

// normal returns chi^2, its curvature matrix and half its gradient.
func (f *fitter) normal(s *shape, I, weight []float64) (chi2 float64, h [4][4]float64, g [4]float64) {
	if f.shape != nil {
		f.c = f.shape.Series(f.c, s[2])
	}
	var d [4]float64
	for k, x := range f.x {
		if weight[k] == 0 {
			continue
		}
		r := I[k] - f.value(s, x, &d)
		chi2 += weight[k] * r * r
		for i := range d {
			g[i] += weight[k] * r * d[i]
			for j := range i + 1 {
				h[i][j] += weight[k] * d[i] * d[j]
			}
		}
	}
	return chi2, h, g
}

// cholesky factors the lower triangle of h in place; false: not positive definite.
func cholesky(h *[4][4]float64) bool {
	for i := range h {
		for j := range i + 1 {
			s := h[i][j]
			for k := range j {
				s -= h[i][k] * h[j][k]
			}
			if i > j {
				h[i][j] = s / h[j][j]
				continue
			}
			if !(s > 0) {
				return false
			}
			h[i][i] = math.Sqrt(s)
		}
	}
	return true
}

func solve(l *[4][4]float64, g [4]float64) [4]float64 {
	for i := range g {
		for k := range i {
			g[i] -= l[i][k] * g[k]
		}
		g[i] /= l[i][i]
	}
	for i := 3; i >= 0; i-- {
		for k := i + 1; k < 4; k++ {
			g[i] -= l[k][i] * g[k]
		}
		g[i] /= l[i][i]
	}
	return g
}

// start returns where to begin without anything known.
func (f *fitter) start(I []float64) shape {
	low, top := 0, 0
	for k, y := range I {
		if y < I[low] {
			low = k
		}
		if y > I[top] {
			top = k
		}
	}
	s := shape{I[top] - I[low], f.x[top], math.Hypot(f.filter, f.reach/2), I[low]}
	if f.shape != nil {
		s[2] = f.reach / 2
		s[0] /= f.shape.Line(0, 0, s[2])
	}
	return s
}

// fit starts from s; weight is that of each tuning, zero where there is no value.
func (f *fitter) fit(s shape, I, weight []float64) (r fitted) {
	n := 0
	for k, w := range weight {
		if w > 0 {
			n++
			if math.IsNaN(I[k]) || math.IsInf(I[k], 0) {
				return r
			}
		}
	}
	if n < leastTunings || !(s[0] > 0) {
		return r
	}
	lambda := 1e-3
	chi2, h, g := f.normal(&s, I, weight)
	for range 60 {
		l := h
		for i := range l {
			l[i][i] *= 1 + lambda
		}
		if !cholesky(&l) {
			return r
		}
		step := solve(&l, g)
		next := s
		for i := range next {
			next[i] += step[i]
		}
		if next[2] > f.reach/50 && next[2] < 20*f.reach && math.Abs(next[1]) < 4*f.reach {
			if c, hn, gn := f.normal(&next, I, weight); c <= chi2 {
				s, chi2, h, g = next, c, hn, gn
				lambda = max(lambda/10, 1e-12)
				if math.Abs(step[1]) < 1e-9*f.reach && math.Abs(step[2]) < 1e-9*f.reach {
					break
				}
				continue
			}
		}
		if lambda *= 10; lambda > 1e8 { // no step improves it: at the minimum to rounding
			break
		}
	}
	l := h
	if !cholesky(&l) || !(s[0] > 0) || math.Abs(s[1]) > 2*f.reach {
		return r
	}
	for i := range r.cov {
		var e [4]float64
		e[i] = 1
		r.cov[i] = solve(&l, e)
	}
	r.shape, r.ok = s, true
	return r
}

// frame fits one frame, from the fit of its mean; usable is scratch.
func (f *fitter) frame(mean *fitted, I, weight, usable []float64) fitted {
	if !mean.ok {
		return fitted{}
	}
	for k, y := range I {
		usable[k] = weight[k]
		if math.IsNaN(y) || math.IsInf(y, 0) {
			usable[k] = 0
		}
	}
	return f.fit(mean.shape, I, usable)
}

// reading turns a fit into what the inversion needs.
func (f *fitter) reading(r fitted) reading {
	if !r.ok {
		return reading{}
	}
	o := reading{ok: true, v: r.shape[1], shiftVar: r.cov[1][1]}
	if f.shape != nil {
		o.width, o.energy, o.peak = r.shape[2], r.shape[0], r.shape[0]*f.shape.Line(0, 0, r.shape[2])
		o.energyVar = r.cov[0][0] / (r.shape[0] * r.shape[0])
		return o
	}
	a, w := r.shape[0], r.shape[2]
	o.peak = a
	o.energy = a * w * f.rest
	if f.filter > 0 {
		o.energy = a * w / f.filter
	}
	d := w*w - f.filter*f.filter
	o.width, o.narrow = math.Sqrt(max(d, 0)), !(d > 0)
	o.energyVar = r.cov[0][0]/(a*a) + r.cov[2][2]/(w*w) + 2*r.cov[0][2]/(a*w)
	return o
}
