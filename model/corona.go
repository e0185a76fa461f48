// Package model is the TRUTH: an analytic three-dimensional corona whose field,
// density and temperature are known at every point, and whose field lines tell
// the waves where they were launched and how long they have travelled.
//
// Positions here are in the solar frame, in solar radii: z along the rotation
// axis, x and y in the equator; View turns the observer's frame (package obs) into
// it. Everything else is cgs-Gaussian.
package model

import (
	"context"
	"errors"
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios"
	"offplane/scenarios/units"
)

// Mu returns rho/(m_p n_e) of a fully ionised gas with He/H = helium by number.
func Mu(helium float64) float64 { return (1 + 4*helium) / (1 + 2*helium) }

// KinkSpeed returns the kink speed [cm/s] of a tube in a field b [G] whose mean
// density inside and outside is that of n electrons per cm^3: B/sqrt(4 pi <rho>)
// (Nakariakov & Verwichte 2005, Living Rev. Sol. Phys. 2, 3, sect. 3.3, for equal
// fields inside and outside, i.e. low beta).
func KinkSpeed(b, n, mu float64) float64 {
	return b / math.Sqrt(4*math.Pi*mu*units.ProtonMass*n)
}

// A Corona is an axisymmetric analytic corona. It is safe for concurrent use.
type Corona struct {
	field          fieldSum
	streamer, hole Law
	tStreamer      float64 // [K]
	tHole          float64
	edge, edgeHalf float64 // footpoint latitude of the streamer's edge and its half-width [rad]
	closedBelow    float64 // [solar radii]
	mu             float64
	lines          *lineTable
}

// A Point is the corona at one position.
type Point struct {
	R     float64 // distance from the Sun's centre [solar radii]
	N     float64 // electron density [cm^-3]
	Kink  float64 // electron density that the kink wave feels [cm^-3]
	T     float64 // [K]
	B     r3.Vec  // [G], solar frame
	Speed float64 // kink speed [cm/s]
	Beta  float64 // gas over magnetic pressure
	// Streamer is the share of the streamer law in the (logarithmic) blend.
	Streamer float64
	Line     Line
}

// Structure classes of a point.
const (
	Closed       = 1
	Open         = 2
	Sheet        = 3 // open, but in the streamer's density: around the current sheet
	ActiveRegion = 4
)

// Structure returns the class of the point's surroundings.
func (p *Point) Structure() int32 {
	switch {
	case p.Line.Closed:
		return Closed
	case p.Streamer > 0.5:
		return Sheet
	}
	return Open
}

// Settings are what the corona needs to know beyond its own description.
type Settings struct {
	Outer      float64 // farthest distance at which it will be asked [solar radii]
	InwardFrom float64 // where inward trains are launched on open lines [solar radii]
	Workers    int     // of the tracing of field lines; < 1: every core
}

// New builds the corona and traces its field lines.
func New(ctx context.Context, c scenarios.Corona, s Settings) (*Corona, error) {
	k := &Corona{
		mu:          Mu(c.Helium),
		tStreamer:   c.Temperature.Streamer.Kelvin(),
		tHole:       c.Temperature.Hole.Kelvin(),
		closedBelow: float64(c.ClosedBelow),
		edgeHalf:    c.Density.Boundary.Rad(),
	}
	for _, f := range c.Fields {
		switch {
		case f.DipoleSheet != nil:
			k.field = append(k.field, DipoleSheet{float64(f.DipoleSheet.Strength), float64(f.DipoleSheet.Sheet), f.DipoleSheet.Octupole})
		case f.Radial != nil:
			k.field = append(k.field, RadialField{float64(f.Radial.Strength), f.Radial.Exponent})
		}
	}
	if len(k.field) == 0 {
		return nil, errors.New("corona.fields: at least one field is needed")
	}
	var err error
	if k.streamer, err = NewLaw(c.Density.Streamer, c.Helium); err != nil {
		return nil, err
	}
	if c.Density.Hole != nil {
		if k.hole, err = NewLaw(*c.Density.Hole, c.Helium); err != nil {
			return nil, err
		}
		k.edge = k.streamerEdge()
	}
	k.lines, err = k.traceAll(ctx, s)
	return k, err
}

