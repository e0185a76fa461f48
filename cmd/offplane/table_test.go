package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"offplane/compare/table"
	"offplane/synth/fits"
	"offplane/synth/obs"
)

// skyHeader is what somebody else would write: degrees and a CD matrix. The middle of the
// image lies at (x, y) arcsec, it is rolled by roll degrees, and the reference point is its
// middle or the disc centre.
func skyHeader(nx, ny int, pixel, roll, x, y float64, unit string, discCentre bool) fits.Header {
	s, c := math.Sincos(roll * math.Pi / 180)
	p := pixel / 3600
	px, py := float64(nx+1)/2, float64(ny+1)/2
	if discCentre {
		px, py = px-(c*x+s*y)/pixel, py-(-s*x+c*y)/pixel
		x, y = 0, 0
	}
	var h fits.Header
	for _, card := range []fits.Card{
		{Key: "BUNIT", Value: unit}, {Key: "CTYPE1", Value: "HPLN-TAN"}, {Key: "CTYPE2", Value: "HPLT-TAN"},
		{Key: "CUNIT1", Value: "deg"}, {Key: "CUNIT2", Value: "deg"},
		{Key: "CRPIX1", Value: px}, {Key: "CRPIX2", Value: py},
		{Key: "CRVAL1", Value: x / 3600}, {Key: "CRVAL2", Value: y / 3600},
		{Key: "CD1_1", Value: p * c}, {Key: "CD1_2", Value: -p * s}, {Key: "CD2_1", Value: p * s}, {Key: "CD2_2", Value: p * c},
		{Key: "DSUN_OBS", Value: 1.495978707e11}, {Key: "RSUN_REF", Value: 6.957e8}, {Key: "DATE-OBS", Value: "2025-03-20T18:00:00"}, {Key: "MJD-OBS", Value: 60754.75},
		{Key: "HGLN_OBS", Value: 0.0}, {Key: "HGLT_OBS", Value: 0.0}, {Key: "TELESCOP", Value: "mine"},
	} {
		h.Set(card.Key, card.Value, "")
	}
	return h
}

func writeImage(t *testing.T, path string, nx, ny int, h fits.Header, value func(i int) float64) {
	t.Helper()
	w, err := fits.Create(path, nil)
	if err != nil {
		t.Fatal(err)
	}
	defer w.Abort()
	data := make([]float32, nx*ny)
	for i := range data {
		data[i] = float32(value(i))
	}
	if err := fits.AddImage(w, "MINE", h, [2]int{nx, ny}, data); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
}

// writePublished writes a field in tesla, rolled by 30 degrees about a point beside the west
// limb, and a density in m-3 on another grid.
func writePublished(t *testing.T, dir string, discCentre bool) (field, density string) {
	t.Helper()
	field, density = filepath.Join(dir, "field.fits"), filepath.Join(dir, "density.fits")
	// One solar radius is 959 arcsec at 1 au.
	writeImage(t, field, 40, 30, skyHeader(40, 30, 6, 30, 1130, 120, "T", discCentre), func(i int) float64 { return (1 + float64(i%40)/10) * 1e-4 })
	writeImage(t, density, 90, 90, skyHeader(90, 90, 5, 0, 1130, 120, "m-3", discCentre), func(i int) float64 { return 1e14 * (0.5 + float64(i/90)/60) })
	return field, density
}

func offplane(args ...string) (code int, stdout, stderr string) {
	var out, errs bytes.Buffer
	code = Main(args, &out, &errs)
	return code, out.String(), errs.String()
}

