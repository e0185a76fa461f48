// Package fits reads and writes the FITS files of the program: images with
// full headers, cubes streamed a plane at a time and binary tables, each with
// CHECKSUM and DATASUM.
//
// Two-dimensional images pass through github.com/astrogo/fitsio; this package
// guards it (structural cards, header values, panics, sizes) and adds what it
// lacks: valid binary tables, checksums, streaming. The standard is FITS 4.0
// (2018).
//
// The bytes written are a function of the arguments, and of the environment
// variable SOURCE_DATE_EPOCH if it is set: only then a DATE card is written.
package fits

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"time"

	"github.com/astrogo/fitsio"
)

// quietNaN is the one pattern of NaN in files: processors disagree about the
// sign of the NaN they make.
const (
	quietNaN32 = 0x7fc00000
	quietNaN64 = 0x7ff8000000000000
)

// A Writer writes one file under a temporary name (the path with .part after
// it) that Close renames. HDUs are written in the order of the calls. The
// first error sticks: later calls do nothing and Close returns it.
type Writer struct {
	path  string
	file  *os.File
	buf   *bufio.Writer
	pos   int64
	names map[string]bool
	open  *body   // streamed HDU not yet closed
	kept  []*body // those whose data come in any order
	err   error
}

// Create starts a file with an empty primary HDU of the given cards.
func Create(path string, primary Header) (*Writer, error) {
	file, err := os.Create(path + ".part")
	if err != nil {
		return nil, err
	}
	w := &Writer{path: path, file: file, buf: bufio.NewWriterSize(file, 1<<18), names: map[string]bool{"PRIMARY": true}}
	if err := w.primary(primary); err != nil {
		w.Abort()
		return nil, fmt.Errorf("%s: primary header: %w", path, err)
	}
	return w, nil
}

func (w *Writer) primary(cards Header) error {
	cards, err := cards.check()
	if err != nil {
		return err
	}
	h := Header{
		{"SIMPLE", true, "FITS 4.0"},
		{"BITPIX", 8, ""},
		{"NAXIS", 0, "no pixels here, see the extensions"},
		{"EXTEND", true, ""},
	}
	if _, ok := cards.Get("LONGSTRN"); !ok {
		h = append(h, Card{"LONGSTRN", "OGIP 1.0", "long strings use CONTINUE"})
	}
	if _, ok := cards.Get("DATE"); !ok {
		if epoch := os.Getenv("SOURCE_DATE_EPOCH"); epoch != "" {
			s, err := strconv.ParseInt(epoch, 10, 64)
			if err != nil || s < 0 || s > 253402300799 {
				return fmt.Errorf("SOURCE_DATE_EPOCH=%s: must be whole seconds since 1970-01-01", epoch)
			}
			h = append(h, Card{"DATE", time.Unix(s, 0).UTC().Format("2006-01-02T15:04:05"), "UTC"})
		}
	}
	b, err := w.begin(append(h, cards...))
	if err != nil {
		return err
	}
	return b.end()
}

// Close finishes the file and gives it its name; after an error it removes
// the temporary file and returns the error.
func (w *Writer) Close() error {
	if w.file == nil {
		return w.err
	}
	if w.err == nil && w.open != nil {
		w.err = w.fail(w.open.name, w.open.unfinished())
	}
	for _, b := range w.kept {
		if w.err == nil && b.left != 0 {
			w.err = w.fail(b.name, b.unfinished())
		}
	}
	err := w.buf.Flush()
	if e := w.file.Close(); err == nil {
		err = e
	}
	w.file = nil
	if w.err == nil && err == nil {
		err = os.Rename(w.path+".part", w.path)
	}
	if w.err == nil && err != nil {
		w.err = fmt.Errorf("%s: %w", w.path, err)
	}
	if w.err != nil {
		os.Remove(w.path + ".part")
	}
	return w.err
}

// Abort removes the temporary file; after Close it does nothing.
func (w *Writer) Abort() {
	if w.file == nil {
		return
	}
	w.file.Close()
	w.file = nil
	os.Remove(w.path + ".part")
	if w.err == nil {
		w.err = fmt.Errorf("%s: writing was given up", w.path)
	}
}

// next checks that an HDU of that name may start.
func (w *Writer) next(name string) error {
	if w.err != nil {
		return w.err
	}
	if w.file == nil {
		return errors.New("the file is closed")
	}
	if w.open != nil {
		return fmt.Errorf("begun too early: %w", w.open.unfinished())
	}
	if name == "" || name != strings.ToUpper(name) || len(name) > 68 || strings.ContainsAny(name, "' ") || printable("EXTNAME", name) != nil {
		return fmt.Errorf("extension name %q: must be upper-case ASCII without blanks or quotes", name)
	}
	if w.names[name] {
		return fmt.Errorf("extension name %s: given twice", name)
	}
	w.names[name] = true
	return nil
}

// fail makes an error stick, naming file and HDU.
func (w *Writer) fail(name string, err error) error {
	if err != nil && w.err == nil {
		w.err = fmt.Errorf("%s[%s]: %w", w.path, name, err)
	}
	return w.err
}

