// Package compare reaches the verdict: how far the inferred maps are from the
// known corona, by height and by structure, and which factor of B is to blame.
//
// Every number names its truth, because there are several: the corona at the
// plane of the sky (sky), weighted by emission (emission), by wave power (wave),
// and the whole field vector rather than its projection (total). A pixel is valid
// when the inferred B is finite and positive; ratios are taken over the valid
// pixels of the field, and the valid fraction stands beside them. Without an
// inferred B (somebody's density map alone) every pixel of the field with the
// quantity counts.
package compare

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/compare/stat"
	"offplane/synth/ecsv"
	"offplane/synth/obs"
	"offplane/synth/parallel"
)

// Options say what cannot be read from the maps.
type Options struct {
	Scenario  string // name
	Seed      uint64
	Version   string // of the program
	SHA256    string // of the resolved scenario
	Text      string // the resolved scenario, byte for byte; may be empty
	Files     []File // that the scenario names
	Estimator string // of the phase speed

	Mu     float64 // rho / (m_p n_e) that the inversion assumed; 0: not known
	MuTrue float64 // of the corona; 0: not known

	// Plane is SPEED_PLANE [km/s], one number a pixel: what the same tracker finds in the
	// plane of the sky alone, without noise (trial.Plane). Nil: not known.
	Plane []float32

	Resampled []Resampled // maps that came from another grid

	// Edges of the height bins [solar radii], ascending. Nil: steps of 0.05 that
	// cover the field.
	Edges []float64
}

// A File is one file that a scenario names.
type File struct {
	Name   string `json:"name"` // without its folder, which differs between machines
	SHA256 string `json:"sha256"`
	Path   string `json:"-"`
}

// Resampled says how a map came onto the grid of the truth; see obs.Image.On.
type Resampled struct {
	Map    string  `json:"map"`
	Method string  `json:"method"`
	Pixel  float64 `json:"pixel_arcsec"` // side of a square as large as one of its own
}

// A Verdict is all that comparing yields.
type Verdict struct {
	Summary Summary
	Maps    obs.Maps   // bias.fits: B_RATIO, SPEED_RATIO, NE_RATIO, ANGLE_DIFF, with Options.Plane METHOD_RATIO; NaN where there is no ratio
	Heights ecsv.Table // bias.ecsv: one row a height bin
	Flags   []Flag     // why pixels of the field have no value or a doubtful one
	Field   []bool     // pixel of the field, in raster order
	Valid   []bool     // valid pixel
}

// A Flag counts the pixels of the field that carry one bit of the inverted FLAG map.
type Flag struct {
	Name, About string
	Pixels      int // with this bit
	Invalid     int // of these, without a valid B
}

// Compare holds the inferred maps against the truth on the same grid. Any map may
// be missing, on either side: what depends on it is null in the summary. It
// returns an error if a map does not fit the grid, has another unit (see
// Standardise), or if there
// is no truth at all.
func Compare(g *obs.Grid, truth, inferred obs.Maps, o Options) (*Verdict, error) {
	if err := check(g, truth, "truth", truthMaps); err != nil {
		return nil, err
	}
	if err := check(g, inferred, "inferred", inferredMaps); err != nil {
		return nil, err
	}
	if n := g.Nx * g.Ny; o.Plane != nil && len(o.Plane) != n {
		return nil, fmt.Errorf("speeds of one plane: %d pixels; the grid has %d", len(o.Plane), n)
	}
	known := false
	for i := range truth {
		known = known || truthMaps[truth[i].Name] != nil
	}
	if !known {
		return nil, errors.New("the truth holds none of the maps B_SKY, BTOT_SKY, NE_SKY, SPEED_SKY, ...: nothing to compare with")
	}
	for i, e := range o.Edges {
		if math.IsNaN(e) || i > 0 && !(e > o.Edges[i-1]) {
			return nil, fmt.Errorf("height edges %v: must ascend", o.Edges)
		}
	}
	if len(o.Edges) == 1 {
		return nil, fmt.Errorf("height edges %v: at least two are needed", o.Edges)
	}

	c := comparison{g: g, truth: truth, inferred: inferred, o: &o}
	c.partition()
	c.lay()
	v := &Verdict{Field: c.field, Valid: c.valid, Maps: c.maps(), Flags: c.flags()}
	v.Summary = c.summary()
	v.Heights = c.table(v.Summary.Heights)
	return v, nil
}

