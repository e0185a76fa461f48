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

	"offplane/synth/kernel"
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

// A Driver gives the spectrum of the motion of every surface site.
//
// Delay and damping of a train are the linear filter exp(-f tau/xi) exp(-2 pi i f tau):
// a power of one complex number from bin to bin. So a sample's motion is a sum of spectra,
// each carried along its line, and one Fourier transform at the end (see Bundle); nothing
// is interpolated.
type Driver struct {
	s     Settings
	sites lattice

	fourier *kernel.Fourier
	step    float64   // between frequency bins [Hz]
	first   int       // first frequency bin; bin k is k*step
	amp     []float64 // of the bins
	padded  int       // number of bins, in eights

	cache cache
}

// cacheBytes bounds the spectra kept for reuse.
const cacheBytes = 160 << 20

// NewDriver prepares a driver.
func NewDriver(s Settings) (*Driver, error) {
	d := &Driver{s: s, sites: newLattice(s.Cell)}
	// A period long enough that no train comes round again.
	span := s.Frames + int(math.Ceil(s.MaxDelay/s.Cadence)) + int(math.Ceil(s.MaxLead/s.Cadence)) + 1
	d.fourier = kernel.NewFourier(span)
	d.step = 1 / (float64(d.fourier.Size) * s.Cadence)
	d.first = max(1, int(math.Ceil(s.Spectrum.Low/d.step)))
	last := int(math.Floor(s.Spectrum.High / d.step))
	if last < d.first {
		return nil, fmt.Errorf("waves.spectrum: no frequency of a series of %.0f s lies between low and high", float64(d.fourier.Size)*s.Cadence)
	}
	sum := 0.0
	for k := d.first; k <= last; k++ {
		p := s.Spectrum.Power(float64(k) * d.step)
		d.amp = append(d.amp, p)
		sum += p
	}
	for i := range d.amp {
		d.amp[i] = math.Sqrt(d.amp[i] / sum)
	}
	d.padded = (len(d.amp) + 7) &^ 7
	d.cache.init(cacheBytes)
	return d, nil
}

// damping is the amplitude factor exp(-f tau/xi_E): L_D = c_k xi_E/f (Terradas,
// Goossens & Verth 2010, A&A 524, A23) along a path with ds/c_k = d tau.
func (d *Driver) damping(f, tau float64) float64 {
	if d.s.Damping == 0 {
		return 1
	}
	return math.Exp(-f * tau / d.s.Damping)
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

// spectra returns the spectra of a site's motion in both polarisations, one after the
// other: real parts of all bins, then imaginary parts. They are shared and must not be
// changed. Safe for concurrent use.
func (d *Driver) spectra(site uint64, dir int) []float32 {
	key := site<<1 | uint64(dir)
	if u := d.cache.get(key); u != nil {
		return u
	}
	u := make([]float32, 4*d.padded)
	for pol := range 2 {
		re, im := u[2*pol*d.padded:], u[(2*pol+1)*d.padded:]
		for i, z := range d.amplitudes(site, pol, dir) {
			re[i], im[i] = float32(d.amp[i]*real(z)), float32(d.amp[i]*imag(z))
		}
	}
	d.cache.put(key, u)
	return u
}

// Exact returns the velocity (unit rms undamped) of one site at time t [s] after the
// start of frame 0, for a train that has travelled tau [s], by the sum over
// frequencies: the slow path that a Bundle must reproduce.
func (d *Driver) Exact(site uint64, pol, dir int, t, tau float64) float64 {
	sum := 0.0
	for i, z := range d.amplitudes(site, pol, dir) {
		f := float64(d.first+i) * d.step
		s, c := math.Sincos(2 * math.Pi * f * (t - tau))
		sum += d.amp[i] * d.damping(f, tau) * (real(z)*c - imag(z)*s)
	}
	return sum
}

// BandVariance returns the variance of a train's velocity within a band whose
// amplitude response is h, over the undamped variance, after travelling tau [s].
func (d *Driver) BandVariance(tau float64, h func(f float64) float64) float64 {
	sum := 0.0
	for i, a := range d.amp {
		f := float64(d.first+i) * d.step
		x := a * h(f) * d.damping(f, tau)
		sum += x * x
	}
	return sum
}
