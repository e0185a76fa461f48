package fits

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"
)

var (
	nan = float32(math.NaN())
	inf = float32(math.Inf(1))

	sampleTable = Table{Name: "TAB", Header: Header{{"NOTE", "x", ""}}, Columns: []Column{
		{Name: "d", Unit: "s", About: "time", Data: []float64{1, math.NaN()}, Form: "D"},
		{Name: "e", Unit: "km/s", Data: []float32{1, nan}, Form: "E"},
		{Name: "k", Data: []int64{math.MinInt64, math.MaxInt64}, Form: "K"},
		{Name: "j", Data: []int32{-1, 5}, Form: "J"},
		{Name: "a", Data: []string{"ab", "abcde"}, Form: "5A"},
		{Name: "v", Data: [][]float32{{1, 2, 3}, {4, nan, 6}}, Form: "3E"},
	}}
	sampleBlob = []byte("a: 1\nµ: 2\x00\xff\n")
	sampleVel  = []float32{1, nan, -3, inf, 1e-40, 0}
	sampleFlag = []int32{0, -1, math.MaxInt32, math.MinInt32}
)

const letters = "abcdefghijklmnopqrstuvwxyz abcdefghijklmnopqrstuvwxyz abcdefghijkl" // 66

// sample writes a file with one of everything.
func sample(t testing.TB, path string) {
	t.Helper()
	w, err := Create(path, Header{
		{"ORIGIN", "nowhere", "who"},
		{"AUTHOR", "it's me", ""},
		{"SCENSHA", strings.Repeat("0123456789abcdef", 4), "SHA-256 of the scenario"},
		{"SEED", 7, ""},
		{"LONGTEXT", "a long string that is doubled: it's " + letters + "'" + letters, "with a comment"},
		{"HISTORY", "made by a test " + letters, ""},
	})
	if err != nil {
		t.Fatal(err)
	}
	h := Header{
		{"BTYPE", "Doppler velocity", "for people"}, {"BUNIT", "km/s", ""}, {"COMMENT", "short", ""},
		{"X", 0.1, "a comment that is far too long to fit into the card that it belongs to, so it moves"},
		{"Y", -1.2345678901234567e-300, ""},
		{"LONGTEXT", letters + letters + "ab", ""}, // 134 = 2 * 67: a trap of the encoder
		{"QUOTED", "it's 'so'", ""},
	}
	AddImage(w, "VEL", h, [2]int{3, 2}, sampleVel)
	AddImage(w, "FLAG", nil, [2]int{2, 2}, sampleFlag)
	c, err := w.Cube("CUBE", Header{{"LONGTEXT", letters + "a", ""}}, 2, 3, 4)
	if err != nil {
		t.Fatal(err)
	}
	for k := range 4 {
		c.WritePlane(samplePlane(k))
	}
	w.AddTable(sampleTable)
	w.AddTable(Table{Name: "BLOB", Columns: []Column{{Name: "yaml", Data: [][]byte{sampleBlob}}}})
	w.AddTable(Table{Name: "EMPTY", Columns: []Column{{Name: "x", Data: []float64{}}}})
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
}

func samplePlane(k int) []float32 {
	p := make([]float32, 6)
	for i := range p {
		p[i] = float32(k) + float32(i)/8
	}
	p[5] = nan
	return p
}

func open(t testing.TB, path string) *File {
	t.Helper()
	f, err := Open(path)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return f
}

