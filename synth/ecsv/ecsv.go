// Package ecsv writes and reads tables as ECSV 1.0: comma-separated values
// under a YAML head in comments that carries units and descriptions
// (Enhanced Character Separated Values, astropy proposal for enhancement 6).
// Scalar columns of float64, int64 and string are read, separated by commas or, as
// is the default of the format, by blanks; and plain comma-separated columns without
// a head.
package ecsv

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"unicode/utf8"

	"go.yaml.in/yaml/v4"
)

// A Table is columns of equal length and ordered metadata.
type Table struct {
	Columns []Column
	Meta    []Pair
}

// A Pair is one entry of the metadata: Value is a string, int64, int, uint64,
// float64 or bool; it is read back as a string, int64, float64 or bool.
type Pair struct {
	Key   string
	Value any
}

// A Column is one column. Data is a []float64, []int64 or []string. Missing
// marks rows without a value, an empty field in the file; nil means none. A
// missing float64 reads as NaN, a NaN that is not missing is written nan.
type Column struct {
	Name    string
	Unit    string // FITS unit string; empty: a pure number
	About   string
	Data    any
	Missing []bool
}

func (c *Column) len() int {
	switch d := c.Data.(type) {
	case []float64:
		return len(d)
	case []int64:
		return len(d)
	case []string:
		return len(d)
	}
	return -1
}

// Column returns the column of that name, or nil.
func (t *Table) Column(name string) *Column {
	for i := range t.Columns {
		if t.Columns[i].Name == name {
			return &t.Columns[i]
		}
	}
	return nil
}

// Floats returns a numeric column as float64, NaN where missing.
func (t *Table) Floats(name string) ([]float64, error) {
	c := t.Column(name)
	if c == nil {
		names := make([]string, len(t.Columns))
		for i := range t.Columns {
			names[i] = t.Columns[i].Name
		}
		return nil, fmt.Errorf("no column %s; the table has %s", name, strings.Join(names, ", "))
	}
	switch d := c.Data.(type) {
	case []float64:
		return d, nil
	case []int64:
		out := make([]float64, len(d))
		for i, v := range d {
			out[i] = float64(v)
			if c.Missing != nil && c.Missing[i] {
				out[i] = math.NaN()
			}
		}
		return out, nil
	}
	return nil, fmt.Errorf("column %s holds text, not numbers", name)
}

// WriteFile writes the table under a temporary name and renames it.
func (t *Table) WriteFile(path string) error {
	var b bytes.Buffer
	err := t.Write(&b)
	if err == nil {
		err = os.WriteFile(path+".part", b.Bytes(), 0o666)
	}
	if err == nil {
		err = os.Rename(path+".part", path)
	}
	if err != nil {
		os.Remove(path + ".part")
		return fmt.Errorf("%s: %w", path, err)
	}
	return nil
}

// Write writes the table. Floats have the fewest digits that read back equal.
func (t *Table) Write(out io.Writer) error {
	rows, err := t.check()
	if err != nil {
		return err
	}
	w := bufio.NewWriter(out)
	w.WriteString("# %ECSV 1.0\n# ---\n# delimiter: ','\n# datatype:\n")
	for i := range t.Columns {
		c := &t.Columns[i]
		fmt.Fprintf(w, "# - {name: %s", scalar(c.Name))
		if c.Unit != "" {
			fmt.Fprintf(w, ", unit: %s", scalar(c.Unit))
		}
		fmt.Fprintf(w, ", datatype: %s", datatype(c.Data))
		if c.About != "" {
			fmt.Fprintf(w, ", description: %s", scalar(c.About))
		}
		w.WriteString("}\n")
	}
	if len(t.Meta) > 0 {
		w.WriteString("# meta: !!omap\n")
		for _, p := range t.Meta {
			fmt.Fprintf(w, "# - {%s: %s}\n", scalar(p.Key), metaValue(p.Value))
		}
	}
	w.WriteString("# schema: astropy-2.0\n")
	for i := range t.Columns {
		if i > 0 {
			w.WriteByte(',')
		}
		w.WriteString(field(t.Columns[i].Name))
	}
	w.WriteByte('\n')
	for r := range rows {
		for i := range t.Columns {
			if i > 0 {
				w.WriteByte(',')
			}
			w.WriteString(t.Columns[i].field(r, len(t.Columns) == 1))
		}
		w.WriteByte('\n')
	}
	return w.Flush()
}

