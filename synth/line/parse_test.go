package line

import (
	"math"
	"slices"
	"strings"
	"testing"
)

func TestEmbeddedData(t *testing.T) {
	a := Default()
	if a.Ion() != "Fe XIII" || len(a.levels) != 27 || a.ground != 5 || len(a.strengths) != 10+110 || len(a.cascades) != 20 || len(a.higher) != 20 || len(a.protons) != 5 {
		t.Errorf("%s: %d levels, %d of the ground configuration, %d strengths, %d cascades, %d higher, %d protons",
			a.Ion(), len(a.levels), a.ground, len(a.strengths), len(a.cascades), len(a.higher), len(a.protons))
	}
	if got := a.Ionisations(); !slices.Equal(got, []string{"modern", "arnaud-raymond-1992"}) {
		t.Errorf("ionisations %q", got)
	}
	for _, s := range a.Sources() {
		if s.Source == "" || s.Table == "" || s.Confidence == "" {
			t.Errorf("a table without its source: %+v", s)
		}
	}
	// The header may not let a reader take the set for a published one.
	head, _, _ := strings.Cut(string(embedded), "\nformat:")
	if !strings.Contains(head, "CALCULATED FOR THIS PROJECT") || !strings.Contains(head, "NOT A\n# PUBLISHED SET") {
		t.Error("the header does not say that the set was calculated for this project and is not published")
	}
	// A(Fe) coronal 8.10 (Feldman et al. 1992, ApJS 81, 387; from memory) is the default.
	if x, ok := a.Abundance(""); !ok || x != 8.10 {
		t.Errorf("default abundance %v", x)
	}
	if x, ok := a.Abundance("asplund-2009"); !ok || x != 7.50 {
		t.Errorf("photospheric abundance %v", x)
	}
	if _, ok := a.Abundance("nobody"); ok {
		t.Error("an abundance of no name")
	}
}

func TestSmallFile(t *testing.T) {
	a := parsed(t, small)
	if a.Ion() != "test" || len(a.levels) != 3 || a.decays[transition{2, 0}] != 0.5 {
		t.Errorf("%+v", a)
	}
}

// The example in the header of the data file, a published table typed in on its
// own grid, shifts the density read from a ratio as it should.
func TestOwnCollisionStrengths(t *testing.T) {
	_, example, _ := strings.Cut(string(embedded), "for example\n#\n")
	example, _, _ = strings.Cut(example, "\n#\n")
	text := strings.ReplaceAll("\n"+example, "\n#   ", "\n")
	a := parsed(t, text)
	if got := a.strengths[transition{0, 1}]; len(got.values) != 3 || got.values[1] != 0.23 {
		t.Fatalf("1-2 is %+v; the example reads\n%s", got, text)
	}
	if len(a.strengths) != 120 || len(a.cascades) != 20 {
		t.Errorf("%d strengths and %d cascades; the rest is to stay", len(a.strengths), len(a.cascades))
	}
	m := model(t, a, nil)
	if g := m.Range().Temperature; math.Abs(math.Log10(g[0])-6) > 1e-12 || math.Abs(math.Log10(g[1])-6.4) > 1e-12 {
		t.Errorf("temperatures %v; the narrowest grid is 6.0..6.4", g)
	}
	// 20 % more in the ground-ground strengths makes the density read from a ratio
	// at 1e8 and 1.1 smaller by 0.023 dex in 27 levels alone (derived; TestSensitivities).
	// The rates through higher levels, some 10 % of all, do not grow along, so the
	// whole model moves by a tenth less; five levels and all levels agree on it.
	shift := func(truth, use *Model) float64 {
		n, _, err := Density(use, ratio(t, truth, 8, referenceT, 1.1), referenceT, 1.1)
		if err != nil {
			t.Fatal(err)
		}
		return math.Log10(n) - 8
	}
	all := func(o *Options) { o.Levels = All }
	more := scaled(t, 1.2, true)
	five, every := shift(model(t, Default(), nil), model(t, more, nil)), shift(model(t, Default(), all), model(t, more, all))
	if math.Abs(five-every) > 2e-4 || math.Abs(five/(-0.023*0.9)-1) > 0.05 {
		t.Errorf("ground-ground +20 %%: shift %+.4f in five levels, %+.4f in all, want -0.0207", five, every)
	}
	// New strengths to levels above the ground configuration make the embedded
	// cascades stale: the model folds its own. 10 % more gives -0.027 dex in 27
	// levels alone (derived), again a tenth less here.
	more = scaled(t, 1.1, false)
	if more.cascades != nil {
		t.Error("stale cascades are kept")
	}
	five, every = shift(model(t, Default(), nil), model(t, more, nil)), shift(model(t, Default(), all), model(t, more, all))
	if math.Abs(five-every) > 5e-4 || math.Abs(five/(-0.027*0.9)-1) > 0.05 {
		t.Errorf("ground-upper +10 %%: shift %+.4f in five levels, %+.4f in all, want -0.0243", five, every)
	}
}