func TestReadBack(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.fits")
	sample(t, path)
	f := open(t, path)

	vel, err := f.Image("vel")
	if err != nil {
		t.Fatal(err)
	}
	check(t, "VEL", vel.Data, sampleVel)
	check(t, "axes", vel.Axes, [2]int{3, 2})
	for key, want := range map[string]any{
		"BTYPE": "Doppler velocity", "BUNIT": "km/s", "X": 0.1, "Y": -1.2345678901234567e-300,
		"LONGTEXT": letters + letters + "ab", "QUOTED": "it's 'so'", "NAXIS1": 3, "COMMENT": "short",
	} {
		c, _ := vel.Header.Get(key)
		// A string of 67 n characters is followed by a blank, see guard.
		if s, ok := c.Value.(string); ok {
			c.Value = strings.TrimRight(s, " ")
		}
		check(t, key, c.Value, want)
	}
	check(t, "comment", func() string { c, _ := vel.Header.Get("BTYPE"); return c.Comment }(), "for people")

	flag, err := f.Image("2") // by number
	if err != nil {
		t.Fatal(err)
	}
	check(t, "FLAG", flag.Ints, sampleFlag)

	first, err := f.Image("")
	if err != nil || first.Name != "VEL" {
		t.Errorf("first image is %v, %v", first, err)
	}

	c, err := f.Cube("CUBE")
	if err != nil {
		t.Fatal(err)
	}
	check(t, "planes", c.Planes(), 4)
	for _, k := range []int{3, 0, 2, 1} {
		p := make([]float32, 6)
		if err := c.ReadPlane(k, p); err != nil {
			t.Fatal(err)
		}
		check(t, "CUBE", p, samplePlane(k))
	}

	tab, err := f.Table("TAB")
	if err != nil {
		t.Fatal(err)
	}
	check(t, "TAB", tab.Columns, sampleTable.Columns)
	note, _ := tab.Header.Text("NOTE")
	check(t, "NOTE", note, "x")

	blob, err := f.Table("BLOB")
	if err != nil {
		t.Fatal(err)
	}
	b, err := blob.Bytes("yaml", 0)
	check(t, "BLOB", b, sampleBlob)
	if err != nil {
		t.Error(err)
	}

	rows, err := f.Rows("TAB")
	if err != nil {
		t.Fatal(err)
	}
	j, err := rows.Int(1, 3)
	check(t, "row 1, j", j, int64(5))
	if err != nil {
		t.Error(err)
	}
	v, err := rows.Float32s(1, 5, nil)
	check(t, "row 1, v", v, []float32{4, nan, 6})
	if err != nil {
		t.Error(err)
	}

	primary := f.HDUs[0].Header
	long, _ := primary.Text("LONGTEXT")
	check(t, "primary LONGTEXT", long, "a long string that is doubled: it's "+letters+"'"+letters)
}

func check(t *testing.T, what string, got, want any) {
	t.Helper()
	if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("%s: %s", what, d)
	}
}

// Every header survives both encoders: ours (tables) and the one of the images.
func TestHeaderRoundTrip(t *testing.T) {
	dir := t.TempDir()
	values := rapid.OneOf(
		rapid.StringMatching(`[ -~]{0,200}`).AsAny(),
		rapid.Float64().Filter(func(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }).AsAny(),
		rapid.Int().AsAny(), rapid.Bool().AsAny())
	key := rapid.StringMatching(`[A-Z][A-Z0-9_-]{0,7}`).Filter(func(s string) bool { return !structural(s) && !commentary(s) && s != "BUNIT" })
	comment := rapid.StringMatching(`([!-~][ -~]{0,60}[!-~])?`)
	rapid.Check(t, func(t *rapid.T) {
		var h Header
		for _, k := range rapid.SliceOfNDistinct(key, 0, 8, rapid.ID).Draw(t, "keys") {
			h = append(h, Card{k, values.Draw(t, "value"), comment.Draw(t, "comment")})
		}
		path := filepath.Join(dir, "h.fits")
		w, err := Create(path, h)
		if err != nil {
			t.Fatal(err)
		}
		image := Header{}
		for _, c := range h {
			// The one thing that the image encoder cannot say.
			if s, ok := c.Value.(string); !ok || !long(value(s)) || !strings.Contains(s, "'") {
				image = append(image, c)
			}
		}
		AddImage(w, "I", image, [2]int{1, 1}, []float32{1})
		w.AddTable(Table{Name: "T", Header: h, Columns: []Column{{Name: "x", Data: []int32{1}}}})
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		f, err := Open(path)
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		for i, want := range []Header{h, image, h} {
			for _, c := range want {
				got, ok := f.HDUs[i].Header.Get(c.Key)
				a, b := got.Value, c.Value
				// Blanks at the end of a string do not count in FITS.
				if s, is := a.(string); is {
					a = strings.TrimRight(s, " ")
				}
				if s, is := b.(string); is {
					b = strings.TrimRight(s, " ")
				}
				if !ok || a != b {
					t.Fatalf("HDU %d: %s = %#v, want %#v", i, c.Key, got.Value, c.Value)
				}
				moved := fmt.Sprint(f.HDUs[i].Header)
				if got.Comment != c.Comment && (got.Comment != "" || !strings.Contains(moved, "COMMENT "+c.Key+": "+c.Comment[:1])) {
					t.Fatalf("HDU %d: %s: comment %q, want %q", i, c.Key, got.Comment, c.Comment)
				}
			}
		}
	})
}

