package synth

import (
	"math"
	"testing"
)

// Steps that grow where a ray is dark leave the truth and the waves as they are: radiance
// and means against even steps of an eighth of a cell, and the Doppler rms of a narrow
// wedge against even steps of a quarter, in which waves are sampled as densely as they vary.
func TestStride(t *testing.T) {
	// stepped is the same scene with other steps.
	stepped := func(c *Scene, step float64) *Scene {
		s, d := *c.s, *c
		s.Sight.Step = step
		d.s = &s
		return &d
	}
	look := func(c *Scene, step, y, z float64) (radiance float64, truth []float64) {
		c = stepped(c, step)
		ray, err := c.ray(y, z, nil)
		if err != nil {
			t.Fatal(err)
		}
		truth, _ = c.truthOf(ray)
		for i := range ray {
			radiance += ray[i].j[0] * ray[i].dx
		}
		return radiance, truth
	}
	s, l := load(t, "quiet-belt", "image.from=264.5 deg", "image.to=265.5 deg", "image.outer=1.25 Rsun", "camera.noise=false",
		"camera.point_spread=0 arcsec", "camera.duration=15 min", "camera.sequential=false", "sight.tail=1e-6")
	belt := scene(t, s, l)
	for _, c := range []struct {
		y, z float64
	}{{1.1, 0.1}, {0.6, 1.1}, {-0.02, 1.2}} {
		want, truth := look(belt, 0.125, c.y, c.z)
		got, mine := look(belt, 1, c.y, c.z)
		if math.Abs(got/want-1) > 1e-4 {
			t.Errorf("(%g, %g): radiance %.7f of the fine sum's", c.y, c.z, got/want)
		}
		for i, m := range truthMaps[:len(truth)] {
			// Depths are read between samples.
			bound := map[string]float64{"DEPTH50": 1e-3, "DEPTH90": 2e-3, "NEAR_SKY": 1e-3}[m.Name]
			if bound == 0 {
				bound = 2e-4
			}
			if math.Abs(mine[i]/truth[i]-1) > bound {
				t.Errorf("(%g, %g): %s is %g, with fine steps %g", c.y, c.z, m.Name, mine[i], truth[i])
			}
		}
	}

	rms := func(step float64) float64 {
		o, _, err := stepped(belt, step).Observe(t.Context(), 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		sum := 0.0
		f := o.Frames[0]
		for p := range o.Pixels {
			var m, m2 float64
			for i := range f.Frames {
				v := doppler(float64(f.Series(p, 0)[i]), float64(f.Series(p, 1)[i]), float64(f.Series(p, 2)[i]), 1)
				m += v
				m2 += v * v
			}
			k := float64(f.Frames)
			sum += m2/k - m*m/k/k
		}
		return math.Sqrt(sum)
	}
	fine, mine := rms(0.25), rms(1)
	t.Logf("Doppler rms %.4f of that with fine steps", mine/fine)
	if math.Abs(mine/fine-1) > 0.03 {
		t.Errorf("Doppler rms %.4f of that with fine steps", mine/fine)
	}
}
