package model

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios/strict"
	"offplane/synth/fits"
	"offplane/synth/fits/fitstest"
)

// FuzzHarmonics: no bytes may panic, and a table that is taken gives the field that it
// states.
func FuzzHarmonics(f *testing.F) {
	f.Add(exampleHarmonics)
	f.Add([]byte("normalisation: orthonormal\ncheck: {latitude: 90, longitude: 0, radial: 0.4886025}\ncoefficients:\n  - {l: 1, m: 0, g: 1}\n"))
	f.Add([]byte("normalisation: schmidt\ncheck: {latitude: 0, longitude: 30, radial: 0}\ncoefficients:\n  - {l: 90, m: 89, g: 1, h: -1}\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		h, err := ParseHarmonics("f", data)
		if err != nil {
			if ps := (strict.Problems)(nil); !errors.As(err, &ps) {
				t.Fatalf("%T: %v", err, err)
			}
			return
		}
		b := NewSourceSurface(h, 2.5, 1).B(r3.Vec{X: 1.2, Y: 0.1, Z: 0.3})
		if n := r3.Norm(b); math.IsNaN(n) || math.IsInf(n, 0) {
			t.Fatalf("B is %v", b)
		}
	})
}

// FuzzGrid: a hostile grid ends in an error or in a corona of finite values.
func FuzzGrid(f *testing.F) {
	axis := func(name string) string {
		return "XTENSION= 'BINTABLE'\nBITPIX  = 8\nNAXIS   = 2\nNAXIS1  = 8\nNAXIS2  = 4\nPCOUNT  = 0\nGCOUNT  = 1\nTFIELDS = 1\nTTYPE1  = '" + name + "'\nTFORM1  = 'D'\nEXTNAME = '" + name + "'\n\n@32\n"
	}
	f.Add(fitstest.File("SIMPLE  = T\nBITPIX  = 8\nNAXIS   = 0\n\n" + axis("R") + axis("THETA") + axis("PHI")))
	f.Add(smallGrid(f))
	f.Fuzz(func(t *testing.T, raw []byte) {
		path := filepath.Join(t.TempDir(), "grid.fits")
		if err := os.WriteFile(path, raw, 0o666); err != nil {
			t.Fatal(err)
		}
		g, err := ReadGrid(path)
		if err != nil {
			return
		}
		n, temperature := g.plasma(r3.Vec{X: 1.05, Y: 0.1, Z: 0.2})
		if !(n > 0) || math.IsInf(n, 0) || !(temperature > 0) || math.IsInf(temperature, 0) {
			t.Fatalf("density %g, temperature %g", n, temperature)
		}
	})
}

// smallGrid is the file of a grid of 3 x 3 x 4 nodes with ones everywhere.
func smallGrid(f *testing.F) []byte {
	path := filepath.Join(f.TempDir(), "grid.fits")
	w, err := fits.Create(path, nil)
	if err != nil {
		f.Fatal(err)
	}
	defer w.Abort()
	for name, nodes := range map[string][]float64{"R": {1, 1.5, 2}, "THETA": {0, 90, 180}, "PHI": {0, 90, 180, 270}} {
		err = errors.Join(err, w.AddTable(fits.Table{Name: name, Columns: []fits.Column{{Name: name, Data: nodes}}}))
	}
	for _, image := range gridImages {
		c, err := w.Cube(image.name, nil, 4, 3, 3)
		if err != nil {
			f.Fatal(err)
		}
		for range 3 {
			err = errors.Join(err, c.WritePlane([]float32{1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1}))
		}
		if err != nil {
			f.Fatal(err)
		}
	}
	if err := errors.Join(err, w.Close()); err != nil {
		f.Fatal(err)
	}
	raw, err := os.ReadFile(path)
	if err != nil {
		f.Fatal(err)
	}
	return raw
}

// Nodes alone, without the images, do not make memory for their product.
func TestGridOfNodesAlone(t *testing.T) {
	path := filepath.Join(t.TempDir(), "grid.fits")
	w, err := fits.Create(path, nil)
	if err != nil {
		t.Fatal(err)
	}
	defer w.Abort()
	const n = 20000
	for name, from := range map[string][2]float64{"R": {1, 3}, "THETA": {0, 180}, "PHI": {0, 359.98}} {
		nodes := make([]float64, n)
		for i := range nodes {
			nodes[i] = from[0] + (from[1]-from[0])*float64(i)/(n-1)
		}
		if err := w.AddTable(fits.Table{Name: name, Columns: []fits.Column{{Name: name, Data: nodes}}}); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadGrid(path); err == nil || !strings.Contains(err.Error(), "needs images") {
		t.Error(err)
	}
}
