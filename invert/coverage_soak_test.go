//go:build soak

package invert

import "testing"

// The intervals hold the mean as often where there is no noise, where the noise of a frame
// is as large as three quarters of the waves, and where the waves are nearly as wide as
// the window. Measured: speeds 0.608 to 0.735, angles 0.621 to 0.737.
//
//	go test -tags soak -run TestCoverageElsewhere -v ./invert
func TestCoverageElsewhere(t *testing.T) {
	for _, c := range []struct {
		noise, cell float64
		frames      int
	}{{0, 7, 240}, {0.3, 7, 240}, {0.1, 12, 360}, {0.1, 5, 180}} {
		q, opt, names, errs := coveragePatch()
		q.noise, q.cell, q.frames = c.noise, c.cell, c.frames
		t.Logf("noise %g km/s, cells of %g Mm, %d frames", c.noise, c.cell, c.frames)
		hold(t, q, opt, names, errs)
	}
}
