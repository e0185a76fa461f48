package obs

import (
	"fmt"
	"math"

	"offplane/synth/fits"
)

// blockFrames is the number of frames that are turned between pixel-major and
// frame-major order at once: the buffer stays small beside the cube, and each
// series is touched in whole cache lines.
const blockFrames = 16

// WriteObservation writes an observation: LINE1_MEAN and LINE2_MEAN (x, y,
// wavelength), the tables TUNINGS and EXPOSURES, and with frames also LINE1 and
// LINE2, if it was kept (x, y, wavelength, time). Pixels of the field are finite, all others
// NaN. The tables have authority over the linear axes of the headers. Of the
// scenario only its SHA-256 goes into the file.
//
// Every mean of the first line must be finite: that is how the field is found
// again.
func WriteObservation(path string, o *Observation, primary fits.Header, frames bool) error {
	w, err := CreateObservation(path, o, primary, frames)
	if err != nil {
		return err
	}
	defer w.Abort()
	if err := w.Add(o); err != nil {
		return err
	}
	return w.Close(o)
}

// check returns an error if the parts of an observation do not fit each other.
func (o *Observation) check(frames bool) error {
	for i, p := range o.Pixels {
		if p < 0 || int(p) >= o.Grid.Nx*o.Grid.Ny || i > 0 && p <= o.Pixels[i-1] {
			return fmt.Errorf("pixel %d: raster indices must ascend within the %d x %d image", p, o.Grid.Nx, o.Grid.Ny)
		}
	}
	count := 0
	for line := 1; line <= 2; line++ {
		tunings, exposures := o.LineTunings(line), o.LineExposures(line)
		count += len(tunings) + len(exposures)
		for i, t := range tunings {
			if t.Index != i || !(t.Wavelength > 0) || i > 0 && t.Wavelength <= tunings[i-1].Wavelength {
				return fmt.Errorf("TUNINGS: line %d, index %d, %g nm: wavelengths must ascend, indices run from 0", line, t.Index, t.Wavelength)
			}
		}
		for i, e := range exposures {
			if e.Frame != i || math.IsNaN(e.Time) || i > 0 && e.Time <= exposures[i-1].Time {
				return fmt.Errorf("EXPOSURES: line %d, frame %d, %g s: times must ascend, frames run from 0", line, e.Frame, e.Time)
			}
		}
		mean := o.Mean[line-1]
		if len(mean) != len(tunings) {
			return fmt.Errorf("LINE%d_MEAN: %d planes for %d tunings", line, len(mean), len(tunings))
		}
		for k := range mean {
			if len(mean[k]) != len(o.Pixels) {
				return fmt.Errorf("LINE%d_MEAN: %d pixels at tuning %d, the field has %d", line, len(mean[k]), k, len(o.Pixels))
			}
			for p, v := range mean[k] {
				if line == 1 && (math.IsNaN(float64(v)) || math.IsInf(float64(v), 0)) {
					return fmt.Errorf("LINE1_MEAN: pixel %d of the field is %v at tuning %d", o.Pixels[p], v, k)
				}
			}
		}
		c := o.Frames[line-1]
		if frames && line == 1 && c == nil {
			return fmt.Errorf("LINE1: the frames were not kept")
		}
		if c != nil && (c.Pixels != len(o.Pixels) || c.Tunings != len(tunings) || c.Frames != len(exposures)) {
			return fmt.Errorf("LINE%d: %d pixels, %d tunings, %d frames; the field and the tables have %d, %d, %d", line,
				c.Pixels, c.Tunings, c.Frames, len(o.Pixels), len(tunings), len(exposures))
		}
	}
	if len(o.LineTunings(1)) == 0 {
		return fmt.Errorf("TUNINGS: none of line 1")
	}
	if count != len(o.Tunings)+len(o.Exposures) {
		return fmt.Errorf("TUNINGS or EXPOSURES: line must be 1 or 2")
	}
	return nil
}

// wavelengths returns the linear axis closest to the tunings.
func wavelengths(tunings []Tuning) axis {
	a := axis{kind: "WAVE", unit: "nm", at: tunings[0].Wavelength, step: 1, about: "vacuum; exact values in table TUNINGS"}
	if n := len(tunings) - 1; n > 0 {
		a.step = (tunings[n].Wavelength - a.at) / float64(n)
	}
	return a
}