// Pixels come back bit for bit, whatever they are; NaN as the one NaN of files.
func TestPixelsRoundTrip(t *testing.T) {
	dir := t.TempDir()
	rapid.Check(t, func(t *rapid.T) {
		nx, ny, nz := rapid.IntRange(1, 9).Draw(t, "nx"), rapid.IntRange(1, 9).Draw(t, "ny"), rapid.IntRange(1, 3).Draw(t, "nz")
		bits := rapid.SliceOfN(rapid.Uint32(), nx*ny*nz, nx*ny*nz).Draw(t, "bits")
		data := make([]float32, len(bits))
		ints := make([]int32, nx*ny)
		for i, b := range bits {
			data[i] = math.Float32frombits(b)
		}
		for i := range ints {
			ints[i] = int32(bits[i])
		}
		path := filepath.Join(dir, "p.fits")
		w, err := Create(path, nil)
		if err != nil {
			t.Fatal(err)
		}
		AddImage(w, "F", nil, [2]int{nx, ny}, data[:nx*ny])
		AddImage(w, "I", nil, [2]int{nx, ny}, ints)
		c, err := w.Cube("C", nil, nx, ny, nz)
		if err != nil {
			t.Fatal(err)
		}
		for k := range nz {
			c.WritePlane(data[k*nx*ny : (k+1)*nx*ny])
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		f, err := Open(path)
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		same := func(got, want []float32) {
			for i := range want {
				b := math.Float32bits(want[i])
				if want[i] != want[i] {
					b = quietNaN32
				}
				if math.Float32bits(got[i]) != b {
					t.Fatalf("pixel %d: %#x, want %#x", i, math.Float32bits(got[i]), b)
				}
			}
		}
		img, err := f.Image("F")
		if err != nil {
			t.Fatal(err)
		}
		same(img.Data, data[:nx*ny])
		img, err = f.Image("I")
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(ints, img.Ints); d != "" {
			t.Fatal(d)
		}
		cube, err := f.Cube("C")
		if err != nil {
			t.Fatal(err)
		}
		plane := make([]float32, nx*ny)
		for k := range nz {
			if err := cube.ReadPlane(k, plane); err != nil {
				t.Fatal(err)
			}
			same(plane, data[k*nx*ny:(k+1)*nx*ny])
		}
	})
}

// The words of an HDU with a CHECKSUM card sum to all ones; DATASUM is the sum
// of its data (FITS standard 4.0, appendix J). Summed here word by word in 64
// bits, reduced at the end: not the way of the code.
func TestChecksums(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.fits")
	sample(t, path)
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	f := open(t, path)
	add := func(b []byte) uint64 {
		s := uint64(0)
		for ; len(b) > 0; b = b[4:] {
			s += uint64(binary.BigEndian.Uint32(b))
		}
		for s > math.MaxUint32 {
			s = s%(1<<32) + s/(1<<32)
		}
		return s
	}
	start := int64(0)
	for i, h := range f.HDUs {
		end := h.start + (h.size+blockSize-1)/blockSize*blockSize
		if s := add(raw[start:end]); s != math.MaxUint32 {
			t.Errorf("HDU %d %s: sum %#x", i, h.Name, s)
		}
		text, _ := h.Header.Text("DATASUM")
		if want := strconv.FormatUint(add(raw[h.start:end]), 10); text != want {
			t.Errorf("HDU %d %s: DATASUM %s, want %s", i, h.Name, text, want)
		}
		start = end
	}
	if start != int64(len(raw)) {
		t.Errorf("HDUs end at %d of %d bytes", start, len(raw))
	}
	if err := f.Verify(); err != nil {
		t.Error(err)
	}
	for i, h := range f.HDUs {
		for key, at := range map[string]int64{"DATASUM": h.start + h.size - 1, "CHECKSUM": h.start - 1} {
			if key == "DATASUM" && h.size == 0 {
				continue
			}
			changed := bytes.Clone(raw)
			changed[at] ^= 1
			g, err := NewFile("x", bytes.NewReader(changed), int64(len(changed)))
			if err != nil {
				t.Fatal(err)
			}
			if err := g.Verify(); err == nil || !strings.Contains(err.Error(), "add up to "+key) {
				t.Errorf("HDU %d %s with one bit changed: %v", i, h.Name, err)
			}
		}
	}
}

// Pieces of any length give the sum of the whole.
func TestSumPieces(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := rapid.SliceOfN(rapid.Byte(), 0, 200).Draw(t, "bytes")
		b = b[:len(b)/4*4]
		var whole, parts sum
		whole.Write(b)
		for rest := b; len(rest) > 0; {
			n := rapid.IntRange(1, len(rest)).Draw(t, "n")
			parts.Write(rest[:n])
			rest = rest[n:]
		}
		if whole.value() != parts.value() {
			t.Fatalf("%#x in pieces, %#x at once", parts.value(), whole.value())
		}
	})
}

