package wave

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"offplane/synth/kernel"
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

// A site's address and the footpoint that only it moves.
func siteAt(d *Driver, ring, place int) (id uint64, colatitude, azimuth float64) {
	l := &d.sites
	return uint64(l.offset[ring] + place), (float64(ring) + 0.5) * l.width, 2 * math.Pi * float64(place) / float64(l.count[ring])
}

// A bundle against the sum over frequencies, damped and not, leads of sequential
// tuning, and frequencies above the Nyquist frequency of the frames.
func TestBundleReproducesTheExactSum(t *testing.T) {
	for name, s := range map[string]Settings{
		"damped":   {Seed: 1, Cell: 0.01, Spectrum: spectrum, Damping: 2.69, Cadence: 30, Frames: 120, MaxDelay: 4000, MaxLead: 20},
		"undamped": {Seed: 2, Cell: 0.01, Spectrum: spectrum, Cadence: 30, Frames: 120, MaxDelay: 1500},
		"coarse":   {Seed: 3, Cell: 0.01, Spectrum: spectrum, Damping: 2.69, Cadence: 60, Frames: 120, MaxDelay: 1500},
	} {
		d := driver(t, s)
		leads := []float64{0, s.MaxLead / 3, s.MaxLead}
		b := d.NewBundle(leads)
		for pass := range 2 { // the second finds the spectra of the first in the cache
			b.Clear()
			amplitude := func(lane, train int) [2]float64 {
				return [2]float64{1 + 0.1*float64(lane), 0.5 * float64(train)}
			}
			tau := func(lane, train int) float64 {
				return s.MaxDelay * math.Mod(float64(lane+7*train)*0.6180339887, 1)
			}
			for lane := range kernel.Lanes {
				if lane == 5 {
					continue // stays still
				}
				for train := range 2 {
					_, colatitude, azimuth := siteAt(d, 100+lane, 50*train)
					b.Add(lane, train, colatitude, azimuth, train, tau(lane, train), amplitude(lane, train))
				}
			}
			for i, lead := range leads {
				v := b.Velocity(i)
				for lane := range kernel.Lanes {
					for _, j := range []int{0, 1, 57, s.Frames - 1} {
						want := 0.0
						if lane != 5 {
							for train := range 2 {
								id, _, _ := siteAt(d, 100+lane, 50*train)
								for pol, a := range amplitude(lane, train) {
									want += a * d.Exact(id, pol, train, float64(j)*s.Cadence+lead, tau(lane, train))
								}
							}
						}
						if got := float64(v[j*kernel.Lanes+lane]); math.Abs(got-want) > 2e-5 {
							t.Fatalf("%s, pass %d, lead %g, lane %d, frame %d: %g, want %g", name, pass, lead, lane, j, got, want)
						}
					}
				}
			}
		}
	}
}

func TestVarianceIsOne(t *testing.T) {
	d := driver(t, Settings{Seed: 5, Cell: 0.01, Spectrum: spectrum, Cadence: 30, Frames: 200, MaxDelay: 60})
	b := d.NewBundle([]float64{0})
	sum, n := 0.0, 0
	for i := range 32 {
		b.Clear()
		for lane := range kernel.Lanes {
			_, colatitude, azimuth := siteAt(d, 100+i, lane)
			b.Add(lane, 0, colatitude, azimuth, Outward, 40, [2]float64{1, 0})
		}
		for _, x := range b.Velocity(0) {
			sum += float64(x) * float64(x)
			n++
		}
	}
	v := sum / float64(n)
	// 512 series with some ten independent values each, spectrum steep: 4 sd of 3 %.
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
func TestSpectraDoNotDependOnTheCache(t *testing.T) {
	s := Settings{Seed: 5, Cell: 0.01, Spectrum: spectrum, Damping: 2, Cadence: 30, Frames: 50, MaxDelay: 600}
	a, b := driver(t, s), driver(t, s)
	b.cache.init(4 * 3 * len(a.spectra(0, 0)))
	for i := range uint64(40) {
		x, y := a.spectra(i*7%13, 1), b.spectra(i*7%13, 1)
		for j := range x {
			if x[j] != y[j] {
				t.Fatal("spectra differ")
			}
		}
	}
}

var long = Settings{Seed: 1, Cell: 0.01, Spectrum: spectrum, Damping: 2.69, Cadence: 30, Frames: 360, MaxDelay: 4000}

func BenchmarkSpectra(b *testing.B) {
	d := driver(b, long)
	i := uint64(0)
	for b.Loop() {
		d.spectra(i, 0)
		i++
	}
}

func BenchmarkBundle(b *testing.B) {
	d := driver(b, long)
	u := d.NewBundle([]float64{0})
	for b.Loop() {
		u.Clear()
		for lane := range kernel.Lanes {
			u.Add(lane, 0, 1.2, 0.3+0.002*float64(lane), Outward, 1000+float64(lane), [2]float64{3, 4})
		}
		u.Velocity(0)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*kernel.Lanes), "ns/sample")
}

// Cosine and sine from the table against the library's, which the weights of sites and
// the phases of trains go through.
func TestTurn(t *testing.T) {
	for x := -3.0; x < 3; x += 0.000731 {
		s, c := math.Sincos(2 * math.Pi * x)
		if z := turn(x); math.Abs(real(z)-c) > 1e-14 || math.Abs(imag(z)-s) > 1e-14 {
			t.Fatalf("turn(%g) = %v, want %g, %g", x, z, c, s)
		}
	}
}
