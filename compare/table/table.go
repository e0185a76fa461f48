// Package table turns an ensemble into a correction for published maps: the median
// of ln(true/inferred) and its 68 and 95 per cent intervals as a function of what the
// reader of a map has (height, density, speed, ...).
//
// The sentence of the package:
//
//  1. A Member holds the pixels of one corona: features and ln(true/inferred).
//  2. Build lays a Grid over the features, fits median and spread as multilinear
//     surfaces to all members, each with the same weight (fit.go), and sets the
//     intervals by cross-conformal calibration that holds out whole members
//     (calibrate.go), because pixels of one corona are not independent.
//  3. What is printed as coverage was achieved on members that took part neither in the
//     fit nor in the calibration (judge.go).
//  4. A Table holds one Surface for each quantity and each set of features that a
//     reader may have; it goes to ECSV and FITS with the same content (files.go).
//  5. Apply corrects a map. Outside the domain, in cells with too few members or for a
//     map made by another Recipe, nothing is extrapolated.
package table

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/scenarios/strict"
)

// A Feature is a number that the reader of a map has for each pixel.
type Feature int

// The features, in the order of axes.
const (
	Height    Feature = iota // projected distance from the disc centre
	Field                    // inferred field
	Density                  // inferred density
	Speed                    // inferred phase speed
	Angle                    // between track and radial, 0..90
	Track                    // track length over wavelength
	Coherence                // mean coherence along the track
	features
)

var featureNames = [features]struct{ name, unit, about string }{
	{"height", "solRad", "projected distance from the disc centre"},
	{"field", "G", "inferred field"},
	{"density", "cm-3", "inferred electron density"},
	{"speed", "km/s", "inferred phase speed"},
	{"angle", "deg", "between the track and the radial, 0..90"},
	{"track", "", "length of the track over the wavelength"},
	{"coherence", "", "coherence"},
}

func (f Feature) String() string { return featureNames[f].name }

// Unit returns the FITS unit string of a feature.
func (f Feature) Unit() string { return featureNames[f].unit }

// FeatureNames lists the names of all features.
func FeatureNames() []string {
	names := make([]string, features)
	for i := range names {
		names[i] = featureNames[i].name
	}
	return names
}

// ParseFeatures reads names separated by commas or blanks, in any order.
func ParseFeatures(text string) ([]Feature, error) {
	var fs []Feature
	for _, name := range strings.FieldsFunc(text, func(r rune) bool { return r == ',' || r == ' ' }) {
		i := slices.Index(FeatureNames(), name)
		if i < 0 {
			return nil, fmt.Errorf("%q is no feature: there are %s%s", name, strings.Join(FeatureNames(), ", "), strict.Hint(name, FeatureNames()))
		}
		if slices.Contains(fs, Feature(i)) {
			return nil, fmt.Errorf("feature %s is given twice", name)
		}
		fs = append(fs, Feature(i))
	}
	slices.Sort(fs)
	return fs, nil
}

// join writes features as ParseFeatures reads them.
func join(fs []Feature) string {
	names := make([]string, len(fs))
	for i, f := range fs {
		names[i] = f.String()
	}
	return strings.Join(names, " ")
}

// A Quantity is what is corrected.
type Quantity int

// The quantities that a table may correct.
const (
	FieldQ Quantity = iota
	SpeedQ
	DensityQ
	quantities
)

var quantityNames = [quantities]string{"field", "speed", "density"}

func (q Quantity) String() string { return quantityNames[q] }

// Feature returns the feature that is the quantity as inferred.
func (q Quantity) Feature() Feature { return [quantities]Feature{Field, Speed, Density}[q] }

// Truths lists the names of the truths that a table may refer to.
func Truths() []string { return []string{"sky", "emission", "wave", "total"} }

// A Member is one corona of an ensemble: the pixels of its maps that have an inferred
// field, in raster order.
type Member struct {
	Name     string
	Features [features][]float64   // nil: not known
	Ln       [quantities][]float64 // ln(true/inferred); nil: no such truth
	Bright   []float64             // line intensity in the unit of the frames; nil: not known
}

// Pixels returns the number of pixels.
func (m *Member) Pixels() int { return len(m.Features[Height]) }

// An Axis is one feature with its nodes in ascending order.
type Axis struct {
	Feature Feature
	Nodes   []float64
}

// A Surface is the correction of one quantity for readers who have one set of features.
// All numbers are ln(true/inferred) at the nodes of the grid, the last axis fastest;
// between them they are multilinear.
type Surface struct {
	Quantity Quantity
	Grid     Grid
	Median   []float64
	Low68    []float64
	High68   []float64
	Low95    []float64
	High95   []float64
	Members  []int64 // with pixels in the cell whose lowest corner the node is
	Score    Score   // on members never used
}

// Features returns the features of the axes.
func (s *Surface) Features() []Feature {
	fs := make([]Feature, len(s.Grid))
	for i, a := range s.Grid {
		fs[i] = a.Feature
	}
	return fs
}

// A Table is the correction that one ensemble gives against one truth.
type Table struct {
	Truth     string
	Recipe    Recipe  // that the maps have to be made by
	Members   int     // of the ensemble
	Effective float64 // number of members after weighting by the reader's prior
	Least     int     // members that a cell needs to be in the domain
	Prior     string  // what the members were weighted by; empty: all alike
	Origin    Origin
	Surfaces  []Surface
}

// Origin says where a table comes from.
type Origin struct {
	Program  string // that built it
	Ensemble string // name of the ensemble
	SHA256   string // of the ensemble's description
	Varied   string // what varies between its members, for people
}

// Find returns the surface of a quantity for exactly these features, or nil.
func (t *Table) Find(q Quantity, fs []Feature) *Surface {
	for i := range t.Surfaces {
		if s := &t.Surfaces[i]; s.Quantity == q && slices.Equal(s.Features(), fs) {
			return s
		}
	}
	return nil
}

// Features returns the largest set of features for which the table has surfaces.
func (t *Table) Features() []Feature {
	var most []Feature
	for i := range t.Surfaces {
		if fs := t.Surfaces[i].Features(); len(fs) > len(most) {
			most = fs
		}
	}
	return most
}

// A Correction is what a table says of one pixel: ln(true/inferred).
type Correction struct {
	Median, Low68, High68, Low95, High95 float64
}

// Where says whether a table has an answer for a pixel.
type Where int

// Answers of At.
const (
	Inside Where = iota
	Beyond       // a feature lies beyond its axis
	Sparse       // too few members have such pixels
)

// At returns the correction for a pixel with the features x, in the order of the axes,
// which must be finite. A cell with less than least members has none.
func (s *Surface) At(x []float64, least int) (Correction, Where) {
	var t [maxFeatures]float64
	corner, ok := s.Grid.locate(x, t[:])
	switch {
	case !ok:
		return Correction{}, Beyond
	case s.Members[corner] < int64(least):
		return Correction{}, Sparse
	}
	var c Correction
	s.Grid.corners(corner, t[:], func(node int, w float64) {
		c.Median += float64(w * s.Median[node])
		c.Low68 += float64(w * s.Low68[node])
		c.High68 += float64(w * s.High68[node])
		c.Low95 += float64(w * s.Low95[node])
		c.High95 += float64(w * s.High95[node])
	})
	return c, Inside
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
