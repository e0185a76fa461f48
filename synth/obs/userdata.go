package obs

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/scenarios/units"
	"offplane/synth/fits"
)

const lightSpeed = units.LightSpeed / 1e5 // [km/s]

// UserData names the files of somebody's own observation, each as FILE or FILE[EXT],
// and says what their headers do not. Only First is needed.
type UserData struct {
	// First holds tunings of the first line (x, y, wavelength, time; the last two in
	// either order), background subtracted, or Doppler shifts (x, y, time).
	First   string
	Second  string // tunings of the second line (x, y, wavelength) or with time
	Density string // map of the electron density [cm-3 or m-3], in place of Second
	Ratio   string // map of the ratio of the lines' energies, second over first, in place of Second

	Axes        []string     // what the axes of First are: x, y, wavelength, time; nil: as CTYPEn say
	Wavelengths [2][]float64 // of the tunings by line, in vacuum, ascending [nm]; nil: the header's
	Shift       [2]float64   // true wavelength minus that of the header or Wavelengths, by line [nm]
	Rest        [2]float64   // rest wavelengths in vacuum [nm], of the atomic data
	FilterFWHM  float64      // of the transmission [nm]; 0: not known
	Stages      int          // of a birefringent filter; 0: Gaussian
	Times       []float64    // of the frames [s]; nil: as Cadence says
	Cadence     float64      // [s]; 0: the column time of a table TIMES, or the header's
	Unit        string       // of Doppler shifts: km/s, m/s, cm/s or nm; empty: BUNIT
	Electrons   float64      // detected electrons per unit of the frames; 0: not known
}

// IsObservation reports whether a file was written by WriteObservation; one image of a
// file, FILE[EXT], never was.
func IsObservation(name string) (bool, error) {
	path, ext, err := splitName(name)
	if err != nil {
		return false, err
	}
	f, err := fits.Open(path)
	if err != nil {
		return false, err
	}
	defer f.Close()
	if ext != "" {
		return false, nil
	}
	for _, h := range f.HDUs {
		if strings.EqualFold(h.Name, "TUNINGS") {
			return true, nil
		}
	}
	return false, nil
}

// ReadUserData reads somebody's own observation. The field is made of the pixels off the
// limb that have values. Frames without any value stay as gaps, up to a quarter of them.
func ReadUserData(u UserData) (*Observation, error) {
	c, err := u.open(u.First, u.Axes)
	if err != nil {
		return nil, err
	}
	defer c.file.Close()
	o := &Observation{Grid: c.grid}
	frames := c.length("time")
	if c.at["time"] == 0 {
		return nil, fmt.Errorf("%s: has no time axis: axes are %s; want x, y, wavelength, time, or x, y, time for Doppler shifts", c.name, c.axesText())
	}
	if frames < 2 {
		return nil, fmt.Errorf("%s: has one frame along its time axis %d: a time series needs many", c.name, c.at["time"])
	}
	times, err := u.times(c, frames)
	if err != nil {
		return nil, err
	}
	for i, t := range times {
		o.Exposures = append(o.Exposures, Exposure{Line: 1, Frame: i, Time: t, Exposure: c.grid.Exposure, Electrons: u.Electrons})
	}
	o.Grid.Duration = times[frames-1] - times[0]
	tunings := 1
	scale := 1.0
	if c.at["wavelength"] != 0 {
		ts, err := u.tunings(c, 1)
		if err != nil {
			return nil, err
		}
		o.Tunings, tunings = ts, len(ts)
		o.Unit, _ = c.Header.Text("BUNIT")
	} else {
		if scale, err = u.velocity(c); err != nil {
			return nil, err
		}
		o.Unit = "km/s"
	}
	if err := o.readUserFrames(c, tunings, frames, scale); err != nil {
		return nil, err
	}
	if tunings > 1 {
		o.Mean[0] = Means(o.Frames[0])
	}
	return o, u.readRest(o)
}

