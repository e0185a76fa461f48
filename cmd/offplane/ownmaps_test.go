package main

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"offplane/compare"
	"offplane/synth/fits"
)

// writeOwnMap writes an image of n x n pixels of step arcsec, turned by rho degrees,
// centred on the west limb at (lon, lat) arcsec, of f of the distance from the disc centre
// [solar radii], as somebody would who works in degrees and tesla.
func writeOwnMap(t *testing.T, path string, n int, step, rho, lon, lat float64, unit string, f func(r float64) float64) {
	t.Helper()
	s, c := math.Sincos(rho * math.Pi / 180)
	h := fits.Header{
		{Key: "BUNIT", Value: unit},
		{Key: "CTYPE1", Value: "HPLN-TAN"}, {Key: "CTYPE2", Value: "HPLT-TAN"}, {Key: "CUNIT1", Value: "deg"}, {Key: "CUNIT2", Value: "deg"},
		{Key: "CDELT1", Value: step / 3600}, {Key: "CDELT2", Value: step / 3600}, {Key: "CRPIX1", Value: float64(n+1) / 2}, {Key: "CRPIX2", Value: float64(n+1) / 2},
		{Key: "CRVAL1", Value: lon / 3600}, {Key: "CRVAL2", Value: lat / 3600}, {Key: "CROTA2", Value: rho},
	}
	const arcsec = math.Pi / 648000
	data := make([]float32, n*n)
	for i := range data {
		dx, dy := float64(i%n)-float64(n-1)/2, float64(i/n)-float64(n-1)/2
		// Less than half a degree from the disc centre angles add.
		x, y := lon+step*(c*dx-s*dy), lat+step*(s*dx+c*dy)
		data[i] = float32(f(math.Hypot(x, y) * arcsec * 1.495978707e11 / 6.957e8))
	}
	w, err := fits.Create(path, nil)
	if err != nil {
		t.Fatal(err)
	}
	defer w.Abort()
	if err := fits.AddImage(w, "MINE", h, [2]int{n, n}, data); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
}

func readSummary(t *testing.T, dir string) (s compare.Summary) {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(dir, "summary.json"))
	if err == nil {
		err = json.Unmarshal(text, &s)
	}
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// The field of tiny.yaml is 3 G r^-2 in the plane of the sky. A map of 1.2 times that in
// other pixels, turned, in tesla, comes back as 1.2 within the error of resampling: for
// pixels s and a target h, 2 s/4 of a step at the edges and 6 h^2/8 of curvature per
// dimension (derived; see obs.TestResamplingError), with h = 8.7 arcsec = 0.0091 solar
// radii: 1.2e-4 at coarser pixels twice as large, 6 h^2/24 + s/2 = 6e-4 at s = 2 arcsec.
func TestTurnedAndRebinnedMap(t *testing.T) {
	tiny, err := filepath.Abs("testdata/tiny.yaml")
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(t.TempDir())
	if code, _, stderr := call("synth", tiny, "--frames=false", "--set", "camera.duration=11 min", "-o", "data", "--quiet"); code != 0 {
		t.Fatal(stderr)
	}
	for i, c := range []struct {
		step, rho float64
		n         int
		how       string
		limit     float64
	}{{2, 37, 300, "area average", 1.1e-3}, {5.5, -120, 120, "area average", 3.3e-3}, {17.4, 65, 40, "bilinear", 5e-4}} {
		writeOwnMap(t, "mine.fits", c.n, c.step, c.rho, 1090, 15, "T", func(r float64) float64 { return 1.2 * 3e-4 / (r * r) })
		dir := fmt.Sprint("verdict", i)
		code, stdout, stderr := call("compare", "--truth", "data/truth.fits", "--map", "B=mine.fits", "-o", dir)
		if code != 0 {
			t.Fatal(stderr)
		}
		if !strings.Contains(stdout, c.how) {
			t.Errorf("%g arcsec: %s", c.step, stdout)
		}
		s := readSummary(t, dir)
		f := s.Ratios.Field.Sky
		t.Logf("%g arcsec at %g deg: 95 %% of the ratios from %.6f to %.6f, median %.6f", c.step, c.rho, f.P2_5, f.P97_5, f.Median)
		if f.Count != s.Pixels.Total || math.Abs(f.P2_5/1.2-1) > c.limit || math.Abs(f.P97_5/1.2-1) > c.limit {
			t.Errorf("%g arcsec at %g deg: %+v of %d pixels, want 1.2 within %g", c.step, c.rho, f, s.Pixels.Total, c.limit)
		}
	}

	// What cannot be compared says why, and leaves nothing behind.
	nan := func(float64) float64 { return math.NaN() }
	one := func(float64) float64 { return 1 }
	writeOwnMap(t, "nan.fits", 20, 17, 0, 1090, 15, "G", nan)
	writeOwnMap(t, "signed.fits", 20, 17, 0, 1090, 15, "G", func(float64) float64 { return -1 })
	writeOwnMap(t, "east.fits", 20, 17, 0, -1090, 15, "G", one)
	writeOwnMap(t, "kelvin.fits", 20, 17, 0, 1090, 15, "K", one)
	writeOwnMap(t, "unitless.fits", 20, 17, 0, 1090, 15, "", one)
	w, err := fits.Create("nowhere.fits", nil)
	if err == nil {
		err = fits.AddImage(w, "B", fits.Header{{Key: "BUNIT", Value: "G"}}, [2]int{2, 2}, make([]float32, 4))
	}
	if err == nil {
		err = w.Close()
	}
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ args, say string }{
		{"--map B=nan.fits", "nan.fits[MINE]: no pixel has a value"},
		{"--map B=signed.fits", "no pixel has a positive value, as B needs"},
		{"--map B=east.fits", "none of its values lies in the field of the truth"},
		{"--map B=kelvin.fits", `kelvin.fits[MINE] is in "K"; it must be in G (or T, mT)`},
		{"--map NE=kelvin.fits", "must be in cm-3 (or m-3, log(cm-3))"},
		{"--map B=unitless.fits", "has no unit (BUNIT)"},
		{"--map B=nowhere.fits", "CTYPE1 is missing: without world coordinates"},
		{"--map SKY=nan.fits", "NAME must be one of B, SPEED"},
		{"--true B=nan.fits --map B=nan.fits", "NAME must be one of B_SKY"},
		{"--inferred nowhere.fits", "nowhere.fits[B]: CTYPE1 is missing"},
	} {
		code, _, stderr := call(append([]string{"compare", "--truth", "data/truth.fits", "-o", "no"}, strings.Fields(c.args)...)...)
		if code != exitMisuse || strings.Count(stderr, "\n") != 1 || !strings.Contains(stderr, c.say) {
			t.Errorf("%s: exit %d, want %q in\n%s", c.args, code, c.say, stderr)
		}
	}
	if exists("no") {
		t.Error("a folder was left behind")
	}
}
