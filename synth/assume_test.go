package synth

import (
	"context"
	"slices"
	"testing"

	"offplane/scenarios"
	"offplane/synth/obs"
)

func expose(t *testing.T, as Assume, set ...string) *Exposed {
	t.Helper()
	all := append([]string{"image.from=269 deg", "image.to=271 deg", "image.outer=1.1 Rsun", "camera.duration=12 min", "camera.second_line=4", "camera.noise=true"}, set...)
	s, light := load(t, "plane-wave", all...)
	c, err := NewSceneAs(context.Background(), s, light, 1, as)
	if err != nil {
		t.Fatal(err)
	}
	e, _, err := c.Expose(context.Background(), 1, nil)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

func sameFrames(t *testing.T, what string, a, b *obs.Observation) {
	t.Helper()
	for l := range a.Frames {
		if !slices.Equal(a.Frames[l].Data, b.Frames[l].Data) {
			t.Errorf("%s: frames of line %d differ", what, l+1)
		}
		for k := range a.Mean[l] {
			if !slices.Equal(a.Mean[l][k], b.Mean[l][k]) {
				t.Errorf("%s: means of line %d differ", what, l+1)
			}
		}
	}
}

// Light that was exposed once gives, with a camera of fewer stages, the frames of a
// scene that has this camera, as often as one likes.
func TestDevelopAgain(t *testing.T) {
	ctx := context.Background()
	optics := []string{"camera.point_spread=6 arcsec", "camera.scatter={share: 0.05}", "camera.pointing={jitter: 2 arcsec}"}
	detector := []string{"camera.flat_field=0.01"}
	e := expose(t, Assume{}, slices.Concat(optics, detector)...)
	blind := e.c.s.Camera
	blind.PointSpread, blind.Scatter, blind.Pointing = 0, nil, nil
	even := e.c.s.Camera
	even.FlatField = 0
	for _, q := range []struct {
		name   string
		camera scenarios.Camera
		set    []string
	}{{"all stages", e.c.s.Camera, slices.Concat(optics, detector)}, {"no optics", blind, append(detector, "camera.point_spread=0 arcsec")}, {"no flat field", even, optics}} {
		got, err := e.Develop(ctx, q.camera, true, 1)
		if err != nil {
			t.Fatal(err)
		}
		f := expose(t, Assume{}, q.set...)
		want, err := f.develop(ctx, 1)
		if err != nil {
			t.Fatal(err)
		}
		sameFrames(t, q.name, got, want)
	}
}

// Scenes whose drivers hold the same delay and lead see the same waves: a tuning that is
// exposed when the frame begins sees the same with the others at once or after it.
func TestScenesShareTheirWaves(t *testing.T) {
	as := Assume{Delay: 3600, Lead: 20}
	off := []string{"camera.noise=false", "camera.point_spread=0 arcsec"}
	once, after := expose(t, as, off...), expose(t, as, append(off, "camera.sequential=true")...)
	for i := range once.raw[0].Pixels {
		if !slices.Equal(once.raw[0].Series(i, 0), after.raw[0].Series(i, 0)) {
			t.Fatalf("pixel %d sees other waves", i)
		}
	}
	if slices.Equal(once.raw[0].Series(0, 2), after.raw[0].Series(0, 2)) {
		t.Error("the last tuning sees the waves of the first")
	}
}

// Pieces hold all frames, in their order, and their own means and log.
func TestPiece(t *testing.T) {
	o, err := expose(t, Assume{}).develop(context.Background(), 1)
	if err != nil {
		t.Fatal(err)
	}
	for k := range 2 {
		p := Piece(o, k, 2)
		for l, c := range o.Frames {
			n := c.Frames / 2
			for f, e := range p.LineExposures(l + 1) {
				whole := o.LineExposures(l + 1)[k*n+f]
				if e.Frame != f || e.Time != whole.Time-float64(k)*360 {
					t.Errorf("piece %d, line %d, frame %d is logged as frame %d at %g s", k, l+1, f, e.Frame, e.Time)
				}
			}
			for i := range c.Pixels {
				if !slices.Equal(p.Frames[l].Series(i, 1), c.Series(i, 1)[k*n:(k+1)*n]) {
					t.Fatalf("piece %d of line %d has other frames", k, l+1)
				}
			}
		}
		if p.Grid.Duration != 360 || p.Mean[0][0][0] == o.Mean[0][0][0] {
			t.Errorf("piece %d: duration %g s, means of the whole", k, p.Grid.Duration)
		}
	}
}

// A plane of the sky as bright as its line of sight has the first line's radiance of
// the whole column and keeps the ratio of the plane.
func TestBrightPlane(t *testing.T) {
	s, light := load(t, "sphere", "image.from=269 deg", "image.to=271 deg", "image.outer=1.1 Rsun")
	full := scene(t, s, light)
	plane := *s
	plane.Sight.Plane = true
	bright, err := NewSceneAs(context.Background(), &plane, light, 1, Assume{Corona: full.Corona, Bright: new(Columns)})
	if err != nil {
		t.Fatal(err)
	}
	ray, err := full.ray(1.07, 0, nil)
	if err != nil {
		t.Fatal(err)
	}
	sum := 0.0
	for i := range ray {
		sum += ray[i].j[0] * ray[i].dx
	}
	for range 2 { // the second time from the columns
		one, err := bright.ray(1.07, 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		if len(one) != 1 || one[0].x != 0 || one[0].j[0]*one[0].dx < 0.999999*sum || one[0].j[0]*one[0].dx > 1.000001*sum {
			t.Errorf("%d samples, radiance %g, column %g", len(one), one[0].j[0]*one[0].dx, sum)
		}
	}
}