// readRest reads second line, density and ratio.
func (u *UserData) readRest(o *Observation) error {
	if u.Second != "" {
		c, err := u.open(u.Second, nil)
		if err != nil {
			return err
		}
		defer c.file.Close()
		if !c.grid.sameFrame(&o.Grid) {
			return fmt.Errorf("%s: not on the grid of %s", c.name, u.First)
		}
		if c.at["wavelength"] == 0 {
			return fmt.Errorf("%s: has no wavelength axis: axes are %s; want x, y, wavelength", c.name, c.axesText())
		}
		ts, err := u.tunings(c, 2)
		if err != nil {
			return err
		}
		o.Tunings = append(o.Tunings, ts...)
		frames := max(c.length("time"), 1)
		cube := NewCube(len(o.Pixels), len(ts), frames)
		if err := c.scatter(o.Pixels, cube, 1, nil); err != nil {
			return err
		}
		o.Mean[1] = Means(cube)
		for i := range frames {
			// Evenly over the first line's: only their number matters to the noise.
			o.Exposures = append(o.Exposures, Exposure{Line: 2, Frame: i, Time: o.Grid.Duration * float64(i) / float64(frames), Exposure: c.grid.Exposure, Electrons: u.Electrons})
		}
	}
	for _, m := range []struct {
		path, key string
		to        *[]float32
		units     map[string]float64
	}{
		{u.Density, "density", &o.Density, map[string]float64{"cm-3": 1, "cm^-3": 1, "cm**-3": 1, "1/cm3": 1, "m-3": 1e-6, "m^-3": 1e-6, "m**-3": 1e-6, "1/m3": 1e-6}},
		{u.Ratio, "ratio", &o.Ratio, map[string]float64{"": 1, "1": 1, "%": 0.01}},
	} {
		if m.path == "" {
			continue
		}
		file, ext, err := splitName(m.path)
		if err != nil {
			return err
		}
		g, img, err := ReadMap(file, ext)
		if err != nil {
			return err
		}
		if !g.sameFrame(&o.Grid) {
			return fmt.Errorf("%s: the %s map is not on the grid of %s", m.path, m.key, u.First)
		}
		scale, ok := m.units[strings.ReplaceAll(img.Unit, " ", "")]
		if !ok {
			return fmt.Errorf("%s: BUNIT is %q: a %s map has to be in %s", m.path, img.Unit, m.key, map[string]string{"density": "cm-3 or m-3", "ratio": "no unit, or %"}[m.key])
		}
		data := img.Floats()
		*m.to = make([]float32, len(o.Pixels))
		for p, i := range o.Pixels {
			(*m.to)[p] = float32(scale * float64(data[i]))
		}
	}
	return nil
}

// userCube is an opened cube with its axes known.
type userCube struct {
	*fits.Cube
	file *fits.File
	name string
	grid Grid
	axes []string
	at   map[string]int // axis number from 1; 0: none
}

func splitName(s string) (file, ext string, err error) {
	if !strings.HasSuffix(s, "]") {
		return s, "", nil
	}
	i := strings.LastIndexByte(s, '[')
	if i <= 0 {
		return "", "", fmt.Errorf("%s: want FILE or FILE[EXT]", s)
	}
	return s[:i], s[i+1 : len(s)-1], nil
}

func (c *userCube) axesText() string { return strings.Join(c.axes, ", ") }

func (c *userCube) length(axis string) int {
	if i := c.at[axis]; i > 0 {
		return c.Axes[i-1]
	}
	return 0
}

func (u *UserData) open(name string, axes []string) (*userCube, error) {
	file, ext, err := splitName(name)
	if err != nil {
		return nil, err
	}
	f, err := fits.Open(file)
	if err != nil {
		return nil, err
	}
	c := &userCube{file: f, name: name, at: map[string]int{}}
	if c.Cube, err = f.Cube(ext); err == nil {
		err = c.recognise(axes)
	}
	if err != nil {
		f.Close()
		return nil, err
	}
	return c, nil
}

var axisKinds = []struct{ prefix, name string }{
	{"HPLN", "x"}, {"HPLT", "y"}, {"SOLAR-X", "x"}, {"SOLAR_X", "x"}, {"SOLAR-Y", "y"}, {"SOLAR_Y", "y"},
	{"WAVE", "wavelength"}, {"AWAV", "wavelength"}, {"UTC", "time"}, {"TIME", "time"}, {"TAI", "time"},
}

