package line

import (
	"encoding/json"
	"math"
	"slices"
	"strings"
	"testing"
)

func TestExponents(t *testing.T) {
	p1, p2 := Exponents(PowerLaw{1, 1e8, 1.4, 1.8}, 3e7, 1.5e6, 1.1)
	if math.Abs(p1-1.4) > 1e-11 || math.Abs(p2-1.8) > 1e-11 {
		t.Errorf("exponents of a power law: %v, %v", p1, p2)
	}
	m := model(t, Default(), nil)
	// Derived limits: light alone excites level 2, so j1 ~ n, and j2 ~ n^1 too;
	// without light j ~ n^2 at low density; at high density Boltzmann, j ~ n.
	dark := model(t, Default(), func(o *Options) { o.Photo = 0 })
	for _, c := range []struct {
		m    *Model
		n    float64
		want float64
		tol  float64
	}{{m, 1e4, 1, 0.003}, {dark, 1e4, 2, 0.001}} {
		p1, p2 := Exponents(c.m, c.n, 1.6e6, 1.1)
		if math.Abs(p1-c.want) > c.tol || math.Abs(p2-c.want) > c.tol {
			t.Errorf("n = %g: exponents %.4f, %.4f, want %v", c.n, p1, p2, c.want)
		}
	}
	// The one-sided differences at the ends of the range continue the inner ones.
	for _, n := range []float64{1e4, 1e10} {
		a1, a2 := Exponents(m, n, 1.6e6, 1.1)
		inside := n * math.Exp(math.Copysign(2.5*step, 1e7-n))
		b1, b2 := Exponents(m, inside, 1.6e6, 1.1)
		if math.Abs(a1-b1) > 0.01 || math.Abs(a2-b2) > 0.01 {
			t.Errorf("at the end %g: %g, %g; just inside: %g, %g", n, a1, a2, b1, b2)
		}
	}
	if p1, _ := Exponents(m, 1e11, 1.6e6, 1.1); !math.IsNaN(p1) {
		t.Errorf("outside the range: %g", p1)
	}
}

func TestRadialSlopes(t *testing.T) {
	law := func(r float64) float64 { return 3e8 * math.Pow(r, -8) }
	q1, q2 := RadialSlopes(PowerLaw{1, 1e8, 1.4, 1.8}, law, 1.5e6, 1.2)
	if math.Abs(q1-1.4*8) > 1e-9 || math.Abs(q2-1.8*8) > 1e-9 {
		t.Errorf("slopes of a power law: %v, %v", q1, q2)
	}
	// Without light the slope is the exponent times that of the density.
	dark := model(t, Default(), func(o *Options) { o.Photo = 0 })
	p1, p2 := Exponents(dark, law(1.2), 1.5e6, 1.2)
	q1, q2 = RadialSlopes(dark, law, 1.5e6, 1.2)
	if math.Abs(q1-8*p1) > 1e-6 || math.Abs(q2-8*p2) > 1e-6 {
		t.Errorf("dark: %v, %v, want %v, %v", q1, q2, 8*p1, 8*p2)
	}
	// With it the fall of the light adds, in the 1074.7 line most of all.
	m := model(t, Default(), nil)
	p1, _ = Exponents(m, law(1.2), 1.5e6, 1.2)
	if q1, _ = RadialSlopes(m, law, 1.5e6, 1.2); !(q1 > 8*p1+0.5) {
		t.Errorf("slope %v is not above that of the density alone, %v", q1, 8*p1)
	}
}

func TestWidth(t *testing.T) {
	m := model(t, Default(), nil)
	// Derived: sqrt(2 k 1.6e6 K / 55.845 u) = 21.83 km/s.
	if got := Width(m.Mass(), 1.6e6, 0) / 1e5; math.Abs(got-21.83) > 0.005 {
		t.Errorf("thermal half-width %.3f km/s, want 21.83", got)
	}
	if got := Width(m.Mass(), 1.6e6, 30e5) / 1e5; math.Abs(got-math.Hypot(21.83, 30)) > 0.005 {
		t.Errorf("half-width %.3f km/s", got)
	}
	// Red is positive: 0.12 nm at 1074.7 nm is 33.5 km/s away from the observer.
	if got := Doppler(1074.7+0.12, 1074.7) / 1e5; math.Abs(got-33.5) > 0.05 {
		t.Errorf("Doppler velocity %.3f km/s, want +33.5", got)
	}
	if got := Doppler(Shifted(7e5, 1074.98), 1074.98); math.Abs(got-7e5) > 1e-4 {
		t.Errorf("there and back: %v cm/s, want 7e5", got)
	}
}

func TestRows(t *testing.T) {
	m := model(t, Default(), nil)
	rows, err := Rows(m, []float64{1e8, 1e9}, []float64{1.1}, []float64{1.6e6, 2e6})
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) != 4 || rows[1].Temperature != 2e6 || rows[2].Density != 1e9 {
		t.Fatalf("rows are %+v", rows)
	}
	if got := rows[0]; math.Abs(got.Ratio-0.3555) > 0.0005 || got.Ratio != got.Emissivity2/got.Emissivity1 || len(got.Populations) != 5 {
		t.Errorf("first row %+v", got)
	}
	text, err := json.Marshal(rows[0])
	if err != nil {
		t.Fatal(err)
	}
	var keys []string
	for _, f := range strings.Split(string(text), `":`) {
		if i := strings.LastIndexByte(f, '"'); i >= 0 {
			keys = append(keys, f[i+1:])
		}
	}
	want := []string{"n_e_cm3", "height_rsun", "temperature_K", "emissivity_1074_erg_cm3_s_sr", "emissivity_1079_erg_cm3_s_sr",
		"ratio_1079_1074", "exponent_1074", "exponent_1079", "populations"}
	if !slices.Equal(keys[:len(want)], want) {
		t.Errorf("keys are %q", keys)
	}
	if _, err := Rows(m, []float64{1e8}, []float64{0.9}, []float64{1.6e6}); err == nil {
		t.Error("a height below the surface is accepted")
	}
}
