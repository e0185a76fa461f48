// Package obs holds what the data side and the inversion share: the sky grid,
// two-dimensional maps and the observation. It never holds the truth.
//
// Conventions, stated here once for the whole program.
//
// Observer frame, solar radii: x toward the observer, y toward the west limb,
// z up (solar north on the sky), right-handed. The plane of the sky is x = 0.
// Lines of sight are parallel to x; a pixel at helioprojective (Tx, Ty) looks
// along y = D tan Tx, z = D tan Ty with D the observer's distance in solar
// radii. (The true rays converge by 0.36 deg at 1.35 solar radii and 1 au, which
// moves a sample 0.5 solar radii off the plane by 0.003 solar radii sideways.)
//
// Observer latitude B0 > 0 tips the north pole toward the observer. Position
// angle runs counter-clockwise from north: PA = atan2(-y, z); east is 90 deg.
// Doppler velocity is positive away from the observer: v = -v_x.
//
// Pixel (0, 0) of a slice is the first pixel of the file, whose centre is (1, 1)
// in FITS terms; raster index = iy*Nx + ix, x fastest. Units of maps are FITS
// unit strings; angles folded to 0..180 deg count like PA, counter-clockwise
// from north.
package obs

import (
	"math"
	"time"
)

// Arcsec is one second of arc in radians.
const Arcsec = math.Pi / 180 / 3600

// A Grid is a helioprojective image grid (Thompson 2006, A&A 449, 791).
type Grid struct {
	Nx, Ny             int
	Pixel              float64 // pixel pitch [arcsec], both axes
	CentreX, CentreY   float64 // FITS pixel coordinates of the disc centre
	Roll               float64 // PC-matrix rotation [deg]: angle from solar north to the image's +y, counter-clockwise
	Distance           float64 // observer distance [solar radii]
	Latitude           float64 // observer heliographic latitude B0 [deg]
	Longitude          float64 // observer heliographic longitude, Stonyhurst [deg]
	Start              time.Time
	Duration, Exposure float64 // of the whole observation, of one exposure [s]
	RestWavelength     float64 // rest wavelength in vacuum [nm] for the header; 0: none
}

// Sky returns the point of the plane of the sky seen by pixel (ix, iy), counted
// from zero: y toward west, z toward north, both in solar radii.
func (g *Grid) Sky(ix, iy int) (y, z float64) {
	return g.skyAt(float64(ix+1)-g.CentreX, float64(iy+1)-g.CentreY)
}

func (g *Grid) skyAt(dx, dy float64) (y, z float64) {
	s, c := math.Sincos(g.Roll * math.Pi / 180)
	// TAN projection about the disc centre: intermediate coordinates are the
	// tangents of the angles, so y = D tan Tx to first order in their product.
	k := g.Pixel * Arcsec * g.Distance
	return k * (c*dx - s*dy), k * (s*dx + c*dy)
}

// Step returns the pixel pitch in solar radii on the plane of the sky.
func (g *Grid) Step() float64 { return g.Pixel * Arcsec * g.Distance }

// PixelAt is the inverse of Sky: fractional zero-based pixel coordinates of the
// point (y, z) [solar radii] of the plane of the sky.
func (g *Grid) PixelAt(y, z float64) (px, py float64) {
	s, c := math.Sincos(g.Roll * math.Pi / 180)
	k := g.Pixel * Arcsec * g.Distance
	u, v := y/k, z/k
	return c*u + s*v + g.CentreX - 1, -s*u + c*v + g.CentreY - 1
}

// Helioprojective returns longitude and latitude [arcsec] of pixel (ix, iy): the inverse
// of the gnomonic projection about the disc centre (Thompson 2006).
func (g *Grid) Helioprojective(ix, iy int) (tx, ty float64) {
	y, z := g.Sky(ix, iy)
	y, z = y/g.Distance, z/g.Distance
	return math.Atan(y) / Arcsec, math.Atan2(z, math.Hypot(1, y)) / Arcsec
}

// Nearest is the inverse of Helioprojective: the pixel, zero-based, whose centre is nearest
// to longitude and latitude [arcsec]. It may lie outside the image.
func (g *Grid) Nearest(tx, ty float64) (ix, iy int) {
	s, c := math.Sincos(tx * Arcsec)
	px, py := g.PixelAt(g.Distance*s/c, g.Distance*math.Tan(ty*Arcsec)/c)
	return int(math.Round(px)), int(math.Round(py))
}

// Polar returns the projected distance from the disc centre [solar radii] and
// the position angle [deg, 0..360) of pixel (ix, iy).
func (g *Grid) Polar(ix, iy int) (r, pa float64) {
	y, z := g.Sky(ix, iy)
	pa = math.Atan2(-y, z) * 180 / math.Pi
	if pa < 0 {
		pa += 360
	}
	return math.Hypot(y, z), pa
}

