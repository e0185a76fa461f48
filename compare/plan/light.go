package plan

import (
	"context"
	"math"

	"gonum.org/v1/gonum/mat"

	"offplane/scenarios"
	"offplane/synth/line"
)

// A shine is what photons and reads make of one frame of either line at one height.
type shine struct {
	doppler float64    // rms of the Doppler shift of one frame [km/s]
	energy  [2]float64 // relative rms of the line energy of one frame
	slope   float64    // |d ln n / d ln ratio|
	full    bool       // saturated
}

// shine returns the light of a scenario at some heights. Duration and number of frames
// do not matter to it.
func (p *predictor) shine(ctx context.Context, s scenarios.Scenario, radii []float64) ([]shine, error) {
	s.Camera.Duration = max(3600, 20*s.Camera.Cadence) // short: the driver is not needed
	s.Camera.SecondLine, s.Camera.Gaps = 1, nil
	c, k, err := p.scene(ctx, &s)
	if err != nil {
		return nil, err
	}
	b, err := c.Budget(radii)
	if err != nil {
		return nil, err
	}
	x := make([]float64, len(s.Camera.Tunings))
	for i, t := range s.Camera.Tunings {
		x[i] = float64(t)
	}
	v := s.Inversion
	out := make([]shine, len(radii))
	for i, row := range b.Rows {
		o := &out[i]
		o.doppler = row.Lines[0].Noise
		var energy [2]float64
		for l, q := range row.Lines {
			o.full = o.full || q.Saturated
			energy[l], o.energy[l] = parabola(x, q.Radiance, q.SNR)
		}
		// The inversion's density of what the lines shine without noise.
		if _, slope, err := line.Density(k.atom, energy[1]/energy[0], v.Temperature.Kelvin(), radii[i]); err == nil {
			o.slope = math.Abs(slope)
		} else {
			o.slope = math.NaN()
		}
	}
	return out, nil
}

// parabola returns the energy under the Gaussian whose logarithm is the parabola through
// the logarithms of the intensities, in the units of both, and its relative rms for
// signal-to-noise ratios snr (Tian et al. 2013, Sol. Phys. 288, 637, for three
// intensities; first-order propagation, derived).
func parabola(x, intensity, snr []float64) (energy, relative float64) {
	solve := throughLogs(x)
	if solve == nil {
		return math.NaN(), math.NaN()
	}
	y := mat.NewVecDense(len(x), nil)
	for i := range x {
		y.SetVec(i, math.Log(intensity[i]))
	}
	var p mat.VecDense
	p.MulVec(solve, y)
	a, b, c := p.AtVec(0), p.AtVec(1), p.AtVec(2)
	// ln E = a - b^2/(4 c) + 1/2 ln(pi/-c)
	sum := 0.0
	for k := range x {
		d := solve.At(0, k) - b/(2*c)*solve.At(1, k) + (b*b/(4*c*c)-1/(2*c))*solve.At(2, k)
		sum += d * d / (snr[k] * snr[k])
	}
	return math.Exp(a-b*b/(4*c)) * math.Sqrt(math.Pi/-c), math.Sqrt(sum)
}

// throughLogs returns what turns values at x into the coefficients a, b, c of the
// least-squares parabola a + b x + c x^2; nil if x does not determine one.
func throughLogs(x []float64) *mat.Dense {
	v := mat.NewDense(len(x), 3, nil)
	for i, x := range x {
		v.SetRow(i, []float64{1, x, x * x})
	}
	var normal, inverse, solve mat.Dense
	normal.Mul(v.T(), v)
	if err := inverse.Inverse(&normal); err != nil {
		return nil
	}
	solve.Mul(&inverse, v.T())
	return &solve
}
