package compare

import (
	"encoding/json"
	"io"
	"math"
	"slices"

	"offplane/compare/stat"
	"offplane/model"
)

// Summary is summary.json, the verdict for machines: units in key names, null
// where there is no number or no map. A nil *stat.Summary is a map that was not
// given; a count of zero is a map without a value. The medians have 68 % intervals by a
// block bootstrap, see stat.Layout.MedianInterval: by how much the chance of the waves
// may move them, not by how much pixels differ.
type Summary struct {
	Schema         int           `json:"schema"` // 1
	Scenario       string        `json:"scenario"`
	Seed           uint64        `json:"seed"`
	Version        string        `json:"version"`
	ScenarioSHA256 string        `json:"scenario_sha256"`
	Estimator      string        `json:"estimator"`
	Pixels         Pixels        `json:"pixels"`
	Ratios         Ratios        `json:"ratios"`
	AngleError     *stat.Summary `json:"angle_error_deg"`  // absolute, 0..90
	AngleSigned    *stat.Summary `json:"angle_signed_deg"` // inferred minus true, -90..90
	Heights        []Height      `json:"heights"`
	Structure      Structure     `json:"structure"`
	DopplerRMS     *stat.Summary `json:"doppler_rms_reduction"` // observed in-band rms over that of the local line-of-sight velocity at the plane of the sky
	Identity       LnParts       `json:"identity"`
	Text           string        `json:"scenario_text,omitempty"` // resolved scenario
	Files          []File        `json:"files,omitempty"`         // named by the scenario
	Resampled      []Resampled   `json:"resampled,omitempty"`     // maps that came from another grid
}

// Pixels counts the field.
type Pixels struct {
	Total         int         `json:"total"`
	Valid         int         `json:"valid"`
	ValidFraction stat.Number `json:"valid_fraction"` // null without an inferred B
}

// Ratios are inferred over true; the key names the truth.
type Ratios struct {
	Field struct {
		Sky      *stat.Summary `json:"sky"`      // B over B_SKY
		Emission *stat.Summary `json:"emission"` // B over B_EMIS
		Wave     *stat.Summary `json:"wave"`     // B over B_WAVE
		Total    *stat.Summary `json:"total"`    // B over BTOT_SKY
	} `json:"field"`
	Speed struct {
		Sky  *stat.Summary `json:"sky"`  // SPEED over SPEED_SKY
		Wave *stat.Summary `json:"wave"` // SPEED over SPEED_WAVE
	} `json:"speed"`
	Density struct {
		Sky      *stat.Summary `json:"sky"`      // NE over NE_SKY
		Emission *stat.Summary `json:"emission"` // NE over NE_EMIS
	} `json:"density"`
}

// A Height is one bin of heliocentric distance on the plane of the sky.
type Height struct {
	From          stat.Number   `json:"from_rsun"`
	To            stat.Number   `json:"to_rsun"`
	ValidFraction stat.Number   `json:"valid_fraction"`
	Ratios        Ratios        `json:"ratios"`
	Total         int           `json:"pixels"`
	Valid         int           `json:"valid"`
	AngleError    *stat.Summary `json:"angle_error_deg"`
	Identity      LnParts       `json:"identity"`
}

// Structure splits the field by the truth map STRUCTURE; nil without it.
type Structure struct {
	Open         *Region `json:"open"`
	Closed       *Region `json:"closed"`
	NearSheet    *Region `json:"near_sheet"`
	ActiveRegion *Region `json:"active_region"`
}

// A Region is the part of the field that belongs to one structure.
type Region struct {
	ValidFraction stat.Number `json:"valid_fraction"`
	Ratios        Ratios      `json:"ratios"`
	Total         int         `json:"pixels"`
	Valid         int         `json:"valid"`
	Identity      LnParts     `json:"identity"`
}

