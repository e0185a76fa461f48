package obs

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"offplane/synth/fits"
)

// turnedHeader returns the header of an image whose pixels measure dx by dy arcsec, turned by
// rho degrees, with the reference pixel (cx, cy) at (lon, lat) arcsec.
func turnedHeader(code string, dx, dy, rho, cx, cy, lon, lat float64) fits.Header {
	s, c := math.Sincos(rho * math.Pi / 180)
	return fits.Header{
		{Key: "CTYPE1", Value: "HPLN-" + code}, {Key: "CTYPE2", Value: "HPLT-" + code},
		{Key: "CUNIT1", Value: "arcsec"}, {Key: "CUNIT2", Value: "arcsec"},
		{Key: "CDELT1", Value: dx}, {Key: "CDELT2", Value: dy}, {Key: "CRPIX1", Value: cx}, {Key: "CRPIX2", Value: cy},
		{Key: "CRVAL1", Value: lon}, {Key: "CRVAL2", Value: lat},
		{Key: "PC1_1", Value: c}, {Key: "PC1_2", Value: -s * dy / dx}, {Key: "PC2_1", Value: s * dx / dy}, {Key: "PC2_2", Value: c},
	}
}

func mustPlate(t testing.TB, h fits.Header, nx, ny int) *plate {
	t.Helper()
	p, err := readPlate(h, nx, ny)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// An image of f, of directions [solar radii], at the centres of its pixels.
func imageOf(p *plate, distance float64, unit string, f func(y, z float64) float64) *Image {
	m := &Image{Map: Map{Name: "M", Unit: unit, Data: make([]float32, p.nx*p.ny)}, plate: p}
	for i := range m.Data {
		d := p.ray(float64(i%p.nx), float64(i/p.nx))
		m.Data[i] = float32(f(distance*d[1]/d[0], distance*d[2]/d[0]))
	}
	return m
}

// Pixel to sky and back, in every projection, orientation and shape, is the identity; and
// units, CROTA2, CD and the order of the axes are ways to say the same.
func TestPlateThereAndBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		code := rapid.SampledFrom([]string{"TAN", "SIN", "ARC", "ZEA", "CAR"}).Draw(t, "code")
		dx, dy := rapid.Float64Range(-20, 20).Filter(func(v float64) bool { return math.Abs(v) > 0.1 }).Draw(t, "dx"), rapid.Float64Range(0.1, 20).Draw(t, "dy")
		rho := rapid.Float64Range(-180, 180).Draw(t, "rho")
		lon, lat := rapid.Float64Range(-3000, 3000).Draw(t, "lon"), rapid.Float64Range(-3000, 3000).Draw(t, "lat")
		p, err := readPlate(turnedHeader(code, dx, dy, rho, 30, 20, lon, lat), 60, 40)
		if err != nil {
			t.Fatal(err)
		}
		x, y := rapid.Float64Range(-10, 70).Draw(t, "x"), rapid.Float64Range(-10, 50).Draw(t, "y")
		if bx, by := p.pixel(p.ray(x, y)); math.Hypot(bx-x, by-y) > 1e-6 {
			t.Fatalf("(%g, %g) comes back as (%g, %g)", x, y, bx, by)
		}
	})
	h := turnedHeader("TAN", 2, 3, 25, 10, 12, 700, -300)
	want := mustPlate(t, h, 20, 30).ray(3, 4)
	near := func(name string, h fits.Header, turn bool) {
		t.Helper()
		x, y := 3.0, 4.0
		if turn {
			x, y = y, x
		}
		got := mustPlate(t, h, 20, 30).ray(x, y)
		for i := range got {
			if math.Abs(got[i]-want[i]) > 1e-12 {
				t.Errorf("%s: %v, want %v", name, got, want)
				break
			}
		}
	}
	set := func(over ...fits.Card) fits.Header {
		out := append(fits.Header{}, h...)
		for _, c := range over {
			out.Set(c.Key, c.Value, "")
		}
		return out
	}
	near("degrees", set(fits.Card{Key: "CUNIT1", Value: "deg"}, fits.Card{Key: "CUNIT2", Value: "deg"}, fits.Card{Key: "CDELT1", Value: 2.0 / 3600}, fits.Card{Key: "CDELT2", Value: 3.0 / 3600},
		fits.Card{Key: "CRVAL1", Value: 700.0 / 3600}, fits.Card{Key: "CRVAL2", Value: -300.0 / 3600}), false)
	s, c := math.Sincos(25 * math.Pi / 180)
	near("CD", set(fits.Card{Key: "CD1_1", Value: 2 * c}, fits.Card{Key: "CD1_2", Value: -3 * s}, fits.Card{Key: "CD2_1", Value: 2 * s}, fits.Card{Key: "CD2_2", Value: 3 * c}), false)
	var crota fits.Header
	for _, card := range h {
		if !strings.HasPrefix(card.Key, "PC") {
			crota = append(crota, card)
		}
	}
	near("CROTA2", append(crota, fits.Card{Key: "CROTA2", Value: 25.0}), false)
	// Axes exchanged: rows of the matrix and columns too.
	near("latitude first", fits.Header{
		{Key: "CTYPE1", Value: "HPLT-TAN"}, {Key: "CTYPE2", Value: "HPLN-TAN"}, {Key: "CUNIT1", Value: "arcsec"}, {Key: "CUNIT2", Value: "arcsec"},
		{Key: "CRPIX1", Value: 12.0}, {Key: "CRPIX2", Value: 10.0}, {Key: "CRVAL1", Value: -300.0}, {Key: "CRVAL2", Value: 700.0},
		{Key: "CD1_1", Value: 3 * c}, {Key: "CD1_2", Value: 2 * s}, {Key: "CD2_1", Value: -3 * s}, {Key: "CD2_2", Value: 2 * c},
	}, true)
}

