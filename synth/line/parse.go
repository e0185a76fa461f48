package line

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"offplane/scenarios/strict"
)

// The data file as it is written; the top of fexiii.yaml says what the keys mean.
type (
	document struct {
		Format    int           `yaml:"format" in:"1..1" need:"given"`
		Base      string        `yaml:"base"`
		Ion       string        `yaml:"ion"`
		Mass      *massDoc      `yaml:"mass"`
		Ground    int           `yaml:"ground"`
		Pair      []string      `yaml:"pair"`
		Levels    []levelsDoc   `yaml:"levels"`
		Decays    []decaysDoc   `yaml:"spontaneous"`
		Strengths []ratesDoc    `yaml:"collision_strengths"`
		Cascades  []ratesDoc    `yaml:"cascades"`
		Higher    []ratesDoc    `yaml:"higher"`
		Protons   []ratesDoc    `yaml:"protons"`
		Fractions []fractionDoc `yaml:"ion_fractions"`
		Abundance []namedDoc    `yaml:"abundances"`
		Disc      *decaysDoc    `yaml:"disc_centre"`
		Darkening *darkeningDoc `yaml:"limb_darkening"`
	}
	origin struct {
		Source     string `yaml:"source" need:"given"`
		Table      string `yaml:"table" need:"given"`
		Confidence string `yaml:"confidence" one:"read,memory,derived"`
		Accuracy   string `yaml:"accuracy"`
	}
	massDoc struct {
		Origin origin  `yaml:"origin" need:"given"`
		Unit   string  `yaml:"unit" one:"u"`
		Value  float64 `yaml:"value" in:"1..300"`
	}
	levelsDoc struct {
		Origin origin              `yaml:"origin" need:"given"`
		Unit   string              `yaml:"unit" one:"cm-1"`
		Rows   map[string]levelDoc `yaml:"rows" need:"given"`
	}
	levelDoc struct {
		Name   string  `yaml:"name" need:"given"`
		J      float64 `yaml:"J" in:"0..100" need:"given"`
		Energy float64 `yaml:"energy" in:"0..1e9" need:"given"`
	}
	decaysDoc struct { // also of radiances: one number for each upper-lower
		Origin origin             `yaml:"origin" need:"given"`
		Unit   string             `yaml:"unit" need:"given"`
		Rows   map[string]float64 `yaml:"rows" in:"0..1e30" need:"given"`
	}
	ratesDoc struct {
		Origin origin               `yaml:"origin" need:"given"`
		Unit   string               `yaml:"unit" need:"given"`
		LogT   []float64            `yaml:"log_t" in:"4..9" need:"given"`
		Rows   map[string][]float64 `yaml:"rows" in:"1e-100..1e30" need:"given"` // logarithms are interpolated: zero is no value
	}
	fractionDoc struct {
		Name   string    `yaml:"name" need:"given"`
		Origin origin    `yaml:"origin" need:"given"`
		Unit   string    `yaml:"unit" one:"log10"`
		LogT   []float64 `yaml:"log_t" in:"4..9" need:"given"`
		Values []float64 `yaml:"values" in:"-100..0" need:"given"`
	}
	namedDoc struct {
		Name   string  `yaml:"name" need:"given"`
		Origin origin  `yaml:"origin" need:"given"`
		Unit   string  `yaml:"unit" one:"12 + log10(Fe/H)"`
		Value  float64 `yaml:"value" in:"0..12" need:"given"`
	}
	darkeningDoc struct {
		Origin origin         `yaml:"origin" need:"given"`
		Unit   string         `yaml:"unit" need:"given"`
		Rows   []darkeningRow `yaml:"rows" need:"given"`
	}
	darkeningRow struct {
		Wavelength   float64   `yaml:"wavelength" in:"100..1e5" need:"given"`
		Coefficients []float64 `yaml:"coefficients" in:"-100..100" need:"given"`
	}
)

const maxLevels = 1000

