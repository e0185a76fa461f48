package camera

import (
	"context"
	"math"
	"slices"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"

	"offplane/scenarios"
)

func settings(change func(c *scenarios.Camera)) scenarios.Camera {
	c := scenarios.Default().Camera
	c.PointSpread, c.Noise = 0, false
	change(&c)
	return c
}

// Light through the compact kernels is conserved, whatever makes them.
func TestKernelConservesLight(t *testing.T) {
	for _, c := range []scenarios.Camera{
		settings(func(c *scenarios.Camera) {}),
		settings(func(c *scenarios.Camera) { c.PointSpread = 6 }),
		settings(func(c *scenarios.Camera) { c.Diffraction = true }),
		settings(func(c *scenarios.Camera) { c.Diffraction, c.Seeing, c.PointSpread = true, 2, 1 }),
		settings(func(c *scenarios.Camera) { c.Seeing, c.Aperture = 10, 150 }),
	} {
		k := newKernel(c, 4.35*arcsec, rest[0])
		sum := 0.0
		for i, w := range k.Weight {
			sum += w
			if w != k.Weight[len(k.Weight)-1-i] || w < 0 {
				t.Errorf("weights %v and %v", w, k.Weight[len(k.Weight)-1-i])
			}
		}
		if math.Abs(sum-1) > 1e-14 {
			t.Errorf("light %v", sum)
		}
	}
}

// A point source through the aperture alone gives the diffraction pattern
// [2 J1(x)/x]^2, x = pi D theta/lambda, over each pixel (Airy 1835, Trans. Camb. Phil.
// Soc. 5, 283, from memory): the integral of the pattern itself against that of its
// transform.
func TestPointSourceGivesTheDiffractionPattern(t *testing.T) {
	const pixel = 0.8 * arcsec
	c := settings(func(c *scenarios.Camera) { c.Diffraction = true })
	k := newKernel(c, pixel, rest[0])
	scale := math.Pi * float64(c.Aperture) / (rest[0] * 1e-7) * pixel // x per pixel
	pattern := func(u, v float64) float64 {
		x := scale * math.Hypot(u, v)
		if x < 1e-6 {
			return scale * scale / (4 * math.Pi)
		}
		j := 2 * math.J1(x) / x
		return j * j * scale * scale / (4 * math.Pi)
	}
	total := 0.0 // what the kernel holds of the pattern
	shares := map[[2]int]float64{}
	for i := 0; i <= k.Half; i++ {
		for j := 0; j <= k.Half; j++ {
			s := quad.Fixed(func(u float64) float64 {
				return quad.Fixed(func(v float64) float64 { return pattern(u, v) }, float64(j)-0.5, float64(j)+0.5, 24, nil, 1)
			}, float64(i)-0.5, float64(i)+0.5, 24, nil, 1)
			shares[[2]int{i, j}] = s
			f := 1.0
			if i > 0 {
				f *= 2
			}
			if j > 0 {
				f *= 2
			}
			total += f * s
		}
	}
	if k.Half < 3 || total < 0.97 {
		t.Fatalf("half-width %d holds %.4f of the light", k.Half, total)
	}
	n := 2*k.Half + 1
	for i := 0; i <= k.Half; i++ {
		for j := 0; j <= k.Half; j++ {
			got, want := k.Weight[(k.Half+j)*n+k.Half+i], shares[[2]int{i, j}]/total
			if math.Abs(got-want) > 1e-6 {
				t.Errorf("pixel (%d, %d): share %.7f, want %.7f", i, j, got, want)
			}
		}
	}
}

// The full width at half maximum of the seeing is what it is called, on fine pixels.
func TestSeeingHasItsWidth(t *testing.T) {
	c := settings(func(c *scenarios.Camera) { c.Seeing = 1.5 })
	k := newKernel(c, 0.25*arcsec, rest[0])
	n := 2*k.Half + 1
	middle := k.Weight[k.Half*n+k.Half]
	// Half maximum at 3 pixels; between 2 and 4 the logarithm is smooth.
	a, b, d := k.Weight[k.Half*n+k.Half+2]/middle, k.Weight[k.Half*n+k.Half+3]/middle, k.Weight[k.Half*n+k.Half+4]/middle
	if !(a > 0.5 && d < 0.5) || math.Abs(b-0.5) > 0.012 { // pixels of a sixth of the width add 1 % in square
		t.Errorf("at 2, 3, 4 pixels: %.4f, %.4f, %.4f of the maximum", a, b, d)
	}
}

