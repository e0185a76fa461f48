package line

import (
	"math"
	"sync"
	"testing"

	"pgregory.net/rapid"
)

// small is a file of three levels with numbers that are easy to follow; %s stands
// for more sections.
const small = `
format: 1
ion: test
ground: 3
pair: [2-1, 3-2]
mass: {origin: {source: s, table: t, confidence: derived}, unit: u, value: 50}
levels:
  - origin: {source: s, table: t, confidence: derived}
    unit: cm-1
    rows:
      1: {name: a, J: 0, energy: 0}
      2: {name: b, J: 1, energy: 9000}
      3: {name: c, J: 2, energy: 18000}
spontaneous:
  - origin: {source: s, table: t, confidence: derived}
    unit: s-1
    rows: {2-1: 14, 3-2: 10, 3-1: 0.5}
collision_strengths:
  - origin: {source: s, table: t, confidence: derived}
    unit: "1"
    log_t: [5.5, 6.5]
    rows: {1-2: [0.3, 0.3], 1-3: [0.2, 0.2], 2-3: [1.1, 1.1]}
ion_fractions:
  - name: half
    origin: {source: s, table: t, confidence: derived}
    unit: log10
    log_t: [5.5, 6.5]
    values: [-0.3, -0.3]
abundances:
  - {name: eight, origin: {source: s, table: t, confidence: derived}, unit: 12 + log10(Fe/H), value: 8}
disc_centre:
  origin: {source: s, table: t, confidence: derived}
  unit: erg cm-2 s-1 sr-1 A-1
  rows: {2-1: 1.0e6, 3-2: 1.0e6}
limb_darkening:
  origin: {source: s, table: t, confidence: derived}
  unit: "1"
  rows:
    - {wavelength: 1000, coefficients: [0.4, 0.6]}
`

// Two levels: p2/p1 = up/down.
func TestTwoLevels(t *testing.T) {
	p := make([]float64, 2)
	equilibrium(2, []float64{0, 3e-7, 14, 0}, p)
	if x := p[1]/p[0]/(3e-7/14) - 1; math.Abs(x) > 1e-15 {
		t.Errorf("two levels: relative error %g", x)
	}
}

// Three levels by Cramer's rule, derived: with rates a_ij, the populations are as
// the sums over the spanning trees directed to each level (matrix-tree theorem).
func TestThreeLevels(t *testing.T) {
	a := parsed(t, small)
	o := a.Options()
	m, err := New(a, o)
	if err != nil {
		t.Fatal(err)
	}
	for _, n := range []float64{1e4, 1e6, 1e8, 1e10} {
		const temp, r = 1.3e6, 1.2
		got, err := m.Populations(n, temp, r)
		if err != nil {
			t.Fatal(err)
		}
		// Rates written out from the numbers of the file.
		k := [3]float64{0, 9000, 18000}
		g := [3]float64{1, 3, 5}
		ups := map[[2]int]float64{{0, 1}: 0.3, {0, 2}: 0.2, {1, 2}: 1.1}
		decay := map[[2]int]float64{{0, 1}: 14, {1, 2}: 10, {0, 2}: 0.5}
		// Limb darkening 0.4 + 0.6 mu at r: J/I0 = 0.4 W + 0.6 J_1 with
		// J_1 = [1 - (a^2/r) asinh(1/a)]/4, a^2 = r^2 - 1.
		s := math.Sqrt(r*r - 1)
		J := 0.4*(1-s/r)/2 + 0.6*(1-s*s/r*math.Asinh(1/s))/4
		var q [3][3]float64
		for tr, u := range ups {
			l, h := tr[0], tr[1]
			down := 8.629e-6 * u / (g[h] * math.Sqrt(temp))
			q[h][l] = n*down + decay[tr]
			q[l][h] = n * down * g[h] / g[l] * math.Exp(-(k[h]-k[l])*6.62607015e-27*2.99792458e10/1.380649e-16/temp)
			if h == l+1 {
				λ := 1 / (k[h] - k[l])
				modes := J * 1e14 * math.Pow(λ, 5) / (2 * 6.62607015e-27 * 2.99792458e10 * 2.99792458e10)
				q[h][l] += decay[tr] * modes
				q[l][h] += decay[tr] * modes * g[h] / g[l]
			}
		}
		tree := func(i, j, k int) float64 { return q[j][i]*q[k][i] + q[j][i]*q[k][j] + q[k][i]*q[j][k] }
		w := [3]float64{tree(0, 1, 2), tree(1, 0, 2), tree(2, 0, 1)}
		for i := range w {
			if want := w[i] / (w[0] + w[1] + w[2]); math.Abs(got[i]/want-1) > 1e-9 {
				t.Errorf("n = %g: population %d is %.12g, want %.12g", n, i+1, got[i], want)
			}
		}
		// j = n_H A(Fe) f N_u A h nu / 4 pi.
		j1, _ := m.Emissivities(n, temp, r)
		want := n / 1.2 * 1e-4 * math.Pow(10, -0.3) * got[1] * 14 * 6.62607015e-27 * 2.99792458e10 * 9000 / (4 * math.Pi)
		if math.Abs(j1/want-1) > 1e-12 {
			t.Errorf("n = %g: emissivity %g, want %g", n, j1, want)
		}
	}
}

