package line

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v4"
)

// A ParseError is a mistake in a data file.
type ParseError struct {
	File         string
	Line, Column int // from 1; 0 where unknown
	Key          string
	Message      string
}

func (e *ParseError) Error() string {
	if e.Key == "" {
		return fmt.Sprintf("%s:%d:%d: %s", e.File, e.Line, e.Column, e.Message)
	}
	return fmt.Sprintf("%s:%d:%d: %s: %s", e.File, e.Line, e.Column, e.Key, e.Message)
}

// Parse reads a data file; name stands in its errors. The top of fexiii.yaml
// states the format. The error joins one *ParseError for every mistake found, in
// the order they stand in the file within each section.
func Parse(name string, data []byte) (*Atom, error) {
	r := &reader{file: name}
	var doc yaml.Node
	if err := yaml.Load(data, &doc); err != nil {
		e := &ParseError{File: name, Line: 1, Column: 1, Message: err.Error()}
		var at *yaml.LoadError
		if errors.As(err, &at) {
			e.Message = at.Message
			if at.Mark.Line > 0 {
				e.Line, e.Column = at.Mark.Line, at.Mark.Column
			}
		}
		return nil, e
	}
	root := &doc
	if doc.Kind == yaml.DocumentNode && len(doc.Content) > 0 {
		root = doc.Content[0]
	}
	a := r.atom(root)
	if len(r.errs) > 0 {
		return nil, errors.Join(r.errs...)
	}
	return a, nil
}

// A reader walks the YAML tree and collects mistakes instead of stopping at one.
type reader struct {
	file string
	errs []error
}

func (r *reader) fail(n *yaml.Node, key, format string, args ...any) {
	r.errs = append(r.errs, &ParseError{r.file, max(n.Line, 1), max(n.Column, 1), key, fmt.Sprintf(format, args...)})
}

func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// each calls f for the entries of a mapping, and reports what is no mapping and
// keys that stand twice.
func (r *reader) each(n *yaml.Node, path string, f func(key, value *yaml.Node)) {
	if n.Kind != yaml.MappingNode {
		r.fail(n, path, "want a mapping of key: value")
		return
	}
	seen := map[string]bool{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		k := n.Content[i]
		switch {
		case k.Kind != yaml.ScalarNode:
			r.fail(k, path, "want a plain key")
		case seen[k.Value]:
			r.fail(k, join(path, k.Value), "stands twice")
		default:
			seen[k.Value] = true
			f(k, n.Content[i+1])
		}
	}
}

// fields returns the entries of a mapping that may hold only the known keys.
func (r *reader) fields(n *yaml.Node, path string, known ...string) map[string]*yaml.Node {
	m := map[string]*yaml.Node{}
	r.each(n, path, func(key, value *yaml.Node) {
		if !slices.Contains(known, key.Value) {
			r.fail(key, join(path, key.Value), "unknown key; known are %s", strings.Join(known, ", "))
			return
		}
		m[key.Value] = value
	})
	return m
}

// text returns a non-empty scalar.
func (r *reader) text(n *yaml.Node, path string) string {
	if n.Kind != yaml.ScalarNode || strings.TrimSpace(n.Value) == "" {
		r.fail(n, path, "want a word")
		return ""
	}
	return n.Value
}

// number returns a finite number from lo to hi.
func (r *reader) number(n *yaml.Node, path string, lo, hi float64) (float64, bool) {
	x, err := strconv.ParseFloat(n.Value, 64)
	if n.Kind != yaml.ScalarNode || err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
		r.fail(n, path, "want a number, have %q", n.Value)
		return 0, false
	}
	if x < lo || x > hi {
		r.fail(n, path, "%v is outside %v..%v", x, lo, hi)
		return 0, false
	}
	return x, true
}

func (r *reader) numbers(n *yaml.Node, path string, lo, hi float64) ([]float64, bool) {
	if n.Kind != yaml.SequenceNode || len(n.Content) == 0 {
		r.fail(n, path, "want a list of numbers [a, b, ...]")
		return nil, false
	}
	xs, ok := make([]float64, len(n.Content)), true
	for i, c := range n.Content {
		var good bool
		xs[i], good = r.number(c, fmt.Sprintf("%s[%d]", path, i), lo, hi)
		ok = ok && good
	}
	return xs, ok
}

