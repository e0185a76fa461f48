package main

import (
	"context"
	"math"
	"testing"

	"offplane/compare/trial"
	"offplane/model"
	"offplane/scenarios"
	"offplane/synth/camera"
	"offplane/synth/obs"
)

// TestDopplerNoise: for three tunings the bound is the error that the analytic solution
// v = (d/2)(ln I3 - ln I1)/(2 ln I2 - ln I1 - ln I3) (Tian et al. 2013, Sol. Phys. 288,
// 637, from memory) hands on at v = 0: w^2/(4d) sqrt((s1/I1)^2 + (s3/I3)^2), derived.
func TestDopplerNoise(t *testing.T) {
	const d, w = 0.12, 0.17
	x := []float64{-d, 0, d}
	i := []float64{math.Exp(-d * d / (w * w)), 1, math.Exp(-d * d / (w * w))}
	s := []float64{0.011, 0.02, 0.013}
	want := w * w / (4 * d) * math.Hypot(s[0]/i[0], s[2]/i[2])
	if got := dopplerNoise(x, i, s, w); math.Abs(got/want-1) > 1e-12 {
		t.Errorf("%g, want %g", got, want)
	}
	// A fourth value can only help.
	if got := dopplerNoise(append(x, 0.2), append(i, math.Exp(-0.04/(w*w))), append(s, 0.02), w); got >= want {
		t.Errorf("four tunings: %g, three: %g", got, want)
	}
}

// TestDose: in a spherical corona the light that is predicted is the light that the
// synthesis gives, and so are the counts.
func TestDose(t *testing.T) {
	l, err := scenarios.Load("sphere", "image.from=269.5deg", "image.to=270.5deg", "camera.duration=10min", "camera.second_line=1", "waves.amplitude=0 km/s")
	if err != nil {
		t.Fatal(err)
	}
	s := &l.Scenario
	m, _, err := trial.Model(s.Line, s.Corona.Helium)
	if err != nil {
		t.Fatal(err)
	}
	law, err := model.NewLaw(s.Corona.Density.Streamer, s.Corona.Helium)
	if err != nil {
		t.Fatal(err)
	}
	o, err := trial.Observe(context.Background(), l, trial.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	g := &o.Observation.Grid
	cam := camera.New(s.Camera, s.Seed, g.Pixel*obs.Arcsec, m.DiscCentre(), m.RestWavelengths())
	for i, q := range o.Observation.Pixels {
		r, _ := g.Polar(int(q)%g.Nx, int(q)/g.Nx)
		d := doseAt(s, m, cam, law, r)
		for k, n := range d.Photons {
			// The profile is given one width for the whole ray; the true one widens with
			// height: measured 1 % in the middle of the line.
			if got := float64(o.Observation.Mean[0][k][i]) * cam.Electrons[0]; math.Abs(n/got-1) > 0.03 {
				t.Fatalf("at %.3f solar radii, tuning %d: %g photons predicted, %g synthesised", r, k, n, got)
			}
		}
	}
	p, err := predict(l, 0)
	if err != nil {
		t.Fatal(err)
	}
	if p.Pixels != len(o.Observation.Pixels) || p.Frames != len(o.Observation.LineExposures(1)) || p.Second != len(o.Observation.LineExposures(2)) || p.Image != [2]int{g.Nx, g.Ny} {
		t.Errorf("%+v", p)
	}
}
