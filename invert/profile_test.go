package invert

import (
	"math"
	"math/rand/v2"
	"testing"

	"offplane/synth/filter"
	"offplane/synth/obs"
)

func tuningsAt(line int, rest float64, offsets ...float64) (ts []obs.Tuning) {
	for k, d := range offsets {
		ts = append(ts, obs.Tuning{Line: line, Index: k, Wavelength: rest + d, Offset: d, FilterFWHM: 0.13})
	}
	return ts
}

// shift is doppler of one frame.
func (g *gaussian) shift(i1, i2, i3 float32) (v float64, ok bool) {
	vs, bad := []float64{0}, []bool{false}
	g.doppler([]float32{i1}, []float32{i2}, []float32{i3}, vs, bad)
	return vs[0], !bad[0]
}

func mustGaussian(t *testing.T, ts []obs.Tuning) *gaussian {
	t.Helper()
	g, err := newGaussian(ts)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// Exact for a Gaussian line through a Gaussian filter (derived).
func TestGaussianIsExact(t *testing.T) {
	for _, offsets := range [][]float64{{-0.12, 0, 0.12}, {-0.1, 0.01, 0.14}, {-0.2, -0.1, 0, 0.1, 0.2}} {
		ts := tuningsAt(1, rest1, offsets...)
		g := mustGaussian(t, ts)
		for _, v := range []float64{-20, -0.3, 0, 11} {
			for _, w := range []float64{25, 43} {
				I := make([]float64, len(ts))
				for k := range I {
					I[k] = 7 * filter.Gaussian(g.x[k], v, w, g.filter)
				}
				p := g.fit(I)
				seen := math.Hypot(w, g.filter)
				for _, c := range []struct {
					what      string
					got, want float64
				}{
					{"shift", p.v, v}, {"width", p.w, seen}, {"peak", p.peak, 7 * g.filter / seen},
					{"energy", p.peak * p.w * g.energyScale(p.w), 7},
				} {
					if !p.ok || math.Abs(c.got-c.want) > 1e-10 {
						t.Errorf("offsets %v, v = %g, w = %g: %s %.12g, want %.12g", offsets, v, w, c.what, c.got, c.want)
					}
				}
				if len(I) == 3 {
					u, ok := g.shift(float32(I[0]), float32(I[1]), float32(I[2]))
					if !ok || math.Abs(u-v) > 2e-5 { // of float32 intensities
						t.Errorf("doppler %g, want %g", u, v)
					}
				}
			}
		}
	}
}

// Wing noise to shift noise, K = 12.9, 16.9, 19.5, 26.4 km/s for w = 35, 40, 43,
// 50 km/s at 33.5 km/s spacing (derived).
func TestShiftNoise(t *testing.T) {
	d := 33.5 / lightSpeed * rest1
	g := mustGaussian(t, tuningsAt(1, rest1, -d, 0, d))
	for w, want := range map[float64]float64{35: 12.9, 40: 16.9, 43: 19.5, 50: 26.4} {
		I, s2 := make([]float64, 3), make([]float64, 3)
		for k, x := range g.x {
			I[k] = math.Exp(-x * x / (w * w))
			s2[k] = I[k] * I[k] // a signal-to-noise ratio of one, in the wings that matter
		}
		got := math.Sqrt(g.shiftVariance(g.fit(I), I, s2))
		if math.Abs(got-want) > 0.05 {
			t.Errorf("w = %g: K = %.3f, want %.1f", w, got, want)
		}
	}
}

// First-order variances against differences of the fit (derived).
func TestVariancesAreGradients(t *testing.T) {
	g := mustGaussian(t, tuningsAt(1, rest1, -0.14, -0.01, 0.1, 0.19))
	I := []float64{3, 9, 5, 1.1}
	s2 := []float64{0.1, 0.2, 0.3, 0.05}
	var v, e float64
	for k := range I {
		at := func(h float64) (float64, float64) {
			J := append([]float64(nil), I...)
			J[k] += h
			p := g.fit(J)
			return p.v, math.Log(p.peak * p.w)
		}
		v1, e1 := at(1e-5)
		v0, e0 := at(-1e-5)
		v += (v1 - v0) * (v1 - v0) / 4e-10 * s2[k]
		e += (e1 - e0) * (e1 - e0) / 4e-10 * s2[k]
	}
	p := g.fit(I)
	if got := g.shiftVariance(p, I, s2); math.Abs(got/v-1) > 1e-6 {
		t.Errorf("shift variance %g, want %g", got, v)
	}
	if got := g.energyVariance(p, I, s2); math.Abs(got/e-1) > 1e-6 {
		t.Errorf("energy variance %g, want %g", got, e)
	}
}

// A five-stage birefringent filter (product of cos^2, FWHM 0.13 nm) is no Gaussian:
// recovered over true velocity 0.976, 0.982, 0.988 for w = 0.110, 0.133, 0.160 nm
// (derived).
func TestBirefringentFilterScalesVelocity(t *testing.T) {
	transmission := func(x, period float64) float64 {
		f := 1.0
		for range 5 {
			c := math.Cos(math.Pi * x / period)
			f *= c * c
			period *= 2
		}
		return f
	}
	// The period of the longest stage that gives the full width.
	lo, hi := 0.05, 0.5
	for range 60 {
		if m := (lo + hi) / 2; transmission(0.065, m) < 0.5 {
			lo = m
		} else {
			hi = m
		}
	}
	g := mustGaussian(t, tuningsAt(1, rest1, -0.12, 0, 0.12))
	for w, want := range map[float64]float64{0.110: 0.976, 0.133: 0.982, 0.160: 0.988} {
		shift := 1 / lightSpeed * rest1 // 1 km/s
		I := make([]float64, 3)
		for k, d := range []float64{-0.12, 0, 0.12} {
			for x := -1.0; x <= 1; x += 1e-3 {
				I[k] += transmission(x-d, lo) * math.Exp(-(x-shift)*(x-shift)/(w*w))
			}
		}
		if got := g.fit(I).v; math.Abs(got-want) > 2e-3 {
			t.Errorf("w = %g nm: %.4f, want %.3f", w, got, want)
		}
	}
}

func TestNoProfile(t *testing.T) {
	g := mustGaussian(t, tuningsAt(1, rest1, -0.12, 0, 0.12))
	nan, inf := math.NaN(), math.Inf(1)
	for _, I := range [][]float64{{0, 2, 1}, {1, -2, 1}, {1, 2, nan}, {1, inf, 1}, {1, 1, 1}, {2, 1, 2}, {1, 2, 3.9}} {
		if p := g.fit(I); p.ok {
			t.Errorf("fit(%v) = %+v", I, p)
		}
		if v, ok := g.shift(float32(I[0]), float32(I[1]), float32(I[2])); ok {
			t.Errorf("doppler(%v) = %g", I, v)
		}
	}
	if _, err := newGaussian(tuningsAt(1, rest1, -0.1, 0.1)); err == nil {
		t.Error("two tunings make a Gaussian")
	}
	if _, err := newGaussian(tuningsAt(1, rest1, 0.1, 0, -0.1)); err == nil {
		t.Error("descending tunings make a Gaussian")
	}
}

// The log's electrons, background and read noise give the variance of an intensity.
func TestPhotonNoise(t *testing.T) {
	e := obs.Exposure{Line: 1, Electrons: 50, Background: 20, ReadNoise: 40}
	n := newPhotonNoise([]obs.Exposure{e, e})
	rng := rand.New(rand.NewPCG(1, 2))
	const trials = 40000
	m2 := 0.0
	for range trials {
		// (30+20)*50 electrons, and 20*50 beside the line that are subtracted: Poisson
		// noise is Gaussian enough for a variance.
		el := 2500 + 50*rng.NormFloat64() + math.Sqrt(1000)*rng.NormFloat64() + 40*rng.NormFloat64()
		m2 += (el/50 - 50) * (el/50 - 50) / trials
	}
	s2 := make([]float64, 1)
	n.variances([]float64{30}, s2)
	if math.Abs(s2[0]/m2-1) > 3*math.Sqrt(2./trials) {
		t.Errorf("variance %g, simulated %g", s2[0], m2)
	}
	if newPhotonNoise([]obs.Exposure{e, {}}).known {
		t.Error("noise known without electrons")
	}
}

// B = 0.45846 G (v/100 km/s) sqrt(mu n/1e8), and for mu = 1.2 at n = 1e8 1.51 .. 3.52 G
// at 300 .. 700 km/s (derived, CODATA proton mass).
func TestFieldStrength(t *testing.T) {
	b, err := fieldStrength(100, 0, 1e8, 0, 1)
	if math.Abs(b-0.45846) > 5e-6 || err != 0 {
		t.Errorf("B = %.6f +- %g, want 0.45846", b, err)
	}
	for v, want := range map[float64]float64{300: 1.51, 400: 2.01, 500: 2.51, 700: 3.52} {
		if b, _ := fieldStrength(v, 0, 1e8, 0, 1.2); math.Abs(b-want) > 0.005 {
			t.Errorf("B(%g) = %.3f, want %.2f", v, b, want)
		}
	}
	if b, err := fieldStrength(400, 40, 1e8, 2e7, 1.2); math.Abs(err/b-math.Sqrt(0.1*0.1+0.1*0.1)) > 1e-12 {
		t.Errorf("relative error %g", err/b)
	}
}

// Through a five-stage filter width and energy come back from the table, the shift with
// the scale 0.976, 0.982, 0.988 for lines 0.110, 0.133, 0.160 nm wide (derived).
func TestBirefringentFilter(t *testing.T) {
	const rest, fwhm = 1074.7, 0.13
	var ts []obs.Tuning
	for k, d := range []float64{-0.12, 0, 0.12} {
		ts = append(ts, obs.Tuning{Line: 1, Index: k, Wavelength: rest + d, Offset: d, FilterFWHM: fwhm, Stages: 5})
	}
	g, err := newGaussian(ts)
	if err != nil {
		t.Fatal(err)
	}
	kms := lightSpeed / rest
	b := filter.NewBirefringent(5, fwhm*kms)
	for _, c := range [][2]float64{{0.110, 0.976}, {0.133, 0.982}, {0.160, 0.988}} {
		w := c[0] * kms
		const v = 0.1
		I := make([]float64, 3)
		for k, x := range g.x {
			I[k] = 7 * b.Line(x, v, w)
		}
		p := g.fit(I)
		if got := p.v / v; math.Abs(got-c[1]) > 0.002 {
			t.Errorf("width %g nm: velocity scale %.4f, want %.3f", c[0], got, c[1])
		}
		if got, ok := g.lineWidth(p.w); !ok || math.Abs(got/w-1) > 1e-3 {
			t.Errorf("width %g nm: %.5g km/s, want %.5g", c[0], got, w)
		}
		if got := p.peak * p.w * g.energyScale(p.w); math.Abs(got/7-1) > 1e-3 {
			t.Errorf("width %g nm: energy %.5g, want 7", c[0], got)
		}
	}
}
