package synth

import (
	"cmp"
	"context"
	"errors"
	"math"
	"slices"

	"offplane/scenarios"
	"offplane/synth/camera"
	"offplane/synth/kernel"
	"offplane/synth/obs"
	"offplane/synth/parallel"
)

// Unit of the frames.
const Unit = "erg cm-2 s-1 sr-1"

// Synthesize makes the observation of a scenario and its truth. The observation keeps
// its frames of both lines. Progress, if not nil, is called now and then, one call at
// a time. The result does not depend on the number of workers (< 1: every core).
func Synthesize(ctx context.Context, s *scenarios.Scenario, light Light, workers int, progress func(done, total int)) (*obs.Observation, *Truth, error) {
	c, err := NewScene(ctx, s, light, workers)
	if err != nil {
		return nil, nil, err
	}
	return c.Observe(ctx, workers, progress)
}

// tile is the number of neighbouring pixels that a worker takes at a time. It changes
// nothing but the time taken.
const tile = 8 * kernel.Rays

// Observe is Synthesize for a scene that is ready.
func (c *Scene) Observe(ctx context.Context, workers int, progress func(done, total int)) (*obs.Observation, *Truth, error) {
	return c.observe(ctx, workers, tile, progress)
}

func (c *Scene) observe(ctx context.Context, workers, tile int, progress func(done, total int)) (*obs.Observation, *Truth, error) {
	e, truth, err := c.expose(ctx, workers, tile, progress)
	if err != nil {
		return nil, nil, err
	}
	o, err := e.develop(ctx, workers)
	return o, truth, err
}

// expose makes the light before the camera's stages.
func (c *Scene) expose(ctx context.Context, workers, tile int, progress func(done, total int)) (*Exposed, *Truth, error) {
	nt := Frames(c.s)
	nk := len(c.s.Camera.Tunings)
	cam := c.camera()
	plan := camera.NewSchedule(c.s.Camera, nt, c.s.Seed)
	d := c.newDevelopment(cam, plan)
	raw := [2]*obs.Cube{obs.NewCube(len(d.lit), nk, nt), obs.NewCube(len(d.lit), nk, len(plan.Second))}
	truth := newTruth(c.Grid)
	inField := make(map[int32]int32, len(d.all)) // by place in the wide raster
	for _, p := range d.all {
		inField[d.wide.place(&c.Grid, p)] = p
	}
	lit, wide := d.lit, &d.wide.Grid

	// Neighbours share field lines, so they come one after the other.
	order := make([]int, len(lit))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int {
		return cmp.Compare(zigzag(int(lit[a])%wide.Nx, int(lit[a])/wide.Nx), zigzag(int(lit[b])%wide.Nx, int(lit[b])/wide.Nx))
	})

	workers = parallel.Workers(workers)
	lamps := make([]*lamp, workers)
	rays := make([][][]sample, workers)
	done := progressCounter(len(order), progress)
	err := parallel.For(ctx, (len(order)+tile-1)/tile, workers, func(w, i int) error {
		if lamps[w] == nil {
			lamps[w] = c.newLamp(plan)
			rays[w] = make([][]sample, tile)
		}
		series := make([][]float32, 0, kernel.Rays)
		part := order[i*tile : min((i+1)*tile, len(order))]
		for n, q := range part {
			p := lit[q]
			y, z := wide.Sky(int(p)%wide.Nx, int(p)/wide.Nx)
			var err error
			if rays[w][n], err = c.ray(y, z, rays[w][n]); err != nil {
				return err
			}
			if q, ok := inField[p]; ok {
				v, structure := c.truthOf(rays[w][n])
				truth.set(q, v, structure)
			}
		}
		lamps[w].shine(rays[w][:len(part)])
		for g := 0; g*kernel.Rays < len(part); g++ {
			few := part[g*kernel.Rays : min((g+1)*kernel.Rays, len(part))]
			for line := range 2 {
				for k := range nk {
					series = series[:0]
					for _, q := range few {
						series = append(series, raw[line].Series(q, k))
					}
					lamps[w].take(series, g, line, k)
				}
			}
		}
		done(len(part))
		return nil
	})
	if err != nil {
		return nil, nil, err
	}
	return &Exposed{d, raw}, truth, nil
}

