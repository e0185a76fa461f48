package ensemble

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/scenarios/strict"
)

// The embedded ensembles are valid, and so is every member of them.
func TestLibrary(t *testing.T) {
	if len(Names()) < 2 {
		t.Fatalf("only %v", Names())
	}
	for _, name := range Names() {
		l, err := Load(name)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if l.About == "" {
			t.Errorf("%s does not say what it is", name)
		}
		seeds := map[uint64]bool{}
		for i := range l.Members {
			s, values, err := l.Member(i)
			if err != nil {
				t.Fatalf("%s, member %d: %v\n%v", name, i, err, values)
			}
			if seeds[s.Scenario.Seed] {
				t.Errorf("%s: two members have the seed %d", name, s.Scenario.Seed)
			}
			seeds[s.Scenario.Seed] = true
		}
	}
	if l, err := Load("belts"); err != nil || l.Members < 200 {
		t.Errorf("the shipped ensemble has too few members: %v", err)
	}
}

// A member's file holds the maps of its scenario at the pixels with a field, and is read
// back as it was written.
func TestMember(t *testing.T) {
	l, dir := whole(t)
	set := open(t, dir)
	if len(set.Done) != l.Members {
		t.Fatalf("done %v, failed %v", set.Done, set.Failed)
	}
	for _, i := range []int{1, 2} {
		m, err := set.Read(i)
		if err != nil {
			t.Fatal(err)
		}
		s, values, err := l.Member(i)
		if err != nil {
			t.Fatal(err)
		}
		if diff := cmp.Diff(values, m.Values); diff != "" || m.Scenario.SHA256 != s.SHA256 || m.Version != "test" {
			t.Errorf("member %d: %s, version %s, values %s", i, m.Scenario.SHA256, m.Version, diff)
		}
		o, err := trial.Run(t.Context(), s, trial.Settings{})
		if err != nil {
			t.Fatal(err)
		}
		checkAgainst(t, m, o)
	}
}

// A member without a single pixel that has a field is a member all the same.
func TestEmptyMember(t *testing.T) {
	l := tiny(t)
	s, values, err := l.Member(1)
	if err != nil {
		t.Fatal(err)
	}
	o, err := trial.Run(t.Context(), s, trial.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"B", "B_PAIR"} {
		clear(o.Inferred.Maps.Get(name).Data)
	}
	m, err := newMember(1, l.SHA256, "test", s, values, o)
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), memberName)
	if err := m.write(path); err != nil {
		t.Fatal(err)
	}
	again, err := ReadMember(path)
	if err != nil || again.Len() != 0 || len(again.Heights) == 0 {
		t.Errorf("%d pixels, %v", again.Len(), err)
	}
}

// checkAgainst holds a member against the whole outcome.
func checkAgainst(t *testing.T, m *Member, o *trial.Outcome) {
	t.Helper()
	b, pair := o.Inferred.Maps.Get("B").Data, o.Inferred.Maps.Get("B_PAIR").Data
	k := 0
	for i, in := range o.Verdict.Field {
		if !in || !(b[i] > 0) && !(pair[i] > 0) {
			continue
		}
		r, pa := o.Truth.Grid.Polar(i%o.Truth.Grid.Nx, i/o.Truth.Grid.Nx)
		same := func(name string, want float64) {
			if got := float64(m.Column(name)[k]); float32(got) != float32(want) && !(math.IsNaN(got) && math.IsNaN(want)) {
				t.Fatalf("member %d, pixel %d: %s is %g, want %g", m.Number, i, name, got, want)
			}
		}
		same("R", r)
		same("PA", pa)
		for _, name := range []string{"B", "B_PAIR", "SPEED_ERR_PAIR", "NE", "TRACK", "COHERENCE", "PEAK"} {
			same(name, float64(o.Inferred.Maps.Get(name).Data[i]))
		}
		for _, name := range []string{"B_SKY", "NE_EMIS", "SPEED_WAVE"} {
			same(name, float64(o.Truth.Maps.Get(name).Data[i]))
		}
		// The angle between two lines by their scalar product (derived).
		rad := math.Pi / 180
		cos := math.Abs(math.Cos((float64(o.Inferred.Maps.Get("ANGLE").Data[i]) - pa) * rad))
		if got := math.Cos(float64(m.Column("ANGLE_RADIAL")[k]) * rad); math.Abs(got-cos) > 1e-5 {
			t.Fatalf("member %d, pixel %d: cosine of the slant %g, want %g", m.Number, i, got, cos)
		}
		if m.Ints("FLAG")[k] != o.Inferred.Maps.Get("FLAG").Ints[i] {
			t.Fatalf("member %d, pixel %d: another flag", m.Number, i)
		}
		k++
	}
	if k != m.Len() {
		t.Errorf("member %d keeps %d pixels, want %d", m.Number, m.Len(), k)
	}
	total, valid := m.Counts()
	if p := o.Verdict.Summary.Pixels; total != p.Total || valid != p.Valid {
		t.Errorf("member %d counts %d of %d valid, want %d of %d", m.Number, valid, total, p.Valid, p.Total)
	}
	if diff := cmp.Diff(o.Verdict.Flags, m.Flags); diff != "" {
		t.Errorf("member %d: %s", m.Number, diff)
	}
}

