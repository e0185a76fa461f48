package scenarios_test

import (
	"bytes"
	"crypto/sha256"
	"encoding"
	"encoding/hex"
	"errors"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"offplane/model"
	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/scenarios/units"
)

func load(t *testing.T, name string, set ...string) *scenarios.Loaded {
	t.Helper()
	l, err := scenarios.Load(name, set...)
	if err != nil {
		t.Fatal(err)
	}
	return l
}

func TestEmbeddedScenarios(t *testing.T) {
	if diff := cmp.Diff([]string{"clumpy-belt", "plane-wave", "quick", "quiet-belt", "source-surface", "sphere", "tilted-belt", "two-loops", "warped-belt"}, scenarios.Names()); diff != "" {
		t.Error(diff)
	}
	for _, name := range scenarios.Names() {
		l := load(t, name)
		if about, err := scenarios.About(name); err != nil || about == "" || about != l.Scenario.About || len(about) > 100 {
			t.Errorf("%s: about %q, %v", name, about, err)
		}
		if l.Name != name || len(l.SHA256) != 64 {
			t.Errorf("%s is called %q, hash %q", name, l.Name, l.SHA256)
		}
		again, err := scenarios.Parse(name, l.Canonical)
		if err != nil {
			t.Fatal(err)
		}
		if diff := cmp.Diff(l.Scenario, again.Scenario); diff != "" {
			t.Errorf("%s: %s", name, diff)
		}
		if !bytes.Equal(l.Canonical, again.Canonical) || l.SHA256 != again.SHA256 {
			t.Errorf("%s: canonical bytes are not stable", name)
		}
	}
}

// quiet-belt.yaml writes everything out, so it must agree with the defaults in all but
// its description and hole, and in that its tunings come one after the other.
func TestQuietBeltIsTheDefaultWithAHole(t *testing.T) {
	got := load(t, "quiet-belt").Scenario
	want := scenarios.Default()
	want.About, want.Corona.Density.Hole, want.Camera.Sequential = got.About, got.Corona.Density.Hole, true
	if diff := cmp.Diff(want, got); diff != "" {
		t.Error(diff)
	}
	if got.Corona.Density.Hole == nil {
		t.Error("quiet-belt has no hole")
	}
}

func TestDefaultIsValid(t *testing.T) {
	if _, err := scenarios.Resolve("default", scenarios.Default()); err != nil {
		t.Error(err)
	}
	a, b := scenarios.Default(), scenarios.Default()
	a.Corona.Fields[0].DipoleSheet.Strength = 9
	a.Camera.Tunings[0] = 9
	if b.Corona.Fields[0].DipoleSheet.Strength == 9 || b.Camera.Tunings[0] == 9 {
		t.Error("two defaults share memory")
	}
}

// The speed of plane-wave.yaml's comment; formula as in the package that computes it.
func TestPlaneWaveSpeedIsUniform(t *testing.T) {
	c := load(t, "plane-wave").Scenario.Corona
	b, n := c.Fields[0].Radial, c.Density.Streamer.PowerLaw
	if n.Exponent != 2*b.Exponent {
		t.Errorf("B ~ r^-%g, n ~ r^-%g: the kink speed is not uniform", b.Exponent, n.Exponent)
	}
	if v := model.KinkSpeed(float64(b.Strength), float64(n.Surface), model.Mu(c.Helium)) / 1e5; v < 494.5 || v > 495.5 {
		t.Errorf("%g km/s, the comment says 495", v)
	}
}

func TestLawNamesAreThoseOfTheModel(t *testing.T) {
	f, _ := reflect.TypeFor[scenarios.Law]().FieldByName("Named")
	if diff := cmp.Diff(model.LawNames(), strings.Split(f.Tag.Get("one"), ",")); diff != "" {
		t.Error(diff)
	}
}

