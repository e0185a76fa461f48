package camera

import (
	"math"
	"testing"

	"offplane/scenarios"
	"offplane/scenarios/units"
)

var disc, rest = [2]float64{1.045e6, 1.034e6}, [2]float64{1074.98, 1080.089}

const arcsec = math.Pi / 648000

// Photons per second, pixel and millionth of the disc centre in 0.13 nm at the
// entrance: 1.027e5 (20 cm, 4.35"), 4.88e4 (20 cm, 3"), 1.221e6 (150 cm, 2"), derived
// from the disc-centre continuum; there for a rectangle 0.13 nm wide, here for a
// Gaussian of that full width at half maximum, whose area is 1.0645 times as large.
func TestPhotons(t *testing.T) {
	for _, c := range []struct{ aperture, pixel, want float64 }{{20, 4.35, 1.027e5}, {20, 3, 4.88e4}, {150, 2, 1.221e6}} {
		s := scenarios.Default().Camera
		s.Aperture, s.Throughput, s.Exposure, s.Background, s.Filter = units.Diameter(c.aperture), 1, 1, 1, 0.13
		k := New(s, 1, c.pixel*arcsec, disc, rest)
		area := math.Sqrt(math.Pi / (4 * math.Ln2))
		if got := k.Electrons[0] * k.Background[0] / area; math.Abs(got/c.want-1) > 0.02 {
			t.Errorf("%g cm, %g arcsec: %.4g photons, want %.4g", c.aperture, c.pixel, got, c.want)
		}
	}
}

// Line-centre 10 ppm, background 10 ppm, 5 % throughput, 20 cm, 4.35", 1 s: signal
// 4.9e4 and noise sqrt(S + 2B) = 383 electrons (derived; 0.13 nm rectangle).
func TestNoiseExample(t *testing.T) {
	s := scenarios.Default().Camera
	s.Aperture, s.Throughput, s.Exposure, s.Background, s.Filter, s.ReadNoise = 20, 0.05, 1, 10, 0.13, 0
	k := New(s, 1, 4.35*arcsec, disc, rest)
	area := math.Sqrt(math.Pi / (4 * math.Ln2))
	signal := k.Background[0] / area
	k.Background[0] /= area
	if e := signal * k.Electrons[0]; math.Abs(e/5.1e4-1) > 0.05 {
		t.Errorf("signal %.3g electrons", e)
	}
	if n := k.Sigma(0, signal) * k.Electrons[0]; math.Abs(n/383-1) > 0.03 {
		t.Errorf("noise %.1f electrons, want 383", n)
	}
}

func TestSpreadConservesLight(t *testing.T) {
	for _, fwhm := range []float64{0, 1, 2, 4.35, 12} {
		w := gaussianSpread(fwhm, 4.35)
		sum, second := 0.0, 0.0
		for i, x := range w {
			d := float64(i - len(w)/2)
			sum += x
			second += x * d * d
		}
		if math.Abs(sum-1) > 1e-14 {
			t.Errorf("fwhm %g: light %g", fwhm, sum)
		}
		// A Gaussian spread over pixels has its own variance plus that of a pixel, 1/12,
		// once it is wider than a pixel (Sheppard's correction).
		if s := fwhm / 2.3548 / 4.35; s > 1 && math.Abs(second/(s*s+1.0/12)-1) > 0.005 {
			t.Errorf("fwhm %g: variance %.4f, want %.4f", fwhm, second, s*s+1.0/12)
		}
	}
}

func TestExposeHasTheStatedNoise(t *testing.T) {
	s := scenarios.Default().Camera
	s.Noise = true
	k := New(s, 1, 4.35*arcsec, disc, rest)
	const level = 3.0
	x := make([]float32, 40000)
	for i := range x {
		x[i] = level
	}
	k.Expose(x, Spot{0, 17, 1, 1, k.Background[0]})
	m, v := 0.0, 0.0
	for _, a := range x {
		m += float64(a) / float64(len(x))
	}
	for _, a := range x {
		v += (float64(a) - m) * (float64(a) - m) / float64(len(x))
	}
	want := k.Sigma(0, level)
	if math.Abs(math.Sqrt(v)/want-1) > 4/math.Sqrt(2*float64(len(x))) || math.Abs(m-level) > 4*want/math.Sqrt(float64(len(x))) {
		t.Errorf("mean %g, rms %g, want %g and %g", m, math.Sqrt(v), level, want)
	}
	y := []float32{level, level, level}
	k.Expose(y, Spot{0, 17, 1, 1, k.Background[0]})
	if y[2] != x[2] {
		t.Error("noise depends on more than its address")
	}
	s.Noise = false
	z := []float32{level}
	New(s, 1, 4.35*arcsec, disc, rest).Expose(z, Spot{0, 17, 1, 1, 3})
	if z[0] != level {
		t.Error("noise that was switched off")
	}
}
