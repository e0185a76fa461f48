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
		for k, shares := range coverage(t, q, opt, 64, names, errs) {
			for b, s := range shares {
				if !(s >= 0.60 && s <= 0.76) {
					t.Errorf("%s, height bin %d: %.3f of the intervals hold the mean", names[k], b, s)
				}
			}
		}
	}
}
