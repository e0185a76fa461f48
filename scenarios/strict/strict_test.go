package strict_test

import (
	"bytes"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"

	"offplane/scenarios/strict"
	"offplane/scenarios/units"
)

// law, power and file hold every type and tag that the package knows.
type law struct {
	Named  string  `yaml:"named" choice:"law"`
	Power  *power  `yaml:"power" choice:"law"`
	Factor float64 `yaml:"factor" in:">0..10"`
}

func (l *law) Prefill() { l.Factor = 1 }

type power struct {
	Surface  units.Density `yaml:"surface" in:">0 cm-3..1e12 cm-3"`
	Exponent float64       `yaml:"exponent" in:"0..<30"`
}

type file struct {
	Cell    units.Length         `yaml:"cell" in:"0.5 Mm..100 Mm"`
	Start   units.Date           `yaml:"start"`
	Law     law                  `yaml:"law"`
	Hole    *law                 `yaml:"hole"`
	Laws    []law                `yaml:"laws"`
	Tunings []units.Wavelength   `yaml:"tunings" in:"-1 nm..1 nm"`
	Rows    [][]float64          `yaml:"rows"`
	Words   []string             `yaml:"words"`
	KZero   string               `yaml:"k_zero" one:"kept,halved,dropped"`
	About   string               `yaml:"about"`
	Count   int                  `yaml:"count" in:"1..9"`
	Seed    uint64               `yaml:"seed"`
	On      bool                 `yaml:"on"`
	Table   map[string]float64   `yaml:"table"`
	Speeds  map[string]speed     `yaml:"speeds"`
	Limit   *units.Temperature   `yaml:"limit" in:"1 MK..2 MK"`
	Private int                  `yaml:"-"`
	Lists   map[string][]float64 `yaml:"lists"`
}

type speed struct {
	Value units.Speed `yaml:"value" need:"given"`
}

func defaults() file {
	return file{Cell: 7, Law: law{Named: "gibson", Factor: 1}, KZero: "kept", Count: 3}
}