func check(g *obs.Grid, ms obs.Maps, side string, quantities map[string]*quantity) error {
	n := g.Nx * g.Ny
	for i := range ms {
		m := &ms[i]
		size := len(m.Data)
		if m.Data == nil {
			size = len(m.Ints)
		}
		if size != n {
			return fmt.Errorf("%s map %s has %d pixels; the grid has %d x %d = %d", side, m.Name, size, g.Nx, g.Ny, n)
		}
		q := quantities[m.Name]
		if q == nil {
			continue
		}
		if m.Data == nil {
			return fmt.Errorf("%s map %s holds integers; it must hold floating-point numbers", side, m.Name)
		}
		if strings.TrimSpace(m.Unit) != q.unit {
			if m.Unit == "" {
				return fmt.Errorf("%s map %s has no unit (BUNIT); it must be in %s", side, m.Name, q.unit)
			}
			return fmt.Errorf("%s map %s is in %q; it must be in %s", side, m.Name, m.Unit, q.unit)
		}
	}
	return nil
}

// A comparison is Compare at work.
type comparison struct {
	g               *obs.Grid
	truth, inferred obs.Maps
	o               *Options

	field, valid []bool
	total        int          // pixels of the field
	used         []int        // raster indices of the pixels that enter statistics, ascending
	hasB         bool         // used are the valid pixels; else all of the field
	edges        []float64    // of the height bins
	bins         []subset     // by height
	classes      [5]subset    // by code of STRUCTURE
	layout       *stat.Layout // of the used pixels
	later        []func()     // summaries that are still to be made, side by side
}

// A subset is one height bin or one structure.
type subset struct {
	total, valid int
	of           []int // positions in used
}

// partition finds the field, the valid pixels, and which of them lie in each
// height bin and structure.
func (c *comparison) partition() {
	n := c.g.Nx * c.g.Ny
	c.field, c.valid = make([]bool, n), make([]bool, n)
	structure := c.truth.Get("STRUCTURE")
	if structure != nil && structure.Ints == nil {
		structure = nil
	}
	if structure != nil {
		for i, s := range structure.Ints {
			c.field[i] = s != 0
		}
	} else {
		for _, m := range c.truth {
			if truthMaps[m.Name] == nil {
				continue
			}
			for i, v := range m.Data {
				c.field[i] = c.field[i] || finite(float64(v))
			}
		}
	}
	b := c.inferred.Get("B")
	c.hasB = b != nil
	lo, hi := math.Inf(1), math.Inf(-1)
	r := make([]float64, 0, n)
	var pixels []int
	for i := range c.field {
		if !c.field[i] {
			continue
		}
		h, _ := c.g.Polar(i%c.g.Nx, i/c.g.Nx)
		lo, hi = min(lo, h), max(hi, h)
		r, pixels = append(r, h), append(pixels, i)
		c.valid[i] = c.hasB && positive(b.Data[i])
	}
	c.total = len(pixels)

	c.edges = c.o.Edges
	if c.edges == nil {
		c.edges = Edges(lo, hi, 20)
	}
	c.bins = make([]subset, max(0, len(c.edges)-1))
	for h := range c.bins {
		c.bins[h].of = []int{} // nil is the whole field
	}
	for k := range c.classes {
		c.classes[k].of = []int{}
	}
	for k, i := range pixels {
		at := -1
		use := c.valid[i] || !c.hasB
		if use {
			at = len(c.used)
			c.used = append(c.used, i)
		}
		add := func(s *subset) {
			s.total++
			if c.valid[i] {
				s.valid++
			}
			if use {
				s.of = append(s.of, at)
			}
		}
		if h := bin(c.edges, r[k]); h >= 0 {
			add(&c.bins[h])
		}
		if structure != nil {
			if s := structure.Ints[i]; s > 0 && int(s) < len(c.classes) {
				add(&c.classes[s])
			}
		}
	}
}

// lay tells the intervals where the used pixels lie.
func (c *comparison) lay() {
	r, pa := make([]float64, len(c.used)), make([]float64, len(c.used))
	for k, i := range c.used {
		r[k], pa[k] = c.g.Polar(i%c.g.Nx, i/c.g.Nx)
	}
	c.layout = stat.NewLayout(r, pa, c.g.Step())
}

// Edges returns height bins [solar radii] with perRadius steps a solar radius
// that cover lo..hi, each a multiple of the step; nil if the range is empty.
func Edges(lo, hi float64, perRadius int) []float64 {
	if !(lo <= hi) {
		return nil
	}
	// A bound that is a step but for rounding stays that step.
	n := float64(perRadius)
	from, to := math.Floor(lo*n+1e-9), math.Ceil(hi*n-1e-9)
	if to <= from {
		to = from + 1
	}
	var e []float64
	for k := from; k <= to; k++ {
		e = append(e, k/n)
	}
	return e
}

