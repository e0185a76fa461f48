//go:build soak

package trial

import (
	"math"
	"testing"

	"offplane/compare/stat"
)

// The joint fit against the lags on wedges of the embedded scenarios, 90 min each: median
// and median absolute error of the speed over SPEED_WAVE. It has to be nearer on five or
// more. Measured, lag, unsplit, pair:
//
//	plane-wave      0.861 0.139   1.002 0.006   1.002 0.006
//	sphere          0.885 0.115   1.001 0.016   1.001 0.017
//	quick           0.855 0.147   1.188 0.192   1.014 0.023
//	tilted-belt     0.810 0.191   1.151 0.162   1.085 0.102
//	warped-belt     0.814 0.189   1.261 0.266   1.061 0.079
//	clumpy-belt     0.849 0.152   1.196 0.203   1.017 0.031
//	two-loops       0.746 0.255   1.051 0.091   1.026 0.072
//	source-surface  0.856 0.144   1.024 0.058   1.007 0.041
//	quiet-belt      0.722 0.278   1.004 0.031   1.007 0.032   (300 to 316 deg)
//
//	go test -tags soak -run TestEstimatorsOnTheLibrary -v -timeout 1h ./compare/trial
func TestEstimatorsOnTheLibrary(t *testing.T) {
	west, belt := [2]string{"262 deg", "278 deg"}, [2]string{"300 deg", "316 deg"} // quick is the west of quiet-belt
	better := 0
	for _, c := range []struct {
		name string
		at   [2]string
	}{
		{"plane-wave", west}, {"sphere", west}, {"quick", west}, {"tilted-belt", west}, {"warped-belt", west},
		{"clumpy-belt", west}, {"two-loops", west}, {"source-surface", west}, {"quiet-belt", belt},
	} {
		t.Run(c.name, func(t *testing.T) {
			o := run(t, c.name, "image.from="+c.at[0], "image.to="+c.at[1], "camera.duration=90 min", "inversion.separation=true", "inversion.estimators=[lag, unsplit, pair]")
			var off [3]float64
			for i, m := range []string{"SPEED", "SPEED_UNSPLIT", "SPEED_PAIR"} {
				var r, e []float64
				for _, p := range o.Observation.Pixels {
					if x := float64(o.Inferred.Maps.Get(m).Data[p]) / float64(o.Truth.Maps.Get("SPEED_WAVE").Data[p]); !math.IsNaN(x) {
						r, e = append(r, x), append(e, math.Abs(x-1))
					}
				}
				off[i] = stat.Median(e)
				t.Logf("%-13s median %.3f, median absolute error %.3f, %d of %d pixels", m, stat.Median(r), off[i], len(r), len(o.Observation.Pixels))
			}
			if off[2] < off[0] {
				better++
			}
		})
	}
	if better < 5 {
		t.Errorf("the joint fit is nearer on %d scenarios, want 5 or more", better)
	}
}