// Parse reads a data file; name stands in its errors. The top of fexiii.yaml
// states the format. The error is a strict.Problems: every mistake found, each
// as name:line:column: key: message.
func Parse(name string, data []byte) (*Atom, error) {
	var d document
	pos, err := strict.Read(name, data, &d)
	if err != nil {
		return nil, err
	}
	p := &parser{pos: pos, atom: &Atom{decays: map[transition]float64{}, strengths: map[transition]table{}}}
	switch d.Base {
	case "":
		for _, key := range []string{"ion", "mass", "ground", "pair", "levels", "spontaneous", "collision_strengths",
			"ion_fractions", "abundances", "disc_centre", "limb_darkening"} {
			if !pos.Given(key) {
				p.wrong(key, "is missing; write it, or base: embedded to take it from the program's own data")
			}
		}
	case "embedded":
		p.atom, p.based = Default().clone(), true
	default:
		p.wrong("base", "%q is no base; the only one is embedded", d.Base)
	}
	if len(p.problems) > 0 {
		return nil, p.problems.Err()
	}
	// Each step needs what the one before it checked.
	for _, step := range []func(*document){p.levels, p.transitions, p.rest, p.whole} {
		if step(&d); len(p.problems) > 0 {
			return nil, p.problems.Err()
		}
	}
	return p.atom, nil
}

type parser struct {
	pos      *strict.Positions
	problems strict.Problems
	atom     *Atom
	based    bool
}

func (p *parser) wrong(path, format string, args ...any) {
	p.problems = append(p.problems, p.pos.Problem(path, format, args...))
}

// from records where a table comes from and holds its unit against those allowed.
func (p *parser) from(path string, o origin, unit string, units ...string) {
	if !slices.Contains(units, unit) {
		p.wrong(path+".unit", "%q is not %s", unit, strings.Join(units, " or "))
	}
	section, _, _ := strings.Cut(path, ".")
	p.atom.sources = append(p.atom.sources, Source{section, o.Source, o.Table, unit, o.Confidence, o.Accuracy})
}

// levels reads the ion, its mass and its levels.
func (p *parser) levels(d *document) {
	a := p.atom
	if d.Ion != "" {
		a.ion = d.Ion
	}
	if d.Mass != nil {
		p.from("mass", d.Mass.Origin, d.Mass.Unit, "u")
		a.mass = d.Mass.Value
	}
	read := map[int]level{}
	top := len(a.levels)
	for i, t := range d.Levels {
		path := fmt.Sprintf("levels.%d", i)
		p.from(path, t.Origin, t.Unit, "cm-1")
		for key, l := range t.Rows {
			at := path + ".rows." + key
			n, err := strconv.Atoi(key)
			_, twice := read[n]
			switch {
			case err != nil || n < 1 || n > maxLevels:
				p.wrong(at, "%q is no level number; number the levels from 1", key)
			case twice:
				p.wrong(at, "level %d stands in an earlier table too", n)
			case 2*l.J != math.Trunc(2*l.J):
				p.wrong(at+".J", "J = %v; write a whole or half number", l.J)
			case (l.Energy == 0) != (n == 1):
				p.wrong(at+".energy", "energy is %v; it is 0 for level 1 and no other", l.Energy)
			default:
				read[n] = level{l.Name, 2*l.J + 1, l.Energy}
				top = max(top, n)
			}
		}
	}
	levels := make([]level, top)
	copy(levels, a.levels)
	for i := range levels {
		if l, ok := read[i+1]; ok {
			levels[i] = l
		} else if i >= len(a.levels) && len(p.problems) == 0 {
			p.wrong("levels", "level %d is missing; the highest is %d", i+1, top)
		}
	}
	a.levels = levels
	if p.pos.Given("ground") {
		a.ground = d.Ground
	}
	if a.ground < 2 || a.ground > top {
		p.wrong("ground", "%d levels of the ground configuration; there are 2 to %d", a.ground, top)
	}
}

// between reads a key such as "1-2" or "1>2" as two different levels.
func (p *parser) between(path, key, sign string) (transition, bool) {
	from, to, ok := strings.Cut(key, sign)
	i, err1 := strconv.Atoi(from)
	j, err2 := strconv.Atoi(to)
	if !ok || err1 != nil || err2 != nil || i == j {
		p.wrong(path, "%q is no transition; write two level numbers joined by %s", key, sign)
		return transition{}, false
	}
	for _, l := range []int{i, j} {
		if l < 1 || l > len(p.atom.levels) {
			p.wrong(path, "level %d does not exist; levels are 1 to %d", l, len(p.atom.levels))
			return transition{}, false
		}
	}
	return transition{i - 1, j - 1}, true
}

// falling reads upper-lower, rising lower-upper, within and listed transitions of
// the ground configuration, the last in either direction.
func (p *parser) falling(path, key string) (transition, bool) {
	t, ok := p.between(path, key, "-")
	if ok && p.atom.levels[t.from].energy <= p.atom.levels[t.to].energy {
		p.wrong(path, "level %d does not lie above level %d; write upper-lower", t.from+1, t.to+1)
		return t, false
	}
	return t, ok
}

