package model

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios"
	"offplane/synth/fits"
)

// smooth is a corona without sheets or edges: a dipole and a quadrupole.
func smooth(t testing.TB) scenarios.Corona {
	t.Helper()
	path := filepath.Join(t.TempDir(), "table.yaml")
	// B_r at the pole: P_10 = 1, S_22 = 0.
	table := "about: test\nnormalisation: schmidt\ncheck: {latitude: 90, longitude: 0, radial: 6}\ncoefficients: [{l: 1, m: 0, g: 6, h: 0}, {l: 2, m: 2, g: 1, h: 0.5}]\n"
	if err := os.WriteFile(path, []byte(table), 0o600); err != nil {
		t.Fatal(err)
	}
	c := quiet(0, 4, 3.3)
	c.Fields = []scenarios.Field{{SourceSurface: &scenarios.SourceSurface{Table: path, Height: 2.5, Factor: 1}}}
	c.Density.Hole = nil
	return c
}

// nodes returns even axes with n cells from pole to pole.
func nodes(n int) (r, theta, phi []float64) {
	for i := range n + 1 {
		r = append(r, math.Exp(float64(i)/float64(n)))
		theta = append(theta, 180*float64(i)/float64(n))
	}
	for k := range 2 * n {
		phi = append(phi, 180*float64(k)/float64(n))
	}
	return r, theta, phi
}

// An analytic corona, written on a grid and read back: field, density, feet and travel
// times agree, and the error falls as the square of the spacing.
func TestGridConverges(t *testing.T) {
	c := smooth(t)
	exact := spatial(t, c)
	var scratch [2][]knot
	rms := func(n int) (b, ne, foot, tau float64) {
		path := filepath.Join(t.TempDir(), "grid.fits")
		r, theta, phi := nodes(n)
		if err := exact.WriteGrid(path, r, theta, phi); err != nil {
			t.Fatal(err)
		}
		g, err := New(context.Background(), scenarios.Corona{Grid: &scenarios.Grid{File: path}, ClosedBelow: 2.5, Helium: 0.1},
			Settings{Outer: 2.1, InwardFrom: 2.5, Seen: func(r3.Vec, float64) bool { return false }})
		if err != nil {
			t.Fatal(err)
		}
		how := exact.tracing()
		how.tolerance = 1e-7
		count := 0.0
		for _, p := range wedge(300) {
			x, y := exact.field.B(p), g.field.B(p)
			m := mixture{}
			u, v := exact.line(how, p, &scratch), g.line(how, p, &scratch)
			if u.kind != v.kind {
				continue
			}
			count++
			b += math.Pow(r3.Norm(r3.Sub(x, y))/r3.Norm(x), 2)
			ne += math.Pow(math.Log(g.density(p, &m)/exact.density(p, &mixture{share: 1})), 2)
			foot += math.Pow(r3.Norm(r3.Sub(u.foot[0], v.foot[0])), 2)
			tau += math.Pow(v.tau[0]/u.tau[0]-1, 2)
		}
		if count < 290 {
			t.Errorf("%d cells: only %g of 300 lines in the right class", n, count)
		}
		s := func(x float64) float64 { return math.Sqrt(x / count) }
		return s(b), s(ne), s(foot), s(tau)
	}
	b1, n1, f1, t1 := rms(24)
	b2, n2, f2, t2 := rms(48)
	for name, e := range map[string][2]float64{"field": {b1, b2}, "density": {n1, n2}, "feet": {f1, f2}, "times": {t1, t2}} {
		order := math.Log2(e[0] / e[1])
		t.Logf("%s: rms error %.2g at 7.5 deg, %.2g at 3.75 deg, order %.2f", name, e[0], e[1], order)
		if order < 1.7 || order > 2.5 || e[1] > 0.01 {
			t.Errorf("%s: rms errors %.2g and %.2g, order %.2f", name, e[0], e[1], order)
		}
	}
}

// values gives the value of an image at three node numbers; a mutation spoils a grid.
type (
	values   = func(name string, r, theta, phi float64) float64
	mutation = func(axes map[string][]float64, units map[string]string, v values) values
)