// Every number has a range, every key is in lower case and every range is readable.
func TestTags(t *testing.T) {
	seen := map[reflect.Type]bool{}
	var walk func(typ reflect.Type)
	walk = func(typ reflect.Type) {
		if typ.Kind() == reflect.Pointer || typ.Kind() == reflect.Slice {
			typ = typ.Elem()
		}
		if typ.Kind() != reflect.Struct || seen[typ] || typ == reflect.TypeFor[units.Date]() {
			return
		}
		seen[typ] = true
		for i := range typ.NumField() {
			f := typ.Field(i)
			key := f.Tag.Get("yaml")
			if key == "" || strings.ToLower(key) != key {
				t.Errorf("%s.%s: key %q", typ, f.Name, key)
			}
			base := f.Type
			if base.Kind() == reflect.Slice {
				base = base.Elem()
			}
			if base.Kind() == reflect.Float64 || base.Kind() == reflect.Int {
				if low, high := ends(t, f.Tag.Get("in"), base); low >= high {
					t.Errorf("%s.%s: range %q", typ, f.Name, f.Tag.Get("in"))
				}
			}
			walk(f.Type)
		}
	}
	walk(reflect.TypeFor[scenarios.Scenario]())
}

type fataler interface {
	Fatalf(format string, args ...any)
}

// ends reads a range tag without the help of package strict.
func ends(t fataler, tag string, typ reflect.Type) (low, high float64) {
	parts := strings.Split(tag, "..")
	if len(parts) != 2 {
		t.Fatalf("range %q", tag)
	}
	var x [2]float64
	for i, p := range parts {
		p = strings.Trim(p, "<>")
		v := reflect.New(typ)
		if u, ok := v.Interface().(encoding.TextUnmarshaler); ok {
			if err := u.UnmarshalText([]byte(p)); err != nil {
				t.Fatalf("range %q: %v", tag, err)
			}
			x[i] = v.Elem().Float()
			continue
		}
		var err error
		if x[i], err = strconv.ParseFloat(p, 64); err != nil {
			t.Fatalf("range %q: %v", tag, err)
		}
	}
	return x[0], x[1]
}

// draw fills v with anything its tags allow.
func draw(t *rapid.T, v reflect.Value, f reflect.StructField) {
	label := f.Name
	switch {
	case v.Type() == reflect.TypeFor[units.Date]():
		v.Set(reflect.ValueOf(scenarios.Default().Observer.Start))
	case v.Kind() == reflect.Float64:
		low, high := ends(t, f.Tag.Get("in"), v.Type())
		v.SetFloat(rapid.Float64Range(low, high).Filter(func(x float64) bool {
			return (x != low || !strings.Contains(f.Tag.Get("in"), ">")) && (x != high || !strings.Contains(f.Tag.Get("in"), "<"))
		}).Draw(t, label))
	case v.Kind() == reflect.Int:
		low, high := ends(t, f.Tag.Get("in"), v.Type())
		v.SetInt(int64(rapid.IntRange(int(low), int(high)).Draw(t, label)))
	case v.Kind() == reflect.Uint64:
		v.SetUint(rapid.Uint64().Draw(t, label))
	case v.Kind() == reflect.Bool:
		v.SetBool(rapid.Bool().Draw(t, label))
	case v.Kind() == reflect.String && f.Tag.Get("one") != "":
		v.SetString(rapid.SampledFrom(strings.Split(f.Tag.Get("one"), ",")).Draw(t, label))
	case v.Kind() == reflect.String:
		v.SetString(rapid.String().Draw(t, label))
	case v.Kind() == reflect.Pointer:
		if f.Tag.Get("choice") != "" || rapid.Bool().Draw(t, label) {
			v.Set(reflect.New(v.Type().Elem()))
			draw(t, v.Elem(), f)
		}
	case v.Kind() == reflect.Slice:
		n := rapid.IntRange(1, 5).Draw(t, label)
		v.Set(reflect.MakeSlice(v.Type(), n, n))
		for i := range n {
			draw(t, v.Index(i), f)
		}
	case v.Kind() == reflect.Struct:
		var group []int
		for i := range v.NumField() {
			if v.Type().Field(i).Tag.Get("choice") != "" {
				group = append(group, i)
				continue
			}
			draw(t, v.Field(i), v.Type().Field(i))
		}
		if len(group) > 0 {
			i := rapid.SampledFrom(group).Draw(t, label+" choice")
			draw(t, v.Field(i), v.Type().Field(i))
		}
	default:
		t.Fatalf("no values of type %s", v.Type())
	}
}

