package fits

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"

	"github.com/astrogo/fitsio"

	"offplane/scenarios/strict"
)

// maxHeader bounds the header of one HDU: real ones stay below 100 kB.
const maxHeader = 8 << 20

// A File is a FITS file open for reading. Open reads the headers; pixels and
// rows are read when asked for. No size in a header is believed before it was
// compared with the size of the file.
type File struct {
	Name   string
	HDUs   []*HDU
	r      io.ReaderAt
	size   int64
	closer io.Closer
}

// An HDU is one header and data unit. Kind is IMAGE, BINTABLE or another
// value of XTENSION; Axes are NAXIS1, NAXIS2, ...
type HDU struct {
	Name   string // EXTNAME; empty if it has none
	Kind   string
	Header Header
	Axes   []int

	bitpix int
	head   int64 // where the header begins
	start  int64 // of the data
	size   int64 // of the data, without padding
}

// Open opens a file and reads its headers.
func Open(path string) (*File, error) {
	file, err := os.Open(path)
	if errors.Is(err, os.ErrNotExist) {
		return nil, fmt.Errorf("%s: %w", path, os.ErrNotExist)
	}
	if err != nil {
		return nil, err
	}
	info, err := file.Stat()
	if err == nil && !info.Mode().IsRegular() {
		err = fmt.Errorf("%s: not a regular file", path)
	}
	var f *File
	if err == nil {
		f, err = NewFile(path, file, info.Size())
	}
	if err != nil {
		file.Close()
		return nil, err
	}
	f.closer = file
	return f, nil
}

