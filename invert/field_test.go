package invert

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"offplane/scenarios/units"
	"offplane/synth/filter"
	"offplane/synth/obs"
)

// powerLaw is a test emitter with j1 ~ n^p1, j2 ~ n^p2: the ratio gives the density
// in closed form.
type powerLaw struct{ p1, p2 float64 }

func (e powerLaw) Emissivities(n, t, r float64) (j1, j2 float64) {
	return math.Pow(n/1e8, e.p1), 0.4 * math.Pow(n/1e8, e.p2)
}

// A patch is a small observation of plane waves, made by Fourier series.
type patch struct {
	nx, ny, frames int
	cadence        float64 // [s]
	pixel          float64 // [arcsec]
	roll           float64 // [deg]
	pa             float64 // position angle of the patch's centre, which is at 1.2 solar radii [deg]
	angle          float64 // position angle toward which the outward waves run [deg]
	v              float64 // [km/s]
	cell           float64 // transverse size of independent waves [Mm]
	rms            float64 // [km/s]
	noise          float64 // white, of the Doppler shift [km/s]; Doppler cubes only
	tunings        bool    // frames through the filter; otherwise a Doppler cube
	electrons      float64
	density        float64 // [cm^-3]
	seed           uint64
}

func defaultPatch() patch {
	return patch{nx: 40, ny: 40, frames: 360, cadence: 30, pixel: 4.35, pa: 70, angle: 70, v: 400, cell: 7, rms: 0.4, density: 1e8, seed: 1}
}

const (
	rest1, rest2 = 1074.7, 1079.8 // [nm]
	lineWidth    = 35.0           // [km/s]
)

func (q patch) observe() *obs.Observation {
	g := obs.Grid{
		Nx: q.nx, Ny: q.ny, Pixel: q.pixel, Roll: q.roll, Distance: units.AU / units.SolarRadius,
		Start: time.Date(2025, 3, 20, 18, 0, 0, 0, time.UTC), Duration: float64(q.frames) * q.cadence, RestWavelength: rest1,
	}
	s, c := math.Sincos(q.pa * math.Pi / 180)
	px, py := g.PixelAt(-1.2*s, 1.2*c) // with the centre at (0, 0)
	g.CentreX, g.CentreY = math.Round(float64(q.nx+1)/2-px-1), math.Round(float64(q.ny+1)/2-py-1)
	o := &obs.Observation{Grid: g, Unit: "km/s"}
	for i := range q.nx * q.ny {
		o.Pixels = append(o.Pixels, int32(i))
	}
	for i := range q.frames {
		o.Exposures = append(o.Exposures, obs.Exposure{Line: 1, Frame: i, Time: float64(i) * q.cadence, Exposure: 1, Electrons: q.electrons, Background: 1, ReadNoise: 30})
	}
	o.Exposures = append(o.Exposures, obs.Exposure{Line: 2, Time: 0, Exposure: 1, Electrons: q.electrons * 20, Background: 1, ReadNoise: 30})
	o.Frames[0] = q.waves(&g)
	e1, e2 := powerLaw{1.4, 1.8}.Emissivities(q.density, 0, 0)
	for line, rest := range [2]float64{rest1, rest2} {
		for k, d := range []float64{-0.12, 0, 0.12} {
			o.Tunings = append(o.Tunings, obs.Tuning{Line: line + 1, Index: k, Wavelength: rest + d, Offset: d, FilterFWHM: 0.13})
			m := make([]float32, len(o.Pixels))
			for p := range m {
				m[p] = float32(10 * [2]float64{e1, e2}[line] * through(rest, d, 0))
			}
			o.Mean[line] = append(o.Mean[line], m)
		}
	}
	if q.tunings {
		o.Unit = "erg cm-2 s-1 sr-1"
		rng := rand.New(rand.NewPCG(q.seed, 99))
		dop := o.Frames[0]
		o.Frames[0] = obs.NewCube(len(o.Pixels), 3, q.frames)
		for p := range o.Pixels {
			v := dop.Series(p, 0)
			for k, d := range []float64{-0.12, 0, 0.12} {
				out := o.Frames[0].Series(p, k)
				for i := range out {
					x := 10 * e1 * through(rest1, d, float64(v[i]))
					if q.electrons > 0 {
						x += rng.NormFloat64() * math.Sqrt((x+1)/q.electrons+900/(q.electrons*q.electrons))
					}
					out[i] = float32(x)
				}
			}
		}
	}
	return o
}

// through is a line of unit energy through the filter at offset d [nm].
func through(rest, d, v float64) float64 {
	return filter.Gaussian(lightSpeed*d/rest, v, lineWidth, lightSpeed*filter.EFolding(0.13)/rest)
}

