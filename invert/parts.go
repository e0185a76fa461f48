package invert

import (
	"context"
	"errors"
	"fmt"

	"offplane/synth/line"
	"offplane/synth/obs"
)

// An Inversion is Invert for an observation that comes a part at a time. Of each frame it
// keeps what lies in the band alone.
type Inversion struct {
	// MapsOnly leaves out the series of the result.
	MapsOnly bool

	run     *run
	emitter line.Emitter
	taken   []int32 // raster indices
}

// Begin prepares the inversion of an observation of which head has grid, field, tunings,
// log and the sizes of means and frames, but not yet their values: the frames may be
// without Data.
func Begin(head *obs.Observation, e line.Emitter, opt Options) (*Inversion, error) {
	r, err := newRun(head, e, opt)
	if err != nil {
		return nil, err
	}
	return &Inversion{run: r, emitter: e, taken: make([]int32, 0, len(head.Pixels))}, nil
}

// Take takes the next part, an observation of its own pixels. They follow those of the
// part before and are among those of the head, of which some may never come. Nothing of
// the part is kept.
func (v *Inversion) Take(ctx context.Context, part *obs.Observation, workers int) error {
	return v.take(ctx, part, workers, nil)
}

func (v *Inversion) take(ctx context.Context, part *obs.Observation, workers int, progress func(done, total int)) error {
	r, from := v.run, len(v.taken)
	to := from + len(part.Pixels)
	if c := part.Frames[0]; c == nil || c.Pixels != len(part.Pixels) || c.Tunings != r.cube.Tunings || c.Frames != r.cube.Frames {
		return errors.New("frames of a part are not of the size that was announced")
	}
	for i, p := range part.Pixels {
		if int(p) >= len(r.index) || p < 0 || r.index[p] < 0 || i > 0 && p <= part.Pixels[i-1] || i == 0 && from > 0 && p <= v.taken[from-1] {
			return fmt.Errorf("pixel %d of a part: raster indices have to ascend within the field", p)
		}
	}
	v.taken = append(v.taken, part.Pixels...)
	r.hire(workers) // their scratch sees the whole field
	f, row := *r.field, r.band.row
	f.pixels, f.spec, f.norm, f.flag = part.Pixels, r.spec[from*row:to*row], r.norm[from:to], r.flag[from:to]
	some := *r
	some.field, some.cube, some.variance, some.ratio = &f, part.Frames[0], r.variance[from:to], r.ratio[from:to]
	some.own.density, some.own.ratio = part.Density, part.Ratio
	for i, m := range r.means {
		if m != nil {
			its := *m
			its.data = part.Mean[i]
			some.means[i] = &its
		}
	}
	return some.steps(ctx, workers, progress, some.spectrum)
}

// stepsLeft is the number of steps of Finish.
const stepsLeft = 5

// Finish makes the maps and series of what was taken. Progress is that of Invert.
func (v *Inversion) Finish(ctx context.Context, workers int, progress func(done, total int)) (*Result, error) {
	r := v.run
	if n := len(v.taken); n < len(r.pixels) {
		r.pixels = v.taken
		for i := range r.index {
			r.index[i] = -1
		}
		for p, i := range r.pixels {
			r.index[i] = int32(p)
		}
		r.spec = r.spec[:n*r.band.row] // the others end with the pixels
		s := r.result.Series
		s.Pixels, s.Data = n, s.Data[:n*s.Frames]
		if r.inverter != nil { // its range is that of the field
			var err error
			if r.inverter, err = newInverter(v.emitter, r.opt.Temperature, r.field); err != nil {
				return nil, err
			}
		}
	}
	if v.MapsOnly {
		r.result.Series = nil
	}
	if err := r.removeTrend(ctx, workers); err != nil {
		return nil, err
	}
	if err := r.steps(ctx, workers, progress, r.normalise, r.direct, r.swing, r.sway, r.measure); err != nil {
		return nil, err
	}
	r.finish()
	return r.result, nil
}
