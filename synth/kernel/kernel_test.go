package kernel

import (
	"math"
	"testing"

	"offplane/synth/random"
)

func TestExpNeg(t *testing.T) {
	for x := float32(0); x > -86; x -= 0.00137 {
		if rel := math.Abs(float64(expNeg(x))/math.Exp(float64(x)) - 1); rel > 3e-7 {
			t.Fatalf("exp(%g): relative error %.2g", x, rel)
		}
	}
	if expNeg(-88) != 0 || expNeg(0) != 1 || expNeg(float32(math.NaN())) != 0 {
		t.Error("ends")
	}
}

func noise(n int, address ...uint64) []float32 {
	s := random.At(address...)
	x := make([]float32, n)
	for i := range x {
		x[i] = float32(s.Normal())
	}
	return x
}

func TestCombineIsTheSumOfRows(t *testing.T) {
	for rows := range 11 {
		r, c := make([][]float32, rows), noise(rows, 5)
		for i := range r {
			r[i] = noise(37, 6, uint64(i))
		}
		dst := noise(33, 9) // whatever was there is gone
		Combine(dst, r, c)
		for u := range dst {
			want := 0.0
			for i := range r {
				want += float64(c[i]) * float64(r[i][u])
			}
			if math.Abs(float64(dst[u])-want) > 2e-6 {
				t.Fatalf("%d rows: %g, want %g", rows, dst[u], want)
			}
		}
	}
}

func TestProfileIsTheGaussian(t *testing.T) {
	v := noise(50, 1)
	for i := range v {
		v[i] *= 15
	}
	acc := make([]float32, len(v))
	Profile(acc, v, 2.5, 33.5, 1/40.0)
	Profile(acc, v, 0.5, 0, 1/30.0)
	for i, x := range v {
		a, b := (33.5-float64(x))/40, float64(x)/30
		want := 2.5*math.Exp(-a*a) + 0.5*math.Exp(-b*b)
		if math.Abs(float64(acc[i])/want-1) > 1e-6 {
			t.Fatalf("v = %g: %.9g, want %.9g", x, acc[i], want)
		}
	}
}

// Against math.Cos, near the middle and over several periods, with the coefficients of
// a five-stage filter.
func TestCosinesIsTheSum(t *testing.T) {
	coef := make([]float32, 32)
	for m := range coef {
		coef[m] = (2 - float32(m)/16) / 32
	}
	coef[0] = 1.0 / 32
	for _, scale := range []float64{0.01, 0.2, 3} {
		v := noise(203, 2)
		for i := range v {
			v[i] *= float32(scale)
		}
		for terms := 1; terms <= len(coef); terms++ {
			acc := make([]float32, len(v))
			Cosines(acc, v, coef[:terms], 0.1, 0.7)
			for i, x := range v {
				want := 0.0
				for m, c := range coef[:terms] {
					want += float64(c) * math.Cos(2*math.Pi*float64(m)*float64(float32(0.1-x)*float32(0.7)))
				}
				// The coefficients add up to one; where cos is not near 1 the rounding of the
				// argument counts, m times.
				if math.Abs(float64(acc[i])-want) > 2e-6*(1+20*math.Abs(float64(x))) {
					t.Fatalf("%d terms, v = %g: %.9g, want %.9g", terms, x, acc[i], want)
				}
			}
		}
	}
}

// The vector path and the portable one give the same bits, at every length.
func TestPathsAgreeToTheBit(t *testing.T) {
	had := useVector
	defer func() { useVector = had }()
	for n := range 150 {
		v := noise(n, 3, uint64(n))
		for i := range v {
			v[i] *= 40 // reaches the dark end of the profile
		}
		rows, coef := make([][]float32, n%9), noise(n%9, 4)
		for i := range rows {
			rows[i] = noise(n+3, 5, uint64(i))
		}
		var sums, profiles, waves [2][]float32
		for path, vector := range []bool{false, had} {
			useVector = vector
			sums[path] = noise(n, 8)
			Combine(sums[path], rows, coef)
			profiles[path] = noise(n, 9)
			Profile(profiles[path], v, 0.7, 33.5, 1/20.0)
			waves[path] = noise(n, 10)
			Cosines(waves[path], v, noise(1+n%7, 11), 33.5, 1/90.0)
		}
		for i := range v {
			if math.Float32bits(sums[0][i]) != math.Float32bits(sums[1][i]) || math.Float32bits(profiles[0][i]) != math.Float32bits(profiles[1][i]) ||
				math.Float32bits(waves[0][i]) != math.Float32bits(waves[1][i]) {
				t.Fatalf("length %d, element %d: %v and %v, %v and %v, %v and %v", n, i, sums[0][i], sums[1][i], profiles[0][i], profiles[1][i], waves[0][i], waves[1][i])
			}
		}
	}
}

func BenchmarkCombine(b *testing.B) {
	const rows, frames = 64, 360
	r, c := make([][]float32, rows), noise(rows, 5)
	for i := range r {
		r[i] = noise(frames, 6, uint64(i))
	}
	dst := make([]float32, frames)
	for b.Loop() {
		Combine(dst, r, c)
	}
	b.ReportMetric(float64(b.N)*rows*frames/b.Elapsed().Seconds()/1e9, "Gmultiply-adds/s")
}

func BenchmarkProfile(b *testing.B) {
	v := noise(360, 1)
	acc := make([]float32, len(v))
	for b.Loop() {
		Profile(acc, v, 1, 33.5, 1/40.0)
	}
	b.ReportMetric(float64(b.N)*float64(len(v))/b.Elapsed().Seconds()/1e9, "Gterms/s")
}

func BenchmarkCosines(b *testing.B) {
	v, coef := noise(360, 1), noise(32, 2)
	acc := make([]float32, len(v))
	for b.Loop() {
		Cosines(acc, v, coef, 0.5, 1/40.0)
	}
	b.ReportMetric(float64(b.N)*float64(len(v))/b.Elapsed().Seconds()/1e9, "Gterms/s")
}