// The same input gives the same bytes, on every machine and in every version
// until this number is changed on purpose.
func TestSameBytes(t *testing.T) {
	t.Setenv("SOURCE_DATE_EPOCH", "1735689600")
	path := filepath.Join(t.TempDir(), "s.fits")
	sample(t, path)
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	h := sha256.Sum256(raw)
	if got := hex.EncodeToString(h[:]); got != sampleHash {
		t.Errorf("SHA-256 %s, want %s", got, sampleHash)
	}
	if date, _ := open(t, path).HDUs[0].Header.Text("DATE"); date != "2025-01-01T00:00:00" {
		t.Errorf("DATE %q", date)
	}
}

const sampleHash = "f5af43cc6eacf62b0d667f91cdce4733727dd7742a489dfef0dcb66da00b6e99"

func TestRefusals(t *testing.T) {
	pixel := []float32{1}
	one := [2]int{1, 1}
	for _, c := range []struct {
		name string
		do   func(w *Writer)
		want string
	}{
		{"NaN card", func(w *Writer) { AddImage(w, "A", Header{{"X", math.NaN(), ""}}, one, pixel) }, "[A]: header keyword X: NaN cannot"},
		{"infinite card", func(w *Writer) { AddImage(w, "A", Header{{"X", math.Inf(-1), ""}}, one, pixel) }, "[A]: header keyword X: -Inf cannot"},
		{"not ASCII", func(w *Writer) { AddImage(w, "A", Header{{"X", "µ", ""}}, one, pixel) }, `[A]: header keyword "X": "µ" holds`},
		{"comment not ASCII", func(w *Writer) { AddImage(w, "A", Header{{"X", 1, "µ"}}, one, pixel) }, `[A]: header keyword "X": "µ" holds`},
		{"lower case", func(w *Writer) { AddImage(w, "A", Header{{"x", 1, ""}}, one, pixel) }, `[A]: header keyword "x": must be 1 to 8 of A-Z`},
		{"too long", func(w *Writer) { AddImage(w, "A", Header{{"ABCDEFGHI", 1, ""}}, one, pixel) }, `[A]: header keyword "ABCDEFGHI": must be`},
		{"twice", func(w *Writer) { AddImage(w, "A", Header{{"X", 1, ""}, {"X", 2, ""}}, one, pixel) }, "[A]: header keyword X: given twice"},
		{"structural", func(w *Writer) { AddImage(w, "A", Header{{"NAXIS2", 1, ""}}, one, pixel) }, "[A]: header keyword NAXIS2 is set by the writer"},
		{"type", func(w *Writer) { AddImage(w, "A", Header{{"X", float32(1), ""}}, one, pixel) }, "[A]: header keyword X: cannot write a float32"},
		{"long and quoted", func(w *Writer) { AddImage(w, "A", Header{{"X", letters + "'s" + letters, ""}}, one, pixel) }, "[A]: header keyword X: an apostrophe"},
		{"pixels", func(w *Writer) { AddImage(w, "A", nil, [2]int{2, 1}, pixel) }, "[A]: 1 pixels for an image of 2 x 1"},
		{"name", func(w *Writer) { AddImage(w, "a", nil, one, pixel) }, `[a]: extension name "a": must be upper-case`},
		{"same name", func(w *Writer) { AddImage(w, "A", nil, one, pixel); AddImage(w, "A", nil, one, pixel) }, "[A]: extension name A: given twice"},
		{"short cube", func(w *Writer) { w.Cube("A", nil, 1, 1, 2) }, "[A]: A has only 0 of its 8 bytes of data"},
		{"early HDU", func(w *Writer) { w.Cube("A", nil, 1, 1, 2); AddImage(w, "B", nil, one, pixel) }, "[B]: begun too early: A has only"},
		{"long cube", func(w *Writer) { c, _ := w.Cube("A", nil, 1, 1, 1); c.WritePlane(pixel); c.WritePlane(pixel) }, "[A]: a plane of 1 pixels too many"},
		{"short reserve", func(w *Writer) {
			c, _ := w.Reserve("A", nil, 1, 1, 2)
			AddImage(w, "B", nil, one, pixel)
			c.WriteAt(pixel, 1)
		}, "[A]: A has only 4 of its 8 bytes of data"},
		{"beyond the reserve", func(w *Writer) { c, _ := w.Reserve("A", nil, 1, 1, 2); c.WriteAt(pixel, 2) }, "[A]: 1 pixels from 2 on are too many"},
		{"axes", func(w *Writer) { w.Cube("A", nil, math.MaxInt, math.MaxInt, 2) }, "[A]: axes ["},
		{"table BUNIT", func(w *Writer) {
			w.AddTable(Table{Name: "A", Header: Header{{"BUNIT", "G", ""}}, Columns: []Column{{Name: "x", Data: []int32{}}}})
		}, "[A]: header keyword BUNIT: not allowed"},
		{"uneven columns", func(w *Writer) {
			w.AddTable(Table{Name: "A", Columns: []Column{{Name: "x", Data: []int32{1}}, {Name: "y", Data: []int32{}}}})
		}, "[A]: column y has 0 rows, x has 1"},
		{"uneven vectors", func(w *Writer) {
			w.AddTable(Table{Name: "A", Columns: []Column{{Name: "x", Data: [][]float32{{1}, {1, 2}}}}})
		}, "[A]: column x: a []float32 does not fit the form 1E"},
		{"same column", func(w *Writer) {
			w.AddTable(Table{Name: "A", Columns: []Column{{Name: "x", Data: []int32{1}}, {Name: "X", Data: []int32{1}}}})
		}, `[A]: column 2: name "X" empty or given twice`},
		{"text not ASCII", func(w *Writer) { w.AddTable(Table{Name: "A", Columns: []Column{{Name: "x", Data: []string{"µ"}}}}) }, `[A]: column x: "µ" holds`},
	} {
		path := filepath.Join(t.TempDir(), "x.fits")
		w, err := Create(path, nil)
		if err != nil {
			t.Fatal(err)
		}
		c.do(w)
		if err = w.Close(); err == nil || !strings.HasPrefix(err.Error(), path+c.want) {
			t.Errorf("%s: %v, want %s", c.name, err, c.want)
		}
		left, _ := filepath.Glob(filepath.Join(filepath.Dir(path), "*"))
		if len(left) != 0 {
			t.Errorf("%s: left %v", c.name, left)
		}
	}
}

