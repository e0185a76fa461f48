package model

import (
	_ "embed"
	"fmt"
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios/strict"
)

// Harmonics is a table of spherical-harmonic coefficients of the radial field at the
// surface, as its file writes them:
//
//	B_r(theta, phi) = sum over l, m of N_lm P_lm(cos theta) [g cos(m phi) + h sin(m phi)]
//
// theta is the colatitude, phi the longitude, P_lm the associated Legendre function
// without the phase (-1)^m. N_lm is what Normalisation says:
//
//	schmidt      sqrt((2 - [m=0]) (l-m)!/(l+m)!), the convention of geomagnetism
//	orthonormal  the same times sqrt((2l+1)/(4 pi)): the integral of Y^2 is one
//
// Check states B_r at one point of the surface; a table that does not give it is
// refused, so that a wrong normalisation or sign cannot pass.
type Harmonics struct {
	About         string        `yaml:"about" about:"one line that says what this is"`
	Normalisation string        `yaml:"normalisation" one:"schmidt,orthonormal"`
	Check         HarmonicCheck `yaml:"check"`
	Coefficients  []Harmonic    `yaml:"coefficients" about:"[G]; what is not listed is zero"`
}

// A HarmonicCheck is the radial field [G] at one point of the surface [deg].
type HarmonicCheck struct {
	Latitude  float64 `yaml:"latitude" in:"-90..90" need:"given"`
	Longitude float64 `yaml:"longitude" in:"-360..360" need:"given"`
	Radial    float64 `yaml:"radial" in:"-1e5..1e5" need:"given"`
}

// A Harmonic is one pair of coefficients [G].
type Harmonic struct {
	L int     `yaml:"l" in:"1..90"`
	M int     `yaml:"m" in:"0..90"`
	G float64 `yaml:"g" in:"-1e5..1e5"`
	H float64 `yaml:"h" in:"-1e5..1e5"`
}

//go:embed harmonics.yaml
var exampleHarmonics []byte

// ReadHarmonics reads a table; the empty path is the embedded example.
func ReadHarmonics(path string) (*Harmonics, error) {
	data, name := exampleHarmonics, "the embedded harmonics"
	if path != "" {
		var err error
		if data, err = strict.ReadFile(path); err != nil {
			return nil, err
		}
		name = path
	}
	return ParseHarmonics(name, data)
}

// ParseHarmonics is ReadHarmonics from memory; name is for messages.
func ParseHarmonics(name string, data []byte) (*Harmonics, error) {
	var h Harmonics
	at, err := strict.Read(name, data, &h)
	if err != nil {
		return nil, err
	}
	var problems strict.Problems
	wrong := func(path, format string, args ...any) {
		problems = append(problems, at.Problem(path, format, args...))
	}
	if len(h.Coefficients) == 0 {
		wrong("coefficients", "at least one is needed")
	}
	seen := map[[2]int]bool{}
	for i, c := range h.Coefficients {
		entry := fmt.Sprintf("coefficients.%d", i)
		switch {
		case c.M > c.L:
			wrong(entry+".m", "%d is more than l = %d", c.M, c.L)
		case c.M == 0 && c.H != 0:
			wrong(entry+".h", "means nothing for m = 0; leave it out")
		case seen[[2]int{c.L, c.M}]:
			wrong(entry, "l = %d, m = %d stands there twice", c.L, c.M)
		}
		seen[[2]int{c.L, c.M}] = true
	}
	if err := problems.Err(); err != nil {
		return nil, err
	}
	const deg = math.Pi / 180
	p := spherical((90-h.Check.Latitude)*deg, h.Check.Longitude*deg)
	f := NewSourceSurface(&h, 2.5, 1)
	got := r3.Dot(f.B(p), p)
	scale := 0.0
	for _, c := range h.Coefficients {
		scale = math.Hypot(scale, math.Hypot(c.G, c.H))
	}
	if !(math.Abs(got-h.Check.Radial) <= 1e-3*scale) {
		wrong("check.radial", "the coefficients, read as %s, give B_r = %.6g G at latitude %g, longitude %g, not %.6g G; is the normalisation right, and the phase (-1)^m left out?",
			h.Normalisation, got, h.Check.Latitude, h.Check.Longitude, h.Check.Radial)
	}
	if err := problems.Err(); err != nil {
		return nil, err
	}
	return &h, nil
}

// A SourceSurface is the potential field of a table of harmonics whose lines are
// radial from the source surface on (Schatten, Wilcox & Ness 1969, Sol. Phys. 6, 442;
// Altschuler & Newkirk 1969, Sol. Phys. 9, 131). Beyond it the field falls as r^-2.
type SourceSurface struct {
	Rs     float64 // [solar radii]
	degree int
	// By order m, then degree l from max(m, 1) on, one array: Schmidt coefficients and
	// those of the recursion.
	terms []harmonicTerm
	norm  []float64 // of c_l and d_l, by l
}

