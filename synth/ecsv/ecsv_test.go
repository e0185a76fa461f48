package ecsv

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"
)

func sample() *Table {
	return &Table{
		Columns: []Column{
			{Name: "height", Unit: "solRad", About: "heliocentric height", Data: []float64{1.05, 1.2}},
			{Name: "n_e", Unit: "cm-3", About: "true electron density", Data: []float64{1e8, math.NaN()}, Missing: []bool{false, true}},
			{Name: "bias", About: "B_inferred / B_true - 1", Data: []float64{-0.12, math.NaN()}},
			{Name: "count", About: "pixels", Data: []int64{812, 0}},
			{Name: "class", Data: []string{"open", "near, \"it's\" #1"}},
		},
		Meta: []Pair{{"program", "program 0.1.0"}, {"scenario_sha256", "0123"}, {"seed", int64(42)}, {"share", 0.5}, {"done", true}, {"order", "height; n_e: 'x' – µ"}},
	}
}

// The text is the head that astropy reads without a warning (checked by
// TestAstropy), written out here so that a change shows.
const sampleText = `# %ECSV 1.0
# ---
# delimiter: ','
# datatype:
# - {name: height, unit: solRad, datatype: float64, description: 'heliocentric height'}
# - {name: n_e, unit: cm-3, datatype: float64, description: 'true electron density'}
# - {name: bias, datatype: float64, description: 'B_inferred / B_true - 1'}
# - {name: count, datatype: int64, description: pixels}
# - {name: class, datatype: string}
# meta: !!omap
# - {program: 'program 0.1.0'}
# - {scenario_sha256: '0123'}
# - {seed: 42}
# - {share: 0.5}
# - {done: true}
# - {order: 'height; n_e: ''x'' – µ'}
# schema: astropy-2.0
height,n_e,bias,count,class
1.05,1.0e+08,-0.12,812,open
1.2,,nan,0,"near, ""it's"" #1"
`

func TestWrite(t *testing.T) {
	var b bytes.Buffer
	if err := sample().Write(&b); err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(sampleText, b.String()); d != "" {
		t.Error(d)
	}
	back, err := Read(&b)
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(sample(), back, cmpopts.EquateNaNs()); d != "" {
		t.Error(d)
	}
}

// Any table reads back equal. Strings have no carriage returns: CSV readers
// turn "\r\n" into "\n" within quotes.
func TestRoundTrip(t *testing.T) {
	text := rapid.StringMatching(`[ -~µ–\n\t]*`)
	word := rapid.StringMatching(`[ -~µ–]{1,12}`)
	rapid.Check(t, func(t *rapid.T) {
		rows := rapid.IntRange(0, 4).Draw(t, "rows")
		table := &Table{}
		for _, name := range rapid.SliceOfNDistinct(word, 1, 4, rapid.ID).Draw(t, "names") {
			c := Column{Name: name, Unit: rapid.StringMatching(`[ -~]{0,6}`).Draw(t, "unit"), About: rapid.StringMatching(`[ -~µ]{0,9}`).Draw(t, "about")}
			switch rapid.IntRange(0, 2).Draw(t, "type") {
			case 0:
				c.Data = rapid.SliceOfN(rapid.Float64(), rows, rows).Draw(t, "floats")
			case 1:
				c.Data = rapid.SliceOfN(rapid.Int64(), rows, rows).Draw(t, "ints")
			case 2:
				c.Data = rapid.SliceOfN(text, rows, rows).Draw(t, "strings")
			}
			table.Columns = append(table.Columns, c)
		}
		for _, key := range rapid.SliceOfNDistinct(word, 0, 3, rapid.ID).Draw(t, "keys") {
			value := rapid.OneOf(text.AsAny(), rapid.Int64().AsAny(), rapid.Float64().AsAny(), rapid.Bool().AsAny()).Draw(t, "value")
			table.Meta = append(table.Meta, Pair{key, value})
		}
		var b bytes.Buffer
		if err := table.Write(&b); err != nil {
			t.Fatal(err)
		}
		file := b.String()
		back, err := Read(strings.NewReader(file))
		if err != nil {
			t.Fatalf("%v\n%s", err, file)
		}
		if d := cmp.Diff(table, back, cmpopts.EquateNaNs(), cmpopts.EquateEmpty()); d != "" {
			t.Fatalf("%s\n%s", d, file)
		}
	})
}