// messages pairs a file with all that must be said about it. Written
// by hand from the rules in the package comment.
var messages = []struct {
	name, yaml, want string
}{
	{"fine", "cell: 8000 km\nlaw: {power: {surface: 1e8 cm-3}}\nhole: {named: x}\n", ""},
	{"many at once", "cell: 7\non: yes\ncount: 2.5\nabout: 12\ntunings: [0.1, 2 nm, 0 nm]\nk_zero: hlaved\n",
		`f.yaml:1:7: cell: 7 has no unit; write a length with a unit, such as 7 Mm or 7000 km
f.yaml:2:5: on: "yes" is neither true nor false; write true or false
f.yaml:3:8: count: "2.5" is not a whole number in plain digits; write a whole number
f.yaml:4:8: about: "12" is not text here; put it in quotes
f.yaml:5:11: tunings.0: 0.1 has no unit; write a wavelength with a unit, such as 0.12 nm or 1.2 Angstrom
f.yaml:5:16: tunings.1: 2 nm is out of range; it must be at least -1 nm and at most 1 nm
f.yaml:6:9: k_zero: "hlaved" is not allowed; write one of kept, halved, dropped; did you mean "halved"?`},
	{"keys", "cel: 7 Mm\nqqqqqqqq: 1\nlaw:\n  factr: 2\ncount: 3\ncount: 4\n? [a]\n: 1\n",
		`f.yaml:1:1: unknown key "cel"; did you mean "cell"?
f.yaml:2:1: unknown key "qqqqqqqq"; known here: cell, start, law, hole, laws, tunings, rows, words, k_zero, about, count, seed, on, table, speeds, limit, lists
f.yaml:4:3: law: unknown key "factr"; did you mean "factor"?
f.yaml:6:1: key "count" stands twice; the first is on line 5
f.yaml:7:3: a key must be a plain word`},
	{"wrong kinds", "cell: [7 Mm]\nlaw: x\ntunings: 1 nm\ntable: [1]\nabout: {}\nstart:\nrows: [1]\nhole: []\n",
		`f.yaml:1:7: cell: a list stands here; write a length with a unit, such as 7 Mm or 7000 km
f.yaml:2:6: law: "x" stands here; write keys and values (named, power, factor)
f.yaml:3:10: tunings: "1 nm" stands here; write a list ([] for none), each entry a wavelength with a unit, such as 0.12 nm or 1.2 Angstrom
f.yaml:4:8: table: a list stands here; write keys, each with a number without unit, such as 1.5
f.yaml:5:8: about: a group of keys stands here; write text ("" for none)
f.yaml:6:7: start: has no value; write a date in UTC, such as 2025-01-01T00:00:00Z
f.yaml:7:8: rows.0: "1" stands here; write a list ([] for none), each entry a number without unit, such as 1.5
f.yaml:8:7: hole: a list stands here; write keys and values (named, power, factor)`},
	{"numbers", "law: {factor: '1e6'}\nseed: -1\ncount: 010\ntable: {a: 3 G, b: .inf, c: .nan, d: 0x10, e: 1_000, f: 1e999, g: 1:30}\nrows: [[1, two]]\n",
		`f.yaml:1:15: law.factor: "1e6" is text because of its quotes; write a number without unit, such as 1.5
f.yaml:2:7: seed: "-1" is negative; write a whole number, 0 or more
f.yaml:3:8: count: "010" begins with a zero; write a whole number
f.yaml:4:12: table.a: "3 G" is not a plain number; write a number without unit, such as 1.5
f.yaml:4:20: table.b: ".inf" is not a plain number; write a number without unit, such as 1.5
f.yaml:4:29: table.c: ".nan" is not a plain number; write a number without unit, such as 1.5
f.yaml:4:38: table.d: "0x10" is not a plain number; write a number without unit, such as 1.5
f.yaml:4:47: table.e: "1_000" is not a plain number; write a number without unit, such as 1.5
f.yaml:4:57: table.f: "1e999" is too large a number; write a number without unit, such as 1.5
f.yaml:4:67: table.g: "1:30" is not a plain number; write a number without unit, such as 1.5
f.yaml:5:12: rows.0.1: "two" is not a plain number; write a number without unit, such as 1.5`},
	{"ranges", "cell: 0.4999 Mm\nlaw: {factor: 0}\ncount: 10\nlimit: 2.5 MK\nhole: {power: {surface: 1 cm-3, exponent: 30}}\n",
		`f.yaml:1:7: cell: 0.4999 Mm is out of range; it must be at least 0.5 Mm and at most 100 Mm
f.yaml:2:15: law.factor: 0 is out of range; it must be more than 0 and at most 10
f.yaml:3:8: count: 10 is out of range; it must be at least 1 and at most 9
f.yaml:4:8: limit: 2.5 MK is out of range; it must be at least 1 MK and at most 2 MK
f.yaml:5:43: hole.power.exponent: 30 is out of range; it must be at least 0 and less than 30`},
	{"ends of ranges", "cell: 100 Mm\nlaw: {factor: 10}\ncount: 1\nlimit: 1e6 K\n", ""},
	{"choices", "law: {named: x, power: {surface: 1 cm-3}}\nhole: {}\nlaws:\n- factor: 2\n- power: {exponent: 3}\n- named:\n",
		`f.yaml:1:17: law.power: "named" is given already; exactly one of named, power may be
f.yaml:2:1: hole: exactly one of named, power must be given
f.yaml:4:3: laws.0: exactly one of named, power must be given
f.yaml:5:3: laws.1.power.surface: is missing; write a density with a unit, such as 1e8 cm-3, more than 0 cm-3 and at most 1e12 cm-3
f.yaml:6:9: laws.2.named: has no value; write text ("" for none)`},
	{"needed", "speeds:\n  fast: {value: 3 km/s}\n  slow: {}\n",
		`f.yaml:3:3: speeds.slow.value: is missing; write a speed with a unit, such as 25 km/s`},
	{"anchors", "cell: &c 7 Mm\nlimit: *c\n<<: {seed: 1}\nabout: !!str x\n",
		`f.yaml:1:7: cell: anchors (&) are not allowed; write the value alone
f.yaml:2:8: limit: aliases (*) are not allowed; write the value out
f.yaml:3:1: merge keys (<<) are not allowed; write the keys out
f.yaml:4:8: about: tags (!) are not allowed; write the value alone`},
	{"unknown alias", "cell: *c\n", `f.yaml:1:7: aliases (*) are not allowed; write the value out`},
	{"empty", "", `f.yaml:1:1: holds nothing; write keys and values in YAML`},
	{"comments only", "# nothing\n", `f.yaml:1:1: holds nothing; write keys and values in YAML`},
	{"null", "---\n", `f.yaml:2:1: holds nothing; write keys and values in YAML`},
	{"a list", "- 1\n", `f.yaml:1:1: a list stands here; write keys and values (cell, start, law, hole, laws, tunings, rows, words, k_zero, about, count, seed, on, table, speeds, limit, lists)`},
	{"second document", "seed: 1\n---\nseed: 2\n", `f.yaml:2:1: a second document; only one is read, so remove the line --- and what follows`},
	{"end mark", "seed: 1\n...\n", ""},
	{"tab", "law:\n\tfactor: 2\n", `f.yaml:2:1: a tab in the indentation; YAML allows spaces only`},
	{"not YAML", "cell: 7 Mm: 8\n", `f.yaml:1:11: not YAML: mapping values are not allowed in this context`},
	{"open bracket", "\ntunings: [1 nm,\n", `f.yaml:3:1: not YAML: did not find expected node content (while parsing a flow node)`},
	{"control", "about: \x01\n", `f.yaml:1:8: control character 0x01; write plain UTF-8 text`},
	{"not UTF-8", "about: é\xff\n", `f.yaml:1:9: byte 0xff is not UTF-8; write plain UTF-8 text`},
	{"deep", "rows: " + strings.Repeat("[", 40) + strings.Repeat("]", 40) + "\n", `f.yaml:1:38: nested more than 32 deep`},
	{"large", strings.Repeat("#", strict.MaxBytes+1), `f.yaml:1:1: is too large; at most 1048576 bytes are read`},
	{"windows", "\ufeffcell: 8 Mm\r\nseed: x\r\n", `f.yaml:2:7: seed: "x" is not a whole number in plain digits; write a whole number, 0 or more`},
}

