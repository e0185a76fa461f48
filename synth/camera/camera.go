// Package camera turns radiance into the frames that an instrument would write. It
// knows an instrument by its physical parameters only.
package camera

import (
	"math"

	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth/filter"
	"offplane/synth/random"
)

// A Camera applies the point spread and the noise. Radiance is in erg cm^-2 s^-1
// sr^-1 through the filter; line 0 is 1074.7 nm, line 1 is 1079.8 nm.
type Camera struct {
	// Spread holds the one-dimensional weights of the point spread over pixels,
	// odd in number and symmetric; the spread is their outer product.
	Spread []float64
	// Electrons per unit radiance in one pixel and tuning.
	Electrons [2]float64
	// Background is the continuum behind a tuning. The frames come without it: it is
	// measured beside the line for as long and subtracted, so that its photon noise
	// counts twice.
	Background [2]float64
	ReadNoise  float64 // electrons rms of a tuning and its background, co-adds included
	noise      bool
	seed       uint64
}

// New builds the camera. Pixel is the pitch [rad], disc the radiance of the
// disc-centre continuum [erg cm^-2 s^-1 sr^-1 A^-1] and rest the wavelength [nm] at
// the two lines.
func New(c scenarios.Camera, seed uint64, pixel float64, disc, rest [2]float64) *Camera {
	k := &Camera{
		Spread:    gaussianSpread(c.PointSpread.Rad(), pixel),
		ReadNoise: c.ReadNoise * math.Sqrt(2*float64(c.Coadds)),
		noise:     c.Noise,
		seed:      seed,
	}
	area := math.Pi / 4 * float64(c.Aperture) * float64(c.Aperture) // [cm^2]
	// Equivalent width of the Gaussian transmission: sqrt(pi) times its 1/e half-width.
	width := math.Sqrt(math.Pi) * filter.EFolding(float64(c.Filter)) * 10 // [A]
	for l := range 2 {
		photon := units.Planck * units.LightSpeed / (rest[l] * 1e-7)
		k.Electrons[l] = area * pixel * pixel / photon * c.Throughput * float64(c.Exposure)
		k.Background[l] = c.Background.Fraction() * disc[l] * width
	}
	return k
}

// gaussianSpread returns the share of a Gaussian of the given full width at half
// maximum [rad] that falls into each pixel of a row, cut where less than 1e-4 lies
// beyond and scaled to conserve light.
func gaussianSpread(fwhm, pixel float64) []float64 {
	if fwhm == 0 {
		return []float64{1}
	}
	s := fwhm / (2 * math.Sqrt(2*math.Ln2)) * math.Sqrt2 / pixel
	within := func(i float64) float64 { return (math.Erf((i+0.5)/s) - math.Erf((i-0.5)/s)) / 2 }
	half := 0
	for math.Erfc((float64(half)+0.5)/s) > 1e-4 {
		half++
	}
	w := make([]float64, 2*half+1)
	sum := 0.0
	for i := range w {
		w[i] = within(float64(i - half))
		sum += w[i]
	}
	for i := range w {
		w[i] /= sum
	}
	return w
}

// Expose adds photon and read noise to the series of one pixel (raster index) at one
// tuning; frame number of element t is frames[t], or t if frames is nil. Noise is
// addressed by (seed, line, pixel, tuning, frame).
func (c *Camera) Expose(series []float32, line int, pixel int32, tuning int, frames []int) {
	if !c.noise {
		return
	}
	key := random.NewKey(c.seed, 0x6e6f697365, uint64(line), uint64(pixel), uint64(tuning)) // "noise"
	for t, x := range series {
		frame := t
		if frames != nil {
			frame = frames[t]
		}
		series[t] = float32(float64(x) + c.Sigma(line, float64(x))*key.Normal(uint64(frame)))
	}
}

// Sigma returns the rms noise of one background-subtracted exposure of the given
// radiance: photons of the line once and of the background twice, in the limit of
// many photons (the background alone gives thousands), and the reads.
func (c *Camera) Sigma(line int, radiance float64) float64 {
	e := c.Electrons[line]
	return math.Sqrt(e*(max(radiance, 0)+2*c.Background[line])+c.ReadNoise*c.ReadNoise) / e
}
