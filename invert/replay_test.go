package invert

import (
	"context"
	"math"
	"testing"

	"offplane/synth/obs"
	"offplane/synth/random"
)

// What an inversion left of the Doppler shift is enough to find the way to its values
// again, from the pixels around alone.
func TestDiagnoseSeries(t *testing.T) {
	q := defaultPatch()
	q.nx, q.ny, q.frames, q.inward, q.noise, q.electrons = 60, 58, 180, 0.2, 0.05, 1000
	o := q.observe()
	opt := Default()
	opt.Box, opt.Track, opt.Estimators = 9, 15, Estimators()
	r, err := Invert(context.Background(), o, powerLaw{1.4, 1.8}, opt, 0, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, pixel := range []int{29*q.nx + 30, 4*q.nx + 5, 40*q.nx + 3} {
		x, y, reach := pixel%q.nx, pixel/q.nx, opt.Reach()
		var near []int32
		var rows [][]float32
		for p, i := range o.Pixels {
			dx, dy := int(i)%q.nx-x, int(i)/q.nx-y
			if max(dx, -dx) <= reach && max(dy, -dy) <= reach {
				near, rows = append(near, i), append(rows, r.Series.Series(p, 0))
			}
		}
		if len(near) == len(o.Pixels) {
			t.Fatal("the whole field is near")
		}
		cube := obs.NewCube(len(near), 1, r.Series.Frames)
		for p, s := range rows {
			copy(cube.Series(p, 0), s)
		}
		d, err := DiagnoseSeries(&o.Grid, near, cube, r.Cadence, opt, pixel)
		if err != nil {
			t.Fatal(err)
		}
		const frames = FlagNoRatio | FlagBelowNoise // tell of what is not in the series
		if got, want := d.Flag&^frames, r.Maps.Get("FLAG").Ints[pixel]&^frames; got != want {
			t.Errorf("pixel %d: flag %b, the inversion has %b", pixel, got, want)
		}
		for _, name := range []string{"ANGLE", "COHERENCE", "ISLAND", "SPEED", "SPEED_ERR", "SPEED_UNSPLIT", "SPEED_PAIR", "TRACK"} {
			got, want := float64(d.Maps.Get(name).Data[pixel]), float64(r.Maps.Get(name).Data[pixel])
			if math.Abs(got-want) > 1e-4*math.Abs(want) || math.IsNaN(got) != math.IsNaN(want) {
				t.Errorf("pixel %d: %s %g, the inversion has %g", pixel, name, got, want)
			}
		}
	}
}

// plane returns what the estimators make of a plane wave over the speed it has [km/s], on
// a track of n points, step [km] apart.
func plane(t *testing.T, opt Options, n int, step, v, inward float64) []float64 {
	t.Helper()
	q := PlaneWave{Step: step, Centre: n / 2, Outward: true, Inward: inward,
		Power: func(f float64) float64 { return math.Pow(f, -1.5) }}
	for i := range n {
		q.Arrivals = append(q.Arrivals, float64(i)*q.Step/v)
	}
	x, err := q.Measure(opt, 480, 30, random.At(1).Normal)
	if err != nil {
		t.Fatal(err)
	}
	for i := range x {
		x[i] /= v
	}
	return x
}

// The bias of the separation on short tracks (derived; own simulations with spectrum
// f^-1.5, dt = 30 s, 4 h, 3.15 Mm pixels, zero wavenumber halved, no padding: the median
// of 40 realisations with a little noise; the tolerance is the table's), and none for
// the estimators that cut nothing in wavenumber.
func TestPlaneWave(t *testing.T) {
	opt := Default()
	opt.Track, opt.Estimators = 61, Estimators()
	const v = 500.0
	for _, c := range []struct{ length, ratio float64 }{{0.22, 0.59}, {0.32, 0.65}, {0.44, 0.73}, {0.66, 0.86}, {0.88, 0.95}, {1.32, 1.00}} {
		n := int(math.Round(c.length * v / opt.Centre / 3150))
		x := plane(t, opt, n, 3150, v, 0)
		if math.Abs(x[0]-c.ratio) > 0.04 {
			t.Errorf("%g wavelengths: %.3f, want %.2f", c.length, x[0], c.ratio)
		}
		if math.Abs(x[1]-1) > 0.003 || math.Abs(x[2]-1) > 0.003 {
			t.Errorf("%g wavelengths: unsplit %.4f, pair %.4f, want 1", c.length, x[1], x[2])
		}
	}
	// Two waves without separation, at a power ratio of 2: 3 in the limit of small lags,
	// (2 + 1)/(2 - 1); on longer tracks as derived (own simulations, medians of realisations,
	// compared within 10 %).
	for _, c := range []struct {
		n           int
		step, ratio float64
	}{{5, 500, 3}, {21, 3150, 1.6}, {31, 3150, 1.06}} {
		if x := plane(t, opt, c.n, c.step, v, 0.5); math.Abs(x[1]/c.ratio-1) > 0.1 {
			t.Errorf("%d points, two waves: %.3f, want %.2f", c.n, x[1], c.ratio)
		}
	}
}
