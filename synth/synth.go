package synth

import (
	"cmp"
	"context"
	"errors"
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
	return c.observe(ctx, workers, tile, rows, progress)
}

func (c *Scene) observe(ctx context.Context, workers, tile, rows int, progress func(done, total int)) (*obs.Observation, *Truth, error) {
	r, err := c.Record()
	if err != nil {
		return nil, nil, err
	}
	r.tile, r.rows = tile, rows
	return r.Whole(ctx, workers, progress)
}

// A Recording is an observation that is about to be made, a few rows of the image at a
// time, so that the frames of the whole field are never held.
type Recording struct {
	// Head is what is known before: the grid, the field, the log, and frames that have
	// their sizes but no data. Its means are zero.
	Head *obs.Observation

	d          *development
	rows, tile int
}

// rows is the number of rows of the image that are made at a time. Rows of few pixels
// would see the spectra of the same footpoints again in the next ones; many need memory.
// It changes nothing but these two.
const rows = 32

// Record prepares an observation.
func (c *Scene) Record() (*Recording, error) {
	d := c.newDevelopment()
	if err := lit(d.whole); err != nil {
		return nil, err
	}
	r := &Recording{Head: d.whole, d: d, rows: rows, tile: tile}
	blank := make([]float32, len(d.field))
	for l, f := range d.plan.Lost {
		nk := len(c.s.Camera.Tunings)
		r.Head.Frames[l] = &obs.Cube{Pixels: len(d.field), Tunings: nk, Frames: len(f)}
		for range nk {
			r.Head.Mean[l] = append(r.Head.Mean[l], blank)
		}
	}
	return r, nil
}

// Parts makes the observation and calls take with one part after the other: whole rows of
// the image, from the first on. A part is an observation of its own pixels, those of the
// field without the dark ones; it is good until take returns. Parts returns the whole
// without frames, and the truth. A Recording can be used once.
func (r *Recording) Parts(ctx context.Context, workers int, progress func(done, total int), take func(part *obs.Observation) error) (*obs.Observation, *Truth, error) {
	d := r.d
	o := *r.Head
	o.Pixels, o.Frames = nil, [2]*obs.Cube{}
	for l, m := range o.Mean {
		o.Mean[l] = make([][]float32, len(m))
	}
	l := d.newLighting(workers, r.tile, progress)
	strips, scatter := d.strips(r.rows), d.scatter()
	if scatter != nil { // each place lights all others
		strips[0].litTo = len(d.lit)
	}
	w := d.newWindow(strips)
	for i, s := range strips {
		from := w.to
		w.slide(s.litFrom, s.litTo)
		if err := l.shine(ctx, w, from); err != nil {
			return nil, nil, err
		}
		if i == 0 && scatter != nil {
			if err := w.scatter(ctx, scatter, workers); err != nil {
				return nil, nil, err
			}
		}
		part, err := d.develop(ctx, w, s.from, s.to, workers)
		if err != nil {
			return nil, nil, err
		}
		if len(part.Pixels) == 0 {
			continue
		}
		o.Pixels = append(o.Pixels, part.Pixels...)
		for l, m := range part.Mean {
			for k := range m {
				o.Mean[l][k] = append(o.Mean[l][k], m[k]...)
			}
		}
		if err := take(part); err != nil {
			return nil, nil, err
		}
	}
	return &o, l.truth, lit(&o)
}

// Whole makes the observation with all its frames, and the truth.
func (r *Recording) Whole(ctx context.Context, workers int, progress func(done, total int)) (*obs.Observation, *Truth, error) {
	whole := r.Head.Frames
	for _, f := range whole {
		f.Data = make([]float32, 0, f.Pixels*f.Tunings*f.Frames)
	}
	o, truth, err := r.Parts(ctx, workers, progress, func(part *obs.Observation) error {
		for l, f := range part.Frames {
			whole[l].Data = append(whole[l].Data, f.Data...)
		}
		return nil
	})
	if err != nil {
		return nil, nil, err
	}
	for l, f := range whole {
		f.Pixels = len(o.Pixels)
		o.Frames[l] = f
	}
	return o, truth, nil
}

// lit returns an error if an observation has no pixels.
func lit(o *obs.Observation) error {
	if len(o.Pixels) == 0 {
		return errors.New("camera: no pixel of the field has a whole frame; all are occulted, saturated or lost")
	}
	return nil
}

// A lighting makes light and truth of the places of a development.
type lighting struct {
	*development
	truth         *Truth
	workers, tile int
	lamps         []*lamp
	rays          [][][]sample
	inField       []int32
	done          func(n int)
}

func (d *development) newLighting(workers, tile int, progress func(done, total int)) *lighting {
	workers = parallel.Workers(workers)
	places := make([]int32, len(d.all))
	for i, p := range d.all {
		places[i] = d.wide.place(&d.c.Grid, p)
	}
	return &lighting{
		development: d, truth: newTruth(d.c.Grid), workers: workers, tile: tile,
		lamps: make([]*lamp, workers), rays: make([][][]sample, workers),
		inField: d.numbers(places), done: progressCounter(len(d.lit), progress),
	}
}

// shine makes the light of the places of a window from a number on, before the camera's
// stages.
func (l *lighting) shine(ctx context.Context, w *window, from int) error {
	c, lit, wide := l.c, l.lit, &l.wide.Grid
	// Neighbours share field lines, so they come one after the other.
	order := make([]int, w.to-from)
	for i := range order {
		order[i] = from + i
	}
	slices.SortFunc(order, func(a, b int) int {
		return cmp.Compare(zigzag(int(lit[a])%wide.Nx, int(lit[a])/wide.Nx), zigzag(int(lit[b])%wide.Nx, int(lit[b])/wide.Nx))
	})
	return parallel.For(ctx, (len(order)+l.tile-1)/l.tile, l.workers, func(worker, i int) error {
		if l.lamps[worker] == nil {
			l.lamps[worker], l.rays[worker] = c.newLamp(l.plan), make([][]sample, l.tile)
		}
		lamp, rays := l.lamps[worker], l.rays[worker]
		part := order[i*l.tile : min((i+1)*l.tile, len(order))]
		for n, q := range part {
			p := lit[q]
			y, z := wide.Sky(int(p)%wide.Nx, int(p)/wide.Nx)
			var err error
			if rays[n], err = c.ray(y, z, rays[n]); err != nil {
				return err
			}
			if i := l.inField[p]; i > 0 {
				v, structure := c.truthOf(rays[n])
				l.truth.set(l.all[i-1], v, structure)
			}
		}
		lamp.shine(rays[:len(part)])
		series := make([][]float32, 0, kernel.Rays)
		for g := 0; g*kernel.Rays < len(part); g++ {
			few := part[g*kernel.Rays : min((g+1)*kernel.Rays, len(part))]
			for line := range w.raw {
				for k := range w.raw[line].Tunings {
					series = series[:0]
					for _, q := range few {
						series = append(series, w.series(line, q, k))
					}
					lamp.take(series, g, line, k)
				}
			}
		}
		l.done(len(part))
		return nil
	})
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