// Pixels of reserved cubes in any order give the bytes of planes in their order.
func TestReserve(t *testing.T) {
	dir := t.TempDir()
	var files [2][]byte
	axes := []int{5, 3, 2}
	pixels := make([]float32, 30)
	for i := range pixels {
		pixels[i] = float32(math.Sin(float64(i)))
	}
	pixels[7] = float32(math.NaN())
	for i, reserved := range []bool{false, true} {
		path := filepath.Join(dir, fmt.Sprint(i))
		w, err := Create(path, nil)
		if err != nil {
			t.Fatal(err)
		}
		begin := w.Cube
		if reserved {
			begin = w.Reserve
		}
		var last [2]*CubeWriter
		for j, name := range []string{"A", "B"} {
			if last[j], err = begin(name, Header{{"BUNIT", "G", ""}}, axes...); err != nil {
				t.Fatal(err)
			}
			for k := 0; !reserved && k < 30; k += 15 {
				err = errors.Join(err, last[j].WritePlane(pixels[k:k+15]))
			}
		}
		for _, at := range []int{20, 5, 0, 25, 10, 15} {
			for j := 1; reserved && j >= 0; j-- {
				err = errors.Join(err, last[j].WriteAt(pixels[at:at+5], at))
			}
		}
		if err := errors.Join(err, w.Close()); err != nil {
			t.Fatal(err)
		}
		files[i], _ = os.ReadFile(path)
	}
	if len(files[0]) == 0 || !bytes.Equal(files[0], files[1]) {
		t.Errorf("%d and %d bytes, not the same", len(files[0]), len(files[1]))
	}
}