// Scattered light: a point source gives the stated law, and what lies on the grid
// comes back but for the part that the law sends beyond.
func TestScatterHasItsLaw(t *testing.T) {
	const nx, ny, pixel = 200, 200, 5.0
	c := settings(func(c *scenarios.Camera) { c.Scatter = &scenarios.Scatter{Share: 0.1, Core: 60, Exponent: 4} })
	var all []int32
	for p := range int32(nx * ny) {
		all = append(all, p)
	}
	s := NewScatter(c, pixel*arcsec, nx, all)
	image := make([][]float32, nx*ny)
	for p := range image {
		image[p] = make([]float32, 1)
	}
	const at = 100*nx + 100
	image[at][0] = 1e6
	if err := s.Apply(context.Background(), func(i int) []float32 { return image[i] }, 0); err != nil {
		t.Fatal(err)
	}
	sum := 0.0
	for p, x := range image {
		sum += float64(x[0])
		dx, dy := float64(p%nx-100)*pixel, float64(p/nx-100)*pixel
		r := math.Hypot(dx, dy)
		if p == at || r > 300 {
			continue
		}
		// (e-2)/(2 pi core^2) (1 + (r/core)^2)^(-e/2) per square arc second.
		want := 1e6 * 0.1 * pixel * pixel * 2 / (2 * math.Pi * 60 * 60) * math.Pow(1+r*r/3600, -2)
		if e := math.Abs(float64(x[0])/want - 1); e > 0.1 || r > 120 && e > 0.03 { // bins of a quarter of the core, the source in the middle of one
			t.Fatalf("%.0f arcsec from the source: %.4g, want %.4g", r, x[0], want)
		}
	}
	// Beyond 500 arcsec lies (1 + (500/60)^2)^-1 = 1.4 % of what is scattered.
	if lost := 1 - sum/1e6; lost < 0 || lost > 0.1*0.016 {
		t.Errorf("%.4f of the light is gone", lost)
	}
}

// A uniform image stays uniform but for the edge; the law adds up to one.
func TestScatterKeepsAUniformImage(t *testing.T) {
	const nx = 300
	c := settings(func(c *scenarios.Camera) { c.Scatter = &scenarios.Scatter{Share: 0.5, Core: 20, Exponent: 8} })
	var all []int32
	for p := range int32(nx * nx) {
		all = append(all, p)
	}
	s := NewScatter(c, 5*arcsec, nx, all)
	image := make([]float32, nx*nx)
	for p := range image {
		image[p] = 3
	}
	if err := s.Apply(context.Background(), func(i int) []float32 { return image[i : i+1] }, 0); err != nil {
		t.Fatal(err)
	}
	if x := image[150*nx+150]; math.Abs(float64(x)/3-1) > 2e-3 {
		t.Errorf("%v in the middle, want 3", x)
	}
	if x := image[150*nx]; !(x < 2.6 && x > 2) {
		t.Errorf("%v at the edge", x)
	}
}

// Cubic convolution leaves quadratics alone and moves them by the right way.
func TestCubic(t *testing.T) {
	for _, f := range []float64{0, 0.1, 0.5, 0.93} {
		w := cubic(f)
		var one, line, square float64
		for i, a := range w {
			x := float64(i - 1)
			one += a
			line += a * x
			square += a * x * x
		}
		if math.Abs(one-1) > 1e-14 || math.Abs(line-f) > 1e-14 || math.Abs(square-f*f) > 1e-14 {
			t.Errorf("at %g: %g, %g, %g", f, one, line, square)
		}
	}
}

// Drift and jitter are of the stated size, and the image moves the right way.
func TestPointing(t *testing.T) {
	c := settings(func(c *scenarios.Camera) {
		c.Pointing, c.Duration = &scenarios.Pointing{Jitter: 0.5, DriftX: 8.7, DriftY: -4.35}, 4000*30
	})
	k := New(c, 3, 4.35*arcsec, disc, rest)
	const n = 4000
	plan := NewSchedule(c, n, 3)
	moves, reach := k.Moves(plan, 0, 1, n)
	var sum, sum2 [2]float64
	for f, m := range moves {
		// Where the pixel looks: the mean place of the weights.
		var at [2]float64
		for i := range 4 {
			at[0] += float64(m.Wx[i]) * float64(m.X+i)
			at[1] += float64(m.Wy[i]) * float64(m.Y+i)
		}
		time := float64(f)*30 - float64(c.Duration)/2
		for i, drift := range [2]float64{8.7 / 4.35 / 3600, -1.0 / 3600} {
			e := at[i] + drift*time // the image moves by +drift, the pixel looks at -drift
			sum[i] += e / n
			sum2[i] += e * e / n
		}
		if most := Reach(c, 4.35*arcsec); reach > most || most > reach+4 {
			t.Fatalf("reach %d, at most %d", reach, most)
		}
		if m.X < -reach || m.X+3 > reach || m.Y < -reach || m.Y+3 > reach {
			t.Fatalf("reach %d, move %+v", reach, m)
		}
	}
	for i := range 2 {
		if s := 0.5 / 4.35; math.Abs(math.Sqrt(sum2[i])/s-1) > 0.05 || math.Abs(sum[i]) > 4*s/math.Sqrt(n) {
			t.Errorf("axis %d: mean %g, rms %g, want 0 and %g", i, sum[i], math.Sqrt(sum2[i]), s)
		}
	}
	if m, _ := New(settings(func(c *scenarios.Camera) {}), 3, arcsec, disc, rest).Moves(plan, 0, 1, n); m != nil {
		t.Error("moves without pointing")
	}
}

