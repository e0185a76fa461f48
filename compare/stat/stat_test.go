package stat

import (
	"encoding/json"
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

var nan = math.NaN()

// sample holds a NaN and an infinity: both count as missing.
var sample = []float64{7.1, -2.5, 3.25, nan, 11.0, 0.4, 3.25, -8.75, 100.0, 2.2, math.Inf(1)}

func TestQuantile(t *testing.T) {
	// Printed by numpy 1.24.2: numpy.quantile(x, p), method "linear", of the
	// finite values of sample.
	for _, c := range []struct{ p, want float64 }{
		{0, -8.75}, {0.025, -7.5}, {0.16, -1.688}, {0.25, 0.4}, {0.5, 3.25},
		{0.84, 9.908}, {0.975, 82.19999999999999}, {1, 100},
	} {
		if got := Quantile(c.p, sample); got != c.want {
			t.Errorf("Quantile(%g) = %.17g, want %.17g", c.p, got, c.want)
		}
	}
}

func TestQuantilePanicsOutside(t *testing.T) {
	for _, p := range []float64{-0.1, 1.1, nan} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("Quantile(%g) did not panic", p)
				}
			}()
			Quantile(p, sample)
		}()
	}
}

func TestMedian(t *testing.T) {
	for _, c := range []struct {
		x      []float64
		median float64
	}{
		// numpy 1.24.2 median.
		{sample, 3.25},
		{[]float64{4, 1, 3, 2}, 2.5},
		// By definition.
		{[]float64{5}, 5},
		{nil, nan},
		{[]float64{nan, nan}, nan},
	} {
		if got := Median(c.x); !same(got, c.median) {
			t.Errorf("Median(%v) = %.17g, want %.17g", c.x, got, c.median)
		}
	}
}

func same(a, b float64) bool { return a == b || math.IsNaN(a) && math.IsNaN(b) }

func TestSummarise(t *testing.T) {
	// numpy 1.24.2: quantile([3, 1, 2], [.5, .025, .16, .84, .975]).
	x := []float64{3, 1, nan, 2}
	got := Summarise(x)
	want := Summary{Median: 2, P2_5: 1.05, P16: 1.32, P84: 2.6799999999999997, P97_5: 2.95, Count: 3}
	if got != want {
		t.Errorf("got %+v, want %+v", got, want)
	}
	if x[0] != 3 || x[3] != 2 {
		t.Error("the sample was reordered")
	}
}

func TestSummaryJSON(t *testing.T) {
	b, err := json.Marshal(Summarise(nil))
	if err != nil {
		t.Fatal(err)
	}
	if want := `{"median":null,"p2_5":null,"p16":null,"p84":null,"p97_5":null,"count":0}`; string(b) != want {
		t.Errorf("empty: %s, want %s", b, want)
	}
	var s Summary
	if err := json.Unmarshal(b, &s); err != nil || !math.IsNaN(s.Median) || !math.IsNaN(s.P97_5) || s.Count != 0 {
		t.Errorf("null read back as %+v, %v", s, err)
	}
	with := `{"median":1,"p2_5":1,"p16":1,"p84":1,"p97_5":1,"count":2,"median_low":0.5,"median_high":2,"blocks":4}`
	if err := json.Unmarshal([]byte(with), &s); err != nil || s.Interval == nil || s.Interval.Low != 0.5 || s.Interval.High != 2 || s.Interval.Blocks != 4 {
		t.Errorf("interval read back as %+v, %v", s.Interval, err)
	}
	if b, err := json.Marshal(s); err != nil || string(b) != with {
		t.Errorf("interval written as %s, %v", b, err)
	}
	s.Interval = &Interval{nan, nan, 2}
	if b, err := json.Marshal(s); err != nil || json.Unmarshal(b, &s) != nil || !math.IsNaN(s.Interval.Low) || s.Interval.Blocks != 2 {
		t.Errorf("no interval: %s, %v", b, err)
	}
	full := Summarise(sample)
	b, _ = json.Marshal(full)
	if err := json.Unmarshal(b, &s); err != nil || s != full {
		t.Errorf("read back %+v, %v, want %+v", s, err, full)
	}
}

// Properties that hold by definition for any finite sample.
func TestQuantileProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Float64Range(-1e6, 1e6), 1, 40).Draw(t, "x")
		p := rapid.Float64Range(0, 1).Draw(t, "p")
		q := rapid.Float64Range(0, 1).Draw(t, "q")
		if p > q {
			p, q = q, p
		}
		a, b := Quantile(p, x), Quantile(q, x)
		if !(slices.Min(x) <= a && a <= b && b <= slices.Max(x)) {
			t.Fatalf("min %g, Q(%g) = %g, Q(%g) = %g, max %g", slices.Min(x), p, a, q, b, slices.Max(x))
		}
		y := slices.Clone(x)
		slices.Reverse(y)
		if Summarise(x) != Summarise(y) {
			t.Fatal("the order of the sample matters")
		}
	})
}
