package fits

import (
	"math"
	"path/filepath"
	"testing"
)

// sample writes a file with one of everything.
func sample(t testing.TB, path string) {
	t.Helper()
	w, err := Create(path, Header{
		{"ORIGIN", "nowhere", "who"},
		{"AUTHOR", "it's me", ""},
		{"SCENSHA", "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef", "SHA-256 of the scenario"},
		{"SEED", 7, ""},
		{"LONGTEXT", "a long string that is doubled: it's " + string(make66()) + "'" + string(make66()), "with a comment"},
		{"HISTORY", "made by a test " + string(make66()), ""},
	})
	if err != nil {
		t.Fatal(err)
	}
	nan := float32(math.NaN())
	h := Header{{"BTYPE", "Doppler velocity", "for people"}, {"BUNIT", "km/s", ""}, {"COMMENT", "short", ""},
		{"X", 0.1, "a comment that is far too long to fit into the card that it belongs to, so it moves"},
		{"Y", -1.2345678901234567e-300, ""}, {"LONGTEXT", string(make66()) + string(make66()) + "ab", ""}}
	if err := AddImage(w, "VEL", h, [2]int{3, 2}, []float32{1, nan, -3, float32(math.Inf(1)), 1e-40, 0}); err != nil {
		t.Fatal(err)
	}
	if err := AddImage(w, "FLAG", nil, [2]int{2, 2}, []int32{0, -1, math.MaxInt32, math.MinInt32}); err != nil {
		t.Fatal(err)
	}
	c, err := w.Cube("CUBE", Header{{"LONGTEXT", string(make66()) + "a", ""}}, 2, 3, 4)
	if err != nil {
		t.Fatal(err)
	}
	for k := range 4 {
		p := make([]float32, 6)
		for i := range p {
			p[i] = float32(k) + float32(i)/8
		}
		p[5] = nan
		if err := c.WritePlane(p); err != nil {
			t.Fatal(err)
		}
	}
	err = w.AddTable(Table{Name: "TAB", Header: Header{{"NOTE", "x", ""}}, Columns: []Column{
		{Name: "d", Unit: "s", About: "time", Data: []float64{1, math.NaN()}},
		{Name: "e", Unit: "km/s", Data: []float32{1, nan}},
		{Name: "k", Data: []int64{math.MinInt64, math.MaxInt64}},
		{Name: "j", Data: []int32{-1, 5}},
		{Name: "a", Data: []string{"ab", "abcde"}},
		{Name: "v", Data: [][]float32{{1, 2, 3}, {4, nan, 6}}},
	}})
	if err != nil {
		t.Fatal(err)
	}
	if err := w.AddTable(Table{Name: "BLOB", Columns: []Column{{Name: "yaml", Data: [][]byte{[]byte("a: 1\nµ: 2\x00\xff\n")}}}}); err != nil {
		t.Fatal(err)
	}
	if err := w.AddTable(Table{Name: "EMPTY", Columns: []Column{{Name: "x", Data: []float64{}}}}); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
}

func make66() []byte {
	b := make([]byte, 66)
	for i := range b {
		b[i] = 'a' + byte(i%26)
	}
	return b
}

func TestSample(t *testing.T) {
	path := filepath.Join(t.TempDir(), "s.fits")
	sample(t, path)
	f, err := Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for _, h := range f.HDUs {
		t.Log(h.Name, h.Kind, h.Axes, h.Header)
	}
	img, err := f.Image("vel")
	t.Log(img, err)
	img, err = f.Image("flag")
	t.Log(img, err)
	tab, err := f.Table("TAB")
	t.Log(tab, err)
	_, err = f.Image("x")
	t.Log(err)
}
