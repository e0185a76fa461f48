// Package model is the TRUTH: a three-dimensional corona whose field, density and
// temperature are known at every point, and whose field lines tell the waves where
// they were launched and how long they have travelled.
//
// Positions here are in the solar frame, in solar radii: z along the rotation axis, x
// at longitude 0 of the equator; View turns the observer's frame (package obs) into
// it. Everything else is cgs-Gaussian.
//
//  1. New reads the description: fields (field.go, belt.go, harmonics.go), density
//     laws (density.go, laws_*.go), or the user's own grid (grid.go).
//  2. It traces field lines once. An axisymmetric corona needs them in one half-plane
//     only (lines.go); any other in space (trace.go, table.go), and, if it has a hole,
//     on the surface (surface.go).
//  3. At puts together what is known at a point.
package model

import (
	"context"
	"errors"
	"fmt"
	"math"
	"sync"

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

// A Corona is safe for concurrent use.
type Corona struct {
	field Field // of the whole corona, solar frame
	belt  belt
	// flat is the same field in the frame of the belt if all of it is axisymmetric.
	flat meridionalSum

	grid           *Grid
	streamer, hole *lawTable
	active         []region
	tStreamer      float64 // [K]
	tHole          float64
	profile        func(r float64) float64 // of temperatures; nil: isothermal
	edge, edgeHalf float64                 // axisymmetric: footpoint latitude of the streamer's edge; half-width of the passage [rad]
	depths         *depthMap               // otherwise
	mix            *scenarios.Mix
	strands        *strands
	outflow        func(r float64) float64 // [cm/s]; nil: none
	spin           float64                 // [rad/s]
	closedBelow    float64                 // [solar radii]
	inwardFrom     float64
	outer          float64
	mu             float64

	lines *lineTable  // axisymmetric
	space *spaceTable // otherwise
}

// A region is the plasma of an active region.
type region struct {
	centre      r3.Vec
	radius      float64 // [solar radii]
	law         Law
	temperature float64 // [K]
}

// A Point is the corona at one position.
type Point struct {
	R    float64 // distance from the Sun's centre [solar radii]
	N    float64 // electron density, mean over what is not resolved [cm^-3]
	Mean float64 // the same without strands: what N scatters around
	Kink float64 // electron density that the kink wave feels [cm^-3]
	// Parts are the densities that emit and their shares of the volume; the second has
	// share 0 unless dense and thin plasma are mixed.
	Parts [2]Part
	T     float64 // [K]
	B     r3.Vec  // [G], solar frame
	Flow  r3.Vec  // steady motion [cm/s], solar frame
	Speed float64 // kink speed [cm/s], without flow
	Beta  float64 // gas over magnetic pressure
	// Streamer is the share of the streamer law in the (logarithmic) blend with the
	// hole, Active that of active regions in the density.
	Streamer, Active float64
	Line             Line
	e1               r3.Vec
}

// A Part is one component of the plasma.
type Part struct {
	Share float64 // of the volume
	N     float64 // [cm^-3]
}

// Structure classes of a point.
const (
	Closed       = 1
	Open         = 2
	Sheet        = 3 // open, but in the streamer's density: around the current sheet
	ActiveRegion = 4
)

// Structure returns the class of the point's surroundings.
func (q *Point) Structure() int32 {
	switch {
	case q.Active > 0.5:
		return ActiveRegion
	case q.Line.Closed:
		return Closed
	case q.Streamer > 0.5:
		return Sheet
	}
	return Open
}

// Frame returns the two polarisation directions of a kink wave at the point: unit
// vectors normal to B. The first is the azimuthal direction at the line's first foot
// (about the belt's axis if the corona is symmetric about it), made normal to the line
// and carried along it without twist; the second completes B, e1, e2.
func (q *Point) Frame() (e1, e2 r3.Vec) {
	e2 = r3.Cross(q.B, q.e1)
	return q.e1, r3.Scale(1/norm(e2), e2)
}

// Settings are what the corona needs to know beyond its own description.
type Settings struct {
	Outer      float64 // farthest distance at which it will be asked [solar radii]
	InwardFrom float64 // where inward trains are launched on open lines [solar radii]
	Seed       uint64  // addresses the strands
	Workers    int     // of the tracing of field lines; < 1: every core
	// Seen says whether the corona will be asked at p or within margin [solar radii] of
	// it: lines elsewhere are traced only when asked for after all. nil: everywhere.
	Seen func(p r3.Vec, margin float64) bool
}

// New builds the corona and traces its field lines.
func New(ctx context.Context, c scenarios.Corona, s Settings) (*Corona, error) {
	k := &Corona{
		mu:          Mu(c.Helium),
		tStreamer:   c.Temperature.Streamer.Kelvin(),
		tHole:       c.Temperature.Hole.Kelvin(),
		closedBelow: float64(c.ClosedBelow),
		inwardFrom:  s.InwardFrom,
		outer:       s.Outer,
		edgeHalf:    c.Density.Boundary.Rad(),
		mix:         c.Mix,
		strands:     newStrands(c.Strands, s.Seed),
		profile:     profileOf(c.Temperature),
	}
	if b := c.Belt; b != nil {
		k.belt = belt{turn: identity, warp: b.Warp.Rad(), waves: float64(b.Waves), from: b.Longitude.Rad()}
		if b.Tilt != 0 {
			k.belt.turn, k.belt.turned = tilt(b.Tilt.Rad(), b.Toward.Rad()), true
		}
	}
	if o := c.Outflow; o != nil {
		k.outflow = func(r float64) float64 { return float64(o.Terminal) * 1e5 * math.Pow(1-1/r, o.Exponent) }
	}
	if c.Rotation != nil {
		k.spin = 2 * math.Pi / float64(c.Rotation.Period)
	}
	if c.Grid != nil {
		g, err := ReadGrid(c.Grid.File)
		if err != nil {
			return nil, fmt.Errorf("corona.grid: %w", err)
		}
		if err := g.Reaches(s.Outer); err != nil {
			return nil, fmt.Errorf("corona.grid: %w", err)
		}
		k.grid, k.field = g, g
	} else {
		if err := k.describe(c); err != nil {
			return nil, err
		}
	}
	var err error
	if k.flat != nil {
		if k.hole != nil {
			k.edge = k.streamerEdge()
		}
		k.lines, err = k.traceAll(ctx, s)
		return k, err
	}
	if k.hole != nil {
		if k.depths, err = k.traceDepths(ctx, s.Workers); err != nil {
			return nil, err
		}
	}
	k.space, err = k.traceSpace(ctx, s)
	return k, err
}

// Files returns the paths of the files that a corona is read from.
func Files(c scenarios.Corona) []string {
	if c.Grid != nil {
		return []string{c.Grid.File}
	}
	var paths []string
	for _, f := range c.Fields {
		if f.SourceSurface != nil && f.SourceSurface.Table != "" {
			paths = append(paths, f.SourceSurface.Table)
		}
	}
	return paths
}

// describe reads fields and density laws.
func (k *Corona) describe(c scenarios.Corona) error {
	if len(c.Fields) == 0 {
		return errors.New("corona.fields: at least one field is needed")
	}
	var all Sum
	var flat meridionalSum
	sheets, radials := 0, 0
	for i, f := range c.Fields {
		switch {
		case f.DipoleSheet != nil:
			d := DipoleSheet{float64(f.DipoleSheet.Strength), float64(f.DipoleSheet.Sheet), f.DipoleSheet.Octupole}
			all = append(all, beltField{d, &k.belt})
			flat = append(flat, d)
			sheets++
		case f.Radial != nil:
			r := RadialField{float64(f.Radial.Strength), f.Radial.Exponent}
			all = append(all, r)
			flat = append(flat, r)
			radials++
		case f.SourceSurface != nil:
			h, err := ReadHarmonics(f.SourceSurface.Table)
			if err != nil {
				return fmt.Errorf("corona.fields.%d.source_surface.table: %w", i, err)
			}
			all = append(all, NewSourceSurface(h, float64(f.SourceSurface.Height), f.SourceSurface.Factor))
		case f.BuriedDipole != nil:
			d := f.BuriedDipole
			all = append(all, BuriedDipole(d.Latitude.Rad(), d.Longitude.Rad(), d.Depth.Rsun(), float64(d.Strength), d.Heading.Rad(), d.Elevation.Rad()))
		case f.Uniform != nil:
			u := f.Uniform
			all = append(all, UniformField{r3.Scale(float64(u.Strength), spherical(math.Pi/2-u.Latitude.Rad(), u.Longitude.Rad()))})
		}
	}
	k.field = all
	if len(all) == 1 {
		k.field = all[0]
	}
	// The table of an axisymmetric corona covers one hemisphere: a dipole, odd in the
	// equator, and a radial field, even, have no symmetry together.
	if len(flat) == len(all) && k.belt.warp == 0 && len(c.Density.Active) == 0 && (sheets == 0 || radials == 0) {
		k.flat = flat
	}
	var err error
	if k.streamer, err = newLawTable(c.Density.Streamer, c.Helium, k.outer); err != nil {
		return err
	}
	if c.Density.Hole != nil {
		if k.hole, err = newLawTable(*c.Density.Hole, c.Helium, k.outer); err != nil {
			return err
		}
	}
	for _, a := range c.Density.Active {
		r := region{centre: spherical(math.Pi/2-a.Latitude.Rad(), a.Longitude.Rad()), radius: a.Radius.Rsun(), temperature: a.Temperature.Kelvin()}
		if r.law, err = NewLaw(a.Law, c.Helium); err != nil {
			return err
		}
		k.active = append(k.active, r)
	}
	return nil
}

// tracing returns how lines are followed in space.
func (c *Corona) tracing() tracer {
	return usual(1.02 * max(c.closedBelow, c.inwardFrom, c.outer))
}

// profileOf returns the factor of the two-parameter profile: Vasquez, van Ballegooijen
// & Raymond 2003, ApJ 598, 1361 (form from memory).
func profileOf(t scenarios.Temperature) func(r float64) float64 {
	p := t.Profile
	if p == nil {
		return nil
	}
	return func(r float64) float64 {
		return (p.A + 1) / (p.A + p.B*math.Pow(r, p.Alpha) + (1-p.B)*math.Pow(r, -p.Beta))
	}
}

// TemperatureRange returns the least and the greatest temperature [K] of a corona out
// to a distance [solar radii].
func TemperatureRange(c scenarios.Corona, outer float64) (lo, hi float64, err error) {
	if c.Grid != nil {
		g, err := ReadGrid(c.Grid.File)
		if err != nil {
			return 0, 0, fmt.Errorf("corona.grid: %w", err)
		}
		return g.cold, g.hot, nil
	}
	lo, hi = math.Inf(1), 0.0
	add := func(t float64) { lo, hi = min(lo, t), max(hi, t) }
	both := []float64{c.Temperature.Streamer.Kelvin()}
	if c.Density.Hole != nil {
		both = append(both, c.Temperature.Hole.Kelvin())
	}
	profile := profileOf(c.Temperature)
	for _, t := range both {
		if profile == nil {
			add(t)
			continue
		}
		const n = 2000
		for i := range n + 1 {
			add(t * profile(1+(outer-1)*float64(i)/n))
		}
		lo, hi = lo*(1-1e-5), hi*(1+1e-5) // extremes between the samples
	}
	for _, a := range c.Density.Active {
		add(a.Temperature.Kelvin())
	}
	return lo, hi, nil
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

// passage returns the streamer's share at an angle [rad] inside the closed region's
// edge on the surface.
func (c *Corona) passage(inside float64) float64 {
	return 0.5 * (1 + math.Tanh(inside/c.edgeHalf))
}

// share returns the streamer's share for a line of an axisymmetric corona whose most
// poleward footpoint has the latitude lat [rad].
func (c *Corona) share(lat float64) float64 {
	if c.hole == nil {
		return 1
	}
	return c.passage(c.edge - math.Abs(lat))
}

// background returns n_e [cm^-3] outside active regions where the streamer's share is
// w. The blend is logarithmic, so that it is smooth over the decade between hole and
// streamer.
func (c *Corona) background(r, lat, w float64) float64 {
	lnR := math.Log(r)
	switch {
	case c.hole == nil || w > 1-1e-12:
		return math.Exp(c.streamer.at(r, lnR, lat))
	case w < 1e-12:
		return math.Exp(c.hole.at(r, lnR, lat))
	}
	return math.Exp(w*c.streamer.at(r, lnR, lat) + (1-w)*c.hole.at(r, lnR, lat))
}

// A mixture is what the density needs to know of a field line.
type mixture struct {
	closed bool
	share  float64                      // of the streamer
	active [scenarios.MaxActive]float64 // share of each active region
}

// mixOf returns the mixture on a line in space.
func (c *Corona) mixOf(l *spatialLine) mixture {
	m := mixture{closed: l.kind == ClosedLine, share: 1}
	if l.ends == 0 {
		return m
	}
	if c.depths != nil {
		inside := math.Inf(1)
		for e := range l.ends {
			inside = min(inside, c.depths.at(l.foot[e]))
		}
		m.share = c.passage(inside)
	}
	for i := range c.active {
		a := &c.active[i]
		for e := range l.ends {
			d := 2 * math.Asin(min(1, norm(r3.Sub(l.foot[e], a.centre))/2)) / a.radius
			m.active[i] += math.Exp(-d*d) / float64(l.ends)
		}
	}
	return m
}

// density returns the mean n_e [cm^-3] at p on a line of the given mixture.
func (c *Corona) density(p r3.Vec, m *mixture) float64 {
	n, _, _ := c.plasma(p, m)
	return n
}

// plasma returns the mean n_e [cm^-3] at p, its temperature [K] and the share of active
// regions in it.
func (c *Corona) plasma(p r3.Vec, m *mixture) (n, t, active float64) {
	if c.grid != nil {
		n, t = c.grid.plasma(p)
		return n, t, 0
	}
	r := norm(p)
	lat := c.belt.latitude(p)
	n = c.background(r, lat, m.share)
	t = c.warmth(r, m.share)
	base, heat := n, n*t
	lo, hi := t, t
	for i := range c.active {
		if m.active[i] > 0 {
			a := &c.active[i]
			d := m.active[i] * a.law(r, lat)
			n += d
			heat += d * a.temperature
			lo, hi = min(lo, a.temperature), max(hi, a.temperature)
		}
	}
	// Rounding must not lead out of the range of the table of the light.
	return n, max(lo, min(hi, heat/n)), 1 - base/n
}

// warmth returns the temperature [K] of the background where the streamer's share is w.
func (c *Corona) warmth(r, w float64) float64 {
	t := c.tStreamer
	if c.hole != nil {
		t = c.tHole + w*(c.tStreamer-c.tHole)
	}
	if c.profile != nil {
		t *= c.profile(r)
	}
	return t
}

// parts splits a mean density into dense and thin plasma.
func (c *Corona) parts(n float64) [2]Part {
	m := c.mix
	if m == nil {
		return [2]Part{{1, n}, {}}
	}
	thin := n / (m.Filling*m.Contrast + 1 - m.Filling)
	return [2]Part{{m.Filling, m.Contrast * thin}, {1 - m.Filling, thin}}
}

// kinkOf returns the density that the wave feels where the mean is n: the mean itself,
// which is that of a bundle of strands moving together; for isolated thin tubes the
// mean of inside and outside (Nakariakov & Verwichte 2005, sect. 3.3).
func (c *Corona) kinkOf(n float64) float64 {
	if c.mix == nil || c.mix.Tubes != "isolated" {
		return n
	}
	p := c.parts(n)
	return (p[0].N + p[1].N) / 2
}

// At returns the corona at p (solar frame, solar radii, outside the Sun).
func (c *Corona) At(p r3.Vec) Point {
	q := Point{R: norm(p)}
	if c.flat != nil {
		c.flatAt(p, &q)
	} else {
		c.spaceAt(p, &q)
	}
	q.N, q.Kink = q.Mean, c.kinkOf(q.Mean)
	if c.strands != nil && q.Line.Ends > 0 {
		f := c.strands.factor(q.Line.Foot[0].Vector())
		q.N *= f
		if c.strands.own {
			q.Kink *= f
			slow := math.Sqrt(f) // the factor holds all along the line
			q.Line.Tau[0] *= slow
			q.Line.Tau[1] *= slow
			q.Line.TauTop *= slow
		}
	}
	q.Parts = c.parts(q.N)
	b := norm(q.B)
	q.Speed = KinkSpeed(b, q.Kink, c.mu)
	// Electrons and ions: n_i/n_e = (1+A)/(1+2A) = (mu+2)/6.
	q.Beta = q.N * (1 + (c.mu+2)/6) * units.Boltzmann * q.T * 8 * math.Pi / (b * b)
	if c.spin != 0 {
		q.Flow = r3.Vec{X: -c.spin * units.SolarRadius * p.Y, Y: c.spin * units.SolarRadius * p.X}
	}
	if c.outflow != nil && !q.Line.Closed && q.Line.Ends > 0 {
		foot := q.Line.Foot[0].Vector()
		u := math.Copysign(c.outflow(q.R), r3.Dot(c.field.B(foot), foot))
		q.Flow = r3.Add(q.Flow, r3.Scale(u/b, q.B))
	}
	return q
}

// flatAt fills in field, line and plasma of an axisymmetric corona.
func (c *Corona) flatAt(p r3.Vec, q *Point) {
	p = c.belt.into(p)
	theta := math.Acos(p.Z / q.R)
	br, bt := c.flat.Meridional(q.R, theta)
	q.B = c.belt.out(cartesian(p, q.R, br, bt))
	q.e1 = c.belt.out(azimuthal(p))
	f := c.lines.at(c, q.R, theta)
	q.Streamer = c.share(f.latitude())
	q.Mean = c.background(q.R, math.Pi/2-theta, q.Streamer)
	q.T = c.warmth(q.R, q.Streamer)
	azimuth := math.Atan2(p.Y, p.X)
	l := &q.Line
	l.Closed, l.Apex, l.TauTop = f.Closed, f.Apex, f.TauTop
	l.Kind = OpenLine
	if f.Closed {
		l.Kind = ClosedLine
	}
	for e, th := range f.Foot {
		if math.IsNaN(th) {
			continue
		}
		l.Foot[l.Ends] = Foot{th, azimuth}
		if c.belt.turned {
			l.Foot[l.Ends] = footOf(c.belt.out(spherical(th, azimuth)))
		}
		l.Tau[l.Ends] = f.Tau[e]
		l.Ends++
	}
	if l.Ends == 0 {
		l.Kind = DetachedLine
	}
	if math.IsNaN(l.TauTop) {
		l.TauTop = math.Inf(-1)
	}
}

// walks keeps the scratch space of lines that are traced afresh.
var walks = sync.Pool{New: func() any { return new([2][]knot) }}

// spaceAt fills in field, line and plasma of any other corona.
func (c *Corona) spaceAt(p r3.Vec, q *Point) {
	l, ok := c.space.lookup(p)
	if !ok {
		scratch := walks.Get().(*[2][]knot)
		l = c.line(c.tracing(), p, scratch)
		walks.Put(scratch)
	}
	q.B = c.field.B(p)
	m := c.mixOf(&l)
	q.Mean, q.T, q.Active = c.plasma(p, &m)
	q.Streamer = m.share
	if b := norm(q.B); b > 0 {
		q.e1 = normalTo(r3.Scale(1/b, q.B), l.e1, azimuthal(p))
	} else {
		q.e1 = azimuthal(p)
	}
	q.Line = Line{Kind: l.kind, Closed: l.kind == ClosedLine, Ends: l.ends, Apex: l.apex, Tau: l.tau, TauTop: l.top}
	for e := range l.ends {
		q.Line.Foot[e] = footOf(l.foot[e])
	}
	if l.ends != 1 {
		q.Line.TauTop = math.Inf(-1)
	}
}

// LongestDelay returns the longest travel time [s] of a train that a sample may ask
// for: from the first end of its line and, if asked, from the far end of a closed
// line or from the launch radius of inward trains. In a corona without symmetry one
// line in a thousand, close to a null of the field, may take longer.
func (c *Corona) LongestDelay(farEnd, inward bool) float64 {
	longest := 0.0
	add := func(t float64) {
		if t > longest { // false for NaN
			longest = t
		}
	}
	if c.space != nil {
		longest = c.space.longest(farEnd, inward)
	} else {
		for i := range c.lines.node {
			n := &c.lines.node[i]
			closed := n.closes && n.apex <= c.closedBelow
			add(n.tau[0])
			// A neighbour of a closed line's node may be closed, so high lines count too.
			if n.closes && n.apex <= 1.3*c.closedBelow && (farEnd || closed) {
				add(n.tau[1])
			}
			if inward && !closed {
				add(n.top)
			}
		}
	}
	if c.strands != nil && c.strands.own {
		longest *= math.Exp(1.5 * c.strands.spread) // three standard deviations of sqrt(n)
	}
	return longest
}

// A View turns the observer's frame into the solar frame.
type View struct{ turn rotation }

// NewView returns the view from heliographic latitude b0 and longitude l0 [rad].
func NewView(b0, l0 float64) View {
	s, c := math.Sincos(b0)
	sl, cl := math.Sincos(l0)
	// Rows: the observer's axes in the solar frame.
	return View{rotation{
		{X: c * cl, Y: c * sl, Z: s},
		{X: -sl, Y: cl},
		{X: -s * cl, Y: -s * sl, Z: c},
	}}
}

// ToSun turns a vector of the observer's frame (x toward the observer, z north on
// the sky) into the solar frame.
func (v View) ToSun(p r3.Vec) r3.Vec { return v.turn.back(p) }

// ToSky is the inverse of ToSun.
func (v View) ToSky(p r3.Vec) r3.Vec { return v.turn.apply(p) }
