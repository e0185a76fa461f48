package model

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/spatial/r3"
	"pgregory.net/rapid"
)

// example returns the embedded source-surface field.
func example(t testing.TB) *SourceSurface {
	t.Helper()
	h, err := ReadHarmonics("")
	if err != nil {
		t.Fatal(err)
	}
	return NewSourceSurface(h, 2.5, 1)
}

// harmonic returns the field of a few harmonics.
func harmonic(normalisation string, rs float64, hs ...Harmonic) *SourceSurface {
	return NewSourceSurface(&Harmonics{Normalisation: normalisation, Coefficients: hs}, rs, 1)
}

// derivatives returns the divergence and the curl of a field at p by central
// differences of step h.
func derivatives(f Field, p r3.Vec, h float64) (div float64, curl r3.Vec) {
	d := func(e r3.Vec) r3.Vec {
		return r3.Scale(1/(2*h), r3.Sub(f.B(r3.Add(p, r3.Scale(h, e))), f.B(r3.Sub(p, r3.Scale(h, e)))))
	}
	dx, dy, dz := d(r3.Vec{X: 1}), d(r3.Vec{Y: 1}), d(r3.Vec{Z: 1})
	return dx.X + dy.Y + dz.Z, r3.Vec{X: dy.Z - dz.Y, Y: dz.X - dx.Z, Z: dx.Y - dy.X}
}

// No monopoles anywhere; no currents off the sheet, below the source surface and in
// unwarped fields.
func TestFieldsAreFreeOfDivergenceAndCurl(t *testing.T) {
	tipped := &belt{turn: tilt(0.3, 1.1), turned: true}
	warped := &belt{turn: tilt(0.3, 1.1), turned: true, warp: 0.25, waves: 2, from: 0.4}
	for _, c := range []struct {
		name      string
		f         Field
		currents  bool
		far       float64 // [solar radii]
		precision float64 // of divergence and curl over the field's largest component over its scale
	}{
		// Truncation of the central difference: h^2/6 times third derivatives, at most
		// some (9/r)^3 h^2/6 = 1e-6 of B/r for r^-9 terms.
		{"dipole, octupole and sheet", DipoleSheet{1.789, 1.538, 1.5}, false, 4, 1e-5},
		{"belt", DipoleSheet{3.3, 4, 0}, false, 4, 1e-5},
		{"tilted belt", beltField{DipoleSheet{3.3, 4, 0}, tipped}, false, 4, 1e-5},
		{"warped belt", beltField{DipoleSheet{3.3, 4, 0}, warped}, true, 4, 1e-5},
		{"radial", RadialField{3, 2}, false, 4, 1e-5},
		{"uniform", UniformField{r3.Vec{X: 1, Y: 2, Z: -1}}, false, 4, 1e-5},
		// The distance to the dipole is the scale: third derivatives of R^-3 over 0.2.
		{"buried dipole", BuriedDipole(0.3, 1, 0.2, 20, 0.5, 0.3), false, 4, 1e-3},
		{"source surface", example(t), false, 2.49, 1e-4},
		// (l/r)^3 h^2/6 = 5e-5 of B l/r.
		{"degree 30", harmonic("orthonormal", 2.5, Harmonic{L: 30, M: 17, G: 1, H: -2}), false, 2.49, 1e-2},
		{"sum", Sum{example(t), BuriedDipole(0.3, 1, 0.2, 20, 0.5, 0.3)}, false, 2.49, 1e-3},
	} {
		t.Run(c.name, func(t *testing.T) {
			rapid.Check(t, func(t *rapid.T) {
				r := rapid.Float64Range(1.01, c.far).Draw(t, "r")
				th := rapid.Float64Range(0.001, math.Pi-0.001).Draw(t, "theta")
				ph := rapid.Float64Range(0, 6.2).Draw(t, "phi")
				p := r3.Scale(r, spherical(th, ph))
				const h = 1e-4
				// The sheet itself carries a current.
				if b, ok := c.f.(beltField); ok && math.Abs(b.latitude(p)) < 0.01 {
					return
				}
				if math.Abs(th-math.Pi/2) < 0.01 {
					return
				}
				div, curl := derivatives(c.f, p, h)
				// Near an axis high orders vanish to below rounding: fields are some Gauss.
				scale := max(r3.Norm(c.f.B(p))/r, 1e-9)
				for _, e := range []r3.Vec{{X: 1}, {Y: 1}, {Z: 1}} { // nulls: by the gradient
					scale = max(scale, r3.Norm(r3.Sub(c.f.B(r3.Add(p, r3.Scale(h, e))), c.f.B(p)))/h)
				}
				if math.Abs(div) > c.precision*scale {
					t.Fatalf("div B = %g of %g at %v", div, scale, p)
				}
				if !c.currents && r3.Norm(curl) > c.precision*scale {
					t.Fatalf("curl B = %v of %g at %v", curl, scale, p)
				}
			})
		})
	}
}

