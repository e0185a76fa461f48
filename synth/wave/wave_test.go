package wave

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

var spectrum = Spectrum{Slope: 1.5, Bump: 3, At: 3.5e-3, Width: 0.35, Low: 0.2e-3, High: 12e-3}

func driver(t testing.TB, s Settings) *Driver {
	t.Helper()
	d, err := NewDriver(s)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// Rows and coefficients against the sum over frequencies, damped and not, whole and
// broken delays, leads of sequential tuning, and frequencies above the Nyquist
// frequency of the frames.
func TestRowsReproduceTheExactSum(t *testing.T) {
	for name, s := range map[string]Settings{
		"damped":   {Seed: 1, Cell: 0.01, Spectrum: spectrum, Damping: 2.69, Cadence: 30, Frames: 120, MaxDelay: 4000, MaxLead: 20},
		"undamped": {Seed: 2, Cell: 0.01, Spectrum: spectrum, Cadence: 30, Frames: 120, MaxDelay: 1500},
		"coarse":   {Seed: 3, Cell: 0.01, Spectrum: spectrum, Damping: 2.69, Cadence: 60, Frames: 120, MaxDelay: 1500},
	} {
		d := driver(t, s)
		t.Logf("%s: ranks %d, %d bins, rows of %d", name, d.Ranks(), len(d.amp), d.length)
		var c []float64
		sum, n, worst := 0.0, 0, 0.0
		for i := range 60 {
			tau := s.MaxDelay * math.Mod(float64(i)*0.6180339887, 1)
			lead := s.MaxLead * math.Mod(float64(i)*0.7548776662, 1)
			k := d.Stretch(tau)
			rows := d.Rows(uint64(i), i%2, i%2, k)
			c, at := d.Coefficients(c, k, tau, lead)
			for j := range s.Frames {
				got := 0.0
				for r := range c {
					got += c[r] * float64(rows[r*d.length+at+j])
				}
				e := got - d.Exact(uint64(i), i%2, i%2, float64(j)*s.Cadence+lead, tau)
				sum += e * e
				n++
				worst = max(worst, math.Abs(e))
			}
		}
		// Tolerance of the decomposition plus that of the bilinear table.
		if rms := math.Sqrt(sum / float64(n)); rms > Tolerance {
			t.Errorf("%s: rms error %.2g of the rms, worst %.2g", name, rms, worst)
		} else {
			t.Logf("%s: rms error %.2g of the rms, worst %.2g", name, rms, worst)
		}
	}
}

func TestVarianceIsOne(t *testing.T) {
	d := driver(t, Settings{Seed: 5, Cell: 0.01, Spectrum: spectrum, Cadence: 30, Frames: 200, MaxDelay: 60})
	c, at := d.Coefficients(nil, 0, 40, 0)
	v, n := 0.0, 0
	for i := range uint64(500) {
		rows := d.Rows(i, 0, 0, 0)
		for j := range 200 {
			x := 0.0
			for r := range c {
				x += c[r] * float64(rows[r*d.length+at+j])
			}
			v += x * x
			n++
		}
	}
	v /= float64(n)
	// 500 series with some ten independent values each, spectrum steep: 4 sd of 3 %.
	if math.Abs(v-1) > 0.12 {
		t.Errorf("variance %.3f", v)
	}
	if got := d.BandVariance(0, func(float64) float64 { return 1 }); math.Abs(got-1) > 1e-12 {
		t.Errorf("band variance of everything: %g", got)
	}
}

// Damping length L_D = c xi_E/f: the amplitude at one frequency falls by e over
// tau = xi_E/f (Terradas, Goossens & Verth 2010, A&A 524, A23).
func TestDampingLength(t *testing.T) {
	narrow := Spectrum{Slope: 0, At: 3.5e-3, Width: 1, Low: 3.49e-3, High: 3.51e-3}
	d := driver(t, Settings{Seed: 5, Cell: 0.01, Spectrum: narrow, Damping: 2.69, Cadence: 30, Frames: 4000, MaxDelay: 2000})
	one := func(float64) float64 { return 1 }
	got := math.Sqrt(d.BandVariance(2.69/3.5e-3, one) / d.BandVariance(0, one))
	if math.Abs(got*math.E-1) > 0.01 {
		t.Errorf("amplitude after one damping length: %.4f", got)
	}
}

func TestFootpointWeights(t *testing.T) {
	d := driver(t, Settings{Seed: 5, Cell: 0.01, Spectrum: spectrum, Cadence: 30, Frames: 20, MaxDelay: 60})
	rapid.Check(t, func(t *rapid.T) {
		th := rapid.Float64Range(0, math.Pi).Draw(t, "colatitude")
		az := rapid.Float64Range(-7, 7).Draw(t, "azimuth")
		share := map[uint64]float64{} // a site may come twice, once with no weight
		for _, s := range d.Footpoint(th, az) {
			share[s.ID] += s.Weight
		}
		sum := 0.0
		for _, w := range share {
			sum += w * w
		}
		if math.Abs(sum-1) > 1e-12 {
			t.Fatalf("squares add up to %g over %v", sum, share)
		}
		// Continuity: a step of a thousandth of a cell moves no weight by more than
		// pi/2 of that.
		a, b := map[uint64]float64{}, map[uint64]float64{}
		for _, s := range d.Footpoint(th, az) {
			a[s.ID] += s.Weight
		}
		for _, s := range d.Footpoint(math.Min(th+1e-5, math.Pi), az) {
			b[s.ID] += s.Weight
		}
		for id, w := range a {
			if math.Abs(b[id]-w) > 0.004 {
				t.Fatalf("weight of site %d jumps from %g to %g", id, w, b[id])
			}
		}
	})
}

// The motion is the same whatever the cache still holds.
func TestRowsDoNotDependOnTheCache(t *testing.T) {
	s := Settings{Seed: 5, Cell: 0.01, Spectrum: spectrum, Damping: 2, Cadence: 30, Frames: 50, MaxDelay: 600}
	a, b := driver(t, s), driver(t, s)
	b.cache.init(4 * 3 * len(a.Rows(0, 0, 0, 0)))
	for i := range uint64(40) {
		x, y := a.Rows(i*7%13, 1, 0, 0), b.Rows(i*7%13, 1, 0, 0)
		for j := range x {
			if x[j] != y[j] {
				t.Fatal("rows differ")
			}
		}
	}
}

func BenchmarkRows(b *testing.B) {
	d := driver(b, Settings{Seed: 1, Cell: 0.01, Spectrum: spectrum, Damping: 2.69, Cadence: 30, Frames: 360, MaxDelay: 4000})
	i := uint64(0)
	for b.Loop() {
		d.Rows(i, 0, 0, 0)
		i++
	}
}

func BenchmarkNewDriver(b *testing.B) {
	for b.Loop() {
		driver(b, Settings{Seed: 1, Cell: 0.01, Spectrum: spectrum, Damping: 2.69, Cadence: 30, Frames: 360, MaxDelay: 4000})
	}
}
