package synth

import (
	"context"
	"math"
	"slices"
	"testing"

	"offplane/synth/camera"
	"offplane/synth/kernel"
	"offplane/synth/obs"
)

// still is one plane without waves: every frame is a realisation of the same light.
var still = []string{"waves.amplitude=0 km/s", "camera.noise=false", "camera.point_spread=0 arcsec", "corona.nonthermal=0 km/s", "image.from=269 deg", "image.to=271 deg"}

func observe(t *testing.T, c *Scene) *obs.Observation {
	t.Helper()
	o, _, err := c.Observe(context.Background(), 0, nil)
	if err != nil {
		t.Fatal(err)
	}
	return o
}

func plane(t *testing.T, set ...string) *Scene {
	s, l := load(t, "plane-wave", append(slices.Clone(still), set...)...)
	return scene(t, s, l)
}

// light returns the radiance of a ray of the first group through every tuning of a line.
func light(l *lamp, ray, line int) [][]float32 {
	var out [][]float32
	for k, a := range l.groups[0][line] {
		rays := make([][]float32, ray+1)
		for i := range rays {
			rays[i] = make([]float32, len(a)/kernel.Rays)
		}
		l.take(rays, 0, line, k)
		out = append(out, rays[ray])
	}
	return out
}

// frame returns the intensities of one frame of the first line.
func frame(o *obs.Observation, p, f int) [3]float64 {
	var i [3]float64
	for k := range i {
		i[k] = float64(o.Frames[0].Series(p, k)[f])
	}
	return i
}

// With every stage off the frames are the radiance, exactly.
func TestEveryStageOffGivesTheRadiance(t *testing.T) {
	s, l := load(t, "quick", "camera.noise=false", "camera.point_spread=0 arcsec", "image.from=270 deg", "image.to=270.5 deg", "camera.duration=20 min", "image.pixel=8 arcsec")
	c := scene(t, s, l)
	o := observe(t, c)
	lamp := c.newLamp(camera.NewSchedule(s.Camera, Frames(s), s.Seed))
	for i, p := range o.Pixels {
		y, z := c.Grid.Sky(int(p)%c.Grid.Nx, int(p)/c.Grid.Nx)
		ray, err := c.ray(y, z, nil)
		if err != nil {
			t.Fatal(err)
		}
		lamp.shine([][]sample{ray})
		for line := range 2 {
			for k := range 3 {
				if !slices.Equal(light(lamp, 0, line)[k], o.Frames[line].Series(i, k)) {
					t.Fatalf("pixel %d, line %d, tuning %d differs", p, line+1, k)
				}
			}
		}
	}
}

// Doppler noise of some thousand realisations against sigma_v = w^2/(4 d)
// sqrt((s1/I1)^2 + (s3/I3)^2) (first-order propagation through the three-point formula
// at rest), within 5 % for a signal-to-noise ratio of the wings above 30; s^2 is the
// line's electrons and twice the background's, and the reads.
func TestDopplerNoise(t *testing.T) {
	for _, set := range [][]string{
		{"camera.noise=true"},
		{"camera.noise=true", "camera.stages=5", "camera.digit=100", "camera.full_well=1e9", "camera.k_corona=1"},
	} {
		c := plane(t, append(set, "camera.duration=1 h", "camera.aperture=500 cm")...)
		o := observe(t, c)
		d := c.tunings[0][2]
		got, want, n := 0.0, 0.0, 0
		for p := range o.Pixels {
			spot := (&development{c: c, cam: c.camera()}).spot(0, o.Pixels[p], 0)
			e := o.Exposures[0].Electrons
			mean := [3]float64{}
			for k := range mean {
				mean[k] = float64(o.Mean[0][k][p])
			}
			var rel [3]float64
			for k, i := range mean {
				rel[k] = math.Sqrt(e*i+2*e*spot.Background+math.Pow(o.Exposures[0].ReadNoise, 2)) / (e * i)
			}
			if 1/max(rel[0], rel[2]) < 30 {
				continue
			}
			w2 := d * d / (math.Log(mean[1]) - (math.Log(mean[0])+math.Log(mean[2]))/2)
			want += w2 * w2 / (16 * d * d) * (rel[0]*rel[0] + rel[2]*rel[2]) * float64(o.Frames[0].Frames)
			for f := range o.Frames[0].Frames {
				i := frame(o, p, f)
				v := doppler(i[0], i[1], i[2], d)
				got += v * v
				n++
			}
		}
		if n < 5000 {
			t.Fatalf("only %d realisations", n)
		}
		if r := math.Sqrt(got / want); math.Abs(r-1) > 0.05 {
			t.Errorf("%v: Doppler noise %.3f of the propagated", set, r)
		} else {
			t.Logf("%v: %d realisations, Doppler noise %.4f of the propagated", set, n, r)
		}
	}
}

