package invert

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"offplane/synth/obs"
)

func mustBand(t *testing.T, opt Options, frames int, dt float64) *band {
	t.Helper()
	b, err := newBand(&opt, frames, dt)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// Independent samples T w sqrt(pi) (1/e) and T w sqrt(2 pi) (sigma), and the noise
// bandwidth w sqrt(pi/2) = 1.88 mHz that turns 0.3 km/s white at 30 s into 0.10 km/s
// (derived). The band's lower wing ends at zero frequency, hence 1 and 4 %.
func TestBand(t *testing.T) {
	opt := Default()
	opt.Taper = 0
	b := mustBand(t, opt, 720, 30)
	T := 720 * 30.0
	if want := T * 1.5e-3 * math.Sqrt(math.Pi); math.Abs(b.samples/want-1) > 0.01 {
		t.Errorf("1/e: %g samples, want %g", b.samples, want)
	}
	if got := 0.3 * math.Sqrt(b.passes); math.Abs(got-0.3*math.Sqrt(2*30*1.88e-3)) > 0.001 || math.Abs(got-0.10) > 0.005 {
		t.Errorf("0.3 km/s white becomes %g km/s in band", got)
	}
	opt.WidthIsSigma = true
	b = mustBand(t, opt, 720, 30)
	if want := T * 1.5e-3 * math.Sqrt(2*math.Pi); math.Abs(b.samples/want-1) > 0.04 {
		t.Errorf("sigma: %g samples, want %g", b.samples, want)
	}
	opt.Width = 1e-6
	if _, err := newBand(&opt, 720, 30); err == nil {
		t.Error("a band without frequencies")
	}
}

// A sinusoid comes back with the filter's weight, by tables and by the fast
// transform; the mean vanishes.
func TestBandPassOfASinusoid(t *testing.T) {
	opt := Default()
	opt.Taper = 0
	for _, n := range []int{90, 180, 181, 359} {
		b := mustBand(t, opt, n, 30)
		j := int(math.Round(4.2e-3 * float64(n) * 30))
		f := float64(j) / float64(n) / 30
		u := (f - 3.5e-3) / 1.5e-3
		wave := func(i int) float64 { return 0.7 * math.Cos(2*math.Pi*f*30*float64(i)+0.4) }
		for _, d := range []*dft{nil, newDFT(b)} {
			tr := newTransformer(b, d)
			for i := range tr.v {
				tr.v[i] = 13 + wave(i)
			}
			row, out := make([]float32, b.row), make([]float32, n)
			tr.forward(row, false)
			tr.backward(row, out)
			for i, got := range out {
				if want := math.Exp(-u*u) * wave(i); math.Abs(float64(got)-want) > 2e-6 {
					t.Fatalf("n = %d, tables %v, frame %d: %g, want %g", n, d != nil, i, got, want)
				}
			}
		}
	}
	if newDFT(mustBand(t, opt, 5000, 30)) != nil {
		t.Error("huge tables")
	}
}

// White noise in band: measured variance against the share that passes, and the
// estimate from the highest frequencies, on top of a wave spectrum.
func TestNoiseInBand(t *testing.T) {
	b := mustBand(t, Default(), 360, 30)
	tr := newTransformer(b, newDFT(b))
	rng := rand.New(rand.NewPCG(3, 4))
	const trials = 400
	row := make([]float32, b.row)
	var passed, estimate float64
	for range trials {
		for i := range tr.v {
			tr.v[i] = 0.3 * rng.NormFloat64()
		}
		estimate += tr.forward(row, true) / trials
		n := float64(norm(row))
		passed += 2 * n * n / (360 * 360 * b.kept) / trials
	}
	want := 0.09 * b.passes
	if tol := 3 / math.Sqrt(trials*b.samples); math.Abs(passed/want-1) > tol {
		t.Errorf("variance in band %g, want %g within %.3f", passed, want, tol)
	}
	// The median of 45 exponential numbers is 1/45 high and scatters by 1/sqrt(45).
	if math.Abs(estimate/0.09-1) > 1./45+3/math.Sqrt(45*trials) {
		t.Errorf("noise variance %g, want 0.09", estimate)
	}
}

func TestRepair(t *testing.T) {
	nan := math.NaN()
	v := []float64{nan, 1, 2, nan, nan, 5, nan}
	bad := []bool{true, false, false, true, true, false, true}
	if n := repair(v, bad); n != 4 || !slices.Equal(v, []float64{1, 1, 2, 3, 4, 5, 5}) {
		t.Errorf("%d repaired: %v", n, v)
	}
	// A hit on the detector: one wild sample of 180.
	v, bad = make([]float64, 180), make([]bool, 180)
	for i := range v {
		v[i] = math.Sin(float64(i))
	}
	v[77] = 40
	if n := repair(v, bad); n != 1 || math.Abs(v[77]-(math.Sin(76)+math.Sin(78))/2) > 1e-15 {
		t.Errorf("%d repaired, sample %g", n, v[77])
	}
	v, bad = []float64{nan, nan}, []bool{true, true}
	if n := repair(v, bad); n != 2 {
		t.Errorf("%d of two bad", n)
	}
}

// ring is a field of random independent waves in cells of position angle.
func ring(t *testing.T, from, to float64) *field {
	opt := Default()
	g := &obs.Grid{Nx: 120, Ny: 120, Pixel: 25, CentreX: 60.5, CentreY: 60.5, Distance: 215}
	f := &field{opt: &opt, grid: g, band: mustBand(t, opt, 180, 30)}
	for i := range g.Nx * g.Ny {
		if r, pa := g.Polar(i%g.Nx, i/g.Nx); r > 1.05 && r < 1.35 && pa >= from && pa < to {
			f.pixels = append(f.pixels, int32(i))
		}
	}
	f.spec = make([]float32, len(f.pixels)*f.band.row)
	f.norm = make([]float32, len(f.pixels))
	rng := rand.New(rand.NewPCG(5, 6))
	waves := make([]float32, 720*f.band.row)
	for i := range waves {
		waves[i] = float32(rng.NormFloat64())
	}
	for p := range f.pixels {
		f.norm[p] = 1
		ix, iy := f.at(p)
		_, pa := g.Polar(ix, iy)
		copy(f.spec[p*f.band.row:(p+1)*f.band.row], waves[int(pa/0.5)*f.band.row:])
	}
	return f
}

// The trend of the whole field goes, waves stay: on waves alone not a bit changes.
func TestTrendSparesWaves(t *testing.T) {
	for _, wedge := range [][2]float64{{0, 360}, {40, 140}, {80, 110}} {
		f := ring(t, wedge[0], wedge[1])
		before := slices.Clone(f.spec)
		if err := f.removeTrend(t.Context(), 2); err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(before, f.spec) {
			t.Errorf("wedge %v: waves were changed", wedge)
		}
	}
}

func TestTrendIsRemoved(t *testing.T) {
	f := ring(t, 0, 360)
	rng := rand.New(rand.NewPCG(8, 8))
	row, used := f.band.row, 2*len(f.band.freq)
	a, b := make([]float64, used), make([]float64, used)
	for j := range a {
		a[j], b[j] = 1.5*rng.NormFloat64(), 1.5*rng.NormFloat64()
	}
	before := slices.Clone(f.spec)
	for p := range f.pixels {
		ix, iy := f.at(p)
		y, _ := f.grid.Sky(ix, iy)
		for j := range used {
			f.spec[p*row+j] += float32(a[j] + b[j]*y)
		}
		if p%97 == 0 { // wild pixels do not matter
			for j := range used {
				f.spec[p*row+j] = 1e4
			}
		}
	}
	if err := f.removeTrend(t.Context(), 2); err != nil {
		t.Fatal(err)
	}
	left, put := 0.0, 0.0
	for p := range f.pixels {
		ix, iy := f.at(p)
		y, _ := f.grid.Sky(ix, iy)
		if p%97 == 0 {
			continue
		}
		for j := range used {
			d := float64(f.spec[p*row+j] - before[p*row+j])
			left += d * d
			put += (a[j] + b[j]*y) * (a[j] + b[j]*y)
		}
	}
	// What is left is the chance sum of the waves: 20 cells a sector and 36 sectors,
	// two coefficients, power 1 against 4 put in; medians cost pi/2.
	if limit := 2 * math.Pi / 2 / 720 / 4 * 2; left/put > limit {
		t.Errorf("left of the trend's power: %.5f, want below %.5f", left/put, limit)
	}
}

func TestMedianOf(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for n := 1; n < 60; n++ {
		for _, values := range []int{2, 1000} { // many equal ones, and hardly any
			var x []float32
			var y []float64
			for range n {
				v := float32(rng.IntN(values))
				x, y = append(x, v), append(y, float64(v))
			}
			if got := medianOf(x); got != median(y) {
				t.Fatalf("median of %v: %g, want %g", y, got, median(y))
			}
		}
	}
}