func TestPlateErrors(t *testing.T) {
	for want, over := range map[string]fits.Card{
		"without world coordinates":     {Key: "CTYPE1", Value: ""},
		"must be helioprojective":       {Key: "CTYPE1", Value: "RA---TAN"},
		"the projection is":             {Key: "CTYPE2", Value: "HPLT-STG"},
		"must be arcsec, arcmin":        {Key: "CUNIT2", Value: "m"},
		"CDELT1 is missing":             {Key: "CDELT1", Value: 0.0},
		"LONPOLE is 90":                 {Key: "LONPOLE", Value: 90.0},
		"has no inverse":                {Key: "CD1_1", Value: 0.0},
		"the projection is \"TAN-SIP\"": {Key: "CTYPE1", Value: "HPLN-TAN-SIP"},
	} {
		h := turnedHeader("TAN", 1, 1, 0, 1, 1, 0, 0)
		h.Set(over.Key, over.Value, "")
		if _, err := readPlate(h, 2, 2); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s = %v: %v, want %q", over.Key, over.Value, err, want)
		}
	}
}

var skewGrid = Grid{Nx: 60, Ny: 50, Pixel: 5, CentreX: -150, CentreY: 25.5, Roll: 10, Distance: 215, Start: time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)}

// What an area average may not do is make or lose flux: an image of random numbers that
// lies within the grid has the same integral before and after, whatever its turn, and a
// constant stays one (by definition).
func TestAreaAverageKeepsTheMean(t *testing.T) {
	g := skewGrid
	y, z := g.Sky(30, 25)
	rnd := rand.New(rand.NewPCG(1, 2))
	for _, rho := range []float64{0, 10, 33, 145} {
		p := mustPlate(t, turnedHeader("TAN", -1.3, 2.1, rho, 35, 25, y/g.Distance/Arcsec, z/g.Distance/Arcsec), 70, 50)
		m := imageOf(p, 215, "G", func(_, _ float64) float64 { return rnd.ExpFloat64() })
		one := imageOf(p, 215, "G", func(_, _ float64) float64 { return 7 })
		sums, weight := p.average(m.channels(), g.plate())
		total, area, want := 0.0, 0.0, 0.0
		for i := range weight {
			total += sums[0][i]
			area += weight[i]
			if weight[i] > 1+1e-9 {
				t.Fatalf("%g deg: pixel %d is covered %g times", rho, i, weight[i])
			}
		}
		for _, v := range m.Data {
			want += float64(v) * 1.3 * 2.1 / 25
		}
		// The scale of TAN changes by the square of the distance from its tangent point,
		// 1000 arcsec or 5e-3 rad.
		if math.Abs(total/want-1) > 1e-4 || math.Abs(area/(70*50*1.3*2.1/25)-1) > 1e-4 {
			t.Errorf("%g deg: integral %.6f of %.6f, area %g", rho, total, want, area)
		}
		on, how := one.On(&g)
		n := 0
		for _, v := range on.Data {
			if v == v {
				n++
				if math.Abs(float64(v)-7) > 1e-6 {
					t.Fatalf("%g deg: 7 became %g", rho, v)
				}
			}
		}
		if how != AreaAverage || n < 300 {
			t.Errorf("%g deg: %s, %d pixels", rho, how, n)
		}
	}
}