func TestAbort(t *testing.T) {
	path := filepath.Join(t.TempDir(), "x.fits")
	if err := os.WriteFile(path, []byte("old"), 0o666); err != nil {
		t.Fatal(err)
	}
	w, err := Create(path, nil)
	if err != nil {
		t.Fatal(err)
	}
	w.Abort()
	if err := w.Close(); err == nil {
		t.Error("Close after Abort: no error")
	}
	left, _ := filepath.Glob(path + "*")
	raw, _ := os.ReadFile(path)
	if len(left) != 1 || string(raw) != "old" {
		t.Errorf("left %v, old file %q", left, raw)
	}
}

func TestOpenErrors(t *testing.T) {
	dir := t.TempDir()
	good := filepath.Join(dir, "good.fits")
	sample(t, good)
	raw, err := os.ReadFile(good)
	if err != nil {
		t.Fatal(err)
	}
	edit := func(key, card string) []byte {
		b := bytes.Clone(raw)
		i := bytes.Index(b, fmt.Appendf(nil, "%-8s=", key))
		copy(b[i:], fmt.Sprintf("%-80s", card))
		return b
	}
	cubeData := func() int { f := open(t, good); return int(f.HDUs[3].start) }()
	for _, c := range []struct {
		name string
		raw  []byte
		want string
	}{
		{"missing", nil, "file does not exist"},
		{"empty", []byte{}, "the file is empty"},
		{"text", []byte("hello"), "not a FITS file"},
		{"png", []byte("\x89PNG\r\n\x1a\n"), "not a FITS file"},
		{"gzip", []byte("\x1f\x8b\x08"), "is compressed, unpack it with gunzip first"},
		{"primary header cut", raw[:2000], "HDU 0: truncated: the header has no END"},
		{"second header cut", raw[:2*2880-80], "HDU 1: truncated: the header has no END"},
		{"cube data cut", raw[:cubeData+50], "HDU 3: truncated: 2 x 3 x 4 elements of -32 bits announced, 50 bytes left"},
		{"extension name cut", raw[:cubeData-2880+4], "HDU 3: truncated: the header has no END"},
		{"no BITPIX", edit("BITPIX", "COMMENT"), "HDU 0: BITPIX is missing"},
		{"odd BITPIX", edit("BITPIX", "BITPIX  = 7"), "HDU 0: BITPIX is missing or none of"},
		{"negative axis", edit("NAXIS1", "NAXIS1  = -3"), "HDU 1: NAXIS1 is missing or negative"},
		{"huge axis", edit("NAXIS1", "NAXIS1  = 9000000000000000000"), "HDU 1: truncated: 9000000000000000000 x 2 elements"},
		{"huge product", edit("NAXIS2", "NAXIS2  = 4611686018427387905"), "HDU 1: truncated: 3 x 4611686018427387905"},
		{"many axes", edit("NAXIS", "NAXIS   = 1000000000"), "HDU 0: NAXIS is missing or out of range"},
		{"huge heap", edit("PCOUNT", "PCOUNT  = 9000000000000000000"), "HDU 1: truncated"},
	} {
		path := filepath.Join(dir, "x.fits")
		os.Remove(path)
		if c.raw != nil {
			if err := os.WriteFile(path, c.raw, 0o666); err != nil {
				t.Fatal(err)
			}
		}
		_, err := Open(path)
		if err == nil || !strings.HasPrefix(err.Error(), path+": "+c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v, want %s", c.name, err, c.want)
		}
	}
	if _, err := Open(dir); err == nil || !strings.Contains(err.Error(), "not a regular file") {
		t.Errorf("folder: %v", err)
	}
	f := open(t, good)
	_, err = f.Image("B")
	check(t, "missing image", err.Error(), good+": no image named B; it has VEL, FLAG, CUBE")
	_, err = f.Table("B")
	check(t, "missing table", err.Error(), good+": no table named B; it has TAB, BLOB, EMPTY")
	_, err = f.Image("CUBE")
	check(t, "cube as image", err.Error(), good+"[CUBE]: not a two-dimensional image (2 x 3 x 4)")
	tab, err := f.Table("TAB")
	if err != nil {
		t.Fatal(err)
	}
	_, err = tab.Floats("zz")
	check(t, "missing column", err.Error(), good+"[TAB]: no column zz; it has d, e, k, j, a, v")
	_, err = tab.Floats("a")
	check(t, "text as number", err.Error(), good+"[TAB]: column a has the form 5A, not one number a row")
}