// NewFile reads the headers of a file of that many bytes; name is for messages.
func NewFile(name string, r io.ReaderAt, size int64) (*File, error) {
	f := &File{Name: name, r: r, size: size}
	var head [8]byte
	n, err := r.ReadAt(head[:], 0)
	if err != nil && err != io.EOF {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	switch {
	case n == 0:
		return nil, fmt.Errorf("%s: the file is empty", name)
	case bytes.HasPrefix(head[:n], []byte{0x1f, 0x8b}):
		return nil, fmt.Errorf("%s: is compressed, unpack it with gunzip first", name)
	case string(head[:n]) != "SIMPLE  "[:n]:
		return nil, fmt.Errorf("%s: not a FITS file: does not begin with SIMPLE", name)
	}
	for pos := int64(0); pos < size; {
		h, next, err := f.hdu(pos)
		if err == errAfter && pos > 0 {
			break
		}
		if err != nil {
			return nil, fmt.Errorf("%s: HDU %d: %w", name, len(f.HDUs), err)
		}
		f.HDUs = append(f.HDUs, h)
		pos = next
	}
	return f, nil
}

// errAfter: what follows the last HDU is none; the standard lets readers ignore it.
var errAfter = errors.New("not an extension")

func (f *File) hdu(pos int64) (*HDU, int64, error) {
	var cards Header
	var block [blockSize]byte
	h := &HDU{}
	at := pos
	tail := false // the last card is a string that ends with an ampersand
	for done := false; !done; at += blockSize {
		n, err := f.r.ReadAt(block[:min(blockSize, max(f.size-at, 0))], at)
		if err != nil && err != io.EOF {
			return nil, 0, err
		}
		if at == pos {
			want := "SIMPLE  "
			if pos > 0 {
				want = "XTENSION"
			}
			if k := min(n, 8); string(block[:k]) != want[:k] {
				return nil, 0, errAfter
			}
		}
		if n < blockSize || at-pos >= maxHeader {
			return nil, 0, errors.New("truncated: the header has no END")
		}
		for i := 0; i < blockSize && !done; i += cardSize {
			c := parseCard(block[i : i+cardSize])
			switch {
			case c.Key == "END":
				done = true
				continue
			case c.Key == "CONTINUE":
				text, _ := c.Value.(string)
				if tail {
					last := &cards[len(cards)-1]
					joined := strings.TrimSuffix(last.Value.(string), "&") + text
					last.Value = joined
					// Joining is quadratic; no honest string is this long.
					tail = strings.HasSuffix(text, "&") && len(joined) < 1<<16
				}
				continue
			}
			text, ok := c.Value.(string)
			tail = ok && !commentary(c.Key) && strings.HasSuffix(text, "&")
			cards = append(cards, c)
		}
	}
	h.Header = cards
	h.head, h.start = pos, at
	h.Kind = "IMAGE"
	if pos > 0 {
		h.Kind, _ = cards.Text("XTENSION")
	}
	h.Name, _ = cards.Text("EXTNAME")
	var ok bool
	if h.bitpix, ok = cards.Int("BITPIX"); !ok || !strings.Contains(" 8 16 32 64 -32 -64 ", " "+strconv.Itoa(h.bitpix)+" ") {
		return nil, 0, errors.New("BITPIX is missing or none of 8, 16, 32, 64, -32, -64")
	}
	naxis, ok := cards.Int("NAXIS")
	if !ok || naxis < 0 || naxis > 999 {
		return nil, 0, errors.New("NAXIS is missing or out of range")
	}
	if v, _ := cards.Get("GROUPS"); v.Value == true {
		return nil, 0, errors.New("random groups are not supported")
	}
	empty := naxis == 0
	for i := range naxis {
		key := "NAXIS" + strconv.Itoa(i+1)
		n, ok := cards.Int(key)
		if !ok || n < 0 {
			return nil, 0, fmt.Errorf("%s is missing or negative", key)
		}
		h.Axes = append(h.Axes, n)
		empty = empty || n == 0
	}
	heap := 0
	if pos > 0 {
		heap, _ = cards.Int("PCOUNT")
		if g, ok := cards.Int("GCOUNT"); ok && g != 1 {
			return nil, 0, fmt.Errorf("GCOUNT is %d: only 1 is supported", g)
		}
	}
	left := f.size - at
	width := int64(max(h.bitpix, -h.bitpix) / 8)
	count := int64(0)
	if !empty {
		count = 1
		for _, n := range h.Axes {
			if int64(n) > left/width/count {
				return nil, 0, f.short(h, left)
			}
			count *= int64(n)
		}
	}
	if heap < 0 || int64(heap) > left/width-count {
		return nil, 0, f.short(h, left)
	}
	h.size = (count + int64(heap)) * width
	return h, at + (h.size+blockSize-1)/blockSize*blockSize, nil
}

func (f *File) short(h *HDU, left int64) error {
	return fmt.Errorf("truncated: %s elements of %d bits announced, %d bytes left in the file", dims(h.Axes), h.bitpix, left)
}

func dims(axes []int) string {
	s := make([]string, len(axes))
	for i, n := range axes {
		s[i] = strconv.Itoa(n)
	}
	return strings.Join(s, " x ")
}

// Close closes the file.
func (f *File) Close() error {
	if f.closer == nil {
		return nil
	}
	return f.closer.Close()
}

// find returns the HDU of that name (without case) among those that pass.
// A number counts HDUs from the primary, 0; the empty name is the first.
func (f *File) find(what, name string, pass func(*HDU) bool) (*HDU, error) {
	var have []string
	for i, h := range f.HDUs {
		if !pass(h) {
			continue
		}
		if name == "" || strings.EqualFold(h.Name, name) {
			return h, nil
		}
		have = append(have, h.label(i))
	}
	if i, err := strconv.Atoi(name); err == nil && i >= 0 && i < len(f.HDUs) && pass(f.HDUs[i]) {
		return f.HDUs[i], nil
	}
	for _, h := range f.HDUs {
		if v, _ := h.Header.Get("ZIMAGE"); v.Value == true && what != "table" && strings.EqualFold(h.Name, name) {
			return nil, fmt.Errorf("%s: the image %s is tile-compressed, unpack it with funpack first", f.Name, name)
		}
	}
	list := "it has none"
	if len(have) > 0 {
		list = "it has " + strings.Join(have, ", ")
	}
	if name == "" {
		return nil, fmt.Errorf("%s: has no %s", f.Name, what)
	}
	return nil, fmt.Errorf("%s: no %s named %s; %s%s", f.Name, what, name, list, strict.Hint(name, have))
}

func (h *HDU) label(i int) string {
	if h.Name != "" {
		return h.Name
	}
	return strconv.Itoa(i)
}

// IsImage reports whether the HDU holds pixels.
func (h *HDU) IsImage() bool { return h.Kind == "IMAGE" && h.elements() > 0 }

func (h *HDU) elements() int {
	if len(h.Axes) == 0 {
		return 0
	}
	n := 1
	for _, a := range h.Axes {
		n *= a
	}
	return n
}

// where names an HDU in messages.
func (f *File) where(h *HDU) string {
	for i := range f.HDUs {
		if f.HDUs[i] == h {
			return f.Name + "[" + h.label(i) + "]"
		}
	}
	return f.Name
}

// scaling returns BSCALE, BZERO and BLANK.
func (h *HDU) scaling() (scale, zero float64, blank int, hasBlank bool) {
	scale = 1
	if v, ok := h.Header.Float("BSCALE"); ok {
		scale = v
	}
	if v, ok := h.Header.Float("BZERO"); ok {
		zero = v
	}
	blank, hasBlank = h.Header.Int("BLANK")
	return scale, zero, blank, hasBlank && h.bitpix > 0
}

// An Image is a two-dimensional image, x fastest. Data has NaN where a pixel
// is blank. Integer pixels of up to 32 bits that are neither scaled nor blank
// are given in Ints as well.
type Image struct {
	Name   string
	Header Header
	Axes   [2]int
	Data   []float32
	Ints   []int32
}

// FindImage returns the image HDU of that name without case, or that number in
// the file; the empty name is the first image.
func (f *File) FindImage(name string) (*HDU, error) {
	return f.find("image", name, (*HDU).IsImage)
}

// Image reads a two-dimensional image by its name without case, or its number
// in the file; the empty name is the first image.
func (f *File) Image(name string) (*Image, error) {
	h, err := f.FindImage(name)
	if err != nil {
		return nil, err
	}
	return f.ReadImage(h)
}

// ReadImage reads the pixels of an image HDU of two axes (more, if the others
// have length 1).
func (f *File) ReadImage(h *HDU) (img *Image, err error) {
	n := h.elements()
	if h.Kind != "IMAGE" || len(h.Axes) < 2 || n == 0 || h.Axes[0]*h.Axes[1] != n {
		return nil, fmt.Errorf("%s: not a two-dimensional image (%s)", f.where(h), dims(h.Axes))
	}
	defer func() {
		if p := recover(); p != nil {
			img, err = nil, fmt.Errorf("%s: cannot read the image: %v", f.where(h), p)
		}
	}()
	// The foreign header stays out of fitsio, which trips over legal cards; it
	// gets one that says no more than the checked sizes.
	head := Header{
		{"XTENSION", "IMAGE", ""}, {"BITPIX", h.bitpix, ""}, {"NAXIS", 2, ""},
		{"NAXIS1", h.Axes[0], ""}, {"NAXIS2", h.Axes[1], ""}, {"PCOUNT", 0, ""}, {"GCOUNT", 1, ""},
	}
	size := int64(n) * int64(max(h.bitpix, -h.bitpix)/8)
	pad := make([]byte, (blockSize-size%blockSize)%blockSize)
	hdu, err := fitsio.NewDecoder(io.MultiReader(bytes.NewReader(head.encode()),
		io.NewSectionReader(f.r, h.start, size), bytes.NewReader(pad))).DecodeHDU()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", f.where(h), err)
	}
	src := hdu.(fitsio.Image)
	img = &Image{Name: h.Name, Header: h.Header, Axes: [2]int{h.Axes[0], h.Axes[1]}, Data: make([]float32, n)}
	scale, zero, _, hasBlank := h.scaling()
	plain := scale == 1 && zero == 0
	if h.bitpix == -32 && plain {
		return img, src.Read(&img.Data)
	}
	h.decode(src.Raw(), img.Data)
	if h.bitpix == 32 && plain && !hasBlank {
		img.Ints = make([]int32, n)
		return img, src.Read(&img.Ints)
	}
	if (h.bitpix == 8 || h.bitpix == 16) && plain && !hasBlank {
		img.Ints = make([]int32, n)
		for i, v := range img.Data {
			img.Ints[i] = int32(v)
		}
	}
	return img, nil
}