// A straight edge over a round aperture: half of it at the middle, and the integral
// over the edge by a sum over the aperture.
func TestOcculter(t *testing.T) {
	c := settings(func(c *scenarios.Camera) {
		c.Occulter, c.FieldStop = &scenarios.Occulter{Radius: 1.1, Width: 100}, 1.3
	})
	k := New(c, 1, 4.35*arcsec, disc, rest)
	const a = 1 / 959.23
	for _, q := range [][2]float64{{1.1, 0.5}, {1.1 - 51*a, 0}, {1.1 + 51*a, 1}, {1.2999, 1}, {1.3001, 0}} {
		if got := k.Open(q[0], a); math.Abs(got-q[1]) > 1e-12 {
			t.Errorf("at %g: %g, want %g", q[0], got, q[1])
		}
	}
	got := k.Open(1.1+20*a, a) // the edge 0.4 radii from the middle of the aperture
	want := quad.Fixed(func(x float64) float64 { return 2 * math.Sqrt(1-x*x) / math.Pi }, -0.4, 1, 2000, nil, 0)
	if math.Abs(got-want) > 1e-6 {
		t.Errorf("share %.7f, integral %.7f", got, want)
	}
}

// The K corona is 0.51 millionths at 1.2 and 1.24 at 1.1 solar radii (derived from
// Baumbach 1937).
func TestContinuum(t *testing.T) {
	c := settings(func(c *scenarios.Camera) { c.KCorona, c.Background = 1, 2 })
	k := New(c, 1, 4.35*arcsec, disc, rest)
	for _, q := range [][2]float64{{1.2, 0.51}, {1.1, 1.24}} {
		if got := k.Continuum(0, q[0])/k.Background[0]*2 - 2; math.Abs(got-q[1]) > 0.006 {
			t.Errorf("at %g: %.3f millionths, want %g", q[0], got, q[1])
		}
	}
}

// The detector's path photon by photon has mean and noise as stated, for many photons
// and for few, with coarse digits and a flat field.
func TestDetector(t *testing.T) {
	for name, change := range map[string]func(c *scenarios.Camera){
		"few photons": func(c *scenarios.Camera) { c.Throughput, c.Background, c.ReadNoise = 1e-5, 3, 0 },
		"digits":      func(c *scenarios.Camera) { c.Digit = 300 },
		"never full":  func(c *scenarios.Camera) { c.FullWell = 1e8 },
		"one read":    func(c *scenarios.Camera) { c.Digit, c.Coadds = 300, 1 },
	} {
		c := settings(func(c *scenarios.Camera) { c.Noise = true; change(c) })
		k := New(c, 1, 4.35*arcsec, disc, rest)
		const level, n = 3.0, 60000
		x := make([]float32, n)
		for i := range x {
			x[i] = level
		}
		s := Spot{1, 17, 1, 0.5, k.Background[1]}
		k.Expose(x, s)
		m, v := 0.0, 0.0
		for _, a := range x {
			m += float64(a) / n
		}
		for _, a := range x {
			v += (float64(a) - m) * (float64(a) - m) / n
		}
		want := k.SigmaAt(s, level)
		if math.Abs(m-level) > 4*want/math.Sqrt(n) {
			t.Errorf("%s: mean %g, want %g", name, m, level)
		}
		if math.Abs(math.Sqrt(v)/want-1) > 0.02 {
			t.Errorf("%s: rms %g, want %g", name, math.Sqrt(v), want)
		}
	}
}

