package table

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"

	"offplane/synth/ecsv"
	"offplane/synth/fits"
)

// The columns of the numbers at a node.
var numbers = []struct {
	name, about string
	of          func(*Surface) *[]float64
}{
	{"ln_median", "median of ln(true/inferred)", func(s *Surface) *[]float64 { return &s.Median }},
	{"ln_low68", "lower end of the 68 % interval", func(s *Surface) *[]float64 { return &s.Low68 }},
	{"ln_high68", "upper end of the 68 % interval", func(s *Surface) *[]float64 { return &s.High68 }},
	{"ln_low95", "lower end of the 95 % interval", func(s *Surface) *[]float64 { return &s.Low95 }},
	{"ln_high95", "upper end of the 95 % interval", func(s *Surface) *[]float64 { return &s.High95 }},
}

const membersColumn = "members"

// how tells the reader of the file what to do with it.
const how = "choose quantity and features (those that you have, all of them), reshape to the grid of the sorted values of their columns, the last column fastest, and interpolate linearly; " +
	"true = inferred * exp(ln_median). Not beyond the grid, and not in a cell whose lowest corner has fewer members than the key least says."

// ECSV returns the table with one row a node of a surface, sorted; the columns of
// features that a surface does not use are NaN.
func (t *Table) ECSV() *ecsv.Table {
	rows := 0
	var used []Feature
	for i := range t.Surfaces {
		s := &t.Surfaces[i]
		rows += s.Grid.Size()
		for _, f := range s.Features() {
			if !slices.Contains(used, f) {
				used = append(used, f)
			}
		}
	}
	slices.Sort(used)
	var quantity, names []string
	var members []int64
	axes := make([][]float64, len(used))
	columns := make([][]float64, len(numbers))
	for i := range t.Surfaces {
		s := &t.Surfaces[i]
		for node := range s.Grid.Size() {
			quantity, names = append(quantity, s.Quantity.String()), append(names, join(s.Features()))
			x := s.Grid.point(node)
			for k, f := range used {
				v := nan
				if at := slices.Index(s.Features(), f); at >= 0 {
					v = x[at]
				}
				axes[k] = append(axes[k], v)
			}
			for k, c := range numbers {
				columns[k] = append(columns[k], (*c.of(s))[node])
			}
			members = append(members, s.Members[node])
		}
	}
	out := &ecsv.Table{Meta: t.meta()}
	add := func(name, unit, about string, data any) {
		out.Columns = append(out.Columns, ecsv.Column{Name: name, Unit: unit, About: about, Data: data})
	}
	add("quantity", "", "that is corrected", quantity)
	add("features", "", "that the surface needs", names)
	for k, f := range used {
		add(f.String(), f.Unit(), featureNames[f].about, axes[k])
	}
	for k, c := range numbers {
		add(c.name, "", c.about, columns[k])
	}
	add(membersColumn, "", "with pixels in the cell above this node", members)
	return out
}

const recipePrefix = "recipe_"

func (t *Table) meta() []ecsv.Pair {
	m := []ecsv.Pair{
		{Key: "about", Value: "correction of maps of the coronal field, for one recipe and against one truth"},
		{Key: "how", Value: how},
		{Key: "caution", Value: Caution},
		{Key: "program", Value: t.Origin.Program},
		{Key: "ensemble", Value: t.Origin.Ensemble},
		{Key: "ensemble_sha256", Value: t.Origin.SHA256},
		{Key: "varied", Value: t.Origin.Varied},
		{Key: "prior", Value: t.Prior},
		{Key: "truth", Value: t.Truth},
		{Key: "members", Value: t.Members},
		{Key: "effective_members", Value: digits(t.Effective)},
		{Key: "least", Value: t.Least},
	}
	for _, s := range t.Recipe {
		m = append(m, ecsv.Pair{Key: recipePrefix + s.Key, Value: s.Value})
	}
	for i := range t.Surfaces {
		s := &t.Surfaces[i]
		m = append(m, ecsv.Pair{Key: scoreKey(s), Value: s.Score.String()})
	}
	return m
}

func scoreKey(s *Surface) string {
	return fmt.Sprintf("coverage of %s by %s", s.Quantity, join(s.Features()))
}

// String tells what was achieved on members never used.
func (s *Score) String() string {
	if s.Members == 0 {
		return unknownScore
	}
	return fmt.Sprintf("%.1f +- %.1f %% within 68 %%, %.1f +- %.1f %% within 95 %%, on %d members held out",
		100*s.Coverage68.Mean, 100*s.Coverage68.Error, 100*s.Coverage95.Mean, 100*s.Coverage95.Error, s.Members)
}

