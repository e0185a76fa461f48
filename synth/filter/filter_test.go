package filter

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"
)

// The closed form against the integral of line times transmission.
func TestGaussianIsTheIntegralOfLineTimesTransmission(t *testing.T) {
	for _, c := range []struct{ d, u, w, wf float64 }{{0, 0, 30, 22}, {33.5, 2, 37, 21.8}, {-33.5, -7, 25, 5}} {
		f := func(x float64) float64 {
			line := math.Exp(-(x-c.u)*(x-c.u)/(c.w*c.w)) / (math.Sqrt(math.Pi) * c.w)
			return line * math.Exp(-(x-c.d)*(x-c.d)/(c.wf*c.wf))
		}
		want := quad.Fixed(f, -400, 400, 2000, nil, 0)
		if got := Gaussian(c.d, c.u, c.w, c.wf); math.Abs(got/want-1) > 1e-9 {
			t.Errorf("%+v: %.12g, want %.12g", c, got, want)
		}
	}
}

func TestEFolding(t *testing.T) {
	w := EFolding(1)
	if got := math.Exp(-0.25 / (w * w)); math.Abs(got-0.5) > 1e-15 {
		t.Errorf("transmission at half the full width: %v", got)
	}
}
