package synth

import (
	"math"
	"os"
	"path/filepath"
	"testing"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios"
)

// A corona written on a grid, read back and observed: radiance and Doppler signal agree
// with those of the formulas, and the errors fall as the square of the spacing.
func TestObservationOfAGridConverges(t *testing.T) {
	s, l := load(t, "quick", append([]string{"corona.density.hole=null", "camera.noise=false", "sight.reach=1.2 Rsun", "waves.damping=0"}, small...)...)
	table := filepath.Join(t.TempDir(), "table.yaml")
	text := "about: test\nnormalisation: schmidt\ncheck: {latitude: 90, longitude: 0, radial: 6}\ncoefficients: [{l: 1, m: 0, g: 6, h: 0}, {l: 2, m: 2, g: 1, h: 0.5}]\n"
	if err := os.WriteFile(table, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	s.Corona.Fields = []scenarios.Field{{SourceSurface: &scenarios.SourceSurface{Table: table, Height: 2.5, Factor: 1}}}
	observe := func(s *scenarios.Scenario) (*Scene, []float64, []float64) {
		c := scene(t, s, l)
		o, _, err := c.Observe(t.Context(), 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		var light, shift []float64
		d := c.tunings[0][2]
		f := o.Frames[0]
		for p := range o.Pixels {
			for i := range f.Frames {
				light = append(light, float64(f.Series(p, 1)[i]))
				shift = append(shift, doppler(float64(f.Series(p, 0)[i]), light[len(light)-1], float64(f.Series(p, 2)[i]), d))
			}
		}
		return c, light, shift
	}
	exact, light, shift := observe(s)
	errors := func(n int) (float64, float64) {
		path := filepath.Join(t.TempDir(), "grid.fits")
		var r, theta, phi []float64
		for i := range n + 1 {
			r = append(r, math.Exp(float64(i)/float64(n)))
			theta = append(theta, 180*float64(i)/float64(n))
		}
		for k := range 2 * n {
			phi = append(phi, 180*float64(k)/float64(n))
		}
		if err := exact.Corona.WriteGrid(path, r, theta, phi); err != nil {
			t.Fatal(err)
		}
		g := *s
		g.Corona.Grid = &scenarios.Grid{File: path}
		_, a, b := observe(&g)
		var dl, ds, ss float64
		for i := range light {
			dl += math.Pow(a[i]/light[i]-1, 2) / float64(len(light))
			ds += math.Pow(b[i]-shift[i], 2)
			ss += shift[i] * shift[i]
		}
		return math.Sqrt(dl), math.Sqrt(ds / ss)
	}
	l1, s1 := errors(40)
	l2, s2 := errors(80)
	t.Logf("radiance: %.2g at 4.5 deg, %.2g at 2.25 deg; Doppler signal over its rms: %.2g, %.2g", l1, l2, s1, s2)
	for name, e := range map[string][2]float64{"radiance": {l1, l2}, "Doppler signal": {s1, s2}} {
		if order := math.Log2(e[0] / e[1]); order < 1.6 || order > 2.5 {
			t.Errorf("%s: errors %.2g and %.2g, order %.2f", name, e[0], e[1], order)
		}
	}
	if l2 > 0.005 || s2 > 0.1 {
		t.Errorf("errors at the finer spacing: %.2g, %.2g", l2, s2)
	}
}

// Corona and observer turned together give the same observation: the belt's axis tipped
// toward the observer, from two longitudes. Only the cells of the driver, which lie on
// the Sun, differ; the truth maps do not.
func TestTurnedTogether(t *testing.T) {
	see := func(longitude string) *Truth {
		s, l := load(t, "tilted-belt", append([]string{"corona.belt.tilt=20 deg", "corona.belt.toward=" + longitude, "observer.longitude=" + longitude, "waves.amplitude=0.001 km/s"}, small...)...)
		c := scene(t, s, l)
		_, tr, err := c.Observe(t.Context(), 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		return tr
	}
	a, b := see("0 deg"), see("137 deg")
	for i, m := range a.Maps {
		for p, x := range m.Data {
			y := b.Maps[i].Data[p]
			if math.Abs(float64(x-y)) > 1e-4*math.Abs(float64(x)) {
				t.Fatalf("%s at %d: %g, turned %g", m.Name, p, x, y)
			}
		}
	}
}

// A belt tipped toward the observer by its tilt is the straight belt seen from that
// latitude.
func TestTiltIsLatitude(t *testing.T) {
	see := func(set ...string) *Scene {
		s, l := load(t, "quick", append(set, small...)...)
		return scene(t, s, l)
	}
	a := see("observer.latitude=12 deg")
	b := see("corona.belt={tilt: 12 deg, toward: 0 deg}")
	for _, p := range []r3.Vec{{X: 0.2, Y: 1.1, Z: 0.1}, {X: -0.5, Y: 1.05, Z: 0.4}} {
		q, r := sampled(a, p.X, 1, p.Y, p.Z), sampled(b, p.X, 1, p.Y, p.Z)
		if math.Abs(q.j[0]/r.j[0]-1) > 1e-9 || math.Abs(a.angle(&q)-b.angle(&r)) > 1e-7 || math.Abs(q.los[0]-r.los[0]) > 1e-9 {
			t.Errorf("at %v: %+v, tilted %+v", p, q, r)
		}
	}
}

// Rotation shifts the line by Omega times the distance to the west, away from the
// observer in the west, and does nothing else.
func TestRotationShiftsTheLine(t *testing.T) {
	see := func(set ...string) ([]float32, []float64, []float64) {
		s, l := load(t, "quick", append(append(set, "sight.plane=true", "camera.noise=false", "camera.point_spread=0 arcsec", "waves.amplitude=0 km/s"), small...)...)
		c := scene(t, s, l)
		o, tr, err := c.Observe(t.Context(), 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		var v, west []float64
		for i, p := range o.Pixels {
			m := o.Mean[0]
			v = append(v, doppler(float64(m[0][i]), float64(m[1][i]), float64(m[2][i]), c.tunings[0][2]))
			y, _ := c.Grid.Sky(int(p)%c.Grid.Nx, int(p)/c.Grid.Nx)
			west = append(west, y)
		}
		return tr.Maps.Get("SPEED_SKY").Data, v, west
	}
	a, still, _ := see()
	b, turning, west := see("corona.rotation={period: 654.6072 h}")
	for i := range still {
		want := 2 * math.Pi * 6.957e5 / (654.6072 * 3600) * west[i] // [km/s]
		if math.Abs(still[i]) > 1e-3 || math.Abs(turning[i]-want) > 2e-3 {
			t.Fatalf("at %.3f solar radii west: %.4f km/s still, %.4f turning, want %.4f", west[i], still[i], turning[i], want)
		}
	}
	for i := range a {
		if a[i] != b[i] && a[i] == a[i] {
			t.Fatal("rotation changes the truth")
		}
	}
}