func TestMessages(t *testing.T) {
	for _, c := range messages {
		t.Run(c.name, func(t *testing.T) {
			v := defaults()
			err := strict.Decode("f.yaml", []byte(c.yaml), &v)
			got := ""
			if err != nil {
				got = err.Error()
			}
			if diff := cmp.Diff(c.want, got); diff != "" {
				t.Error(diff)
			}
		})
	}
}

func TestAssignmentMessages(t *testing.T) {
	v := defaults()
	_, err := strict.Read("f.yaml", []byte("laws: [{named: x}]\ncount: 4\n"), &v,
		"cel=7 Mm", "cell=7", "law.factr=1", "laws.1.factor=2", "tunings.0=1 nm", "cell.x=1", "seed", "seed=", "about=[1", "hole.factor=2", "laws.0.factor=20", "words={a: 1, a: 2}")
	want := `--set cel: unknown key "cel"; did you mean "cell"?
--set cell: 7 has no unit; write a length with a unit, such as 7 Mm or 7000 km
--set law.factr: unknown key "factr"; did you mean "factor"? (in law)
--set laws.1.factor: "1" is no entry of the list laws; its entries are 0 to 0
--set tunings.0: the list tunings is empty; set it as a whole
--set cell.x: cell is a single value; there is no "x" in it
--set: "seed" is no assignment; write KEY=VALUE, such as seed=7
--set seed: has no value; write KEY=VALUE
--set about: not YAML: did not find expected ',' or ']' (while parsing a flow sequence)
--set words: a group of keys stands here; write a list ([] for none), each entry text ("" for none)
--set hole.factor: hole: exactly one of named, power must be given
--set laws.0.factor: 20 is out of range; it must be more than 0 and at most 10`
	if diff := cmp.Diff(want, err.Error()); diff != "" {
		t.Error(diff)
	}
}

func TestDefaultsStay(t *testing.T) {
	v := defaults()
	v.Private = 5
	if err := strict.Decode("f", []byte("law: {factor: 2}\n"), &v); err != nil {
		t.Fatal(err)
	}
	want := defaults()
	want.Private, want.Law.Factor = 5, 2
	if diff := cmp.Diff(want, v); diff != "" {
		t.Error(diff)
	}
}