// ascending reads a grid of log10 T.
func (r *reader) ascending(n *yaml.Node, path string) *grid {
	xs, ok := r.numbers(n, path, 4, 9)
	if !ok {
		return nil
	}
	if len(xs) < 2 {
		r.fail(n, path, "want at least two temperatures")
		return nil
	}
	for i := 1; i < len(xs); i++ {
		if xs[i]-xs[i-1] < 1e-3 {
			r.fail(n.Content[i], fmt.Sprintf("%s[%d]", path, i), "%v does not ascend by 0.001 or more after %v", xs[i], xs[i-1])
			return nil
		}
	}
	g := grid(xs)
	return &g
}

// row reads numbers that belong to a grid.
func (r *reader) row(n *yaml.Node, path string, g *grid, lo, hi float64) (table, bool) {
	xs, ok := r.numbers(n, path, lo, hi)
	if ok && g != nil && len(xs) != len(*g) {
		r.fail(n, path, "%d numbers for the %d temperatures of log_t", len(xs), len(*g))
		ok = false
	}
	return table{g, xs}, ok && g != nil
}

// tables calls f for the one table or each table of the list under a section,
// after it has read and recorded where the table comes from.
func (r *reader) tables(a *Atom, n *yaml.Node, section string, units []string, keys []string, f func(n *yaml.Node, m map[string]*yaml.Node, path, unit string)) {
	list, paths := []*yaml.Node{n}, []string{section}
	if n.Kind == yaml.SequenceNode {
		list, paths = n.Content, nil
		for i := range list {
			paths = append(paths, fmt.Sprintf("%s[%d]", section, i))
		}
	}
	for i, t := range list {
		path := paths[i]
		if t.Kind != yaml.MappingNode {
			r.fail(t, path, "want a table, or a list of tables")
			continue
		}
		m := r.fields(t, path, slices.Concat([]string{"source", "table", "unit", "confidence", "accuracy"}, keys)...)
		word := func(key string, must bool) string {
			c, ok := m[key]
			if !ok {
				if must {
					r.fail(t, join(path, key), "missing")
				}
				return ""
			}
			return r.text(c, join(path, key))
		}
		s := Source{section, word("source", true), word("table", true), word("unit", true), word("confidence", true), word("accuracy", false)}
		if s.Confidence != "" && !slices.Contains([]string{"read", "memory", "derived"}, s.Confidence) {
			r.fail(m["confidence"], join(path, "confidence"), "%q is none of read, memory, derived", s.Confidence)
		}
		if s.Unit != "" && !slices.Contains(units, s.Unit) {
			r.fail(m["unit"], join(path, "unit"), "%q is not %s", s.Unit, strings.Join(units, " or "))
		}
		missing := false
		for _, k := range keys {
			if _, ok := m[k]; !ok {
				r.fail(t, join(path, k), "missing")
				missing = true
			}
		}
		a.sources = append(a.sources, s)
		if !missing {
			f(t, m, path, s.Unit)
		}
	}
}

// between reads a key such as "1-2" or "1>2" as two different levels.
func (r *reader) between(a *Atom, k *yaml.Node, path, sign string) (transition, bool) {
	from, to, ok := strings.Cut(k.Value, sign)
	i, err1 := strconv.Atoi(strings.TrimSpace(from))
	j, err2 := strconv.Atoi(strings.TrimSpace(to))
	if !ok || err1 != nil || err2 != nil || i == j {
		r.fail(k, path, "want two level numbers joined by %q, have %q", sign, k.Value)
		return transition{}, false
	}
	for _, l := range []int{i, j} {
		if l < 1 || l > len(a.levels) {
			r.fail(k, path, "there is no level %d; levels are 1..%d", l, len(a.levels))
			return transition{}, false
		}
	}
	return transition{i - 1, j - 1}, true
}

// ordered is between with the level of lower energy first or last.
func (r *reader) ordered(a *Atom, k *yaml.Node, path string, lowerFirst bool) (transition, bool) {
	t, ok := r.between(a, k, path, "-")
	if !ok {
		return t, false
	}
	rises := a.levels[t.to].energy > a.levels[t.from].energy
	if rises != lowerFirst {
		want := "upper-lower"
		if lowerFirst {
			want = "lower-upper"
		}
		r.fail(k, path, "want %s; level %d does not lie above level %d", want, 1+pick(lowerFirst, t.to, t.from), 1+pick(lowerFirst, t.from, t.to))
		return t, false
	}
	return t, true
}

func pick(first bool, a, b int) int {
	if first {
		return a
	}
	return b
}

const (
	maxLevels = 1000
	largest   = 1e30 // any number of a data file
	tiny      = 1e-300
)

