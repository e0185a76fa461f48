package model

import (
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios"
	"offplane/synth/random"
)

// strands is fine structure of the density: a log-normal factor of mean one, constant
// along each field line, addressed by the footpoint.
type strands struct {
	seed   uint64
	size   float64 // [solar radii] at the surface
	spread float64 // standard deviation of ln n
	own    bool    // each cell's wave rides the cell's own density, not the mean
}

// use separates the strands' random numbers from all others of the same seed.
const strandUse = 0x737472616e64

func newStrands(s *scenarios.Strands, seed uint64) *strands {
	if s == nil {
		return nil
	}
	return &strands{seed: seed, size: s.Size.Rsun(), spread: s.Spread, own: s.Waves == "own"}
}

// factor returns the density factor of the line that meets the surface at p (a unit
// vector). ln of it is a normal number, smooth over one size and of the same variance
// everywhere: normal numbers at the corners of cubes, blended along each axis by cosine
// and sine of a quarter turn, so that the squares of the weights add up to one.
func (s *strands) factor(p r3.Vec) float64 {
	var weight [3][2]float64
	var base [3]int64
	for a, x := range [3]float64{p.X, p.Y, p.Z} {
		x /= s.size
		f := math.Floor(x)
		base[a] = int64(f)
		weight[a][1], weight[a][0] = math.Sincos((x - f) * math.Pi / 2)
	}
	xi := 0.0
	for n := range 8 {
		i, j, k := n>>2, n>>1&1, n&1
		key := random.NewKey(strandUse, s.seed, uint64(base[0]+int64(i)), uint64(base[1]+int64(j)))
		xi += weight[0][i] * weight[1][j] * weight[2][k] * key.Normal(uint64(base[2]+int64(k)))
	}
	return math.Exp(s.spread*xi - s.spread*s.spread/2)
}