// Any scenario that the tags allow is read back exactly from its canonical form.
func TestRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var s scenarios.Scenario
		draw(t, reflect.ValueOf(&s).Elem(), reflect.StructField{Name: "scenario"})
		data := strict.Encode(s)
		got := scenarios.Default()
		if err := strict.Decode("f", data, &got); err != nil {
			t.Fatalf("%v\n%s", err, data)
		}
		if diff := cmp.Diff(s, got); diff != "" {
			t.Fatalf("%s\n%s", diff, data)
		}
		if again := strict.Encode(got); !bytes.Equal(again, data) {
			t.Fatalf("first\n%ssecond\n%s", data, again)
		}
	})
}

const broken = `about: five mistakes
camera:
  cadance: 30 s
  filter: 0.13
  exposure: 15 s
image:
  outer: 1.01 Rsun
  inner: 1.05 Rsun
waves:
  growth: wbk
`

func TestFiveMistakesGiveFiveMessages(t *testing.T) {
	_, err := scenarios.Parse("broken.yaml", []byte(broken))
	var ps strict.Problems
	if !errors.As(err, &ps) || len(ps) != 5 {
		t.Fatalf("%v", err)
	}
	want := `broken.yaml:3:3: camera: unknown key "cadance"; did you mean "cadence"?
broken.yaml:4:11: camera.filter: 0.13 has no unit; write a wavelength with a unit, such as 0.12 nm or 1.2 Angstrom
broken.yaml:5:3: camera.exposure: 3 tunings of 15 s take 45 s, more than the cadence, 30 s
broken.yaml:7:10: image.outer: 1.01 Rsun is out of range; it must be more than 1.01 Rsun and at most 3 Rsun
broken.yaml:10:11: waves.growth: "wbk" is not allowed; write one of wkb, none; did you mean "wkb"?`
	if diff := cmp.Diff(want, err.Error()); diff != "" {
		t.Error(diff)
	}
}

