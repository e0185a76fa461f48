package invert

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"
)

// simulation is a one-dimensional track: a plane wave of one speed with spectrum
// f^-1.5 in power, dt = 30 s, T = 4 h, points 3.15 Mm apart, white noise 0.2 of
// the rms: the set-up of the derived table of separation biases.
type simulation struct {
	v, ratio float64 // speed either way [km/s], power ratio outward/inward (0: no inward wave)
	points   int
	noise    float64
	frames   int
}

const simStep = 3150.0 // [km]

// A trainMaker makes band-limited random series of a spectrum f^-slope in power,
// Fourier series of a period that is not the observation's: n samples every 30 s
// out of 11/8 n.
type trainMaker struct {
	n     int
	slope float64
	fft   *fourier.FFT
	c     []complex128
	v     []float64
}

type train []complex128 // from bin 0

func newTrainMaker(n int, slope float64) *trainMaker {
	m := 11 * n / 8
	return &trainMaker{n, slope, fourier.NewFFT(m), make([]complex128, m/2+1), make([]float64, m)}
}

func (m *trainMaker) frequency(j int) float64 { return float64(j) / (30 * float64(len(m.v))) }

func (m *trainMaker) train(rng *rand.Rand) train {
	var t train
	sum := 0.0
	for j := range m.c {
		f := m.frequency(j)
		c := complex(rng.NormFloat64(), rng.NormFloat64())
		if f < 0.3e-3 || f > 9e-3 {
			t = append(t, 0)
			continue
		}
		p := math.Pow(f, -m.slope)
		t = append(t, c*complex(math.Sqrt(p), 0))
		sum += p
	}
	for j := range t {
		t[j] /= complex(2*math.Sqrt(sum), 0) // the sequence adds conjugates
	}
	return t
}

// add adds a times the train, delayed by tau, to v.
func (m *trainMaker) add(v []float64, t train, a, tau float64) {
	for j := range t {
		m.c[j] = 0
		if t[j] != 0 {
			s, c := math.Sincos(-2 * math.Pi * m.frequency(j) * tau)
			m.c[j] = t[j] * complex(a*c, a*s)
		}
	}
	m.fft.Sequence(m.v, m.c)
	for i := range v {
		v[i] += m.v[i]
	}
}

// spectra returns the band-passed spectra of one realisation; delay gives the
// outward travel time to x [km] from the first point.
func (s simulation) spectra(rng *rand.Rand, m *trainMaker, t *transformer, delay func(x float64) float64) []float32 {
	out, in := m.train(rng), m.train(rng)
	rows := make([]float32, s.points*t.row)
	for i := range s.points {
		clear(t.v)
		x := float64(i) * simStep
		m.add(t.v, out, 1, delay(x))
		if s.ratio > 0 {
			m.add(t.v, in, 1/math.Sqrt(s.ratio), -delay(x))
		}
		for k := range t.v {
			t.v[k] += s.noise * rng.NormFloat64()
		}
		t.forward(rows[i*t.row:(i+1)*t.row], false)
	}
	return rows
}

// A bench measures simulated tracks with an unweighted fit.
type bench struct {
	m *trainMaker
	t *transformer
	b *band
}

func newBench(t *testing.T, frames int, slope float64) bench {
	opt := Default()
	opt.Taper = 0 // as the simulations to be met
	b := mustBand(t, opt, frames, 30)
	return bench{newTrainMaker(frames, slope), newTransformer(b, newDFT(b)), b}
}

func (b bench) lagger(points, pad int, k KZero, grid float64) *lagger {
	opt := Default()
	opt.Padding, opt.KZero = pad, k
	l := newLagger(b.b, &opt, points, simStep, grid)
	l.power = 0
	return l
}

func (l *lagger) separate(rows []float32, n int) (rising, falling []float32) {
	rising = l.rising(rows, n)
	return rising, l.falling(rows, rising, n)
}

func median(x []float64) float64 {
	x = slices.Clone(x)
	slices.Sort(x)
	n := len(x)
	return (x[n/2] + x[(n-1)/2]) / 2
}

