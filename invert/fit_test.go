package invert

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/optimize"

	"offplane/synth/filter"
	"offplane/synth/obs"
)

var fiveTunings = []float64{-0.2, -0.1, 0, 0.1, 0.2}

func mustFitter(t *testing.T, stages int, offsets ...float64) *fitter {
	t.Helper()
	ts := tuningsAt(1, rest1, offsets...)
	for k := range ts {
		ts[k].FilterFWHM, ts[k].Stages = 0.13, stages
	}
	f, err := newFitter(mustGaussian(t, ts), ts)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func ones(n int) []float64 {
	w := make([]float64, n)
	for k := range w {
		w[k] = 1
	}
	return w
}

// A line on a background through either filter comes back exactly: shift, width, energy
// and background (derived; the filter's closed forms).
func TestFitIsExact(t *testing.T) {
	for _, stages := range []int{0, 5} {
		f := mustFitter(t, stages, fiveTunings...)
		fwhm := lightSpeed * 0.13 / rest1
		for _, c := range []struct{ v, w, background float64 }{{0, 35, 0}, {7, 28, 0.002}, {-20, 45, 0.01}, {3, 60, 0.03}} {
			I := make([]float64, len(f.x))
			for k, x := range f.x {
				if stages == 0 {
					I[k] = filter.Gaussian(x, c.v, c.w, filter.EFolding(fwhm)) + c.background
				} else {
					I[k] = filter.NewBirefringent(stages, fwhm).Line(x, c.v, c.w) + c.background
				}
			}
			r := f.fit(f.start(I), I, ones(len(I)))
			o := f.reading(r)
			if !o.ok || math.Abs(o.v-c.v) > 1e-6 || math.Abs(o.width-c.w) > 1e-5 || math.Abs(o.energy-1) > 1e-6 || math.Abs(r.shape[3]-c.background) > 1e-7 {
				t.Errorf("%d stages, %+v: %+v, %+v", stages, c, o, r.shape)
			}
		}
	}
}

// With noise the minimum is that of a general minimiser, and the errors are the scatter.
func TestFitWithNoise(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 5))
	for _, stages := range []int{0, 5} {
		f := mustFitter(t, stages, fiveTunings...)
		truth := shape{1, 4, 45, 0.1}
		I, weight := make([]float64, 5), make([]float64, 5)
		var d [4]float64
		const n, noise = 1500, 0.003
		var mean, scatter, claimed, energy, energy2, claimedEnergy float64
		for trial := range n {
			f.normal(&truth, make([]float64, 5), make([]float64, 5)) // sets the series of the filter
			for k, x := range f.x {
				I[k] = f.value(&truth, x, &d) + noise*rng.NormFloat64()
				weight[k] = 1 / (noise * noise)
			}
			r := f.fit(f.start(I), I, weight)
			o := f.reading(r)
			if !o.ok {
				t.Fatalf("%d stages: no fit", stages)
			}
			mean += o.v / n
			scatter += (o.v - 4) * (o.v - 4) / n
			claimed += o.shiftVar / n
			e := math.Log(o.energy)
			energy += e / n
			energy2 += e * e / n
			claimedEnergy += o.energyVar / n
			if trial >= 5 {
				continue
			}
			chi2 := func(p []float64) float64 {
				if p[2] <= 1 {
					return 1e9
				}
				c, _, _ := f.normal(&shape{p[0], p[1], p[2], p[3]}, I, weight)
				return c
			}
			best, err := optimize.Minimize(optimize.Problem{Func: chi2}, truth[:], &optimize.Settings{FuncEvaluations: 4000}, &optimize.NelderMead{})
			if err != nil {
				t.Fatal(err)
			}
			if got := chi2(r.shape[:]); got > best.F+1e-6 || math.Abs(best.X[1]-o.v) > 1e-2 {
				t.Errorf("%d stages: chi^2 %g at %v, simplex search %g at %v", stages, got, r.shape, best.F, best.X)
			}
		}
		energyVar := energy2 - energy*energy
		t.Logf("%d stages: scatter %.4f, error %.4f km/s; energy %.4f, %.4f", stages, math.Sqrt(scatter), math.Sqrt(claimed), math.Sqrt(energyVar), math.Sqrt(claimedEnergy))
		// A variance of 1500 trials is known to 3.7 %; four times that.
		if math.Abs(scatter/claimed-1) > 0.15 || math.Abs(mean-4) > 4*math.Sqrt(claimed/n) {
			t.Errorf("%d stages: mean %.4f, variance %.5f, claimed %.5f", stages, mean, scatter, claimed)
		}
		if math.Abs(energyVar/claimedEnergy-1) > 0.15 {
			t.Errorf("%d stages: variance of the energy %.3g, claimed %.3g", stages, energyVar, claimedEnergy)
		}
	}
}

