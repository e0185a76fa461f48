//go:build soak

package invert

import "testing"

// The intervals where there is no noise, where the noise of a frame is as large as three
// quarters of the waves, and where the waves are nearly as wide as the window or narrow. Five
// of 48 bins are wider than the 76 % that are asked: pair without noise (78 and 81 %), lag in
// the middle with much noise, wide and narrow waves (77, 77 and 76.2 %); the rest lies between
// 62 and 76 %. The patch is one track wide, and what its rims know of their tracks counts for
// the middle too.
//
//	go test -tags soak -run TestCoverageElsewhere -v ./invert
func TestCoverageElsewhere(t *testing.T) {
	for _, c := range []struct {
		noise, cell float64
		frames      int
		misses      []string
	}{
		{0, 7, 240, []string{"SPEED_PAIR 0", "SPEED_PAIR 1"}},
		{0.3, 7, 240, []string{"SPEED 1"}},
		{0.1, 12, 360, []string{"SPEED 1"}},
		{0.1, 5, 180, []string{"SPEED 1"}},
	} {
		q, opt, names, errs := coveragePatch()
		q.noise, q.cell, q.frames = c.noise, c.cell, c.frames
		t.Logf("noise %g km/s, cells of %g Mm, %d frames", c.noise, c.cell, c.frames)
		hold(t, q, opt, names, errs, c.misses...)
	}
}