// LnParts summarises the Parts of the pixels: natural logarithms of the factors
// of B/B_SKY. Medians of parts do not add up exactly; each pixel's parts do.
type LnParts struct {
	Field       *stat.Summary `json:"ln_field"`
	Speed       *stat.Summary `json:"ln_speed"`
	Density     *stat.Summary `json:"half_ln_density"`
	Mu          stat.Number   `json:"half_ln_mu"`
	Kink        *stat.Summary `json:"minus_half_ln_kink"`
	ResidualMax stat.Number   `json:"residual_max"` // largest absolute residual of a pixel

	// The parts of ln_speed.
	Method *stat.Summary `json:"ln_speed_method"` // the tracker's own
	Sight  *stat.Summary `json:"ln_speed_sight"`  // the line of sight's
	Rest   *stat.Summary `json:"ln_speed_rest"`   // the camera's and what none of the two explains alone
}

// WriteJSON writes the summary as indented JSON with a final newline.
func (s *Summary) WriteJSON(w io.Writer) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(s)
}

func fraction(valid, total int, known bool) stat.Number {
	if !known || total == 0 {
		return stat.Number(math.NaN())
	}
	return stat.Number(float64(valid) / float64(total))
}

func (c *comparison) summary() Summary {
	o := c.o
	s := Summary{
		Schema: 1, Scenario: o.Scenario, Seed: o.Seed, Version: o.Version, ScenarioSHA256: o.SHA256, Estimator: o.Estimator,
		Text: o.Text, Files: o.Files, Resampled: o.Resampled,
		Heights: make([]Height, len(c.bins)), // [] rather than null
	}
	valid := 0
	for _, v := range c.valid {
		if v {
			valid++
		}
	}
	s.Pixels = Pixels{c.total, valid, fraction(valid, c.total, c.hasB)}
	for h, b := range c.bins {
		s.Heights[h] = Height{
			From: stat.Number(c.edges[h]), To: stat.Number(c.edges[h+1]),
			ValidFraction: fraction(b.valid, b.total, c.hasB), Total: b.total, Valid: b.valid,
		}
	}
	regions := make([]Region, len(c.classes))
	for k, b := range c.classes {
		regions[k] = Region{ValidFraction: fraction(b.valid, b.total, c.hasB), Total: b.total, Valid: b.valid}
	}
	if m := c.truth.Get("STRUCTURE"); m != nil && m.Ints != nil {
		s.Structure = Structure{&regions[model.Open], &regions[model.Closed], &regions[model.Sheet], &regions[model.ActiveRegion]}
	}

	ratios := func(region int) *Ratios {
		switch {
		case region == whole:
			return &s.Ratios
		case region >= 0:
			return &s.Heights[region].Ratios
		}
		return &regions[-1-region].Ratios
	}
	for _, q := range pairs {
		c.summarise(c.pair(q.inferred, q.truth), func(region int, x *stat.Summary) { *q.of(ratios(region)) = x })
	}

	angle := c.pair("ANGLE", "ANGLE_SKY")
	c.summarise(angle, func(region int, x *stat.Summary) {
		if region == whole {
			s.AngleSigned = x
		}
	})
	angle = slices.Clone(angle)
	for i := range angle {
		angle[i] = math.Abs(angle[i])
	}
	c.summarise(angle, func(region int, x *stat.Summary) {
		if region == whole {
			s.AngleError = x
		} else if region >= 0 {
			s.Heights[region].AngleError = x
		}
	})
	c.summarise(c.pair("DOPPLER_RMS", "DOPPLER_LOCAL"), func(region int, x *stat.Summary) {
		if region == whole {
			s.DopplerRMS = x
		}
	})
	c.identity(func(region int) *LnParts {
		switch {
		case region == whole:
			return &s.Identity
		case region >= 0:
			return &s.Heights[region].Identity
		}
		return &regions[-1-region].Identity
	})
	c.settle()
	return s
}