const unknownScore = "coverage not known"

func parseScore(text string) (s Score) {
	var c [4]float64
	if _, err := fmt.Sscanf(text, "%f +- %f %% within 68 %%, %f +- %f %% within 95 %%, on %d members held out", &c[0], &c[1], &c[2], &c[3], &s.Members); err == nil {
		s.Coverage68, s.Coverage95 = Measure{c[0] / 100, c[1] / 100}, Measure{c[2] / 100, c[3] / 100}
	}
	return s
}

// WriteFITS writes the same content as a binary table, with the metadata in a table META
// of keys and values.
func (t *Table) WriteFITS(path string) error {
	e := t.ECSV()
	main := fits.Table{Name: "TABLE"}
	for _, c := range e.Columns {
		main.Columns = append(main.Columns, fits.Column{Name: c.Name, Unit: c.Unit, About: c.About, Data: c.Data})
	}
	var keys, values []string
	for _, p := range e.Meta {
		keys, values = append(keys, p.Key), append(values, fmt.Sprint(p.Value))
	}
	w, err := fits.Create(path, fits.Header{{Key: "CREATOR", Value: t.Origin.Program}})
	if err != nil {
		return err
	}
	defer w.Abort()
	if err := w.AddTable(main); err != nil {
		return err
	}
	meta := fits.Table{Name: "META", Columns: []fits.Column{{Name: "key", Data: keys}, {Name: "value", Data: values}}}
	if err := w.AddTable(meta); err != nil {
		return err
	}
	return w.Close()
}

// Read reads a table from its ECSV or FITS file.
func Read(path string) (*Table, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	head := make([]byte, 9)
	n, _ := io.ReadFull(file, head)
	var e *ecsv.Table
	if string(head[:n]) == "SIMPLE  =" {
		e, err = readFITS(path)
	} else if _, err = file.Seek(0, io.SeekStart); err == nil {
		e, err = ecsv.Read(file)
	}
	var t *Table
	if err == nil {
		t, err = decode(e)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: is no correction table: %w", path, err)
	}
	return t, nil
}

func readFITS(path string) (*ecsv.Table, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	main, err := f.Table("TABLE")
	if err != nil {
		return nil, err
	}
	out := &ecsv.Table{}
	for _, c := range main.Columns {
		out.Columns = append(out.Columns, ecsv.Column{Name: c.Name, Unit: c.Unit, About: c.About, Data: c.Data})
	}
	meta, err := f.Table("META")
	if err != nil {
		return nil, err
	}
	keys, err := meta.Strings("key")
	if err != nil {
		return nil, err
	}
	values, err := meta.Strings("value")
	if err != nil {
		return nil, err
	}
	for i := range keys {
		out.Meta = append(out.Meta, ecsv.Pair{Key: keys[i], Value: values[i]})
	}
	return out, nil
}

// decode is the inverse of ECSV, but for what the coverage is made of.
func decode(e *ecsv.Table) (*Table, error) {
	meta := map[string]string{}
	t := &Table{}
	for _, p := range e.Meta {
		v := fmt.Sprint(p.Value)
		meta[p.Key] = v
		if key, ok := strings.CutPrefix(p.Key, recipePrefix); ok {
			t.Recipe = append(t.Recipe, Step{key, v})
		}
	}
	t.Origin = Origin{meta["program"], meta["ensemble"], meta["ensemble_sha256"], meta["varied"]}
	t.Truth, t.Prior = meta["truth"], meta["prior"]
	if !slices.Contains(Truths(), t.Truth) {
		return nil, fmt.Errorf("meta truth is %q: must be one of %s", t.Truth, strings.Join(Truths(), ", "))
	}
	if len(t.Recipe) == 0 {
		return nil, fmt.Errorf("meta has no recipe of the maps that it is good for: keys %s", recipePrefix+strings.Join(RecipeKeys(), ", "+recipePrefix))
	}
	var err error
	for _, s := range t.Recipe {
		if _, err := Recipe(nil).With(s.Key + "=" + s.Value); err != nil {
			return nil, fmt.Errorf("meta %s%s: %w", recipePrefix, s.Key, err)
		}
	}
	for _, n := range []struct {
		key string
		to  *int
	}{{"members", &t.Members}, {"least", &t.Least}} {
		if *n.to, err = strconv.Atoi(meta[n.key]); err != nil {
			return nil, fmt.Errorf("meta %s is %q: must be a whole number", n.key, meta[n.key])
		}
	}
	if t.Least < 1 {
		return nil, fmt.Errorf("meta least is %d: must be at least 1", t.Least)
	}
	if t.Effective, err = strconv.ParseFloat(meta["effective_members"], 64); err != nil {
		return nil, fmt.Errorf("meta effective_members is %q", meta["effective_members"])
	}
	quantity, names, err := texts(e)
	if err != nil {
		return nil, err
	}
	for from := 0; from < len(quantity); {
		to := from
		for to < len(quantity) && quantity[to] == quantity[from] && names[to] == names[from] {
			to++
		}
		s, err := surface(e, quantity[from], names[from], from, to)
		if err != nil {
			return nil, fmt.Errorf("rows %d to %d: %w", from+1, to, err)
		}
		s.Score = parseScore(meta[scoreKey(s)])
		t.Surfaces = append(t.Surfaces, *s)
		from = to
	}
	if len(t.Surfaces) == 0 {
		return nil, fmt.Errorf("it has no rows")
	}
	return t, nil
}

