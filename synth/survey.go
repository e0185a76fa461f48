package synth

import (
	"context"
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios/units"
	"offplane/synth/parallel"
)

// A Survey is the corona at a glance: what a figure of the truth shows.
type Survey struct {
	// Plane of the sky: a square raster of Side x Side points, west fastest, from -Half
	// to Half solar radii both ways.
	Side      int
	Half      float64
	Density   []float32 // electron density at x = 0 [cm^-3]; NaN on the disc
	Structure []int32   // class at x = 0, see package model; 0 on the disc
	// Lines are field lines in the observer's frame [solar radii], in order along the
	// field: through points around the limb in the plane of the sky, and through
	// points all over the Sun and around active regions.
	Lines []SurveyLine
	// HighBeta is the share of the field of view's emission in the 1074.7 nm line from
	// where the gas pressure exceeds the magnetic one. There the kink speed of low beta
	// does not hold.
	HighBeta float64
	Inner    float64 // field of view [solar radii]
	Outer    float64
	From, To float64 // its position angles [rad]
}

// A SurveyLine is one field line.
type SurveyLine struct {
	Points []r3.Vec // x toward the observer
	Closed bool
	Sky    bool // through the plane of the sky
}

// Survey looks at the corona without waves or camera.
func (c *Scene) Survey(ctx context.Context, workers int) (*Survey, error) {
	m := &c.s.Image
	v := &Survey{Side: 201, Half: 1.15 * float64(m.Outer), Inner: float64(m.Inner), Outer: float64(m.Outer), From: m.From.Rad(), To: m.To.Rad()}
	v.Density = make([]float32, v.Side*v.Side)
	v.Structure = make([]int32, v.Side*v.Side)
	err := parallel.For(ctx, v.Side, workers, func(_, j int) error {
		for i := range v.Side {
			y, z := v.at(i), v.at(j)
			n := j*v.Side + i
			v.Density[n] = float32(math.NaN())
			if math.Hypot(y, z) < 1 {
				continue
			}
			q := c.Corona.At(c.view.ToSun(r3.Vec{Y: y, Z: z}))
			v.Density[n] = float32(q.Mean)
			v.Structure[n] = q.Structure()
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	// Every 5 degrees just above the limb; and a golden-angle spiral over the Sun.
	var seeds []r3.Vec
	const sky = 72
	for i := range sky {
		s, co := math.Sincos(2 * math.Pi * float64(i) / sky)
		seeds = append(seeds, r3.Vec{Y: -1.02 * s, Z: 1.02 * co})
	}
	const all = 150
	for i := range all {
		z := 1 - (2*float64(i)+1)/all
		s, co := math.Sincos(float64(i) * math.Pi * (3 - math.Sqrt(5)))
		rho := 1.01 * math.Sqrt(1-z*z)
		seeds = append(seeds, r3.Vec{X: rho * co, Y: rho * s, Z: 1.01 * z})
	}
	// And a ring around every buried dipole, as wide as it is deep.
	for _, f := range c.s.Corona.Fields {
		d := f.BuriedDipole
		if d == nil || c.s.Corona.Grid != nil {
			continue
		}
		sl, cl := math.Sincos(d.Latitude.Rad())
		so, co := math.Sincos(d.Longitude.Rad())
		up := r3.Vec{X: cl * co, Y: cl * so, Z: sl}
		west := r3.Vec{X: -so, Y: co}
		north := r3.Cross(up, west)
		for i := range 12 {
			s, co := math.Sincos(2 * math.Pi * float64(i) / 12)
			p := r3.Add(up, r3.Scale(d.Depth.Rsun(), r3.Add(r3.Scale(co, west), r3.Scale(s, north))))
			seeds = append(seeds, c.view.ToSky(r3.Scale(1.02, r3.Unit(p))))
		}
	}
	v.Lines = make([]SurveyLine, len(seeds))
	err = parallel.For(ctx, len(seeds), workers, func(_, i int) error {
		l := &v.Lines[i]
		p := c.view.ToSun(seeds[i])
		for _, q := range c.Corona.Trace(p) {
			l.Points = append(l.Points, c.view.ToSky(q))
		}
		l.Closed = c.Corona.At(p).Line.Closed
		l.Sky = i < sky
		return nil
	})
	if err != nil {
		return nil, err
	}
	// A few hundred rays are enough for a share.
	field := Field(&c.Grid, c.s)
	every := max(1, len(field)/300)
	rays := (len(field) + every - 1) / every
	high, total := make([]float64, rays), make([]float64, rays)
	err = parallel.For(ctx, rays, workers, func(_, n int) error {
		p := int(field[n*every])
		y, z := c.Grid.Sky(p%c.Grid.Nx, p/c.Grid.Nx)
		ray, err := c.ray(y, z, nil)
		if err != nil {
			return err
		}
		for i := range ray {
			e := ray[i].j[0] * ray[i].dx / units.SolarRadius
			total[n] += e
			if ray[i].point.Beta > 1 {
				high[n] += e
			}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	a, b := 0.0, 0.0
	for n := range rays {
		a += high[n]
		b += total[n]
	}
	if b > 0 {
		v.HighBeta = a / b
	}
	return v, nil
}

// at returns the coordinate of column or row i [solar radii].
func (v *Survey) at(i int) float64 { return v.Half * (2*float64(i)/float64(v.Side-1) - 1) }
