package line

import (
	"errors"
	"math"
	"testing"

	"pgregory.net/rapid"
)

// tables are the ranges that the accuracy is checked over: everything, one
// temperature, a wedge of a corona, a narrow corner at each end.
func tables(m *Model) map[string]Range {
	g := m.Range()
	return map[string]Range{
		"all":             {g.Density, g.Temperature, [2]float64{1, 12}},
		"one temperature": {g.Density, [2]float64{1.5e6, 1.5e6}, [2]float64{1, 12}},
		"wedge":           {[2]float64{1e5, 3e9}, [2]float64{0.9e6, 1.8e6}, [2]float64{1.03, 4}},
		"one height":      {[2]float64{1e7, 1e9}, [2]float64{1e6, 1.1e6}, [2]float64{1.1, 1.1}},
		"hot corner":      {[2]float64{9e9, 1e10}, [2]float64{g.Temperature[1] * 0.999, g.Temperature[1]}, [2]float64{1, 1.0001}},
		"one point":       {[2]float64{1e4, 1e4}, [2]float64{g.Temperature[0], g.Temperature[0] * 1.0001}, [2]float64{5, 5}},
	}
}

// TestTable holds the table against the direct solution in the middle of every
// cell, where the error of interpolation is largest, at its corners, and along its
// outer faces.
func TestTable(t *testing.T) {
	dark := model(t, Default(), func(o *Options) { o.Photo = 0 })
	for _, m := range []*Model{model(t, Default(), nil), dark} {
		for name, over := range tables(m) {
			if m == dark && name != "all" {
				continue
			}
			table, err := m.Table(over)
			if err != nil {
				t.Fatal(err)
			}
			w := worst{what: name}
			points := func(a axis, b [2]float64, of func(float64) float64) (xs []float64) {
				xs = append(xs, b[0], b[1])
				for i := range 2 * a.n {
					if x := of(a.lo + float64(i)*a.h/2); x > b[0] && x < b[1] {
						xs = append(xs, x)
					}
				}
				return xs
			}
			c, work, p := make([]float64, m.n*m.n), make([]float64, m.n*m.n), make([]float64, m.n)
			temps := points(table.t, over.Temperature, math.Exp)
			// The points alternate between middles of cells and nodes; of the whole
			// range the middles do.
			for it, temp := range temps {
				if name == "all" && it%2 == 1 && it > 1 {
					continue
				}
				m.coefficients(temp, c)
				ions := m.ionsPerElectron(temp)
				for _, r := range points(table.x, over.Height, heightOf) {
					j := m.MeanIntensity(r)
					for _, n := range points(table.n, over.Density, math.Exp) {
						m.solve(n, c, j, work, p)
						j1, j2 := table.Emissivities(n, temp, r)
						for k, got := range [2]float64{j1, j2} {
							if x := math.Abs(got/(n*ions*m.PerIon(k, p)) - 1); !(x <= w.x) { // spare the formatting
								w.add(x, "n %.6g, T %.6g, r %.6g, line %d", n, temp, r, k+1)
							}
						}
					}
				}
			}
			t.Logf("%d x %d x %d points", table.n.n, table.t.n, table.x.n)
			w.within(t, 1e-4)
		}
	}
}

// A table of all levels agrees with its model too.
func TestTableOfAllLevels(t *testing.T) {
	m := model(t, Default(), func(o *Options) { o.Levels = All })
	over := Range{[2]float64{1e7, 1e9}, [2]float64{1e6, 2e6}, [2]float64{1.05, 2}}
	table, err := m.Table(over)
	if err != nil {
		t.Fatal(err)
	}
	rapid.Check(t, func(t *rapid.T) {
		n := math.Exp(rapid.Float64Range(math.Log(1.001e7), math.Log(0.999e9)).Draw(t, "ln n"))
		temp := rapid.Float64Range(1e6, 2e6).Draw(t, "T")
		r := rapid.Float64Range(1.05, 2).Draw(t, "r")
		a1, a2 := m.Emissivities(n, temp, r)
		b1, b2 := table.Emissivities(n, temp, r)
		if math.Abs(b1/a1-1) > 1e-4 || math.Abs(b2/a2-1) > 1e-4 {
			t.Fatalf("%g %g against %g %g", b1, b2, a1, a2)
		}
	})
}