// The recipe is that of the scenario, survives being written down, and names one
// estimator.
func TestRecipe(t *testing.T) {
	_, dir := whole(t)
	m, err := open(t, dir).Read(0)
	if err != nil {
		t.Fatal(err)
	}
	r := m.Recipe(1)
	if len(r.Inversion.Estimators) != 1 || r.Inversion.Estimators[0] != "pair" || r.Inversion.Box != 5 || r.Pixel != 15 || r.Camera != "none" {
		t.Errorf("%+v", r)
	}
	var again Recipe
	if err := strict.Decode("recipe", strict.Encode(r), &again); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(r, again); diff != "" {
		t.Error(diff)
	}
}

// Problems of an ensemble file are told with their place and what would be right.
func TestProblems(t *testing.T) {
	const base = "base: base.yaml\n"
	for _, c := range []struct{ text, want string }{
		{"members: 3\n", `1:1: base: is missing`},
		{base + "membrs: 3\n", `2:1: unknown key "membrs"; did you mean "members"?`},
		{base + "members: 3\n", `parameters: is missing`},
		{base + "members: 3\nparameters: []\n", `3:1: parameters: none is given`},
		{base + "design: sobl\n", `2:9: design: "sobl" is not allowed; write one of grid, random, latin-hypercube, sobol; did you mean "sobol"?`},
		{base + "parameters:\n  - path: waves.cell\n    uniform: {from: 3 Mm, to: 9 Mm}\n", `members: is missing; write how many members the design latin-hypercube has`},
		{base + "members: 3\nparameters:\n  - path: waves.cel\n    uniform: {from: 3 Mm, to: 9 Mm}\n", `5:15: parameters.0.uniform.from: waves.cel: unknown key "cel"; did you mean "cell"?`},
		{base + "members: 3\nparameters:\n  - path: waves.cell\n    uniform: {from: 3 Mm, to: 900 Mm}\n", `5:27: parameters.0.uniform.to: waves.cell: 900 Mm is out of range`},
		{base + "members: 3\nparameters:\n  - path: waves.cell\n    uniform: {from: 9 Mm, to: 3 Mm}\n", `3 Mm is not above 9 Mm`},
		{base + "members: 3\nparameters:\n  - path: waves.cell\n    uniform: {from: 3 Mm, to: 9000 km}\n", `"9000 km" is not in the unit of "3 Mm"`},
		{base + "members: 3\nparameters:\n  - path: waves.cell\n    uniform: {from: small, to: large}\n", `"small" is not a number with a unit`},
		{base + "members: 3\nparameters:\n  - path: waves.inward\n    log_uniform: {from: 0, to: 1}\n", `0 has no logarithm; it must be more than 0`},
		{base + "members: 3\nparameters:\n  - path: waves.inward\n    normal: {mean: 0.5, deviation: 0, from: 0, to: 1}\n", `0 must be more than 0`},
		{base + "members: 3\nparameters:\n  - path: waves.inward\n    normal: {mean: 9, deviation: 0.1, from: 0, to: 1}\n", `the range holds almost nothing of the distribution`},
		{base + "members: 3\nparameters:\n  - path: waves.inward\n    values: []\n", `the list is empty`},
		{base + "members: 3\nparameters:\n  - path: waves.inward\n", `4:5: parameters.0: exactly one of values, uniform, log_uniform, normal, log_normal must be given`},
		{base + "members: 3\nparameters:\n  - path: seed\n    values: [1, 2]\n", `every member has a seed of its own`},
		{base + "members: 3\nparameters:\n  - path: inversion.box\n    values: [5, 7]\n", `inversion.box is part of the recipe`},
		{base + "members: 3\nparameters:\n  - path: waves.inward\n    values: [0.1, 99]\n", `5:19: parameters.0.values.1: waves.inward: 99 is out of range`},
		{base + "members: 3\nparameters:\n  - path: waves.inward\n    values: [0, 1]\n  - path: waves.inward\n    values: [0, 1]\n", `6:5: parameters.1.path: waves.inward varies already as parameter 0`},
		{base + "design: grid\nmembers: 3\nparameters:\n  - path: waves.inward\n    values: [0, 1]\n", `3:1: members: 3 stands here; the grid has 2 combinations`},
		{base + "design: grid\nparameters:\n  - path: waves.inward\n    uniform: {from: 0, to: 1}\n", `has no values; in a grid every parameter is a list of values`},
		{base + "set: [wavs.cell=3 Mm]\ndesign: grid\nparameters:\n  - path: waves.inward\n    values: [0, 1]\n", `2:7: set.0: wavs.cell: unknown key "wavs"; did you mean "waves"?`},
		{"base: nothing\ndesign: grid\nparameters:\n  - path: waves.inward\n    values: [0, 1]\n", `1:1: base: no scenario is called "nothing"`},
		{base + "base_sha256: abc\ndesign: grid\nparameters:\n  - path: waves.inward\n    values: [0, 1]\n", `2:1: base_sha256: is abc, but the base with its changes has`},
	} {
		_, err := load(t, c.text)
		if err == nil {
			t.Errorf("accepted:\n%s", c.text)
			continue
		}
		if !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "e.yaml:") {
			t.Errorf("%s\nsays %v\nwant %s", c.text, err, c.want)
		}
	}
	if _, err := Load("smal"); err == nil || !strings.Contains(err.Error(), `did you mean "small"?`) {
		t.Errorf("%v", err)
	}
}