func TestChoiceClearsTheDefault(t *testing.T) {
	v := defaults()
	if err := strict.Decode("f", []byte("law: {power: {surface: 1e8 cm-3, exponent: 4}}\n"), &v); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(law{Power: &power{1e8, 4}, Factor: 1}, v.Law); diff != "" {
		t.Error(diff)
	}
	if err := strict.Set(&v, "law.named=y"); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(law{Named: "y", Factor: 1}, v.Law); diff != "" {
		t.Error(diff)
	}
}

func TestSet(t *testing.T) {
	v := defaults()
	err := strict.Set(&v, "hole.power.surface=3e8 cm-3", "hole.power.exponent = 4", "laws=[{named: a}, {named: b}]", "laws.1.factor=3",
		"table.x=1.5", "table.y=2", "tunings=[-0.1nm, 0 nm]", "tunings.1=0.1 nm", "limit=1.5 MK", "about=with = sign", "start=2025-06-01T00:00:00Z", "seed=18446744073709551615")
	if err != nil {
		t.Fatal(err)
	}
	limit := units.Temperature(1.5)
	want := defaults()
	want.Hole = &law{Power: &power{3e8, 4}, Factor: 1}
	want.Laws = []law{{Named: "a", Factor: 1}, {Named: "b", Factor: 3}}
	want.Table = map[string]float64{"x": 1.5, "y": 2}
	want.Tunings = []units.Wavelength{-0.1, 0.1}
	want.Limit, want.About, want.Seed = &limit, "with = sign", math.MaxUint64
	if err := want.Start.UnmarshalText([]byte("2025-06-01T00:00:00Z")); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(want, v); diff != "" {
		t.Error(diff)
	}
	if err := strict.Set(&v, "hole=null", "limit=~"); err != nil || v.Hole != nil || v.Limit != nil {
		t.Errorf("null leaves %v, %v, %v", v.Hole, v.Limit, err)
	}
}

// An assignment may mend a value that is out of range in the file, and a rule about two
// keys is located at the assignment if that is where the key was last given.
func TestPositions(t *testing.T) {
	v := defaults()
	at, err := strict.Read("f.yaml", []byte("count: 99\nlaw:\n  factor: 2\nseed: x\n"), &v, "count=5")
	if want := "f.yaml:4:7: seed: \"x\" is not a whole number in plain digits; write a whole number, 0 or more"; err == nil || err.Error() != want {
		t.Errorf("got %v, want %s", err, want)
	}
	for path, want := range map[string]string{
		"law.factor": "f.yaml:3:3: law.factor: m 1", "law.named": "f.yaml:2:1: law.named: m 1",
		"count": "--set count: m 1", "cell": "f.yaml:1:1: cell: m 1",
	} {
		if got := at.Problem(path, "m %d", 1).Error(); got != want {
			t.Errorf("got %s, want %s", got, want)
		}
	}
	if !at.Given("law.factor") || at.Given("law.named") || !at.Sound("law", "count") || at.Sound("law", "seed") {
		t.Error("Given or Sound is wrong")
	}
	var none *strict.Positions
	if got := none.Problem("a.b", "m").Error(); got != "a.b: m" || none.Given("a") || !none.Sound("a") {
		t.Errorf("without a file: %s", got)
	}
}

