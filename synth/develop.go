package synth

import (
	"context"
	"math"

	"offplane/synth/camera"
	"offplane/synth/kernel"
	"offplane/synth/obs"
	"offplane/synth/parallel"
)

// A wideGrid is the image grid with a margin on all sides, for light from outside the
// image.
type wideGrid struct {
	obs.Grid
	margin int
}

func widen(g obs.Grid, margin int) wideGrid {
	w := wideGrid{g, margin}
	w.Nx, w.Ny = g.Nx+2*margin, g.Ny+2*margin
	w.CentreX, w.CentreY = g.CentreX+float64(margin), g.CentreY+float64(margin)
	return w
}

// place returns the raster index in the wide grid of a pixel of the image.
func (w *wideGrid) place(g *obs.Grid, p int32) int32 {
	return int32((int(p)/g.Nx+w.margin)*w.Nx + int(p)%g.Nx + w.margin)
}

// A development turns raw radiance into frames: it takes the camera's stages through
// the pixels.
type development struct {
	c     *Scene
	cam   *camera.Camera
	plan  *camera.Schedule
	wide  wideGrid
	all   []int32 // raster indices of the field of view
	field []int32 // of those that are not occulted
	moved []int32 // places in the wide grid whose spread light is moved into the field
	lit   []int32 // places whose light is spread there
	moves [2][][]camera.Move

	half           int              // of the widest point spread [pixels]
	litAt, movedAt []int32          // number in lit and moved, plus one, by place
	whole          *obs.Observation // its head
}

func (c *Scene) newDevelopment() *development {
	cam, plan := c.camera(), camera.NewSchedule(c.s.Camera, Frames(c.s), c.s.Seed)
	d := &development{c: c, cam: cam, plan: plan, all: Field(&c.Grid, c.s)}
	reach := 0
	for l, frames := range [2]int{len(plan.Lost[0]), len(plan.Lost[1])} {
		for k := range c.s.Camera.Tunings {
			m, r := cam.Moves(plan, l, k, frames)
			d.moves[l] = append(d.moves[l], m)
			reach = max(reach, r)
		}
	}
	d.half = max(cam.Spread[0].Half, cam.Spread[1].Half)
	d.wide = widen(c.Grid, reach+d.half)
	places := make([]int32, len(d.all))
	for i, p := range d.all {
		places[i] = d.wide.place(&c.Grid, p)
		if d.spot(0, p, 0).Open >= camera.LeastOpen {
			d.field = append(d.field, p)
		}
	}
	d.moved = d.dilate(places, reach)
	d.lit = d.dilate(d.moved, d.half)
	d.litAt, d.movedAt = d.numbers(d.lit), d.numbers(d.moved)
	d.whole = d.head()
	return d
}

// dilate returns the places within r pixels (both ways) of those given, ascending: light
// from beside the field is spread into it. On the disc there is none.
func (d *development) dilate(places []int32, r int) []int32 {
	if r == 0 {
		return places
	}
	g := &d.wide.Grid
	in := make([]bool, g.Nx*g.Ny)
	for _, p := range places {
		for v := -r; v <= r; v++ {
			for u := -r; u <= r; u++ {
				in[int(p)+v*g.Nx+u] = true
			}
		}
	}
	var out []int32
	for p, ok := range in {
		if !ok {
			continue
		}
		if dist, _ := g.Polar(p%g.Nx, p/g.Nx); dist > 1 {
			out = append(out, int32(p))
		}
	}
	return out
}

// spot returns what a pixel of the image sees.
func (d *development) spot(line int, pixel int32, tuning int) camera.Spot {
	g := &d.c.Grid
	r, _ := g.Polar(int(pixel)%g.Nx, int(pixel)/g.Nx)
	return d.cam.Spot(line, pixel, tuning, r, obs.Arcsec*g.Distance)
}

// background returns the mean continuum over the field.
func (d *development) background(line int) float64 {
	first, sum := math.NaN(), 0.0
	same := true
	for i, p := range d.field {
		b := d.spot(line, p, 0).Background
		if i == 0 {
			first = b
		}
		same = same && b == first
		sum += b
	}
	if same {
		return d.cam.Background[line]
	}
	return sum / float64(len(d.field))
}

// numbers returns the index in a list of places, plus one, by place.
func (d *development) numbers(places []int32) []int32 {
	at := make([]int32, d.wide.Nx*d.wide.Ny)
	for i, p := range places {
		at[p] = int32(i) + 1
	}
	return at
}

// head returns the observation that is to be made, without means and frames.
func (d *development) head() *obs.Observation {
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
		for f, lost := range plan.Lost[l] {
			exposure := float64(c.s.Camera.Exposure)
			if lost {
				exposure = 0
			}
			o.Exposures = append(o.Exposures, obs.Exposure{
				Line: l + 1, Frame: f, Time: plan.Time(l, f, float64(c.s.Camera.Cadence)), Exposure: exposure,
				Electrons: electrons, Background: background, ReadNoise: readNoise,
			})
		}
	}
	return o
}