// decode turns raw pixels into numbers: BZERO + BSCALE * stored, NaN for BLANK.
func (h *HDU) decode(raw []byte, dst []float32) {
	scale, zero, blank, hasBlank := h.scaling()
	plain := scale == 1 && zero == 0
	be := binary.BigEndian
	if h.bitpix == -32 && plain {
		for i := range dst {
			dst[i] = math.Float32frombits(be.Uint32(raw[4*i:]))
		}
		return
	}
	for i := range dst {
		var v float64
		var stored int64
		switch h.bitpix {
		case 8:
			stored = int64(raw[i])
		case 16:
			stored = int64(int16(be.Uint16(raw[2*i:])))
		case 32:
			stored = int64(int32(be.Uint32(raw[4*i:])))
		case 64:
			stored = int64(be.Uint64(raw[8*i:]))
		case -32:
			v = float64(math.Float32frombits(be.Uint32(raw[4*i:])))
		case -64:
			v = math.Float64frombits(be.Uint64(raw[8*i:]))
		}
		if h.bitpix > 0 {
			v = float64(stored)
			if hasBlank && stored == int64(blank) {
				v = math.NaN()
			}
		}
		dst[i] = float32(float64(scale*v) + zero)
	}
}

// A Cube is an image of two axes or more, read one plane at a time.
type Cube struct {
	Name   string
	Header Header
	Axes   []int
	file   *File
	hdu    *HDU
	raw    []byte
}