func TestTableRanges(t *testing.T) {
	m := model(t, Default(), nil)
	for name, over := range map[string]Range{
		"infinite":   m.Range(),
		"descending": {[2]float64{1e9, 1e7}, [2]float64{1e6, 2e6}, [2]float64{1.05, 2}},
		"NaN":        {[2]float64{1e7, 1e9}, [2]float64{1e6, math.NaN()}, [2]float64{1.05, 2}},
		"too dense":  {[2]float64{1e7, 1e12}, [2]float64{1e6, 2e6}, [2]float64{1.05, 2}},
		"below r=1":  {[2]float64{1e7, 1e9}, [2]float64{1e6, 2e6}, [2]float64{0.9, 2}},
		"too cold":   {[2]float64{1e7, 1e9}, [2]float64{1e5, 2e6}, [2]float64{1.05, 2}},
	} {
		if _, err := m.Table(over); err == nil {
			t.Errorf("%s: accepted", name)
		}
	}
}

// Closed form: with j_k ~ n^p_k, n = N0 ratio^(1/(p2-p1)) and the slope is
// 1/(p2-p1), whichever line is the steeper.
func TestDensityOfPowerLaw(t *testing.T) {
	for _, e := range []PowerLaw{{1e-9, 1e8, 1.4, 1.8}, {1e-9, 1e8, 2, 1}} {
		v, err := NewInverter(e, 1.5e6, 1, 2)
		if err != nil {
			t.Fatal(err)
		}
		for _, want := range []float64{1e4, 3.3e5, 1e8, 7.7e9, 1e10} {
			j1, j2 := e.Emissivities(want, 1.5e6, 1.3)
			n, slope, err := Density(e, j2/j1, 1.5e6, 1.3)
			if err != nil && (want == LowestDensity || want == HighestDensity) {
				continue // the end itself, missed by a rounding error
			}
			if err != nil || math.Abs(n/want-1) > 1e-11 || math.Abs(slope*(e.P2-e.P1)-1) > 1e-9 {
				t.Errorf("%+v: n = %g, slope %g, %v, want %g", e, n, slope, err, want)
			}
			n, slope, why := v.Density(j2/j1, 1.3)
			if why != Found && (want == LowestDensity || want == HighestDensity) {
				continue
			}
			if why != Found || math.Abs(n/want-1) > 1e-11 || math.Abs(slope*(e.P2-e.P1)-1) > 1e-9 {
				t.Errorf("inverter of %+v: n = %g, slope %g, %v, want %g", e, n, slope, why, want)
			}
		}
		var bad *RatioError
		for _, side := range []struct {
			ratio float64
			above bool
			why   Reason
		}{{1e-9, false, BelowRange}, {1e9, true, AboveRange}} {
			if n, _, err := Density(e, side.ratio, 1.5e6, 1.3); !errors.As(err, &bad) || bad.Above != side.above || !math.IsNaN(n) {
				t.Errorf("ratio %g: %v", side.ratio, err)
			}
			if n, _, why := v.Density(side.ratio, 1.3); why != side.why || !math.IsNaN(n) {
				t.Errorf("ratio %g: %v", side.ratio, why)
			}
		}
		for _, c := range []struct {
			ratio, r float64
			why      Reason
		}{{math.NaN(), 1.3, NoRatio}, {-1, 1.3, NoRatio}, {1, 2.1, OutsideHeight}, {1, math.NaN(), OutsideHeight}} {
			if _, _, why := v.Density(c.ratio, c.r); why != c.why {
				t.Errorf("%+v: %v", c, why)
			}
		}
	}
}

// flat has a ratio that goes up and down again.
type folding struct{}

func (folding) Emissivities(n, t, r float64) (j1, j2 float64) {
	x := math.Log(n / 1e7)
	return 1, 1 + math.Exp(-x*x)
}

