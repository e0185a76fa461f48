package synth

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"offplane/synth/camera"
	"offplane/synth/filter"
	"offplane/synth/obs"
)

// A Budget says what the light of a scenario gives the camera.
type Budget struct {
	Rows   []BudgetRow
	Pixels int    // of the field of view
	Frames [2]int // of each line
	Bytes  int64  // of all frames as they go to the file
}

// A BudgetRow is one line of sight through a corona without waves.
type BudgetRow struct {
	Height  float64 // projected [solar radii]
	PA      float64 // position angle [deg]
	Open    float64 // share of the aperture past occulter and field stop
	Samples int     // along the line of sight
	Lines   [2]LineBudget
}

// A LineBudget is the light of one line in one pixel, per tuning in order of wavelength.
// The light is that at the pixel's centre: neither spread nor scattered.
type LineBudget struct {
	Peak      float64   // of the profile before the filter [millionths of the disc-centre continuum]
	Radiance  []float64 // through the filter [erg cm^-2 s^-1 sr^-1]
	Electrons []float64 // of the line, in one exposure
	Continuum float64   // electrons of the background in one exposure
	SNR       []float64 // of one exposure with its background subtracted
	Noise     float64   // rms of the Doppler velocity of one frame [km/s]
	InBand    float64   // rms of it in the inversion's band [km/s]
	Saturated bool
}

// Budget computes the budget at projected heights [solar radii], at the position angle
// of the field that is nearest to the west limb's, else the east limb's, else in its
// middle. The Doppler noise is the first-order propagation through the logarithmic
// parabola of Tian et al. 2013, Sol. Phys. 288, 637, whether or not noise is on; in the
// band of amplitude response h remains sqrt(2 dt B) of it, B the integral of h^2.
func (c *Scene) Budget(radii []float64) (*Budget, error) {
	cam := c.camera()
	plan := camera.NewSchedule(c.s.Camera, Frames(c.s), c.s.Seed)
	b := &Budget{Pixels: len(Field(&c.Grid, c.s)), Frames: [2]int{len(plan.Lost[0]), len(plan.Lost[1])}}
	b.Bytes = 4 * int64(c.Grid.Nx) * int64(c.Grid.Ny) * int64(len(c.s.Camera.Tunings)) * int64(b.Frames[0]+b.Frames[1])
	from, to := float64(c.s.Image.From), float64(c.s.Image.To)
	pa := (from + to) / 2
	for _, limb := range []float64{90, 270} {
		if math.Mod(math.Mod(limb-from, 360)+360, 360) <= to-from {
			pa = limb
		}
	}
	sin, cos := math.Sincos(pa * math.Pi / 180)
	var ray []sample
	for _, r := range radii {
		var err error
		if ray, err = c.ray(-r*sin, r*cos, ray); err != nil {
			return nil, err
		}
		row := BudgetRow{Height: r, PA: pa, Samples: len(ray), Open: cam.Open(r, obs.Arcsec*c.Grid.Distance)}
		for l := range 2 {
			row.Lines[l] = c.lineBudget(cam, ray, l, cam.Spot(l, 0, 0, r, obs.Arcsec*c.Grid.Distance))
		}
		b.Rows = append(b.Rows, row)
	}
	return b, nil
}

func (c *Scene) lineBudget(cam *camera.Camera, ray []sample, l int, spot camera.Spot) LineBudget {
	x := c.tunings[l]
	b := LineBudget{Radiance: make([]float64, len(x))}
	pass := c.passing(l)
	toAngstrom := c.light.Rest[l] * 10 / lightSpeed
	for i := range ray {
		s := &ray[i]
		energy := s.j[l] * s.dx
		width := c.broadened(s)
		b.Peak += energy / (math.Sqrt(math.Pi) * width * toAngstrom) / c.light.Disc[l] * 1e6
		for k, d := range x {
			b.Radiance[k] += energy * pass(d-s.flow, width)
		}
	}
	e := cam.Electrons[l] * spot.Open
	b.Continuum = e * spot.Background
	sigma := make([]float64, len(x))
	for k, i := range b.Radiance {
		b.Electrons = append(b.Electrons, e*i)
		sigma[k] = cam.SigmaAt(spot, i) / i
		b.SNR = append(b.SNR, 1/sigma[k])
		b.Saturated = b.Saturated || cam.Saturated(spot, i)
	}
	b.Noise = dopplerNoise(x, b.Radiance, sigma)
	f := c.s.Inversion.Filter
	band := f.Width.Hz() * math.Sqrt(math.Pi/2)
	if f.Means == "sigma" {
		band = f.Width.Hz() * math.Sqrt(math.Pi)
	}
	b.InBand = b.Noise * math.Sqrt(2*float64(c.s.Camera.Cadence)*band)
	return b
}

// broadened returns the 1/e half-width of a sample's line [km/s] in the mean over many
// periods of its waves: w^2 = w0^2 + 2 <v^2>.
func (c *Scene) broadened(s *sample) float64 {
	v2 := 0.0
	for _, t := range c.trains(&s.point, nil) {
		v2 += t.factor * t.factor * c.Driver.BandVariance(t.tau, func(float64) float64 { return 1 })
	}
	return math.Sqrt(s.width*s.width + 2*v2*(s.los[0]*s.los[0]+s.los[1]*s.los[1]))
}

// passing returns the part of a resting line of unit energy and given width that passes
// the filter tuned to d [km/s].
func (c *Scene) passing(l int) func(d, w float64) float64 {
	fwhm := float64(c.s.Camera.Filter) * lightSpeed / c.light.Rest[l]
	if n := c.s.Camera.Stages; n > 0 {
		f := filter.NewBirefringent(n, fwhm)
		return func(d, w float64) float64 { return f.Line(d, 0, w) }
	}
	wf := filter.EFolding(fwhm)
	return func(d, w float64) float64 { return filter.Gaussian(d, 0, w, wf) }
}

// dopplerNoise returns the rms error of the centre of the parabola a + b x + c x^2
// through the logarithms of intensities with relative errors sigma, in the unit of x.
func dopplerNoise(x, intensity, sigma []float64) float64 {
	n := len(x)
	v := mat.NewDense(n, 3, nil)
	for i, x := range x {
		v.SetRow(i, []float64{1, x, x * x})
	}
	var normal, inverse, solve mat.Dense
	normal.Mul(v.T(), v)
	if err := inverse.Inverse(&normal); err != nil {
		return math.NaN()
	}
	solve.Mul(&inverse, v.T())
	var b, c float64
	for k, i := range intensity {
		b += solve.At(1, k) * math.Log(i)
		c += solve.At(2, k) * math.Log(i)
	}
	sum := 0.0
	for k, s := range sigma {
		d := -solve.At(1, k)/(2*c) + b*solve.At(2, k)/(2*c*c)
		sum += d * d * s * s
	}
	return math.Sqrt(sum)
}