// The resolved ensemble is read back as the same one, null in its lists included.
func TestResolved(t *testing.T) {
	for _, name := range Names() {
		l, err := Load(name)
		if err != nil {
			t.Fatal(err)
		}
		again, err := parseResolved("dir/ensemble.yaml", l.Canonical)
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		if again.SHA256 != l.SHA256 || !bytes.Equal(strict.Encode(again.Ensemble), l.Canonical) {
			t.Errorf("%s changes when it is read back", name)
		}
		if diff := cmp.Diff(l.Values(3), again.Values(3)); diff != "" {
			t.Error(diff)
		}
	}
}

// A member follows from the file and its number alone: another seed changes it, another
// order of asking does not.
func TestMemberIsPure(t *testing.T) {
	l := tiny(t)
	text := func(l *Loaded, i int) string {
		s, _, err := l.Member(i)
		if err != nil {
			t.Fatal(err)
		}
		return string(s.Canonical)
	}
	last := text(l, 3)
	text(l, 0)
	if text(tiny(t), 3) != last {
		t.Error("member 3 depends on what was asked before")
	}
	other, err := load(t, "seed: 2\n"+tinyEnsemble)
	if err != nil {
		t.Fatal(err)
	}
	if text(other, 3) == last {
		t.Error("the ensemble's seed does not reach the members")
	}
	if _, err := scenarios.Parse("member", []byte(last)); err != nil {
		t.Error(err)
	}
}

// A file whose scenario was changed does not pass.
func TestChangedMember(t *testing.T) {
	_, dir := whole(t)
	path := filepath.Join(memberFolder(dir, 0), memberName)
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	changed := bytes.Replace(data, []byte("strength: 2 G"), []byte("strength: 3 G"), 1)
	if bytes.Equal(changed, data) {
		t.Fatal("nothing to change")
	}
	if err := os.WriteFile(path, changed, 0o666); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadMember(path); err == nil || !strings.Contains(err.Error(), "SHA-256") {
		t.Errorf("%v", err)
	}
}