// Radial functions c_l, d_l of the source-surface field (Schatten, Wilcox & Ness 1969,
// from memory) for l = 1 and 3, Rs = 2.5 (derived), read off B_r at the pole and
// B_theta at the equator of zonal harmonics.
func TestSourceSurfaceRadialFunctions(t *testing.T) {
	for _, c := range []struct{ r, c1, c3, d1, d3 float64 }{
		{1.1, 0.75903, 0.62164, 0.33300, 0.15454},
		{1.2, 0.59177, 0.40315, 0.24937, 0.09976},
		{1.5, 0.31812, 0.13429, 0.11255, 0.03196},
		{2, 0.15213, 0.03612, 0.02955, 0.00617},
		{2.5, 0.09302, 0.01790, 0, 0},
	} {
		for l, want := range map[int][2]float64{1: {c.c1, c.d1}, 3: {c.c3, c.d3}} {
			f := harmonic("schmidt", 2.5, Harmonic{L: l, G: 1})
			// P_l(1) = 1; dP_l/dtheta at the equator is -1 for l = 1, +3/2 for l = 3.
			slope := map[int]float64{1: -1, 3: 1.5}[l]
			got := [2]float64{f.B(r3.Vec{Z: c.r}).Z, f.B(r3.Vec{X: c.r}).Z / slope} // B_theta = -B_z there, = -d dP
			for k, name := range []string{"c", "d"} {
				if math.Abs(got[k]-want[k]) > 0.6e-5 {
					t.Errorf("%s_%d(%g) = %.5f, want %.5f", name, l, c.r, got[k], want[k])
				}
			}
		}
	}
}

// A dipole with source surface at 2.5: 0.5814 of its flux is open, and the boundary
// lies at latitude 40.32 deg (derived). Traced.
func TestSourceSurfaceOpenFlux(t *testing.T) {
	k := &Corona{field: harmonic("schmidt", 2.5, Harmonic{L: 1, G: 5}), closedBelow: 2.5, inwardFrom: 2.5, outer: 2.5}
	how := k.tracing()
	how.tolerance = 1e-9
	lo, hi := 0.2, 1.5 // latitudes
	for range 40 {
		m := (lo + hi) / 2
		path, end := how.follow(nil, k.field, spherical(math.Pi/2-m, 0.3), 1)
		if end == landed && len(path) > 1 {
			lo = m
		} else {
			hi = m
		}
	}
	if got := lo * 180 / math.Pi; math.Abs(got-40.32) > 0.02 {
		t.Errorf("boundary at %.3f deg", got)
	}
	// Flux north of the boundary over that of the hemisphere: cos^2(latitude).
	if got := math.Pow(math.Cos(lo), 2); math.Abs(got-0.5814) > 0.0005 {
		t.Errorf("open flux %.4f", got)
	}
}

// The Schmidt functions and their normalisation against closed forms and integrals, up
// to degree 30: the integral of Y_lm^2 over the sphere is one in the orthonormal
// convention and 4 pi/(2l+1) in Schmidt's.
func TestNormalisation(t *testing.T) {
	// r^2-scaled so that B_r on the surface is the harmonic itself.
	for _, q := range [][2]int{{1, 0}, {1, 1}, {2, 1}, {3, 3}, {9, 4}, {30, 0}, {30, 17}, {30, 30}} {
		for name, want := range map[string]float64{"orthonormal": 1, "schmidt": 4 * math.Pi / float64(2*q[0]+1)} {
			f := harmonic(name, 2.5, Harmonic{L: q[0], M: q[1], G: 1})
			sum := 0.0
			n := 2*q[1] + 1 // exact over longitude
			for i := range n {
				ph := 2 * math.Pi * float64(i) / float64(n)
				sum += quad.Fixed(func(z float64) float64 {
					p := spherical(math.Acos(z), ph)
					b := r3.Dot(f.B(p), p)
					return b * b
				}, -1, 1, 64, nil, 0) * 2 * math.Pi / float64(n)
			}
			near(t, fmt.Sprintf("%s %v", name, q), sum, want, 1e-9)
		}
	}
	// Closed forms (any table): Schmidt's S_22 = sqrt(3)/2 sin^2, S_31 = sqrt(6)/4 sin
	// (5 cos^2 - 1).
	th, ph := 0.7, 0.4
	s, c := math.Sincos(th)
	p := spherical(th, ph)
	near(t, "S_22", r3.Dot(harmonic("schmidt", 2.5, Harmonic{L: 2, M: 2, G: 2, H: 3}).B(p), p),
		math.Sqrt(3)/2*s*s*(2*math.Cos(2*ph)+3*math.Sin(2*ph)), 1e-12)
	near(t, "S_31", r3.Dot(harmonic("schmidt", 2.5, Harmonic{L: 3, M: 1, G: 2, H: 3}).B(p), p),
		math.Sqrt(6)/4*s*(5*c*c-1)*(2*math.Cos(ph)+3*math.Sin(ph)), 1e-12)
}