func (r *reader) atom(root *yaml.Node) *Atom {
	m := r.fields(root, "", "format", "base", "ion", "mass", "levels", "ground", "pair", "spontaneous",
		"collision_strengths", "cascades", "higher", "protons", "ion_fractions", "abundances", "disc_centre", "limb_darkening")
	if len(r.errs) > 0 && len(m) == 0 {
		return nil
	}
	if n, ok := m["format"]; !ok {
		r.fail(root, "format", "missing; this program reads format 1")
	} else if n.Value != "1" {
		r.fail(n, "format", "%q is unknown; this program reads format 1", n.Value)
	}
	a := &Atom{decays: map[transition]float64{}, strengths: map[transition]table{}}
	based := false
	if n, ok := m["base"]; ok {
		if n.Value != "embedded" {
			r.fail(n, "base", "%q is unknown; the only base is embedded", n.Value)
			return nil
		}
		a, based = Default().clone(), true
	}
	for _, section := range []string{"ion", "mass", "levels", "ground", "pair", "spontaneous", "collision_strengths",
		"ion_fractions", "abundances", "disc_centre", "limb_darkening"} {
		if _, ok := m[section]; !ok && !based {
			r.fail(root, section, "missing; or take it from the program's own data with base: embedded")
		}
	}
	if n, ok := m["ion"]; ok {
		a.ion = r.text(n, "ion")
	}
	if n, ok := m["mass"]; ok {
		r.tables(a, n, "mass", []string{"u"}, []string{"value"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, _ string) {
			a.mass, _ = r.number(t["value"], join(path, "value"), 1, 300)
		})
	}
	if n, ok := m["levels"]; ok {
		r.levels(a, n)
	}
	if len(a.levels) == 0 {
		if len(r.errs) == 0 {
			r.fail(root, "levels", "missing")
		}
		return nil // nothing else can be checked
	}
	if n, ok := m["ground"]; ok {
		g, good := r.number(n, "ground", 2, float64(len(a.levels)))
		if good && g != math.Trunc(g) {
			r.fail(n, "ground", "want a whole number")
		}
		a.ground = int(g)
	}
	if n, ok := m["pair"]; ok {
		if n.Kind != yaml.SequenceNode || len(n.Content) != 2 {
			r.fail(n, "pair", "want two lines [upper-lower, upper-lower]")
		} else {
			for i, c := range n.Content {
				path := fmt.Sprintf("pair[%d]", i)
				t, good := r.ordered(a, c, path, false)
				if good && max(t.from, t.to) >= a.ground {
					r.fail(c, path, "want levels of the ground configuration, 1..%d", a.ground)
				}
				a.pair[i] = t
			}
		}
	}
	replacedAbove := false // something that the embedded cascades were made from
	above := func(t transition) { replacedAbove = replacedAbove || max(t.from, t.to) >= a.ground }
	if n, ok := m["spontaneous"]; ok {
		sum := map[transition]float64{}
		r.tables(a, n, "spontaneous", []string{"s-1"}, []string{"rows"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, _ string) {
			path = join(path, "rows")
			r.each(t["rows"], path, func(k, v *yaml.Node) {
				p := join(path, k.Value)
				tr, ok1 := r.ordered(a, k, p, false)
				x, ok2 := r.number(v, p, 0, largest)
				if ok1 && ok2 {
					sum[tr] += x
					above(tr)
				}
			})
		})
		for tr, x := range sum { // each transition is its own entry: order does not matter
			a.decays[tr] = x
		}
	}
	if n, ok := m["collision_strengths"]; ok {
		for tr, t := range r.onGrid(a, n, "collision_strengths", []string{"1"}, func(k *yaml.Node, p string) (transition, bool) {
			return r.ordered(a, k, p, true)
		}) {
			a.strengths[tr] = t
			above(tr)
		}
	}
	if replacedAbove && based {
		a.cascades = nil
	}
	within := func(sign string, lowerFirst bool) func(*yaml.Node, string) (transition, bool) {
		return func(k *yaml.Node, p string) (transition, bool) {
			var tr transition
			var ok bool
			if lowerFirst {
				tr, ok = r.ordered(a, k, p, true)
			} else {
				tr, ok = r.between(a, k, p, sign)
			}
			if ok && max(tr.from, tr.to) >= a.ground {
				r.fail(k, p, "want levels of the ground configuration, 1..%d", a.ground)
				return tr, false
			}
			return tr, ok
		}
	}
	for _, s := range []struct {
		name string
		into *map[transition]table
		key  func(*yaml.Node, string) (transition, bool)
	}{
		{"cascades", &a.cascades, within(">", false)},
		{"higher", &a.higher, within(">", false)},
		{"protons", &a.protons, within("-", true)},
	} {
		if n, ok := m[s.name]; ok {
			*s.into = r.onGrid(a, n, s.name, []string{"cm3 s-1", "1e-9 cm3 s-1"}, s.key)
		}
	}
	if n, ok := m["ion_fractions"]; ok {
		r.tables(a, n, "ion_fractions", []string{"log10"}, []string{"name", "log_t", "values"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, _ string) {
			name := r.text(t["name"], join(path, "name"))
			row, good := r.row(t["values"], join(path, "values"), r.ascending(t["log_t"], join(path, "log_t")), -100, 0)
			if !good || name == "" {
				return
			}
			f := fraction{name, row}
			if i := slices.IndexFunc(a.fractions, func(f fraction) bool { return f.name == name }); i >= 0 {
				a.fractions[i] = f
			} else {
				a.fractions = append(a.fractions, f)
			}
		})
	}
	if n, ok := m["abundances"]; ok {
		r.tables(a, n, "abundances", []string{"12 + log10(Fe/H)"}, []string{"name", "value"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, _ string) {
			name := r.text(t["name"], join(path, "name"))
			x, good := r.number(t["value"], join(path, "value"), 0, 12)
			if !good || name == "" {
				return
			}
			b := abundance{name, x}
			if i := slices.IndexFunc(a.abundances, func(b abundance) bool { return b.name == name }); i >= 0 {
				a.abundances[i] = b
			} else {
				a.abundances = append(a.abundances, b)
			}
		})
	}
	if n, ok := m["disc_centre"]; ok {
		a.discCentre = map[transition]float64{}
		r.tables(a, n, "disc_centre", []string{"erg cm-2 s-1 sr-1 A-1"}, []string{"rows"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, _ string) {
			path = join(path, "rows")
			r.each(t["rows"], path, func(k, v *yaml.Node) {
				p := join(path, k.Value)
				tr, ok1 := r.ordered(a, k, p, false)
				x, ok2 := r.number(v, p, 0, largest)
				if ok1 && ok2 {
					a.discCentre[tr] = x
				}
			})
		})
		for _, tr := range a.pair {
			if _, ok := a.discCentre[tr]; !ok && len(r.errs) == 0 {
				r.fail(n, "disc_centre", "no radiance for %d-%d", tr.from+1, tr.to+1)
			}
		}
	}
	if n, ok := m["limb_darkening"]; ok {
		r.darkening(a, n)
	}
	if len(r.errs) == 0 {
		r.whole(a, root)
	}
	return a
}