func TestEncode(t *testing.T) {
	limit := units.Temperature(1.5)
	v := defaults()
	v.Hole = &law{Power: &power{3e8, 1e-7}, Factor: 2}
	v.Laws = []law{{Named: "a", Factor: 1}, {Power: &power{Surface: 1}, Factor: 1}}
	v.Tunings, v.Rows, v.Words = []units.Wavelength{-0.12, 0}, [][]float64{{1, 2.5}, {}}, []string{"kept", "no", "1", "a, b", "1/e", "x: y", ""}
	v.About, v.Table = "Two\nlines, \"quoted\" \u00e9", map[string]float64{"z": 3e20, "a b": -1, "y": 0}
	v.Speeds, v.Limit = map[string]speed{"b": {2}, "a": {1}}, &limit
	want := `cell: 7 Mm
start: 0001-01-01T00:00:00Z
law:
  named: gibson
  factor: 1
hole:
  power:
    surface: 3e8 cm-3
    exponent: 1.0e-07
  factor: 2
laws:
  - named: a
    factor: 1
  - power:
      surface: 1 cm-3
      exponent: 0
    factor: 1
tunings: [-0.12 nm, 0 nm]
rows: [[1, 2.5], []]
words: [kept, "no", "1", "a, b", 1/e, "x: y", ""]
k_zero: kept
about: "Two\nlines, \"quoted\" é"
count: 3
seed: 0
on: false
table:
  a b: -1
  "y": 0
  z: 3.0e+20
speeds:
  a:
    value: 1 km/s
  b:
    value: 2 km/s
limit: 1.5 MK
lists: {}
`
	if diff := cmp.Diff(want, string(strict.Encode(&v))); diff != "" {
		t.Error(diff)
	}
}

func drawLaw(t *rapid.T, label string) law {
	l := law{Factor: rapid.Float64Range(math.SmallestNonzeroFloat64, 10).Draw(t, label+".factor")}
	if rapid.Bool().Draw(t, label+" has power") {
		l.Power = &power{units.Density(rapid.Float64Range(1e-300, 1e12).Draw(t, "surface")), rapid.Float64Range(0, 29).Draw(t, "exponent")}
	} else {
		l.Named = rapid.StringN(1, -1, -1).Draw(t, label+".named")
	}
	return l
}

// taken are texts that a YAML reader takes for something else without quotes.
var taken = []string{"null", "Null", "NULL", "~", "true", "True", "FALSE", "yes", ".inf", ".NaN", "1e5", "0x1f", "2025-01-01", "="}

// Whatever the struct holds, it is read back exactly, and what is read back gives the
// same bytes.
func TestRoundTrip(t *testing.T) {
	finite := rapid.Float64Range(-math.MaxFloat64, math.MaxFloat64)
	rapid.Check(t, func(t *rapid.T) {
		v := defaults()
		v.Cell = units.Length(rapid.Float64Range(0.5, 100).Draw(t, "cell"))
		v.Law = drawLaw(t, "law")
		if rapid.Bool().Draw(t, "has hole") {
			l := drawLaw(t, "hole")
			v.Hole = &l
		}
		v.Laws = rapid.SliceOf(rapid.Custom(func(t *rapid.T) law { return drawLaw(t, "entry") })).Draw(t, "laws")
		for _, x := range rapid.SliceOf(rapid.Float64Range(-1, 1)).Draw(t, "tunings") {
			v.Tunings = append(v.Tunings, units.Wavelength(x))
		}
		v.Rows = rapid.SliceOf(rapid.SliceOf(finite)).Draw(t, "rows")
		v.Words = rapid.SliceOf(rapid.String()).Draw(t, "words")
		v.KZero = rapid.SampledFrom([]string{"kept", "halved", "dropped"}).Draw(t, "k_zero")
		v.About = rapid.OneOf(rapid.String(), rapid.SampledFrom(taken)).Draw(t, "about")
		v.Count = rapid.IntRange(1, 9).Draw(t, "count")
		v.Seed = rapid.Uint64().Draw(t, "seed")
		v.On = rapid.Bool().Draw(t, "on")
		v.Table = rapid.MapOf(rapid.String(), finite).Draw(t, "table")
		v.Lists = rapid.MapOf(rapid.String(), rapid.SliceOf(finite)).Draw(t, "lists")
		data := strict.Encode(v)
		got := defaults()
		if err := strict.Decode("f", data, &got); err != nil {
			t.Fatalf("%v\n%s", err, data)
		}
		if diff := cmp.Diff(v, got, cmpopts.EquateEmpty()); diff != "" {
			t.Fatalf("%s\n%s", diff, data)
		}
		if again := strict.Encode(got); !bytes.Equal(again, data) {
			t.Fatalf("first\n%ssecond\n%s", data, again)
		}
	})
}