// The separation alone biases the speed of a pure outward wave on a short track:
// v_app/v by track length over wavelength, without padding and with 4x padding,
// zero wavenumber halved; median of 40 realisations (derived; own simulation, to
// be met within 0.04). A length of n steps has n+1 points.
func TestSeparationBias(t *testing.T) {
	b := newBench(t, 480, 1.5)
	for _, c := range []struct {
		v          float64
		steps      int
		bare, fine float64
	}{
		{700, 10, 0.62, 0.47}, {500, 10, 0.59, 0.59}, {700, 20, 0.65, 0.72}, {500, 20, 0.73, 0.83},
		{700, 30, 0.74, 0.86}, {700, 40, 0.83, 0.93}, {500, 30, 0.86, 0.94}, {300, 20, 0.90, 0.96},
		{500, 40, 0.95, 0.98}, {700, 60, 0.97, 0.98}, {300, 30, 0.99, 0.99}, {500, 60, 1.00, 0.99},
	} {
		s := simulation{v: c.v, points: c.steps + 1, noise: 0.2, frames: 480}
		rng := rand.New(rand.NewPCG(uint64(c.v), uint64(c.steps)))
		bare, fine := b.lagger(s.points, 1, Halved, 9), b.lagger(s.points, 4, Halved, 9)
		var vb, vf []float64
		for range 40 {
			rows := s.spectra(rng, b.m, b.t, func(x float64) float64 { return x / c.v })
			out := bare.rising(rows, s.points)
			vb = append(vb, bare.speed(out, s.points, s.points/2).v/c.v)
			out = fine.rising(rows, s.points)
			vf = append(vf, fine.speed(out, s.points, s.points/2).v/c.v)
		}
		d := float64(c.steps) * simStep * 3.5e-3 / c.v
		t.Logf("D/lambda %.2f: %.3f %.3f", d, median(vb), median(vf))
		if math.Abs(median(vb)-c.bare) > 0.04 || math.Abs(median(vf)-c.fine) > 0.04 {
			t.Errorf("D/lambda %.2f: %.3f without, %.3f with padding, want %.2f, %.2f", d, median(vb), median(vf), c.bare, c.fine)
		}
	}
}

// A counter is a case of waves that run both ways and are not separated, which look fast:
// the median of v_app/v (derived; own simulation of 40 realisations each, with parabolas
// through whole frames; medians of the first two spread over 2.8 to 3.3 and 4.1 to 5.5).
type counter struct {
	v, ratio float64
	points   int
	noise    float64
	want     float64
}

var counters = []counter{
	{500, 2, 11, 0.2, 3.0}, {500, 1.5, 11, 0.2, 4.8},
	{500, 2, 21, 0.2, 1.6}, {300, 2, 21, 0.2, 1.03}, {700, 2, 21, 0.2, 2.2},
	{500, 2, 31, 0.2, 1.06}, {500, 2, 61, 0.2, 1.01},
}

// medians returns those of n realisations, by parabolas through whole frames and by
// speed, with the standard error of the first.
func (c counter) medians(t *testing.T, n int) (frames, exact, se float64) {
	b := newBench(t, 480, 1.5)
	s := simulation{v: c.v, ratio: c.ratio, points: c.points, noise: c.noise, frames: 480}
	rng := rand.New(rand.NewPCG(uint64(10*c.v), uint64(c.points)))
	l := b.lagger(s.points, 1, Halved, 9)
	var vs, es []float64
	for range n {
		rows := s.spectra(rng, b.m, b.t, func(x float64) float64 { return x / c.v })
		vs = append(vs, parabolas(b.b, rows, s.points, s.points/2, 30)/c.v)
		es = append(es, l.speed(rows, s.points, s.points/2).v/c.v)
	}
	slices.Sort(vs)
	// Standard error of a median from the order statistics around it.
	k := int(math.Sqrt(float64(n)) / 2)
	return median(vs), median(es), (vs[n/2+k] - vs[n/2-k]) / 2
}

// inTheMean returns what parabolas through whole frames and speed make of the mean
// cross-spectrum over all realisations, over the speed: with P the power of either wave,
// P_out exp(-i omega s/v) + P_in exp(i omega s/v) times the band's power (derived).
func (c counter) inTheMean(t *testing.T) (frames, exact float64) {
	b := newBench(t, 480, 1.5)
	nf, centre := len(b.b.freq), c.points/2
	rows := make([]float32, c.points*b.b.row)
	for i := range c.points {
		for j, f := range b.b.freq {
			sin, cos := math.Sincos(2 * math.Pi * f * float64(i-centre) * simStep / c.v)
			a := b.b.weight[j] * math.Pow(f/3.5e-3, -0.75)
			rows[i*b.b.row+j] = float32(a * cos)
			rows[i*b.b.row+nf+j] = float32(-a * sin * (c.ratio - 1) / (c.ratio + 1))
		}
	}
	l := b.lagger(c.points, 1, Halved, 9)
	return parabolas(b.b, rows, c.points, centre, 30) / c.v, l.speed(rows, c.points, centre).v / c.v
}

