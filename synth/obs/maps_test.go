package obs

import (
	"math"
	"path/filepath"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"offplane/synth/fits"
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
