package compare

import (
	"math"

	"offplane/compare/stat"
	"offplane/synth/ecsv"
	"offplane/synth/obs"
)

// table lays the height bins out as bias.ecsv: one row a bin. A ratio without
// its maps is NaN with the count 0.
func (c *comparison) table(heights []Height) ecsv.Table {
	t := ecsv.Table{Meta: []ecsv.Pair{
		{Key: "program", Value: "offplane " + c.o.Version},
		{Key: "scenario", Value: c.o.Scenario},
		{Key: "scenario_sha256", Value: c.o.SHA256},
		{Key: "seed", Value: c.o.Seed},
		{Key: "estimator", Value: c.o.Estimator},
		{Key: "domain", Value: "valid pixels: inferred B finite and positive; ratios are inferred over true"},
	}}
	floats := func(name, unit, about string, of func(h int) float64) {
		x := make([]float64, len(heights))
		for h := range x {
			x[h] = of(h)
		}
		t.Columns = append(t.Columns, ecsv.Column{Name: name, Unit: unit, About: about, Data: x})
	}
	ints := func(name, about string, of func(h int) int) {
		x := make([]int64, len(heights))
		for h := range x {
			x[h] = int64(of(h))
		}
		t.Columns = append(t.Columns, ecsv.Column{Name: name, About: about, Data: x})
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
		interval := func(part func(*stat.Interval) float64) func(int) float64 {
			return get(func(s *stat.Summary) float64 { return part(s.Interval) })
		}
		floats(name+"_median_low", unit, about+", lower end of the median's 68 % interval", interval(func(i *stat.Interval) float64 { return i.Low }))
		floats(name+"_median_high", unit, about+", upper end of the median's 68 % interval", interval(func(i *stat.Interval) float64 { return i.High }))
		ints(name+"_count", about+", pixels", func(h int) int {
			if s := of(h); s != nil {
				return s.Count
			}
			return 0
		})
	}

	floats("height_from", "solRad", "lower edge of the bin, heliocentric distance on the plane of the sky", func(h int) float64 { return float64(heights[h].From) })
	floats("height_to", "solRad", "upper edge of the bin", func(h int) float64 { return float64(heights[h].To) })
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
