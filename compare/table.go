package compare

import (
	"math"
	"strconv"

	"offplane/compare/stat"
	"offplane/synth/obs"
)

// A Table is a table with units, ready for any format that keeps them.
type Table struct {
	Columns []Column
	Meta    []Entry // in order
}

// A Column holds one value a row, Int or Float.
type Column struct {
	Name, Unit, About string
	Float             []float64
	Int               []int64
}

// An Entry is one line of a table's metadata.
type Entry struct{ Key, Value string }

// table lays the height bins out as bias.ecsv: one row a bin.
func (c *comparison) table(heights []Height) Table {
	t := Table{Meta: []Entry{
		{"program", "offplane " + c.o.Version},
		{"scenario", c.o.Scenario},
		{"scenario_sha256", c.o.SHA256},
		{"seed", strconv.FormatUint(c.o.Seed, 10)},
		{"estimator", c.o.Estimator},
		{"domain", "valid pixels: inferred B finite and positive; ratios are inferred over true"},
	}}
	floats := func(name, unit, about string, of func(h int) float64) {
		x := make([]float64, len(heights))
		for h := range x {
			x[h] = of(h)
		}
		t.Columns = append(t.Columns, Column{Name: name, Unit: unit, About: about, Float: x})
	}
	ints := func(name, about string, of func(h int) int) {
		x := make([]int64, len(heights))
		for h := range x {
			x[h] = int64(of(h))
		}
		t.Columns = append(t.Columns, Column{Name: name, About: about, Int: x})
	}
	summary := func(name, unit, about string, of func(h int) *stat.Summary) {
		get := func(part func(*stat.Summary) float64) func(int) float64 {
			return func(h int) float64 {
				if s := of(h); s != nil {
					return part(s)
				}
				return math.NaN()
			}
		}
		floats(name, unit, about+", median", get(func(s *stat.Summary) float64 { return s.Median }))
		floats(name+"_p2_5", unit, about+", 2.5th percentile", get(func(s *stat.Summary) float64 { return s.P2_5 }))
		floats(name+"_p16", unit, about+", 16th percentile", get(func(s *stat.Summary) float64 { return s.P16 }))
		floats(name+"_p84", unit, about+", 84th percentile", get(func(s *stat.Summary) float64 { return s.P84 }))
		floats(name+"_p97_5", unit, about+", 97.5th percentile", get(func(s *stat.Summary) float64 { return s.P97_5 }))
		ints(name+"_count", about+", pixels", func(h int) int {
			if s := of(h); s != nil {
				return s.Count
			}
			return 0
		})
	}

	floats("from", "solRad", "lower edge of the bin, heliocentric distance on the plane of the sky", func(h int) float64 { return float64(heights[h].From) })
	floats("to", "solRad", "upper edge of the bin", func(h int) float64 { return float64(heights[h].To) })
	ints("pixels", "pixels of the field", func(h int) int { return heights[h].Total })
	ints("valid", "valid pixels", func(h int) int { return heights[h].Valid })
	floats("valid_fraction", "", "valid pixels over pixels of the field", func(h int) float64 { return float64(heights[h].ValidFraction) })
	for _, m := range []struct {
		name, unit, about string
		of                *obs.Map
	}{
		{"b", "G", "inferred field B, median of the valid pixels", c.inferred.Get("B")},
		{"b_sky", "G", "true field B_SKY, median of the same pixels", c.truth.Get("B_SKY")},
		{"speed", "km/s", "inferred phase speed SPEED, median", c.inferred.Get("SPEED")},
		{"speed_sky", "km/s", "true projected kink speed SPEED_SKY, median", c.truth.Get("SPEED_SKY")},
		{"ne", "cm-3", "inferred electron density NE, median", c.inferred.Get("NE")},
		{"ne_sky", "cm-3", "true electron density NE_SKY, median", c.truth.Get("NE_SKY")},
	} {
		floats(m.name, m.unit, m.about, func(h int) float64 {
			if m.of == nil {
				return math.NaN()
			}
			x := make([]float64, len(c.bins[h].of))
			for k, at := range c.bins[h].of {
				x[k] = float64(m.of.Data[c.used[at]])
			}
			return stat.Median(x)
		})
	}
	for _, q := range pairs {
		summary("ratio_"+q.name, "", q.inferred+" over "+q.truth, func(h int) *stat.Summary { return *q.of(&heights[h].Ratios) })
	}
	summary("angle_error", "deg", "absolute difference of ANGLE and ANGLE_SKY", func(h int) *stat.Summary { return heights[h].AngleError })
	return t
}