// times returns the linear axis closest to the frames.
func times(exposures []Exposure) axis {
	a := axis{kind: "UTC", unit: "s", at: exposures[0].Time, step: 1, about: "since DATEREF; exact values in EXPOSURES"}
	if n := len(exposures) - 1; n > 0 {
		a.step = (exposures[n].Time - a.at) / float64(n)
	}
	return a
}

// lineHeader returns the cards of a cube of one line.
func (o *Observation) lineHeader(tunings []Tuning, about string, axes ...axis) (fits.Header, error) {
	var h fits.Header
	if o.Unit != "" {
		h.Set("BUNIT", o.Unit, "")
	}
	h.Set("BTYPE", about, "")
	g := o.Grid
	if w := tunings[0].Wavelength - tunings[0].Offset; w > 0 && tunings[0].Line == 2 {
		g.RestWavelength = w
	}
	cards, err := g.header(axes...)
	return append(h, cards...), err
}

func blank(n int) []float32 {
	plane := make([]float32, n)
	for i := range plane {
		plane[i] = float32(math.NaN())
	}
	return plane
}

// blocks calls do for one block of frames after the other, with a buffer of one
// row of field pixels for each frame and tuning in file order.
func (c *Cube) blocks(do func(from, to int, planes [][]float32) error) error {
	planes := make([][]float32, min(blockFrames, c.Frames)*c.Tunings)
	for i := range planes {
		planes[i] = make([]float32, c.Pixels)
	}
	for from := 0; from < c.Frames; from += blockFrames {
		to := min(from+blockFrames, c.Frames)
		if err := do(from, to, planes[:(to-from)*c.Tunings]); err != nil {
			return err
		}
	}
	return nil
}

func (o *Observation) tuningTable() fits.Table {
	n := len(o.Tunings)
	line, index, stages := make([]int32, n), make([]int32, n), make([]int32, n)
	wavelength, delay, fwhm, offset := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i, t := range o.Tunings {
		line[i], index[i] = int32(t.Line), int32(t.Index)
		wavelength[i], delay[i], fwhm[i], offset[i] = t.Wavelength, t.Delay, t.FilterFWHM, t.Offset
		stages[i] = int32(t.Stages)
	}
	return fits.Table{Name: "TUNINGS", Columns: []fits.Column{
		{Name: "line", About: "1: 1074.7 nm, 2: 1079.8 nm", Data: line},
		{Name: "index", About: "from 0, along axis 3", Data: index},
		{Name: "wavelength_nm", Unit: "nm", About: "in vacuum", Data: wavelength},
		{Name: "delay_s", Unit: "s", About: "start after the time of the frame", Data: delay},
		{Name: "filter_fwhm_nm", Unit: "nm", About: "of the transmission; 0: not known", Data: fwhm},
		{Name: "offset_nm", Unit: "nm", About: "from the rest wavelength", Data: offset},
		{Name: "stages", About: "of a birefringent filter; 0: Gaussian", Data: stages},
	}}
}

func (o *Observation) exposureTable() fits.Table {
	n := len(o.Exposures)
	line, frame := make([]int32, n), make([]int32, n)
	time, exposure, electrons, background, noise := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i, e := range o.Exposures {
		line[i], frame[i] = int32(e.Line), int32(e.Frame)
		time[i], exposure[i], electrons[i], background[i], noise[i] = e.Time, e.Exposure, e.Electrons, e.Background, e.ReadNoise
	}
	return fits.Table{Name: "EXPOSURES", Columns: []fits.Column{
		{Name: "line", About: "1: 1074.7 nm, 2: 1079.8 nm", Data: line},
		{Name: "frame", About: "from 0, along axis 4", Data: frame},
		{Name: "time_s", Unit: "s", About: "of the frame, since DATEREF", Data: time},
		{Name: "exposure_s", Unit: "s", About: "of one tuning, co-adds included; 0: lost", Data: exposure},
		{Name: "electrons", About: "per unit of the frames; 0: noise not known", Data: electrons},
		{Name: "background", Unit: o.Unit, About: "continuum that was subtracted", Data: background},
		{Name: "read_noise", About: "electrons rms, co-adds included", Data: noise},
	}}
}

