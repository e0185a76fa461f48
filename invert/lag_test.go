package invert

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// simulation is a one-dimensional track: a plane wave of one speed with spectrum
// f^-1.5 in power, dt = 30 s, T = 4 h, points 3.15 Mm apart, white noise 0.2 of
// the rms: the set-up of the derived table of separation biases.
type simulation struct {
	v, vIn, ratio float64 // outward and inward speed, power ratio outward/inward (0: none)
	points        int
	noise         float64
	frames        int
}

const simStep = 3150.0 // [km]

func defaultSim(v float64, points int) simulation {
	return simulation{v: v, points: points, noise: 0.2, frames: 480}
}

// train is a band-limited random series with a power spectrum f^-1.5, a Fourier
// series of a period that is not the observation's.
type train struct {
	f    []float64
	c    []complex128
	norm float64
}

func newTrain(rng *rand.Rand, duration float64) train {
	var t train
	period := 2.37 * duration
	sum := 0.0
	for j := 1; ; j++ {
		f := float64(j) / period
		if f > 12e-3 {
			break
		}
		if f < 0.3e-3 {
			continue
		}
		p := math.Pow(f, -1.5)
		t.f = append(t.f, f)
		t.c = append(t.c, complex(rng.NormFloat64(), rng.NormFloat64())*complex(math.Sqrt(p), 0))
		sum += p
	}
	for j := range t.c {
		t.c[j] /= complex(math.Sqrt(sum), 0)
	}
	return t
}

// add adds a times the train, delayed by tau, to series sampled every dt.
func (t train) add(v []float64, a, tau, dt float64) {
	for j, f := range t.f {
		s, c := math.Sincos(-2 * math.Pi * f * tau)
		z := t.c[j] * complex(a*c, a*s)
		s, c = math.Sincos(2 * math.Pi * f * dt)
		r := complex(c, s)
		for i := range v {
			v[i] += real(z)
			z *= r
		}
	}
}

// spectra returns the band-passed spectra of one realisation.
func (s simulation) spectra(rng *rand.Rand, t *transformer) []float32 {
	out := newTrain(rng, float64(s.frames)*30)
	in := newTrain(rng, float64(s.frames)*30)
	rows := make([]float32, s.points*t.row)
	for i := range s.points {
		clear(t.v)
		x := float64(i) * simStep
		out.add(t.v, 1, x/s.v, 30)
		if s.ratio > 0 {
			in.add(t.v, 1/math.Sqrt(s.ratio), -x/s.vIn, 30)
		}
		for k := range t.v {
			t.v[k] += s.noise * rng.NormFloat64()
		}
		t.forward(rows[i*t.row:(i+1)*t.row], false)
	}
	return rows
}

func median(x []float64) float64 {
	x = slices.Clone(x)
	slices.Sort(x)
	n := len(x)
	return (x[n/2] + x[(n-1)/2]) / 2
}

func (s simulation) run(t *testing.T, opt Options, n int, seed uint64) []float64 {
	t.Helper()
	b, err := newBand(&opt, s.frames, 30)
	if err != nil {
		t.Fatal(err)
	}
	tr := newTransformer(b)
	l := newLagger(b, &opt, s.points, simStep)
	rng := rand.New(rand.NewPCG(seed, 1))
	var vs []float64
	for range n {
		rows := s.spectra(rng, tr)
		if opt.Separation {
			rows, _ = l.separate(rows, s.points)
		}
		vs = append(vs, l.speed(rows, s.points, s.points/2).v)
	}
	return vs
}

func TestProbeTable(t *testing.T) {
	for _, pad := range []int{1, 4} {
		for _, v := range []float64{300, 500, 700} {
			for _, n := range []int{10, 11, 20, 21, 30, 31, 40, 41, 60, 61} {
				opt := Default()
				opt.Padding = pad
				vs := defaultSim(v, n).run(t, opt, 40, 3)
				t.Logf("pad %d v %g n %d D/lambda %.2f (N-1: %.2f): %.3f", pad, v, n, float64(n)*simStep/(v/3.5e-3), float64(n-1)*simStep/(v/3.5e-3), median(vs)/v)
			}
		}
	}
}