// Direct collisions obey detailed balance: up g_l exp(dE/kT) = down g_u.
func TestDetailedBalance(t *testing.T) {
	for _, levels := range []Levels{Ground, All} {
		m := model(t, Default(), func(o *Options) { o.Levels, o.NoCascades = levels, true })
		c := make([]float64, m.n*m.n)
		for _, temp := range []float64{6.4e5, 1e6, 1.6e6, 4.9e6} {
			m.coefficients(temp, c)
			for i, l := range m.atom.levels[:m.n] {
				for j, u := range m.atom.levels[:m.n] {
					if u.energy <= l.energy || c[i*m.n+j] == 0 {
						continue
					}
					x := c[i*m.n+j] * l.g / (c[j*m.n+i] * u.g) * math.Exp(theta*(u.energy-l.energy)/temp)
					if math.Abs(x-1) > 1e-12 {
						t.Errorf("%d-%d at %g K: off by %g", i+1, j+1, temp, x-1)
					}
				}
			}
		}
	}
}

// At high density the populations are Boltzmann's; the exact statement needs
// detailed balance, so cascades are off. Far above the range, hence unchecked.
func TestBoltzmannLimit(t *testing.T) {
	m := model(t, Default(), func(o *Options) { o.NoCascades = true })
	p := make([]float64, m.n)
	for _, temp := range []float64{1e6, 1.6e6, 4e6} {
		m.populations(1e18, temp, 1.1, p)
		for i, l := range m.atom.levels[:m.n] {
			want := l.g * math.Exp(-theta*l.energy/temp)
			if x := p[i]/p[0]/want - 1; math.Abs(x) > 1e-6 {
				t.Errorf("level %d at %g K: off by %g", i+1, temp, x)
			}
		}
	}
}

func TestPopulationsAreShares(t *testing.T) {
	models := []*Model{
		model(t, Default(), nil),
		model(t, Default(), func(o *Options) { o.Levels = All }),
		model(t, Default(), func(o *Options) { o.NoCascades, o.NoProtons, o.Photo = true, true, 0 }),
	}
	rapid.Check(t, func(t *rapid.T) {
		m := rapid.SampledFrom(models).Draw(t, "model")
		g := m.Range()
		n := math.Pow(10, rapid.Float64Range(math.Log10(g.Density[0]), math.Log10(g.Density[1])).Draw(t, "log n"))
		temp := rapid.Float64Range(g.Temperature[0], g.Temperature[1]).Draw(t, "T")
		r := 1 / rapid.Float64Range(1e-3, 1).Draw(t, "1/r")
		p, err := m.Populations(min(max(n, g.Density[0]), g.Density[1]), temp, r)
		if err != nil {
			t.Fatal(err)
		}
		sum := 0.0
		for i, x := range p {
			if !(x > 0) {
				t.Fatalf("population %d is %g", i+1, x)
			}
			sum += x
		}
		if math.Abs(sum-1) > 1e-14 {
			t.Fatalf("populations sum to 1%+g", sum-1)
		}
	})
}

