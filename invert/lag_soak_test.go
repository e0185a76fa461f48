//go:build soak

package invert

import "testing"

// Measured, with the exact lags' and what the mean cross-spectrum gives these in brackets:
// 2.752 +- 0.028 (2.697, 2.659), 4.37 +- 0.09 (4.22, 4.378), 1.710 (1.698, 1.704), 1.019
// (1.017, 1.007), 2.385 +- 0.026 (2.375, 2.341), 1.087 (1.083, 1.072), 1.005 (1.006, 1.003),
// to be met 3.0, 4.8, 1.6, 1.03, 2.2, 1.06, 1.01.
//
//	go test -tags soak -run TestCounterPropagationLong -v ./invert
func TestCounterPropagationLong(t *testing.T) {
	for _, c := range counters {
		c.check(t, 1000)
	}
}