// recognise finds out what the axes are and reads the grid.
func (c *userCube) recognise(axes []string) error {
	const numpy = "a numpy array is written with its axes in reverse, so its shape has to be (time, wavelength, y, x)"
	n := len(c.Axes)
	if axes != nil && len(axes) != n {
		return fmt.Errorf("%s: axes %s are %d, the cube has %d", c.name, strings.Join(axes, ","), len(axes), n)
	}
	for i := range n {
		kind, _ := c.Header.Text(fmt.Sprintf("CTYPE%d", i+1))
		name := ""
		if axes != nil {
			name = axes[i]
			if !slices.Contains([]string{"x", "y", "wavelength", "time"}, name) {
				return fmt.Errorf("%s: axis %d is called %q: want x, y, wavelength or time", c.name, i+1, name)
			}
		} else {
			for _, k := range axisKinds {
				if strings.HasPrefix(strings.ToUpper(strings.TrimSpace(kind)), k.prefix) {
					name = k.name
				}
			}
		}
		if name == "" {
			if c.Axes[i] == 1 {
				c.axes = append(c.axes, "(none)")
				continue
			}
			return fmt.Errorf("%s: axis %d of length %d has CTYPE%d %q: want HPLN-TAN, HPLT-TAN, WAVE or AWAV, UTC or TIME; or say what the axes are, such as x,y,wavelength,time", c.name, i+1, c.Axes[i], i+1, kind)
		}
		if at := c.at[name]; at > 0 {
			return fmt.Errorf("%s: axes %d and %d are both %s", c.name, at, i+1, name)
		}
		c.at[name] = i + 1
		c.axes = append(c.axes, name)
	}
	if c.at["x"] != 1 || c.at["y"] != 2 {
		what := "x and y have to be the first two axes"
		if c.at["x"] == 2 && c.at["y"] == 1 {
			what = "x and y are swapped"
		}
		return fmt.Errorf("%s: axes are %s: %s; %s", c.name, c.axesText(), what, numpy)
	}
	h := append(fits.Header{}, c.Header...)
	h.Set("CTYPE1", "HPLN-TAN", "")
	h.Set("CTYPE2", "HPLT-TAN", "")
	var err error
	if c.grid, err = readGrid(h, c.Axes[:2]); err != nil {
		return fmt.Errorf("%s: %w", c.name, err)
	}
	if _, ok := c.Header.Float("CRPIX1"); !ok {
		return fmt.Errorf("%s: CRPIX1 is missing: where the Sun's centre lies is not known", c.name)
	}
	return nil
}

// linear returns the coordinates along an axis in the unit of units that stands first.
func (c *userCube) linear(axis string, units map[string]float64, missing string) ([]float64, error) {
	i := c.at[axis]
	key := func(s string) string { return fmt.Sprintf("%s%d", s, i) }
	for j := range c.Axes {
		for _, kind := range []string{"PC", "CD"} {
			if v, ok := c.Header.Float(fmt.Sprintf("%s%d_%d", kind, i, j+1)); ok && j+1 != i && v != 0 {
				return nil, fmt.Errorf("%s: %s%d_%d is %g: the %s axis may not depend on another", c.name, kind, i, j+1, v, axis)
			}
		}
	}
	// CDi_i replaces CDELTi, PCi_i multiplies it (Greisen & Calabretta 2002, A&A 395, 1061).
	step, ok := c.Header.Float(fmt.Sprintf("CD%d_%d", i, i))
	if !ok {
		if step, ok = c.Header.Float(key("CDELT")); !ok {
			return nil, fmt.Errorf("%s: %s is missing: %s", c.name, key("CDELT"), missing)
		}
		if v, ok := c.Header.Float(fmt.Sprintf("PC%d_%d", i, i)); ok {
			step *= v
		}
	}
	unit, _ := c.Header.Text(key("CUNIT"))
	scale, ok := units[strings.ToLower(strings.TrimSpace(unit))]
	if !ok {
		return nil, fmt.Errorf("%s: %s is %q: %s", c.name, key("CUNIT"), unit, missing)
	}
	at, _ := c.Header.Float(key("CRVAL"))
	ref, _ := c.Header.Float(key("CRPIX"))
	out := make([]float64, c.Axes[i-1])
	for k := range out {
		out[k] = scale * (at + (float64(k+1)-ref)*step)
	}
	return out, nil
}

