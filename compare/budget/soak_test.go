//go:build soak

package budget

import (
	"math"
	"testing"

	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth/line"
)

// On one plane, with nothing of a camera, there is nothing but the method: every other
// term is below 0.005 with an error below 0.005.
//
//	go test -tags soak -run PlaneWave ./compare/budget
//
// Measured: finite duration +0.0008 +- 0.0002, mu +0.00001, all others exactly 0; the
// method +0.0006 +- 0.0002. 14 s of processor time.
func TestPlaneWave(t *testing.T) {
	b := run(t, Settings{Pieces: 4}, "plane-wave")
	for _, l := range b.Terms {
		t.Logf("%-20s %+.5f +- %.5f", l.Key, l.Field.Share, l.Field.Error)
		for _, e := range []Effect{l.Field, l.Speed, l.Density} {
			for _, x := range []float64{float64(e.Share), float64(e.FromIdeal), float64(e.FromFull), float64(e.Error)} {
				if !(math.Abs(x) < 0.005) {
					t.Errorf("%s: %+v", l.Key, e)
				}
			}
		}
	}
	t.Logf("method %+.5f +- %.5f, %d of %d pixels", b.Method.Field.Share, b.Method.Field.Error, b.Pixels.Used, b.Pixels.Total)
}

// w is the integral of cos^n over (-pi/2, pi/2).
func w(n float64) float64 {
	a, _ := math.Lgamma((n + 1) / 2)
	b, _ := math.Lgamma(n/2 + 1)
	return math.Sqrt(math.Pi) * math.Exp(a-b)
}

// On the sphere the density's terms are those of an independent quadrature of the line
// model and the line of sight's term in the speed is W(Q)/W(Q+1), Q = 2q - 2 for cells
// that widen with r, q the radial slope of the emissivity (derived), each within 1 %.
//
//	go test -tags soak -run Sphere ./compare/budget
//
// Measured by height bin: density 0.7483 to 0.7583, within 0.03 % of the quadrature; speed
// 1.0215 to 1.0220 against 1.0217 to 1.0227, within 0.08 %. 65 s of processor time.
func TestSphere(t *testing.T) {
	b := run(t, Settings{Pieces: 4}, "sphere", "image.from=250 deg", "image.to=290 deg")
	checkSphere(t, b)
	l, err := scenarios.Load("sphere")
	if err != nil {
		t.Fatal(err)
	}
	m, _, err := trial.Model("line", l.Scenario.Line, 0.1)
	if err != nil {
		t.Fatal(err)
	}
	n := func(r float64) float64 { return 4e8 * math.Pow(r, -8) }
	var sum, pixels float64
	for _, h := range b.Heights {
		r := float64(h.From+h.To) / 2
		q, _ := line.RadialSlopes(m, n, 1.6e6, r)
		want := math.Log(w(2*q-2) / w(2*q-1))
		sum += want * float64(h.Pixels)
		pixels += float64(h.Pixels)
		for _, s := range h.Terms {
			if s.Key == "waves_off_plane" {
				t.Logf("%.3f: speed %.4f, W(Q)/W(Q+1) %.4f", r, math.Exp(float64(s.Speed)), math.Exp(want))
				if math.Abs(float64(s.Speed)-want) > 0.01 {
					t.Errorf("%.3f: ln speed %.4f, W(Q)/W(Q+1) %.4f", r, s.Speed, want)
				}
			}
		}
	}
	e := b.term("waves_off_plane").Speed
	for _, x := range []float64{float64(e.Share), float64(e.FromIdeal), float64(e.FromFull)} {
		if math.Abs(x-sum/pixels) > 0.01 {
			t.Errorf("whole field: %+v, W(Q)/W(Q+1) %.4f", e, sum/pixels)
		}
	}
	t.Logf("whole field: %+v, W(Q)/W(Q+1) %.4f", e, sum/pixels)
}
