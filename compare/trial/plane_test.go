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

// In the sphere the line of sight speeds the waves up by what SPEED_WAVE says (closed
// form: TestSphere) and nothing disturbs the camera. A sound method then leaves no rest. One that a
// short track and the separation bias by more than 10 % leaves what it and the line of sight
// do to each other: of the order of their product (derived), within twice the interval
// of the median.
func TestMethodAndLineOfSight(t *testing.T) {
	set := []string{"image.from=263 deg", "image.to=277 deg", "image.inner=1.1 Rsun", "image.outer=1.25 Rsun",
		"image.pixel=6 arcsec", "sight.step=1.5", "camera.duration=60 min", "inversion.box=15"}
	for _, c := range []struct {
		recipe      []string
		least, most float64 // of the method's bias
	}{
		{[]string{"inversion.track=21"}, 0, 0.01},
		{[]string{"inversion.track=19", "inversion.separation=true"}, 0.1, 0.4},
	} {
		id := runWithMethod(t, "sphere", append(c.recipe, set...)...).Verdict.Summary.Identity
		i := id.Rest.Interval
		t.Logf("speed %.4f = method %.4f + line of sight %.4f + rest %.4f (%.4f to %.4f)", id.Speed.Median, id.Method.Median, id.Sight.Median, id.Rest.Median, i.Low, i.High)
		if m := math.Abs(id.Method.Median); m < c.least || m > c.most {
			t.Errorf("method %.4f, want %g to %g", m, c.least, c.most)
		}
		if !(id.Sight.Median > 0.015 && id.Sight.Median < 0.03) || !(i.High-i.Low < 0.03) {
			t.Errorf("line of sight %.4f, rest %.4f to %.4f", id.Sight.Median, i.Low, i.High)
		}
		if limit := math.Abs(id.Method.Median*id.Sight.Median) + (i.High - i.Low); math.Abs(id.Rest.Median) > limit {
			t.Errorf("rest %.4f, want less than %.4f", id.Rest.Median, limit)
		}
	}
}