func (u *UserData) tunings(c *userCube, line int) ([]Tuning, error) {
	n := c.length("wavelength")
	w := u.Wavelengths[line-1]
	if w != nil && len(w) != n {
		return nil, fmt.Errorf("%s: %d wavelengths are given, the wavelength axis %d has %d", c.name, len(w), c.at["wavelength"], n)
	}
	if n < 3 {
		return nil, fmt.Errorf("%s: the wavelength axis %d has %d tunings: a line profile needs three or more", c.name, c.at["wavelength"], n)
	}
	if w == nil {
		var err error
		// Metres are the default of the standard (Greisen et al. 2006, A&A 446, 747).
		w, err = c.linear("wavelength", map[string]float64{"nm": 1, "angstrom": 0.1, "a": 0.1, "um": 1e3, "m": 1e9, "": 1e9},
			"the wavelengths of the tunings are not known; want a linear axis in nm, Angstrom, um or m, or the wavelengths themselves")
		if err != nil {
			return nil, err
		}
		if kind, _ := c.Header.Text(fmt.Sprintf("CTYPE%d", c.at["wavelength"])); strings.HasPrefix(strings.ToUpper(kind), "AWAV") {
			for k := range w {
				w[k] = vacuum(w[k])
			}
		}
	}
	rest := u.Rest[line-1]
	ts := make([]Tuning, n)
	for k, x := range w {
		x += u.Shift[line-1]
		if k > 0 && !(x > ts[k-1].Wavelength) {
			return nil, fmt.Errorf("%s: tuning %d is at %g nm, the one before at %g nm: wavelengths have to ascend", c.name, k+1, x, ts[k-1].Wavelength)
		}
		ts[k] = Tuning{Line: line, Index: k, Wavelength: x, Offset: x - rest, FilterFWHM: u.FilterFWHM, Stages: u.Stages}
	}
	if first, last := ts[0].Wavelength, ts[n-1].Wavelength; first > rest || last < rest {
		return nil, fmt.Errorf("%s: tunings from %.3f to %.3f nm in vacuum do not enclose line %d at %.3f nm", c.name, first, last, line, rest)
	}
	return ts, nil
}

// vacuum returns the vacuum wavelength of one in air [nm] (refractive index of Morton
// 2000, ApJS 130, 403, from memory).
func vacuum(air float64) float64 {
	w := air
	for range 4 {
		s := 1e3 / w // [1/um]
		w = air * (1 + 8.34254e-5 + 2.406147e-2/(130-s*s) + 1.5998e-4/(38.9-s*s))
	}
	return w
}

func (u *UserData) times(c *userCube, frames int) ([]float64, error) {
	times := slices.Clone(u.Times)
	if times == nil && u.Cadence != 0 {
		for i := range frames {
			times = append(times, u.Cadence*float64(i))
		}
	}
	if times == nil {
		for _, h := range c.file.HDUs {
			if strings.EqualFold(h.Name, "TIMES") {
				t, err := c.file.Table(h.Name)
				if err != nil {
					return nil, err
				}
				if times, err = t.Floats("time"); err != nil {
					return nil, err
				}
				unit := t.Unit("time")
				scale, ok := timeUnits[strings.ToLower(unit)]
				if !ok {
					return nil, fmt.Errorf("%s: column time of table TIMES is in %q; want s, ms, min, h or d", c.name, unit)
				}
				for i := range times {
					times[i] *= scale
				}
			}
		}
	}
	if times == nil {
		var err error
		times, err = c.linear("time", timeUnits,
			"the times of the frames are not known; want a linear axis in s, min, h or d, a table TIMES with a column time [s], or the cadence")
		if err != nil {
			return nil, err
		}
	}
	if len(times) != frames {
		return nil, fmt.Errorf("%s: %d times are given, the time axis %d has %d frames", c.name, len(times), c.at["time"], frames)
	}
	from := times[0]
	for i := range times {
		times[i] -= from
		if !(times[i] >= 0) || i > 0 && !(times[i] > times[i-1]) {
			return nil, fmt.Errorf("%s: frame %d is at %g s, the one before at %g s: times have to ascend", c.name, i+1, times[i]+from, times[max(i-1, 0)]+from)
		}
	}
	return times, nil
}

// timeUnits in seconds, which are the default of the standard.
var timeUnits = map[string]float64{"s": 1, "": 1, "ms": 1e-3, "min": 60, "h": 3600, "d": 86400}