// check holds n realisations to the simulation to be met, and to what the mean
// cross-spectrum gives.
func (c counter) check(t *testing.T, n int) {
	t.Helper()
	frames, exact, se := c.medians(t, n)
	meanFrames, meanExact := c.inTheMean(t)
	name := fmt.Sprintf("%g km/s, ratio %g, %d points", c.v, c.ratio, c.points)
	t.Logf("%s: parabolas %.3f +- %.3f (%.2f), in the mean %.3f; exact %.3f, in the mean %.3f", name, frames, se, c.want, meanFrames, exact, meanExact)
	if math.Abs(frames-c.want) > max(0.1*c.want, 3*se) {
		t.Errorf("%s: %.3f +- %.3f, want %.2f", name, frames, se, c.want)
	}
	for _, q := range [2][2]float64{{frames, meanFrames}, {exact, meanExact}} {
		if math.Abs(q[0]-q[1]) > max(0.03*q[1], 3*se) {
			t.Errorf("%s: %.3f +- %.3f, the mean cross-spectrum gives %.3f", name, q[0], se, q[1])
		}
	}
}

// parabolas is the plain way to a speed: cross-correlations at every step [s], a parabola
// through the highest near the one before, and an unweighted line.
func parabolas(b *band, rows []float32, n, centre int, step float64) float64 {
	nf := len(b.freq)
	at := func(i, j int) complex128 {
		return complex(float64(rows[i*b.row+j]), float64(rows[i*b.row+nf+j]))
	}
	z := make([]complex128, nf)
	fit := []lag{{weight: 1}}
	for _, way := range [2]int{1, -1} {
		m := 0
		for i := centre + way; i >= 0 && i < n; i += way {
			for j := range z {
				z[j] = at(i, j) * cmplx.Conj(at(centre, j))
			}
			c := func(m int) float64 {
				sum := 0.0
				for j, f := range b.freq {
					sin, cos := math.Sincos(2 * math.Pi * f * float64(m) * step)
					sum += real(z[j])*cos - imag(z[j])*sin
				}
				return sum
			}
			for c(m+1) > c(m) {
				m++
			}
			for c(m-1) > c(m) {
				m--
			}
			lo, mid, hi := c(m-1), c(m), c(m+1)
			fit = append(fit, lag{s: float64(i-centre) * simStep, tau: (float64(m) + (lo-hi)/(2*(lo+hi-2*mid))) * step, weight: 1})
		}
	}
	slope, _, _, _ := straight(fit)
	return 1 / slope
}

// The shortest track, whose medians spread most, by the means of the simulation to be
// met: within 10 % or three standard errors. There the lags of the simulation are a few
// seconds, and parabolas through whole frames read them 2 to 4 % low, speeds high: for one
// frequency a lag tau is read as tan(omega tau)/(2 tan(omega dt/2)) of the cadence dt
// (derived). The exact lags lie that much lower, where the mean cross-spectrum has them. All
// cases with 1000 realisations are in TestCounterPropagationLong.
func TestCounterPropagation(t *testing.T) {
	for _, c := range counters[:2] {
		c.check(t, 200)
	}
}

// Lags that are small against the period: v_app/v = (Pout+Pin)/(Pout-Pin) (derived).
func TestSmallLagLimit(t *testing.T) {
	for _, ratio := range []float64{2, 5} {
		c := counter{v: 4000, ratio: ratio, points: 5}
		_, got, se := c.medians(t, 400)
		want := (ratio + 1) / (ratio - 1)
		t.Logf("ratio %g: %.3f, want %.3f; standard error %.3f", ratio, got, want, se)
		if math.Abs(got-want) > max(0.02*want, 3*se) {
			t.Errorf("ratio %g: %.3f, want %.3f; standard error %.3f", ratio, got, want, se)
		}
	}
}

