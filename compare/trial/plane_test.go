package trial

import (
	"context"
	"math"
	"testing"
)

func runWithMethod(t *testing.T, name string, set ...string) *Outcome {
	t.Helper()
	o, err := Run(context.Background(), load(t, name, set...), Settings{Method: true})
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// Where the observation is of one plane without noise, method is all there is: the
// one-plane run must give the same speeds, to the rounding of the directions.
func TestMethodOfOnePlane(t *testing.T) {
	o := runWithMethod(t, "plane-wave", "image.from=264 deg", "image.to=276 deg", "image.pixel=8 arcsec", "camera.duration=1 h", "inversion.box=11", "inversion.track=11")
	id := o.Verdict.Summary.Identity
	if id.Rest.Count < 500 || !(math.Abs(id.Rest.P2_5) < 1e-4 && math.Abs(id.Rest.P97_5) < 1e-4) || id.Sight.Median != 0 {
		t.Errorf("line of sight %+v, rest %+v: want none", id.Sight, id.Rest)
	}
	if math.Abs(id.Method.Median-id.Speed.Median) > 1e-5 {
		t.Errorf("method %.6f, speed %.6f", id.Method.Median, id.Speed.Median)
	}
}

// In the sphere the line of sight slows the waves by what SPEED_WAVE says (closed form:
// TestSphere) and nothing disturbs the camera: the rest is small, whatever the method is
// made to do. An outward track cut to 11 points and a separation with halved zero
// wavenumber bias the method by more than 5 %.
func TestMethodAndLineOfSight(t *testing.T) {
	o := runWithMethod(t, "sphere", "image.from=263 deg", "image.to=277 deg", "image.inner=1.1 Rsun", "image.outer=1.25 Rsun",
		"image.pixel=6 arcsec", "camera.duration=60 min", "inversion.separation=true", "inversion.track=11", "inversion.box=15")
	id := o.Verdict.Summary.Identity
	t.Logf("speed %.4f = method %.4f + line of sight %.4f + rest %.4f", id.Speed.Median, id.Method.Median, id.Sight.Median, id.Rest.Median)
	if !(math.Abs(id.Method.Median) > 0.05) || !(math.Abs(id.Sight.Median) > 0.01) {
		t.Errorf("method %.4f, line of sight %.4f: nothing to separate", id.Method.Median, id.Sight.Median)
	}
	if math.Abs(id.Rest.Median) > 0.01 {
		t.Errorf("rest %.4f, want less than 0.01", id.Rest.Median)
	}
}
