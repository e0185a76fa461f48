package obs

import (
	"math"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"offplane/synth/fits"
	"pgregory.net/rapid"
)

func testGrid() Grid {
	return Grid{Nx: 12, Ny: 7, Pixel: 4.35, CentreX: 300.25, CentreY: -12.5, Roll: 13.7, Distance: 213.1, Latitude: -7.1,
		Longitude: 2.5, Start: time.Date(2026, 8, 12, 17, 30, 0, 123456789, time.UTC), Duration: 3600.5, Exposure: 4.2, RestWavelength: 1074.7}
}

func testMaps(g *Grid) Maps {
	n := g.Nx * g.Ny
	v, f, s := make([]float32, n), make([]int32, n), make([]int32, n)
	for i := range n {
		v[i] = float32(math.Sin(float64(i)))
		f[i] = int32(i)
		s[i] = int32(i % 4)
	}
	v[5] = float32(math.NaN())
	return Maps{
		{Name: "B", Unit: "G", About: "field strength", Data: v},
		{Name: "RATIO", About: "ratio of the lines, a pure number", Data: v},
		{Name: "FLAG", About: "bits, see FLAG00 and on", Ints: f, Codes: []Code{{1, "OUTSIDE", "no field: outside"}, {1 << 4, "NARROW", "line narrower than the filter: no width at all, and this is a long text"}}},
		{Name: "STRUCTURE", About: "codes", Ints: s, Codes: []Code{{0, "none", ""}, {2, "open", "open field"}}},
	}
}

// TestMapsRoundTrip: what was written comes back to the last bit, the grid too.
func TestMapsRoundTrip(t *testing.T) {
	g := testGrid()
	maps := testMaps(&g)
	path := filepath.Join(t.TempDir(), "m.fits")
	if err := WriteMaps(path, &g, maps, fits.Header{{Key: "ORIGIN", Value: "test"}}); err != nil {
		t.Fatal(err)
	}
	g2, maps2, err := ReadMaps(path)
	if err != nil {
		t.Fatal(err)
	}
	if g2 != g {
		t.Errorf("grid %+v, want %+v", g2, g)
	}
	if d := cmp.Diff(maps, maps2, cmpopts.EquateNaNs()); d != "" {
		t.Error(d)
	}
}

// Any grid comes back to the last bit.
func TestGridRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := func(name string, min, max float64) float64 { return rapid.Float64Range(min, max).Draw(t, name) }
		g := Grid{
			Nx: rapid.IntRange(1, 3000).Draw(t, "nx"), Ny: rapid.IntRange(1, 3000).Draw(t, "ny"),
			Pixel: f("pixel", 0.1, 60), CentreX: f("x", -5000, 5000), CentreY: f("y", -5000, 5000), Roll: f("roll", -180, 180),
			Distance: f("distance", 10, 2150), Latitude: f("latitude", -90, 90), Longitude: f("longitude", -360, 360),
			Start:    time.Unix(rapid.Int64Range(-2e9, 9e9).Draw(t, "s"), rapid.Int64Range(0, 999999999).Draw(t, "ns")).UTC(),
			Duration: f("duration", 60, 48*3600), Exposure: f("exposure", 1e-3, 600), RestWavelength: f("wavelength", 100, 2000),
		}
		h, err := g.header()
		if err != nil {
			t.Fatal(err)
		}
		back, err := readGrid(h, []int{g.Nx, g.Ny})
		if err != nil {
			t.Fatal(err)
		}
		if back != g {
			t.Fatalf("%+v, want %+v", back, g)
		}
	})
}