// One broken rule at a time, starting from the quiet belt.
func TestRules(t *testing.T) {
	for _, c := range []struct {
		set  string // several parted by |
		want string
	}{
		{"image.outer=1.05 Rsun", "--set image.outer: 1.05 Rsun must be more than inner, 1.05 Rsun"},
		{"waves.spectrum.high=0.2 mHz", "--set waves.spectrum.high: 0.2 mHz must be more than low, 0.2 mHz"},
		{"camera.cadence=100 s", "--set camera.cadence: 100 s has its Nyquist frequency 1/(2 cadence) at 5 mHz, but the inversion's filter reaches to centre + width = 5 mHz; write less than 100 s"},
		{"inversion.filter.centre=16 mHz", "quiet-belt:" + line(t, "  cadence:") + ":3: camera.cadence: 30 s has its Nyquist frequency 1/(2 cadence) at 16.67 mHz, but the inversion's filter reaches to centre + width = 17.5 mHz; write less than 28.57 s"},
		{"camera.duration=299 s", "--set camera.duration: 299 s is too short: the inversion's band needs 4 frequencies and has 1; write 660 s or more"},
		{"camera.tunings=[]", "--set camera.tunings: 0 are too few; the three-point formula needs at least 3, such as [-0.12 nm, 0 nm, 0.12 nm]"},
		{"camera.tunings=[0.12 nm, 0 nm, -0.12 nm]", "--set camera.tunings: must be in ascending order, each once"},
		{"camera.tunings=[-0.12 nm, 0 nm, 0 nm]", "--set camera.tunings: must be in ascending order, each once"},
		{"camera.tunings=[-0.1 nm, 0 nm, 0.12 nm]", "--set camera.tunings: the three-point formula needs an odd number of tunings, symmetric about the middle one, such as [-0.12 nm, 0 nm, 0.12 nm]"},
		{"camera.tunings=[-0.12 nm, -0.04 nm, 0.04 nm, 0.12 nm]", "--set camera.tunings: the three-point formula needs an odd number of tunings, symmetric about the middle one, such as [-0.12 nm, 0 nm, 0.12 nm]"},
		{"camera.tunings=[-0.11 nm, 0.01 nm, 0.13 nm]", ""},
		{"camera.tunings=[-0.2 nm, -0.1 nm, 0 nm, 0.1 nm, 0.2 nm]", ""},
		{"camera.exposure=10 s", ""},
		{"camera.exposure=10.1 s", "--set camera.exposure: 3 tunings of 10.1 s take 30.3 s, more than the cadence, 30 s"},
		{"camera.dead_time=7.5 s", ""},
		{"camera.dead_time=7.6 s", "quiet-belt:" + line(t, "  exposure:") + ":3: camera.exposure: 3 tunings of 2.5 s and 7.6 s of dead time take 30.3 s, more than the cadence, 30 s"},
		{"camera.tuning_time=10 s", ""},
		{"camera.tuning_time=11 s", "--set camera.tuning_time: 3 tunings of 11 s take 33 s, more than the cadence, 30 s"},
		{"camera.tuning_time=11 s|camera.sequential=false", ""},
		{"camera.tuning_time=2 s", "--set camera.tuning_time: 2 s is less than exposure and dead_time together, 2.5 s"},
		{"camera.tuning_time=6 s|camera.switching=interleaved", "--set camera.tuning_time: 3 tunings of 6 s of each line take 36 s, more than the cadence, 30 s"},
		{"camera.order=[2, 0, 1]", ""},
		{"camera.order=[2, 0]", "--set camera.order: must hold each number from 0 to 2 once"},
		{"camera.order=[2, 0, 2]", "--set camera.order: must hold each number from 0 to 2 once"},
		{"camera.order=[3, 0, 1]", "--set camera.order: must hold each number from 0 to 2 once"},
		{"camera.switching=blocks|camera.second_line=90|camera.blocks=90", ""},
		{"camera.switching=blocks|camera.second_line=91", "--set camera.second_line: 91 frames of the second line leave the first line less than three quarters of 360 frames"},
		{"camera.switching=blocks|camera.blocks=13", "--set camera.blocks: 13 are more than second_line, 12"},
		{"camera.gaps=[{from: 1 h, length: 90 min}]", ""},
		{"camera.gaps=[{from: 1 h, length: 90 min}, {from: 0 s, length: 1 s}]", "--set camera.gaps: last 5401 s together, more than half of duration, 10800 s"},
		{"camera.pointing={drift_x: 240 arcsec}", "--set camera.pointing: drifts by 720 arcsec in all; at most 600 arcsec are allowed"},
		{"camera.like=30cm", "--set camera.like: \"30cm\" is not allowed; write one of none, 20cm-4.35arcsec, 20cm-3arcsec, 50cm-3arcsec, 150cm-2arcsec"},
		{"inversion.box=20", "--set inversion.box: 20 is even; the box needs a middle pixel, so write 19 or 21"},
		{"inversion.track=30", "--set inversion.track: 30 is even; the track needs a middle point, so write 29 or 31"},
		{"image.to=0 deg", "--set image.to: 0 deg must be more than from, 0 deg"},
		{"image.to=360.5 deg", "--set image.to: 360.5 deg is more than 360 deg beyond from, 0 deg"},
		{"image.pixel=1.2 arcsec", "--set image.pixel: 1.2 arcsec makes an image of 4.66e+06 pixels; at most 4e+06 are allowed"},
		{"camera.cadence=0.1 s|camera.exposure=10 ms|camera.duration=20 h", "--set camera.cadence: 3.55e+05 pixels, 3 tunings and a frame every 0.1 s for 72000 s make 3.07e+03 GB of frames; at most 200 GB are allowed"},
		{"image.pixel=1.3 arcsec", ""}, // (2 * 1.35 * 959.2 / 1.3)^2 = 3.97e6
		{"image.pixel=0.2 arcsec|image.from=265 deg|image.to=275 deg", ""},
		{"corona.fields=[]", "--set corona.fields: is empty; give at least one field"},
		{"corona.fields=[{radial: {strength: 3 G}}]", "quiet-belt:" + line(t, "    hole:") + ":5: corona.density.hole: a hole needs closed lines beside the open ones, but every line of a radial field is open; leave hole out or add a dipole_sheet or source_surface to fields"},
		{"corona.fields=[{radial: {strength: 3 G}}]|corona.density.hole=null", ""},
		{"waves.inward_from=1.3 Rsun", "--set waves.inward_from: 1.3 Rsun must be more than image.outer, 1.35 Rsun, so that inward waves cross the whole image"},
		{"waves.inward_from=3 Rsun", "--set waves.inward_from: 3 Rsun must be at most corona.closed_below, 2.5 Rsun: lower open lines do not reach it"},
		{"waves.inward_from=3 Rsun|waves.inward=0", ""},
		{"waves.cell=100 Mm|sight.reach=0.5 Rsun", "--set sight.reach: 0.5 Rsun holds fewer than 10 samples of step * cell * outer = 0.243 Rsun; write at least 2.43 Rsun"},
		{"waves.cell=100 Mm|sight.reach=0.5 Rsun|sight.plane=true", ""},
		{"corona.density.streamer.named=gibson", "--set corona.density.streamer.named: \"gibson\" is not allowed; write one of " + strings.Join(model.LawNames(), ", ")},
	} {
		_, err := scenarios.Load("quiet-belt", strings.Split(c.set, "|")...)
		got := ""
		if err != nil {
			got = err.Error()
		}
		if diff := cmp.Diff(c.want, got); diff != "" {
			t.Errorf("%s: %s", c.set, diff)
		}
	}
}