// A table read in the wrong normalisation, with the phase, or broken is refused.
func TestHarmonicsRefused(t *testing.T) {
	good := string(exampleHarmonics)
	for name, c := range map[string][3]string{
		"normalisation": {"normalisation: schmidt", "normalisation: orthonormal", "normalisation right"},
		"sign":          {"{l: 1, m: 1, g: 0.9, h: -0.6}", "{l: 1, m: 1, g: -0.9, h: 0.6}", "phase"},
		"twice":         {"{l: 1, m: 1, g: 0.9, h: -0.6}", "{l: 1, m: 0, g: 0.9}", "twice"},
		"order":         {"{l: 1, m: 1, g: 0.9, h: -0.6}", "{l: 1, m: 2, g: 0.9}", "more than l"},
		"zonal h":       {"{l: 1, m: 0, g: 6.4, h: 0}", "{l: 1, m: 0, g: 6.4, h: 1}", "means nothing"},
		"no check":      {"check: {latitude: 35", "check: {latitud: 35", "unknown key"},
		"word":          {"normalisation: schmidt", "normalisation: gauss", "one of schmidt, orthonormal"},
	} {
		bad := strings.Replace(good, c[0], c[1], 1)
		if bad == good {
			t.Fatalf("%s: nothing to replace", name)
		}
		if _, err := ParseHarmonics("x", []byte(bad)); err == nil || !strings.Contains(err.Error(), c[2]) {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := ParseHarmonics("x", bytes.Clone(exampleHarmonics)); err != nil {
		t.Error(err)
	}
}

// Above a radial dipole at depth d the field falls as (d/(d+h))^3: for d = 0.1 to
// 0.296, 0.125, 0.037 at h = 0.05, 0.1, 0.2 (derived). Strength, place and direction.
func TestBuriedDipole(t *testing.T) {
	up := spherical(math.Pi/2-0.3, 1)
	for _, elevation := range []float64{math.Pi / 2, 0, 0.6} {
		f := BuriedDipole(0.3, 1, 0.1, 20, 0.4, elevation)
		near(t, "strength", r3.Norm(f.B(up)), 20, 1e-12)
		for h, want := range map[float64]float64{0.05: 0.296, 0.1: 0.125, 0.2: 0.037} {
			near(t, "fall", r3.Norm(f.B(r3.Scale(1+h, up)))/20, want, 0.002)
		}
		near(t, "elevation", 1+r3.Dot(r3.Unit(f.Moment), up), 1+math.Sin(elevation), 1e-9)
	}
	// A moment that points west has its field point east above it.
	if b := BuriedDipole(0, 0, 0.1, 20, 0, 0).B(r3.Vec{X: 1}); b.Y >= 0 || math.Abs(b.X)+math.Abs(b.Z) > 1e-9 {
		t.Errorf("field above a westward dipole: %v", b)
	}
	// Pure dipole, 10 G at the pole: 7.513 and 5.787 above it, 5, 3.757, 2.894 on the
	// equator at r = 1, 1.1, 1.2 (derived).
	f := Dipole{Moment: r3.Vec{Z: 5}}
	for _, c := range [][3]float64{{1, 10, 5}, {1.1, 7.513, 3.757}, {1.2, 5.787, 2.894}} {
		near(t, "pole", r3.Norm(f.B(r3.Vec{Z: c[0]})), c[1], 2e-4)
		near(t, "equator", r3.Norm(f.B(r3.Vec{X: c[0]})), c[2], 2e-4) // four printed figures
	}
}

// The warp's latitude is constant along field lines' images: the sheet is where the
// radial field changes sign.
func TestWarpedSheet(t *testing.T) {
	b := &belt{turn: identity, warp: 0.3, waves: 2, from: 0.5}
	f := beltField{DipoleSheet{3.3, 4, 0}, b}
	var shifts []float64
	for i := range 24 {
		ph := float64(i) * 2 * math.Pi / 24
		lo, hi := -0.5, 0.5
		for range 50 {
			m := (lo + hi) / 2
			p := r3.Scale(2, spherical(math.Pi/2-m, ph))
			if b.latitude(p) < 0 {
				lo = m
			} else {
				hi = m
			}
		}
		below, above := r3.Scale(2, spherical(math.Pi/2-lo+1e-3, ph)), r3.Scale(2, spherical(math.Pi/2-lo-1e-3, ph))
		if r3.Dot(f.B(below), below) >= 0 || r3.Dot(f.B(above), above) <= 0 {
			t.Errorf("the radial field does not change sign at latitude %.3f, longitude %.2f", lo, ph)
		}
		shifts = append(shifts, lo)
	}
	// lambda = s cos^2(lambda) at s = 0.3: 0.2758 (solved by hand).
	if m := slices.Max(shifts); math.Abs(m-0.2758) > 0.002 {
		t.Errorf("greatest shift %.4f", m)
	}
}

func BenchmarkSourceSurface(b *testing.B) {
	f := example(b)
	p := r3.Vec{X: 0.3, Y: 1.1, Z: 0.4}
	for b.Loop() {
		f.B(p)
	}
}