func texts(e *ecsv.Table) (quantity, names []string, err error) {
	for _, c := range []struct {
		name string
		to   *[]string
	}{{"quantity", &quantity}, {"features", &names}} {
		col := e.Column(c.name)
		if col == nil {
			return nil, nil, fmt.Errorf("no column %s", c.name)
		}
		var ok bool
		if *c.to, ok = col.Data.([]string); !ok {
			return nil, nil, fmt.Errorf("column %s holds no text", c.name)
		}
	}
	return quantity, names, nil
}

// surface reads the rows from..to.
func surface(e *ecsv.Table, quantity, names string, from, to int) (*Surface, error) {
	q := slices.Index(quantityNames[:], quantity)
	if q < 0 {
		return nil, fmt.Errorf("quantity %q: must be one of %s", quantity, strings.Join(quantityNames[:], ", "))
	}
	fs, err := ParseFeatures(names)
	if err != nil {
		return nil, err
	}
	if len(fs) == 0 || len(fs) > maxFeatures {
		return nil, fmt.Errorf("%d features", len(fs))
	}
	s := &Surface{Quantity: Quantity(q)}
	for _, f := range fs {
		x, err := e.Floats(f.String())
		if err != nil {
			return nil, err
		}
		if u := e.Column(f.String()).Unit; u != f.Unit() {
			return nil, fmt.Errorf("%s is in %q: must be in %q", f, u, f.Unit())
		}
		nodes := slices.Compact(slices.Sorted(slices.Values(x[from:to])))
		if len(nodes) < 2 || !finite(nodes[0]) || !finite(nodes[len(nodes)-1]) {
			return nil, fmt.Errorf("%s has %d nodes: a grid needs two or more, none of them infinite", f, len(nodes))
		}
		s.Grid = append(s.Grid, Axis{f, nodes})
	}
	if s.Grid.Size() != to-from {
		return nil, fmt.Errorf("%d rows, the grid has %d nodes", to-from, s.Grid.Size())
	}
	for k, f := range fs {
		x, _ := e.Floats(f.String())
		for node := range s.Grid.Size() {
			if x[from+node] != s.Grid.point(node)[k] {
				return nil, fmt.Errorf("%s is not sorted, the last feature fastest", f)
			}
		}
	}
	for _, c := range numbers {
		x, err := e.Floats(c.name)
		if err != nil {
			return nil, err
		}
		*c.of(s) = x[from:to]
	}
	members, err := e.Floats(membersColumn)
	if err != nil {
		return nil, err
	}
	for i, m := range members[from:to] {
		if !(m >= 0 && m <= math.MaxInt32) {
			return nil, fmt.Errorf("row %d: %s is %g", from+i+1, membersColumn, m)
		}
		s.Members = append(s.Members, int64(m))
		v := []float64{s.Low95[i], s.Low68[i], s.Median[i], s.High68[i], s.High95[i]}
		if !slices.IsSorted(v) || !finite(v[0]) || !finite(v[4]) {
			return nil, fmt.Errorf("row %d: ln_low95 to ln_high95 are %g: must ascend and be finite", from+i+1, v)
		}
	}
	return s, nil
}

// parse reads a table from the text of its ECSV file.
func parse(text []byte) (*Table, error) {
	e, err := ecsv.Read(bytes.NewReader(text))
	if err != nil {
		return nil, err
	}
	return decode(e)
}
