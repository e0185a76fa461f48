package trial

import (
	"context"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"offplane/compare"
	"offplane/model"
	"offplane/scenarios"
	"offplane/synth/obs"
)

// drawn is a scenario of a few hundred pixels: every part of it that may be off is on or
// off by chance.
func drawn(t *testing.T, number uint64) *scenarios.Loaded {
	t.Helper()
	r := rand.New(rand.NewPCG(number, 12))
	between := func(lo, hi float64) float64 { return lo + (hi-lo)*r.Float64() }
	set := []string{
		"image.from=266 deg", "image.to=274 deg", "image.outer=1.2 Rsun", "image.pixel=14 arcsec", "camera.duration=25 min", "inversion.box=7", "inversion.track=9",
		fmt.Sprintf("seed=%d", number),
		fmt.Sprintf("corona.fields.0.dipole_sheet.strength=%.3g G", between(1, 10)),
		fmt.Sprintf("corona.density.streamer.factor=%.3g", between(0.3, 3)),
		fmt.Sprintf("corona.temperature.streamer=%.3g MK", between(1.2, 2.2)),
		fmt.Sprintf("corona.helium=%.3g", between(0, 0.2)),
		fmt.Sprintf("observer.latitude=%.3g deg", between(-7, 7)),
		fmt.Sprintf("waves.amplitude=%.3g km/s", between(0, 40)),
		fmt.Sprintf("waves.damping=%.3g", between(0, 5)),
		fmt.Sprintf("camera.exposure=%.3g s", between(0.01, 4)),
		fmt.Sprintf("inversion.helium=%.3g", between(0, 0.2)),
	}
	for _, s := range []string{
		fmt.Sprintf("corona.belt={tilt: %.3g deg, warp: %.3g deg}", between(0, 60), between(0, 20)),
		fmt.Sprintf("corona.mix={filling: %.3g, contrast: %.3g}", between(0.2, 0.9), between(1, 4)),
		fmt.Sprintf("corona.strands={size: %.3g Mm, spread: %.3g}", between(1, 20), between(0, 0.6)),
		fmt.Sprintf("corona.outflow={terminal: %.3g km/s}", between(1, 400)),
		"waves.inward=0", "waves.far_end=false", "camera.noise=false", "camera.sequential=false",
		fmt.Sprintf("camera.lost=%.3g", between(0, 0.2)),
		fmt.Sprintf("camera.flat_field=%.3g", between(0, 0.05)),
		fmt.Sprintf("camera.point_spread=%.3g arcsec", between(0, 20)),
		"inversion.estimators=[pair, lag, unsplit]", "inversion.adaptive=true",
	} {
		if r.IntN(3) == 0 {
			set = append(set, s)
		}
	}
	l, err := scenarios.Load("quick", set...)
	if err != nil {
		t.Fatalf("%s: %v", strings.Join(set, " --set "), err)
	}
	return l
}

// sane checks what must hold in any scenario: the identity to rounding, no infinity and no
// missing truth anywhere, no error below zero, no pixel without a field and without a
// reason, and a summary that can be written.
func sane(t *testing.T, l *scenarios.Loaded) {
	t.Helper()
	o, err := Run(context.Background(), l, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	finite := func(what string, ms obs.Maps) {
		for _, m := range ms {
			for p, v := range m.Data {
				if math.IsInf(float64(v), 0) || strings.HasSuffix(m.Name, "_ERR") && v < 0 {
					t.Fatalf("%s %s is %g at %d", what, m.Name, v, p)
				}
			}
		}
	}
	finite("true", o.Truth.Maps)
	finite("inferred", o.Inferred.Maps)
	finite("ratio", o.Verdict.Maps)
	b, flag := o.Inferred.Maps.Get("B").Data, o.Inferred.Maps.Get("FLAG").Ints
	id := compare.NewIdentity(o.Truth.Maps, o.Inferred.Maps, l.Scenario.Inversion.Mu, model.Mu(l.Scenario.Corona.Helium))
	for _, p := range o.Observation.Pixels {
		for _, name := range []string{"BTOT_SKY", "NE_SKY", "NE_KINK", "B_SKY", "SPEED_SKY"} {
			if v := o.Truth.Maps.Get(name).Data[p]; !(v > 0) {
				t.Fatalf("%s is %g at %d", name, v, p)
			}
		}
		switch {
		case !(b[p] > 0) && flag[p] == 0:
			t.Fatalf("pixel %d has neither field nor flag", p)
		case b[p] > 0 && !(math.Abs(id.At(int(p)).Residual()) < 1e-6):
			t.Fatalf("pixel %d: the identity leaves %g", p, id.At(int(p)).Residual())
		}
	}
	if err := o.Verdict.Summary.WriteJSON(io.Discard); err != nil {
		t.Fatal(err)
	}
}

// TestRandomScenarios: two of them, in the second waves are damped to nothing;
// TestRandomScenariosSoak plays more.
func TestRandomScenarios(t *testing.T) {
	for _, number := range []uint64{1, 65} {
		t.Run(fmt.Sprint(number), func(t *testing.T) { sane(t, drawn(t, number)) })
	}
}

// turned holds the truth of a scenario against that seen from behind: every ray runs the
// other way, and east is west. Waves differ from cell to cell, what weighs them does not.
func turned(t *testing.T, l *scenarios.Loaded) {
	t.Helper()
	see := func(set ...string) (*obs.Grid, obs.Maps) {
		v, err := l.With(set...)
		if err != nil {
			t.Fatal(err)
		}
		o, err := Observe(context.Background(), v, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		return &o.Truth.Grid, o.Truth.Maps
	}
	g, front := see()
	h, back := see(fmt.Sprintf("observer.latitude=%.17g deg", -float64(l.Scenario.Observer.Latitude)), "observer.longitude=180 deg", "image.from=86 deg", "image.to=94 deg")
	seen := 0
	for p := range g.Nx * g.Ny {
		west, north := g.Helioprojective(p%g.Nx, p/g.Nx)
		ix, iy := h.Nearest(-west, north)
		if ix < 0 || ix >= h.Nx || iy < 0 || iy >= h.Ny {
			t.Fatalf("pixel %d is not seen from behind", p)
		}
		q := iy*h.Nx + ix
		for i, m := range front {
			if m.Ints != nil {
				if m.Ints[p] != back[i].Ints[q] {
					t.Errorf("%s at %d: %d, from behind %d", m.Name, p, m.Ints[p], back[i].Ints[q])
				}
				continue
			}
			a, b := float64(m.Data[p]), float64(back[i].Data[q])
			if a != a && b != b {
				continue
			}
			off := math.Abs(a-b) / math.Abs(a)
			if m.Name == "ANGLE_SKY" { // mirrored
				off = math.Abs(math.Remainder(a+b, 180)) / 180
			}
			may := 1e-6
			if !strings.HasSuffix(m.Name, "_SKY") || m.Name == "NEAR_SKY" {
				may = float64(l.Scenario.Sight.Tail) // the samples lie differently, so the ends do
			}
			if strings.HasPrefix(m.Name, "DEPTH") { // the 90 % of a Gaussian move by 2.7 times the share at its ends; derived
				may *= 4
			}
			if seen++; !(off <= may) {
				t.Fatalf("%s at %d: %g, from behind %g", m.Name, p, a, b)
			}
		}
	}
	if seen < 1000 {
		t.Errorf("%d values", seen)
	}
}

// TestSeenFromBehind: TestSeenFromBehindSoak plays more.
func TestSeenFromBehind(t *testing.T) { turned(t, drawn(t, 1)) }