// Cube opens an image by its name without case, or its number in the file; the
// empty name is the first image.
func (f *File) Cube(name string) (*Cube, error) {
	h, err := f.FindImage(name)
	if err != nil {
		return nil, err
	}
	if len(h.Axes) < 2 {
		return nil, fmt.Errorf("%s: has one axis, a cube has two or more", f.where(h))
	}
	return &Cube{Name: h.Name, Header: h.Header, Axes: h.Axes, file: f, hdu: h}, nil
}

// Planes returns the number of planes.
func (c *Cube) Planes() int {
	n := 1
	for _, a := range c.Axes[2:] {
		n *= a
	}
	return n
}

// ReadPlane reads plane i, in file order from 0, into dst of Axes[0] * Axes[1]
// pixels; scaled integers are turned into numbers, BLANK into NaN. It is not
// safe for concurrent use.
func (c *Cube) ReadPlane(i int, dst []float32) error {
	n := c.Axes[0] * c.Axes[1]
	if len(dst) != n || i < 0 || i >= c.Planes() {
		panic("fits: plane out of range or buffer of the wrong size")
	}
	size := n * max(c.hdu.bitpix, -c.hdu.bitpix) / 8
	if c.raw == nil {
		c.raw = make([]byte, size)
	}
	if k, err := c.file.r.ReadAt(c.raw, c.hdu.start+int64(i)*int64(size)); k < size {
		return fmt.Errorf("%s: plane %d: %w", c.file.where(c.hdu), i, err)
	}
	c.hdu.decode(c.raw, dst)
	return nil
}

// Rows is a binary table open for reading by row.
type Rows struct {
	Name    string
	Header  Header
	Columns []Column // Data is nil
	Len     int

	file   *File
	hdu    *HDU
	layout []cell
	row    []byte
	at     int // the row in row, -1: none
}

type cell struct {
	offset, repeat, width int
	kind                  byte
	scale, zero           float64
}

// Rows opens a table by its name without case, or its number in the file; the
// empty name is the first table.
func (f *File) Rows(name string) (*Rows, error) {
	h, err := f.find("table", name, func(h *HDU) bool { return h.Kind == "BINTABLE" })
	if err != nil {
		return nil, err
	}
	r := &Rows{Name: h.Name, Header: h.Header, file: f, hdu: h, at: -1}
	fail := func(format string, args ...any) (*Rows, error) {
		return nil, fmt.Errorf("%s: "+format, append([]any{f.where(h)}, args...)...)
	}
	fields, ok := h.Header.Int("TFIELDS")
	if !ok || fields < 0 || fields > 999 || len(h.Axes) != 2 || h.bitpix != 8 {
		return fail("not a legal binary table")
	}
	width := h.Axes[0]
	if r.Len = h.Axes[1]; width == 0 && r.Len > 0 {
		return fail("rows without bytes")
	}
	// Looked up once: a search for every column is quadratic.
	index := map[string]any{}
	about := map[string]string{}
	for _, c := range h.Header {
		if _, dup := index[c.Key]; !dup {
			index[c.Key], about[c.Key] = c.Value, c.Comment
		}
	}
	float := func(key string, value float64) float64 {
		switch v := index[key].(type) {
		case float64:
			return v
		case int:
			return float64(v)
		}
		return value
	}
	offset := 0
	for i := range fields {
		k := strconv.Itoa(i + 1)
		var c Column
		c.Name, _ = index["TTYPE"+k].(string)
		c.About = about["TTYPE"+k]
		c.Unit, _ = index["TUNIT"+k].(string)
		c.Form, _ = index["TFORM"+k].(string)
		c.Form = strings.TrimSpace(c.Form)
		repeat, kind, n := form(c.Form)
		if n < 0 || n > width-offset {
			return fail("column %s: form %q is unknown or does not fit the %d bytes of a row", k, c.Form, width)
		}
		r.Columns = append(r.Columns, c)
		r.layout = append(r.layout, cell{offset, repeat, n, kind, float("TSCAL"+k, 1), float("TZERO"+k, 0)})
		offset += n
	}
	return r, nil
}