func TestReadErrors(t *testing.T) {
	head := "# %ECSV 1.0\n# ---\n# datatype:\n# - {name: a, datatype: float64}\n# - {name: b, datatype: int64}\n"
	for _, c := range []struct{ text, want string }{
		{"", "line 1: the names of the columns are missing"},
		{head, "line 6: the names of the columns are missing"},
		{head + "a\n1\n", "line 6: 1 names, the ECSV head describes 2 columns"},
		{head + "a,c\n", `line 6: column 2 is "c", in the ECSV head "b"`},
		{head + "a,b\n1,2\nx,2\n", `line 8: column a: "x" is not a number`},
		{head + "a,b\n1,2.5\n", `line 7: column b: "2.5" is not a 64-bit integer`},
		{head + "a,b\n1\n", "line 7: wrong number of fields"},
		{"# %ECSV 1.0\n# ---\n# delimiter: '|'\n", `ECSV head: delimiter is "|": must be ' ' or ','`},
		{"# %ECSV 1.0\n# - {\n", "ECSV head: "},
	} {
		_, err := Read(strings.NewReader(c.text))
		if err == nil || !strings.HasPrefix(err.Error(), c.want) {
			t.Errorf("%q: %v, want %s", c.text, err, c.want)
		}
	}
}

// The format's default delimiter is the blank. The text is put together from
// what astropy wrote for a QTable and for a masked column, blanks added for alignment; once
// more with the delimiter said.
func TestBlanks(t *testing.T) {
	head := `# datatype:
# - {name: height, unit: solRad, datatype: float64}
# - {name: density, unit: 1 / m3, datatype: float64}
# - {name: my note, datatype: string}
# - {name: k, datatype: int64}
# meta: !!omap
# - __serialized_columns__:
#     height:
#       __class__: astropy.units.quantity.Quantity
#       unit: !astropy.units.Unit {unit: solRad}
#       value: !astropy.table.SerializedColumn {name: height}
# schema: astropy-2.0
height density "my note" k
1.05 100000000000000.0 "a b" 1
1.2   50000000000000.0 "c ""d""" ""
`
	want := &Table{Columns: []Column{
		{Name: "height", Unit: "solRad", Data: []float64{1.05, 1.2}},
		{Name: "density", Unit: "1 / m3", Data: []float64{1e14, 5e13}},
		{Name: "my note", Data: []string{"a b", `c "d"`}},
		{Name: "k", Data: []int64{1, 0}, Missing: []bool{false, true}},
	}}
	for _, start := range []string{"# %ECSV 1.0\n# ---\n", "# %ECSV 1.0\n# ---\n# delimiter: ' '\n"} {
		table, err := Read(strings.NewReader(start + head))
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(want, table); d != "" {
			t.Error(d)
		}
	}
}

// A table without a head, as a spreadsheet would save it.
func TestPlain(t *testing.T) {
	table, err := Read(strings.NewReader("# a comment\nh,word,gap\n1,x,\n2.5,y,3\n"))
	if err != nil {
		t.Fatal(err)
	}
	want := &Table{Columns: []Column{
		{Name: "h", Data: []float64{1, 2.5}},
		{Name: "word", Data: []string{"x", "y"}},
		{Name: "gap", Data: []float64{math.NaN(), 3}, Missing: []bool{true, false}},
	}}
	if d := cmp.Diff(want, table, cmpopts.EquateNaNs()); d != "" {
		t.Error(d)
	}
}