func TestGridRefused(t *testing.T) {
	write := func(change mutation) string {
		path := filepath.Join(t.TempDir(), "g.fits")
		w, err := fits.Create(path, nil)
		if err != nil {
			t.Fatal(err)
		}
		axes := map[string][]float64{"R": {1, 1.5, 2.2, 3}, "THETA": {0, 60, 120, 180}, "PHI": {0, 90, 180, 270}}
		units := map[string]string{"R": "solRad", "THETA": "deg", "PHI": "deg", "NE": "cm-3", "T": "K", "BR": "G", "BTHETA": "G", "BPHI": "G"}
		value := func(name string, r, theta, phi float64) float64 {
			return map[string]float64{"NE": 1e8, "T": 1e6, "BR": 2}[name]
		}
		if change != nil {
			value = change(axes, units, value)
		}
		for _, n := range []string{"R", "THETA", "PHI"} {
			if axes[n] == nil {
				continue
			}
			if err := w.AddTable(fits.Table{Name: n, Columns: []fits.Column{{Name: n, Unit: units[n], Data: axes[n]}}}); err != nil {
				t.Fatal(err)
			}
		}
		for _, v := range gridImages {
			if units[v.name] == "" {
				continue
			}
			cube, err := w.Cube(v.name, fits.Header{{Key: "BUNIT", Value: units[v.name]}}, 4, 4, 4)
			if err != nil {
				t.Fatal(err)
			}
			for i := range 4 {
				plane := make([]float32, 16)
				for n := range plane {
					r, th, ph := float64(i), float64(n/4), float64(n%4)
					plane[n] = float32(value(v.name, r, th, ph))
				}
				if err := cube.WritePlane(plane); err != nil {
					t.Fatal(err)
				}
			}
		}
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		return path
	}
	spoil := func(name string, x float64) mutation {
		return func(_ map[string][]float64, _ map[string]string, v values) values {
			return func(n string, r, th, ph float64) float64 {
				if n == name && r == 2 && th == 1 && ph == 3 {
					return x
				}
				return v(n, r, th, ph)
			}
		}
	}
	axis := func(name string, v ...float64) mutation {
		return func(a map[string][]float64, _ map[string]string, f values) values {
			a[name] = v
			return f
		}
	}
	unit := func(name, u string) mutation {
		return func(_ map[string][]float64, m map[string]string, f values) values {
			m[name] = u
			return f
		}
	}
	if _, err := ReadGrid(write(nil)); err != nil {
		t.Fatal(err)
	}
	for want, change := range map[string]mutation{
		"NE = NaN at r = 2.2 solRad, theta = 60 deg, phi = 270 deg is missing": spoil("NE", math.NaN()),
		"BTHETA = NaN at r = 2.2": spoil("BTHETA", math.NaN()),
		"NE = 0 at r = 2.2":       spoil("NE", 0),
		"T = -5 at r = 2.2":       spoil("T", -5),
		"R must ascend":           axis("R", 1, 1.5, 1.4, 3),
		"R runs from 1.05":        axis("R", 1.05, 1.5, 2, 3),
		"THETA runs from -90":     axis("THETA", -90, -30, 30, 90),
		"PHI runs from 0 to 360":  axis("PHI", 0, 120, 240, 360),
		"PHI runs from 0 to 90":   axis("PHI", 0, 30, 60, 90),
		"NE has the axes [4 4 4], but PHI, THETA and R have 3": axis("PHI", 0, 120, 240),
		"needs tables R, THETA and PHI":                        axis("R"),
		"T is in MK; write it in K":                            unit("T", "MK"),
		"THETA is in rad; write it in deg":                     unit("THETA", "rad"),
		"needs images NE, T, BR, BTHETA and BPHI":              unit("BPHI", ""),
	} {
		_, err := ReadGrid(write(change))
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v; want %q", err, want)
		}
	}
	g, err := ReadGrid(write(nil))
	if err != nil {
		t.Fatal(err)
	}
	if err := g.Reaches(3.2); err == nil || !strings.Contains(err.Error(), "sight.reach") {
		t.Error(err)
	}
}
