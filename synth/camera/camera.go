// Package camera turns radiance into the frames that an instrument would write. It
// knows an instrument by its physical parameters only. Each stage is off at zero, and
// with all of them off the frames are the radiance.
//
// In their order: scattered light (Scatter), point spread (Kernel), pointing (Move),
// brightening (Gain), occulter and field stop (Open), continuum (Continuum), photons
// and detector (Expose), lost frames (Schedule).
package camera

import (
	"math"

	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth/filter"
)

// A Camera holds the stages. Radiance is in erg cm^-2 s^-1 sr^-1 through the filter;
// line 0 is 1074.7 nm, line 1 is 1079.8 nm.
type Camera struct {
	Spread [2]Kernel // point spread at either line
	// Electrons per unit radiance in one pixel and tuning.
	Electrons [2]float64
	// Background is the continuum of sky and instrument behind a tuning. The frames come
	// without it: it is measured beside the line for as long and subtracted, so that its
	// photon noise counts twice.
	Background [2]float64
	ReadNoise  float64 // electrons rms of a tuning and its background, co-adds and digits included

	millionth [2]float64 // of the disc-centre continuum, through the filter
	k         float64    // of the K corona
	occulter  *scenarios.Occulter
	stop      float64 // radius of the field stop [solar radii]; 0: none
	pointing  *pointing
	cadence   float64 // [s]
	rate      float64 // of the brightening [1/s]
	coadds    float64
	fullWell  float64
	digit     float64
	flat      float64
	noise     bool
	seed      uint64
}

// New builds the camera. Pixel is the pitch [rad], disc the radiance of the
// disc-centre continuum [erg cm^-2 s^-1 sr^-1 A^-1] and rest the wavelength [nm] at
// the two lines.
func New(c scenarios.Camera, seed uint64, pixel float64, disc, rest [2]float64) *Camera {
	k := &Camera{
		ReadNoise: math.Hypot(c.ReadNoise, c.Digit/math.Sqrt(12)) * math.Sqrt(2*float64(c.Coadds)),
		k:         c.KCorona,
		occulter:  c.Occulter,
		stop:      float64(c.FieldStop),
		pointing:  newPointing(c, pixel, seed),
		cadence:   float64(c.Cadence),
		rate:      c.Brightening / 3600,
		coadds:    float64(c.Coadds),
		fullWell:  c.FullWell,
		digit:     c.Digit,
		flat:      c.FlatField,
		noise:     c.Noise,
		seed:      seed,
	}
	area := math.Pi / 4 * float64(c.Aperture) * float64(c.Aperture) // [cm^2]
	width := filter.EquivalentWidth(c.Stages, float64(c.Filter)) * 10
	for l := range 2 {
		photon := units.Planck * units.LightSpeed / (rest[l] * 1e-7)
		k.Electrons[l] = area * pixel * pixel / photon * c.Throughput * float64(c.Exposure)
		k.millionth[l] = disc[l] * width * 1e-6
		k.Background[l] = c.Background.Fraction() * disc[l] * width
		k.Spread[l] = newKernel(c, pixel, rest[l])
	}
	return k
}

// Sigma returns the rms noise of one background-subtracted exposure of the given
// radiance where the aperture is open and without the K corona: photons of the line
// once and of the background twice, in the limit of many photons, and the reads.
func (c *Camera) Sigma(line int, radiance float64) float64 {
	return c.sigma(c.Electrons[line], radiance, c.Background[line])
}

// SigmaAt returns it at a spot.
func (c *Camera) SigmaAt(s Spot, radiance float64) float64 {
	return c.sigma(c.Electrons[s.Line]*s.Open, radiance, s.Background)
}

// Saturated tells whether a spot of the given radiance fills the well.
func (c *Camera) Saturated(s Spot, radiance float64) bool {
	return c.fullWell > 0 && c.Electrons[s.Line]*s.Open*(radiance+s.Background) > c.fullWell*c.coadds
}

// Spot returns what a pixel sees that lies r solar radii from the disc centre, where an
// arc second is so many solar radii.
func (c *Camera) Spot(line int, pixel int32, tuning int, r, arcsec float64) Spot {
	return Spot{line, pixel, tuning, c.Open(r, arcsec), c.Continuum(line, r)}
}

// Continuum returns the continuum behind a tuning at r solar radii: sky, instrument
// and the K corona, 1.425 r^-7 + 2.565 r^-17 millionths (Baumbach 1937, AN 263, 121).
func (c *Camera) Continuum(line int, r float64) float64 {
	b := c.Background[line]
	if c.k > 0 {
		b += c.k * (1.425*math.Pow(r, -7) + 2.565*math.Pow(r, -17)) * c.millionth[line]
	}
	return b
}

// LeastOpen is the share of the aperture below which a pixel is occulted: its frames
// are not used.
const LeastOpen = 0.05

// Open returns the share of the aperture that a pixel at r solar radii sees past the
// occulter, 0 outside the field stop: a straight edge across a round aperture
// (derived). Calibrated frames are divided by it.
func (c *Camera) Open(r, arcsec float64) float64 {
	if c.stop > 0 && r > c.stop {
		return 0
	}
	o := c.occulter
	if o == nil {
		return 1
	}
	u := 2 * (r - float64(o.Radius)) / (float64(o.Width) * arcsec)
	switch {
	case !(u > -1):
		return 0
	case u >= 1:
		return 1
	}
	return 0.5 + (u*math.Sqrt(1-u*u)+math.Asin(u))/math.Pi
}

// Gain returns the transmission of the sky over that at the start [s].
func (c *Camera) Gain(time float64) float64 { return math.Exp(c.rate * time) }