// foreign builds the bytes of a file by hand: cards as others write them.
func foreign(cards []string, data []byte) []byte {
	var b []byte
	for _, c := range append(cards, "END") {
		b = fmt.Appendf(b, "%-80s", c)
	}
	pad := func() {
		for len(b)%blockSize != 0 {
			b = append(b, ' ')
		}
	}
	pad()
	b = append(b, data...)
	pad()
	return b
}

// Images of others: every pixel type, scaled, blank, in the primary HDU, with
// cards that only a person could read.
func TestForeignImages(t *testing.T) {
	be := binary.BigEndian
	for _, c := range []struct {
		name string
		card []string
		data []byte
		want []float32
		ints []int32
	}{
		{"bytes", []string{"BITPIX  = 8"}, []byte{0, 255}, []float32{0, 255}, []int32{0, 255}},
		{"int16", []string{"BITPIX  = 16"}, []byte{0xff, 0xfe, 0, 3}, []float32{-2, 3}, []int32{-2, 3}},
		{"uint16", []string{"BITPIX  = 16", "BSCALE  = 1", "BZERO   = 32768"}, []byte{0x1c, 0x40, 0x80, 0}, []float32{40000, 0}, nil},
		{"scaled, blank", []string{"BITPIX  = 32", "BSCALE  = 2.5D-1", "BZERO   = 1", "BLANK   = -7"}, be.AppendUint32(be.AppendUint32(nil, 4), uint32(0xfffffff9)), []float32{2, nan}, nil},
		{"int64", []string{"BITPIX  = 64"}, be.AppendUint64(be.AppendUint64(nil, 1<<40), 5), []float32{1 << 40, 5}, nil},
		{"float64", []string{"BITPIX  = -64"}, be.AppendUint64(be.AppendUint64(nil, math.Float64bits(0.1)), math.Float64bits(math.NaN())), []float32{0.1, nan}, nil},
		{"scaled float32", []string{"BITPIX  = -32", "BSCALE  = 2."}, be.AppendUint32(be.AppendUint32(nil, math.Float32bits(3)), quietNaN32), []float32{6, nan}, nil},
	} {
		cards := append([]string{"SIMPLE  = T", c.card[0], "NAXIS   = 2", "NAXIS1  = 2", "NAXIS2  = 1"}, c.card[1:]...)
		cards = append(cards, "lower   = what", "HIERARCH some thing = 3", "QUOTE   = 'open", "NONUM   = nan", "CONTINUE  'stray&'", "CPLX    = (1.0, 2.0)", "EMPTY   =")
		raw := foreign(cards, c.data)
		f, err := NewFile("x", bytes.NewReader(raw), int64(len(raw)))
		if err != nil {
			t.Fatal(c.name, err)
		}
		img, err := f.Image("")
		if err != nil {
			t.Fatal(c.name, err)
		}
		check(t, c.name, img.Data, c.want)
		check(t, c.name+" integers", img.Ints, c.ints)
		cube, err := f.Cube("0")
		if err != nil {
			t.Fatal(c.name, err)
		}
		plane := make([]float32, 2)
		if err := cube.ReadPlane(0, plane); err != nil {
			t.Fatal(c.name, err)
		}
		check(t, c.name+" as a cube", plane, c.want)
	}
}

// Tables of others: scaled integers, logicals, columns of kinds we do not read.
func TestForeignTable(t *testing.T) {
	raw := foreign([]string{"SIMPLE  = T", "BITPIX  = 8", "NAXIS   = 0"}, nil)
	raw = append(raw, foreign([]string{"XTENSION= 'BINTABLE'", "BITPIX  = 8", "NAXIS   = 2", "NAXIS1  = 13", "NAXIS2  = 1", "PCOUNT  = 4", "GCOUNT  = 1", "TFIELDS = 6",
		"TTYPE1  = 'u'", "TFORM1  = '1I'", "TZERO1  = 32768", "TTYPE2  = 'l'", "TFORM2  = 'L'", "TTYPE3  = 'p'", "TFORM3  = '1PE(3)'", "TTYPE4  = 'b'", "TFORM4  = 'B'", "TTYPE5  = 'z'", "TFORM5  = '0D'", "TTYPE6='bad'", "TFORM6  = 'A'"},
		[]byte{0x1c, 0x40, 'T', 0, 0, 0, 0, 0, 0, 0, 0, 9, 'x', 1, 2, 3, 4})...)
	f, err := NewFile("x", bytes.NewReader(raw), int64(len(raw)))
	if err != nil {
		t.Fatal(err)
	}
	tab, err := f.Table("1")
	if err != nil {
		t.Fatal(err)
	}
	want := []any{[]float64{40000}, []int32{1}, nil, []int32{9}, nil, []string{"x"}}
	for i, c := range tab.Columns {
		check(t, c.Name, c.Data, want[i])
	}
	if _, err := tab.Floats("p"); err == nil || !strings.Contains(err.Error(), "column p has the form 1PE(3), not one number a row") {
		t.Error(err)
	}
}