func TestParseErrors(t *testing.T) {
	const table = "    unit: \"1\"\n    log_t: [6.0, 6.2]\n    rows: {1-2: [0.3, 0.2]}\n"
	const base = "format: 1\nbase: embedded\ncollision_strengths:\n  - origin: {source: s, table: t, confidence: read}\n"
	for _, c := range []struct{ name, text, want string }{
		{"nothing", "", "t.yaml:1:1: "},
		{"no format", "base: embedded\n", "format: "},
		{"other format", "format: 2\nbase: embedded\n", "t.yaml:1:9: format: "},
		{"other base", "format: 1\nbase: mine\n", `t.yaml:2:1: base: "mine" is no base`},
		{"sections missing", "format: 1\nion: X\n", "mass: is missing"},
		{"unknown key", "format: 1\nbase: embedded\ncolision_strengths: []\n", "t.yaml:3:1: "},
		{"short row", base + strings.Replace(table, "0.3, 0.2", "0.3", 1), "t.yaml:7:12: collision_strengths.0.rows.1-2: 1 numbers for the 2 temperatures of log_t"},
		{"descending grid", base + strings.Replace(table, "6.0, 6.2", "6.2, 6.0", 1), "t.yaml:6:18: collision_strengths.0.log_t.1: 6 after 6.2"},
		{"upside down", base + strings.Replace(table, "1-2", "2-1", 1), "t.yaml:7:12: collision_strengths.0.rows.2-1: level 1 does not lie above level 2; write lower-upper"},
		{"no such level", base + strings.Replace(table, "1-2", "1-28", 1), "level 28 does not exist; levels are 1 to 27"},
		{"no transition", base + strings.Replace(table, "1-2", "1/2", 1), `"1/2" is no transition`},
		{"zero strength", base + strings.Replace(table, "0.3, 0.2", "0.3, 0", 1), "collision_strengths.0.rows.1-2"},
		{"wrong unit", base + strings.Replace(table, `"1"`, "cm3 s-1", 1), `t.yaml:5:5: collision_strengths.0.unit: "cm3 s-1" is not 1`},
		{"no source", strings.Replace(base, "source: s, ", "", 1) + table, "collision_strengths.0.origin.source: "},
		{"wrong confidence", strings.Replace(base, "confidence: read", "confidence: sure", 1) + table, "collision_strengths.0.origin.confidence: "},
		{"twice", base + table + "  - origin: {source: s, table: t, confidence: read}\n" + table, "t.yaml:11:12: collision_strengths.1.rows.1-2: stands in an earlier table too"},
		{"limb darkening", "format: 1\nbase: embedded\nlimb_darkening:\n  origin: {source: s, table: t, confidence: read}\n  unit: \"1\"\n  rows:\n    - {wavelength: 1000, coefficients: [0.5, 0.3]}\n", "t.yaml:7:26: limb_darkening.rows.0.coefficients: the coefficients add up to 0.8"},
		{"line without A", strings.Replace(small, "rows: {2-1: 14, 3-2: 10, 3-1: 0.5}", "rows: {2-1: 14, 3-1: 0.5}", 1), "pair.1: 3-2 has no A-value"},
		{"level missing", strings.Replace(small, "2: {name: b, J: 1, energy: 9000}", "", 1), "levels: level 2 is missing"},
		{"half J", strings.Replace(small, "J: 1,", "J: 1.3,", 1), "levels.0.rows.2.J: J = 1.3"},
		{"no ground level", strings.Replace(small, "energy: 9000", "energy: 0", 1), "levels.0.rows.2.energy: "},
		{"cascade outside", small + "cascades:\n  - origin: {source: s, table: t, confidence: read}\n    unit: cm3 s-1\n    log_t: [5.5, 6.5]\n    rows: {1>4: [1e-9, 1e-9]}\n", "cascades.0.rows.1>4: level 4 does not exist"},
	} {
		_, err := Parse("t.yaml", []byte(c.text))
		if err == nil {
			t.Errorf("%s: accepted", c.name)
		} else if !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s:\n%v\nwant ... %s ...", c.name, err, c.want)
		}
	}
	// All mistakes of a file at once.
	_, err := Parse("t.yaml", []byte(base+strings.Replace(strings.Replace(table, "0.3, 0.2", "0.3", 1), `"1"`, "u", 1)))
	if err == nil || strings.Count(err.Error(), "t.yaml:") != 2 {
		t.Errorf("two mistakes give\n%v", err)
	}
}

// A level that nothing leaves has no equilibrium; New says so.
func TestStuckLevel(t *testing.T) {
	a := parsed(t, strings.Replace(small,
		"      3: {name: c, J: 2, energy: 18000}", "      3: {name: c, J: 2, energy: 18000}\n      4: {name: d, J: 3, energy: 19000}", 1))
	o := a.Options()
	o.Levels = All
	if _, err := New(a, o); err == nil || !strings.Contains(err.Error(), "level 4") {
		t.Errorf("error is %v", err)
	}
}

// What Parse accepts, New turns into a model that answers or refuses; neither
// panics.
func FuzzParse(f *testing.F) {
	f.Add(small)
	f.Add("format: 1\nbase: embedded\n")
	f.Add("format: 1\nbase: embedded\ncollision_strengths:\n  - origin: {source: s, table: t, confidence: read}\n    unit: \"1\"\n    log_t: [6.0, 6.2, 6.4]\n    rows: {1-2: [0.3, 0.2, 0.1], 3-7: [1, 2, 3]}\n")
	f.Fuzz(func(t *testing.T, text string) {
		a, err := Parse("f.yaml", []byte(text))
		if err != nil {
			if !strings.HasPrefix(err.Error(), "f.yaml") {
				t.Fatalf("error without its file: %v", err)
			}
			return
		}
		m, err := New(a, a.Options())
		if err != nil {
			return
		}
		g := m.Range()
		p, err := m.Populations(1e8, g.Temperature[0], 1.2)
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range p {
			if !(x >= 0 && x <= 1) {
				t.Fatalf("populations %v", p)
			}
		}
	})
}
