package fits

import (
	"encoding/binary"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// A Table is a binary table extension in memory.
type Table struct {
	Name    string
	Header  Header
	Columns []Column
	file    string // it was read from, for messages
}

// A Column is one column of a table. Data is a []float64, []float32, []int64,
// []int32 or []string (padded to the longest), or with one vector of equal
// length a row a [][]float32 or [][]byte. Form is the TFORM of the file; it
// may be left empty where Data is given. Reading leaves Data nil where Form is
// of another kind.
type Column struct {
	Name  string
	Unit  string
	About string // comment of TTYPE
	Data  any
	Form  string
}

// rows returns the number of rows of Data, and fills in Form.
func (c *Column) rows() (int, error) {
	width := func(n int) int { return max(n, 1) }
	switch d := c.Data.(type) {
	case []float64:
		c.Form = "D"
		return len(d), nil
	case []float32:
		c.Form = "E"
		return len(d), nil
	case []int64:
		c.Form = "K"
		return len(d), nil
	case []int32:
		c.Form = "J"
		return len(d), nil
	case []string:
		n := 0
		for _, s := range d {
			n = max(n, len(s))
		}
		c.Form = strconv.Itoa(width(n)) + "A"
		return len(d), nil
	case [][]float32:
		n := 0
		if len(d) > 0 {
			n = len(d[0])
		}
		c.Form = strconv.Itoa(width(n)) + "E"
		return len(d), nil
	case [][]byte:
		n := 0
		if len(d) > 0 {
			n = len(d[0])
		}
		c.Form = strconv.Itoa(width(n)) + "B"
		return len(d), nil
	}
	return 0, fmt.Errorf("column %s: cannot write a %T", c.Name, c.Data)
}

func (c *Column) cell(i int) any {
	switch d := c.Data.(type) {
	case []float64:
		return d[i]
	case []float32:
		return d[i]
	case []int64:
		return d[i]
	case []int32:
		return d[i]
	case []string:
		return d[i]
	case [][]float32:
		return d[i]
	case [][]byte:
		return d[i]
	}
	panic("fits: column type")
}

// form splits a TFORM into repeat count and type letter; width is the number
// of bytes of a cell, -1 for a type this package does not know.
func form(s string) (repeat int, kind byte, width int) {
	s = strings.TrimSpace(s)
	i := 0
	for i < len(s) && s[i] >= '0' && s[i] <= '9' {
		i++
	}
	repeat = 1
	if i > 0 {
		n, err := strconv.ParseInt(s[:i], 10, 32)
		if err != nil {
			return 0, 0, -1
		}
		repeat = int(n)
	}
	if i == len(s) {
		return 0, 0, -1
	}
	kind = s[i]
	switch kind {
	case 'L', 'B', 'A':
		return repeat, kind, repeat
	case 'X':
		return repeat, kind, (repeat + 7) / 8
	case 'I':
		return repeat, kind, 2 * repeat
	case 'J', 'E':
		return repeat, kind, 4 * repeat
	case 'K', 'D', 'C', 'P':
		return repeat, kind, 8 * repeat
	case 'M', 'Q':
		return repeat, kind, 16 * repeat
	}
	return repeat, kind, -1
}

// AddTable writes a table.
func (w *Writer) AddTable(t Table) error {
	if w.err != nil {
		return w.err
	}
	columns := append([]Column(nil), t.Columns...)
	rows := 0
	for i := range columns {
		n, err := columns[i].rows()
		if err == nil && i > 0 && n != rows {
			err = fmt.Errorf("column %s has %d rows, %s has %d", columns[i].Name, n, columns[0].Name, rows)
		}
		if err != nil {
			return w.fail(t.Name, err)
		}
		rows = n
	}
	rw, err := w.Rows(t.Name, t.Header, rows, columns...)
	if err != nil {
		return err
	}
	cells := make([]any, len(columns))
	for i := range rows {
		for j := range columns {
			cells[j] = columns[j].cell(i)
		}
		if err := rw.WriteRow(cells...); err != nil {
			return err
		}
	}
	return nil
}

// A RowWriter writes a binary table one row at a time.
type RowWriter struct {
	body    *body
	columns []Column
	row     []byte
}

// Rows starts a table of that many rows; columns give Name, Unit, About and
// Form: D, E, K, J, <n>A, <n>E or <n>B.
func (w *Writer) Rows(name string, header Header, rows int, columns ...Column) (*RowWriter, error) {
	if err := w.next(name); err != nil {
		return nil, w.fail(name, err)
	}
	h, width, err := tableHeader(name, header, rows, columns)
	if err != nil {
		return nil, w.fail(name, err)
	}
	b, err := w.begin(h)
	if err != nil {
		return nil, w.fail(name, err)
	}
	b.name, b.total = name, int64(rows)*int64(width)
	b.left = b.total
	w.open = b
	rw := &RowWriter{b, append([]Column(nil), columns...), make([]byte, 0, width)}
	if rows == 0 {
		return rw, w.fail(name, b.end())
	}
	return rw, nil
}

func tableHeader(name string, header Header, rows int, columns []Column) (Header, int, error) {
	if rows < 0 || len(columns) < 1 || len(columns) > 999 {
		return nil, 0, fmt.Errorf("a table of %d columns and %d rows", len(columns), rows)
	}
	if _, ok := header.Get("BUNIT"); ok {
		return nil, 0, fmt.Errorf("header keyword BUNIT: not allowed in a table, give units to the columns")
	}
	width := 0
	var cards Header
	seen := map[string]bool{}
	for i, c := range columns {
		repeat, kind, n := form(c.Form)
		if n < 1 || !strings.ContainsRune("DEKJAB", rune(kind)) || repeat > 1 && strings.ContainsRune("DKJ", rune(kind)) {
			return nil, 0, fmt.Errorf("column %s: cannot write the form %q", c.Name, c.Form)
		}
		width += n
		// Names are compared without case by readers.
		if key := strings.ToLower(c.Name); c.Name == "" || seen[key] {
			return nil, 0, fmt.Errorf("column %d: name %q empty or given twice", i+1, c.Name)
		} else {
			seen[key] = true
		}
		k := strconv.Itoa(i + 1)
		// The checks of header values serve here too, under names that are free.
		if _, err := (Header{{"COLUMN", c.Name, c.About}, {"UNIT", c.Unit, ""}}).check(); err != nil {
			return nil, 0, fmt.Errorf("column %s: %w", c.Name, err)
		}
		if long(value(c.Name)) || long(value(c.Unit)) {
			return nil, 0, fmt.Errorf("column %s: name or unit longer than a card", c.Name)
		}
		about := c.About
		if room := cardSize - 10 - 3 - max(20, len(value(c.Name))); len(about) > room {
			return nil, 0, fmt.Errorf("column %s: %q is longer than the %d characters left in its card", c.Name, about, max(room, 0))
		}
		cards = append(cards, Card{"TTYPE" + k, c.Name, about}, Card{"TFORM" + k, c.Form, ""})
		if c.Unit != "" {
			cards = append(cards, Card{"TUNIT" + k, c.Unit, ""})
		}
	}
	header, err := header.check()
	if err != nil {
		return nil, 0, err
	}
	h := Header{
		{"XTENSION", "BINTABLE", "binary table extension"},
		{"BITPIX", 8, ""}, {"NAXIS", 2, ""},
		{"NAXIS1", width, "bytes a row"}, {"NAXIS2", rows, "rows"},
		{"PCOUNT", 0, ""}, {"GCOUNT", 1, ""}, {"TFIELDS", len(columns), ""},
	}
	h = append(append(h, cards...), Card{"EXTNAME", name, ""})
	return append(h, header...), width, nil
}

// WriteRow writes the next row, one value a column: float64, float32, int64,
// int32, string, []float32 or []byte as the forms ask. After the last row the
// HDU is finished.
func (r *RowWriter) WriteRow(cells ...any) error {
	b := r.body
	if b.w.err != nil {
		return b.w.err
	}
	if len(cells) != len(r.columns) || b.left == 0 {
		return b.w.fail(b.name, fmt.Errorf("a row too many or of %d cells for %d columns", len(cells), len(r.columns)))
	}
	row := r.row[:0]
	for i, cell := range cells {
		c := &r.columns[i]
		repeat, kind, _ := form(c.Form)
		ok := false
		switch v := cell.(type) {
		case float64:
			bits := math.Float64bits(v)
			if v != v {
				bits = quietNaN64
			}
			row, ok = binary.BigEndian.AppendUint64(row, bits), kind == 'D'
		case float32:
			row, ok = appendFloat32(row, v), kind == 'E' && repeat == 1
		case int64:
			row, ok = binary.BigEndian.AppendUint64(row, uint64(v)), kind == 'K'
		case int32:
			row, ok = binary.BigEndian.AppendUint32(row, uint32(v)), kind == 'J'
		case string:
			if err := printable(c.Name, v); err != nil {
				return b.w.fail(b.name, fmt.Errorf("column %s: %q holds a character outside printable ASCII", c.Name, v))
			}
			row, ok = append(row, v...), kind == 'A' && len(v) <= repeat
			for range repeat - len(v) {
				row = append(row, ' ')
			}
		case []float32:
			for _, x := range v {
				row = appendFloat32(row, x)
			}
			ok = kind == 'E' && len(v) == repeat
		case []byte:
			row, ok = append(row, v...), kind == 'B' && len(v) == repeat
		}
		if !ok {
			return b.w.fail(b.name, fmt.Errorf("column %s: a %T does not fit the form %s", c.Name, cell, c.Form))
		}
	}
	r.row = row
	_, err := b.Write(row)
	if err == nil && b.left == 0 {
		err = b.end()
	}
	return b.w.fail(b.name, err)
}

func appendFloat32(b []byte, v float32) []byte {
	if v != v {
		return binary.BigEndian.AppendUint32(b, quietNaN32)
	}
	return binary.BigEndian.AppendUint32(b, math.Float32bits(v))
}