// An example camera stands for what is not written; what is written goes before it, and
// the canonical form says it all.
func TestLike(t *testing.T) {
	_, err := scenarios.Parse("x", []byte("camera:\n  like: 150cm-2arcsec\n  stages: 3\n  scatter: null\n"))
	if err != nil {
		t.Fatal(err)
	}
	for like, want := range map[string][2]float64{"20cm-4.35arcsec": {20, 4.35}, "20cm-3arcsec": {20, 3}, "50cm-3arcsec": {50, 3}, "150cm-2arcsec": {150, 2}} {
		l := load(t, "quick", "camera.like="+like, "camera.seeing=1 arcsec")
		c := l.Scenario.Camera
		if got := [2]float64{float64(c.Aperture), float64(l.Scenario.Image.Pixel)}; got != want || c.Stages != 5 || c.Seeing != 1 || c.Scatter == nil || c.Duration != 5400 {
			t.Errorf("%s: %+v", like, c)
		}
		again, err := scenarios.Parse("again", l.Canonical)
		if err != nil {
			t.Fatal(err)
		}
		if diff := cmp.Diff(l.Scenario, again.Scenario); diff != "" {
			t.Error(diff)
		}
		c = load(t, "quick", "camera.like="+like, "camera.stages=3", "camera.scatter=null", "image.pixel=5 arcsec").Scenario.Camera
		if c.Stages != 3 || c.Scatter != nil || c.Like != like {
			t.Errorf("%s: %+v", like, c)
		}
	}
}

// line returns the number of the line of quiet-belt.yaml that begins with start.
func line(t *testing.T, start string) string {
	data, err := scenarios.Source("quiet-belt")
	if err != nil {
		t.Fatal(err)
	}
	for i, l := range strings.Split(string(data), "\n") {
		if strings.HasPrefix(l, start) {
			return strconv.Itoa(i + 1)
		}
	}
	t.Fatalf("no line begins with %q", start)
	return ""
}

func TestLoadFindsFilesAndNames(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "mine.yaml")
	if err := os.WriteFile(path, []byte("seed: 7\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	l := load(t, path, "camera.cadence=20 s")
	if l.Name != "mine" || l.Scenario.Seed != 7 || l.Scenario.Camera.Cadence != 20 {
		t.Errorf("%q, seed %d, cadence %v", l.Name, l.Scenario.Seed, l.Scenario.Camera.Cadence)
	}
	for name, want := range map[string]string{
		"qiuck":             `no scenario is called "qiuck"; did you mean "quick"?`,
		"zzzzz":             `no scenario is called "zzzzz" (there are clumpy-belt, plane-wave, quick, quiet-belt, source-surface, sphere, tilted-belt, two-loops, warped-belt;`,
		dir + "/none.yaml":  "no such file",
		dir + "/quick.yaml": "the embedded scenario is called quick, without suffix",
	} {
		if _, err := scenarios.Load(name); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v, want %s", name, err, want)
		}
	}
}

func TestWithLeavesTheOriginal(t *testing.T) {
	l := load(t, "quick", "seed=5")
	n, err := l.With("waves.cell=9 Mm", "camera.tunings.0=-0.12 nm", "corona.fields.0.dipole_sheet.strength=4 G")
	if err != nil {
		t.Fatal(err)
	}
	if n.Name != "quick" || n.Scenario.Seed != 5 || n.Scenario.Waves.Cell != 9 || n.Scenario.Corona.Fields[0].DipoleSheet.Strength != 4 || n.SHA256 == l.SHA256 {
		t.Errorf("%+v", n.Scenario)
	}
	if l.Scenario.Waves.Cell != 7 || l.Scenario.Corona.Fields[0].DipoleSheet.Strength != 3.3 {
		t.Error("the original changed")
	}
	r, err := scenarios.Resolve("quick", n.Scenario)
	if err != nil || r.SHA256 != n.SHA256 {
		t.Errorf("resolved from memory: %v", err)
	}
}