// The lags against the plain way with steps so fine that a parabola is exact.
func TestLagsAgainstThePlainWay(t *testing.T) {
	b := newBench(t, 240, 1.5)
	rng := rand.New(rand.NewPCG(8, 9))
	for _, v := range []float64{80, 300, 900} {
		for _, points := range []int{11, 20} {
			s := simulation{v: v, ratio: 10, points: points, noise: 0.2, frames: 240}
			l := b.lagger(points, 1, Halved, 1/(lagSteps*3.5e-3))
			for range 5 {
				rows := s.spectra(rng, b.m, b.t, func(x float64) float64 { return x / v })
				got, want := l.speed(rows, points, points/2).v, parabolas(b.b, rows, points, points/2, 0.5)
				if math.Abs(got/want-1) > 2e-3 {
					t.Errorf("%g km/s, %d points: %.3f, the plain way gives %.3f", v, points, got, want)
				}
			}
		}
	}
}

// lagVariance returns the variance of the lag [s^2] of a pair of coherence g with
// n independent spectral samples about the angular frequency omega [rad/s].
func lagVariance(g, n, omega float64) float64 {
	return (1 - g*g) / (g * g * 2 * n * omega * omega)
}

// The rms error of the lag of a pair of coherence g, against simulated pairs in
// 3 h: within 10 % (derived; own simulation, 10.6 s against 10.2 at g = 0.5, 4.31
// against 4.46 at 0.8, 2.03 against 2.12 at 0.94).
func TestLagError(t *testing.T) {
	b := newBench(t, 360, 0)
	l := b.lagger(5, 1, Halved, 3)
	rng := rand.New(rand.NewPCG(12, 13))
	nf := len(b.b.freq)
	one, two := make([]float32, b.b.row), make([]float32, b.b.row)
	var f2, p float64
	for j, f := range b.b.freq {
		w := b.b.weight[j] * b.b.weight[j]
		f2 += w * f * f
		p += w
	}
	omega := 2 * math.Pi * math.Sqrt(f2/p)
	for _, g := range []float64{0.5, 0.8, 0.94} {
		// Common signal and independent noise; the coherence is S/(S+N).
		const trials = 4000
		sum := 0.0
		for range trials {
			for j, w := range b.b.weight {
				s := complex(rng.NormFloat64(), rng.NormFloat64()) * complex(w*math.Sqrt(g), 0)
				noise := complex(w*math.Sqrt(1-g), 0)
				x := s + noise*complex(rng.NormFloat64(), rng.NormFloat64())
				c := s + noise*complex(rng.NormFloat64(), rng.NormFloat64())
				one[j], one[nf+j] = float32(real(x)), float32(imag(x))
				two[j], two[nf+j] = float32(real(c)), float32(imag(c))
			}
			l.face(two)
			q, _, ok := l.peak(one, 0)
			if !ok {
				t.Fatal("no peak")
			}
			sum += q.tau * q.tau / trials
		}
		want := math.Sqrt(lagVariance(g, b.b.samples, omega))
		t.Logf("g = %g: %.2f s, formula %.2f s", g, math.Sqrt(sum), want)
		if math.Abs(math.Sqrt(sum)/want-1) > 0.1 {
			t.Errorf("g = %g: %.2f s, formula %.2f s", g, math.Sqrt(sum), want)
		}
	}
	// g = 0.8 and 0.95 in 1, 3, 5 h: 7.8, 4.5, 3.5 s and 3.4, 2.0, 1.5 s (derived).
	for h, want := range map[float64][2]float64{1: {7.8, 3.4}, 3: {4.5, 2.0}, 5: {3.5, 1.5}} {
		n := 1.5e-3 * math.Sqrt(math.Pi) * 3600 * h
		for i, g := range []float64{0.8, 0.95} {
			if got := math.Sqrt(lagVariance(g, n, 2*math.Pi*3.5e-3)); math.Abs(got-want[i]) > 0.05+0.02*want[i] {
				t.Errorf("g = %g, %g h: %.2f s, want %.1f", g, h, got, want[i])
			}
		}
	}
}

