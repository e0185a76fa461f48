package line

import (
	"math"
	"testing"
)

// ray is what a synthesis asks for: samples along a line of sight at impact
// parameter 1.15 through a corona that falls as r^-8 and is 1.0 to 1.6 MK hot.
func ray() (n, t, r [512]float64) {
	for i := range n {
		x := -3 + 6*float64(i)/511
		r[i] = math.Hypot(1.15, x)
		n[i] = 4e8 * math.Pow(r[i], -8)
		t[i] = 1.3e6 + 0.3e6*math.Sin(3*x)
	}
	return
}

func BenchmarkEmissivities(b *testing.B) {
	a := Default()
	all := a.Options()
	all.Levels = All
	ground, err := New(a, a.Options())
	if err != nil {
		b.Fatal(err)
	}
	full, err := New(a, all)
	if err != nil {
		b.Fatal(err)
	}
	over := Range{[2]float64{1e4, 1e10}, [2]float64{0.9e6, 2e6}, [2]float64{1.01, 4}}
	table, err := ground.Table(over)
	if err != nil {
		b.Fatal(err)
	}
	over.Temperature = [2]float64{1.5e6, 1.5e6}
	one, err := ground.Table(over)
	if err != nil {
		b.Fatal(err)
	}
	n, t, r := ray()
	for _, c := range []struct {
		name string
		e    Emitter
		t    float64
	}{{"ground", ground, 0}, {"all-levels", full, 0}, {"table", table, 0}, {"table-one-temperature", one, 1.5e6}} {
		b.Run(c.name, func(b *testing.B) {
			i := 0
			b.ReportAllocs()
			for b.Loop() {
				temp := c.t
				if temp == 0 {
					temp = t[i]
				}
				c.e.Emissivities(n[i], temp, r[i])
				i = (i + 1) & 511
			}
		})
	}
}

func BenchmarkDensity(b *testing.B) {
	a := Default()
	m, err := New(a, a.Options())
	if err != nil {
		b.Fatal(err)
	}
	v, err := NewInverter(m, 1.5e6, 1.02, 2)
	if err != nil {
		b.Fatal(err)
	}
	n, _, r := ray()
	var x [512]float64
	for i := range x {
		r[i] = min(r[i], 2)
		if x[i], err = m.Ratio(n[i], 1.5e6, r[i]); err != nil {
			b.Fatal(err)
		}
	}
	b.Run("model", func(b *testing.B) {
		for i := 0; b.Loop(); i = (i + 1) & 511 {
			Density(m, x[i], 1.5e6, r[i])
		}
	})
	b.Run("inverter", func(b *testing.B) {
		b.ReportAllocs()
		for i := 0; b.Loop(); i = (i + 1) & 511 {
			v.Density(x[i], r[i])
		}
	})
}

func BenchmarkBuild(b *testing.B) {
	a := Default()
	m, err := New(a, a.Options())
	if err != nil {
		b.Fatal(err)
	}
	g := m.Range()
	b.Run("table-all", func(b *testing.B) {
		for b.Loop() {
			m.Table(Range{g.Density, g.Temperature, [2]float64{1, 12}})
		}
	})
	b.Run("table-one-temperature", func(b *testing.B) {
		for b.Loop() {
			m.Table(Range{g.Density, [2]float64{1.5e6, 1.5e6}, [2]float64{1.01, 4}})
		}
	})
	b.Run("inverter", func(b *testing.B) {
		for b.Loop() {
			NewInverter(m, 1.5e6, 1.02, 2)
		}
	})
	b.Run("data", func(b *testing.B) {
		for b.Loop() {
			Parse("fexiii.yaml", embedded)
		}
	})
}
