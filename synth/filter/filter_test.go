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

// The product of cos^2, its series and its widths.
func TestBirefringent(t *testing.T) {
	for stages := 1; stages <= 6; stages++ {
		b := NewBirefringent(stages, 0.13)
		if got := b.Transmission(0.065); math.Abs(got-0.5) > 1e-12 {
			t.Errorf("%d stages: transmission at half the full width: %v", stages, got)
		}
		for _, x := range []float64{0, 0.03, 0.1, 0.2, 0.5} {
			// A line without width sees the transmission itself.
			if got, want := b.Line(x, 0, 0), b.Transmission(x); math.Abs(got-want) > 1e-7 {
				t.Errorf("%d stages at %g: series %.9g, product %.9g", stages, x, got, want)
			}
			for _, w := range []float64{0.05, 0.11} {
				f := func(y float64) float64 {
					return math.Exp(-(y-0.01)*(y-0.01)/(w*w)) / (math.Sqrt(math.Pi) * w) * b.Transmission(x-y)
				}
				if got, want := b.Line(x, 0.01, w), quad.Fixed(f, 0.01-8*w, 0.01+8*w, 400, nil, 0); math.Abs(got-want) > 1e-7 {
					t.Errorf("%d stages, width %g at %g: %.9g, integral %.9g", stages, w, x, got, want)
				}
			}
		}
		if got, want := EquivalentWidth(stages, 0.13), quad.Fixed(b.Transmission, 0, b.Period, 400, nil, 0); math.Abs(got/want-1) > 1e-9 {
			t.Errorf("%d stages: equivalent width %.9g, integral %.9g", stages, got, want)
		}
	}
	if got, want := EquivalentWidth(0, 1), math.Sqrt(math.Pi/math.Ln2)/2; math.Abs(got/want-1) > 1e-12 {
		t.Errorf("equivalent width of a Gaussian %v, want %v", got, want)
	}
}