// FuzzDecode: no input may panic, be located outside the file or be read in a way
// that Encode does not give back.
func FuzzDecode(f *testing.F) {
	for _, c := range messages {
		if len(c.yaml) < 1000 {
			f.Add([]byte(c.yaml), "law.factor=2")
		}
	}
	f.Fuzz(func(t *testing.T, data []byte, assignment string) {
		v := defaults()
		_, err := strict.Read("f", data, &v, assignment)
		if err != nil {
			var ps strict.Problems
			if !errors.As(err, &ps) || len(ps) == 0 {
				t.Fatalf("error of type %T", err)
			}
			lines := bytes.Count(data, []byte("\n")) + bytes.Count(data, []byte("\r")) + strings.Count(string(data), "\u2028") + strings.Count(string(data), "\u2029") + strings.Count(string(data), "\u0085") + 2
			for i, p := range ps {
				if set := strings.HasPrefix(p.Source, "--set"); set == (p.Line > 0) || p.Line > lines || (p.Line > 0) != (p.Column > 0) {
					t.Fatalf("%d lines, problem %+v", lines, p)
				}
				if i > 0 && p.Line > 0 && p.Line < ps[i-1].Line {
					t.Fatalf("not in order: %v", ps)
				}
				if strings.ContainsAny(p.Message, "\n\r") {
					t.Fatalf("message of several lines: %q", p.Message)
				}
			}
			return
		}
		text := strict.Encode(v)
		again := defaults()
		if err := strict.Decode("again", text, &again); err != nil {
			t.Fatalf("%v\n%s", err, text)
		}
		if diff := cmp.Diff(v, again, cmpopts.EquateEmpty()); diff != "" {
			t.Fatalf("%s\n%s", diff, text)
		}
		if b := strict.Encode(again); !bytes.Equal(b, text) {
			t.Fatalf("first\n%ssecond\n%s", text, b)
		}
	})
}

func TestNearest(t *testing.T) {
	known := []string{"cadence", "duration", "to", "from"}
	for word, want := range map[string]string{"cadance": "cadence", "Cadence": "cadence", "caednce": "cadence", "durration": "duration", "form": "from", "x": "", "TO": "to", "exposure": ""} {
		if got := strict.Nearest(word, known); got != want {
			t.Errorf("%q: %q, want %q", word, got, want)
		}
	}
}

// What the caller does wrong panics.
func TestProgrammerErrors(t *testing.T) {
	for name, f := range map[string]func(){
		"no pointer": func() { _ = strict.Decode("f", nil, file{}) },
		"no key":     func() { _ = strict.Decode("f", []byte("a: 1"), &struct{ A int }{}) },
		"bad range": func() {
			_ = strict.Decode("f", []byte("a: 1"), &struct {
				A int `yaml:"a" in:"1-2"`
			}{})
		},
		"bad type": func() {
			_ = strict.Decode("f", []byte("a: 1"), &struct {
				A complex128 `yaml:"a"`
			}{})
		},
		"NaN": func() {
			strict.Encode(struct {
				A float64 `yaml:"a"`
			}{math.NaN()})
		},
	} {
		t.Run(name, func(t *testing.T) {
			defer func() {
				if r := recover(); r == nil || !strings.HasPrefix(r.(string), "strict: ") {
					t.Errorf("recovered %v", r)
				}
			}()
			f()
		})
	}
}

// Every path but those of lists and maps, which may be empty, is one that Set knows.
func TestPaths(t *testing.T) {
	type part struct {
		Width float64 `yaml:"width"`
	}
	type document struct {
		Seed  int            `yaml:"seed"`
		Where *part          `yaml:"where"`
		Parts []part         `yaml:"parts"`
		Names map[string]int `yaml:"names"`
		Not   int            `yaml:"-"`
	}
	want := []string{"seed", "where.width", "parts", "parts.0.width", "names"}
	if got := strict.Paths(&document{}); !slices.Equal(got, want) {
		t.Errorf("%v, want %v", got, want)
	}
	for _, p := range []string{"seed", "where.width", "parts.0.width"} {
		d := document{Parts: make([]part, 1)}
		if _, err := strict.Read("x", []byte("seed: 1\n"), &d, p+"=3"); err != nil {
			t.Errorf("%s: %v", p, err)
		}
	}
}