// A smooth map that was sampled on other pixels comes back to within the error of
// resampling: for pixels s and a target of h (lengths on the sky) |grad f| s/4 of steps
// at the edges of a target, and curvature h^2/8 per dimension for what lies between
// (derived; means of a parabola are off by h^2/24 of its curvature, chords by h^2/8).
func TestResamplingError(t *testing.T) {
	g := skewGrid
	f := func(y, z float64) float64 { return 3 * math.Exp(-(math.Hypot(y, z)-1.05)/0.2) }
	for _, c := range []struct {
		code         string
		dx, dy, rho  float64
		lon, lat     float64
		how          Resampling
		edge, curved float64
	}{
		{"TAN", 1, 1, 0, 0, 0, AreaAverage, 0.25, 1.0 / 24},
		{"TAN", 2.2, 2.2, 40, 900, 100, AreaAverage, 0.25, 1.0 / 24},
		{"ARC", -1.5, 3, -77, 900, 100, AreaAverage, 0.25, 1.0 / 24},
		{"TAN", 5, 5, 30, 0, 0, Bilinear, 0, 2.0 / 8},
		{"SIN", 9, 7, 130, 1000, -50, Bilinear, 0, 2.0 / 8},
	} {
		q := mustPlate(t, turnedHeader(c.code, c.dx, c.dy, c.rho, 1, 1, c.lon, c.lat), 1, 1)
		q.cx, q.cy = 0, 0
		d := g.plate().ray(30, 25)
		px, py := q.pixel(d)
		n := int(700 / q.size() * Arcsec)
		q.nx, q.ny = n, n
		q.cx, q.cy = float64(n/2)-px, float64(n/2)-py
		on, how := imageOf(q, g.Distance, "G", f).On(&g)
		if how != c.how {
			t.Errorf("%+v: %s", c, how)
		}
		worst, most := 0.0, 0.0
		s, h := q.size()*g.Distance, max(math.Abs(c.dx), math.Abs(c.dy), g.Pixel)*Arcsec*g.Distance
		for i, v := range on.Data {
			if v != v {
				t.Fatalf("%+v: pixel %d has no value", c, i)
			}
			y, z := g.Sky(i%g.Nx, i/g.Nx)
			want := f(y, z)
			// |grad f| = f/0.2, curvature f/0.04 along r.
			bound := want * (c.edge*s/0.2 + c.curved*h*h/0.04)
			worst, most = max(worst, math.Abs(float64(v)-want)/bound), max(most, math.Abs(float64(v)/want-1))
		}
		t.Logf("%s %gx%g arcsec at %g deg: worst error %.2g, %.2f of the bound", c.code, c.dx, c.dy, c.rho, most, worst)
		if worst > 1 {
			t.Errorf("%+v: error %.2f times the bound", c, worst)
		}
	}
}

// Coinciding pixels stay as they are, values without number have no weight, directions
// are averaged as axes, integers come from the nearest pixel, and what lies beside the
// image has no value.
func TestOnGrid(t *testing.T) {
	g := skewGrid
	m := imageOf(g.plate(), 215, "G", func(y, z float64) float64 { return y })
	if on, how := m.On(&g); how != "" || &on.Data[0] != &m.Data[0] {
		t.Errorf("coinciding pixels: %q", how)
	}
	half := skewGrid
	half.Nx, half.Ny, half.Pixel, half.CentreX, half.CentreY = 120, 100, 2.5, -300.5, 50.5
	m = imageOf(half.plate(), 215, "G", func(y, z float64) float64 { return y })
	for i := range m.Data { // one of four, then three of four
		if x, y := i%120, i/120; x%2+y%2 == 2 || y >= 50 && x%2+y%2 >= 1 {
			m.Data[i] = float32(math.NaN())
		}
	}
	on, _ := m.On(&g)
	for i, v := range on.Data {
		if (v == v) != (i/60 < 25) {
			t.Fatalf("pixel %d: %g", i, v)
		}
	}
	a := imageOf(half.plate(), 215, "deg", func(y, z float64) float64 { return 0 })
	for i := range a.Data {
		a.Data[i] = []float32{175, 5}[i%2] // mean direction 0, mean number 90
	}
	on, _ = a.On(&g)
	if v := float64(on.Data[100]); math.Min(v, 180-v) > 1e-4 {
		t.Errorf("175 and 5 deg have the mean %g", v)
	}
	codes := &Image{Map: Map{Name: "C", Ints: make([]int32, 120*100)}, plate: half.plate()}
	for i := range codes.Ints {
		codes.Ints[i] = int32(i%120)/2 + 1
	}
	if on, how := codes.On(&g); how != Nearest || on.Ints[60*10+17] != 18 && on.Ints[60*10+17] != 19 {
		t.Errorf("%s: %d", how, on.Ints[60*10+17])
	}
	far := skewGrid
	far.CentreX = 5000
	on, _ = m.On(&far)
	for _, v := range on.Data {
		if v == v {
			t.Fatal("a value beside the image")
		}
	}
}

// The grid of an image is its own where a grid can be, and else covers it.
func TestGridOfImage(t *testing.T) {
	own, err := skewGrid.header()
	if err != nil {
		t.Fatal(err)
	}
	m := &Image{header: own, plate: skewGrid.plate()}
	if g, err := m.Grid(); err != nil || g.Roll != 10 || g.Nx != 60 || g.CentreX != -150 {
		t.Errorf("%+v, %v", g, err)
	}
	h := turnedHeader("TAN", 2, 8, 30, 1, 1, 900, 100)
	m = &Image{header: h, plate: mustPlate(t, h, 100, 50)}
	g, err := m.Grid()
	if err != nil || math.Abs(g.Pixel-4) > 1e-9 || g.Roll != 0 {
		t.Fatalf("%+v, %v", g, err)
	}
	for _, c := range [][2]float64{{0, 0}, {99, 0}, {0, 49}, {99, 49}} {
		x, y := g.plate().pixel(m.plate.ray(c[0], c[1]))
		if !(x > -0.51 && y > -0.51 && x < float64(g.Nx)-0.49 && y < float64(g.Ny)-0.49) {
			t.Errorf("corner %v lies at (%g, %g) of %d x %d", c, x, y, g.Nx, g.Ny)
		}
	}
}
