package obs

import (
	"bytes"
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"offplane/synth/fits"
)

func testObservation(frames1, frames2 int) *Observation {
	g := testGrid()
	o := &Observation{Grid: g, Unit: "erg cm-2 s-1 sr-1", Scenario: strings.Repeat("0123456789abcdef", 4)}
	for p := range int32(g.Nx * g.Ny) {
		if p%3 != 1 && p > 9 {
			o.Pixels = append(o.Pixels, p)
		}
	}
	for line, n := range []int{frames1, frames2} {
		rest := []float64{1074.7, 1079.8}[line]
		for k := range 3 + line {
			d := 0.11 * float64(k-1)
			o.Tunings = append(o.Tunings, Tuning{line + 1, k, rest + d, 1.3 * float64(k), 0.13, d, 5 * line})
		}
		c := NewCube(len(o.Pixels), 3+line, n)
		for i := range c.Data {
			c.Data[i] = float32(math.Sin(float64(i*(line+1)))) * 1e-2
		}
		o.Frames[line] = c
		for f := range n {
			o.Exposures = append(o.Exposures, Exposure{line + 1, f, 30.1*float64(f) + float64(line), 2.1, 1.5e7, 3e-3, 40})
		}
		o.Mean[line] = make([][]float32, c.Tunings)
		for k := range o.Mean[line] {
			o.Mean[line][k] = make([]float32, c.Pixels)
			for p := range o.Mean[line][k] {
				sum := 0.0
				for _, v := range c.Series(p, k) {
					sum += float64(v)
				}
				o.Mean[line][k][p] = float32(sum / float64(n))
			}
		}
	}
	return o
}

func TestObservationRoundTrip(t *testing.T) {
	// 37 frames are two blocks of blockFrames and a rest.
	for _, frames := range []bool{true, false} {
		o := testObservation(37, 16)
		path := filepath.Join(t.TempDir(), "o.fits")
		if err := WriteObservation(path, o, fits.Header{{Key: "ORIGIN", Value: "test"}}, frames); err != nil {
			t.Fatal(err)
		}
		back, err := ReadObservation(path)
		if err != nil {
			t.Fatal(err)
		}
		if !frames {
			o.Frames = [2]*Cube{}
		}
		if d := cmp.Diff(o, back, cmpopts.EquateNaNs()); d != "" {
			t.Errorf("frames %v: %s", frames, d)
		}
	}
}

