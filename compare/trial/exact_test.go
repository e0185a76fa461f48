package trial

import (
	"math"
	"testing"
)

// A number that is off, or none, is not taken for exact.
func TestCheckOK(t *testing.T) {
	for _, c := range []struct {
		measured float64
		ok       bool
	}{{1.01, true}, {0.99, true}, {1.011, false}, {math.NaN(), false}, {math.Inf(1), false}} {
		if got := (&Check{Measured: c.measured, Exact: 1, Tolerance: 0.0100001}).OK(); got != c.ok {
			t.Errorf("%g: %v", c.measured, got)
		}
	}
}
