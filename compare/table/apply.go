package table

import (
	"math"
	"slices"

	"offplane/compare/stat"
	"offplane/scenarios/units"
	"offplane/synth/obs"
)

var nan = math.NaN()

// Caution stands in every table and beside every correction.
const Caution = "the correction is that of the ensemble: a prior made of invented coronae. Where the Sun is not like them, neither factor nor interval holds; the intervals tell the systematic error of the method, not the noise of the map."

// Bits of the domain flag.
const (
	NoValue    = 1 << iota // the map has no positive value here
	OtherWay               // the map was made by another recipe
	OutOfRange             // a feature lies beyond the table
	TooFew                 // too few members have such pixels
	Coarser                // a feature is missing here: corrected by a coarser table
)

// FlagCodes names the bits of the domain flag.
var FlagCodes = []obs.Code{
	{Value: NoValue, Name: "NO_VALUE", About: "no positive value in the map"},
	{Value: OtherWay, Name: "RECIPE", About: "map made by another recipe: left as it is"},
	{Value: OutOfRange, Name: "BEYOND", About: "a feature lies beyond the table: left as it is"},
	{Value: TooFew, Name: "SPARSE", About: "too few members of the ensemble here: left as it is"},
	{Value: Coarser, Name: "COARSER", About: "a feature is missing: corrected by a coarser table"},
}

// An Input is a map to be corrected, pixel by pixel, and what goes with it.
type Input struct {
	Quantity Quantity
	Values   []float64           // in the unit of the quantity's feature; NaN: none
	Features [features][]float64 // nil: not given; the quantity's own is Values; see Complete
	SameWay  bool                // made by the table's recipe
}

// An Applied is a corrected map. Factors are true over inferred: NaN outside the domain,
// where Values are those of the input.
type Applied struct {
	Values                       []float64
	Factor                       []float64
	Low68, High68, Low95, High95 []float64 // of the corrected values
	Flag                         []int32
	Valid, Corrected, Coarse     int     // pixels with a value; of these corrected; of these by a coarser table
	Median                       float64 // of the factor
	Used                         []Use   // surfaces that were asked, in the order of pixels
	Past                         []Past  // ends of axes that pixels lie beyond, in the order of pixels
}

// A Use counts the pixels that had the features of one surface.
type Use struct {
	Surface           *Surface
	Pixels, Corrected int
}

// A Past counts the pixels beyond one end of an axis; a pixel may lie beyond several.
type Past struct {
	Feature Feature
	Above   bool    // the upper end
	End     float64 // in the unit of the feature
	Pixels  int
}

// past counts a pixel beyond the ends of the grid of s.
func (a *Applied) past(s *Surface, x []float64) {
	for k, axis := range s.Grid {
		p := Past{Feature: axis.Feature, End: axis.Nodes[0]}
		switch last := axis.Nodes[len(axis.Nodes)-1]; {
		case x[k] > last:
			p.Above, p.End = true, last
		case x[k] >= axis.Nodes[0]:
			continue
		}
		i := slices.IndexFunc(a.Past, func(q Past) bool { return q.Feature == p.Feature && q.Above == p.Above && q.End == p.End })
		if i < 0 {
			i, a.Past = len(a.Past), append(a.Past, p)
		}
		a.Past[i].Pixels++
	}
}

// unitFactors are those between units in use: G and T, cm-3 and m-3, km/s and m/s.
var unitFactors = map[Feature]float64{Field: 1e4, Density: 1e6, Speed: 1e3}

// WrongUnit reports whether all values of a feature lie beyond the table, while their median
// times factor would not: as of a map with the wrong unit in its header.
func (t *Table) WrongUnit(in Input, f Feature) (factor float64, ok bool) {
	in.Features[in.Quantity.Feature()] = in.Values
	s, by := t.Find(in.Quantity, t.Features()), unitFactors[f]
	if s == nil || by == 0 || !slices.Contains(s.Features(), f) {
		return 0, false
	}
	nodes := s.Grid[slices.Index(s.Features(), f)].Nodes
	low, high := nodes[0], nodes[len(nodes)-1]
	var x []float64
	for i, v := range in.Features[f] {
		if v > 0 && finite(v) && in.Values[i] > 0 {
			x = append(x, v)
		}
	}
	if len(x) == 0 {
		return 0, false
	}
	m := stat.Median(x)
	switch {
	case slices.Max(x) < low:
		factor = by
	case slices.Min(x) > high:
		factor = 1 / by
	default:
		return 0, false
	}
	// The median of a map may itself lie a little beyond.
	return factor, m*factor >= low/2 && m*factor <= 2*high
}

