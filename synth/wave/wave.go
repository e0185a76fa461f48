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

// A Driver gives the motion of every surface site as a few rows of frames.
//
// Delay and damping of a train are a linear filter exp(-f tau/xi) exp(-2 pi i f tau).
// The delay is split into whole frames, which only shift the rows, and a rest of at
// most half a frame. The remaining family of filters, over all rests and all travel
// times, is written as a sum of Rank fixed filters times coefficients: its singular
// value decomposition, weighted by the spectrum. The rows of a site are its motion
// under each fixed filter; any sample's velocity is a sum of Rank shifted rows.
type Driver struct {
	s     Settings
	sites lattice

	size   int // of the Fourier transform [frames]
	first  int // first frequency bin; bin k is k/(size*Cadence)
	amp    []float64
	basis  [][]complex128 // [rank][bin]
	lead   int            // frames of the rows before frame 0
	length int            // of a row

	nTau, nRest int
	dTau, dRest float64
	coef        []float64 // [tau][rest][rank]

	pool  sync.Pool
	cache rowCache
}

// Tolerance of the filter decomposition: the greatest rms error of a train's
// velocity, over its undamped rms, at any delay. Typical errors are a third of it,
// and errors of different samples of a line of sight do not add up.
const Tolerance = 1e-3

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
	if err := d.decompose(df); err != nil {
		return nil, err
	}
	d.pool.New = func() any { return &workspace{fft: fourier.NewCmplxFFT(d.size), buf: make([]complex128, d.size)} }
	d.cache.init(cacheBytes)
	return d, nil
}

// smooth returns the least n' >= n without prime factors above 5.
func smooth(n int) int {
	for ; ; n++ {
		m := n
		for _, p := range []int{2, 3, 5} {
			for m%p == 0 {
				m /= p
			}
		}
		if m == 1 {
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

func (d *Driver) decompose(df float64) error {
	half := d.s.Cadence / 2
	var taus []float64
	if d.s.Damping == 0 {
		taus = []float64{0}
	} else { // denser where damping changes fast
		const n = 24
		for i := range n {
			u := float64(i) / (n - 1)
			taus = append(taus, u*u*d.s.MaxDelay)
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
		return fmt.Errorf("waves: the filters of delay and damping could not be decomposed")
	}
	var v mat.Dense
	svd.VTo(&v)
	_, most := v.Dims()
	row := make([]float64, 2*n)
	residual := func(rank int) float64 { // greatest rms over all filters
		worst := 0.0
		for _, tau := range taus {
			for j := range nRest {
				d.filterAt(row, df, tau, half*(2*float64(j)/(nRest-1)-1))
				e := 0.0
				for _, x := range row {
					e += x * x
				}
				for r := range rank {
					c := 0.0
					for q, x := range row {
						c += x * v.At(q, r)
					}
					e -= c * c
				}
				worst = max(worst, e)
			}
		}
		return math.Sqrt(max(worst, 0))
	}
	rank := 1
	for rank < most && residual(rank) > Tolerance {
		rank++
	}
	// A real coefficient times a complex filter: the basis in frequency is the pair
	// (real, imaginary) of a right singular vector; the site's own random numbers have
	// unit variance per bin, so its amplitude stays in the basis.
	for r := range rank {
		b := make([]complex128, n)
		for i := range b {
			b[i] = complex(v.At(i, r), v.At(n+i, r))
		}
		d.basis = append(d.basis, b)
	}
	d.nRest, d.dRest = 33, d.s.Cadence/32
	d.nTau, d.dTau = 1, 1
	if d.s.Damping > 0 {
		d.nTau = int(math.Ceil(d.s.MaxDelay/20)) + 2
		d.dTau = 20
	}
	d.coef = make([]float64, 0, d.nTau*d.nRest*rank)
	for i := range d.nTau {
		for j := range d.nRest {
			d.filterAt(row, df, float64(i)*d.dTau, float64(j)*d.dRest-half)
			for r := range rank {
				c := 0.0
				for q, x := range row {
					c += x * v.At(q, r)
				}
				d.coef = append(d.coef, c)
			}
		}
	}
	return nil
}

// Rank returns the number of rows per site, polarisation and direction.
func (d *Driver) Rank() int { return len(d.basis) }

// Coefficients fills c (Rank values) for a train that has travelled tau [s], seen
// lead [s] after the start of each frame, and returns the index of the element of
// the rows that belongs to frame 0.
func (d *Driver) Coefficients(c []float64, tau, lead float64) int {
	delay := tau - lead
	m := math.Round(delay / d.s.Cadence)
	rest := delay - m*d.s.Cadence
	u := 0.0
	if d.nTau > 1 {
		u = tau / d.dTau
	}
	v := rest/d.dRest + float64(d.nRest-1)/2
	i := min(max(int(u), 0), max(d.nTau-2, 0))
	j := min(max(int(v), 0), d.nRest-2)
	u -= float64(i)
	v -= float64(j)
	rank := len(d.basis)
	a := d.coef[(i*d.nRest+j)*rank:]
	b := a[rank:]
	if d.nTau == 1 {
		for r := range rank {
			c[r] = a[r] + v*(b[r]-a[r])
		}
	} else {
		e := d.coef[((i+1)*d.nRest+j)*rank:]
		f := e[rank:]
		for r := range rank {
			lo, hi := a[r]+v*(b[r]-a[r]), e[r]+v*(f[r]-e[r])
			c[r] = lo + u*(hi-lo)
		}
	}
	return d.lead - int(m)
}

type workspace struct {
	fft *fourier.CmplxFFT
	buf []complex128
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

// Rows returns the rows of a site: Rank rows of RowLength elements one after the
// other. They are shared and must not be changed. Safe for concurrent use.
func (d *Driver) Rows(site uint64, pol, dir int) []float32 {
	key := site<<2 | uint64(pol)<<1 | uint64(dir)
	if rows := d.cache.get(key); rows != nil {
		return rows
	}
	z := d.amplitudes(site, pol, dir)
	rows := make([]float32, len(d.basis)*d.length)
	w := d.pool.Get().(*workspace)
	defer d.pool.Put(w)
	for r := 0; r < len(d.basis); r += 2 { // two real rows per complex transform
		clear(w.buf)
		for i, a := range z {
			// Row r is Re X, X = sum over bins of a b exp(+2 pi i k t/size): the sum of
			// half of X and half of its conjugate, which sits at bin -k. Bins beyond the
			// Nyquist frequency fold, as frames at this cadence do.
			k := (d.first + i) % d.size
			x := a * d.basis[r][i] / 2
			w.buf[k] += x
			mirror := (d.size - k) % d.size
			w.buf[mirror] += complex(real(x), -imag(x))
			if r+1 < len(d.basis) {
				y := a * d.basis[r+1][i] / 2
				w.buf[k] += complex(-imag(y), real(y)) // i y
				w.buf[mirror] += complex(imag(y), real(y))
			}
		}
		out := w.fft.Sequence(w.buf, w.buf)
		for t := range d.length {
			rows[r*d.length+t] = float32(real(out[t]))
			if r+1 < len(d.basis) {
				rows[(r+1)*d.length+t] = float32(imag(out[t]))
			}
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