// FuzzOpen: hostile bytes end in an error or in a file whose parts can be read,
// never in a panic or in memory beyond a multiple of the file.
func FuzzOpen(f *testing.F) {
	path := filepath.Join(f.TempDir(), "s.fits")
	sample(f, path)
	raw, err := os.ReadFile(path)
	if err != nil {
		f.Fatal(err)
	}
	f.Add(raw)
	for _, cards := range [][]string{
		{"SIMPLE  = T", "BITPIX  = -32", "NAXIS   = 2", "NAXIS1  = 99999999", "NAXIS2  = 99999999"},
		{"SIMPLE  = T", "BITPIX  = 8", "NAXIS   = 3", "NAXIS1  = 0", "NAXIS2  = 99999999", "NAXIS3  = 9000000000000000000"},
		{"SIMPLE  = T", "BITPIX  = 16", "NAXIS   = 2", "NAXIS1  = 1", "NAXIS2  = 1", "BSCALE  = 1E308", "BLANK   = 0"},
	} {
		f.Add(foreign(cards, make([]byte, 10)))
	}
	f.Fuzz(func(t *testing.T, raw []byte) { readAll(raw) })
}

func readAll(raw []byte) {
	f, err := NewFile("x", bytes.NewReader(raw), int64(len(raw)))
	if err != nil {
		return
	}
	for i, h := range f.HDUs {
		name := strconv.Itoa(i)
		if h.IsImage() {
			f.ReadImage(h)
			if c, err := f.Cube(name); err == nil {
				plane := make([]float32, c.Axes[0]*c.Axes[1])
				c.ReadPlane(c.Planes()-1, plane)
			}
		}
		f.Table(name)
		if r, err := f.Rows(name); err == nil {
			for j := range r.Columns {
				for _, row := range []int{0, r.Len - 1} {
					if row >= 0 && row < r.Len {
						r.Int(row, j)
						r.Float32s(row, j, nil)
					}
				}
			}
		}
	}
}

// Random damage to a real file: what the fuzzer finds slowly.
func TestDamaged(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.fits")
	sample(t, path)
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	rapid.Check(t, func(t *rapid.T) {
		b := bytes.Clone(raw)
		for range rapid.IntRange(1, 8).Draw(t, "changes") {
			b[rapid.IntRange(0, len(b)-1).Draw(t, "at")] = rapid.SampledFrom([]byte("0123456789 -'&=/TABDEIJKLPQX\x00\xff")).Draw(t, "byte")
		}
		b = b[:rapid.IntRange(0, len(b)).Draw(t, "size")]
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		readAll(b)
		runtime.ReadMemStats(&after)
		// Everything is read up to four times; a []string of one-letter cells
		// takes 17 bytes for one.
		if n := after.TotalAlloc - before.TotalAlloc; n > uint64(100*len(b)+1<<20) {
			t.Fatalf("%d bytes of memory for a file of %d", n, len(b))
		}
	})
}

// Wrong sums in somebody's header do not keep its pixels from being read: files that were
// edited by hand often have them.
func TestWrongChecksums(t *testing.T) {
	raw := foreign([]string{"SIMPLE  = T", "BITPIX  = 16", "NAXIS   = 2", "NAXIS1  = 2", "NAXIS2  = 1", "BUNIT   = 'furlong/fortnight'", "CHECKSUM= 'AAAAAAAAAAAAAAAA'", "DATASUM = '-1'"}, []byte{0, 1, 0, 2})
	f, err := NewFile("x", bytes.NewReader(raw), int64(len(raw)))
	if err != nil {
		t.Fatal(err)
	}
	m, err := f.Image("")
	if err != nil {
		t.Fatal(err)
	}
	check(t, "pixels", m.Data, []float32{1, 2})
	if err := f.Verify(); err == nil {
		t.Error("Verify finds nothing")
	}
}
