package invert

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The logarithm against the library's, over all magnitudes of a ratio of intensities.
func TestLog(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for range 200000 {
		x := math.Exp(170 * (rng.Float64() - 0.5))
		if rng.IntN(2) == 0 {
			x = 1 + 1e-2*(rng.Float64()-0.5)
		}
		if want := math.Log(x); math.Abs(ln(x)-want) > 6e-11+3e-16*math.Abs(want) {
			t.Fatalf("ln(%g) = %g, want %g", x, ln(x), want)
		}
	}
}