// Column returns the number of the column of that name, without case.
func (r *Rows) Column(name string) (int, error) {
	names := make([]string, len(r.Columns))
	for i := range r.Columns {
		if strings.EqualFold(r.Columns[i].Name, name) {
			return i, nil
		}
		names[i] = r.Columns[i].Name
	}
	return 0, fmt.Errorf("%s: no column %s; it has %s", r.file.where(r.hdu), name, strings.Join(names, ", "))
}

// load makes row i current.
func (r *Rows) load(i int) error {
	if i == r.at {
		return nil
	}
	if i < 0 || i >= r.Len {
		panic("fits: row out of range")
	}
	if r.row == nil {
		r.row = make([]byte, r.hdu.Axes[0])
	}
	r.at = -1
	if n, err := r.file.r.ReadAt(r.row, r.hdu.start+int64(i)*int64(len(r.row))); n < len(r.row) {
		return fmt.Errorf("%s: row %d: %w", r.file.where(r.hdu), i, err)
	}
	r.at = i
	return nil
}

// Int returns a scalar integer cell.
func (r *Rows) Int(row, column int) (int64, error) {
	if err := r.load(row); err != nil {
		return 0, err
	}
	l := &r.layout[column]
	v, ok := l.integer(r.row)
	if !ok || l.repeat != 1 || l.scale != 1 || l.zero != 0 {
		return 0, r.mismatch(column, "an integer")
	}
	return v, nil
}

// Float32s reads a cell of float32 into dst, which is grown as needed.
func (r *Rows) Float32s(row, column int, dst []float32) ([]float32, error) {
	if err := r.load(row); err != nil {
		return nil, err
	}
	l := &r.layout[column]
	if l.kind != 'E' || l.scale != 1 || l.zero != 0 {
		return nil, r.mismatch(column, "float32")
	}
	return l.float32s(r.row, dst[:0]), nil
}

func (r *Rows) mismatch(column int, want string) error {
	c := &r.Columns[column]
	return fmt.Errorf("%s: column %s has the form %s, not %s", r.file.where(r.hdu), c.Name, c.Form, want)
}

func (l *cell) float32s(row []byte, dst []float32) []float32 {
	for i := range l.repeat {
		dst = append(dst, math.Float32frombits(binary.BigEndian.Uint32(row[l.offset+4*i:])))
	}
	return dst
}

func (l *cell) integer(row []byte) (int64, bool) {
	if l.repeat < 1 {
		return 0, false
	}
	b := row[l.offset:]
	switch l.kind {
	case 'B':
		return int64(b[0]), true
	case 'L':
		if b[0] == 'T' {
			return 1, true
		}
		return 0, true
	case 'I':
		return int64(int16(binary.BigEndian.Uint16(b))), true
	case 'J':
		return int64(int32(binary.BigEndian.Uint32(b))), true
	case 'K':
		return int64(binary.BigEndian.Uint64(b)), true
	}
	return 0, false
}

// number returns a scalar cell with TSCAL and TZERO applied.
func (l *cell) number(row []byte) float64 {
	v, ok := l.integer(row)
	x := float64(v)
	if !ok {
		switch l.kind {
		case 'E':
			x = float64(math.Float32frombits(binary.BigEndian.Uint32(row[l.offset:])))
		case 'D':
			x = math.Float64frombits(binary.BigEndian.Uint64(row[l.offset:]))
		}
	}
	return float64(x*l.scale) + l.zero
}

