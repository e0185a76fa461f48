package ensemble

import (
	"fmt"
	"math"
	"strings"

	"offplane/compare"
	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth/fits"
	"offplane/synth/obs"
)

// A Member is what one scenario of an ensemble leaves for a correction table: the
// pixels with a value, and counts of those without.
type Member struct {
	Number   int    // from 0
	Ensemble string // SHA-256 of the ensemble it belongs to, see Loaded
	Version  string // of the program that computed it
	Scenario *scenarios.Loaded
	Files    []compare.File // that the scenario names
	Values   []Value        // of the parameters, in the order of the ensemble
	Heights  []Height
	Flags    []compare.Flag // of all pixels of the field

	pixels fits.Table
}

// A Height counts the pixels in one bin of heliocentric distance [solar radii]; valid
// ones have a B of the first estimator.
type Height struct {
	From, To     float64
	Total, Valid int
}

// columns of the table PIXELS but for R, PA, ANGLE_RADIAL, FLAG and STRUCTURE, which
// are not plain copies. Those of further estimators follow as SPEED_PAIR and so on.
var (
	inferredColumns = []string{"PEAK", "DOPPLER_RMS", "NE", "NE_ERR", "COHERENCE", "TRACK"}
	speedColumns    = []string{"SPEED", "SPEED_ERR", "B", "B_ERR"}
	truthColumns    = []string{"B_SKY", "B_EMIS", "B_WAVE", "BTOT_SKY", "NE_SKY", "NE_EMIS", "SPEED_SKY", "SPEED_WAVE"}
)

// newMember keeps of an outcome what a table needs.
func newMember(number int, ensemble, version string, l *scenarios.Loaded, values []Value, o *trial.Outcome) (*Member, error) {
	m := &Member{Number: number, Ensemble: ensemble, Version: version, Scenario: l, Files: o.Files, Values: values, Flags: o.Verdict.Flags}
	for _, h := range o.Verdict.Summary.Heights {
		m.Heights = append(m.Heights, Height{float64(h.From), float64(h.To), h.Total, h.Valid})
	}
	e := extract{grid: &o.Truth.Grid, pixels: withField(o.Inferred.Maps, o.Verdict.Field, l.Scenario.Inversion.Estimators)}
	e.places()
	e.copies(o.Inferred.Maps, inferredColumns...)
	e.slant(o.Inferred.Maps.Get("ANGLE"))
	for k := range l.Scenario.Inversion.Estimators {
		for _, name := range speedColumns {
			e.copies(o.Inferred.Maps, name+Suffix(l.Scenario.Inversion.Estimators, k))
		}
	}
	e.integers(o.Inferred.Maps.Get("FLAG"))
	e.copies(o.Truth.Maps, truthColumns...)
	e.integers(o.Truth.Maps.Get("STRUCTURE"))
	m.pixels = fits.Table{Name: "PIXELS", Columns: e.columns}
	return m, e.err
}

// Suffix returns what the names of the columns of estimator k end in: nothing for the
// first, _PAIR and the like for others.
func Suffix(estimators []string, k int) string {
	if k == 0 {
		return ""
	}
	return "_" + strings.ToUpper(estimators[k])
}

// withField returns the raster indices of the pixels that have a B of any estimator.
func withField(inferred obs.Maps, field []bool, estimators []string) (pixels []int) {
	for i := range field {
		for k := range estimators {
			b := inferred.Get("B" + Suffix(estimators, k))
			if field[i] && b != nil && b.Data[i] > 0 && !math.IsInf(float64(b.Data[i]), 0) {
				pixels = append(pixels, i)
				break
			}
		}
	}
	return pixels
}

// An extract collects the columns of PIXELS.
type extract struct {
	grid    *obs.Grid
	pixels  []int
	columns []fits.Column
	err     error
}

func (e *extract) add(name, unit, about string, of func(raster int) float32) {
	x := make([]float32, len(e.pixels))
	for k, i := range e.pixels {
		x[k] = of(i)
	}
	e.columns = append(e.columns, fits.Column{Name: name, Unit: unit, About: about, Data: x})
}

// places adds where the pixels are on the sky.
func (e *extract) places() {
	r := func(i int) float32 { r, _ := e.grid.Polar(i%e.grid.Nx, i/e.grid.Nx); return float32(r) }
	pa := func(i int) float32 { _, pa := e.grid.Polar(i%e.grid.Nx, i/e.grid.Nx); return float32(pa) }
	e.add("R", "solRad", "projected distance from the disc centre", r)
	e.add("PA", "deg", "position angle from north", pa)
}

// copies adds maps as they are.
func (e *extract) copies(maps obs.Maps, names ...string) {
	for _, name := range names {
		m := maps.Get(name)
		if m == nil || m.Data == nil {
			e.err = fmt.Errorf("the trial made no map %s", name)
			return
		}
		e.add(name, m.Unit, "", func(i int) float32 { return m.Data[i] })
	}
}

// slant adds the angle of the track to the radial direction, 0 to 90 degrees.
func (e *extract) slant(angle *obs.Map) {
	e.add("ANGLE_RADIAL", "deg", "of the track to the radial, 0..90", func(i int) float32 {
		_, pa := e.grid.Polar(i%e.grid.Nx, i/e.grid.Nx)
		return float32(math.Abs(compare.AngleDiff(float64(angle.Data[i]), pa)))
	})
}

// integers adds an integer map as it is.
func (e *extract) integers(m *obs.Map) {
	x := make([]int32, len(e.pixels))
	for k, i := range e.pixels {
		x[k] = m.Ints[i]
	}
	e.columns = append(e.columns, fits.Column{Name: m.Name, Data: x})
}

// Len returns the number of pixels that the member kept.
func (m *Member) Len() int { return len(m.Ints("FLAG")) }

// Column returns a column of floating-point numbers, one value a kept pixel; nil if
// there is none of that name. It is the member's own, not a copy.
func (m *Member) Column(name string) []float32 {
	x, _ := m.column(name).([]float32)
	return x
}

// Ints returns the column FLAG or STRUCTURE; nil if there is none of that name.
func (m *Member) Ints(name string) []int32 {
	x, _ := m.column(name).([]int32)
	return x
}

func (m *Member) column(name string) any {
	for _, c := range m.pixels.Columns {
		if c.Name == name {
			return c.Data
		}
	}
	return nil
}

// Counts returns the pixels of the field, and those with a B of the first estimator.
func (m *Member) Counts() (total, valid int) {
	for _, h := range m.Heights {
		total += h.Total
		valid += h.Valid
	}
	return total, valid
}