// develop takes the light through the camera's stages. It uses the light up.
func (e *Exposed) develop(ctx context.Context, workers int) (*obs.Observation, error) {
	d := e.development
	c, cam, plan := d.c, d.cam, d.plan
	o := &obs.Observation{Grid: c.Grid, Pixels: d.field, Unit: Unit}
	for l := range 2 {
		for k, off := range c.s.Camera.Tunings {
			o.Tunings = append(o.Tunings, obs.Tuning{Line: l + 1, Index: k, Wavelength: c.light.Rest[l] + float64(off), Delay: plan.Delay[k],
				FilterFWHM: float64(c.s.Camera.Filter), Offset: float64(off), Stages: c.s.Camera.Stages})
		}
	}
	for l := range 2 {
		background, electrons, readNoise := d.background(l), cam.Electrons[l], cam.ReadNoise
		if !c.s.Camera.Noise { // as if every photon were endlessly many electrons
			electrons, readNoise = math.Inf(1), 0
		}
		for f := range e.raw[l].Frames {
			exposure := float64(c.s.Camera.Exposure)
			if plan.Lost[l][f] {
				exposure = 0
			}
			o.Exposures = append(o.Exposures, obs.Exposure{
				Line: l + 1, Frame: f, Time: plan.Time(l, f, float64(c.s.Camera.Cadence)), Exposure: exposure,
				Electrons: electrons, Background: background, ReadNoise: readNoise,
			})
		}
	}
	for l := range 2 {
		var err error
		if o.Frames[l], err = d.develop(ctx, e.raw[l], l, workers); err != nil {
			return nil, err
		}
		e.raw[l] = nil
		o.Mean[l] = obs.Means(o.Frames[l])
	}
	if o = withoutDark(o); len(o.Pixels) == 0 {
		return nil, errors.New("camera: no pixel of the field has a whole frame; all are occulted, saturated or lost")
	}
	return o, nil
}

// zigzag numbers the pixels so that each aligned block of 2, 4, 8, ... has consecutive
// numbers: the bits of x and y in turn (Morton 1966, from memory).
func zigzag(x, y int) uint64 {
	spread := func(v int) uint64 {
		u := uint64(v)
		u = (u | u<<16) & 0x0000ffff0000ffff
		u = (u | u<<8) & 0x00ff00ff00ff00ff
		u = (u | u<<4) & 0x0f0f0f0f0f0f0f0f
		u = (u | u<<2) & 0x3333333333333333
		return (u | u<<1) & 0x5555555555555555
	}
	return spread(x) | spread(y)<<1
}

// camera returns the camera of the scene.
func (c *Scene) camera() *camera.Camera {
	return camera.New(c.s.Camera, c.s.Seed, c.Grid.Pixel*obs.Arcsec, c.light.Disc, c.light.Rest)
}

// withoutDark takes out of the field the pixels of which no frame of the first line is
// whole.
func withoutDark(o *obs.Observation) *obs.Observation {
	var keep []int
	for i, x := range o.Mean[0][0] {
		if x == x {
			keep = append(keep, i)
		}
	}
	if len(keep) == len(o.Pixels) {
		return o
	}
	pixels := make([]int32, len(keep))
	for j, i := range keep {
		pixels[j] = o.Pixels[i]
	}
	o.Pixels = pixels
	for l, c := range o.Frames {
		kept := obs.NewCube(len(keep), c.Tunings, c.Frames)
		for j, i := range keep {
			for k := range c.Tunings {
				copy(kept.Series(j, k), c.Series(i, k))
			}
		}
		o.Frames[l] = kept
		for k, m := range o.Mean[l] {
			mean := make([]float32, len(keep))
			for j, i := range keep {
				mean[j] = m[i]
			}
			o.Mean[l][k] = mean
		}
	}
	return o
}