// The budget's figures are those of the observation.
func TestBudget(t *testing.T) {
	c := plane(t, "camera.noise=true", "camera.duration=2 h", "camera.exposure=1 s", "camera.k_corona=1")
	b, err := c.Budget([]float64{1.06, 1.2})
	if err != nil {
		t.Fatal(err)
	}
	o := observe(t, c)
	d := c.tunings[0][2]
	for _, row := range b.Rows {
		l := row.Lines[0]
		var m [3]float64
		v2, n := 0.0, 0.0
		for p, q := range o.Pixels {
			if r, _ := c.Grid.Polar(int(q)%c.Grid.Nx, int(q)/c.Grid.Nx); math.Abs(r-row.Height) > 0.01 {
				continue
			}
			for f := range o.Frames[0].Frames {
				i := frame(o, p, f)
				for k := range m {
					m[k] += i[k]
				}
				v := doppler(i[0], i[1], i[2], d)
				v2 += v * v
				n++
			}
		}
		for k := range m {
			if e := m[k] / n * o.Exposures[0].Electrons; math.Abs(l.Electrons[k]/e-1) > 0.02 {
				t.Errorf("%g, tuning %d: %.4g electrons, observed %.4g", row.Height, k, l.Electrons[k], e)
			}
		}
		if got := math.Sqrt(v2 / n); math.Abs(l.Noise/got-1) > 0.05 {
			t.Errorf("%g: Doppler noise %.3g km/s, observed %.3g", row.Height, l.Noise, got)
		}
		// White noise in the band: 2 dt B of the variance, B = 1.88 mHz for a 1/e half-width
		// of 1.5 mHz (derived).
		if got := l.InBand / l.Noise; math.Abs(got-math.Sqrt(2*30*1.88e-3)) > 1e-3 {
			t.Errorf("in band %.4f of the noise", got)
		}
		if row.Open != 1 || row.PA != 270 || l.Saturated || row.Samples != 1 {
			t.Errorf("%+v", row)
		}
	}
	if b.Bytes != 4*3*int64(c.Grid.Nx*c.Grid.Ny)*int64(240+12) || b.Pixels != len(o.Pixels) {
		t.Errorf("%d bytes, %d pixels", b.Bytes, b.Pixels)
	}
	full := plane(t, "camera.full_well=100")
	if b, err = full.Budget([]float64{1.06}); err != nil || !b.Rows[0].Lines[0].Saturated {
		t.Errorf("not saturated: %v", err)
	}
}

// A five-stage filter of 0.13 nm gives the three-point velocity the scale 0.976, 0.982,
// 0.988 for lines whose own 1/e half-widths are 0.110, 0.133, 0.160 nm, as v goes to 0
// (derived): the lamp with its vector code.
func TestFiveStageFilterScalesTheVelocity(t *testing.T) {
	c := plane(t, "camera.stages=5")
	lamp := c.newLamp(camera.NewSchedule(c.s.Camera, Frames(c.s), 1))
	toKms := lightSpeed / c.light.Rest[0]
	for _, q := range [][2]float64{{0.110, 0.976}, {0.133, 0.982}, {0.160, 0.988}} {
		s := sample{dx: 1, j: [2]float64{5, 2}, width: q[0] * toKms}
		const v = 0.5
		moving := make([]float32, Frames(c.s)*kernel.Lanes)
		for i := range moving {
			moving[i] = v
		}
		dark := lamp.dark(1)[0]
		for line := range 2 {
			lamp.kindle(line, &batch{3: &s})
		}
		lamp.expose(dark, 0, moving)
		a := light(lamp, 3, 0)
		for _, f := range []int{0, Frames(c.s) - 1} {
			got := doppler(float64(a[0][f]), float64(a[1][f]), float64(a[2][f]), c.tunings[0][2]) / v
			if math.Abs(got-q[1]) > 0.002 {
				t.Errorf("%g nm: velocity scale %.4f, want %.3f", q[0], got, q[1])
			}
		}
	}
}