// A map in tesla, rotated, with its density on another grid: the same factor as the table
// gives for the pixel's own height and values, in the unit and on the sky of the map.
func TestPublishedMap(t *testing.T) {
	dir := t.TempDir()
	field, density := writePublished(t, dir, false)
	out := filepath.Join(dir, "out")
	code, stdout, stderr := offplane("table", "apply", field, "--density", density, "--recipe", "as-table", "--recipe", "pixel=4.35", "-o", out)
	if code != 0 {
		t.Fatalf("exit %d: %s%s", code, stdout, stderr)
	}
	tab, err := table.Open(table.DefaultName)
	if err != nil {
		t.Fatal(err)
	}
	s := tab.Find(table.FieldQ, []table.Feature{table.Height, table.Field, table.Density})
	f, err := fits.Open(filepath.Join(out, "corrected.fits"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	b, err := f.Image("B")
	if err != nil {
		t.Fatal(err)
	}
	factor, _ := f.Image("FACTOR")
	flag, _ := f.Image("FLAG")
	if unit, _ := b.Header.Text("BUNIT"); unit != "T" {
		t.Errorf("corrected map in %q", unit)
	}
	if cd, _ := b.Header.Float("CD1_2"); math.Abs(cd+6./3600*0.5) > 1e-12 {
		t.Errorf("CD1_2 is %g", cd)
	}
	inside, corrected := 0, 0
	for _, v := range factor.Data {
		if v == v {
			corrected++
		}
	}
	if want := fmt.Sprintf("by         height, field, density for %d pixels (coarser", corrected); !strings.Contains(stdout, want) || corrected == 1200 {
		t.Errorf("%s\nwant %s", stdout, want)
	}
	for i := range b.Data {
		// By hand: the tangent plane, west and north of the disc centre in arcsec.
		dx, dy := 6*(float64(i%40)-19.5), 6*(float64(i/40)-14.5)
		x := 1130 + dx*math.Cos(math.Pi/6) - dy*math.Sin(math.Pi/6)
		y := 120 + dx*math.Sin(math.Pi/6) + dy*math.Cos(math.Pi/6)
		r := math.Hypot(x, y) * obs.Arcsec * 1.495978707e11 / 6.957e8
		in := (1 + float64(i%40)/10) * 1e-4
		n := 1e8 * (0.5 + math.Round((y-120)/5+44.5)/60)
		c, where := s.At([]float64{r, in * 1e4, n}, tab.Least)
		switch {
		case where != table.Inside:
			if flag.Ints[i]&(table.OutOfRange|table.TooFew) == 0 || math.Abs(float64(b.Data[i])/in-1) > 1e-6 {
				// A height within rounding of the edge may fall on either side.
				if math.Abs(r-s.Grid[0].Nodes[0]) > 1e-3 && math.Abs(r-s.Grid[0].Nodes[3]) > 1e-3 {
					t.Fatalf("pixel %d at %.3f: flag %b, value %g, want %g", i, r, flag.Ints[i], b.Data[i], in)
				}
			}
		case flag.Ints[i] == table.Coarser:
			inside++
			if math.Abs(float64(factor.Data[i])/math.Exp(c.Median)-1) > 2e-3 || math.Abs(float64(b.Data[i])/(in*float64(factor.Data[i]))-1) > 1e-5 {
				t.Fatalf("pixel %d at %.3f: factor %g, want %g", i, r, factor.Data[i], math.Exp(c.Median))
			}
		}
	}
	if inside < 300 {
		t.Errorf("%d pixels in the domain", inside)
	}
}

// Maps whose place on the sky is not known are refused.
func TestPublishedWithoutSky(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "flat.fits")
	h := fits.Header{{Key: "BUNIT", Value: "G"}}
	writeImage(t, path, 5, 5, h, func(int) float64 { return 2 })
	code, _, stderr := offplane("table", "apply", path, "--recipe", "as-table", "-o", filepath.Join(dir, "out"))
	if code != 2 || !strings.Contains(stderr, "CTYPE1") {
		t.Errorf("exit %d: %s", code, stderr)
	}
	if _, err := os.Stat(filepath.Join(dir, "out")); err == nil {
		t.Error("a refused map leaves a folder")
	}
}

// What keeps pixels from being corrected is told alike in text and JSON, and a remedy with it.
func TestLeft(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "field.fits")
	write := func(unit string, pixel float64, value func(i int) float64) {
		writeImage(t, path, 20, 20, skyHeader(20, 20, pixel, 0, 1130, 120, unit, false), value)
	}
	apply := func(name string, more ...string) (int, string, string) {
		return offplane(append([]string{"table", "apply", path, "--recipe", "as-table", "-o", filepath.Join(dir, name)}, more...)...)
	}
	tab, err := table.Open(table.DefaultName)
	if err != nil {
		t.Fatal(err)
	}
	grid := tab.Find(table.FieldQ, []table.Feature{table.Height, table.Field}).Grid
	end := grid[1].Nodes[len(grid[1].Nodes)-1]
	// A row of twenty pixels lies above the table.
	write("G", 4.35, func(i int) float64 {
		if i < 20 {
			return 2 * end
		}
		return 2
	})
	code, out, stderr := apply("text")
	if want := fmt.Sprintf("field: 20 pixels above %.4g G, where it ends)", end); code != 0 || !strings.Contains(out, want) {
		t.Errorf("exit %d: %s%s\nwant %s", code, out, stderr, want)
	}
	_, out, _ = apply("json", "--json")
	var got applied
	if err := json.Unmarshal([]byte(out), &got); err != nil {
		t.Fatal(err)
	}
	left := 0
	for _, c := range got.Left {
		left += c.Pixels
	}
	if left != 400-got.Corrected || len(got.Beyond) == 0 || got.Beyond[0] != (past{"field", "above", end, "G", 20}) {
		t.Errorf("%s", out)
	}
	if len(got.By) != 1 || !got.By[0].Coarser || got.By[0].Corrected != got.Corrected || got.By[0].Members < 200 || got.By[0].Beats == nil || !*got.By[0].Beats {
		t.Errorf("by %+v", got.By)
	}
	// A field in tesla that is called gauss, and the other way round.
	write("G", 4.35, func(int) float64 { return 2e-4 })
	if code, _, stderr = apply("small"); code != 3 || !strings.Contains(stderr, "10000 times too small: is BUNIT right (G, T, mT)?") {
		t.Errorf("exit %d: %s", code, stderr)
	}
	write("T", 4.35, func(int) float64 { return 2 })
	if code, _, stderr = apply("large"); code != 3 || !strings.Contains(stderr, "10000 times too large: is BUNIT right") {
		t.Errorf("exit %d: %s", code, stderr)
	}
	write("G", 2, func(int) float64 { return 2 })
	if code, _, stderr = apply("fine"); code != 3 || !strings.Contains(stderr, "give --recipe pixel=4.35") {
		t.Errorf("exit %d: %s", code, stderr)
	}
	// The speed by height and field is the part that coverage.ecsv says is no better than one factor.
	field := filepath.Join(dir, "with.fits")
	writeImage(t, field, 20, 20, skyHeader(20, 20, 4.35, 0, 1130, 120, "G", false), func(int) float64 { return 2 })
	alone := *tab
	alone.Recipe = slices.DeleteFunc(slices.Clone(tab.Recipe), func(s table.Step) bool { return s.Key == "mu" }) // without mu the density does not follow
	if err := errors.Join(alone.ECSV().WriteFile(filepath.Join(dir, "table.ecsv")), alone.Coverage().WriteFile(filepath.Join(dir, "coverage.ecsv"))); err != nil {
		t.Fatal(err)
	}
	write("km/s", 4.35, func(int) float64 { return 400 })
	if code, out, stderr = apply("note", "--field", field, "--table", filepath.Join(dir, "table.ecsv")); code != 0 || !strings.Contains(out, "does not beat a single factor") {
		t.Errorf("exit %d: %s%s", code, out, stderr)
	}
}
