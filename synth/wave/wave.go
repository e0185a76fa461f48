// Package wave is the random kink-wave driver: at every footpoint of the surface a
// stationary Gaussian motion in two polarisations, coherent over cells, that travels
// along the field lines with a known delay and a frequency-dependent damping.
//
// The driver is addressed, not stored: the motion of a surface site is a pure
// function of (seed, site, polarisation, direction of travel), so that tiles, workers
// and shards cannot change it.
package wave

import (
	"fmt"
	"math"
	"sync"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/mat"

	"offplane/synth/random"
)

// A Spectrum is the power spectrum of the driver between Low and High [Hz]:
//
//	P(f) = (f/f0)^-Slope + Floor + Bump exp(-(ln f - ln f0)^2 / (2 Width^2))
//
// (the shape fitted by Morton, Weberg & McLaughlin 2019, Nat. Astron. 3, 223, from
// memory), scaled to unit variance.
type Spectrum struct {
	Slope, Floor, Bump float64
	At, Width          float64 // f0 [Hz], sigma in ln f
	Low, High          float64 // [Hz]
}

// Power returns the unscaled P(f), 0 outside [Low, High].
func (s Spectrum) Power(f float64) float64 {
	if f < s.Low || f > s.High {
		return 0
	}
	l := math.Log(f / s.At)
	return math.Exp(-s.Slope*l) + s.Floor + s.Bump*math.Exp(-l*l/(2*s.Width*s.Width))
}

// Direction of travel of a train; part of its address.
const (
	Outward = 0 // launched at the footpoint
	Inward  = 1 // launched on an open line high in the corona
)

// Settings describe a driver.
type Settings struct {
	Seed     uint64
	Cell     float64 // coherence scale at the surface [solar radii]
	Spectrum Spectrum
	Damping  float64 // xi_E, damping length over wavelength; 0: none
	Cadence  float64 // time between frames [s]
	Frames   int
	MaxDelay float64 // longest travel time that will be asked [s]
	MaxLead  float64 // latest time within a frame that will be asked, after its start [s]
}

// A stretch is the decomposition for travel times from, up to the next stretch's from.
type stretch struct {
	from        float64
	basis       [][]complex128 // [rank][bin], halved: see Rows
	nTau, nRest int
	dTau, dRest float64
	coef        []float64 // [tau][rest][rank]
}

// A Driver gives the motion of every surface site as a few rows of frames.
//
// Delay and damping of a train are a linear filter exp(-f tau/xi) exp(-2 pi i f tau).
// The delay is split into whole frames, which only shift the rows, and a rest of at
// most half a frame. The remaining family of filters, over all rests and the travel
// times of one stretch, is written as a short sum of fixed filters times coefficients:
// its singular value decomposition, weighted by the spectrum. The rows of a site are
// its motion under each fixed filter of a stretch; any sample's velocity is a sum of
// a few shifted rows.
type Driver struct {
	s     Settings
	sites lattice

	size   int // of the Fourier transform [frames]
	first  int // first frequency bin; bin k is k/(size*Cadence)
	amp    []float64
	lead   int // frames of the rows before frame 0
	length int // of a row

	stretches []stretch

	pool  sync.Pool
	cache rowCache
}

// Tolerance of the filter decomposition: the greatest rms error of a train's
// velocity, over its undamped rms, at any delay. Typical errors are a third of it,
// and errors of different samples of a line of sight do not add up.
const Tolerance = 1e-3

// Stretches of travel time [s]: the first is this long, later ones longer by growth
// times their start, because damping has then taken the high frequencies away.
const (
	shortest = 300
	growth   = 0.3
)

// cacheBytes bounds the rows kept for reuse.
const cacheBytes = 800 << 20

// NewDriver prepares a driver.
func NewDriver(s Settings) (*Driver, error) {
	d := &Driver{s: s, sites: newLattice(s.Cell)}
	d.lead = int(math.Ceil(s.MaxDelay/s.Cadence)) + 1
	d.length = s.Frames + d.lead + int(math.Ceil(s.MaxLead/s.Cadence)) + 1
	d.size = smooth(d.length)
	df := 1 / (float64(d.size) * s.Cadence)
	d.first = max(1, int(math.Ceil(s.Spectrum.Low/df)))
	last := int(math.Floor(s.Spectrum.High / df))
	if last < d.first {
		return nil, fmt.Errorf("waves.spectrum: no frequency of a series of %.0f s lies between low and high", float64(d.size)*s.Cadence)
	}
	sum := 0.0
	for k := d.first; k <= last; k++ {
		p := s.Spectrum.Power(float64(k) * df)
		d.amp = append(d.amp, p)
		sum += p
	}
	for i := range d.amp {
		d.amp[i] = math.Sqrt(d.amp[i] / sum)
	}
	for from := 0.0; ; {
		to := from + shortest + growth*from
		last := d.s.Damping == 0 || to >= d.s.MaxDelay
		if last {
			to = max(d.s.MaxDelay, from+1)
		}
		st, err := d.decompose(df, from, to)
		if err != nil {
			return nil, err
		}
		d.stretches = append(d.stretches, st)
		if last {
			break
		}
		from = to
	}
	d.pool.New = func() any {
		return &workspace{fft: fourier.NewFFT(d.size), bins: make([]complex128, d.size/2+1), row: make([]float64, d.size)}
	}
	d.cache.init(cacheBytes)
	return d, nil
}