// Steady light that grows while the tunings follow each other looks like the velocity
// w^2/(4 d) [ln I(t3) - ln I(t1)] (derived from the three-point formula).
func TestBrighteningLooksLikeAVelocity(t *testing.T) {
	for _, order := range []string{"[0, 1, 2]", "[2, 0, 1]"} {
		c := plane(t, "camera.sequential=true", "camera.tuning_time=9 s", "camera.brightening=3", "camera.order="+order, "image.to=269.2 deg")
		o := observe(t, c)
		d := c.tunings[0][2]
		between := 18.0
		if order == "[2, 0, 1]" { // the red wing comes first, the blue one second
			between = -9
		}
		for p := range o.Pixels {
			q := frame(o, p, 0)
			got := doppler(q[0], q[1], q[2], d)
			// The profile's width by the formula, without the brightening.
			w2 := math.Pow(math.Hypot(sampled(c, 0, 1, 1.1, 0).width, c.filter), 2)
			if want := w2 / (4 * d) * 3 * between / 3600; math.Abs(got/want-1) > 0.02 {
				t.Fatalf("%s: %.5g km/s, want %.5g", order, got, want)
			}
		}
		for k, u := range o.LineTunings(1) {
			if want := 9 * float64(slices.Index(map[string][]int{"[0, 1, 2]": {0, 1, 2}, "[2, 0, 1]": {2, 0, 1}}[order], k)); u.Delay != want {
				t.Errorf("%s: tuning %d has the delay %g", order, k, u.Delay)
			}
		}
	}
}

// A wave of frequency f is seen with cos(pi f (t3 - t1)) of its amplitude, halfway
// between the wings (derived for small velocities).
func TestSequentialTuningReducesAWave(t *testing.T) {
	set := []string{"image.from=269.9 deg", "image.to=270.1 deg", "camera.noise=false", "camera.point_spread=0 arcsec", "camera.cadence=60 s", "camera.sequential=true",
		"waves.spectrum.low=3.4 mHz", "waves.spectrum.high=3.6 mHz", "camera.duration=6 h"}
	s, l := load(t, "plane-wave", set...)
	c := scene(t, s, l)
	q := sampled(c, 0, 1e10, 1.1, 0.01)
	d := c.tunings[0][2]
	rms := func(delay ...float64) float64 {
		lamp := c.newLamp(&camera.Schedule{Delay: delay})
		lamp.shine([][]sample{{q}})
		a := light(lamp, 0, 0)
		sum := 0.0
		for f := range a[0] {
			v := doppler(float64(a[0][f]), float64(a[1][f]), float64(a[2][f]), d)
			sum += v * v
		}
		return math.Sqrt(sum / float64(len(a[0])))
	}
	got := rms(0, 20, 40) / rms(20, 20, 20)
	want := math.Cos(math.Pi * 3.5e-3 * 40)
	if math.Abs(got/want-1) > 0.02 {
		t.Errorf("amplitude %.4f, want %.4f", got, want)
	} else {
		t.Logf("amplitude %.4f, want %.4f", got, want)
	}
	if s := camera.NewSchedule(s.Camera, 10, 1); !slices.Equal(s.Delay, []float64{0, 20, 40}) {
		t.Errorf("delays %v", s.Delay)
	}
}

