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
}

func (c *Scene) newDevelopment(cam *camera.Camera, plan *camera.Schedule) *development {
	d := &development{c: c, cam: cam, plan: plan, all: Field(&c.Grid, c.s)}
	reach := 0
	for l, frames := range [2]int{len(plan.Lost[0]), len(plan.Lost[1])} {
		for k := range c.s.Camera.Tunings {
			m, r := cam.Moves(plan, l, k, frames)
			d.moves[l] = append(d.moves[l], m)
			reach = max(reach, r)
		}
	}
	half := max(cam.Spread[0].Half, cam.Spread[1].Half)
	d.wide = widen(c.Grid, reach+half)
	places := make([]int32, len(d.all))
	for i, p := range d.all {
		places[i] = d.wide.place(&c.Grid, p)
		if d.spot(0, p, 0).Open >= camera.LeastOpen {
			d.field = append(d.field, p)
		}
	}
	d.moved = d.dilate(places, reach)
	d.lit = d.dilate(d.moved, half)
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

// develop makes the frames of one line from the raw radiance of the lit places, which
// it overwrites.
func (d *development) develop(ctx context.Context, raw *obs.Cube, line, workers int) (*obs.Cube, error) {
	frames := obs.NewCube(len(d.field), raw.Tunings, raw.Frames)
	if raw.Frames == 0 {
		return frames, nil
	}
	scatter := camera.NewScatter(d.c.s.Camera, d.c.Grid.Pixel*obs.Arcsec, d.wide.Nx, d.lit)
	lit := d.numbers(d.lit)
	var moved []int32
	var spread *obs.Cube // of one tuning, before it is moved
	if d.moves[line][0] != nil {
		moved = d.numbers(d.moved)
		spread = obs.NewCube(len(d.moved), 1, raw.Frames)
	}
	lost := d.plan.Lost[line]
	workers = parallel.Workers(workers)
	spreaders := make([]spreader, workers)
	for k := range raw.Tunings {
		source := func(i int) []float32 { return raw.Series(i, k) }
		if scatter != nil {
			if err := scatter.Apply(ctx, source, workers); err != nil {
				return nil, err
			}
		}
		if spread != nil {
			err := parallel.For(ctx, len(d.moved), workers, func(w, i int) error {
				spreaders[w].spread(spread.Series(i, 0), &d.cam.Spread[line], d.wide.Nx, int(d.moved[i]), lit, source)
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
		err := parallel.For(ctx, len(d.field), workers, func(w, i int) error {
			dst := frames.Series(i, k)
			p := d.field[i]
			place := int(d.wide.place(&d.c.Grid, p))
			if spread != nil {
				d.move(dst, place, moved, spread, d.moves[line][k])
			} else {
				spreaders[w].spread(dst, &d.cam.Spread[line], d.wide.Nx, place, lit, source)
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
func (d *development) move(dst []float32, place int, moved []int32, spread *obs.Cube, moves []camera.Move) {
	for t := range dst {
		m := &moves[t]
		sum := float32(0)
		for j, wy := range m.Wy {
			row := float32(0)
			for i, wx := range m.Wx {
				if q := int(moved[place+(m.Y+j)*d.wide.Nx+m.X+i]); q > 0 {
					row += float32(wx * spread.Data[(q-1)*spread.Frames+t])
				}
			}
			sum += float32(wy * row)
		}
		dst[t] = sum
	}
}
