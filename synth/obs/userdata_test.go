package obs

import (
	"math"
	"path/filepath"
	"strings"
	"testing"

	"offplane/synth/fits"
)

// Vacuum wavelengths against the refractive index of Edlen (1966, Metrologia 2, 71, from
// memory), an older formula: within 1e-7.
func TestVacuum(t *testing.T) {
	for _, air := range []float64{500, 1074.4, 1079.5} {
		s2 := 1e6 / (air * air)
		want := air * (1 + 1e-8*(8342.13+2406030/(130-s2)+15997/(38.9-s2)))
		if got := vacuum(air); math.Abs(got/want-1) > 1e-7 {
			t.Errorf("%g nm in air: %.5f nm, want %.5f", air, got, want)
		}
	}
}

// userFile writes a cube of the west limb with the given axes after the sky's.
func userFile(t *testing.T, axes []int, cards ...fits.Card) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "mine.fits")
	w, err := fits.Create(path, nil)
	if err != nil {
		t.Fatal(err)
	}
	g := Grid{Nx: axes[0], Ny: axes[1], Pixel: 4.35, CentreX: -230, CentreY: 3, Distance: 215}
	h, err := g.header()
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range cards {
		h.Set(c.Key, c.Value, "")
	}
	c, err := w.Cube("MINE", h, axes...)
	if err != nil {
		t.Fatal(err)
	}
	planes := 1
	for _, n := range axes[2:] {
		planes *= n
	}
	for i := range planes {
		p := make([]float32, axes[0]*axes[1])
		for j := range p {
			p[j] = float32(1000*i + j)
		}
		p[0] = float32(math.NaN())
		if err := c.WritePlane(p); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

// Every number lands where it belongs, in either order of time and wavelength.
func TestUserCube(t *testing.T) {
	wave := func(i string) []fits.Card {
		return []fits.Card{{Key: "CTYPE" + i, Value: "AWAV"}, {Key: "CUNIT" + i, Value: "Angstrom"}, {Key: "CDELT" + i, Value: 1.2}, {Key: "CRVAL" + i, Value: 10744.1}, {Key: "CRPIX" + i, Value: 2.0}}
	}
	when := func(i string) []fits.Card {
		return []fits.Card{{Key: "CTYPE" + i, Value: "UTC"}, {Key: "CUNIT" + i, Value: "min"}, {Key: "CDELT" + i, Value: 0.5}, {Key: "CRVAL" + i, Value: 3.0}, {Key: "CRPIX" + i, Value: 1.0}}
	}
	for _, timeFirst := range []bool{false, true} {
		axes, cards := []int{6, 5, 3, 10}, append(wave("3"), when("4")...)
		if timeFirst {
			axes, cards = []int{6, 5, 10, 3}, append(when("3"), wave("4")...)
		}
		u := UserData{First: userFile(t, axes, cards...) + "[mine]", Rest: [2]float64{1074.7, 1079.8}, Shift: [2]float64{0.01, 0}}
		o, err := ReadUserData(u)
		if err != nil {
			t.Fatal(err)
		}
		if len(o.Pixels) != 29 || o.Pixels[0] != 1 {
			t.Fatalf("field of %d pixels from %d", len(o.Pixels), o.Pixels[0])
		}
		for p, at := range o.Pixels {
			for k := range 3 {
				for i, v := range o.Frames[0].Series(p, k) {
					plane := 3*i + k
					if timeFirst {
						plane = 10*k + i
					}
					if want := float32(1000*plane) + float32(at); v != want {
						t.Fatalf("pixel %d, tuning %d, frame %d: %g, want %g", at, k, i, v, want)
					}
				}
			}
		}
		if ts := o.LineTunings(1); math.Abs(ts[1].Wavelength-vacuum(1074.41)-0.01) > 1e-9 || math.Abs(ts[2].Offset-(vacuum(1074.53)+0.01-1074.7)) > 1e-9 {
			t.Errorf("tunings %+v", ts)
		}
		if es := o.LineExposures(1); len(es) != 10 || es[0].Time != 0 || math.Abs(es[9].Time-270) > 1e-9 {
			t.Errorf("exposures %+v", es)
		}
		for _, c := range []struct {
			change func(u *UserData)
			want   string
		}{
			{func(u *UserData) { u.Wavelengths[0] = []float64{1, 2} }, "2 wavelengths are given, the wavelength axis"},
			{func(u *UserData) { u.Times = []float64{0, 1} }, "2 times are given, the time axis"},
			{func(u *UserData) { u.Times = []float64{0, 1, 2, 3, 3, 5, 6, 7, 8, 9} }, "frame 5 is at 3 s, the one before at 3 s"},
			{func(u *UserData) { u.Axes = []string{"x", "y", "depth", "time"} }, `axis 3 is called "depth"`},
			{func(u *UserData) { u.Axes = []string{"x", "y", "time", "time"} }, "axes 3 and 4 are both time"},
			{func(u *UserData) { u.First = "[mine]" }, "want FILE or FILE[EXT]"},
		} {
			bad := u
			c.change(&bad)
			if _, err := ReadUserData(bad); err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("want %q: %v", c.want, err)
			}
		}
	}
}

// The step of an axis is CDELT times PC or the element of CD (Greisen & Calabretta 2002,
// A&A 395, 1061), and the times of a table have the unit of their column.
func TestStepsOfAxes(t *testing.T) {
	for name, cards := range map[string][]fits.Card{
		"PC":       {{Key: "CDELT3", Value: 15.0}, {Key: "PC3_3", Value: 2.0}},
		"CD":       {{Key: "CDELT3", Value: 1.0}, {Key: "CD3_3", Value: 30.0}},
		"CD alone": {{Key: "CD3_3", Value: 30.0}},
		"minutes":  {{Key: "CDELT3", Value: 0.5}, {Key: "CUNIT3", Value: "min"}},
	} {
		path := userFile(t, []int{8, 6, 5}, append([]fits.Card{{Key: "CTYPE3", Value: "TIME"}, {Key: "BUNIT", Value: "km/s"}}, cards...)...)
		o, err := ReadUserData(UserData{First: path})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if e := o.Exposures[1]; math.Abs(e.Time-30) > 1e-9 {
			t.Errorf("%s: the second frame is at %g s", name, e.Time)
		}
	}
}