// velocity returns the factor from Doppler shifts of the file to km/s.
func (u *UserData) velocity(c *userCube) (float64, error) {
	unit := u.Unit
	if unit == "" {
		unit, _ = c.Header.Text("BUNIT")
	}
	switch strings.ReplaceAll(strings.ToLower(unit), " ", "") {
	case "km/s", "kms-1", "kms^-1", "km.s-1", "kms**-1":
		return 1, nil
	case "m/s", "ms-1", "ms^-1", "m.s-1", "ms**-1":
		return 1e-3, nil
	case "cm/s", "cms-1", "cms^-1", "cms**-1":
		return 1e-5, nil
	case "nm":
		return lightSpeed / u.Rest[0], nil
	}
	return 0, fmt.Errorf("%s: without a wavelength axis this has to be a cube of Doppler shifts, but BUNIT is %q: want km/s, m/s, cm/s or nm", c.name, unit)
}

// planes calls do with every plane, its tuning and frame.
func (c *userCube) planes(do func(tuning, frame int, plane []float32)) error {
	plane := make([]float32, c.Axes[0]*c.Axes[1])
	for i := range c.Planes() {
		if err := c.ReadPlane(i, plane); err != nil {
			return err
		}
		index, rest := map[string]int{}, i
		for a := 2; a < len(c.Axes); a++ {
			index[c.axes[a]] = rest % c.Axes[a]
			rest /= c.Axes[a]
		}
		do(index["wavelength"], index["time"], plane)
	}
	return nil
}

// scatter puts the pixels of the field into a cube; seen, if not nil, counts the values
// of every frame.
func (c *userCube) scatter(pixels []int32, cube *Cube, scale float64, seen []int) error {
	return c.planes(func(k, i int, plane []float32) {
		for p, at := range pixels {
			v := float32(scale * float64(plane[at]))
			cube.Data[(p*cube.Tunings+k)*cube.Frames+i] = v
			if seen != nil && finite(v) && v != 0 {
				seen[i]++
			}
		}
	})
}

func finite(v float32) bool { return !math.IsNaN(float64(v)) && !math.IsInf(float64(v), 0) }

// readUserFrames finds the field and fills the frames of the first line.
func (o *Observation) readUserFrames(c *userCube, tunings, frames int, scale float64) error {
	g := &o.Grid
	count := make([]int, g.Nx*g.Ny)
	if err := c.planes(func(_, _ int, plane []float32) {
		for i, v := range plane {
			if finite(v) && v != 0 { // zeros fill what was not observed
				count[i]++
			}
		}
	}); err != nil {
		return err
	}
	any := false
	for i, n := range count {
		any = any || n > 0
		if r, _ := g.Polar(i%g.Nx, i/g.Nx); n > tunings*frames/4 && r > 1 {
			o.Pixels = append(o.Pixels, int32(i))
		}
	}
	switch {
	case !any:
		return fmt.Errorf("%s: holds no values but zeros and NaN", c.name)
	case len(o.Pixels) == 0:
		y0, z0 := g.Sky(0, 0)
		y1, z1 := g.Sky(g.Nx-1, g.Ny-1)
		return fmt.Errorf("%s: no pixel off the limb has values in a quarter of the frames; by the header the image reaches from (%.2f, %.2f) to (%.2f, %.2f) solar radii west and north of the Sun's centre", c.name, y0, z0, y1, z1)
	}
	o.Frames[0] = NewCube(len(o.Pixels), tunings, frames)
	seen := make([]int, frames)
	if err := c.scatter(o.Pixels, o.Frames[0], scale, seen); err != nil {
		return err
	}
	if tunings > 1 {
		o.Frames[0].blank()
	}
	var empty []string
	for i, n := range seen {
		if n == 0 {
			empty = append(empty, fmt.Sprint(i+1))
			for p := range o.Pixels { // zeros are no shifts where all are
				o.Frames[0].Data[p*tunings*frames+i] = float32(math.NaN())
			}
		}
	}
	if 4*len(empty) > frames {
		return fmt.Errorf("%s: %d of %d frames hold no value, among them %s: at most a quarter may be missing", c.name, len(empty), frames, strings.Join(empty[:min(len(empty), 5)], ", "))
	}
	return nil
}

// blank makes NaN of what is zero at every tuning.
func (c *Cube) blank() {
	for p := range c.Pixels {
		for i := range c.Frames {
			dark := true
			for k := range c.Tunings {
				dark = dark && c.Series(p, k)[i] == 0
			}
			for k := 0; dark && k < c.Tunings; k++ {
				c.Series(p, k)[i] = float32(math.NaN())
			}
		}
	}
}
