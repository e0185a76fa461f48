package ensemble

import (
	"math/bits"

	"offplane/synth/random"
)

// Addresses of the random numbers below the ensemble's seed.
const (
	seedAddress uint64 = iota
	randomAddress
	latinAddress
	sobolAddress
)

// A design places member i in the unit cube: at(i, j) in [0, 1) for parameter j.
type design interface{ at(i, j int) float64 }

func newDesign(e *Ensemble) design {
	switch e.Design {
	case "grid":
		return newGrid(e)
	case "latin-hypercube":
		return newLatin(e.Seed, e.Members, len(e.Parameters))
	case "sobol":
		return newSobol(e.Seed, len(e.Parameters))
	}
	return scatter(e.Seed)
}

// scatter is a design of independent points.
type scatter uint64

func (s scatter) at(i, j int) float64 {
	return random.NewKey(uint64(s), randomAddress, uint64(j)).Uniform(uint64(i))
}

// A grid counts through the lists of values; the last parameter changes first.
type grid struct{ size, stride []int }

func newGrid(e *Ensemble) *grid {
	n := len(e.Parameters)
	g := &grid{make([]int, n), make([]int, n)}
	for j, stride := n-1, 1; j >= 0; j-- {
		g.size[j], g.stride[j] = len(e.Parameters[j].Values), stride
		stride *= g.size[j]
	}
	return g
}

func (g *grid) at(i, j int) float64 {
	return (float64(i/g.stride[j]%g.size[j]) + 0.5) / float64(g.size[j])
}

// A latin design has exactly one member in each of n equal slices of every parameter
// (McKay, Beckman & Conover 1979, Technometrics 21, 239, from memory).
type latin struct {
	seed   uint64
	slices [][]int // by parameter, a permutation of the members
}

func newLatin(seed uint64, members, parameters int) *latin {
	l := &latin{seed, make([][]int, parameters)}
	for j := range l.slices {
		s, key := make([]int, members), random.NewKey(seed, latinAddress, uint64(j))
		for i := range s {
			k := int(key.Uniform(uint64(i)) * float64(i+1))
			s[i] = s[k]
			s[k] = i
		}
		l.slices[j] = s
	}
	return l
}

func (l *latin) at(i, j int) float64 {
	s := l.slices[j]
	within := random.NewKey(l.seed, latinAddress, uint64(j), 1).Uniform(uint64(i))
	return (float64(s[i]) + within) / float64(len(s))
}

// A sobol design is the sequence of Sobol in Gray-code order (Antonov & Saleev 1979,
// USSR Comput. Math. Math. Phys. 19, 252, from memory) with the direction numbers of
// Joe & Kuo 2008, SIAM J. Sci. Comput. 30, 2635, each parameter shifted digit by digit
// by a random number, which keeps its evenness and moves its first point off the corner.
type sobol struct {
	direction [][32]uint32
	shift     []uint32
}

func newSobol(seed uint64, parameters int) *sobol {
	s := &sobol{make([][32]uint32, parameters), make([]uint32, parameters)}
	for j := range parameters {
		s.direction[j] = directions(j)
		s.shift[j] = uint32(random.Hash(seed, sobolAddress, uint64(j)))
	}
	return s
}

func (s *sobol) at(i, j int) float64 {
	return float64(s.digits(i, j)^s.shift[j]) / (1 << 32)
}

// digits returns the binary fraction of the sequence itself, not shifted.
func (s *sobol) digits(i, j int) (x uint32) {
	for gray := uint32(i) ^ uint32(i)>>1; gray != 0; gray &= gray - 1 {
		x ^= s.direction[j][bits.TrailingZeros32(gray)]
	}
	return x
}

// directions returns the direction numbers of dimension j by the recurrence of its
// primitive polynomial.
func directions(j int) (v [32]uint32) {
	if j == 0 {
		for k := range v {
			v[k] = 1 << (31 - k)
		}
		return v
	}
	p := joeKuo[j-1]
	degree := len(p.m)
	for k := range v {
		if k < degree {
			v[k] = p.m[k] << (31 - k)
			continue
		}
		v[k] = v[k-degree] ^ v[k-degree]>>degree
		for l := 1; l < degree; l++ {
			if p.a>>(degree-1-l)&1 == 1 {
				v[k] ^= v[k-l]
			}
		}
	}
	return v
}

// joeKuo holds dimensions 2 to 20 of Joe & Kuo 2008: the inner coefficients of the
// primitive polynomial and the first odd numbers of the recurrence.
var joeKuo = []struct {
	a uint32
	m []uint32
}{
	{0, []uint32{1}},
	{1, []uint32{1, 3}},
	{1, []uint32{1, 3, 1}},
	{2, []uint32{1, 1, 1}},
	{1, []uint32{1, 1, 3, 3}},
	{4, []uint32{1, 3, 5, 13}},
	{2, []uint32{1, 1, 5, 5, 17}},
	{4, []uint32{1, 1, 5, 5, 5}},
	{7, []uint32{1, 1, 7, 11, 19}},
	{11, []uint32{1, 1, 5, 1, 1}},
	{13, []uint32{1, 1, 1, 3, 11}},
	{14, []uint32{1, 3, 5, 5, 31}},
	{1, []uint32{1, 3, 3, 9, 7, 49}},
	{13, []uint32{1, 1, 1, 15, 21, 21}},
	{16, []uint32{1, 3, 1, 13, 27, 49}},
	{19, []uint32{1, 1, 1, 15, 7, 5}},
	{22, []uint32{1, 3, 1, 15, 13, 25}},
	{25, []uint32{1, 1, 5, 5, 19, 61}},
	{1, []uint32{1, 3, 7, 11, 23, 15, 103}},
}