func TestNoFit(t *testing.T) {
	f := mustFitter(t, 0, fiveTunings...)
	nan := math.NaN()
	for name, I := range map[string][]float64{
		"flat": {1, 1, 1, 1, 1}, "hollow": {3, 2, 1, 2, 3}, "NaN": {1, 2, nan, 2, 1},
	} {
		if r := f.fit(f.start(I), I, ones(5)); r.ok {
			t.Errorf("%s: %+v", name, r)
		}
	}
	ts := tuningsAt(1, rest1, -0.12, 0, 0.12)
	if _, err := newFitter(mustGaussian(t, ts), ts); err == nil || !strings.Contains(err.Error(), "line 1 has 3 tunings") {
		t.Errorf("three tunings: %v", err)
	}
}

// A background under the line makes the analytic Gaussian wrong in width and density and
// leaves the fit right, with a dead tuning in some frames and one frame lost.
func TestBackground(t *testing.T) {
	q := defaultPatch()
	q.nx, q.ny, q.frames, q.v = 24, 24, 120, 300
	o := q.observe()
	dop := o.Frames[0]
	e1, e2 := powerLaw{1.4, 1.8}.Emissivities(q.density, 0, 0)
	o.Tunings = nil
	for line, rest := range [2]float64{rest1, rest2} {
		o.Mean[line] = nil
		for k, d := range fiveTunings {
			o.Tunings = append(o.Tunings, obs.Tuning{Line: line + 1, Index: k, Wavelength: rest + d, Offset: d, FilterFWHM: 0.13})
			m := make([]float32, len(o.Pixels))
			for p := range m {
				m[p] = float32(10*[2]float64{e1, e2}[line]*through(rest, d, 0) + 0.5)
			}
			o.Mean[line] = append(o.Mean[line], m)
		}
	}
	o.Frames[0] = obs.NewCube(len(o.Pixels), 5, q.frames)
	for p := range o.Pixels {
		for i, v := range dop.Series(p, 0) {
			for k, d := range fiveTunings {
				o.Frames[0].Series(p, k)[i] = float32(10*e1*through(rest1, d, float64(v)) + 0.5)
			}
		}
		o.Frames[0].Series(p, 1)[30] = float32(math.NaN())
		o.Frames[0].Series(p, 1)[50], o.Frames[0].Series(p, 2)[50] = float32(math.NaN()), float32(math.NaN())
	}
	opt := Default()
	opt.Box, opt.Track, opt.Estimators = 11, 15, []string{Pair}
	density := map[bool]float64{}
	for _, background := range []bool{false, true} {
		opt.Background = background
		r, err := Invert(context.Background(), o, powerLaw{1.4, 1.8}, opt, 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		checkFlags(t, r)
		density[background] = median(values(r.Maps.Get("NE"))) / q.density
		if !background {
			continue
		}
		if w := median(values(r.Maps.Get("WIDTH"))); math.Abs(w/lineWidth-1) > 1e-4 {
			t.Errorf("width %g km/s, want %g", w, lineWidth)
		}
		if v := median(values(r.Maps.Get("SPEED"))) / q.v; math.Abs(v-1) > 0.02 {
			t.Errorf("speed ratio %.4f", v)
		}
		if f := flagged(r.Maps.Get("FLAG"), FlagRepaired); f != 1 {
			t.Errorf("repaired: %g of the pixels", f)
		}
	}
	if math.Abs(density[true]-1) > 1e-3 || math.Abs(density[false]-1) < 0.02 {
		t.Errorf("density ratio with and without a background in the fit: %v", density)
	}
}

func BenchmarkFit(b *testing.B) {
	ts := tuningsAt(1, rest1, fiveTunings...)
	g, err := newGaussian(ts)
	if err != nil {
		b.Fatal(err)
	}
	f, err := newFitter(g, ts)
	if err != nil {
		b.Fatal(err)
	}
	I := make([]float64, 5)
	for k, x := range f.x {
		I[k] = math.Exp(-(x-3)*(x-3)/1700) + 0.1
	}
	weight, start := ones(5), f.start(I)
	for b.Loop() {
		f.fit(start, I, weight)
	}
}
