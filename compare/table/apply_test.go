package table

import (
	"math"
	"slices"
	"strings"
	"testing"

	"offplane/compare/stat"
)

func TestApply(t *testing.T) {
	ms := invented(80, 30, 7)
	tab := build(t, ms, Options{Features: []Feature{Height, Field, Speed}})
	n := math.NaN()
	in := Input{Quantity: FieldQ, Values: []float64{2, 2, 2, n, -1, 2}, SameWay: true}
	in.Features[Height] = []float64{1.1, 1.2, 1.9, 1.1, 1.1, 1.15}
	in.Features[Speed] = []float64{500, n, 500, 500, 500, 1e5}
	a := tab.Apply(in)
	for i, want := range []int32{0, Coarser, OutOfRange, NoValue, NoValue, OutOfRange} {
		if a.Flag[i] != want {
			t.Errorf("pixel %d: flag %b, want %b", i, a.Flag[i], want)
		}
	}
	if a.Valid != 4 || a.Corrected != 2 || a.Coarse != 1 || len(a.Used) != 2 {
		t.Errorf("%+v", a)
	}
	full, coarse := tab.Find(FieldQ, []Feature{Height, Field, Speed}).Grid, &a.Used[1]
	past := []Past{{Height, true, full[0].Nodes[len(full[0].Nodes)-1], 1}, {Speed, true, full[2].Nodes[len(full[2].Nodes)-1], 1}}
	if !slices.Equal(a.Past, past) || a.Used[0].Pixels != 3 || a.Used[0].Corrected != 1 || coarse.Pixels != 1 || coarse.Corrected != 1 {
		t.Errorf("beyond %+v, want %+v; used %+v", a.Past, past, a.Used)
	}
	for _, u := range []struct{ by, want float64 }{{1e4, 1e-4}, {1e-4, 1e4}, {1, 0}, {30, 0}} {
		wrong := in
		wrong.Values = []float64{2 * u.by, 2.1 * u.by, 1.9 * u.by, n, -1, n}
		if f, ok := tab.WrongUnit(wrong, Field); ok != (u.want != 0) || ok && math.Abs(f/u.want-1) > 1e-12 {
			t.Errorf("values times %g: wrong by %g, %v", u.by, f, ok)
		}
	}
	c, _ := tab.Find(FieldQ, []Feature{Height, Field, Speed}).At([]float64{1.1, 2, 500}, tab.Least)
	if a.Factor[0] != math.Exp(c.Median) || a.Values[0] != 2*a.Factor[0] || !(a.Low95[0] < a.Low68[0] && a.Low68[0] < a.Values[0] && a.Values[0] < a.High68[0] && a.High68[0] < a.High95[0]) {
		t.Errorf("%+v", a)
	}
	if a.Values[2] != 2 || !math.IsNaN(a.Factor[2]) || !math.IsNaN(a.Low68[2]) || a.Median != stat.Median(a.Factor[:2]) {
		t.Errorf("outside the domain: %+v", a)
	}
	in.SameWay = false
	if a := tab.Apply(in); a.Corrected != 0 || a.Flag[0] != OtherWay || a.Values[0] != 2 || !math.IsNaN(a.Median) {
		t.Errorf("another recipe: %+v", a)
	}
}

// B = v sqrt(4 pi mu m_p n): 400 km/s and 1e8 cm^-3 with mu = 1.167 make 1.981 G (by hand:
// 4e7 sqrt(4 pi 1.167 1.6726e-24 1e8)).
func TestComplete(t *testing.T) {
	b, n, v := []float64{1.981}, []float64{1e8}, []float64{400}
	for _, c := range []struct {
		q    Quantity
		set  map[Feature][]float64
		want Feature
		is   float64
	}{
		{FieldQ, map[Feature][]float64{Field: b, Density: n}, Speed, 400},
		{FieldQ, map[Feature][]float64{Field: b, Speed: v}, Density, 1e8},
		{SpeedQ, map[Feature][]float64{Speed: v, Density: n}, Field, 1.981},
	} {
		in := Input{Quantity: c.q, Values: c.set[c.q.Feature()]}
		for f, x := range c.set {
			in.Features[f] = x
		}
		f, ok := in.Complete(1.167)
		if !ok || f != c.want || math.Abs(in.Features[f][0]/c.is-1) > 1e-3 {
			t.Errorf("%v %v %v, want %v %g", f, ok, in.Features[f], c.want, c.is)
		}
		if _, again := in.Complete(1.167); again {
			t.Error("nothing is missing, but something was added")
		}
	}
}

func TestRecipe(t *testing.T) {
	table := Recipe{{"estimator", "lag"}, {"mu", "1.167"}, {"pixel", "4.35"}}
	for _, c := range []struct{ set, differ, unknown string }{
		{"estimator=lag mu=1.1667 pixel=4.36", "", ""},
		{"estimator=pair mu=1.167 pixel=4.35", "estimator is pair, the table's is lag", ""},
		{"estimator=lag mu=1.2 pixel=4.5", "mu is 1.2, the table's is 1.167; pixel is 4.5, the table's is 4.35", ""},
		{"pixel=4.35 camera=other", "", "estimator=lag; mu=1.167"},
	} {
		r, err := Recipe(nil).With(strings.Fields(c.set)...)
		if err != nil {
			t.Fatal(err)
		}
		d, u := table.Differ(r)
		if strings.Join(d, "; ") != c.differ || strings.Join(u, "; ") != c.unknown {
			t.Errorf("%s: %q, %q", c.set, d, u)
		}
	}
	for _, bad := range []string{"estimater=lag", "pixel", "pixel=", "pixel=abc", "mu=NaN", "track=-1"} {
		if _, err := Recipe(nil).With(bad); err == nil {
			t.Errorf("%q is let pass", bad)
		}
	}
}