// Apply corrects a map. Each pixel is corrected by the surface of all the features that
// it has; the table has one for every set. What is outside the domain is left as it is
// and flagged.
func (t *Table) Apply(in Input) *Applied {
	n := len(in.Values)
	in.Features[in.Quantity.Feature()] = in.Values
	a := &Applied{Values: append([]float64{}, in.Values...), Flag: make([]int32, n)}
	for _, to := range []*[]float64{&a.Factor, &a.Low68, &a.High68, &a.Low95, &a.High95} {
		*to = make([]float64, n)
		for i := range *to {
			(*to)[i] = nan
		}
	}
	all := t.Features()
	have, x := make([]Feature, 0, len(all)), make([]float64, 0, len(all))
	var bySet [1 << features]*Surface // found so far, by the set of features
	var uses [1 << features]int       // place in Used, from 1
	for i, v := range in.Values {
		if !(v > 0) || !finite(v) {
			a.Flag[i] |= NoValue
			continue
		}
		a.Valid++
		have, x, set := have[:0], x[:0], 0
		for _, f := range all {
			if c := in.Features[f]; c != nil && finite(c[i]) {
				have, x, set = append(have, f), append(x, c[i]), set|1<<f
			}
		}
		if uses[set] == 0 {
			s := t.Find(in.Quantity, have)
			if s == nil {
				a.Flag[i] |= OutOfRange
				continue
			}
			a.Used = append(a.Used, Use{Surface: s})
			bySet[set], uses[set] = s, len(a.Used)
		}
		a.Used[uses[set]-1].Pixels++
		s, coarse := bySet[set], len(have) < len(all)
		if coarse {
			a.Flag[i] |= Coarser
		}
		if !in.SameWay {
			a.Flag[i] |= OtherWay
			continue
		}
		c, where := s.At(x, t.Least)
		switch where {
		case Beyond:
			a.Flag[i] |= OutOfRange
			a.past(s, x)
			continue
		case Sparse:
			a.Flag[i] |= TooFew
			continue
		}
		a.Corrected++
		a.Used[uses[set]-1].Corrected++
		if coarse {
			a.Coarse++
		}
		a.Factor[i] = math.Exp(c.Median)
		a.Values[i] = v * a.Factor[i]
		for _, b := range []struct {
			to []float64
			ln float64
		}{{a.Low68, c.Low68}, {a.High68, c.High68}, {a.Low95, c.Low95}, {a.High95, c.High95}} {
			b.to[i] = v * math.Exp(b.ln)
		}
	}
	a.Median = stat.Median(a.Factor)
	return a
}

// Complete adds whichever of field, density and speed is missing beside the other two:
// B = v sqrt(4 pi mu m_p n). It returns the feature and whether there was one to add.
func (in *Input) Complete(mu float64) (Feature, bool) {
	in.Features[in.Quantity.Feature()] = in.Values
	b, n, v := in.Features[Field], in.Features[Density], in.Features[Speed]
	k := 4 * math.Pi * mu * units.ProtonMass * 1e10 // of speeds in km/s
	var f Feature
	var of func(i int) float64
	switch {
	case !(mu > 0):
		return 0, false
	case b == nil && n != nil && v != nil:
		f, of = Field, func(i int) float64 { return v[i] * math.Sqrt(k*n[i]) }
	case n == nil && b != nil && v != nil:
		f, of = Density, func(i int) float64 { return b[i] * b[i] / (k * v[i] * v[i]) }
	case v == nil && b != nil && n != nil:
		f, of = Speed, func(i int) float64 { return b[i] / math.Sqrt(k*n[i]) }
	default:
		return 0, false
	}
	x := make([]float64, len(in.Values))
	for i := range x {
		x[i] = of(i)
	}
	in.Features[f] = x
	return f, true
}