func (r *reader) levels(a *Atom, n *yaml.Node) {
	type found struct {
		level
		at *yaml.Node
	}
	read := map[int]found{}
	top := len(a.levels)
	r.tables(a, n, "levels", []string{"cm-1"}, []string{"rows"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, _ string) {
		path = join(path, "rows")
		r.each(t["rows"], path, func(k, v *yaml.Node) {
			p := join(path, k.Value)
			i, err := strconv.Atoi(k.Value)
			if err != nil || i < 1 || i > maxLevels {
				r.fail(k, p, "want a level number from 1 to %d", maxLevels)
				return
			}
			if _, twice := read[i]; twice {
				r.fail(k, p, "level %d stands twice", i)
				return
			}
			f := r.fields(v, p, "name", "J", "energy")
			for _, key := range []string{"name", "J", "energy"} {
				if f[key] == nil {
					r.fail(v, join(p, key), "missing")
					return
				}
			}
			name := r.text(f["name"], join(p, "name"))
			j, ok1 := r.number(f["J"], join(p, "J"), 0, 100)
			e, ok2 := r.number(f["energy"], join(p, "energy"), 0, 1e9)
			if ok1 && 2*j != math.Trunc(2*j) {
				r.fail(f["J"], join(p, "J"), "want a whole or half number")
				ok1 = false
			}
			if ok1 && ok2 && name != "" {
				read[i] = found{level{name, 2*j + 1, e}, k}
				top = max(top, i)
			}
		})
	})
	if len(r.errs) > 0 {
		a.levels = nil
		return
	}
	levels := make([]level, top)
	copy(levels, a.levels)
	for i := range levels {
		if f, ok := read[i+1]; ok {
			levels[i] = f.level
		} else if i >= len(a.levels) {
			r.fail(n, "levels", "level %d is missing below level %d", i+1, top)
		}
	}
	for i, l := range levels {
		if at := read[i+1].at; at != nil && (l.energy == 0) != (i == 0) {
			r.fail(at, fmt.Sprintf("levels.%d.energy", i+1), "level 1, and no other, has energy 0")
		}
	}
	a.levels = levels
}