// ReadObservation reads an observation. It needs no more than the images with
// their names and world coordinates and the tables TUNINGS (line, index,
// wavelength_nm, delay_s, offset_nm) and EXPOSURES (line, frame, time_s,
// exposure_s): other columns default to 0, other cards to nothing known, a
// missing observer to 1 au, a missing start to the zero time. The field is what is finite
// in every plane of LINE1_MEAN. Frames stay nil where the file has none; means that it does
// not have are made of its frames.
func ReadObservation(path string) (*Observation, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	o := &Observation{}
	if err := o.readTables(f); err != nil {
		return nil, err
	}
	o.Scenario, _ = f.HDUs[0].Header.Text("SCENSHA")
	for line := 1; line <= 2; line++ {
		if line == 2 && len(o.LineTunings(line)) == 0 {
			continue
		}
		read := o.readMean
		if !has(f, meanName(line)) && has(f, framesName(line)) {
			read = o.readField
		}
		if err := read(f, line); err != nil {
			return nil, err
		}
	}
	for line := 1; line <= 2; line++ {
		if err := o.readFrames(f, line); err != nil {
			return nil, err
		}
		if c := o.Frames[line-1]; c != nil && o.Mean[line-1] == nil {
			o.Mean[line-1] = Means(c)
		}
	}
	if err := o.check(false); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return o, nil
}

// columns reads numeric columns; those after required default to 0.
func columns(f *fits.File, table string, required int, names ...string) (out [][]float64, rows int, err error) {
	t, err := f.Table(table)
	if err != nil {
		return nil, 0, err
	}
	for i, name := range names {
		c, err := t.Floats(name)
		if err != nil && i >= required {
			c, err = make([]float64, rows), nil
		}
		if err != nil {
			return nil, 0, err
		}
		for j, v := range c {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, 0, fmt.Errorf("%s[%s]: row %d: %s is %v", f.Name, table, j+1, name, v)
			}
		}
		out, rows = append(out, c), len(c)
	}
	return out, rows, nil
}

func (o *Observation) readTables(f *fits.File) error {
	c, n, err := columns(f, "TUNINGS", 5, "line", "index", "wavelength_nm", "delay_s", "offset_nm", "filter_fwhm_nm", "stages")
	if err != nil {
		return err
	}
	for i := range n {
		o.Tunings = append(o.Tunings, Tuning{Line: int(c[0][i]), Index: int(c[1][i]), Wavelength: c[2][i], Delay: c[3][i], Offset: c[4][i], FilterFWHM: c[5][i], Stages: int(c[6][i])})
	}
	c, n, err = columns(f, "EXPOSURES", 4, "line", "frame", "time_s", "exposure_s", "electrons", "background", "read_noise")
	if err != nil {
		return err
	}
	for i := range n {
		o.Exposures = append(o.Exposures, Exposure{Line: int(c[0][i]), Frame: int(c[1][i]), Time: c[2][i], Exposure: c[3][i], Electrons: c[4][i], Background: c[5][i], ReadNoise: c[6][i]})
	}
	return nil
}

func meanName(line int) string   { return fmt.Sprintf("LINE%d_MEAN", line) }
func framesName(line int) string { return fmt.Sprintf("LINE%d", line) }

func has(f *fits.File, name string) bool {
	for _, h := range f.HDUs {
		if h.Name == name && h.IsImage() {
			return true
		}
	}
	return false
}

// readField finds the field in the frames of a file without means: the pixels with a
// frame that is finite at every tuning.
func (o *Observation) readField(f *fits.File, line int) error {
	name := framesName(line)
	c, err := f.Cube(name)
	if err != nil {
		return err
	}
	where := fmt.Sprintf("%s[%s]", f.Name, name)
	tunings := o.LineTunings(line)
	if len(tunings) == 0 || c.Planes()%len(tunings) != 0 {
		return fmt.Errorf("%s: %d planes are no frames of %d tunings, which table TUNINGS has of line %d", where, c.Planes(), len(tunings), line)
	}
	g, err := readGrid(c.Header, c.Axes)
	if err != nil {
		return fmt.Errorf("%s: %w", where, err)
	}
	if line != 1 {
		if !g.sameFrame(&o.Grid) {
			return fmt.Errorf("%s: not on the grid of line 1", where)
		}
		return nil
	}
	planes := make([][]float32, len(tunings))
	for k := range planes {
		planes[k] = make([]float32, g.Nx*g.Ny)
	}
	seen := make([]bool, g.Nx*g.Ny)
	for i := 0; i < c.Planes(); i += len(planes) {
		for k, plane := range planes {
			if err := c.ReadPlane(i+k, plane); err != nil {
				return err
			}
		}
		for _, p := range field(planes) {
			seen[p] = true
		}
	}
	o.takeGrid(g, c.Header, tunings)
	for p, ok := range seen {
		if ok {
			o.Pixels = append(o.Pixels, int32(p))
		}
	}
	if len(o.Pixels) == 0 {
		return fmt.Errorf("%s: no pixel has a frame that is finite at every wavelength: the field is empty", where)
	}
	return nil
}

