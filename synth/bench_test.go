package synth

import (
	"context"
	"fmt"
	"testing"

	"offplane/synth/camera"
	"offplane/synth/kernel"
)

// A sample-frame is one sample of a line of sight in one frame, with all its tunings,
// sites and polarisations.
const unit = "Msample-frames/s"

var waysOfWaves = map[string][]string{
	"outward": {"waves.far_end=false", "waves.inward=0"},
	"both":    nil,
}

// BenchmarkShine is the light of a group of rays of quiet-belt without the geometry:
// waves at every sample, transforms, profiles. "hot" is the same work on copies of one
// sample, whose spectra stay in the nearest cache.
func BenchmarkShine(b *testing.B) {
	for _, waves := range []string{"outward", "both"} {
		for _, tuning := range []string{"simultaneous", "sequential"} {
			s, l := load(b, "quiet-belt", append(waysOfWaves[waves], "image.from=266 deg", "image.to=268 deg", fmt.Sprint("camera.sequential=", tuning == "sequential"))...)
			c := scene(b, s, l)
			own, hot := make([][]sample, kernel.Rays), make([][]sample, kernel.Rays)
			samples := 0
			for i := range own {
				r, err := c.ray(1.1+0.0047*float64(i%4), 0.05+0.0047*float64(i/4), nil)
				if err != nil {
					b.Fatal(err)
				}
				own[i] = r
				samples += len(r)
			}
			for i := range hot {
				for _, q := range own[0] { // the light of the middle at every distance
					middle := own[0][len(own[0])/2]
					middle.x = q.x
					hot[i] = append(hot[i], middle)
				}
			}
			lamp := c.newLamp(camera.NewSchedule(s.Camera, Frames(s), s.Seed))
			for name, rays := range map[string][][]sample{"own": own, "hot": hot} {
				b.Run(waves+"/"+tuning+"/"+name, func(b *testing.B) {
					for b.Loop() {
						lamp.shine(rays)
					}
					b.ReportMetric(float64(b.N)*float64(samples*Frames(s))/b.Elapsed().Seconds()/1e6, unit)
				})
			}
		}
	}
}

// forward measures Observe on a part of quiet-belt: geometry, truth, driver, light and
// camera.
func forward(b *testing.B, name string, workers int, set ...string) {
	// Without point spread no light from beside the field is needed.
	s, l := load(b, "quiet-belt", append(set, "camera.point_spread=0 arcsec")...)
	c := scene(b, s, l)
	work := 0.0
	for _, p := range Field(&c.Grid, s) {
		y, z := c.Grid.Sky(int(p)%c.Grid.Nx, int(p)/c.Grid.Nx)
		r, err := c.ray(y, z, nil)
		if err != nil {
			b.Fatal(err)
		}
		work += float64(len(r) * Frames(s))
	}
	b.Run(name, func(b *testing.B) {
		for b.Loop() {
			if _, _, err := c.Observe(context.Background(), workers, nil); err != nil {
				b.Fatal(err)
			}
		}
		b.ReportMetric(float64(b.N)*work/b.Elapsed().Seconds()/1e6, unit)
		b.ReportMetric(work/1e9, "Gsample-frames")
	})
}

func BenchmarkForward(b *testing.B) {
	wedge := []string{"image.from=266 deg", "image.to=270 deg"}
	for _, waves := range []string{"outward", "both"} {
		for _, tuning := range []string{"simultaneous", "sequential"} {
			set := append(wedge, append(waysOfWaves[waves], fmt.Sprint("camera.sequential=", tuning == "sequential"))...)
			for workers := 1; workers <= 2; workers++ {
				forward(b, fmt.Sprintf("%s/%s/workers=%d", waves, tuning, workers), workers, set...)
			}
		}
	}
}

// BenchmarkCost shows that the cost is linear over a factor of 16 in pixels, frames and
// samples; what a sample costs without frames (geometry, truth, waves) shows where there
// are few frames.
func BenchmarkCost(b *testing.B) {
	for _, n := range []int{1, 4, 16} {
		forward(b, fmt.Sprintf("pixels=%d", n), 0, "image.from=266 deg", fmt.Sprintf("image.to=%g deg", 266+0.5*float64(n)))
	}
	for _, n := range []int{1, 4, 16} {
		forward(b, fmt.Sprintf("frames=%d", n), 0, "image.from=266 deg", "image.to=267 deg", "camera.second_line=12", fmt.Sprintf("camera.duration=%d min", 45*n))
	}
	for _, n := range []int{1, 4, 16} {
		forward(b, fmt.Sprintf("samples=%d", n), 0, "image.from=266 deg", "image.to=267 deg", fmt.Sprintf("sight.step=%g", 1.5/float64(n)))
	}
}