// Where white noise is all that makes lags scatter, the slope of N lags a distance ds apart
// has the error sigma/(ds sqrt(N (N^2-1)/12)), sigma that of one lag from the point's own
// noise: half the variance of a pair of like noise, because the centre's moves all lags
// alike. So it goes with the noise, with T^-1/2 and with N^-3/2 (derived); and the error
// that speed tells is that scatter.
func TestNoiseScaling(t *testing.T) {
	const v, realisations = 500.0, 300
	rng := rand.New(rand.NewPCG(21, 22))
	for _, c := range []struct {
		frames, points int
		noise          float64
	}{{240, 11, 0.3}, {240, 11, 0.15}, {960, 11, 0.3}, {240, 21, 0.3}} {
		opt := Default()
		b := mustBand(t, opt, c.frames, 30)
		tr, m := newTransformer(b, newDFT(b)), newTrainMaker(c.frames, 0)
		l := newLagger(b, &opt, c.points, simStep, 9)
		s := simulation{v: v, points: c.points, noise: c.noise, frames: c.frames}
		var sum, sum2 float64
		var told []float64
		for range realisations {
			r := l.speed(s.spectra(rng, m, tr, func(x float64) float64 { return x / v }), c.points, c.points/2)
			sum += 1 / r.v / realisations
			sum2 += 1 / (r.v * r.v) / realisations
			told = append(told, r.err/(r.v*r.v))
		}
		got := math.Sqrt(sum2 - sum*sum)
		var f2, p float64
		for j, f := range b.freq {
			f2 += b.weight[j] * b.weight[j] * f * f
			p += b.weight[j] * b.weight[j]
		}
		// Waves from 0.3 to 9 mHz, noise up to 1/(2 dt).
		noise := c.noise * c.noise * (9 - 0.3) / (1e3 / 60)
		n := float64(c.points)
		want := math.Sqrt(lagVariance(1/(1+noise), b.samples, 2*math.Pi*math.Sqrt(f2/p))/2) / (simStep * math.Sqrt(n*(n*n-1)/12))
		t.Logf("%d frames, %d points, noise %g: slope scatters by %.3g s/km, formula %.3g, told %.3g", c.frames, c.points, c.noise, got, want, median(told))
		if math.Abs(got/want-1) > 0.15 || math.Abs(median(told)/got-1) > 0.2 {
			t.Errorf("%d frames, %d points, noise %g: slope scatters by %.3g s/km, formula %.3g, told %.3g", c.frames, c.points, c.noise, got, want, median(told))
		}
	}
}

// The taper takes the edge of the observation out of the lags: scatter and bias of
// the speed of a noiseless wave on 31 points in 3 h (derived; own simulation).
func TestTaper(t *testing.T) {
	bias, scatter := map[float64]float64{}, map[float64]float64{}
	for _, taper := range []float64{0, 0.1} {
		opt := Default()
		opt.Taper = taper
		b := mustBand(t, opt, 360, 30)
		tr, m := newTransformer(b, newDFT(b)), newTrainMaker(360, 1.5)
		l := newLagger(b, &opt, 31, simStep, 9)
		s := simulation{v: 400, points: 31, frames: 360}
		rng := rand.New(rand.NewPCG(77, 1))
		const n = 60
		var sum, sum2 float64
		for range n {
			v := l.speed(s.spectra(rng, m, tr, func(x float64) float64 { return x / s.v }), 31, 15).v / s.v
			sum += v / n
			sum2 += v * v / n
		}
		bias[taper], scatter[taper] = sum-1, math.Sqrt(sum2-sum*sum)
	}
	t.Logf("bias %v, scatter %v", bias, scatter)
	if scatter[0] < 0.005 || scatter[0.1] > 0.002 || math.Abs(bias[0.1]) > 0.0015 {
		t.Errorf("bias %v, scatter %v", bias, scatter)
	}
}

