package camera

import (
	"math"

	"offplane/synth/random"
)

// manyPhotons is the number of electrons from which on they count as Gaussian: the
// skewness is then below 0.01.
const manyPhotons = 1e4

// A Spot is one pixel at one tuning of one line.
type Spot struct {
	Line       int     // 0 or 1
	Pixel      int32   // raster index
	Tuning     int     // index in order of wavelength
	Open       float64 // share of the aperture that it sees
	Background float64 // continuum [radiance]
}

// Expose turns the radiance of a spot, frame by frame, into what the detector makes of
// it: photons, gain, reads, digits, scaled back to radiance with the background
// subtracted. The background is another exposure, as long, beside the line. A
// saturated frame is NaN. Noise is addressed by (seed, line, pixel, tuning, frame),
// the gain by (seed, line, pixel, tuning).
//
// As long as nothing but noise is on and photons are many, the two exposures' noise is
// drawn at once from one Gaussian.
func (c *Camera) Expose(series []float32, s Spot) {
	if !c.noise && c.fullWell == 0 && c.digit == 0 && c.flat == 0 {
		return
	}
	address := []uint64{c.seed, 0x6e6f697365, uint64(s.Line), uint64(s.Pixel), uint64(s.Tuning)} // "noise"
	key := random.NewKey(address...)
	e := c.Electrons[s.Line] * s.Open
	if c.fullWell == 0 && c.digit == 0 && c.flat == 0 && e*s.Background >= manyPhotons {
		for t, x := range series {
			series[t] = float32(float64(x) + c.sigma(e, float64(x), s.Background)*key.Normal(uint64(t)))
		}
		return
	}
	flat := random.NewKey(c.seed, 0x666c6174, uint64(s.Line), uint64(s.Pixel), uint64(s.Tuning)) // "flat"
	gain := [2]float64{1 + c.flat*flat.Normal(0), 1 + c.flat*flat.Normal(1)}
	photons := [2]random.Key{random.NewKey(append(address, 1)...), random.NewKey(append(address, 2)...)}
	reads := [2]random.Key{random.NewKey(append(address, 3)...), random.NewKey(append(address, 4)...)}
	for t, x := range series {
		var counts [2]float64
		for i, light := range [2]float64{max(float64(x), 0) + s.Background, s.Background} {
			n := light * e
			if c.noise {
				n = photons[i].Poisson(uint64(t), n)
			}
			n *= gain[i]
			if c.fullWell > 0 && n > c.fullWell*c.coadds {
				n = math.NaN()
			}
			switch {
			case !c.noise && c.digit > 0: // every co-add is the same
				n = c.coadds * c.digit * math.Round(n/(c.coadds*c.digit))
			case c.noise:
				// Each co-add is rounded to a digit: the last sum is, and the others' errors add
				// like the uniform numbers they are once the noise is more than half a digit.
				n += math.Sqrt(c.ReadNoise*c.ReadNoise/2-c.digit*c.digit/12) * reads[i].Normal(uint64(t))
				if c.digit > 0 {
					n = c.digit * math.Round(n/c.digit)
				}
			}
			counts[i] = n
		}
		series[t] = float32((counts[0] - counts[1]) / e)
	}
}

// sigma is Sigma at e electrons per radiance and any background.
func (c *Camera) sigma(e, radiance, background float64) float64 {
	return math.Sqrt(e*(max(radiance, 0)+2*background)+c.ReadNoise*c.ReadNoise) / e
}
