package line

import (
	_ "embed"
	"maps"
	"slices"
	"sync"
)

//go:embed fexiii.yaml
var embedded []byte

// An Atom is a set of atomic data: what a data file holds. It is immutable and
// safe for concurrent use. fexiii.yaml states the format at its top.
type Atom struct {
	ion        string
	mass       float64 // [u]
	levels     []level
	ground     int           // levels of the ground configuration, the first ones
	pair       [2]transition // from: upper, to: lower
	decays     map[transition]float64
	strengths  map[transition]table // from: lower, to: upper; effective collision strength
	cascades   map[transition]table // [cm^3 s^-1] direct part left out; nil: fold the levels above ground
	higher     map[transition]table // [cm^3 s^-1] through levels that are not listed
	protons    map[transition]table // from: lower, to: upper [cm^3 s^-1]
	fractions  []fraction
	abundances []abundance
	discCentre map[transition]float64 // from: upper, to: lower [erg cm^-2 s^-1 sr^-1 A^-1]
	darkened   []darkened             // ascending in wavelength
	sources    []Source
}

type level struct {
	name   string
	g      float64 // statistical weight 2J+1
	energy float64 // [cm^-1] above the ground level
}

// A transition names two levels by their index, which is the number in the file
// minus 1.
type transition struct{ from, to int }

// A table is a row of numbers on a grid of log10 T.
type table struct {
	grid   *grid
	values []float64
}

type fraction struct {
	name string
	table
}

type abundance struct {
	name  string
	value float64 // A = 12 + log10 of the number ratio to hydrogen
}

type darkened struct {
	wavelength float64 // in air [nm]
	law        law
}

// A Source says where a table of the data file comes from.
type Source struct {
	Section    string // of the data file
	Source     string
	Table      string
	Unit       string
	Confidence string // "read", "memory" or "derived"
	Accuracy   string // in words; may be empty
}

// Default returns the embedded data of Fe XIII.
func Default() *Atom {
	once.Do(func() {
		a, err := Parse("fexiii.yaml", embedded)
		if err != nil {
			panic("line: embedded data: " + err.Error())
		}
		fe13 = a
	})
	return fe13
}

var (
	once sync.Once
	fe13 *Atom
)

// Ion returns the spectroscopic name of the ion.
func (a *Atom) Ion() string { return a.ion }

// Sources returns where the data come from, in the order of the file.
func (a *Atom) Sources() []Source { return slices.Clone(a.sources) }

// Ionisations returns the names of the ion-fraction columns, the default first.
func (a *Atom) Ionisations() []string {
	var names []string
	for _, f := range a.fractions {
		names = append(names, f.name)
	}
	return names
}

// Abundance returns A = 12 + log10(Fe/H) of a named abundance; "" is the default.
func (a *Atom) Abundance(name string) (value float64, ok bool) {
	for _, b := range a.abundances {
		if b.name == name || name == "" {
			return b.value, true
		}
	}
	return 0, false
}

// clone copies what Parse may change; rows and grids are never written to.
func (a *Atom) clone() *Atom {
	b := *a
	b.levels = slices.Clone(a.levels)
	b.decays = maps.Clone(a.decays)
	b.strengths = maps.Clone(a.strengths)
	b.fractions = slices.Clone(a.fractions)
	b.abundances = slices.Clone(a.abundances)
	b.sources = slices.Clone(a.sources)
	return &b
}

// sorted returns the transitions of m in order, so that sums over them are the
// same in every run.
func sorted[V any](m map[transition]V) []transition {
	return slices.SortedFunc(maps.Keys(m), func(s, t transition) int {
		if s.from != t.from {
			return s.from - t.from
		}
		return s.to - t.to
	})
}