// An observation in parts has the bytes of the whole; parts out of order are refused.
func TestObservationInParts(t *testing.T) {
	o := testObservation(37, 16)
	head := *o
	for l, c := range o.Frames {
		head.Frames[l] = &Cube{Pixels: c.Pixels, Tunings: c.Tunings, Frames: c.Frames}
	}
	part := func(from, to int) *Observation {
		p := *o
		p.Pixels = o.Pixels[from:to]
		for l, c := range o.Frames {
			size := c.Tunings * c.Frames
			p.Frames[l] = &Cube{Pixels: to - from, Tunings: c.Tunings, Frames: c.Frames, Data: c.Data[from*size : to*size]}
		}
		return &p
	}
	cuts := []int{0}
	for i := 1; i < len(o.Pixels); i++ {
		if int(o.Pixels[i])/o.Grid.Nx != int(o.Pixels[i-1])/o.Grid.Nx && len(cuts) < 3 {
			cuts = append(cuts, i)
		}
	}
	cuts = append(cuts, len(o.Pixels))
	dir := t.TempDir()
	whole, parts := filepath.Join(dir, "whole.fits"), filepath.Join(dir, "parts.fits")
	if err := WriteObservation(whole, o, nil, true); err != nil {
		t.Fatal(err)
	}
	w, err := CreateObservation(parts, &head, nil, true)
	if err != nil {
		t.Fatal(err)
	}
	for i, to := range cuts[1:] {
		if err := w.Add(part(cuts[i], to)); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Add(part(0, cuts[1])); err == nil || !strings.Contains(err.Error(), "comes next") {
		t.Errorf("a part again: %v", err)
	}
	bare := *o
	bare.Frames = [2]*Cube{}
	if err := w.Close(&bare); err != nil {
		t.Fatal(err)
	}
	a, _ := os.ReadFile(whole)
	b, _ := os.ReadFile(parts)
	if len(cuts) != 4 || len(a) == 0 || !bytes.Equal(a, b) {
		t.Errorf("%d parts: other bytes than the whole", len(cuts)-1)
	}
}

// Frames without means bring field and means themselves.
func TestObservationOfFramesAlone(t *testing.T) {
	o := testObservation(37, 16)
	for k := range 3 { // a lost frame, and a pixel that lost others
		for p := range o.Pixels {
			o.Frames[0].Series(p, k)[5] = float32(math.NaN())
		}
	}
	o.Frames[0].Series(4, 1)[7] = float32(math.NaN())
	path := filepath.Join(t.TempDir(), "o.fits")
	w, err := fits.Create(path, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, table := range []fits.Table{o.tuningTable(), o.exposureTable()} {
		if err := w.AddTable(table); err != nil {
			t.Fatal(err)
		}
	}
	r := Recorder{path: path, head: o, out: w}
	if err := errors.Join(r.reserveFrames(), r.rows(o, o.Grid.Ny), w.Close()); err != nil {
		t.Fatal(err)
	}
	back, err := ReadObservation(path)
	if err != nil {
		t.Fatal(err)
	}
	o.Mean[0] = Means(o.Frames[0])
	o.Scenario = ""
	if d := cmp.Diff(o, back, cmpopts.EquateNaNs()); d != "" {
		t.Error(d)
	}
	for k := range 3 {
		sum := 0.0
		for i, v := range o.Frames[0].Series(4, k) {
			if i != 5 && i != 7 {
				sum += float64(v)
			}
		}
		if got := back.Mean[0][k][4]; math.Abs(float64(got)-sum/35) > 1e-8 {
			t.Errorf("tuning %d: mean %g, want %g", k, got, sum/35)
		}
	}
}

// strip writes the file again with no more than pixels, names, world
// coordinates and the two tables.
func strip(t *testing.T, from, to string) {
	t.Helper()
	f, err := fits.Open(from)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	w, err := fits.Create(to, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, h := range f.HDUs {
		if !h.IsImage() {
			continue
		}
		var wcs fits.Header
		for _, c := range h.Header {
			for _, stem := range []string{"WCSAXES", "CTYPE", "CUNIT", "CDELT", "CRPIX", "CRVAL", "PC"} {
				if strings.HasPrefix(c.Key, stem) && c.Key != "PCOUNT" {
					wcs = append(wcs, c)
				}
			}
		}
		in, err := f.Cube(h.Name)
		if err != nil {
			t.Fatal(err)
		}
		out, err := w.Cube(h.Name, wcs, h.Axes...)
		if err != nil {
			t.Fatal(err)
		}
		plane := make([]float32, h.Axes[0]*h.Axes[1])
		for k := range in.Planes() {
			if err := in.ReadPlane(k, plane); err != nil {
				t.Fatal(err)
			}
			out.WritePlane(plane)
		}
	}
	for _, name := range []string{"TUNINGS", "EXPOSURES"} {
		table, err := f.Table(name)
		if err != nil {
			t.Fatal(err)
		}
		table.Header = nil
		w.AddTable(*table)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
}

// All cards but the world coordinates may be lost: pixels, tables and the sky
// of the grid are the same.
func TestStrippedObservation(t *testing.T) {
	dir := t.TempDir()
	o := testObservation(20, 4)
	full, stripped := filepath.Join(dir, "o.fits"), filepath.Join(dir, "s.fits")
	if err := WriteObservation(full, o, nil, true); err != nil {
		t.Fatal(err)
	}
	strip(t, full, stripped)
	back, err := ReadObservation(stripped)
	if err != nil {
		t.Fatal(err)
	}
	g := back.Grid
	// Roll and distance come back through the matrix and the default of 1 au.
	if math.Abs(g.Roll-o.Grid.Roll) > 1e-12 || math.Abs(g.Distance-215.0321) > 1e-3 || g.RestWavelength != o.Tunings[0].Wavelength-o.Tunings[0].Offset || g.Exposure != 2.1 {
		t.Errorf("grid %+v", g)
	}
	g.Roll, g.Distance, g.Latitude, g.Longitude, g.Start = o.Grid.Roll, o.Grid.Distance, o.Grid.Latitude, o.Grid.Longitude, o.Grid.Start
	g.Duration, g.Exposure, g.RestWavelength = o.Grid.Duration, o.Grid.Exposure, o.Grid.RestWavelength
	if g != o.Grid {
		t.Errorf("grid %+v, want %+v", g, o.Grid)
	}
	want := *o
	want.Grid, want.Unit, want.Scenario = back.Grid, "", ""
	if d := cmp.Diff(&want, back); d != "" {
		t.Error(d)
	}
}

// Nothing in the file knows the corona, the waves or the seed: the only cards
// beside observer and world coordinates are those of the caller and SCENSHA.
func TestObservationIsBlind(t *testing.T) {
	path := filepath.Join(t.TempDir(), "o.fits")
	o := testObservation(3, 2)
	if err := WriteObservation(path, o, nil, true); err != nil {
		t.Fatal(err)
	}
	f, err := fits.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var names []string
	for _, h := range f.HDUs {
		names = append(names, h.Name)
	}
	if got := strings.Join(names, " "); got != " LINE1_MEAN LINE2_MEAN TUNINGS EXPOSURES LINE1 LINE2" {
		t.Errorf("HDUs%s", got)
	}
	var keys []string
	for _, c := range f.HDUs[0].Header {
		keys = append(keys, c.Key)
	}
	if got := strings.Join(keys, " "); got != "SIMPLE BITPIX NAXIS EXTEND LONGSTRN SCENSHA CHECKSUM DATASUM" {
		t.Errorf("primary cards %s", got)
	}
	if sha, _ := f.HDUs[0].Header.Text("SCENSHA"); sha != o.Scenario {
		t.Errorf("SCENSHA %s", sha)
	}
}

func TestObservationErrors(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "o.fits")
	for want, spoil := range map[string]func(o *Observation){
		"pixel 5: raster indices must ascend":                                           func(o *Observation) { o.Pixels[1] = 5; o.Pixels[0] = 5 },
		"LINE1_MEAN: pixel 12 of the field is NaN at tuning 1":                          func(o *Observation) { o.Mean[0][1][1] = float32(math.NaN()) },
		"LINE2_MEAN: 3 planes for 4 tunings":                                            func(o *Observation) { o.Mean[1] = o.Mean[1][:3] },
		"TUNINGS: line 1, index 0":                                                      func(o *Observation) { o.Tunings[1].Index = 0 },
		"EXPOSURES: line 1, frame 2, 1 s: times must ascend":                            func(o *Observation) { o.Exposures[2].Time = 1 },
		"LINE1: the frames were not kept":                                               func(o *Observation) { o.Frames[0] = nil },
		"LINE2: 49 pixels, 4 tunings, 2 frames; the field and the tables have 49, 4, 1": func(o *Observation) { o.Exposures = o.Exposures[:4] },
		"TUNINGS or EXPOSURES: line must be 1 or 2":                                     func(o *Observation) { o.Exposures = append(o.Exposures, Exposure{Line: 3}) },
		"grid: pixel of 0 arcsec":                                                       func(o *Observation) { o.Grid.Pixel = 0 },
	} {
		o := testObservation(3, 2)
		spoil(o)
		err := WriteObservation(path, o, nil, true)
		if err == nil || !strings.HasPrefix(err.Error(), path+": "+want) {
			t.Errorf("%v, want %s", err, want)
		}
	}
	g := testGrid()
	if err := WriteMaps(path, &g, testMaps(&g), nil); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadObservation(path); err == nil || err.Error() != path+": no table named TUNINGS; it has none" {
		t.Error(err)
	}
	// A frame lost from the table is noticed.
	o := testObservation(3, 2)
	o.Frames[1] = nil
	if err := WriteObservation(path, o, nil, true); err != nil {
		t.Fatal(err)
	}
	f, err := fits.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	c, err := f.Cube("LINE1")
	if err != nil || len(c.Axes) != 4 {
		t.Fatalf("%v %v", c, err)
	}
	o.Exposures = o.Exposures[:2]
	bad := &Observation{Grid: o.Grid, Pixels: o.Pixels, Tunings: o.Tunings, Exposures: o.Exposures}
	if err := bad.readFrames(f, 1); err == nil || !strings.Contains(err.Error(), "LINE1]: axes [12 7 3 3]; the grid and the tables TUNINGS and EXPOSURES ask for 12, 7, 3, 2") {
		t.Error(err)
	}
}

func TestSeries(t *testing.T) {
	g := testGrid()
	path := filepath.Join(t.TempDir(), "series.fits")
	o := testObservation(3, 2)
	c := NewCube(len(o.Pixels), 1, 11)
	for i := range c.Data {
		c.Data[i] = float32(i)
	}
	if err := WriteSeries(path, &g, o.Pixels, c, nil, fits.Header{{Key: "CADENCE", Value: 30.0}}); err != nil {
		t.Fatal(err)
	}
	for i, p := range o.Pixels {
		s, err := ReadSeries(path, p)
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(c.Series(i, 0), s); d != "" {
			t.Error(d)
		}
	}
	if _, err := ReadSeries(path, 13); err == nil || err.Error() != path+"[SERIES]: no row for pixel (2, 2)" {
		t.Error(err)
	}
}

// Writing twice gives the same bytes.
func TestSameBytes(t *testing.T) {
	dir := t.TempDir()
	var first [][]byte
	for i := range 2 {
		g, o := testGrid(), testObservation(20, 4)
		names := []string{"m.fits", "o.fits", "s.fits"}
		if err := WriteMaps(filepath.Join(dir, names[0]), &g, testMaps(&g), nil); err != nil {
			t.Fatal(err)
		}
		if err := WriteObservation(filepath.Join(dir, names[1]), o, nil, true); err != nil {
			t.Fatal(err)
		}
		if err := WriteSeries(filepath.Join(dir, names[2]), &g, o.Pixels, NewCube(len(o.Pixels), 1, 5), nil, nil); err != nil {
			t.Fatal(err)
		}
		for k, name := range names {
			raw, err := os.ReadFile(filepath.Join(dir, name))
			if err != nil {
				t.Fatal(err)
			}
			if i == 0 {
				first = append(first, raw)
			} else if !bytes.Equal(raw, first[k]) {
				t.Errorf("%s differs", name)
			}
		}
	}
}