func TestInversionAlone(t *testing.T) {
	want := scenarios.Default().Inversion
	want.Box, want.Filter.Centre = 31, 4
	path := filepath.Join(t.TempDir(), "inversion.yaml")
	if err := os.WriteFile(path, scenarios.EncodeInversion(want), 0o644); err != nil {
		t.Fatal(err)
	}
	got, err := scenarios.LoadInversion(path)
	if err != nil || !reflect.DeepEqual(got, want) {
		t.Errorf("%+v, %v", got, err)
	}
	_, err = scenarios.ParseInversion("i.yaml", []byte("box: 20\ntrack: 32\ncoherence: 1\ninversion: {}\n"), "k_zero=halves")
	if want := `i.yaml:1:1: box: 20 is even; the box needs a middle pixel, so write 19 or 21
i.yaml:2:1: track: 32 is even; the track needs a middle point, so write 31 or 33
i.yaml:3:12: coherence: 1 is out of range; it must be more than 0 and less than 1
i.yaml:4:1: unknown key "inversion"; known here: background, filter, taper, box, adaptive, coherence, track, estimators, separation, k_zero, padding, temperature, mu, helium, line
--set k_zero: "halves" is not allowed; write one of kept, halved, dropped; did you mean "halved"?`; err == nil || err.Error() != want {
		t.Error(cmp.Diff(want, err.Error()))
	}
}

// FuzzLoad: no bytes may panic or give a scenario that is not its own canonical form.
func FuzzLoad(f *testing.F) {
	for _, name := range scenarios.Names() {
		data, err := scenarios.Source(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data)
	}
	f.Add([]byte(broken))
	f.Fuzz(func(t *testing.T, data []byte) {
		l, err := scenarios.Parse("f", data)
		if err != nil {
			var ps strict.Problems
			if !errors.As(err, &ps) || !slices.IsSortedFunc(ps, func(a, b strict.Problem) int { return a.Line - b.Line }) {
				t.Fatalf("%T: %v", err, err)
			}
			return
		}
		again, err := scenarios.Parse("again", l.Canonical)
		if err != nil {
			t.Fatalf("%v\n%s", err, l.Canonical)
		}
		if diff := cmp.Diff(l.Scenario, again.Scenario); diff != "" || again.SHA256 != l.SHA256 {
			t.Fatalf("%s\n%s", diff, l.Canonical)
		}
	})
}

// A file that a scenario names is looked for when it is loaded, not when it is restored: it
// may have been made elsewhere.
func TestRestore(t *testing.T) {
	path := filepath.Join(t.TempDir(), "atoms.yaml")
	if err := os.WriteFile(path, nil, 0o666); err != nil {
		t.Fatal(err)
	}
	l, err := scenarios.Load("quick", "line.data="+path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Remove(path); err != nil {
		t.Fatal(err)
	}
	if _, err := scenarios.Load("quick", "line.data="+path); err == nil || !strings.Contains(err.Error(), "--set line.data: there is no file "+path) {
		t.Errorf("%v", err)
	}
	sum := func(text string) string {
		s := sha256.Sum256([]byte(text))
		return hex.EncodeToString(s[:])
	}
	text := string(l.Canonical)
	older := strings.Replace(text, "  far_end: true\n", "", 1) // before that key was added
	newer := text + "magic: 1\n"
	for _, c := range []struct{ text, sum, say string }{
		{text, l.SHA256, ""},
		{text + "#", l.SHA256, "x.fits: the scenario is damaged"},
		{older, sum(older), "x.fits: was written by another version (offplane 0.1), whose scenarios have other keys: "},
		{newer, sum(newer), "x.fits: was written by another version (offplane 0.1), whose scenarios this one cannot read: "},
	} {
		got, err := scenarios.Restore("x.fits", []byte(c.text), c.sum, "offplane 0.1")
		if c.say == "" {
			if err != nil || got.SHA256 != l.SHA256 {
				t.Errorf("%v", err)
			}
		} else if err == nil || !strings.HasPrefix(err.Error(), c.say) {
			t.Errorf("want %s, got %v", c.say, err)
		}
	}
}
