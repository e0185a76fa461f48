package table

import (
	"fmt"
	"math"

	"offplane/compare"
	"offplane/compare/stat"
	"offplane/synth/ecsv"
)

// A Prior is what the reader knows of the corona of a map: a profile with height, of the
// density that was measured or of the brightness of the line. Members whose own maps
// show another profile count less.
type Prior struct {
	Name       string    // for people
	Heights    []float64 // [solar radii]
	Values     []float64 // positive
	Brightness bool      // only its shape counts, units differ; else density [cm^-3]
	Width      float64   // rms of ln(member/reader) at which the weight is exp(-1/2)
}

// DefaultWidth is the Width of a prior: a third, the scatter of densities from line
// ratios (common practice, no source).
const DefaultWidth = 0.3

// reach is how far from a height of the profile pixels count for it [solar radii].
const reach = 0.025

// ReadPrior reads a profile from a table with the columns height [solRad] and density
// [cm-3, or any unit that maps may have] or brightness.
func ReadPrior(path string, width float64) (*Prior, error) {
	t, err := ecsv.ReadFile(path)
	if err != nil {
		return nil, err
	}
	p := &Prior{Name: "density", Width: width}
	if t.Column("density") == nil && t.Column("brightness") != nil {
		p.Name, p.Brightness = "brightness", true
	}
	if p.Heights, err = t.Floats("height"); err == nil {
		p.Values, err = t.Floats(p.Name)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w; a prior has the columns height [solRad] and density [cm-3] or brightness", path, err)
	}
	switch u := t.Column("height").Unit; u {
	case "", "solRad", "R_sun", "Rsun":
	default:
		return nil, fmt.Errorf("%s: height is in %q: must be in solRad, from the Sun's centre", path, u)
	}
	if u := t.Column(p.Name).Unit; u != "" && !p.Brightness {
		to, _, err := compare.Conversion("NE", u)
		if err != nil {
			return nil, fmt.Errorf("%s: density %w", path, err)
		}
		for i, v := range p.Values {
			p.Values[i] = to(v)
		}
	}
	for i, h := range p.Heights {
		if !(h >= 1) || !(p.Values[i] > 0) || !finite(h) || !finite(p.Values[i]) {
			return nil, fmt.Errorf("%s: row %d: height %g, %s %g: heights are from the Sun's centre in solar radii, values positive", path, i+1, h, p.Name, p.Values[i])
		}
	}
	if len(p.Heights) == 0 || p.Brightness && len(p.Heights) < 2 {
		return nil, fmt.Errorf("%s: %d heights are too few", path, len(p.Heights))
	}
	if !(width > 0) || !finite(width) {
		return nil, fmt.Errorf("the width of the prior is %g: must be positive, the scatter of ln(member/reader) that is let pass", width)
	}
	return p, nil
}

// Weights returns the weight of each member, 0..1; a member without pixels at any height
// of the profile has none.
func (p *Prior) Weights(members []Member) []float64 {
	w := make([]float64, len(members))
	for m := range members {
		values := members[m].Features[Density]
		if p.Brightness {
			values = members[m].Bright
		}
		var d []float64
		mean := 0.0
		for i, h := range p.Heights {
			var at []float64
			for k, r := range members[m].Features[Height] {
				if values != nil && math.Abs(r-h) <= reach {
					at = append(at, values[k])
				}
			}
			if v := math.Log(stat.Median(at) / p.Values[i]); finite(v) {
				d = append(d, v)
				mean += v
			}
		}
		least := 1
		if p.Brightness {
			least = 2
		}
		if len(d) < least {
			continue
		}
		mean /= float64(len(d))
		if !p.Brightness {
			mean = 0
		}
		sum := 0.0
		for _, v := range d {
			sum += float64((v - mean) * (v - mean))
		}
		w[m] = math.Exp(-sum / float64(len(d)) / (2 * p.Width * p.Width))
	}
	return w
}

func (p *Prior) String() string {
	return fmt.Sprintf("%s profile at %d heights from %g to %g solar radii, width %g in ln", p.Name, len(p.Heights), p.Heights[0], p.Heights[len(p.Heights)-1], p.Width)
}