// waves returns the Doppler cube: cells of independent trains side by side, blended
// so that the variance is the same everywhere.
func (q patch) waves(g *obs.Grid) *obs.Cube {
	rng := rand.New(rand.NewPCG(q.seed, 7))
	duration := float64(q.frames) * q.cadence
	period := 1.37 * duration
	var f, amp []float64
	sum := 0.0
	for j := 1; float64(j)/period < 9e-3; j++ {
		x := float64(j) / period
		if x < 0.8e-3 {
			continue
		}
		f = append(f, x)
		amp = append(amp, math.Pow(x, -0.75))
		sum += math.Pow(x, -1.5)
	}
	cells := map[int][]complex128{}
	cell := func(i int) []complex128 {
		if c := cells[i]; c != nil {
			return c
		}
		r := rand.New(rand.NewPCG(q.seed, uint64(i+1<<20)))
		c := make([]complex128, len(f))
		for j := range c {
			c[j] = complex(r.NormFloat64(), r.NormFloat64()) * complex(q.rms*amp[j]/math.Sqrt(sum), 0)
		}
		cells[i] = c
		return c
	}
	cube := obs.NewCube(q.nx*q.ny, 1, q.frames)
	s, c := math.Sincos(q.angle * math.Pi / 180)
	mm := units.SolarRadius / 1e8
	for p := range q.nx * q.ny {
		y, z := g.Sky(p%q.nx, p/q.nx)
		along, across := mm*(-s*y+c*z), mm*(c*y+s*z)
		i := math.Floor(across / q.cell)
		u := across/q.cell - i
		a, b := cell(int(i)), cell(int(i)+1)
		wb, wa := math.Sincos(u * math.Pi / 2)
		out := cube.Series(p, 0)
		for j := range f {
			sn, cs := math.Sincos(-2 * math.Pi * f[j] * along * 1e3 / q.v)
			x := complex(cs, sn) * (complex(wa, 0)*a[j] + complex(wb, 0)*b[j])
			sn, cs = math.Sincos(2 * math.Pi * f[j] * q.cadence)
			r := complex(cs, sn)
			for t := range out {
				out[t] += float32(real(x))
				x *= r
			}
		}
		for t := range out {
			out[t] += float32(q.noise * rng.NormFloat64())
		}
	}
	return cube
}

func (q patch) invert(t testing.TB, opt Options) *Result {
	t.Helper()
	r, err := Invert(context.Background(), q.observe(), powerLaw{1.4, 1.8}, opt, 0, nil)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// values returns the finite values of a map.
func values(m *obs.Map) []float64 {
	var vs []float64
	for _, v := range m.Data {
		if !math.IsNaN(float64(v)) {
			vs = append(vs, float64(v))
		}
	}
	return vs
}

func TestProbeField(t *testing.T) {
	for _, ang := range []float64{70, 90, 100, 45, 30} {
		for _, sep := range []bool{false, true} {
			q := defaultPatch()
			q.angle = ang
			q.roll = 0
			opt := Default()
			opt.Separation = sep
			r := q.invert(t, opt)
			var da, daa, er []float64
			for _, a := range values(r.Maps.Get("ANGLE")) {
				d := math.Mod(a-ang+270, 180) - 90
				da = append(da, d)
				daa = append(daa, math.Abs(d))
			}
			er = values(r.Maps.Get("ANGLE_ERR"))
			v := values(r.Maps.Get("SPEED"))
			vi := values(r.Maps.Get("SPEED_IN"))
			t.Logf("angle %g sep %v: signed %.2f abs %.2f err %.2f n %d; v %.4f err %.4f n %d vin %d B %.4f ne %.4g coh %.2f track %.2f", ang, sep, median(da), median(daa), median(er), len(da), median(v)/q.v, median(values(r.Maps.Get("SPEED_ERR")))/q.v, len(v), len(vi),
				median(values(r.Maps.Get("B"))), median(values(r.Maps.Get("NE"))), median(values(r.Maps.Get("COHERENCE"))), median(values(r.Maps.Get("TRACK"))))
			fl := map[string]int{}
			for _, x := range r.Maps.Get("FLAG").Ints {
				for _, c := range FlagCodes() {
					if x&c.Value != 0 {
						fl[c.Name]++
					}
				}
			}
			t.Log(fl)
		}
	}
}

func BenchmarkInvert(b *testing.B) {
	q := defaultPatch()
	q.nx, q.ny, q.frames = 60, 60, 180
	q.tunings = true
	o := q.observe()
	for b.Loop() {
		if _, err := Invert(context.Background(), o, powerLaw{1.4, 1.8}, Default(), 1, nil); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(3600*float64(b.N)/b.Elapsed().Seconds(), "pixels/s")
}
