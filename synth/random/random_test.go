package random

import (
	"math"
	"testing"
)

// moments returns mean, variance, third and fourth standardised moments.
func moments(x []float64) (m, v, s, k float64) {
	n := float64(len(x))
	for _, a := range x {
		m += a / n
	}
	for _, a := range x {
		v += (a - m) * (a - m) / n
	}
	for _, a := range x {
		z := (a - m) / math.Sqrt(v)
		s += z * z * z / n
		k += z * z * z * z / n
	}
	return
}

// Sampling errors of the moments of n normal numbers (Kendall & Stuart, The
// Advanced Theory of Statistics I, from memory): sd of mean n^-1/2, variance
// (2/n)^1/2, skewness (6/n)^1/2, kurtosis (24/n)^1/2; allowed: 4 sd.
func checkNormal(t *testing.T, x []float64) {
	t.Helper()
	n := float64(len(x))
	m, v, s, k := moments(x)
	for _, c := range []struct {
		name          string
		got, want, sd float64
	}{
		{"mean", m, 0, math.Sqrt(1 / n)},
		{"variance", v, 1, math.Sqrt(2 / n)},
		{"skewness", s, 0, math.Sqrt(6 / n)},
		{"kurtosis", k, 3, math.Sqrt(24 / n)},
	} {
		if math.Abs(c.got-c.want) > 4*c.sd {
			t.Errorf("%s %.5f, want %.5f +- %.5f", c.name, c.got, c.want, c.sd)
		}
	}
}

func TestNormals(t *testing.T) {
	const n = 400_000
	x := make([]float64, n)
	s := At(1, 2, 3)
	for i := range x {
		x[i] = s.Normal()
	}
	checkNormal(t, x)
	k := NewKey(7)
	for i := range x {
		x[i] = k.Normal(uint64(i))
	}
	checkNormal(t, x)
	for i := range x { // across neighbouring addresses
		x[i] = NewKey(7, uint64(i)).Normal(0)
	}
	checkNormal(t, x)
	for i := range x {
		x[i] = At(9, uint64(i)).Normal()
	}
	checkNormal(t, x)
}

func TestNeighbouringAddressesDoNotCorrelate(t *testing.T) {
	const n = 200_000
	var c float64
	for i := range uint64(n) {
		c += At(1, i).Normal() * At(1, i+1).Normal() / n
	}
	if math.Abs(c) > 4/math.Sqrt(n) {
		t.Errorf("correlation %.5f", c)
	}
}

// The streams are part of the file format (same seed, same bytes): these values
// were printed by this package when the format was fixed.
func TestStreamsAreFrozen(t *testing.T) {
	if got, want := Hash(1, 2, 3), uint64(0xe234b8e7662009c0); got != want {
		t.Errorf("Hash(1,2,3) = %#x, want %#x", got, want)
	}
	s := At(1, 2, 3)
	if got := s.Normal(); got != 0.701871268712939 {
		t.Errorf("first normal of (1,2,3) = %v, want %v", got, 0.701871268712939)
	}
}

// Mean, variance and third central moment of a Poisson number are its mean, on both
// sides of the change of method; small ones have the exact probabilities.
func TestPoisson(t *testing.T) {
	const n = 400000
	for i, mean := range []float64{0.3, 4, 49.9, 50.1, 400, 2e4} {
		k := NewKey(1, uint64(i))
		count := map[float64]int{}
		var m, m2, m3 float64
		x := make([]float64, n)
		for j := range x {
			x[j] = k.Poisson(uint64(j), mean)
			if x[j] < 0 || x[j] != math.Trunc(x[j]) {
				t.Fatalf("mean %g: %g", mean, x[j])
			}
			m += x[j] / n
			count[x[j]]++
		}
		for _, a := range x {
			m2 += (a - m) * (a - m) / n
			m3 += (a - m) * (a - m) * (a - m) / n
		}
		// Four standard deviations of the sample's; of the third moment that of a normal
		// distribution, 6 mean^3/n, and of a Poisson one with few counts.
		if math.Abs(m-mean) > 4*math.Sqrt(mean/n) {
			t.Errorf("mean %g, want %g", m, mean)
		}
		if e := math.Sqrt((2*mean*mean + mean) / n); math.Abs(m2-mean) > 4*e+1e-3*mean {
			t.Errorf("mean %g: variance %g", mean, m2)
		}
		if e := math.Sqrt((6*mean*mean*mean + 24*mean*mean + mean) / n); math.Abs(m3-mean) > 4*e+0.05*mean {
			t.Errorf("mean %g: third moment %g", mean, m3)
		}
		for c := 0.0; c < 4 && mean < 5; c++ {
			g, _ := math.Lgamma(c + 1)
			p := math.Exp(c*math.Log(mean) - mean - g)
			if got := float64(count[c]) / n; math.Abs(got-p) > 4*math.Sqrt(p/n) {
				t.Errorf("mean %g: %g with probability %g, want %g", mean, c, got, p)
			}
		}
	}
	if NewKey(1).Poisson(3, 0) != 0 {
		t.Error("light out of nothing")
	}
}

// The tabulated inverse of the distribution function against the library's.
func TestNormalAgainstErfinv(t *testing.T) {
	k := NewKey(11)
	for i := range uint64(200_000) {
		if got, want := k.Normal(i), quantile(k.Uniform(i)); math.Abs(got-want) > 2e-8 {
			t.Fatalf("at %g: %.12g, want %.12g", k.Uniform(i), got, want)
		}
	}
}
