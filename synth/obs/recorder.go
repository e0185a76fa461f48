package obs

import (
	"fmt"

	"offplane/synth/fits"
)

// A Recorder writes an observation whose frames come a part at a time, so that they are
// never held together. The file is that of WriteObservation.
type Recorder struct {
	path   string
	head   *Observation
	out    *fits.Writer
	mean   [2]*fits.CubeWriter
	frames [2]*fits.CubeWriter // nil where there are none
	row    int                 // of the image, the first that is not yet written
}

// CreateObservation begins the file of an observation, with its frames if asked for, of
// which head has all but the values of means, which may be any number, and frames, which
// may be without Data.
func CreateObservation(path string, head *Observation, primary fits.Header, frames bool) (*Recorder, error) {
	if err := head.check(frames); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if _, err := head.Grid.header(); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if head.Scenario != "" {
		primary = append(append(fits.Header{}, primary...), fits.Card{Key: "SCENSHA", Value: head.Scenario})
	}
	out, err := fits.Create(path, primary)
	if err != nil {
		return nil, err
	}
	w := &Recorder{path: path, head: head, out: out}
	err = w.reserveMeans()
	for _, t := range []fits.Table{head.tuningTable(), head.exposureTable()} {
		if err == nil {
			err = out.AddTable(t)
		}
	}
	if err == nil && frames {
		err = w.reserveFrames()
	}
	if err != nil {
		w.Abort()
		return nil, err
	}
	return w, nil
}

func (w *Recorder) reserveMeans() error {
	o, g := w.head, &w.head.Grid
	for line := 1; line <= 2; line++ {
		tunings := o.LineTunings(line)
		if len(tunings) == 0 {
			continue
		}
		h, err := o.lineHeader(tunings, "mean radiance through the filter", wavelengths(tunings))
		if err != nil {
			return err
		}
		if w.mean[line-1], err = w.out.Reserve(meanName(line), h, g.Nx, g.Ny, len(tunings)); err != nil {
			return err
		}
	}
	return nil
}

func (w *Recorder) reserveFrames() error {
	o, g := w.head, &w.head.Grid
	for line := 1; line <= 2; line++ {
		c, tunings, exposures := o.Frames[line-1], o.LineTunings(line), o.LineExposures(line)
		if c == nil || len(exposures) == 0 {
			continue
		}
		h, err := o.lineHeader(tunings, "radiance through the filter", wavelengths(tunings), times(exposures))
		if err != nil {
			return err
		}
		if w.frames[line-1], err = w.out.Reserve(framesName(line), h, g.Nx, g.Ny, c.Tunings, c.Frames); err != nil {
			return err
		}
	}
	return nil
}

// Add writes the frames of a part, an observation of all pixels in some rows of the image
// after those of the part before.
func (w *Recorder) Add(part *Observation) error {
	n := len(part.Pixels)
	if n == 0 {
		return nil
	}
	nx := w.head.Grid.Nx
	first, last := int(part.Pixels[0])/nx, int(part.Pixels[n-1])/nx
	if first < w.row || last >= w.head.Grid.Ny {
		return fmt.Errorf("%s: a part has rows %d to %d of the image, row %d comes next", w.path, first, last, w.row)
	}
	return w.rows(part, last+1)
}

// rows writes the frames up to a row.
func (w *Recorder) rows(part *Observation, to int) error {
	nx, ny := w.head.Grid.Nx, w.head.Grid.Ny
	some := blank((to - w.row) * nx)
	for l, out := range w.frames {
		if out == nil || len(some) == 0 {
			continue
		}
		c, size := part.Frames[l], w.head.Frames[l]
		if c == nil || c.Pixels != len(part.Pixels) || c.Tunings != size.Tunings || c.Frames != size.Frames {
			return fmt.Errorf("%s: a part has frames of another size than the head", w.path)
		}
		err := c.blocks(func(from, until int, planes [][]float32) error {
			for p := range c.Pixels {
				for k := range c.Tunings {
					for j, v := range c.Series(p, k)[from:until] {
						planes[j*c.Tunings+k][p] = v
					}
				}
			}
			for i, values := range planes {
				for j, p := range part.Pixels {
					some[int(p)-w.row*nx] = values[j]
				}
				if err := out.WriteAt(some, ((from*c.Tunings+i)*ny+w.row)*nx); err != nil {
					return err
				}
			}
			return nil
		})
		if err != nil {
			return err
		}
	}
	w.row = to
	return nil
}

// Close writes the means of the whole observation, of which the parts were, and finishes
// the file.
func (w *Recorder) Close(o *Observation) error {
	defer w.Abort()
	if err := o.check(false); err != nil {
		return fmt.Errorf("%s: %w", w.path, err)
	}
	rest := *w.head // the rows without pixels
	rest.Pixels, rest.Frames = nil, [2]*Cube{}
	for l, c := range w.head.Frames {
		if c != nil {
			rest.Frames[l] = NewCube(0, c.Tunings, c.Frames)
		}
	}
	if err := w.rows(&rest, w.head.Grid.Ny); err != nil {
		return err
	}
	size := o.Grid.Nx * o.Grid.Ny
	plane := blank(size)
	for l, out := range w.mean {
		if out == nil {
			continue
		}
		for k, mean := range o.Mean[l] {
			for i, p := range o.Pixels {
				plane[p] = mean[i]
			}
			if err := out.WriteAt(plane, k*size); err != nil {
				return err
			}
		}
	}
	return w.out.Close()
}

// Abort gives the file up; after Close it does nothing.
func (w *Recorder) Abort() { w.out.Abort() }
