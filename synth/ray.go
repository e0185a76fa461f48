package synth

import (
	"math"

	"offplane/scenarios/units"
)

// ray returns the samples of the line of sight through (y, z) [solar radii] of the
// plane of the sky, from the back to the front.
//
// The samples lie at x = R sinh u, R the projected distance, so that equal steps of u
// are proportional to the distance r from the Sun's centre like the size of the cells.
// The step is sight.step cells where the ray shines, so that neighbouring samples never
// miss a cell, and up to sparse times that where it is dark (see stride): a sample's
// share in the power of the Doppler signal goes with the square of its light.
//
// On each side the ray ends where the rest of both lines is below sight.tail, but
// not within R of the plane (a ray over a pole meets the streamers only there), and
// at sight.reach in any case. The rest is that of an exponential in u, which is what a
// power of r becomes.
func (c *Scene) ray(y, z float64, dst []sample) ([]sample, error) {
	dst = dst[:0]
	radius := math.Hypot(y, z)
	h := c.s.Sight.Step * c.cell
	// at appends the sample at u, whose dx is u for now.
	at := func(u float64) *sample {
		dst = append(dst, sample{})
		s := &dst[len(dst)-1]
		c.sampleAt(s, radius*math.Sinh(u), u, y, z)
		return s
	}
	centre := *at(0)
	dst = dst[:0]
	if c.s.Sight.Plane {
		if err := centre.lit(); err != nil {
			return dst, err
		}
		centre.dx = radius * h * units.SolarRadius
		if c.as.Bright != nil {
			var err error
			if centre.dx, err = c.column(&centre, y, z); err != nil {
				return dst, err
			}
		}
		return append(dst, centre), nil
	}
	var total [2]float64
	add := func(e [2]float64, du float64) {
		for l := range 2 {
			total[l] += e[l] * du
		}
	}
	add(centre.emission(radius), h)
	side := func(dir float64) error {
		u, last, du := 0.0, centre.emission(radius), h
		peak := last
		for {
			s := at(dir * (u + du))
			e := s.emission(radius)
			next := h * stride(e, peak)
			for du > h && next < du/2 { // light that comes up ahead is not stepped over
				dst = dst[:len(dst)-1]
				du = max(h, du/2)
				s = at(dir * (u + du))
				e = s.emission(radius)
				next = h * stride(e, peak)
			}
			if math.Abs(s.x) > float64(c.s.Sight.Reach) {
				dst = dst[:len(dst)-1]
				return nil
			}
			if math.IsNaN(e[0] + e[1] + s.j[0] + s.j[1]) {
				// Beyond the atomic data: fine if what was left before it was little.
				var err error
				if before := h * max(last[0]/total[0], last[1]/total[1]); before > c.s.Sight.Tail {
					err = s.lit()
				}
				dst = dst[:len(dst)-1]
				return err
			}
			add(e, du)
			if math.Abs(s.x) > radius && max(rest(last[0], e[0], du)/total[0], rest(last[1], e[1], du)/total[1]) < c.s.Sight.Tail {
				return nil
			}
			for l := range 2 {
				peak[l] = max(peak[l], e[l])
			}
			u, last, du = u+du, e, next
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
	if err := side(+1); err != nil {
		return dst, err
	}
	weigh(dst, radius, h)
	return dst, nil
}

// rest returns the integral of what goes on as an exponential from a to b over a step du.
func rest(a, b, du float64) float64 {
	if fall := math.Log(a / b); fall > 0 {
		return b * du / fall
	}
	return math.Inf(1)
}

// sparse bounds how much longer than sight.step the steps of a ray become.
const sparse = 4

// stride returns the step at a sample with emission e, over the shortest: the cube root
// of the brightness of the brightest sample so far over its own. In quiet-belt that takes
// 40 % fewer samples than even steps do. The Doppler rms of its ring, by height, is 0.3 to
// 0.6 % above that of steps of a third of a cell at sight.step 1.25 (0.1 to 0.5 % at 1,
// 1.0 to 1.6 % at 1.5; even steps of one cell: 0 to 0.4 %).
func stride(e, peak [2]float64) float64 {
	q := max(e[0]/peak[0], e[1]/peak[1])
	if !(q < 1) {
		return 1
	}
	return min(1/math.Cbrt(q), sparse)
}

// weigh turns the place u of each sample into its share of the ray [cm]: the trapezoidal
// rule, and at each change of the step the first term of Euler and Maclaurin that no
// longer cancels, step^2/12 times the slope, from the neighbours (derived). Beyond the
// ends the steps go on as they were; that of a lone sample is h.
func weigh(ray []sample, radius, h float64) {
	n := len(ray)
	step := func(i int) float64 { return ray[i+1].dx - ray[i].dx }
	first, last := h, h
	if n > 1 {
		first, last = step(0), step(n-2)
	}
	a, b := first, first // the two steps before a sample
	for i := range ray {
		c, d := last, last // and the two after it
		if i < n-1 {
			c = step(i)
		}
		if i < n-2 {
			d = step(i + 1)
		}
		ray[i].dx = ((b+c)/2 + (b-a)/12 - (d-c)/12) * math.Hypot(radius, ray[i].x) * units.SolarRadius
		a, b = b, c
	}
}

// emission returns the radiance per unit of u of a ray at a projected distance [erg cm^-2 s^-1 sr^-1] in both lines,
// without strands: where the ray steps and ends is no matter of chance.
func (s *sample) emission(radius float64) [2]float64 {
	dx := math.Hypot(radius, s.x) * units.SolarRadius
	return [2]float64{s.smooth[0] * dx, s.smooth[1] * dx}
}

// lit returns an error if the atomic data do not cover the sample.
func (s *sample) lit() error {
	if math.IsNaN(s.j[0] + s.j[1] + s.smooth[0] + s.smooth[1]) {
		return &darkError{s.point.N, s.point.T, s.point.R}
	}
	return nil
}