func (p *parser) rising(path, key string) (transition, bool) {
	t, ok := p.between(path, key, "-")
	if ok && p.atom.levels[t.to].energy <= p.atom.levels[t.from].energy {
		p.wrong(path, "level %d does not lie above level %d; write lower-upper", t.to+1, t.from+1)
		return t, false
	}
	return t, ok
}

func (p *parser) within(path, key string) (transition, bool) {
	t, ok := p.rising(path, key)
	return t, ok && p.grounded(path, t)
}

func (p *parser) listed(path, key string) (transition, bool) {
	t, ok := p.between(path, key, ">")
	return t, ok && p.grounded(path, t)
}

func (p *parser) grounded(path string, t transition) bool {
	if top := max(t.from, t.to) + 1; top > p.atom.ground {
		p.wrong(path, "level %d is above the ground configuration, 1 to %d", top, p.atom.ground)
		return false
	}
	return true
}

// transitions reads everything that goes between levels.
func (p *parser) transitions(d *document) {
	a := p.atom
	if p.pos.Given("pair") {
		if len(d.Pair) != 2 {
			p.wrong("pair", "%d lines; write two, upper-lower, that of 1074.7 nm first", len(d.Pair))
			return
		}
		for i, key := range d.Pair {
			path := fmt.Sprintf("pair.%d", i)
			t, ok := p.falling(path, key)
			if ok && p.grounded(path, t) {
				a.pair[i] = t
			}
		}
	}
	above := false // something that the embedded cascades were made from has changed
	sum := map[transition]float64{}
	for i, t := range d.Decays {
		path := fmt.Sprintf("spontaneous.%d", i)
		p.from(path, t.Origin, t.Unit, "s-1")
		for key, x := range t.Rows {
			if tr, ok := p.falling(path+".rows."+key, key); ok {
				sum[tr] += x
				above = above || tr.from >= a.ground
			}
		}
	}
	maps.Copy(a.decays, sum)
	strengths := p.rates("collision_strengths", d.Strengths, p.rising, "1")
	maps.Copy(a.strengths, strengths)
	for tr := range strengths {
		above = above || tr.to >= a.ground
	}
	if above && p.based {
		a.cascades = nil
	}
	const plain, nano = "cm3 s-1", "1e-9 cm3 s-1"
	if p.pos.Given("cascades") {
		a.cascades = p.rates("cascades", d.Cascades, p.listed, nano, plain)
	}
	if p.pos.Given("higher") {
		a.higher = p.rates("higher", d.Higher, p.listed, nano, plain)
	}
	if p.pos.Given("protons") {
		a.protons = p.rates("protons", d.Protons, p.within, nano, plain)
	}
	if d.Disc != nil {
		p.from("disc_centre", d.Disc.Origin, d.Disc.Unit, "erg cm-2 s-1 sr-1 A-1")
		a.discCentre = map[transition]float64{}
		for key, x := range d.Disc.Rows {
			if tr, ok := p.falling("disc_centre.rows."+key, key); ok {
				a.discCentre[tr] = x
			}
		}
	}
}

// rates reads tables of rows over log_t; a transition stands in one of them.
func (p *parser) rates(section string, tables []ratesDoc, read func(path, key string) (transition, bool), units ...string) map[transition]table {
	out := map[transition]table{}
	for i, t := range tables {
		path := fmt.Sprintf("%s.%d", section, i)
		p.from(path, t.Origin, t.Unit, units...)
		scale := 1.0
		if strings.HasPrefix(t.Unit, "1e-9 ") {
			scale = 1e-9
		}
		g, ok := p.ascending(path+".log_t", t.LogT)
		if !ok {
			continue
		}
		for _, key := range slices.Sorted(maps.Keys(t.Rows)) {
			at, row := path+".rows."+key, t.Rows[key]
			tr, ok := read(at, key)
			if !ok || !p.fits(at, row, g) {
				continue
			}
			if _, twice := out[tr]; twice {
				p.wrong(at, "stands in an earlier table too")
			}
			values := make([]float64, len(row))
			for i, x := range row {
				values[i] = scale * x
			}
			out[tr] = table{g, values}
		}
	}
	return out
}

func (p *parser) ascending(path string, xs []float64) (*grid, bool) {
	if len(xs) < 2 {
		p.wrong(path, "%d temperatures; write two or more", len(xs))
		return nil, false
	}
	for i := 1; i < len(xs); i++ {
		if xs[i]-xs[i-1] < 1e-3 {
			p.wrong(fmt.Sprintf("%s.%d", path, i), "%v after %v; write log10 T ascending by 0.001 or more", xs[i], xs[i-1])
			return nil, false
		}
	}
	g := grid(xs)
	return &g, true
}