// smooth returns the least n' >= n without prime factors above 3, for which the
// transform is fast.
func smooth(n int) int {
	for ; ; n++ {
		m := n
		for _, p := range []int{2, 3} {
			for m%p == 0 {
				m /= p
			}
		}
		if m == 1 && n%2 == 0 {
			return n
		}
	}
}

// filterAt fills row with the filter of travel time tau and rest of the delay, at
// every bin times its amplitude: real parts, then imaginary parts.
func (d *Driver) filterAt(row []float64, df, tau, rest float64) {
	n := len(d.amp)
	for i, a := range d.amp {
		f := float64(d.first+i) * df
		g := a * d.damping(f, tau)
		s, c := math.Sincos(-2 * math.Pi * f * rest)
		row[i], row[n+i] = g*c, g*s
	}
}

// damping is the amplitude factor exp(-f tau/xi_E): L_D = c_k xi_E/f (Terradas,
// Goossens & Verth 2010, A&A 524, A23) along a path with ds/c_k = d tau.
func (d *Driver) damping(f, tau float64) float64 {
	if d.s.Damping == 0 {
		return 1
	}
	return math.Exp(-f * tau / d.s.Damping)
}

// decompose finds the fixed filters for travel times in [from, to].
func (d *Driver) decompose(df, from, to float64) (stretch, error) {
	half := d.s.Cadence / 2
	taus := []float64{from}
	if d.s.Damping > 0 {
		taus = taus[:0]
		for i := range 7 {
			taus = append(taus, from+(to-from)*float64(i)/6)
		}
	}
	const nRest = 13
	n := len(d.amp)
	m := mat.NewDense(len(taus)*nRest, 2*n, nil)
	for i, tau := range taus {
		for j := range nRest {
			d.filterAt(m.RawRowView(i*nRest+j), df, tau, half*(2*float64(j)/(nRest-1)-1))
		}
	}
	var svd mat.SVD
	if !svd.Factorize(m, mat.SVDThin) {
		return stretch{}, fmt.Errorf("waves: the filters of delay and damping could not be decomposed")
	}
	var v mat.Dense
	svd.VTo(&v)
	_, most := v.Dims()
	// left[i] is what the filters found so far leave of row i, squared.
	rows, _ := m.Dims()
	left := make([]float64, rows)
	for i := range left {
		for _, x := range m.RawRowView(i) {
			left[i] += x * x
		}
	}
	rank := 0
	for worst := 1.0; rank < most && worst > Tolerance; rank++ {
		worst = 0
		for i := range left {
			c := 0.0
			for q, x := range m.RawRowView(i) {
				c += x * v.At(q, rank)
			}
			left[i] -= c * c
			worst = max(worst, math.Sqrt(max(left[i], 0)))
		}
	}
	st := stretch{from: from, nRest: 33, dRest: d.s.Cadence / 32, nTau: 1, dTau: 1}
	// A real coefficient times a complex filter: the basis in frequency is the pair
	// (real, imaginary) of a right singular vector. The spectrum's amplitude is in it.
	for r := range rank {
		b := make([]complex128, n)
		for i := range b {
			b[i] = complex(v.At(i, r)/2, v.At(n+i, r)/2)
		}
		st.basis = append(st.basis, b)
	}
	if d.s.Damping > 0 {
		st.dTau = 20
		st.nTau = int(math.Ceil((to-from)/st.dTau)) + 1
	}
	row := make([]float64, 2*n)
	for i := range st.nTau {
		for j := range st.nRest {
			d.filterAt(row, df, from+float64(i)*st.dTau, float64(j)*st.dRest-half)
			for r := range rank {
				c := 0.0
				for q, x := range row {
					c += x * v.At(q, r)
				}
				st.coef = append(st.coef, c)
			}
		}
	}
	return st, nil
}

// Ranks returns the number of rows per site, polarisation and direction for each
// stretch of travel times.
func (d *Driver) Ranks() []int {
	var n []int
	for i := range d.stretches {
		n = append(n, len(d.stretches[i].basis))
	}
	return n
}

// Stretch returns the number of the stretch that holds the travel time tau [s].
func (d *Driver) Stretch(tau float64) int {
	k := len(d.stretches) - 1
	for k > 0 && tau < d.stretches[k].from {
		k--
	}
	return k
}