// A speed that grows along the track, v = v0 exp(s/L), is averaged by the fit:
// 0.998, 0.994, 0.975, 0.906 of v0 for D/L = 0.25, 0.5, 1, 2 (derived; a harmonic
// mean would give 0.997, 0.990, 0.960, 0.851).
func TestAverageOverTheTrack(t *testing.T) {
	b := newBench(t, 480, 1.5)
	l := b.lagger(31, 1, Halved, 9)
	const half, v0 = 15 * simStep, 400.0
	for over, want := range map[float64]float64{0.25: 0.998, 0.5: 0.994, 1: 0.975, 2: 0.906} {
		L := 31 * simStep / over // 31 points stand for 31 steps of a continuous fit
		rows := make([]float32, 31*b.b.row)
		for i := range 31 {
			x := float64(i)*simStep - half
			tau := -L / v0 * math.Expm1(-x/L)
			for j, f := range b.b.freq {
				s, c := math.Sincos(-2 * math.Pi * f * tau)
				rows[i*b.b.row+j], rows[i*b.b.row+len(b.b.freq)+j] = float32(b.b.weight[j]*c), float32(b.b.weight[j]*s)
			}
		}
		if got := l.speed(rows, 31, 15).v / v0; math.Abs(got-want) > 0.001 {
			t.Errorf("D/L = %g: %.4f, want %.3f", over, got, want)
		}
	}
}

// The two parts of a separation add up to the waves, for zero wavenumber halved,
// and a wave with whole cycles on the track goes where it belongs (derived).
func TestSeparationIsAProjection(t *testing.T) {
	b := newBench(t, 480, 1.5)
	for _, n := range []int{10, 31} {
		for _, pad := range []int{1, 3} {
			l := b.lagger(n, pad, Halved, 9)
			rng := rand.New(rand.NewPCG(4, uint64(n)))
			nf := len(b.b.freq)
			rows := make([]float32, n*b.b.row)
			for i := range n {
				for j := range 2 * nf {
					rows[i*b.b.row+j] = float32(rng.NormFloat64())
				}
			}
			up, down := l.separate(rows, n)
			for i := range rows {
				if d := up[i] + down[i] - rows[i]; math.Abs(float64(d)) > 1e-5 {
					t.Fatalf("%d points, padding %d: sum off by %g", n, pad, d)
				}
			}
		}
		l := b.lagger(n, 1, Dropped, 9)
		for cycles := -3; cycles <= 3; cycles++ {
			nf := len(b.b.freq)
			rows := make([]float32, n*b.b.row)
			for i := range n {
				s, c := math.Sincos(-2 * math.Pi * float64(cycles*i) / float64(n))
				for j := range nf {
					rows[i*b.b.row+j], rows[i*b.b.row+nf+j] = float32(c), float32(s)
				}
			}
			up, down := l.separate(rows, n)
			for i := range rows {
				wantUp, wantDown := float32(0), float32(0)
				if cycles > 0 {
					wantUp = rows[i]
				} else if cycles < 0 {
					wantDown = rows[i]
				}
				if math.Abs(float64(up[i]-wantUp)) > 1e-5 || math.Abs(float64(down[i]-wantDown)) > 1e-5 {
					t.Fatalf("%d points, %d cycles: %g, %g of %g", n, cycles, up[i], down[i], rows[i])
				}
			}
		}
	}
}

// The leak is what the separation makes of a plane wave, and keeps the speeds of inward
// waves from being told where there are none.
func TestLeak(t *testing.T) {
	b := newBench(t, 480, 1.5)
	nf := len(b.b.freq)
	for _, n := range []int{11, 20, 31} {
		for _, k := range []KZero{Kept, Halved, Dropped} {
			l := b.lagger(n, 1, k, 9)
			rows := make([]float32, n*b.b.row)
			const theta = 0.15
			for i := range n {
				s, c := math.Sincos(theta * float64(i))
				rows[i*b.b.row], rows[i*b.b.row+nf] = float32(c), float32(-s)
			}
			up, down := l.separate(rows, n)
			want := float64(norm(down)) * float64(norm(down)) / (float64(norm(up)) * float64(norm(up)))
			if got := l.leak(n, theta); math.Abs(got-want) > 1e-5 {
				t.Errorf("%d points, zero wavenumber %d: leak %.5f, separated %.5f", n, k, got, want)
			}
		}
	}
	share := map[float64]float64{}
	for _, inward := range []float64{0, 0.5} {
		q := defaultPatch()
		q.nx, q.ny, q.frames, q.v, q.inward = 34, 34, 240, 300, inward
		r := q.invert(t, Default())
		share[inward] = float64(len(values(r.Maps.Get("SPEED_IN")))) / float64(len(values(r.Maps.Get("SPEED"))))
	}
	t.Logf("share of pixels with an inward speed: %v", share)
	if share[0] > 0.1 || share[0.5] < 0.5 {
		t.Errorf("share of pixels with an inward speed: %v", share)
	}
}