// The folded set against the explicit 27 levels with the rates through higher
// levels, over the whole range, and our own folding of those 27 levels against it.
// Derived: both describe the 126 levels of the calculation.
func TestFoldedAgainstExplicit(t *testing.T) {
	folded := model(t, Default(), nil)
	explicit := model(t, Default(), func(o *Options) { o.Levels = All })
	own := Default().clone()
	own.cascades = nil
	ours := model(t, own, nil)
	listed, made := worst{what: "listed cascades"}, worst{what: "cascades folded here"}
	for logN := 4.0; logN <= 10; logN += 0.25 {
		for _, temp := range []float64{6.4e5, 1e6, 1.6e6, 2.5e6, 4.9e6} {
			for _, r := range []float64{1, 1.1, 1.35, 3} {
				want := ratio(t, explicit, logN, temp, r)
				listed.add(math.Abs(ratio(t, folded, logN, temp, r)/want-1), "log n %.2f, T %.2g, r %.2f", logN, temp, r)
				made.add(math.Abs(ratio(t, ours, logN, temp, r)/want-1), "log n %.2f, T %.2g, r %.2f", logN, temp, r)
			}
		}
	}
	listed.within(t, 0.005)
	made.within(t, 0.005)
}

// The effective rates of the folded set at log T = 6.2, in 1e-9 cm^3/s (derived,
// the calculation's printed digits): cascades plus direct rates give them back.
func TestEffectiveRates(t *testing.T) {
	m := model(t, Default(), func(o *Options) { o.NoProtons = true })
	c := make([]float64, m.n*m.n)
	m.coefficients(math.Pow(10, 6.2), c)
	for tr, want := range map[transition]float64{
		{1, 2}: 5.249, {1, 3}: 5.951, {2, 3}: 7.819, {2, 1}: 1.826, {3, 2}: 4.820, {4, 1}: 0.3003, {5, 4}: 6.921,
	} {
		if got := 1e9 * c[(tr.from-1)*m.n+tr.to-1]; math.Abs(got/want-1) > 2e-4 {
			t.Errorf("%d>%d: %.5g, want %.5g", tr.from, tr.to, got, want)
		}
	}
}

// Neckel & Labs (1994, Sol. Phys. 153, 91) through the integral over the disc;
// derived by independent quadrature, four printed digits.
func TestMeanIntensity(t *testing.T) {
	m := model(t, Default(), nil)
	for _, row := range numbers(t, `
		1.0001 0.4929 0.4019
		1.05   0.3475 0.2973
		1.1    0.2917 0.2519
		1.2    0.2236 0.1948
		1.35   0.1641 0.1438
		1.5    0.1273 0.1119
		2.0    0.0670 0.0592`) {
		if got := Dilution(row[0]); math.Abs(got-row[1]) > 6e-5 {
			t.Errorf("W(%v) = %.5f, want %.4f", row[0], got, row[1])
		}
		if got := m.MeanIntensity(row[0])[0]; math.Abs(got-row[2]) > 6e-5 {
			t.Errorf("J/I0(%v) = %.5f, want %.4f", row[0], got, row[2])
		}
	}
	// The closed form and the quadrature meet where they change over, and a
	// uniform disc gives W.
	l := m.lamp[0].law
	if a, b := l.meanIntensity(1.5), l.meanIntensity(math.Nextafter(1.5, 2)); math.Abs(a/b-1) > 1e-13 {
		t.Errorf("closed form %.15g, quadrature %.15g", a, b)
	}
	for _, r := range []float64{1, 1.0001, 1.3, 1.6, 5, 200} {
		if got := (law{1}).meanIntensity(r); math.Abs(got/Dilution(r)-1) > 1e-12 {
			t.Errorf("uniform disc at %v: %.15g, W = %.15g", r, got, Dilution(r))
		}
	}
	// Derived: photons per mode at disc centre at 10750 A.
	if got := occupation(1.045e6, 10749.8e-8); math.Abs(got-0.1258) > 2e-4 {
		t.Errorf("occupation %.5f, want 0.1258", got)
	}
}

// Air wavelengths: 1074.68 and 1079.79 nm (read: abstract of arXiv:2203.08636);
// vacuum from the energies of the levels (NIST).
func TestWavelengths(t *testing.T) {
	m := model(t, Default(), nil)
	for i, want := range [2]float64{1074.68, 1079.79} {
		if got := m.AirWavelengths()[i]; math.Abs(got-want) > 0.01 {
			t.Errorf("air wavelength %.4f, want %.2f", got, want)
		}
	}
	for i, want := range [2]float64{1074.980, 1080.089} {
		if got := m.RestWavelengths()[i]; math.Abs(got-want) > 0.0005 {
			t.Errorf("vacuum wavelength %.4f, want %.3f", got, want)
		}
	}
}