func (t *Table) check() (rows int, err error) {
	if len(t.Columns) == 0 {
		return 0, fmt.Errorf("a table without columns")
	}
	seen := map[string]bool{}
	for i := range t.Columns {
		c := &t.Columns[i]
		n := c.len()
		switch {
		case n < 0:
			return 0, fmt.Errorf("column %s: cannot write a %T", c.Name, c.Data)
		case c.Missing != nil && len(c.Missing) != n:
			return 0, fmt.Errorf("column %s: %d rows, Missing has %d", c.Name, n, len(c.Missing))
		case i > 0 && n != rows:
			return 0, fmt.Errorf("column %s: %d rows, %s has %d", c.Name, n, t.Columns[0].Name, rows)
		case c.Name == "" || seen[c.Name]:
			return 0, fmt.Errorf("column %d: name %q empty or given twice", i+1, c.Name)
		}
		seen[c.Name] = true
		rows = n
		for _, s := range []string{c.Name, c.Unit, c.About} {
			if strings.ContainsAny(s, "\n\r") || !utf8.ValidString(s) {
				return 0, fmt.Errorf("column %s: %q holds a line break or is not UTF-8", c.Name, s)
			}
		}
	}
	for _, p := range t.Meta {
		switch v := p.Value.(type) {
		case string:
			if !utf8.ValidString(v) {
				return 0, fmt.Errorf("meta %s: %q is not UTF-8", p.Key, v)
			}
		case int, int64, uint64, bool:
		case float64:
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return 0, fmt.Errorf("meta %s: is %v", p.Key, v)
			}
		default:
			return 0, fmt.Errorf("meta %s: cannot write a %T", p.Key, p.Value)
		}
		if p.Key == "" || strings.ContainsAny(p.Key, "\n\r") || !utf8.ValidString(p.Key) {
			return 0, fmt.Errorf("meta: key %q", p.Key)
		}
	}
	return rows, nil
}

func datatype(data any) string {
	switch data.(type) {
	case []float64:
		return "float64"
	case []int64:
		return "int64"
	}
	return "string"
}

// scalar writes text so that YAML 1.1 and 1.2 both read it as that text: plain
// where it is a word, quoted otherwise.
func scalar(s string) string {
	plain := s != ""
	for i, c := range []byte(s) {
		letter := c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c == '_'
		plain = plain && (letter || i > 0 && (c >= '0' && c <= '9' || c == '-' || c == '/'))
	}
	switch strings.ToLower(s) {
	case "y", "n", "yes", "no", "on", "off", "true", "false", "null":
		plain = false
	}
	if plain {
		return s
	}
	if strings.IndexFunc(s, func(r rune) bool {
		return r < ' ' || r == 0x7f || r == 0x85 || r == 0xa0 || r == 0x2028 || r == 0x2029 || r == 0xfeff || r == 0xfffd
	}) >= 0 {
		// Go's escapes in printable ASCII are among those of YAML.
		return strconv.QuoteToASCII(s)
	}
	return "'" + strings.ReplaceAll(s, "'", "''") + "'"
}

func metaValue(v any) string {
	switch v := v.(type) {
	case string:
		return scalar(v)
	case float64:
		return float(v)
	}
	return fmt.Sprint(v)
}

// float formats so that YAML and CSV readers take it for a float, not an integer.
func float(v float64) string {
	switch {
	case math.IsNaN(v):
		return "nan"
	case math.IsInf(v, 1):
		return "inf"
	case math.IsInf(v, -1):
		return "-inf"
	}
	s := strconv.FormatFloat(v, 'g', -1, 64)
	if i := strings.IndexByte(s, 'e'); i >= 0 {
		if !strings.Contains(s, ".") {
			s = s[:i] + ".0" + s[i:]
		}
		return s
	}
	if !strings.Contains(s, ".") {
		s += ".0"
	}
	return s
}