// Without noise every read is the same whole number of digits.
func TestDigitsAlone(t *testing.T) {
	c := settings(func(c *scenarios.Camera) { c.Digit = 300 })
	k := New(c, 1, 4.35*arcsec, disc, rest)
	x := []float32{3, 3}
	k.Expose(x, Spot{0, 17, 1, 1, k.Background[0]})
	e := k.Electrons[0]
	digits := math.Round((3+k.Background[0])*e/3000) - math.Round(k.Background[0]*e/3000)
	if want := digits * 3000 / e; math.Abs(float64(x[0])-want) > 1e-6 || x[1] != x[0] {
		t.Errorf("%v, want %g", x, want)
	}
}

func TestFlatField(t *testing.T) {
	c := settings(func(c *scenarios.Camera) { c.FlatField = 0.01 })
	k := New(c, 1, 4.35*arcsec, disc, rest)
	const level, n = 3.0, 4000
	v := 0.0
	for p := range int32(n) {
		x := []float32{level, level}
		k.Expose(x, Spot{0, p, 1, 1, k.Background[0]})
		if x[0] != x[1] {
			t.Fatal("the gain changes in time")
		}
		v += (float64(x[0]) - level) * (float64(x[0]) - level) / n
	}
	// The gain of the line's exposure acts on line and background, that of the other on
	// the background.
	want := 0.01 * math.Hypot(level+k.Background[0], k.Background[0])
	if math.Abs(math.Sqrt(v)/want-1) > 0.04 {
		t.Errorf("rms %g, want %g", math.Sqrt(v), want)
	}
}

func TestSaturation(t *testing.T) {
	c := settings(func(c *scenarios.Camera) { c.Noise, c.FullWell = true, 20000 })
	k := New(c, 1, 4.35*arcsec, disc, rest)
	s := Spot{0, 5, 1, 1, k.Background[0]}
	full := c.FullWell*float64(c.Coadds)/k.Electrons[0] - k.Background[0]
	for _, f := range []float64{0.97, 1.03} {
		x := make([]float32, 100)
		for i := range x {
			x[i] = float32(f * full)
		}
		k.Expose(x, s)
		if (x[0] != x[0]) != (f > 1) || k.Saturated(s, f*full) != (f > 1) {
			t.Errorf("at %g of the full well: %v", f, x[0])
		}
	}
}

func TestSchedule(t *testing.T) {
	c := settings(func(c *scenarios.Camera) {})
	if s := NewSchedule(c, 120, 1); !slices.Equal(s.Delay, []float64{0, 0, 0}) || len(s.Second) != 12 || s.Second[0] != 5 || s.Second[11] != 115 || Latest(c) != 0 {
		t.Errorf("all at once: %+v", s)
	}
	c.Sequential = true
	if s := NewSchedule(c, 120, 1); !slices.Equal(s.Delay, []float64{0, 10, 20}) || Latest(c) != 20 {
		t.Errorf("in turn: %v", s.Delay)
	}
	c.Order, c.TuningTime = []int{1, 0, 2}, 4
	if s := NewSchedule(c, 120, 1); !slices.Equal(s.Delay, []float64{4, 0, 8}) || Latest(c) != 8 {
		t.Errorf("middle first: %v", s.Delay)
	}
	c.Switching = "interleaved"
	if s := NewSchedule(c, 120, 1); s.After != 12 || Latest(c) != 20 || s.Time(1, 0, 30) != 5*30+12 || s.Time(0, 7, 30) != 210 {
		t.Errorf("interleaved: %+v", s)
	}
	c.TuningTime = 0
	if s := NewSchedule(c, 120, 1); !slices.Equal(s.Delay, []float64{5, 0, 10}) || s.After != 15 {
		t.Errorf("interleaved, evenly divided: %+v", s)
	}
	c.Switching, c.Blocks = "blocks", 3
	s := NewSchedule(c, 120, 1)
	want := []int{18, 19, 20, 21, 58, 59, 60, 61, 98, 99, 100, 101}
	if !slices.Equal(s.Second, want) || s.After != 0 {
		t.Errorf("blocks: %v", s.Second)
	}
	for f, lost := range s.Lost[0] {
		if lost != slices.Contains(want, f) {
			t.Errorf("frame %d: lost %v", f, lost)
		}
	}
	c.Switching, c.Lost, c.Gaps = "together", 0.1, []scenarios.Gap{{From: 300, Length: 60}}
	s = NewSchedule(c, 4000, 1)
	n := 0
	for f, lost := range s.Lost[0] {
		if (f == 10 || f == 11) && !lost {
			t.Errorf("frame %d is not lost in the gap", f)
		}
		if lost {
			n++
		}
	}
	if math.Abs(float64(n)/4000-0.1) > 4*math.Sqrt(0.09/4000) {
		t.Errorf("%d of 4000 frames are lost", n)
	}
}
