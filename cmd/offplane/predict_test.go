package main

import (
	"context"
	"math"
	"testing"

	"offplane/compare/trial"
	"offplane/scenarios"
)

// TestPredictedCounts: pixels, frames and image are those of the run, and the electrons
// predicted for the middle of the field are those of the nearest pixel.
func TestPredictedCounts(t *testing.T) {
	l, err := scenarios.Load("sphere", "image.from=269.5deg", "image.to=270.5deg", "camera.duration=11min", "camera.second_line=1", "camera.noise=true", "camera.aperture=1000 cm", "waves.amplitude=0 km/s")
	if err != nil {
		t.Fatal(err)
	}
	o, err := trial.Observe(context.Background(), l, trial.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	p, err := predict(context.Background(), l, 0)
	if err != nil {
		t.Fatal(err)
	}
	g := &o.Observation.Grid
	if p.Pixels != len(o.Observation.Pixels) || p.Frames != len(o.Observation.LineExposures(1)) || p.Second != len(o.Observation.LineExposures(2)) || p.Image != [2]int{g.Nx, g.Ny} {
		t.Errorf("%+v", p)
	}
	e := o.Observation.LineExposures(1)[0].Electrons
	for _, h := range p.Heights {
		if h.Height == 1.35 { // beside the rim
			continue
		}
		best, at := math.Inf(1), 0
		for i, q := range o.Observation.Pixels {
			if r, _ := g.Polar(int(q)%g.Nx, int(q)/g.Nx); math.Abs(r-h.Height) < best {
				best, at = math.Abs(r-h.Height), i
			}
		}
		for k, n := range h.Lines[0].Electrons {
			// The emission falls as about r^-12: 1 % of 1.2 solar radii is 12 %.
			if got := float64(o.Observation.Mean[0][k][at]) * e; math.Abs(n/got-1) > 12*best/h.Height+1e-3 {
				t.Errorf("at %.2f solar radii, tuning %d: %g electrons predicted, %g synthesised", h.Height, k, n, got)
			}
		}
		if d := h.Lines[0]; !(d.Noise > 0) || !(d.InBand < d.Noise) || d.Saturated {
			t.Errorf("at %.2f: %+v", h.Height, d)
		}
	}
}