// develop takes pixels of the field, by number, through the camera's stages from the
// point spread on. The window must hold the light of all places whose light they get; the
// observation is good until it is developed again.
func (d *development) develop(ctx context.Context, w *window, from, to, workers int) (*obs.Observation, error) {
	o := *d.whole
	o.Pixels = d.field[from:to]
	for l := range o.Frames {
		var err error
		if o.Frames[l], err = d.frames(ctx, w, l, from, to, workers); err != nil {
			return nil, err
		}
		o.Mean[l] = obs.Means(o.Frames[l])
	}
	return withoutDark(&o), nil
}

// frames makes the frames of one line.
func (d *development) frames(ctx context.Context, w *window, line, from, to, workers int) (*obs.Cube, error) {
	raw := w.raw[line]
	w.made[line] = room(w.made[line], to-from, raw.Tunings, raw.Frames)
	frames := w.made[line]
	if raw.Frames == 0 || from == to {
		return frames, nil
	}
	var spread *obs.Cube // of one tuning, before it is moved
	movedFrom := 0
	if d.moves[line][0] != nil {
		reach := d.wide.margin - d.half
		movedFrom = d.before(d.moved, d.row(from)-reach)
		movedTo := d.before(d.moved, d.row(to-1)+reach+1)
		w.spread = room(w.spread, movedTo-movedFrom, 1, raw.Frames)
		spread = w.spread
	}
	lost := d.plan.Lost[line]
	workers = parallel.Workers(workers)
	spreaders := make([]spreader, workers)
	for k := range raw.Tunings {
		source := func(i int) []float32 { return w.series(line, i, k) }
		if spread != nil {
			err := parallel.For(ctx, spread.Pixels, workers, func(w, i int) error {
				spreaders[w].spread(spread.Series(i, 0), &d.cam.Spread[line], d.wide.Nx, int(d.moved[movedFrom+i]), d.litAt, source)
				return nil
			})
			if err != nil {
				return nil, err
			}
		}
		var gain []float32
		if d.c.s.Camera.Brightening != 0 {
			for f := range raw.Frames {
				gain = append(gain, float32(d.cam.Gain(d.plan.Time(line, f, float64(d.c.s.Camera.Cadence))+d.plan.Delay[k])))
			}
		}
		err := parallel.For(ctx, frames.Pixels, workers, func(w, i int) error {
			dst := frames.Series(i, k)
			p := d.field[from+i]
			place := int(d.wide.place(&d.c.Grid, p))
			if spread != nil {
				d.move(dst, place, movedFrom, spread, d.moves[line][k])
			} else {
				spreaders[w].spread(dst, &d.cam.Spread[line], d.wide.Nx, place, d.litAt, source)
			}
			for t, g := range gain {
				dst[t] *= g
			}
			d.cam.Expose(dst, d.spot(line, p, k))
			for t, gone := range lost {
				if gone {
					dst[t] = float32(math.NaN())
				}
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return frames, nil
}

// A spreader adds up the light that the point spread brings to a place. It holds the
// scratch space of one worker.
type spreader struct {
	rows [][]float32
	coef []float32
}

// spread fills dst; lit numbers the places of source.
func (s *spreader) spread(dst []float32, k *camera.Kernel, columns, place int, lit []int32, source func(i int) []float32) {
	if k.Half == 0 {
		copy(dst, source(int(lit[place])-1))
		return
	}
	s.rows, s.coef = s.rows[:0], s.coef[:0]
	i := 0
	for v := -k.Half; v <= k.Half; v++ {
		for u := -k.Half; u <= k.Half; u++ {
			if q := int(lit[place+v*columns+u]); q > 0 {
				s.rows = append(s.rows, source(q-1))
				s.coef = append(s.coef, float32(k.Weight[i]))
			}
			i++
		}
	}
	kernel.Combine(dst, s.rows, s.coef)
}

// move fills dst with the light at a place, frame by frame from where the image stands.
// spread holds the spread light of the moved places from a number on.
func (d *development) move(dst []float32, place, from int, spread *obs.Cube, moves []camera.Move) {
	for t := range dst {
		m := &moves[t]
		sum := float32(0)
		for j, wy := range m.Wy {
			row := float32(0)
			for i, wx := range m.Wx {
				if q := int(d.movedAt[place+(m.Y+j)*d.wide.Nx+m.X+i]); q > 0 {
					row += float32(wx * spread.Data[(q-1-from)*spread.Frames+t])
				}
			}
			sum += float32(wy * row)
		}
		dst[t] = sum
	}
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
