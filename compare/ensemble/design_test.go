package ensemble

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// The first points of the sequence, and the whole of points 100 and 1000 in 20
// dimensions, as an independent implementation gives them (scipy 1.10, qmc.Sobol without
// scrambling, times 2^32; the same direction numbers of Joe & Kuo 2008).
func TestSobolPublished(t *testing.T) {
	s := newSobol(1, 20)
	first := [][]float64{
		{0, 0, 0, 0}, {0.5, 0.5, 0.5, 0.5}, {0.75, 0.25, 0.25, 0.25}, {0.25, 0.75, 0.75, 0.75},
		{0.375, 0.375, 0.625, 0.875}, {0.875, 0.875, 0.125, 0.375}, {0.625, 0.125, 0.875, 0.625}, {0.125, 0.625, 0.375, 0.125},
	}
	for i, row := range first {
		for j, want := range row {
			if got := float64(s.digits(i, j)) / (1 << 32); got != want {
				t.Errorf("point %d, dimension %d: %g, want %g", i, j, got, want)
			}
		}
	}
	for i, row := range map[int][]uint32{
		100: {1778384896, 1107296256, 3321888768, 3120562176, 3791650816, 3187671040, 100663296, 2046820352, 2717908992, 2986344448,
			1979711488, 2919235584, 2046820352, 3657433088, 1375731712, 2113929216, 2919235584, 3187671040, 3590324224, 1442840576},
		1000: {943718400, 415236096, 2227175424, 2906652672, 1203765248, 3896508416, 197132288, 3862953984, 2151677952, 297795584,
			364904448, 1094713344, 692060160, 1648361472, 616562688, 1589641216, 3091202048, 1480589312, 4257218560, 3116367872},
	} {
		for j, want := range row {
			if got := s.digits(i, j); got != want {
				t.Errorf("point %d, dimension %d: %d, want %d", i, j, got, want)
			}
		}
	}
}

// slots returns how many of the first n members lie in each of n slices of a parameter.
func slots(d design, n, j int) []int {
	count := make([]int, n)
	for i := range n {
		u := d.at(i, j)
		if !(u >= 0 && u < 1) {
			panic(fmt.Sprint("outside the unit interval: ", u))
		}
		count[int(u*float64(n))]++
	}
	return count
}

// Latin hypercubes of any size and Sobol designs of a power of two have exactly one
// member in each slice of every parameter (their definition); independent points have not.
func TestStratification(t *testing.T) {
	one := func(c []int) bool { return !slices.ContainsFunc(c, func(n int) bool { return n != 1 }) }
	for _, n := range []int{1, 7, 64, 200} {
		d := newLatin(3, n, 20)
		for j := range 20 {
			if !one(slots(d, n, j)) {
				t.Errorf("latin hypercube of %d: parameter %d is not stratified", n, j)
			}
		}
	}
	sobol := newSobol(3, 20)
	for j := range 20 {
		if !one(slots(sobol, 256, j)) {
			t.Errorf("Sobol: parameter %d is not stratified", j)
		}
	}
	if one(slots(scatter(3), 64, 0)) {
		t.Error("independent points are stratified")
	}
}

// Every rectangle of area 1/256 with sides that are powers of a half holds exactly one of
// 256 points in the first two parameters (the property (0, m, 2) of the sequence, Sobol
// 1967, from memory), whatever the shift.
func TestSobolRectangles(t *testing.T) {
	for seed := range uint64(3) {
		s := newSobol(seed, 2)
		for k := range 9 {
			a, b := float64(int(1)<<k), float64(int(1)<<(8-k))
			seen := map[[2]int]bool{}
			for i := range 256 {
				seen[[2]int{int(s.at(i, 0) * a), int(s.at(i, 1) * b)}] = true
			}
			if len(seen) != 256 {
				t.Errorf("seed %d: %d of 256 rectangles 1/%g x 1/%g hold a point", seed, len(seen), a, b)
			}
		}
	}
}

// discrepancy returns the square of the centred L2 discrepancy of n points in dims
// dimensions (Hickernell 1998, Math. Comput. 67, 299, from memory).
func discrepancy(d design, n, dims int) float64 {
	x := make([][]float64, n)
	for i := range x {
		for j := range dims {
			x[i] = append(x[i], d.at(i, j)-0.5)
		}
	}
	sum1, sum2 := 0.0, 0.0
	for i := range x {
		p := 1.0
		for _, u := range x[i] {
			p *= 1 + math.Abs(u)/2 - u*u/2
		}
		sum1 += p
		for k := range x {
			p := 1.0
			for j, u := range x[i] {
				p *= 1 + math.Abs(u)/2 + math.Abs(x[k][j])/2 - math.Abs(u-x[k][j])/2
			}
			sum2 += p
		}
	}
	return math.Pow(13.0/12, float64(dims)) - 2*sum1/float64(n) + sum2/float64(n*n)
}

// The designs are in the order of evenness that they are made for.
func TestDiscrepancy(t *testing.T) {
	for seed := range uint64(3) {
		random, latin, sobol := discrepancy(scatter(seed), 256, 6), discrepancy(newLatin(seed, 256, 6), 256, 6), discrepancy(newSobol(seed, 6), 256, 6)
		if !(sobol < latin/3 && latin < random) {
			t.Errorf("seed %d: random %.2e, latin hypercube %.2e, Sobol %.2e", seed, random, latin, sobol)
		}
	}
}

// A grid goes through every combination once, the last parameter first.
func TestGrid(t *testing.T) {
	l := tiny(t)
	var got []string
	for i := range l.Members {
		v := l.Values(i)
		got = append(got, v[0].Text+", "+v[1].Text)
	}
	want := []string{"2 G, 10 km/s", "2 G, 0 km/s", "4 G, 10 km/s", "4 G, 0 km/s"}
	if !slices.Equal(got, want) {
		t.Errorf("%q", got)
	}
}

// Values at u follow the distribution: its own function gives u back (gonum's, cut off
// at both ends).
func TestDistributions(t *testing.T) {
	normal, log := distuv.Normal{Mu: 12, Sigma: 3}, distuv.LogNormal{Mu: math.Log(2), Sigma: 0.4}
	for _, c := range []struct {
		p        Parameter
		cdf      func(x float64) float64
		from, to float64
	}{
		{Parameter{Uniform: &Span{"6 km/s", "20 km/s"}}, func(x float64) float64 { return x }, 6, 20},
		{Parameter{LogUniform: &Span{"2 G", "9 G"}}, math.Log, 2, 9},
		{Parameter{Normal: &Normal{"12 km/s", "3 km/s", "6 km/s", "20 km/s"}}, normal.CDF, 6, 20},
		{Parameter{LogNormal: &LogNormal{"2", 0.4, "1", "3"}}, log.CDF, 1, 3},
	} {
		for _, u := range []float64{0, 0.001, 0.25, 0.5, 0.9, 0.999} {
			q, err := parseQuantity(c.p.at(u))
			if err != nil {
				t.Fatal(err)
			}
			got := (c.cdf(q.number) - c.cdf(c.from)) / (c.cdf(c.to) - c.cdf(c.from))
			if math.Abs(got-u) > 1e-6 || q.number < c.from || q.number > c.to {
				t.Errorf("%+v: at %g stands %s, whose probability is %g", c.p, u, c.p.at(u), got)
			}
		}
	}
	list := Parameter{Values: []Scalar{"a", "b", "c"}}
	if got := list.at(0) + list.at(0.34) + list.at(0.67) + list.at(math.Nextafter(1, 0)); got != "abcc" {
		t.Errorf("list: %s", got)
	}
}