func TestAmbiguousRatio(t *testing.T) {
	if _, _, err := Density(folding{}, 1.5, 1.5e6, 1.1); !errors.Is(err, ErrAmbiguous) {
		t.Errorf("Density: %v", err)
	}
	if _, err := NewInverter(folding{}, 1.5e6, 1.1, 1.2); !errors.Is(err, ErrAmbiguous) {
		t.Errorf("NewInverter: %v", err)
	}
}

// Density undoes Ratio, and its slope is the change of the answer with the ratio.
func TestDensityInvertsRatio(t *testing.T) {
	m := model(t, Default(), nil)
	rapid.Check(t, func(t *rapid.T) {
		n := math.Pow(10, rapid.Float64Range(4.01, 9.99).Draw(t, "log n"))
		temp := rapid.Float64Range(6.4e5, 5e6).Draw(t, "T")
		r := rapid.Float64Range(1, 4).Draw(t, "r")
		x, err := m.Ratio(n, temp, r)
		if err != nil {
			t.Fatal(err)
		}
		got, slope, err := Density(m, x, temp, r)
		// Rounding of the ratio alone moves the answer by the slope times 1e-15.
		if err != nil || math.Abs(got/n-1) > 1e-12+1e-14*slope {
			t.Fatalf("n = %g, want %g, slope %g, %v", got, n, slope, err)
		}
		const h = 1e-5
		up, _, err1 := Density(m, x*math.Exp(h/slope), temp, r)
		down, _, err2 := Density(m, x*math.Exp(-h/slope), temp, r)
		if err1 == nil && err2 == nil && math.Abs(math.Log(up/down)/(2*h)-1) > 1e-5 {
			t.Fatalf("slope %g, differences give %g", slope, slope*math.Log(up/down)/(2*h))
		}
	})
}

// The fast inverter against Density, on a model and on its table.
func TestInverter(t *testing.T) {
	m := model(t, Default(), nil)
	table, err := m.Table(Range{[2]float64{1e4, 1e10}, [2]float64{1.5e6, 1.5e6}, [2]float64{1.02, 2.5}})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name     string
		e        Emitter
		steepest float64 // slope up to which the two are compared
	}{{"model", m, 1000}, {"table", table, 100}} {
		v, err := NewInverter(c.e, 1.5e6, 1.02, 2.5)
		if err != nil {
			t.Fatal(err)
		}
		n, s := worst{what: c.name + ", ln n"}, worst{what: c.name + ", slope"}
		for logN := 4.01; logN < 10; logN += 0.0371 {
			for r := 1.02; r < 2.5; r += 0.0733 {
				j1, j2 := c.e.Emissivities(math.Pow(10, logN), 1.5e6, r)
				want, slope, err := Density(c.e, j2/j1, 1.5e6, r)
				if err != nil {
					t.Fatal(err)
				}
				got, fast, why := v.Density(j2/j1, r)
				if why != Found {
					t.Fatalf("log n %.2f, r %.3f: %v", logN, r, why)
				}
				if math.Abs(slope) > c.steepest {
					continue
				}
				n.add(math.Abs(math.Log(got/want)), "log n %.3f, r %.3f, slope %.3g", logN, r, slope)
				s.add(math.Abs(fast/slope-1), "log n %.3f, r %.3f", logN, r)
			}
		}
		n.within(t, 1e-4)
		s.within(t, 1e-2)
	}
	if _, err := NewInverter(m, 1e5, 1.1, 1.2); err == nil {
		t.Error("a temperature outside the data is accepted")
	}
	if _, err := NewInverter(m, 1.5e6, 0.9, 1.2); err == nil {
		t.Error("a height below the surface is accepted")
	}
	one, err := NewInverter(m, 1.5e6, 1.1, 1.1)
	if err != nil {
		t.Fatal(err)
	}
	x, _ := m.Ratio(1e8, 1.5e6, 1.1)
	if n, _, why := one.Density(x, 1.1); why != Found || math.Abs(n/1e8-1) > 1e-5 {
		t.Errorf("one height: %g, %v", n, why)
	}
}