// A Map is one two-dimensional image on a Grid, NaN where it has no value.
// Integer images (flags, codes) fill Ints and leave Data nil.
type Map struct {
	Name  string // EXTNAME: upper case
	Unit  string // FITS unit string; empty: a pure number
	About string // BTYPE: what the numbers are, for people
	Data  []float32
	Ints  []int32
	Codes []Code // meaning of the bits or codes of Ints, written to the header
}

// A Code names one bit (flags: Value is its mask) or one value (classes) of an integer
// map.
type Code struct {
	Value int32
	Name  string
	About string
}

// Maps is a list of maps on one grid, in file order.
type Maps []Map

// Get returns the map of that name, or nil.
func (ms Maps) Get(name string) *Map {
	for i := range ms {
		if ms[i].Name == name {
			return &ms[i]
		}
	}
	return nil
}

// A Tuning is one filter position of one line.
type Tuning struct {
	Line       int     // 1: 1074.7 nm, 2: 1079.8 nm
	Index      int     // from 0, in order of wavelength
	Wavelength float64 // vacuum [nm]
	Delay      float64 // start of this tuning after the frame's time [s]
	FilterFWHM float64 // full width at half maximum of the transmission [nm]; 0: not known
	Offset     float64 // Wavelength minus the rest wavelength [nm]
	Stages     int     // of a birefringent filter; 0: Gaussian transmission
}

// An Exposure is one frame of one line: what an observer's log would say.
type Exposure struct {
	Line       int
	Frame      int     // from 0, per line
	Time       float64 // of the frame since the start [s]
	Exposure   float64 // exposure of one tuning, co-adds included [s]; 0: the frame is lost, or nothing known if all are
	Electrons  float64 // detected electrons per unit radiance in one pixel and tuning; 0: noise not known; +Inf: no noise
	Background float64 // continuum that was measured as long and subtracted, mean over the field: its photon noise counts twice [unit of the frames]
	ReadNoise  float64 // rms of tuning and background together [electrons], co-adds included
}

// A Cube holds the frames of one line for the pixels of the field, time fastest.
type Cube struct {
	Pixels, Tunings, Frames int
	Data                    []float32
}

// NewCube returns a cube of zeros.
func NewCube(pixels, tunings, frames int) *Cube {
	return &Cube{pixels, tunings, frames, make([]float32, pixels*tunings*frames)}
}

// Means returns the mean per tuning and field pixel over the frames that are whole, which
// have a finite value at every tuning; NaN if there is none.
func Means(c *Cube) [][]float32 {
	out := make([][]float32, c.Tunings)
	for k := range out {
		out[k] = make([]float32, c.Pixels)
	}
	for p := range c.Pixels {
		whole := true
		for k := range c.Tunings {
			sum := 0.0
			for _, x := range c.Series(p, k) {
				sum += float64(x)
			}
			out[k][p] = float32(sum / float64(c.Frames))
			whole = whole && sum-sum == 0 // finite
		}
		if !whole {
			meanOfWhole(out, c, p)
		}
	}
	return out
}

// meanOfWhole fills in the means of a pixel some of whose frames are not whole.
func meanOfWhole(out [][]float32, c *Cube, p int) {
	sums, n := make([]float64, c.Tunings), 0.0
	for t := range c.Frames {
		whole := true
		for k := range sums {
			x := c.Series(p, k)[t]
			whole = whole && finite(x)
		}
		if !whole {
			continue
		}
		n++
		for k := range sums {
			sums[k] += float64(c.Series(p, k)[t])
		}
	}
	for k, sum := range sums {
		out[k][p] = float32(sum / n)
	}
}

// Series returns the time series of field pixel p at tuning k; it aliases the cube.
func (c *Cube) Series(p, k int) []float32 {
	i := (p*c.Tunings + k) * c.Frames
	return c.Data[i : i+c.Frames : i+c.Frames]
}

// An Observation is what an observer holds: frames of background-subtracted
// radiance through the filter, and the log. Index 0 of the arrays over lines is
// the 1074.7 nm line, index 1 the 1079.8 nm line.
type Observation struct {
	Grid      Grid
	Pixels    []int32 // raster indices of the pixels of the field, ascending
	Unit      string  // of the frames
	Tunings   []Tuning
	Exposures []Exposure
	Mean      [2][][]float32 // mean over frames: line, tuning, field pixel
	Frames    [2]*Cube       // nil where frames are not kept
	// A user's own maps over the field, in place of a second line; nil as a rule.
	Density  []float32 // electron density [cm^-3]
	Ratio    []float32 // of the lines' energies, second over first
	Scenario string    // SHA-256 of the scenario that made it; empty for real data
}

// LineTunings returns the tunings of line (1 or 2) in order of wavelength.
func (o *Observation) LineTunings(line int) []Tuning {
	var ts []Tuning
	for _, t := range o.Tunings {
		if t.Line == line {
			ts = append(ts, t)
		}
	}
	return ts
}

// LineExposures returns the exposures of line (1 or 2) in order of time.
func (o *Observation) LineExposures(line int) []Exposure {
	var es []Exposure
	for _, e := range o.Exposures {
		if e.Line == line {
			es = append(es, e)
		}
	}
	return es
}
