package synth

import (
	"cmp"
	"context"
	"math"
	"slices"

	"offplane/scenarios"
	"offplane/synth/camera"
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
const tile = 16

// Observe is Synthesize for a scene that is ready.
func (c *Scene) Observe(ctx context.Context, workers int, progress func(done, total int)) (*obs.Observation, *Truth, error) {
	return c.observe(ctx, workers, tile, progress)
}

func (c *Scene) observe(ctx context.Context, workers, tile int, progress func(done, total int)) (*obs.Observation, *Truth, error) {
	cam := camera.New(c.s.Camera, c.s.Seed, c.Grid.Pixel*obs.Arcsec, c.light.Disc, c.light.Rest)
	field := Field(&c.Grid, c.s)
	lit := dilate(&c.Grid, field, len(cam.Spread)/2)
	nt := Frames(c.s)
	second := secondFrames(nt, c.s.Camera.SecondLine)
	nk := len(c.s.Camera.Tunings)
	raw := [2]*obs.Cube{obs.NewCube(len(lit), nk, nt), obs.NewCube(len(lit), nk, len(second))}
	truth := newTruth(c.Grid)
	inField := make(map[int32]bool, len(field))
	for _, p := range field {
		inField[p] = true
	}

	// Neighbours in position angle share field lines, so they come one after the other:
	// sectors, and within them pixels outward.
	order := make([]int, len(lit))
	key := make([][2]float64, len(lit))
	for i, p := range lit {
		r, pa := c.Grid.Polar(int(p)%c.Grid.Nx, int(p)/c.Grid.Nx)
		order[i] = i
		key[i] = [2]float64{math.Floor(pa), r}
	}
	slices.SortStableFunc(order, func(a, b int) int {
		return cmp.Or(cmp.Compare(key[a][0], key[b][0]), cmp.Compare(key[a][1], key[b][1]))
	})

	workers = parallel.Workers(workers)
	lamps := make([]*lamp, workers)
	rays := make([][][]sample, workers)
	done := progressCounter(len(order), progress)
	err := parallel.For(ctx, (len(order)+tile-1)/tile, workers, func(w, i int) error {
		if lamps[w] == nil {
			lamps[w] = c.newLamp(second, tile)
			rays[w] = make([][]sample, tile)
		}
		part := order[i*tile : min((i+1)*tile, len(order))]
		for n, q := range part {
			p := lit[q]
			y, z := c.Grid.Sky(int(p)%c.Grid.Nx, int(p)/c.Grid.Nx)
			var err error
			if rays[w][n], err = c.ray(y, z, rays[w][n]); err != nil {
				return err
			}
			if inField[p] {
				v, structure := c.truthOf(rays[w][n])
				truth.set(p, v, structure)
			}
		}
		lamps[w].shine(rays[w][:len(part)])
		for n, q := range part {
			for line := range 2 {
				for k, a := range lamps[w].acc[n][line] {
					copy(raw[line].Series(q, k), a)
				}
			}
		}
		done(len(part))
		return nil
	})
	if err != nil {
		return nil, nil, err
	}

	o := &obs.Observation{Grid: c.Grid, Pixels: field, Unit: Unit}
	toNM := c.s.Camera.Tunings
	for l := range 2 {
		for k, off := range toNM {
			o.Tunings = append(o.Tunings, obs.Tuning{Line: l + 1, Index: k, Wavelength: c.light.Rest[l] + float64(off),
				FilterFWHM: float64(c.s.Camera.Filter), Offset: float64(off)})
		}
	}
	for t := range nt {
		o.Exposures = append(o.Exposures, c.exposure(cam, 0, t, t))
	}
	for i, t := range second {
		o.Exposures = append(o.Exposures, c.exposure(cam, 1, i, t))
	}
	for l := range 2 {
		o.Frames[l] = obs.NewCube(len(field), nk, raw[l].Frames)
		if err := c.expose(ctx, o, cam, raw[l], lit, l, workers); err != nil {
			return nil, nil, err
		}
		raw[l] = nil
		o.Mean[l] = means(o.Frames[l])
	}
	return o, truth, nil
}

// exposure is the log entry of one frame. Without noise the camera is not named.
func (c *Scene) exposure(cam *camera.Camera, line, frame, slot int) obs.Exposure {
	e := obs.Exposure{Line: line + 1, Frame: frame, Time: float64(slot) * float64(c.s.Camera.Cadence), Exposure: float64(c.s.Camera.Exposure)}
	e.Electrons, e.Background, e.ReadNoise = cam.Electrons[line], cam.Background[line], cam.ReadNoise
	return e
}

// secondFrames returns the frames at which the second line is exposed too: n of them,
// each in the middle of its share of the time.
func secondFrames(frames, n int) []int {
	n = min(n, frames)
	out := make([]int, n)
	for i := range out {
		out[i] = (2*i + 1) * frames / (2 * n)
	}
	return out
}

// dilate returns the pixels within r pixels (both ways) of the field, ascending: light
// from beside the field is spread into it.
func dilate(g *obs.Grid, field []int32, r int) []int32 {
	if r == 0 {
		return field
	}
	in := make([]bool, g.Nx*g.Ny)
	for _, p := range field {
		x, y := int(p)%g.Nx, int(p)/g.Nx
		for v := max(y-r, 0); v <= min(y+r, g.Ny-1); v++ {
			for u := max(x-r, 0); u <= min(x+r, g.Nx-1); u++ {
				in[v*g.Nx+u] = true
			}
		}
	}
	var out []int32
	for p, ok := range in {
		if ok {
			out = append(out, int32(p))
		}
	}
	return out
}

// expose spreads the raw radiance of one line and adds the noise.
func (c *Scene) expose(ctx context.Context, o *obs.Observation, cam *camera.Camera, raw *obs.Cube, lit []int32, line, workers int) error {
	at := make([]int32, c.Grid.Nx*c.Grid.Ny) // index in lit, plus one
	for i, p := range lit {
		at[p] = int32(i) + 1
	}
	half := len(cam.Spread) / 2
	return parallel.For(ctx, len(o.Pixels), workers, func(_, i int) error {
		p := o.Pixels[i]
		x, y := int(p)%c.Grid.Nx, int(p)/c.Grid.Nx
		for k := range raw.Tunings {
			dst := o.Frames[line].Series(i, k)
			if half == 0 {
				copy(dst, raw.Series(int(at[p])-1, k))
			} else {
				clear(dst)
				for v, wy := range cam.Spread {
					for u, wx := range cam.Spread {
						q := at[(y+v-half)*c.Grid.Nx+x+u-half]
						w := float32(wx * wy)
						for t, a := range raw.Series(int(q)-1, k) {
							dst[t] += float32(w * a)
						}
					}
				}
			}
			cam.Expose(dst, line, p, k, nil)
		}
		return nil
	})
}

// means returns the mean over frames, per tuning and field pixel.
func means(c *obs.Cube) [][]float32 {
	out := make([][]float32, c.Tunings)
	for k := range out {
		out[k] = make([]float32, c.Pixels)
		for p := range c.Pixels {
			sum := 0.0
			for _, x := range c.Series(p, k) {
				sum += float64(x)
			}
			out[k][p] = float32(sum / float64(c.Frames))
		}
	}
	return out
}