// A body is an HDU being written by our own code: the header holds
// placeholders until the sums of the streamed data are known.
type body struct {
	w      *Writer
	name   string
	header Header
	start  int64
	from   int64 // of the data
	data   sum
	left   int64 // bytes of data to come
	total  int64
}

func (w *Writer) begin(h Header) (*body, error) {
	h = append(h, Card{"CHECKSUM", "0000000000000000", "of the HDU"}, Card{"DATASUM", "0000000000", "of the data"})
	b := &body{w: w, header: h, start: w.pos}
	n, err := w.buf.Write(h.encode())
	w.pos += int64(n)
	b.from = w.pos
	return b, err
}

func (b *body) unfinished() error {
	return fmt.Errorf("%s has only %d of its %d bytes of data", b.name, b.total-b.left, b.total)
}

// Write adds data bytes.
func (b *body) Write(p []byte) (int, error) {
	n, err := b.w.buf.Write(p)
	b.data.Write(p[:n])
	b.w.pos += int64(n)
	b.left -= int64(n)
	return n, err
}

// end pads the data and finishes the HDU.
func (b *body) end() error {
	if b.left != 0 {
		return b.unfinished()
	}
	w := b.w
	if r := w.pos % blockSize; r != 0 {
		if _, err := b.Write(make([]byte, blockSize-r)); err != nil {
			return err
		}
		b.left = 0
	}
	w.open = nil
	return b.sums()
}

// sums fills in the sums of the data and writes the header again.
func (b *body) sums() error {
	w := b.w
	data := b.data.value()
	b.header.Set("DATASUM", strconv.FormatUint(uint64(data), 10), "of the data")
	var total sum
	total.Write(b.header.encode())
	total.acc += uint64(data)
	b.header.Set("CHECKSUM", encodeChecksum(total.value()), "of the HDU")
	if err := w.buf.Flush(); err != nil {
		return err
	}
	_, err := w.file.WriteAt(b.header.encode(), b.start)
	return err
}

// Pixels are what images hold.
type Pixels interface{ []float32 | []int32 }

// AddImage writes a two-dimensional image extension, x fastest: axes are
// NAXIS1, NAXIS2. NaN marks a pixel without a value.
func AddImage[P Pixels](w *Writer, name string, header Header, axes [2]int, data P) error {
	if err := w.next(name); err != nil {
		return w.fail(name, err)
	}
	return w.fail(name, w.image(name, header, axes, data))
}

func (w *Writer) image(name string, header Header, axes [2]int, data any) (err error) {
	// fitsio panics on what it does not expect.
	defer func() {
		if p := recover(); p != nil {
			err = fmt.Errorf("cannot write the image: %v", p)
		}
	}()
	bitpix, count := -32, 0
	switch d := data.(type) {
	case []float32:
		count = len(d)
	case []int32:
		bitpix, count = 32, len(d)
	}
	if axes[0] < 1 || axes[1] < 1 || axes[0] > math.MaxInt32 || axes[1] > math.MaxInt32 || axes[0]*axes[1] != count {
		return fmt.Errorf("%d pixels for an image of %d x %d", count, axes[0], axes[1])
	}
	if header, err = header.check(); err != nil {
		return err
	}
	img := fitsio.NewImage(bitpix, axes[:])
	if err := img.Write(data); err != nil {
		return err
	}
	raw := img.Raw()
	if bitpix < 0 {
		for i := 0; i < len(raw); i += 4 {
			if v := math.Float32frombits(binary.BigEndian.Uint32(raw[i:])); v != v {
				binary.BigEndian.PutUint32(raw[i:], quietNaN32)
			}
		}
	}
	var data32 sum
	data32.Write(raw)

	// The header that NewImage made has no PCOUNT and GCOUNT and begins with
	// BITPIX; all cards are given again in the order that the standard asks for.
	h := Header{
		{"XTENSION", "IMAGE", "image extension"},
		{"BITPIX", bitpix, ""}, {"NAXIS", 2, ""}, {"NAXIS1", axes[0], ""}, {"NAXIS2", axes[1], ""},
		{"PCOUNT", 0, ""}, {"GCOUNT", 1, ""}, {"EXTNAME", name, ""},
	}
	h = append(h, header...)
	h = append(h, Card{"DATASUM", strconv.FormatUint(uint64(data32.value()), 10), "of the data"}, Card{"CHECKSUM", "0000000000000000", "of the HDU"})
	img.Header().Clear()
	for _, c := range h {
		card, err := guard(c)
		if err != nil {
			return err
		}
		if err := img.Header().Append(card); err != nil {
			return err
		}
	}
	var total sum
	if err := fitsio.NewEncoder(&total).EncodeHDU(img); err != nil {
		return err
	}
	img.Header().Set("CHECKSUM", encodeChecksum(total.value()), "of the HDU")
	return fitsio.NewEncoder(countWriter{w}).EncodeHDU(img)
}

type countWriter struct{ w *Writer }

func (c countWriter) Write(p []byte) (int, error) {
	n, err := c.w.buf.Write(p)
	c.w.pos += int64(n)
	return n, err
}

