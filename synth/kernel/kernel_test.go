package kernel

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"

	"offplane/synth/random"
)

func TestExp2Neg(t *testing.T) {
	for x := float32(0); x < 120; x += 0.00137 {
		want := math.Exp2(-float64(x))
		if rel := math.Abs(float64(exp2Neg(x))/want - 1); rel > 3e-7 {
			t.Fatalf("2^-%g: relative error %.2g", x, rel)
		}
	}
	for _, x := range []float32{120, 1e9, float32(math.Inf(1)), float32(math.NaN())} {
		if got := exp2Neg(x); got != 0x1p-120 {
			t.Errorf("2^-%g: %g", x, got)
		}
	}
	if exp2Neg(0) != 1 {
		t.Error("2^0")
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

// points returns points of Lanes numbers.
func points(n int, scale float32, address ...uint64) []float32 {
	x := noise(n*Lanes, address...)
	for i := range x {
		x[i] *= scale
	}
	return x
}

func TestCarryIsAPower(t *testing.T) {
	const n, first = 200, 7
	q := cmplx.Exp(complex(-0.003, 0.41))
	var start [16]float32
	for l := range 8 {
		z := cmplx.Pow(q, complex(float64(first+l), 0))
		start[l], start[8+l] = float32(real(z)), float32(imag(z))
	}
	step := cmplx.Pow(q, 8)
	dst, coef := noise(2*n, 2), (*[8]float32)(noise(8, 3))
	before := append([]float32(nil), dst...)
	var u [8][]float32
	for i := range u {
		u[i] = noise(2*n, 4, uint64(i))
	}
	for _, add := range []bool{true, false} {
		Carry(dst, &u, coef, &start, [2]float32{float32(real(step)), float32(imag(step))}, add)
		for k := range n {
			sum, size := complex(0, 0), 0.0
			for i, c := range coef {
				z := complex(float64(c*u[i][k]), float64(c*u[i][n+k]))
				sum += z
				size += cmplx.Abs(z)
			}
			want := sum * cmplx.Pow(q, complex(float64(first+k), 0))
			if add {
				want += complex(float64(before[k]), float64(before[n+k]))
			}
			if e := cmplx.Abs(complex(float64(dst[k]), float64(dst[n+k])) - want); e > 2e-6*(1+size) {
				t.Fatalf("bin %d: off by %.2g", k, e)
			}
		}
	}
}

func TestTranspose(t *testing.T) {
	const n = 24
	src, dst := noise(n*Lanes, 1), make([]float32, n*Lanes)
	Transpose(dst, src)
	for l := range Lanes {
		for i := range n {
			if dst[i*Lanes+l] != src[l*n+i] {
				t.Fatalf("row %d, element %d", l, i)
			}
		}
	}
}

// Sixteen real motions from their spectra, against the sum over frequencies; the last
// bins lie beyond the Nyquist frequency of the transform and fold.
func TestAssembleAndTransform(t *testing.T) {
	for _, n := range []int{3, 90, 128, 170, 300, 512, 700, 1025} {
		f := NewFourier(n)
		size := f.Size
		if size < n || f.Place[0] != 0 {
			t.Fatalf("%d points: size %d", n, size)
		}
		const first, bins = 2, 45
		w := points(2*48, 1, 3)
		var turn []float32
		var at []int32
		for k := range bins {
			s, c := math.Sincos(0.07 * float64(first+k))
			turn = append(turn, float32(c/2), float32(s/2))
			at = append(at, f.Place[(first+k)%size], f.Place[((-first-k)%size+size)%size])
		}
		x := make([]float32, size*Lanes)
		Assemble(x, w, 48, turn, at, true)
		f.Transform(x)
		for l := range Lanes {
			for t0 := range size {
				want := 0.0
				for k := range bins {
					s, c := math.Sincos(0.07*float64(first+k) + 2*math.Pi*float64((first+k)*t0)/float64(size))
					want += float64(w[k*Lanes+l])*c - float64(w[(48+k)*Lanes+l])*s
				}
				if e := math.Abs(float64(x[t0*Lanes+l]) - want); e > 1e-5 {
					t.Fatalf("size %d, lane %d, time %d: %g, want %g", size, l, t0, x[t0*Lanes+l], want)
				}
			}
		}
	}
}

func vary(base, step float32) *[Lanes]float32 {
	var x [Lanes]float32
	for l := range x {
		x[l] = base + step*float32(l)
	}
	return &x
}

func TestProfileIsTheGaussian(t *testing.T) {
	v := points(50, 15, 1)
	acc := make([]float32, len(v)/2)
	amp, d, inv := vary(2.5, 0.1), vary(33.5, -1), vary(1/40.0, 0.001)
	Profile(acc, v, amp, d, inv)
	Profile(acc, v, vary(0.5, 0), vary(0, 0), vary(1/30.0, 0))
	for i, got := range acc {
		want := 0.0
		for _, l := range []int{i % Rays, Rays + i%Rays} {
			x := float64(v[i/Rays*Lanes+l])
			a, b := (float64(d[l])-x)*float64(inv[l]), x/30
			want += float64(amp[l])*math.Exp(-a*a) + 0.5*math.Exp(-b*b)
		}
		if math.Abs(float64(got)-want) > 1e-6*want+6e-7*float64(amp[Rays+i%Rays]) {
			t.Fatalf("point %d, ray %d: %.9g, want %.9g", i/Rays, i%Rays, got, want)
		}
	}
}

// Against math.Cos, near the middle and over several periods, with the coefficients of
// a five-stage filter.
func TestCosinesIsTheSum(t *testing.T) {
	coef := make([]float32, 32*Lanes)
	for m := range 32 {
		for l := range Lanes {
			coef[m*Lanes+l] = (2 - float32(m)/16) / (32 + float32(l))
		}
	}
	for l := range Lanes {
		coef[l] = 1.0 / 32
	}
	d := vary(0.1, 0.01)
	for _, scale := range []float32{0.01, 0.2, 3} {
		v := points(13, scale, 2)
		for terms := 1; terms <= 32; terms++ {
			acc := make([]float32, len(v)/2)
			Cosines(acc, v, coef[:terms*Lanes], d, 0.7)
			for i, got := range acc {
				want, far := 0.0, 0.0
				for _, l := range []int{i % Rays, Rays + i%Rays} {
					x := v[i/Rays*Lanes+l]
					far = max(far, math.Abs(float64(x)))
					for m := range terms {
						want += float64(coef[m*Lanes+l]) * math.Cos(2*math.Pi*float64(m)*float64(d[l]-x)*float64(float32(0.7)))
					}
				}
				// The coefficients add up to one; where cos is not near 1 the rounding of the
				// argument counts, m times.
				if math.Abs(float64(got)-want) > 4e-6*(1+20*far) {
					t.Fatalf("%d terms, point %d, ray %d: %.9g, want %.9g", terms, i/Rays, i%Rays, got, want)
				}
			}
		}
	}
}

// The vector path and the portable one give the same bits, at every length.
func TestPathsAgreeToTheBit(t *testing.T) {
	had := useVector
	defer func() { useVector = had }()
	for n := range 80 {
		rows, coef := make([][]float32, n%9), noise(n%9, 4)
		for i := range rows {
			rows[i] = noise(n+3, 5, uint64(i))
		}
		bins := 8 * (n%5 + 1)
		f := NewFourier(8 * n)
		var at []int32
		for k := range min(bins, f.Size) - 1 {
			at = append(at, f.Place[k], f.Place[f.Size-1-k])
		}
		var results [2][]float32
		for path, vector := range []bool{false, had} {
			useVector = vector
			keep := func(x []float32) { results[path] = append(results[path], x...) }
			sums := noise(n, 8)
			Combine(sums, rows, coef)
			keep(sums)
			profiles := noise(n*Rays, 9)
			Profile(profiles, points(n, 40, 10), vary(0.7, 0.01), vary(33.5, 1), vary(1/20.0, 0.001))
			keep(profiles)
			waves := noise(n*Rays, 10)
			Cosines(waves, points(n, 40, 10), points(1+n%7, 1, 11), vary(33.5, 0.3), 1/90.0)
			keep(waves)
			carried := noise(2*bins, 12)
			var u [8][]float32
			for i := range u {
				u[i] = noise(2*bins, 13, uint64(i))
			}
			Carry(carried, &u, (*[8]float32)(noise(8, 14)), vary(0.9, -0.02), [2]float32{0.8, -0.3}, n%2 == 0)
			keep(carried)
			turned := make([]float32, 2*bins*Lanes)
			Transpose(turned, noise(2*bins*Lanes, 14))
			keep(turned)
			x := points(f.Size, 1, 15)
			Assemble(x, turned, bins, noise(len(at), 16), at, n%2 == 0)
			keep(x)
			f.Transform(x)
			keep(x)
		}
		for i, a := range results[0] {
			if b := results[1][i]; math.Float32bits(a) != math.Float32bits(b) {
				t.Fatalf("length %d, element %d: %v and %v", n, i, a, b)
			}
		}
	}
}

func BenchmarkCombine(b *testing.B) {
	const rows, frames = 8, 368
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

func BenchmarkCarry(b *testing.B) {
	var u [8][]float32
	for i := range u {
		u[i] = noise(368, 5, uint64(i))
	}
	dst, coef, start := make([]float32, 368), (*[8]float32)(noise(8, 6)), vary(1e-3, 1e-3)
	for b.Loop() {
		Carry(dst, &u, coef, start, [2]float32{0.7, 0.7}, true)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N), "ns/sample")
}

func BenchmarkTranspose(b *testing.B) {
	dst, src := make([]float32, 368*Lanes), noise(368*Lanes, 5)
	for b.Loop() {
		Transpose(dst, src)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*Lanes), "ns/sample")
}

func BenchmarkTransform(b *testing.B) {
	for _, n := range []int{256, 384, 512, 1024} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			f := NewFourier(n)
			w := points(368, 1, 1)
			turn := noise(2*(n/3), 1)
			var at []int32
			for k := range n / 3 {
				at = append(at, f.Place[k+1], f.Place[n-1-k])
			}
			x := make([]float32, n*Lanes)
			for b.Loop() {
				Assemble(x, w, 184, turn[:min(len(turn), 2*180)], at[:min(len(at), 2*180)], false)
				f.Transform(x)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*Lanes), "ns/sample")
		})
	}
}

func BenchmarkProfile(b *testing.B) {
	v := points(360, 15, 1)
	acc := make([]float32, len(v)/2)
	amp, d, inv := vary(1, 0), vary(33.5, 0), vary(1/40.0, 0)
	for b.Loop() {
		Profile(acc, v, amp, d, inv)
	}
	b.ReportMetric(float64(b.N)*float64(len(v))/b.Elapsed().Seconds()/1e9, "Gterms/s")
}

func BenchmarkCosines(b *testing.B) {
	v, coef := points(360, 1, 1), points(32, 1, 2)
	acc, d := make([]float32, len(v)/2), vary(0.5, 0)
	for b.Loop() {
		Cosines(acc, v, coef, d, 1/40.0)
	}
	b.ReportMetric(float64(b.N)*float64(len(v))/b.Elapsed().Seconds()/1e9, "Gterms/s")
}
