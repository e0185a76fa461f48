package synth

import (
	"context"
	"sort"

	"offplane/synth/camera"
	"offplane/synth/obs"
)

// A window holds the light of the lit places from one number to another before the
// camera's stages. It slides over the field, so that each place shines once.
type window struct {
	from, to int
	raw      [2]*obs.Cube

	// Room for what is made of it, used again and again.
	made   [2]*obs.Cube
	spread *obs.Cube
}

// room returns a cube with whatever numbers it holds, in the place of an old one, which
// may be nil, if that suffices.
func room(old *obs.Cube, pixels, tunings, frames int) *obs.Cube {
	if n := pixels * tunings * frames; old != nil && n <= cap(old.Data) {
		return &obs.Cube{Pixels: pixels, Tunings: tunings, Frames: frames, Data: old.Data[:n]}
	}
	return obs.NewCube(pixels, tunings, frames)
}

// A strip is some rows of the image: which pixels of the field lie in it, and which lit
// places their light may come from.
type strip struct {
	from, to       int
	litFrom, litTo int
}

// strips cuts the field into strips of so many rows.
func (d *development) strips(rows int) []strip {
	var all []strip
	first, last := int(d.all[0])/d.c.Grid.Nx, int(d.all[len(d.all)-1])/d.c.Grid.Nx
	for y := first; y <= last; y += rows {
		from, to := y+d.wide.margin, min(y+rows, last+1)+d.wide.margin // in the wide grid
		all = append(all, strip{
			d.fieldBefore(y), d.fieldBefore(y + rows),
			d.before(d.lit, from-d.wide.margin), d.before(d.lit, to+d.wide.margin),
		})
	}
	return all
}

// before returns how many of the places, which ascend, lie before a row of the wide grid.
func (d *development) before(places []int32, row int) int {
	return sort.Search(len(places), func(i int) bool { return int(places[i])/d.wide.Nx >= row })
}

// fieldBefore returns how many pixels of the field lie before a row of the image.
func (d *development) fieldBefore(row int) int {
	return sort.Search(len(d.field), func(i int) bool { return int(d.field[i])/d.c.Grid.Nx >= row })
}

// row returns the row of the wide grid that a pixel of the field lies in, by number.
func (d *development) row(i int) int { return int(d.field[i])/d.c.Grid.Nx + d.wide.margin }

// newWindow returns an empty window that can slide over the strips.
func (d *development) newWindow(strips []strip) *window {
	most := 0
	for _, s := range strips {
		most = max(most, s.litTo-s.litFrom)
	}
	w := &window{}
	for l, lost := range d.plan.Lost {
		w.raw[l] = obs.NewCube(most, len(d.c.s.Camera.Tunings), len(lost))
		w.raw[l].Pixels = 0
	}
	return w
}

// slide makes room for the light of the places before to, if need be in the place of
// those before from.
func (w *window) slide(from, to int) {
	if to <= w.to {
		return
	}
	for _, c := range w.raw {
		size := c.Tunings * c.Frames
		copy(c.Data, c.Data[(from-w.from)*size:(w.to-w.from)*size])
		c.Pixels = to - from
	}
	w.from, w.to = from, to
}

// series returns the frames of a lit place.
func (w *window) series(line, place, tuning int) []float32 {
	return w.raw[line].Series(place-w.from, tuning)
}

// scatter scatters the light of all lit places among them.
func (w *window) scatter(ctx context.Context, s *camera.Scatter, workers int) error {
	for _, c := range w.raw {
		if c.Frames == 0 {
			continue
		}
		for k := range c.Tunings {
			if err := s.Apply(ctx, func(i int) []float32 { return c.Series(i, k) }, workers); err != nil {
				return err
			}
		}
	}
	return nil
}

// scatter returns the scattering of the camera among the lit places; nil if there is none.
func (d *development) scatter() *camera.Scatter {
	return camera.NewScatter(d.c.s.Camera, d.c.Grid.Pixel*obs.Arcsec, d.wide.Nx, d.lit)
}