func (p *parser) fits(path string, row []float64, g *grid) bool {
	if len(row) != len(*g) {
		p.wrong(path, "%d numbers for the %d temperatures of log_t", len(row), len(*g))
		return false
	}
	return true
}

// rest reads ion fractions, abundances and the disc.
func (p *parser) rest(d *document) {
	a := p.atom
	for i, t := range d.Fractions {
		path := fmt.Sprintf("ion_fractions.%d", i)
		p.from(path, t.Origin, t.Unit, "log10")
		g, ok := p.ascending(path+".log_t", t.LogT)
		if !ok || !p.fits(path+".values", t.Values, g) {
			continue
		}
		f := fraction{t.Name, table{g, t.Values}}
		if i := slices.IndexFunc(a.fractions, func(o fraction) bool { return o.name == f.name }); i >= 0 {
			a.fractions[i] = f
		} else {
			a.fractions = append(a.fractions, f)
		}
	}
	for i, t := range d.Abundance {
		p.from(fmt.Sprintf("abundances.%d", i), t.Origin, t.Unit, "12 + log10(Fe/H)")
		b := abundance{t.Name, t.Value}
		if i := slices.IndexFunc(a.abundances, func(o abundance) bool { return o.name == b.name }); i >= 0 {
			a.abundances[i] = b
		} else {
			a.abundances = append(a.abundances, b)
		}
	}
	if d.Darkening == nil {
		return
	}
	p.from("limb_darkening", d.Darkening.Origin, d.Darkening.Unit, "1")
	a.darkened = nil
	for i, row := range d.Darkening.Rows {
		path := fmt.Sprintf("limb_darkening.rows.%d", i)
		l := law(row.Coefficients)
		for k := range 65 {
			if mu := float64(k) / 64; l.at(mu) < 0 {
				p.wrong(path+".coefficients", "I(mu)/I(1) is negative, %.3g at mu = %.3g", l.at(mu), mu)
				break
			}
		}
		if x := l.at(1); math.Abs(x-1) > 0.01 {
			p.wrong(path+".coefficients", "the coefficients add up to %.4g; they add up to 1", x)
		}
		if i > 0 && !(row.Wavelength > d.Darkening.Rows[i-1].Wavelength) {
			p.wrong(path+".wavelength", "write the rows in order of wavelength")
		}
		a.darkened = append(a.darkened, darkened{row.Wavelength, l})
	}
	if len(a.darkened) == 0 {
		p.wrong("limb_darkening.rows", "no rows")
	}
}

// whole checks what no single section can know.
func (p *parser) whole(*document) {
	a := p.atom
	for i, tr := range a.pair {
		if !(a.decays[tr] > 0) {
			p.wrong(fmt.Sprintf("pair.%d", i), "%d-%d has no A-value in spontaneous", tr.from+1, tr.to+1)
		}
		if _, ok := a.discCentre[tr]; !ok {
			p.wrong("disc_centre.rows", "no radiance for %d-%d", tr.from+1, tr.to+1)
		}
	}
	if a.pair[0] == a.pair[1] {
		p.wrong("pair", "the same line twice")
	}
	if len(a.strengths) == 0 {
		p.wrong("collision_strengths", "no rows")
	}
	if len(a.fractions) == 0 {
		p.wrong("ion_fractions", "no column")
	}
	if len(a.abundances) == 0 {
		p.wrong("abundances", "no value")
	}
	// Levels whose energies were replaced may have changed places.
	for _, tr := range sorted(a.decays) {
		if a.levels[tr.from].energy <= a.levels[tr.to].energy {
			p.wrong("levels", "level %d decays to level %d but does not lie above it", tr.from+1, tr.to+1)
		}
	}
	for _, ts := range []map[transition]table{a.strengths, a.protons} {
		for _, tr := range sorted(ts) {
			if a.levels[tr.to].energy <= a.levels[tr.from].energy {
				p.wrong("levels", "level %d does not lie above level %d, as its collisions say", tr.to+1, tr.from+1)
			}
		}
	}
	for _, ts := range []map[transition]table{a.cascades, a.higher, a.protons} {
		for _, tr := range sorted(ts) {
			p.grounded("ground", tr)
		}
	}
	for _, tr := range a.pair {
		p.grounded("ground", tr)
	}
}