// The header of others: degrees, a CD matrix or CROTA2, a reference point off
// the centre. The sky under a pixel stays where it was.
func TestForeignGrid(t *testing.T) {
	want := testGrid()
	s, c := math.Sincos(want.Roll * math.Pi / 180)
	deg := want.Pixel / 3600
	base := fits.Header{
		{Key: "CTYPE1", Value: "HPLN-TAN"}, {Key: "CTYPE2", Value: "HPLT-TAN"}, {Key: "CRPIX1", Value: want.CentreX}, {Key: "CRPIX2", Value: want.CentreY},
		{Key: "DSUN_OBS", Value: want.Distance * 6.957e8}, {Key: "DATE-OBS", Value: "2026-08-12"}, {Key: "WAVELNTH", Value: 10747}, {Key: "WAVEUNIT", Value: "Angstrom"},
	}
	with := func(cards ...fits.Card) fits.Header { return append(append(fits.Header{}, base...), cards...) }
	for name, h := range map[string]fits.Header{
		"CD, degrees by default": with(fits.Card{Key: "CD1_1", Value: deg * c}, fits.Card{Key: "CD1_2", Value: -deg * s}, fits.Card{Key: "CD2_1", Value: deg * s}, fits.Card{Key: "CD2_2", Value: deg * c}),
		"CROTA2":                 with(fits.Card{Key: "CUNIT1", Value: "arcsec"}, fits.Card{Key: "CUNIT2", Value: "arcsec"}, fits.Card{Key: "CDELT1", Value: want.Pixel}, fits.Card{Key: "CDELT2", Value: want.Pixel}, fits.Card{Key: "CROTA2", Value: want.Roll}),
	} {
		g, err := readGrid(h, []int{want.Nx, want.Ny})
		if err != nil {
			t.Fatal(name, err)
		}
		// 1e-12 solar radii: a few ulp of numbers of order 1.
		y1, z1 := g.Sky(3, 5)
		y2, z2 := want.Sky(3, 5)
		if math.Hypot(y1-y2, z1-z2) > 1e-12 || math.Abs(g.RestWavelength-1074.7) > 1e-9 || g.Start != time.Date(2026, 8, 12, 0, 0, 0, 0, time.UTC) {
			t.Errorf("%s: %+v, want %+v", name, g, want)
		}
	}
	// The reference point 100 arcsec west and 50 north of the centre, no roll:
	// the centre lies that many pixels back.
	h := with(fits.Card{Key: "CDELT1", Value: deg}, fits.Card{Key: "CDELT2", Value: deg}, fits.Card{Key: "CRVAL1", Value: 100. / 3600}, fits.Card{Key: "CRVAL2", Value: 50. / 3600})
	g, err := readGrid(h, []int{want.Nx, want.Ny})
	if err != nil || math.Abs(g.CentreX-(want.CentreX-100/want.Pixel)) > 1e-9 || math.Abs(g.CentreY-(want.CentreY-50/want.Pixel)) > 1e-9 {
		t.Errorf("reference point: %+v, %v", g, err)
	}
	for want, cards := range map[string][]fits.Card{
		"CTYPE1 is \"RA---TAN\": must be \"HPLN-TAN\"": {{Key: "CTYPE1", Value: "RA---TAN"}},
		"CDELT1 is missing":                            {},
		"CUNIT1 is \"solRad\": must be arcsec or deg":  {{Key: "CUNIT1", Value: "solRad"}},
		"pixels must be square":                        {{Key: "CDELT1", Value: 1.0}, {Key: "CDELT2", Value: 2.0}},
		"DSUN_OBS puts the observer at":                {{Key: "CDELT1", Value: 1.0}, {Key: "CDELT2", Value: 1.0}, {Key: "DSUN_OBS", Value: 6.9e8}},
		"DATE-BEG is \"soon\": must be a date":         {{Key: "CDELT1", Value: 1.0}, {Key: "CDELT2", Value: 1.0}, {Key: "DATE-BEG", Value: "soon"}},
	} {
		h := with()
		for _, c := range cards {
			h.Set(c.Key, c.Value, "")
		}
		if _, err := readGrid(h, []int{2, 2}); err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%v, want %s", err, want)
		}
	}
}

func TestMapErrors(t *testing.T) {
	dir := t.TempDir()
	g := testGrid()
	path := filepath.Join(dir, "m.fits")
	pixels := make([]int32, g.Nx*g.Ny)
	for want, m := range map[string]Map{
		"FLAG: code 3 is not one bit":              {Name: "FLAG", Ints: pixels, Codes: []Code{{Value: 3, Name: "x"}}},
		"STRUCTURE: code 100 does not fit":         {Name: "STRUCTURE", Ints: pixels, Codes: []Code{{Value: 100, Name: "x"}}},
		"[B]: 0 pixels for an image of 12 x 7":     {Name: "B"},
		"[B]: header keyword \"BUNIT\": \"µG\"":    {Name: "B", Unit: "µG", Ints: pixels},
		"[b]: extension name \"b\": must be upper": {Name: "b", Ints: pixels},
	} {
		err := WriteMaps(path, &g, Maps{m}, nil)
		if err == nil || !strings.HasPrefix(strings.TrimPrefix(strings.TrimPrefix(err.Error(), path), ": "), want) {
			t.Errorf("%v, want %s", err, want)
		}
		if left, _ := filepath.Glob(filepath.Join(dir, "*")); len(left) > 0 {
			t.Errorf("left %v", left)
		}
	}
	if _, _, err := ReadMaps(path); err == nil || err.Error() != path+": file does not exist" {
		t.Error(err)
	}
	if err := WriteMaps(path, &g, testMaps(&g), nil); err != nil {
		t.Fatal(err)
	}
	g2, m, err := ReadMap(path, "structure")
	if err != nil || g2 != g || m.Name != "STRUCTURE" || m.Floats()[2] != 2 {
		t.Errorf("%v %v", m, err)
	}
	if _, _, err := ReadMap(path, "NE"); err == nil || err.Error() != path+": no image named NE; it has B, RATIO, FLAG, STRUCTURE" {
		t.Error(err)
	}
}