// The second line sees the waves at its own times: interleaved, those of the lead after
// the first line.
func TestSecondLineHasItsOwnTime(t *testing.T) {
	s, l := load(t, "plane-wave", "camera.sequential=true", "camera.tuning_time=4 s", "camera.exposure=1 s", "camera.switching=interleaved", "camera.second_line=20", "camera.duration=1 h")
	c := scene(t, s, l)
	q := sampled(c, 0, 1e10, 1.1, 0.01)
	plan := camera.NewSchedule(s.Camera, Frames(s), 1)
	lamp := c.newLamp(plan)
	lamp.shine([][]sample{{q}})
	var ts []train
	wf := c.filter * l.Rest[0] / l.Rest[1]
	w := math.Hypot(q.width, wf)
	for i, slot := range plan.Second {
		for k, d := range c.tunings[1] {
			v := 0.0
			ts = c.trains(&q.point, ts)
			for _, tr := range ts {
				for _, site := range c.Driver.Footpoint(tr.colatitude, tr.azimuth) {
					for pol, a := range q.los {
						v += a * tr.factor * site.Weight * c.Driver.Exact(site.ID, pol, tr.dir, float64(slot)*30+12+4*float64(k), tr.tau)
					}
				}
			}
			want := q.j[1] * q.dx * wf / w * math.Exp(-(d-v)*(d-v)/(w*w))
			if got := float64(light(lamp, 0, 1)[k][i]); math.Abs(got/want-1) > 3e-4 {
				t.Errorf("frame %d, tuning %d: %g, want %g", i, k, got, want)
			}
		}
	}
}

// Lost frames, gaps, saturated and occulted pixels never count: NaN, or not in the
// field; the means leave them out.
func TestWhatIsBadIsMarked(t *testing.T) {
	c := plane(t, "camera.lost=0.2", "camera.gaps=[{from: 10 min, length: 5 min}]", "camera.duration=1 h")
	o := observe(t, c)
	bad := 0
	for f := range o.Frames[0].Frames {
		i := frame(o, 3, f)
		if math.IsNaN(i[0]) {
			bad++
		} else if f >= 20 && f < 30 {
			t.Errorf("frame %d in the gap has values", f)
		} else if math.Abs(float64(o.Mean[0][0][3])/i[0]-1) > 1e-6 {
			t.Errorf("mean %v of frames of %v", o.Mean[0][0][3], i[0])
		}
		for p := range o.Pixels {
			if j := frame(o, p, f); math.IsNaN(j[0]) != math.IsNaN(i[0]) || math.IsNaN(j[2]) != math.IsNaN(i[0]) {
				t.Fatal("a lost frame is not lost everywhere")
			}
		}
	}
	if bad < 20 || bad > 50 {
		t.Errorf("%d of 120 frames are bad", bad)
	}

	// Blocks: the first line gives way.
	c = plane(t, "camera.switching=blocks", "camera.duration=1 h", "image.to=269.2 deg")
	o = observe(t, c)
	if x := frame(o, 0, 60); !math.IsNaN(x[1]) || o.LineExposures(2)[6].Time != 1800 {
		t.Errorf("block: %v, second line at %g s", x, o.LineExposures(2)[6].Time)
	}

	// Occulter and field stop.
	whole := plane(t)
	c = plane(t, "camera.occulter={radius: 1.1 Rsun, width: 20 arcsec}", "camera.field_stop=1.3 Rsun")
	o = observe(t, c)
	n := 0
	for _, p := range Field(&whole.Grid, whole.s) {
		r, _ := whole.Grid.Polar(int(p)%whole.Grid.Nx, int(p)/whole.Grid.Nx)
		if in := r < 1.3 && r > 1.1; slices.Contains(o.Pixels, p) != in && math.Abs(r-1.1) > 0.011 {
			t.Errorf("pixel at %.3f", r)
		}
		n++
	}
	if len(o.Pixels) >= n {
		t.Error("no pixel is occulted")
	}

	// Saturation: below some height every frame is full.
	bright := []string{"camera.noise=true", "camera.background=0.1 ppm", "camera.aperture=500 cm"}
	b, err := plane(t, bright...).Budget([]float64{1.1})
	if err != nil {
		t.Fatal(err)
	}
	l := b.Rows[0].Lines[0]
	s, light := load(t, "plane-wave", slices.Concat(still, bright)...)
	s.Camera.FullWell = (l.Electrons[1] + l.Continuum) / float64(s.Camera.Coadds)
	o = observe(t, scene(t, s, light))
	least, partly := math.Inf(1), 0
	for p, q := range o.Pixels {
		r, _ := o.Grid.Polar(int(q)%o.Grid.Nx, int(q)/o.Grid.Nx)
		least = min(least, r)
		for f := range o.Frames[0].Frames {
			if i := frame(o, p, f); math.IsNaN(i[1]) {
				partly++
				if math.Abs(r-1.1) > 0.02 {
					t.Fatalf("saturated at %.3f", r)
				}
			}
		}
	}
	if math.Abs(least-1.1) > 0.01 || partly == 0 {
		t.Errorf("pixels from %.3f on, %d frames saturated", least, partly)
	}
}