// guard makes a checked card safe for fitsio, which drops the Value of
// commentary, does not double quotes and ends a long string of 67 n characters
// with a stray ampersand.
func guard(c Card) (fitsio.Card, error) {
	if commentary(c.Key) {
		text := c.Value.(string)
		if text == "" {
			text = " "
		}
		return fitsio.Card{Name: c.Key, Comment: text}, nil
	}
	text, ok := c.Value.(string)
	if !ok {
		return fitsio.Card{Name: c.Key, Value: c.Value, Comment: c.Comment}, nil
	}
	if long(value(text)) {
		if strings.Contains(text, "'") {
			return fitsio.Card{}, fmt.Errorf("header keyword %s: an apostrophe in a string longer than 67 characters; leave it out", c.Key)
		}
		if len(text)%67 == 0 {
			text += " "
		}
	} else {
		text = strings.ReplaceAll(text, "'", "''")
	}
	return fitsio.Card{Name: c.Key, Value: text, Comment: c.Comment}, nil
}

// A CubeWriter writes an image extension of any number of axes, one plane of
// the first two axes at a time.
type CubeWriter struct {
	body *body
	raw  []byte
}

// Cube starts a float32 image extension of the given axes, x first. Planes
// follow in file order, the third axis fastest.
func (w *Writer) Cube(name string, header Header, axes ...int) (*CubeWriter, error) {
	if err := w.next(name); err != nil {
		return nil, w.fail(name, err)
	}
	header, err := header.check()
	if err != nil {
		return nil, w.fail(name, err)
	}
	h := Header{{"XTENSION", "IMAGE", "image extension"}, {"BITPIX", -32, ""}, {"NAXIS", len(axes), ""}}
	size := int64(4)
	for i, n := range axes {
		if n < 1 || size > math.MaxInt64/blockSize/int64(n) {
			return nil, w.fail(name, fmt.Errorf("axes %v", axes))
		}
		size *= int64(n)
		h = append(h, Card{"NAXIS" + strconv.Itoa(i+1), n, ""})
	}
	if len(axes) < 2 {
		return nil, w.fail(name, fmt.Errorf("axes %v: a cube has at least two", axes))
	}
	h = append(h, Card{"PCOUNT", 0, ""}, Card{"GCOUNT", 1, ""}, Card{"EXTNAME", name, ""})
	b, err := w.begin(append(h, header...))
	if err != nil {
		return nil, w.fail(name, err)
	}
	b.name, b.left, b.total = name, size, size
	w.open = b
	return &CubeWriter{body: b, raw: make([]byte, 4*axes[0]*axes[1])}, nil
}

// Reserve is Cube for pixels that come in any order, by WriteAt; other HDUs may be
// written before them.
func (w *Writer) Reserve(name string, header Header, axes ...int) (*CubeWriter, error) {
	c, err := w.Cube(name, header, axes...)
	if err != nil {
		return nil, err
	}
	b := c.body
	w.open, w.kept = nil, append(w.kept, b)
	w.pos += (b.total + blockSize - 1) / blockSize * blockSize
	err = w.buf.Flush()
	if err == nil {
		err = w.file.Truncate(w.pos) // zeros, also for the padding
	}
	if err == nil {
		_, err = w.file.Seek(w.pos, io.SeekStart)
	}
	return c, w.fail(name, err)
}

// WriteAt writes pixels of a reserved cube from number i on, x fastest. Each pixel must be
// written once; after the last one the HDU is finished.
func (c *CubeWriter) WriteAt(pixels []float32, i int) error {
	b := c.body
	if b.w.err != nil {
		return b.w.err
	}
	size, at := 4*int64(len(pixels)), 4*int64(i)
	if i < 0 || at+size > b.total || size > b.left {
		return b.w.fail(b.name, fmt.Errorf("%d pixels from %d on are too many", len(pixels), i))
	}
	if len(c.raw) < int(size) {
		c.raw = make([]byte, size)
	}
	raw := c.raw[:size]
	encode(raw, pixels)
	b.data.Write(raw)
	b.left -= size
	_, err := b.w.file.WriteAt(raw, b.from+at)
	if err == nil && b.left == 0 {
		err = b.sums()
	}
	return b.w.fail(b.name, err)
}

func encode(raw []byte, pixels []float32) {
	for i, v := range pixels {
		bits := math.Float32bits(v)
		if v != v {
			bits = quietNaN32
		}
		binary.BigEndian.PutUint32(raw[4*i:], bits)
	}
}

// WritePlane writes the next plane, x fastest; after the last one the HDU is
// finished.
func (c *CubeWriter) WritePlane(plane []float32) error {
	b := c.body
	if b.w.err != nil {
		return b.w.err
	}
	if 4*len(plane) != len(c.raw) || b.left == 0 {
		return b.w.fail(b.name, fmt.Errorf("a plane of %d pixels too many or of the wrong size", len(plane)))
	}
	encode(c.raw, plane)
	_, err := b.Write(c.raw)
	if err == nil && b.left == 0 {
		err = b.end()
	}
	return b.w.fail(b.name, err)
}