// bin returns the bin of r, -1 outside; the last bin contains its upper edge.
func bin(edges []float64, r float64) int {
	n := len(edges)
	if n < 2 || !(r >= edges[0] && r <= edges[n-1]) {
		return -1
	}
	i, exact := slices.BinarySearch(edges, r)
	if !exact || i == n-1 {
		i--
	}
	return i
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

func positive(v float32) bool { return v > 0 && !math.IsInf(float64(v), 0) }

// ratio returns a/b for two values that are positive and finite, else NaN.
func ratio(a, b float32) float64 {
	if !positive(a) || !positive(b) {
		return math.NaN()
	}
	return float64(a) / float64(b)
}

// AngleDiff returns inferred minus true direction [deg] for two undirected lines
// given by angles of any size: the signed difference in (-90, 90].
func AngleDiff(inferred, truth float64) float64 {
	d := math.Mod(inferred-truth, 180)
	if d > 90 {
		d -= 180
	} else if d <= -90 {
		d += 180
	}
	return d
}

func (c *comparison) maps() obs.Maps {
	var ms obs.Maps
	for _, q := range []struct{ name, about, inferred, truth, unit string }{
		{"B_RATIO", "inferred over true field in the plane of the sky", "B", "B_SKY", ""},
		{"SPEED_RATIO", "inferred over true projected kink speed", "SPEED", "SPEED_SKY", ""},
		{"NE_RATIO", "inferred over true electron density at the plane of the sky", "NE", "NE_SKY", ""},
		{"ANGLE_DIFF", "inferred minus true direction, -90..90", "ANGLE", "ANGLE_SKY", "deg"},
	} {
		m := obs.Map{Name: q.name, Unit: q.unit, About: q.about, Data: make([]float32, len(c.field))}
		for i := range m.Data {
			m.Data[i] = float32(math.NaN())
		}
		for k, v := range c.pair(q.inferred, q.truth) {
			m.Data[c.used[k]] = float32(v)
		}
		ms = append(ms, m)
	}
	if sky := c.truth.Get("SPEED_SKY"); c.o.Plane != nil && sky != nil {
		m := obs.Map{Name: "METHOD_RATIO", About: "speed by the tracker from one plane, no noise, over true speed", Data: make([]float32, len(c.field))}
		for i := range m.Data {
			m.Data[i] = float32(ratio(c.o.Plane[i], sky.Data[i]))
		}
		ms = append(ms, m)
	}
	return ms
}

// pair returns, for each used pixel, the ratio of an inferred and a true map, or
// for ANGLE the difference; nil if one is missing.
func (c *comparison) pair(inferred, truth string) []float64 {
	a, b := c.inferred.Get(inferred), c.truth.Get(truth)
	if a == nil || b == nil {
		return nil
	}
	x := make([]float64, len(c.used))
	for k, i := range c.used {
		switch p, q := a.Data[i], b.Data[i]; inferred {
		case "ANGLE":
			x[k] = AngleDiff(float64(p), float64(q)) // Mod of a NaN or an infinity is NaN
		case "DOPPLER_RMS":
			// An rms whose noise was subtracted may be zero.
			x[k] = ratio(p, q)
			if p == 0 && positive(q) {
				x[k] = 0
			}
		default:
			x[k] = ratio(p, q)
		}
	}
	return x
}

func (c *comparison) flags() []Flag {
	m := c.inferred.Get("FLAG")
	if m == nil || m.Ints == nil {
		return nil
	}
	fs := make([]Flag, len(m.Codes))
	for j, code := range m.Codes {
		fs[j] = Flag{Name: code.Name, About: code.About}
		for i, v := range m.Ints {
			if c.field[i] && v&code.Value != 0 {
				fs[j].Pixels++
				if !c.valid[i] {
					fs[j].Invalid++
				}
			}
		}
	}
	return fs
}

// pick returns the values of x at the positions of one region; x itself if of is nil.
func pick(x []float64, of []int) []float64 {
	if of == nil {
		return x
	}
	y := make([]float64, len(of))
	for k, p := range of {
		y[k] = x[p]
	}
	return y
}

// each calls do for the whole field, whose positions are nil, every bin and every class.
func (c *comparison) each(do func(region int, of []int)) {
	do(whole, nil)
	for h := range c.bins {
		do(h, c.bins[h].of)
	}
	for k := range c.classes {
		do(-1-k, c.classes[k].of)
	}
}

// summarise puts the Summary of x over every region, with the interval of its median, when
// settle is called; none if x is nil. What put changes belongs to x alone.
func (c *comparison) summarise(x []float64, put func(region int, s *stat.Summary)) {
	if x == nil {
		return
	}
	c.later = append(c.later, func() {
		scale := c.layout.Scale(x)
		c.each(func(region int, of []int) {
			s := stat.Summarise(pick(x, of))
			i := c.layout.MedianInterval(x, of, scale)
			s.Interval = &i
			put(region, &s)
		})
	})
}

// settle makes the summaries.
func (c *comparison) settle() {
	_ = parallel.For(context.Background(), len(c.later), 0, func(_, i int) error { // nothing can fail
		c.later[i]()
		return nil
	})
	c.later = nil
}

// Regions count height bins from 0, structures downward from -1 (by code), and
// whole is the whole field.
const whole = math.MaxInt