// streamerEdge returns the latitude [rad] of the footpoint of the highest line that
// still counts as closed: the poleward edge of the closed region at the surface.
// Found from the pole downward, so that inner arcades do not matter.
func (c *Corona) streamerEdge() float64 {
	closes := func(lat float64) bool {
		l := c.trace(1, math.Pi/2-lat, c.closedBelow)
		return l.closes && l.apex <= c.closedBelow
	}
	const step = 0.5 * math.Pi / 180
	hi := math.Pi / 2
	for hi > 0 && !closes(hi) {
		hi -= step
	}
	if hi <= 0 {
		return 0 // nothing closes: the whole corona is hole but for the sheet
	}
	lo := hi
	hi += step
	for range 40 {
		if m := (lo + hi) / 2; closes(m) {
			lo = m
		} else {
			hi = m
		}
	}
	return lo
}

// share returns the streamer's share for a line whose most poleward footpoint has
// the latitude lat [rad].
func (c *Corona) share(lat float64) float64 {
	if c.hole == nil {
		return 1
	}
	return 0.5 * (1 - math.Tanh((math.Abs(lat)-c.edge)/c.edgeHalf))
}

// density returns n_e [cm^-3] where the streamer's share is w. The blend is
// logarithmic, so that it is smooth over the decade between hole and streamer.
func (c *Corona) density(r, lat, w float64) float64 {
	switch {
	case c.hole == nil || w > 1-1e-12:
		return c.streamer(r, lat)
	case w < 1e-12:
		return c.hole(r, lat)
	}
	return math.Exp(w*math.Log(c.streamer(r, lat)) + (1-w)*math.Log(c.hole(r, lat)))
}

// Mu returns rho/(m_p n_e) of the corona.
func (c *Corona) Mu() float64 { return c.mu }

// At returns the corona at p (solar frame, solar radii, outside the Sun).
func (c *Corona) At(p r3.Vec) Point {
	r := r3.Norm(p)
	ct := p.Z / r
	theta := math.Acos(ct)
	br, bt := c.field.Meridional(r, theta)
	q := Point{R: r}
	q.B = cartesian(p, r, br, bt)
	q.Line = c.lines.at(c, r, theta)
	q.Streamer = c.share(q.Line.latitude())
	q.N = c.density(r, math.Pi/2-theta, q.Streamer)
	q.Kink = q.N
	q.T = c.tStreamer
	if c.hole != nil {
		q.T = c.tHole + q.Streamer*(c.tStreamer-c.tHole)
	}
	b := math.Hypot(br, bt)
	q.Speed = KinkSpeed(b, q.Kink, c.mu)
	// Electrons and ions: n_i/n_e = (1+A)/(1+2A) = (mu+2)/6.
	q.Beta = q.N * (1 + (c.mu+2)/6) * units.Boltzmann * q.T * 8 * math.Pi / (b * b)
	return q
}

// Frame returns the two polarisation directions of a kink wave at p in a field b:
// unit vectors normal to b. The first is the azimuthal direction, which field lines
// of an axisymmetric field carry along unchanged; the second completes b, e1, e2.
func Frame(p, b r3.Vec) (e1, e2 r3.Vec) {
	rho := math.Hypot(p.X, p.Y)
	e1 = r3.Vec{Y: 1}
	if rho > 0 {
		e1 = r3.Vec{X: -p.Y / rho, Y: p.X / rho}
	}
	return e1, r3.Unit(r3.Cross(b, e1))
}

// A View turns the observer's frame into the solar frame.
type View struct{ sin, cos float64 }

// NewView returns the view from heliographic latitude b0 [rad].
func NewView(b0 float64) View {
	s, c := math.Sincos(b0)
	return View{s, c}
}

// ToSun turns a vector of the observer's frame (x toward the observer, z north on
// the sky) into the solar frame, whose x axis is the observer's meridian.
func (v View) ToSun(p r3.Vec) r3.Vec {
	return r3.Vec{X: v.cos*p.X - v.sin*p.Z, Y: p.Y, Z: v.sin*p.X + v.cos*p.Z}
}

// ToSky is the inverse of ToSun.
func (v View) ToSky(p r3.Vec) r3.Vec {
	return r3.Vec{X: v.cos*p.X + v.sin*p.Z, Y: p.Y, Z: -v.sin*p.X + v.cos*p.Z}
}