// Table reads a whole table by its name without case, or its number in the
// file. Columns of L, B and I are given as []int32, scaled integers as []float64.
func (f *File) Table(name string) (*Table, error) {
	r, err := f.Rows(name)
	if err != nil {
		return nil, err
	}
	t := &Table{Name: r.Name, Header: r.Header, Columns: r.Columns, file: f.where(r.hdu)}
	for j := range t.Columns {
		t.Columns[j].Data = r.layout[j].empty(r.Len)
	}
	for i := range r.Len {
		if err := r.load(i); err != nil {
			return nil, err
		}
		for j := range t.Columns {
			l := &r.layout[j]
			switch d := t.Columns[j].Data.(type) {
			case []float64:
				d[i] = l.number(r.row)
			case []float32:
				d[i] = math.Float32frombits(binary.BigEndian.Uint32(r.row[l.offset:]))
			case []int64:
				d[i], _ = l.integer(r.row)
			case []int32:
				v, _ := l.integer(r.row)
				d[i] = int32(v)
			case []string:
				text, _, _ := bytes.Cut(r.row[l.offset:l.offset+l.width], []byte{0})
				d[i] = string(bytes.TrimRight(text, " "))
			case [][]float32:
				d[i] = l.float32s(r.row, make([]float32, 0, l.repeat))
			case [][]byte:
				d[i] = bytes.Clone(r.row[l.offset : l.offset+l.width])
			}
		}
	}
	return t, nil
}

// empty returns the slice that a column of n rows is read into; nil for forms
// that are not supported.
func (l *cell) empty(n int) any {
	plain := l.scale == 1 && l.zero == 0
	switch {
	case l.repeat == 0:
		return nil
	case l.kind == 'A':
		return make([]string, n)
	case l.kind == 'E' && l.repeat > 1 && plain:
		return make([][]float32, n)
	case l.kind == 'B' && l.repeat > 1 && plain:
		return make([][]byte, n)
	case l.repeat > 1:
		return nil
	case l.kind == 'L':
		return make([]int32, n)
	case l.kind == 'D', !plain && strings.ContainsRune("BIJKE", rune(l.kind)):
		return make([]float64, n)
	case l.kind == 'E':
		return make([]float32, n)
	case l.kind == 'K':
		return make([]int64, n)
	case strings.ContainsRune("BIJ", rune(l.kind)):
		return make([]int32, n)
	}
	return nil
}

func (t *Table) column(name string) (*Column, error) {
	names := make([]string, len(t.Columns))
	for i := range t.Columns {
		if strings.EqualFold(t.Columns[i].Name, name) {
			return &t.Columns[i], nil
		}
		names[i] = t.Columns[i].Name
	}
	return nil, fmt.Errorf("%s: no column %s; it has %s", t.file, name, strings.Join(names, ", "))
}

func (t *Table) mismatch(c *Column, want string) error {
	return fmt.Errorf("%s: column %s has the form %s, not %s", t.file, c.Name, c.Form, want)
}

// Floats returns a numeric column of one number a row.
func (t *Table) Floats(name string) ([]float64, error) {
	c, err := t.column(name)
	if err != nil {
		return nil, err
	}
	switch d := c.Data.(type) {
	case []float64:
		return d, nil
	case []float32:
		return convert[float64](d), nil
	case []int64:
		return convert[float64](d), nil
	case []int32:
		return convert[float64](d), nil
	}
	return nil, t.mismatch(c, "one number a row")
}

// Unit returns the unit of a column; empty if there is none.
func (t *Table) Unit(name string) string {
	c, err := t.column(name)
	if err != nil {
		return ""
	}
	return c.Unit
}

// Ints returns an integer column of one number a row.
func (t *Table) Ints(name string) ([]int64, error) {
	c, err := t.column(name)
	if err != nil {
		return nil, err
	}
	switch d := c.Data.(type) {
	case []int64:
		return d, nil
	case []int32:
		return convert[int64](d), nil
	}
	return nil, t.mismatch(c, "one integer a row")
}

// Strings returns a column of text.
func (t *Table) Strings(name string) ([]string, error) {
	c, err := t.column(name)
	if err != nil {
		return nil, err
	}
	if d, ok := c.Data.([]string); ok {
		return d, nil
	}
	return nil, t.mismatch(c, "text")
}

// Bytes returns the cell of a column of bytes in that row.
func (t *Table) Bytes(name string, row int) ([]byte, error) {
	c, err := t.column(name)
	if err != nil {
		return nil, err
	}
	if d, ok := c.Data.([][]byte); ok && row < len(d) {
		return d[row], nil
	}
	if d, ok := c.Data.([]int32); ok && row < len(d) && strings.HasSuffix(c.Form, "B") {
		return []byte{byte(d[row])}, nil
	}
	return nil, t.mismatch(c, "bytes")
}

func convert[T, S int32 | int64 | float32 | float64](s []S) []T {
	out := make([]T, len(s))
	for i, v := range s {
		out[i] = T(v)
	}
	return out
}
