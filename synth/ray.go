package synth

import (
	"math"

	"offplane/scenarios/units"
)

// ray returns the samples of the line of sight through (y, z) [solar radii] of the
// plane of the sky, from the back to the front.
//
// The samples lie at x = R sinh(h k), k integer, R the projected distance: their
// spacing is h r, proportional to the distance r from the Sun's centre like the size
// of the cells, and the trapezoidal rule in k converges faster than any power for the
// smooth integrands of a corona (Trefethen & Weideman 2014, SIAM Review 56, 385, from
// memory). h = sight.step cells, so that neighbouring samples never miss a cell.
//
// On each side the ray ends where the rest of both lines is below sight.tail, but
// not within R of the plane (a ray over a pole meets the streamers only there), and
// at sight.reach in any case. The rest is that of a geometric series, which is what a
// power of r becomes in k.
func (c *Scene) ray(y, z float64, dst []sample) ([]sample, error) {
	dst = dst[:0]
	radius := math.Hypot(y, z)
	h := c.s.Sight.Step * c.cell
	at := func(k int) sample {
		s, ch := math.Sinh(h*float64(k)), math.Cosh(h*float64(k))
		return c.sampleAt(radius*s, radius*ch*h*units.SolarRadius, y, z)
	}
	centre := at(0)
	if c.s.Sight.Plane {
		if err := centre.lit(); err != nil {
			return dst, err
		}
		if c.as.Bright != nil {
			var err error
			if centre.dx, err = c.column(&centre, y, z); err != nil {
				return dst, err
			}
		}
		return append(dst, centre), nil
	}
	total := centre.emission()
	side := func(dir int) error {
		last := centre.emission()
		for k := 1; ; k++ {
			s := at(dir * k)
			if math.Abs(s.x) > float64(c.s.Sight.Reach) {
				return nil
			}
			e := s.emission()
			rest := 0.0
			for l := range 2 {
				ratio := e[l] / last[l]
				share := math.Inf(1)
				if ratio < 1 {
					share = e[l] * ratio / (1 - ratio) / total[l]
				}
				rest = max(rest, share)
			}
			if math.IsNaN(e[0] + e[1] + s.j[0] + s.j[1]) {
				// Beyond the atomic data: fine if what was left before it was little.
				if before := max(last[0]/total[0], last[1]/total[1]); before > c.s.Sight.Tail {
					return s.lit()
				}
				return nil
			}
			dst = append(dst, s)
			for l := range 2 {
				total[l] += e[l]
			}
			if math.Abs(s.x) > radius && rest < c.s.Sight.Tail {
				return nil
			}
			last = e
		}
	}
	if err := side(-1); err != nil {
		return dst, err
	}
	for i, j := 0, len(dst)-1; i < j; i, j = i+1, j-1 {
		dst[i], dst[j] = dst[j], dst[i]
	}
	if err := centre.lit(); err != nil {
		return dst, err
	}
	dst = append(dst, centre)
	return dst, side(+1)
}

// emission returns the radiance of the sample [erg cm^-2 s^-1 sr^-1] in both lines,
// without strands: where the ray ends is no matter of chance.
func (s *sample) emission() [2]float64 { return [2]float64{s.smooth[0] * s.dx, s.smooth[1] * s.dx} }

// lit returns an error if the atomic data do not cover the sample.
func (s *sample) lit() error {
	if math.IsNaN(s.j[0] + s.j[1] + s.smooth[0] + s.smooth[1]) {
		return &darkError{s.point.N, s.point.T, s.point.R}
	}
	return nil
}