// Curves pass through their points; the derivative has no steps.
func TestCurves(t *testing.T) {
	m := model(t, Default(), nil)
	for _, f := range Default().fractions[:1] {
		for i, x := range *f.grid {
			temp := min(max(math.Pow(10, x), m.rng.Temperature[0]), m.rng.Temperature[1])
			if got := math.Log10(m.IonFraction(temp)); math.Abs(got-f.values[i]) > 1e-12 {
				t.Errorf("ion fraction at log T %.2f: %.6f, want %.3f", x, got, f.values[i])
			}
		}
	}
	for _, e := range m.electrons {
		for _, x := range (*e.curve.grid)[1:9] {
			slope := func(x, h float64) float64 {
				a, b := cursor{x: x}, cursor{x: x + h}
				return (b.at(&e.curve) - a.at(&e.curve)) / h
			}
			// The two one-sided slopes differ by h times the second derivative.
			if a, b := slope(x, -1e-6), slope(x, 1e-6); math.Abs(a-b) > 1e-4 {
				t.Errorf("%d-%d: slope steps from %g to %g at %g", e.lower+1, e.upper+1, a, b, x)
			}
		}
	}
}

func TestOutsideIsRefused(t *testing.T) {
	m := model(t, Default(), nil)
	table, err := m.Table(Range{[2]float64{1e6, 1e9}, [2]float64{1e6, 2e6}, [2]float64{1.01, 3}})
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range []Emitter{m, table} {
		g := e.(ranger).Range()
		ok := [3]float64{g.Density[0], g.Temperature[0], g.Height[0]}
		for i := range 3 {
			for _, bad := range []float64{math.NaN(), 0, -1, math.Nextafter(ok[i], 0)} {
				v := ok
				v[i] = bad
				if j1, j2 := e.Emissivities(v[0], v[1], v[2]); !math.IsNaN(j1) || !math.IsNaN(j2) {
					t.Errorf("%T%v: %g, %g, want NaN", e, v, j1, j2)
				}
			}
		}
		if j1, j2 := e.Emissivities(ok[0], ok[1], ok[2]); math.IsNaN(j1 + j2) {
			t.Errorf("%T%v, the corner of the range: NaN", e, ok)
		}
		if j1, j2 := e.Emissivities(g.Density[1], g.Temperature[1], min(g.Height[1], 1e3)); math.IsNaN(j1 + j2) {
			t.Errorf("%T, the far corner of the range: NaN", e)
		}
	}
	if _, err := m.Populations(1e11, 1.6e6, 1.1); err == nil || err.Error() != "electron density 1e+11 cm^-3 is outside 10000..1e+10 cm^-3" {
		t.Errorf("error is %v", err)
	}
	for _, change := range []func(*Options){
		func(o *Options) { o.Helium = -1 }, func(o *Options) { o.Iron = math.NaN() },
		func(o *Options) { o.Photo = -1 }, func(o *Options) { o.Ionisation = "old" },
	} {
		o := Default().Options()
		change(&o)
		if _, err := New(Default(), o); err == nil {
			t.Errorf("options %+v are accepted", o)
		}
	}
}

// One model and one table serve many goroutines (for the race detector), with
// the same bits for all.
func TestConcurrentUse(t *testing.T) {
	m := model(t, Default(), nil)
	table, err := m.Table(Range{[2]float64{1e6, 1e9}, [2]float64{1e6, 2e6}, [2]float64{1.01, 3}})
	if err != nil {
		t.Fatal(err)
	}
	sum := func() (s float64) {
		for i := range 200 {
			for _, e := range []Emitter{m, table} {
				j1, j2 := e.Emissivities(1e7*float64(i+1)/4, 1.2e6, 1.1+0.005*float64(i))
				s += j1 + j2
			}
		}
		return s
	}
	want := sum()
	var wg sync.WaitGroup
	for range 8 {
		wg.Go(func() {
			if got := sum(); got != want {
				t.Errorf("sum %v, want %v", got, want)
			}
		})
	}
	wg.Wait()
}