// everything switches on every stage.
var everything = append(slices.Clone(small), "camera.like=20cm-4.35arcsec", "camera.point_spread=1 arcsec", "camera.switching=interleaved", "camera.dead_time=0.1 s",
	"camera.pointing={jitter: 2 arcsec, drift_x: 20 arcsec, drift_y: -5 arcsec}", "camera.scatter.share=0.05", "camera.brightening=0.1",
	"camera.occulter={radius: 1.06 Rsun, width: 20 arcsec}", "camera.field_stop=1.32 Rsun", "camera.lost=0.05", "camera.gaps=[{from: 5 min, length: 1 min}]")

// With every stage on, workers, tiles and strips change no bit.
func TestCameraDoesNotDependOnWorkersOrTiles(t *testing.T) {
	s, l := load(t, "quick", everything...)
	k := scene(t, s, l)
	var want [32]byte
	for i, c := range []struct{ workers, tile, rows int }{{1, 16, 32}, {3, 7, 2}} {
		o, tr, err := k.observe(context.Background(), c.workers, c.tile, c.rows, nil)
		if err != nil {
			t.Fatal(err)
		}
		if got := fingerprint(o, tr); i == 0 {
			want = got
		} else if got != want {
			t.Errorf("%d workers, tiles of %d, strips of %d rows: other bits", c.workers, c.tile, c.rows)
		}
		for _, m := range o.Mean[0] {
			for _, x := range m {
				if !(x > 0) {
					t.Fatalf("mean of %v", x)
				}
			}
		}
	}
	if c := k.s.Camera; c.Scatter == nil || c.Stages != 5 || !c.Sequential || c.Seeing == 0 || c.Digit == 0 {
		t.Errorf("not everything is on: %+v", c)
	}
}

// Spread, scattered and moved light of a corona is as much as went in, but for what
// leaves and enters at the edge of the field.
func TestLightIsConserved(t *testing.T) {
	set := []string{"camera.noise=false", "camera.point_spread=0 arcsec", "image.from=250 deg", "image.to=290 deg", "camera.duration=11 min", "image.pixel=12 arcsec"}
	total := func(more ...string) float64 {
		o := observe(t, plane(t, append(slices.Clone(set), more...)...))
		sum := 0.0
		for _, x := range o.Mean[0][1] {
			sum += float64(x)
		}
		return sum
	}
	bare := total()
	for _, c := range []struct {
		set []string
		low float64
	}{
		{[]string{"camera.point_spread=15 arcsec"}, 0.99}, // the bright inner edge brings light in
		{[]string{"camera.seeing=10 arcsec", "camera.diffraction=true"}, 0.99},
		{[]string{"camera.pointing={jitter: 6 arcsec}"}, 0.99},
		{[]string{"camera.scatter={share: 0.1, core: 24 arcsec, exponent: 6}"}, 0.97},
	} {
		if r := total(c.set...) / bare; r < c.low || r > 1.03 {
			t.Errorf("%v: %.4f of the light", c.set, r)
		} else {
			t.Logf("%v: %.4f of the light", c.set, r)
		}
	}
}