type harmonicTerm struct {
	g, h float64
	a, b float64 // P_l = a cos(theta) P_(l-1) - b P_(l-2)
	e    float64 // sqrt(l^2 - m^2)
	e1   float64 // sqrt(l (l+1)/2)
}

// NewSourceSurface returns the field of a table, times factor, with its source surface
// at rs [solar radii].
func NewSourceSurface(h *Harmonics, rs, factor float64) *SourceSurface {
	f := &SourceSurface{Rs: rs}
	for _, c := range h.Coefficients {
		f.degree = max(f.degree, c.L)
	}
	n := f.degree
	at := make(map[[2]int]Harmonic)
	for _, c := range h.Coefficients {
		at[[2]int{c.L, c.M}] = c
	}
	f.norm = make([]float64, n+1)
	for l := 1; l <= n; l++ {
		f.norm[l] = 1 / (float64(l+1) + float64(l)*math.Pow(rs, -float64(2*l+1)))
	}
	for m := 0; m <= n; m++ {
		for l := m; l <= n; l++ {
			c := at[[2]int{l, m}]
			t := harmonicTerm{g: factor * c.G, h: factor * c.H, e: math.Sqrt(float64(l*l - m*m)), e1: math.Sqrt(float64(l*(l+1)) / 2)}
			if h.Normalisation == "orthonormal" {
				k := math.Sqrt(float64(2*l+1) / (4 * math.Pi))
				t.g, t.h = k*t.g, k*t.h
			}
			if l > m {
				t.a = float64(2*l-1) / t.e
				t.b = math.Sqrt(float64((l-1)*(l-1)-m*m)) / t.e
			}
			f.terms = append(f.terms, t)
		}
	}
	return f
}

// maxDegree bounds the scratch space of B.
const maxDegree = 90

// B implements Field. The Legendre functions are Schmidt's, by the recursion over the
// degree that is stable to far beyond degree 90 (Holmes & Featherstone 2002, J. Geod.
// 76, 279); those of order m > 0 are carried divided by sin(theta), so that nothing is
// divided by it and the poles are ordinary points.
func (f *SourceSurface) B(p r3.Vec) r3.Vec {
	r := norm(p)
	rho := math.Sqrt(p.X*p.X + p.Y*p.Y)
	st, ct := rho/r, p.Z/r
	sp, cp := 0.0, 1.0
	if rho > 0 {
		sp, cp = p.Y/rho, p.X/rho
	}
	// B_r = c_l(r) B_lm, and so on; beyond the source surface d_l = 0 and c_l ~ r^-2.
	beyond := 1.0
	q := r
	if r > f.Rs {
		beyond, q = f.Rs*f.Rs/(r*r), f.Rs
	}
	var c, d [maxDegree + 1]float64
	down, up := 1/(q*q), 1/(q*f.Rs) // q^-(l+2), q^(l-1) Rs^-(2l+1) at l = 0
	for l := 1; l <= f.degree; l++ {
		down /= q
		up *= q / (f.Rs * f.Rs)
		c[l] = (float64(l+1)*down + float64(l)*up) * f.norm[l] * beyond
		if r < f.Rs {
			d[l] = (down - up) * f.norm[l]
		}
	}
	var br, bt, bp float64
	last, now := 0.0, 1.0
	zonal := f.terms[:f.degree+1]
	for l := 1; l <= f.degree; l++ {
		t := &zonal[l]
		last, now = now, t.a*ct*now-t.b*last
		br += c[l] * t.g * now
	}
	sm, cm := sp, cp // sin, cos of m phi
	power := 1.0     // Schmidt's P_mm over sin(theta)
	terms := f.terms[f.degree+1:]
	for m := 1; m <= f.degree; m++ {
		if m > 1 {
			sm, cm = sm*cp+cm*sp, cm*cp-sm*sp
			power *= st * math.Sqrt(float64(2*m-1)/float64(2*m))
		}
		var rg, rh, tg, th, pg, ph float64 // sums over l, cosine and sine parts
		last, now := 0.0, power
		for n := range terms[:f.degree-m+1] {
			t := &terms[n]
			l := m + n
			if n > 0 {
				last, now = now, t.a*ct*now-t.b*last
			}
			slope := float64(l)*ct*now - t.e*last
			dg, dh := d[l]*t.g, d[l]*t.h
			rg += c[l] * t.g * now
			rh += c[l] * t.h * now
			tg += dg * slope
			th += dh * slope
			pg += dg * now
			ph += dh * now
			if m == 1 { // dP_l0/dtheta = -sqrt(l (l+1)/2) P_l1
				bt += d[l] * zonal[l].g * zonal[l].e1 * st * now
			}
		}
		terms = terms[f.degree-m+1:]
		br += st * (rg*cm + rh*sm)
		bt -= tg*cm + th*sm
		bp -= float64(m) * (ph*cm - pg*sm)
	}
	bRho := br*st + bt*ct
	return r3.Vec{X: bRho*cp - bp*sp, Y: bRho*sp + bp*cp, Z: br*ct - bt*st}
}
