package invert

import (
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"offplane/synth/obs"
)

func exposuresAt(times ...float64) (es []obs.Exposure) {
	for i, t := range times {
		es = append(es, obs.Exposure{Line: 1, Frame: i, Time: t})
	}
	return es
}

func evenly(n int, dt float64) (ts []float64) {
	for i := range n {
		ts = append(ts, float64(i)*dt)
	}
	return ts
}

func TestTiming(t *testing.T) {
	w, err := newTiming(exposuresAt(evenly(50, 30)...))
	if err != nil || w.cadence != 30 || w.frames != 50 || w.from != nil {
		t.Errorf("%+v, %v", w, err)
	}
	// Five frames are missing, one is late by half a cadence.
	ts := evenly(50, 30)
	ts[40] += 15
	ts = append(ts[:20:20], ts[25:]...)
	w, err = newTiming(exposuresAt(ts...))
	if err != nil || w.cadence != 30 || w.frames != 50 {
		t.Fatalf("%+v, %v", w, err)
	}
	for i, b := range w.from {
		want := blend{a: i}
		switch {
		case i >= 20 && i < 25:
			want = blend{a: -1}
		case i == 40:
			want = blend{a: 34, u: 2. / 3} // 30 s after frame 34, which the next follows after 45 s
		case i >= 25:
			want.a = i - 5
		}
		if b.a != want.a || math.Abs(b.u-want.u) > 1e-9 {
			t.Errorf("time %d: %+v, want %+v", i, b, want)
		}
	}
	for want, ts := range map[string][]float64{
		"1 exposures":          {0},
		"frame 2 of line 1 is": {0, 30, 30, 60},
		"45 of 85 times of line 1 have no frame within the cadence of 30 s (next frame 1380 s after frame 19)": append(evenly(20, 30), func() (u []float64) {
			for _, x := range evenly(20, 30) {
				u = append(u, x+1950)
			}
			return u
		}()...),
	} {
		if _, err := newTiming(exposuresAt(ts...)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("want %q: %v", want, err)
		}
	}
}

// Frames that are missing, or late, do not move the speed by more than 1 % (derived:
// what happens to all pixels alike cancels in lags).
func TestUnevenFrames(t *testing.T) {
	q := defaultPatch()
	q.nx, q.ny, q.frames = 26, 26, 240
	opt := Default()
	opt.Estimators = []string{Unsplit}
	want := median(values(q.invert(t, opt).Maps.Get("SPEED")))
	o := q.observe()
	rng := rand.New(rand.NewPCG(9, 9))
	cube := obs.NewCube(len(o.Pixels), 1, 0)
	var es []obs.Exposure
	var kept []int
	for i := range q.frames {
		if i != 0 && i != q.frames-1 && rng.Float64() < 0.1 || i/10 == 11 {
			continue
		}
		kept = append(kept, i)
		es = append(es, obs.Exposure{Line: 1, Frame: len(es), Time: 30 * float64(i)})
	}
	cube.Frames = len(kept)
	for p := range o.Pixels {
		s := o.Frames[0].Series(p, 0)
		for _, i := range kept {
			cube.Data = append(cube.Data, s[i])
		}
	}
	o.Frames[0], o.Exposures = cube, append(es, o.LineExposures(2)...)
	r, err := Invert(context.Background(), o, powerLaw{1.4, 1.8}, opt, 0, nil)
	if err != nil {
		t.Fatal(err)
	}
	checkFlags(t, r)
	if r.Cadence != 30 || r.Series.Frames != q.frames {
		t.Errorf("series of %d values every %g s", r.Series.Frames, r.Cadence)
	}
	if f := flagged(r.Maps.Get("FLAG"), FlagRepaired); f != 1 {
		t.Errorf("repaired: %g of the pixels", f)
	}
	if got := median(values(r.Maps.Get("SPEED"))); math.Abs(got/want-1) > 0.01 {
		t.Errorf("speed %.1f km/s with %d of %d frames, %.1f with all", got, len(kept), q.frames, want)
	}
}