// pairs lists the ratios of the verdict, in the order of summary.json.
var pairs = []struct {
	name, inferred, truth string
	of                    func(*Ratios) **stat.Summary
}{
	{"field_sky", "B", "B_SKY", func(r *Ratios) **stat.Summary { return &r.Field.Sky }},
	{"field_emission", "B", "B_EMIS", func(r *Ratios) **stat.Summary { return &r.Field.Emission }},
	{"field_wave", "B", "B_WAVE", func(r *Ratios) **stat.Summary { return &r.Field.Wave }},
	{"field_total", "B", "BTOT_SKY", func(r *Ratios) **stat.Summary { return &r.Field.Total }},
	{"speed_sky", "SPEED", "SPEED_SKY", func(r *Ratios) **stat.Summary { return &r.Speed.Sky }},
	{"speed_wave", "SPEED", "SPEED_WAVE", func(r *Ratios) **stat.Summary { return &r.Speed.Wave }},
	{"density_sky", "NE", "NE_SKY", func(r *Ratios) **stat.Summary { return &r.Density.Sky }},
	{"density_emission", "NE", "NE_EMIS", func(r *Ratios) **stat.Summary { return &r.Density.Emission }},
}

// lnParts lists the parts of the identity and the maps without which there are none.
var lnParts = []struct {
	part func(p *Parts) float64
	of   func(l *LnParts) **stat.Summary
	maps func(id *Identity) [][]float32
}{
	{func(p *Parts) float64 { return p.Field }, func(l *LnParts) **stat.Summary { return &l.Field }, func(id *Identity) [][]float32 { return [][]float32{id.b, id.bSky} }},
	{func(p *Parts) float64 { return p.Speed }, func(l *LnParts) **stat.Summary { return &l.Speed }, func(id *Identity) [][]float32 { return [][]float32{id.v, id.vSky} }},
	{func(p *Parts) float64 { return p.Density }, func(l *LnParts) **stat.Summary { return &l.Density }, func(id *Identity) [][]float32 { return [][]float32{id.n, id.nSky} }},
	{func(p *Parts) float64 { return p.Kink }, func(l *LnParts) **stat.Summary { return &l.Kink }, func(id *Identity) [][]float32 { return [][]float32{id.kink, id.nSky} }},
	{func(p *Parts) float64 { return p.Method }, func(l *LnParts) **stat.Summary { return &l.Method }, func(id *Identity) [][]float32 { return [][]float32{id.Plane, id.vSky} }},
	{func(p *Parts) float64 { return p.Sight }, func(l *LnParts) **stat.Summary { return &l.Sight }, func(id *Identity) [][]float32 { return [][]float32{id.vWave, id.vSky} }},
	{func(p *Parts) float64 { return p.Rest }, func(l *LnParts) **stat.Summary { return &l.Rest }, func(id *Identity) [][]float32 { return [][]float32{id.v, id.Plane, id.vWave, id.vSky} }},
}

// identity fills in the parts of every region, in the order of Regions.
func (c *comparison) identity(parts func(region int) *LnParts) {
	id := NewIdentity(c.truth, c.inferred, c.o.Mu, c.o.MuTrue)
	id.Plane = c.o.Plane
	pixels := make([]Parts, len(c.used))
	for k, i := range c.used {
		pixels[k] = id.At(i)
	}
	for _, q := range lnParts {
		if slices.ContainsFunc(q.maps(id), func(m []float32) bool { return m == nil }) {
			continue
		}
		x := make([]float64, len(pixels))
		for k := range pixels {
			x[k] = q.part(&pixels[k])
		}
		c.summarise(x, func(region int, s *stat.Summary) { *q.of(parts(region)) = s })
	}
	x := make([]float64, len(pixels))
	for k := range pixels {
		x[k] = math.Abs(pixels[k].Residual())
	}
	c.each(func(region int, of []int) {
		p := parts(region)
		p.Mu, p.ResidualMax = stat.Number(id.mu), stat.Number(stat.Quantile(1, pick(x, of)))
	})
}
