//go:build soak

package trial

import (
	"math"
	"testing"

	"offplane/compare/stat"
)

// The joint fit against the lags on wedges of the embedded scenarios: median and median
// absolute error of the speed over SPEED_WAVE. It has to be nearer on five or more.
//
//	go test -tags soak -run TestEstimatorsOnTheLibrary -v -timeout 1h ./compare/trial
func TestEstimatorsOnTheLibrary(t *testing.T) {
	better := 0
	for _, name := range []string{"plane-wave", "sphere", "quick", "quiet-belt", "tilted-belt", "warped-belt", "clumpy-belt", "two-loops", "source-surface"} {
		o := run(t, name, "image.from=262 deg", "image.to=278 deg", "camera.duration=90 min", "inversion.separation=true", "inversion.estimators=[lag, unsplit, pair]")
		var error [3]float64
		for i, m := range []string{"SPEED", "SPEED_UNSPLIT", "SPEED_PAIR"} {
			var r, e []float64
			for _, p := range o.Observation.Pixels {
				if x := float64(o.Inferred.Maps.Get(m).Data[p]) / float64(o.Truth.Maps.Get("SPEED_WAVE").Data[p]); !math.IsNaN(x) {
					r, e = append(r, x), append(e, math.Abs(x-1))
				}
			}
			error[i] = stat.Median(e)
			t.Logf("%-14s %-13s median %.3f, median absolute error %.3f, %d of %d pixels", name, m, stat.Median(r), error[i], len(r), len(o.Observation.Pixels))
		}
		if error[2] < error[0] {
			better++
		}
	}
	if better < 5 {
		t.Errorf("the joint fit is nearer on %d scenarios, want 5 or more", better)
	}
}