func (c *Column) field(r int, alone bool) string {
	if c.Missing != nil && c.Missing[r] {
		if alone {
			return `""` // an empty line would not be a row
		}
		return ""
	}
	switch d := c.Data.(type) {
	case []float64:
		return float(d[r])
	case []int64:
		return strconv.FormatInt(d[r], 10)
	}
	return field(c.Data.([]string)[r])
}

// field quotes text where CSV needs it, or where a reader of comments or
// blanks would stumble. An empty text cannot be told from a missing one.
func field(s string) string {
	if s == "" || strings.ContainsAny(s, ",\"\n\r#'") || strings.TrimSpace(s) != s {
		return `"` + strings.ReplaceAll(s, `"`, `""`) + `"`
	}
	return s
}

// ReadFile reads a table.
func ReadFile(path string) (*Table, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	t, err := Read(file)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return t, nil
}

type head struct {
	Delimiter string `yaml:"delimiter"`
	Datatype  []struct {
		Name        string `yaml:"name"`
		Unit        string `yaml:"unit"`
		Datatype    string `yaml:"datatype"`
		Description string `yaml:"description"`
		Subtype     string `yaml:"subtype"`
	} `yaml:"datatype"`
	Meta yaml.Node `yaml:"meta"`
}

// maxBytes bounds what is read of a table; ours stay below a megabyte.
const maxBytes = 1 << 26

// Read reads a table. Integer and float types of other widths become int64 and
// float64. Without a head a column is float64 if every field is a number, else
// string.
func Read(r io.Reader) (*Table, error) {
	limit := &io.LimitedReader{R: r, N: maxBytes + 1}
	t, err := read(bufio.NewReader(limit))
	if limit.N == 0 {
		return nil, fmt.Errorf("is too large; at most %d bytes are read", maxBytes)
	}
	return t, err
}

func read(in *bufio.Reader) (*Table, error) {
	var yamlText strings.Builder
	line := 0
	ecsv := false
	for {
		c, err := in.Peek(1)
		if err == io.EOF || err == nil && c[0] != '#' {
			break
		}
		if err != nil {
			return nil, err
		}
		s, err := in.ReadString('\n')
		if err != nil && err != io.EOF {
			return nil, err
		}
		line++
		s = strings.TrimPrefix(strings.TrimRight(s, "\r\n"), "#")
		if line == 1 && strings.HasPrefix(s, " %ECSV ") {
			ecsv = true
			continue
		}
		yamlText.WriteString(strings.TrimPrefix(s, " ") + "\n")
	}
	t := &Table{}
	var h head
	if ecsv {
		if err := yaml.Unmarshal([]byte(yamlText.String()), &h); err != nil {
			return nil, fmt.Errorf("ECSV head: %w", err)
		}
		switch h.Delimiter {
		case "", " ", ",":
		default:
			return nil, fmt.Errorf("ECSV head: delimiter is %q: must be ' ' or ','", h.Delimiter)
		}
		if err := t.readMeta(&h.Meta); err != nil {
			return nil, err
		}
	}
	reader := csv.NewReader(in)
	reader.ReuseRecord = true
	if ecsv && h.Delimiter != "," && !(h.Delimiter == "" && commas(in, len(h.Datatype))) {
		reader.Comma, reader.TrimLeadingSpace = ' ', true // several blanks separate like one
	}
	names, err := reader.Read()
	if err != nil {
		return nil, fmt.Errorf("line %d: the names of the columns are missing", line+1)
	}
	if ecsv && len(names) != len(h.Datatype) {
		return nil, fmt.Errorf("line %d: %d names, the ECSV head describes %d columns", line+1, len(names), len(h.Datatype))
	}
	for i, name := range names {
		c := Column{Name: name, Data: []string(nil)}
		if ecsv {
			d := h.Datatype[i]
			if d.Name != name {
				return nil, fmt.Errorf("line %d: column %d is %q, in the ECSV head %q", line+1, i+1, name, d.Name)
			}
			c.Unit, c.About = d.Unit, d.Description
			switch {
			case d.Subtype != "":
				return nil, fmt.Errorf("column %s: subtype %s is not supported", name, d.Subtype)
			case strings.HasPrefix(d.Datatype, "float"):
				c.Data = []float64(nil)
			case strings.HasPrefix(d.Datatype, "int"), strings.HasPrefix(d.Datatype, "uint"):
				c.Data = []int64(nil)
			case d.Datatype != "string":
				return nil, fmt.Errorf("column %s: datatype %q is not supported", name, d.Datatype)
			}
		}
		t.Columns = append(t.Columns, c)
	}
	for row := 0; ; row++ {
		record, err := reader.Read()
		if err == io.EOF {
			break
		}
		if err != nil {
			if e, ok := err.(*csv.ParseError); ok {
				return nil, fmt.Errorf("line %d: %w", line+e.Line, e.Err)
			}
			return nil, err
		}
		for i := range t.Columns {
			if err := t.Columns[i].append(record[i], row); err != nil {
				at, _ := reader.FieldPos(i)
				return nil, fmt.Errorf("line %d: column %s: %w", line+at, t.Columns[i].Name, err)
			}
		}
	}
	if !ecsv {
		for i := range t.Columns {
			t.Columns[i].guess()
		}
	}
	return t, nil
}