// takeGrid takes the grid of the first line.
func (o *Observation) takeGrid(g Grid, h fits.Header, tunings []Tuning) {
	o.Grid = g
	o.Unit, _ = h.Text("BUNIT")
	if _, ok := h.Get("TELAPSE"); !ok {
		o.fillGrid(tunings)
	}
}

func (o *Observation) readMean(f *fits.File, line int) error {
	name := meanName(line)
	c, err := f.Cube(name)
	if err != nil {
		return err
	}
	where := fmt.Sprintf("%s[%s]", f.Name, name)
	tunings := o.LineTunings(line)
	if len(tunings) == 0 || c.Planes() != len(tunings) {
		return fmt.Errorf("%s: %d planes, table TUNINGS has %d of line %d", where, c.Planes(), len(tunings), line)
	}
	g, err := readGrid(c.Header, c.Axes)
	if err != nil {
		return fmt.Errorf("%s: %w", where, err)
	}
	size := g.Nx * g.Ny
	planes := make([][]float32, len(tunings))
	for k := range planes {
		planes[k] = make([]float32, size)
		if err := c.ReadPlane(k, planes[k]); err != nil {
			return err
		}
	}
	if line == 1 {
		o.takeGrid(g, c.Header, tunings)
		o.Pixels = field(planes)
		if len(o.Pixels) == 0 {
			return fmt.Errorf("%s: no pixel is finite at every wavelength: the field is empty", where)
		}
	} else if !g.sameFrame(&o.Grid) {
		return fmt.Errorf("%s: not on the grid of LINE1_MEAN", where)
	}
	o.Mean[line-1] = make([][]float32, len(tunings))
	for k, plane := range planes {
		o.Mean[line-1][k] = make([]float32, len(o.Pixels))
		for i, p := range o.Pixels {
			o.Mean[line-1][k][i] = plane[p]
		}
	}
	return nil
}

// fillGrid takes from the tables what a stripped header has lost.
func (o *Observation) fillGrid(tunings []Tuning) {
	if o.Grid.RestWavelength == 0 {
		o.Grid.RestWavelength = tunings[0].Wavelength - tunings[0].Offset
	}
	es := o.LineExposures(1)
	if len(es) == 0 {
		return
	}
	last := es[len(es)-1]
	if o.Grid.Exposure == 0 {
		o.Grid.Exposure = es[0].Exposure
	}
	if o.Grid.Duration == 0 {
		o.Grid.Duration = last.Time + last.Exposure
	}
}

// field returns the raster indices that are finite in every plane.
func field(planes [][]float32) []int32 {
	var pixels []int32
	for p := range planes[0] {
		finite := true
		for _, plane := range planes {
			// x - x is 0 for finite x only.
			finite = finite && plane[p]-plane[p] == 0
		}
		if finite {
			pixels = append(pixels, int32(p))
		}
	}
	return pixels
}

func (o *Observation) readFrames(f *fits.File, line int) error {
	name := framesName(line)
	if !has(f, name) {
		return nil
	}
	in, err := f.Cube(name)
	if err != nil {
		return err
	}
	where := fmt.Sprintf("%s[%s]", f.Name, name)
	tunings, exposures := len(o.LineTunings(line)), len(o.LineExposures(line))
	if in.Axes[0] != o.Grid.Nx || in.Axes[1] != o.Grid.Ny || len(in.Axes) != 4 || in.Axes[2] != tunings || in.Axes[3] != exposures {
		return fmt.Errorf("%s: axes %v; the grid and the tables TUNINGS and EXPOSURES ask for %d, %d, %d, %d", where, in.Axes, o.Grid.Nx, o.Grid.Ny, tunings, exposures)
	}
	c := NewCube(len(o.Pixels), tunings, exposures)
	plane := make([]float32, o.Grid.Nx*o.Grid.Ny)
	err = c.blocks(func(from, to int, planes [][]float32) error {
		for i, values := range planes {
			if err := in.ReadPlane(from*tunings+i, plane); err != nil {
				return err
			}
			for i, p := range o.Pixels {
				values[i] = plane[p]
			}
		}
		for p := range c.Pixels {
			for k := range c.Tunings {
				series := c.Series(p, k)[from:to]
				for j := range series {
					series[j] = planes[j*tunings+k][p]
				}
			}
		}
		return nil
	})
	if err != nil {
		return err
	}
	o.Frames[line-1] = c
	return nil
}