// onGrid reads tables of rows on a grid of log_t; every transition stands once.
func (r *reader) onGrid(a *Atom, n *yaml.Node, section string, units []string, key func(*yaml.Node, string) (transition, bool)) map[transition]table {
	out := map[transition]table{}
	r.tables(a, n, section, units, []string{"log_t", "rows"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, unit string) {
		g := r.ascending(t["log_t"], join(path, "log_t"))
		path = join(path, "rows")
		r.each(t["rows"], path, func(k, v *yaml.Node) {
			p := join(path, k.Value)
			tr, ok1 := key(k, p)
			row, ok2 := r.row(v, p, g, tiny, largest) // logarithms are interpolated: zero is no value
			if !ok1 || !ok2 {
				return
			}
			if _, twice := out[tr]; twice {
				r.fail(k, p, "stands in an earlier table too")
				return
			}
			if unit == "1e-9 cm3 s-1" {
				for i := range row.values {
					row.values[i] *= 1e-9
				}
			}
			out[tr] = row
		})
	})
	return out
}

func (r *reader) darkening(a *Atom, n *yaml.Node) {
	a.darkened = nil
	r.tables(a, n, "limb_darkening", []string{"1"}, []string{"rows"}, func(_ *yaml.Node, t map[string]*yaml.Node, path, _ string) {
		path = join(path, "rows")
		r.each(t["rows"], path, func(k, v *yaml.Node) {
			p := join(path, k.Value)
			w, ok1 := r.number(k, p, 100, 1e5)
			cs, ok2 := r.numbers(v, p, -100, 100)
			if !ok1 || !ok2 {
				return
			}
			for mu := 0.0; mu <= 1; mu += 1.0 / 64 {
				x := 0.0
				for i := len(cs) - 1; i >= 0; i-- {
					x = x*mu + cs[i]
				}
				if x < 0 || mu == 1 && math.Abs(x-1) > 0.01 {
					r.fail(v, p, "I(mu)/I(1) is %.3g at mu = %.3g; it is 1 at 1 and nowhere negative", x, mu)
					return
				}
			}
			a.darkened = append(a.darkened, darkened{w, cs})
		})
	})
	slices.SortFunc(a.darkened, func(x, y darkened) int {
		if x.wavelength < y.wavelength {
			return -1
		}
		return 1
	})
	for i := 1; i < len(a.darkened); i++ {
		if a.darkened[i].wavelength == a.darkened[i-1].wavelength {
			r.fail(n, "limb_darkening", "%v nm stands twice", a.darkened[i].wavelength)
		}
	}
	if len(a.darkened) == 0 && len(r.errs) == 0 {
		r.fail(n, "limb_darkening", "no rows")
	}
}

// whole checks what no single section can know.
func (r *reader) whole(a *Atom, root *yaml.Node) {
	for i, tr := range a.pair {
		if !(a.decays[tr] > 0) {
			r.fail(root, fmt.Sprintf("pair[%d]", i), "%d-%d has no A-value in spontaneous", tr.from+1, tr.to+1)
		}
		if _, ok := a.discCentre[tr]; !ok {
			r.fail(root, "disc_centre", "no radiance for %d-%d", tr.from+1, tr.to+1)
		}
	}
	if a.pair[0] == a.pair[1] {
		r.fail(root, "pair", "want two different lines")
	}
	// A level with no way in or out would be left without a population.
	linked := make([]bool, len(a.levels))
	linked[0] = true
	for again := true; again; {
		again = false
		for _, trs := range [][]transition{sorted(a.decays), sorted(a.strengths)} {
			for _, t := range trs {
				if linked[t.from] != linked[t.to] {
					linked[t.from], linked[t.to], again = true, true, true
				}
			}
		}
	}
	for i, ok := range linked {
		if !ok {
			r.fail(root, "levels", "level %d (%s) has neither A-values nor collision strengths", i+1, a.levels[i].name)
		}
	}
	if len(a.fractions) == 0 {
		r.fail(root, "ion_fractions", "no column")
	}
	if len(a.abundances) == 0 {
		r.fail(root, "abundances", "no value")
	}
}