// commas tells whether the next line holds n names separated by commas, which tables
// written by hand do without saying so.
func commas(in *bufio.Reader, n int) bool {
	ahead, _ := in.Peek(in.Size()) // less than that much is no error here
	names, _, _ := strings.Cut(string(ahead), "\n")
	return n > 1 && strings.Count(names, ",") == n-1 && !strings.ContainsAny(strings.TrimSpace(names), " \"")
}

func (c *Column) append(text string, row int) error {
	missing := text == ""
	if _, ok := c.Data.([]string); ok {
		missing = false
	}
	if missing && c.Missing == nil {
		c.Missing = make([]bool, row)
	}
	if c.Missing != nil {
		c.Missing = append(c.Missing, missing)
	}
	switch d := c.Data.(type) {
	case []float64:
		v := math.NaN()
		if !missing {
			var err error
			if v, err = strconv.ParseFloat(strings.TrimSpace(text), 64); err != nil {
				return fmt.Errorf("%q is not a number", text)
			}
		}
		c.Data = append(d, v)
	case []int64:
		v := int64(0)
		if !missing {
			var err error
			if v, err = strconv.ParseInt(strings.TrimSpace(text), 10, 64); err != nil {
				return fmt.Errorf("%q is not a 64-bit integer", text)
			}
		}
		c.Data = append(d, v)
	case []string:
		c.Data = append(d, text)
	}
	return nil
}

// guess turns a column of text into numbers if all of it is.
func (c *Column) guess() {
	numbers := Column{Name: c.Name, Data: []float64(nil)}
	for i, s := range c.Data.([]string) {
		if numbers.append(s, i) != nil {
			return
		}
	}
	*c = numbers
}

func (t *Table) readMeta(n *yaml.Node) error {
	add := func(key, value *yaml.Node) error {
		p := Pair{Key: key.Value, Value: value.Value}
		if value.Kind != yaml.ScalarNode {
			return nil // structures of other programs
		}
		var v any
		if err := value.Decode(&v); err != nil {
			return fmt.Errorf("ECSV head: meta %s: %w", key.Value, err)
		}
		switch v := v.(type) {
		case int:
			p.Value = int64(v)
		case int64, float64, bool, string:
			p.Value = v
		}
		t.Meta = append(t.Meta, p)
		return nil
	}
	maps := []*yaml.Node{n}
	if n.Kind == yaml.SequenceNode {
		maps = n.Content
	}
	for _, m := range maps {
		if m.Kind != yaml.MappingNode {
			continue
		}
		for i := 0; i+1 < len(m.Content); i += 2 {
			if err := add(m.Content[i], m.Content[i+1]); err != nil {
				return err
			}
		}
	}
	return nil
}