// Coefficients returns the coefficients, appended to c[:0], of a train that has
// travelled tau [s], in that stretch, seen lead [s] after the start of each frame,
// and the index of the element of the rows that belongs to frame 0.
func (d *Driver) Coefficients(c []float64, stretch int, tau, lead float64) ([]float64, int) {
	st := &d.stretches[stretch]
	delay := tau - lead
	m := math.Round(delay / d.s.Cadence)
	rest := delay - m*d.s.Cadence
	v := rest/st.dRest + float64(st.nRest-1)/2
	j := min(max(int(v), 0), st.nRest-2)
	v -= float64(j)
	rank := len(st.basis)
	c = c[:0]
	if st.nTau == 1 {
		a := st.coef[j*rank:]
		b := a[rank:]
		for r := range rank {
			c = append(c, a[r]+v*(b[r]-a[r]))
		}
		return c, d.lead - int(m)
	}
	u := (tau - st.from) / st.dTau
	i := min(max(int(u), 0), st.nTau-2)
	u -= float64(i)
	a := st.coef[(i*st.nRest+j)*rank:]
	b := a[rank:]
	e := st.coef[((i+1)*st.nRest+j)*rank:]
	f := e[rank:]
	for r := range rank {
		lo, hi := a[r]+v*(b[r]-a[r]), e[r]+v*(f[r]-e[r])
		c = append(c, lo+u*(hi-lo))
	}
	return c, d.lead - int(m)
}

type workspace struct {
	fft  *fourier.FFT
	bins []complex128
	row  []float64
}

// amplitudes returns the complex random amplitudes of a site's motion, one a bin,
// with unit variance each; the motion is Re sum of amp * amplitude * exp(2 pi i f t).
func (d *Driver) amplitudes(site uint64, pol, dir int) []complex128 {
	s := random.At(d.s.Seed, 0x77617665, site, uint64(pol), uint64(dir)) // "wave"
	z := make([]complex128, len(d.amp))
	for i := range z {
		re := s.Normal()
		z[i] = complex(re, s.Normal())
	}
	return z
}

// Rows returns the rows of a site for one stretch of travel times: as many as its
// rank, of RowLength elements each, one after the other. They are shared and must not
// be changed. Safe for concurrent use.
func (d *Driver) Rows(site uint64, pol, dir, stretch int) []float32 {
	key := site<<8 | uint64(stretch)<<2 | uint64(pol)<<1 | uint64(dir)
	if rows := d.cache.get(key); rows != nil {
		return rows
	}
	basis := d.stretches[stretch].basis
	z := d.amplitudes(site, pol, dir)
	rows := make([]float32, len(basis)*d.length)
	w := d.pool.Get().(*workspace)
	defer d.pool.Put(w)
	for r, b := range basis {
		clear(w.bins)
		for i, a := range z {
			// The row is Re of the sum over bins of a b exp(+2 pi i k t/size), which is the
			// transform of half of it with its conjugate at -k. Bins beyond the Nyquist
			// frequency fold, as frames at this cadence do.
			k, x := (d.first+i)%d.size, a*b[i]
			if k > d.size/2 {
				k, x = d.size-k, complex(real(x), -imag(x))
			}
			if k == 0 || 2*k == d.size { // its own conjugate
				x = complex(2*real(x), 0)
			}
			w.bins[k] += x
		}
		for t, x := range w.fft.Sequence(w.row, w.bins)[:d.length] {
			rows[r*d.length+t] = float32(x)
		}
	}
	d.cache.put(key, rows)
	return rows
}

// RowLength returns the number of elements of one row.
func (d *Driver) RowLength() int { return d.length }

// Exact returns the velocity (unit rms undamped) of one site at time t [s] after the
// start of frame 0, for a train that has travelled tau [s], by the sum over
// frequencies: the slow path that Rows and Coefficients must reproduce.
func (d *Driver) Exact(site uint64, pol, dir int, t, tau float64) float64 {
	df := 1 / (float64(d.size) * d.s.Cadence)
	sum := 0.0
	for i, z := range d.amplitudes(site, pol, dir) {
		f := float64(d.first+i) * df
		s, c := math.Sincos(2 * math.Pi * f * (t - tau + float64(d.lead)*d.s.Cadence))
		sum += d.amp[i] * d.damping(f, tau) * (real(z)*c - imag(z)*s)
	}
	return sum
}

// BandVariance returns the variance of a train's velocity within a band whose
// amplitude response is h, over the undamped variance, after travelling tau [s].
func (d *Driver) BandVariance(tau float64, h func(f float64) float64) float64 {
	df := 1 / (float64(d.size) * d.s.Cadence)
	sum := 0.0
	for i, a := range d.amp {
		f := float64(d.first+i) * df
		x := a * h(f) * d.damping(f, tau)
		sum += x * x
	}
	return sum
}
