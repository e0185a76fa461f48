package model

import (
	"context"
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios/units"
	"offplane/synth/parallel"
)

// A Line is what the field line through a point tells the waves. None of its numbers
// is NaN.
type Line struct {
	Kind LineKind
	// Closed: both ends are at the surface and the apex lies below the radius
	// above which the scenario counts lines as open.
	Closed bool
	Ends   int     // how many of Foot and Tau hold: 0, 1 or 2
	Apex   float64 // greatest distance along the line as far as it was followed [solar radii]
	// Foot holds where the line meets the surface: two points for a closed line, one
	// for an open one. Of a closed line's the first is the northern one in an
	// axisymmetric corona, that of outgoing field in any other.
	Foot [2]Foot
	// Tau holds the kink travel times from each foot to the point [s].
	Tau [2]float64
	// TauTop is the travel time [s] from where an open line crosses the launch
	// radius of the inward trains down to the point; negative above that radius
	// and where no such train comes from.
	TauTop float64
}

// A Foot is a point of the surface in the solar frame [rad].
type Foot struct{ Colatitude, Azimuth float64 }

func footOf(v r3.Vec) Foot {
	return Foot{math.Acos(max(-1, min(1, v.Z/r3.Norm(v)))), math.Atan2(v.Y, v.X)}
}

// Vector returns the foot as a unit vector.
func (f Foot) Vector() r3.Vec { return spherical(f.Colatitude, f.Azimuth) }

// A LineKind says where the two ends of a field line lie.
type LineKind uint8

// Kinds of field lines.
const (
	ClosedLine   LineKind = iota // both on the surface, and the apex is low enough
	OpenLine                     // one on the surface; or both, but the apex is too high
	DetachedLine                 // none on the surface: in from afar and out again
	NullLine                     // one end runs into a null of the field, where waves stop
)

// A flatLine is a line of an axisymmetric corona in its own half-plane: Foot holds
// colatitudes, NaN for an end that is not on the surface or does not count.
type flatLine struct {
	Closed bool
	Apex   float64
	Foot   [2]float64
	Tau    [2]float64
	TauTop float64
}

// latitude returns the latitude [rad] of the line's most poleward footpoint; the
// equator for a line that never meets the surface.
func (l *flatLine) latitude() float64 {
	lat := 0.0
	for _, f := range l.Foot {
		if a := math.Abs(math.Pi/2 - f); a > lat { // false for NaN
			lat = a
		}
	}
	return lat
}

const (
	// traceStep is the step of the fourth-order tracing over r. Halving it moves
	// travel times by less than 1e-6 (tested).
	traceStep = 0.02
	// closeBelow: lines are followed to this distance to see whether they close.
	// It lies well above any closed_below, so that the table is smooth there.
	closeBelow = 12.0
	// Spacing of the table in ln r and colatitude.
	tableLnR   = 0.0125
	tableTheta = 0.5 * math.Pi / 180
)

// traced is the raw result of following one line both ways.
type traced struct {
	closes bool    // both ends met the surface
	landed bool    // at least one did
	apex   float64 // [solar radii]
	foot   [2]float64
	tau    [2]float64
	top    float64
}

// vertex is one step of a path: where it ends and where its middle lies.
type vertex struct {
	r, theta, b          float64
	rMid, thetaMid, bMid float64
	ds                   float64 // length of the step that led here [solar radii]
	seconds              float64 // and its travel time, once known
}

// follow walks along the field (dir = +1) or against it (-1) from (r, theta) until
// the surface or the distance far is met, by classical Runge-Kutta steps.
func (c *Corona) follow(path []vertex, r, theta, dir, far float64) (_ []vertex, landed bool) {
	slope := func(r, th float64) (dr, dth, b float64) {
		br, bt := c.flat.Meridional(r, th)
		b = math.Sqrt(br*br + bt*bt)
		return dir * br / b, dir * bt / b / r, b
	}
	dr, dth, b := slope(r, theta)
	step := func(h float64) (r1, th1 float64) {
		k2r, k2t, _ := slope(r+h/2*dr, theta+h/2*dth)
		k3r, k3t, _ := slope(r+h/2*k2r, theta+h/2*k2t)
		k4r, k4t, _ := slope(r+h*k3r, theta+h*k3t)
		return r + h/6*(dr+2*k2r+2*k3r+k4r), theta + h/6*(dth+2*k2t+2*k3t+k4t)
	}
	path = append(path, vertex{r: r, theta: theta, b: b})
	if r <= 1 && dr < 0 {
		return path, true
	}
	for range 3000 { // some seven times the longest line; bounds the walk at a null
		h := traceStep * r
		r1, th1 := step(h)
		down := r1 < 1
		if down { // shorten the step to end on the surface: secant, the height is nearly linear in h
			h0, d0, h1, d1 := 0.0, r-1, h, r1-1
			for range 30 {
				if d1 == d0 {
					break
				}
				h2 := h1 - d1*(h1-h0)/(d1-d0)
				h0, d0 = h1, d1
				h1 = h2
				r1, th1 = step(h1)
				d1 = r1 - 1
				if math.Abs(d1) < 1e-13 {
					break
				}
			}
			h, r1 = h1, 1
		}
		dr1, dth1, b1 := slope(r1, th1)
		v := vertex{r: r1, theta: th1, b: b1, ds: h}
		// The middle of the cubic through both ends and their directions.
		v.rMid, v.thetaMid = (r+r1)/2+h/8*(dr-dr1), (theta+th1)/2+h/8*(dth-dth1)
		_, _, v.bMid = slope(v.rMid, v.thetaMid)
		path = append(path, v)
		r, theta, dr, dth = r1, th1, dr1, dth1
		if down {
			return path, true
		}
		if r > far {
			return path, false
		}
	}
	return path, false
}

// trace follows the line through (r, theta) both ways, as far as far [solar radii],
// and returns its topology without travel times.
func (c *Corona) trace(r, theta, far float64) traced {
	var t traced
	back, a := c.follow(nil, r, theta, -1, far)
	fore, b := c.follow(nil, r, theta, +1, far)
	t.fill(back, fore, a, b)
	return t
}

func (t *traced) fill(back, fore []vertex, a, b bool) {
	t.closes, t.landed = a && b, a || b
	for _, p := range [2][]vertex{back, fore} {
		for _, v := range p {
			t.apex = max(t.apex, v.r)
		}
	}
	t.foot = [2]float64{math.NaN(), math.NaN()}
	t.tau = t.foot
	if a {
		t.foot[0] = back[len(back)-1].theta
	}
	if b {
		t.foot[1] = fore[len(fore)-1].theta
	}
}

// traceTimes is trace with travel times; top is the launch radius of inward trains.
func (c *Corona) traceTimes(r, theta, far, top float64) traced {
	var t traced
	back, a := c.follow(make([]vertex, 0, 256), r, theta, -1, far)
	fore, b := c.follow(make([]vertex, 0, 256), r, theta, +1, far)
	t.fill(back, fore, a, b)
	line := flatLine{Foot: t.foot}
	w := c.share(line.latitude())
	open := !t.closes || t.apex > c.closedBelow
	slow := func(r, theta, b, sense float64) float64 { // 1/(c_k + sense u) [s per solar radius]
		v := KinkSpeed(b, c.kinkOf(c.background(r, math.Pi/2-theta, w)), c.mu)
		if open && c.outflow != nil {
			v = max(v+sense*c.outflow(r), weakest)
		}
		return units.SolarRadius / v
	}
	// times fills the time of each step: ds/(c_k + sense u) by Simpson's rule.
	times := func(p []vertex, sense float64) {
		s0 := slow(p[0].r, p[0].theta, p[0].b, sense)
		for i := 1; i < len(p); i++ {
			s1 := slow(p[i].r, p[i].theta, p[i].b, sense)
			p[i].seconds = p[i].ds * (s0 + 4*slow(p[i].rMid, p[i].thetaMid, p[i].bMid, sense) + s1) / 6
			s0 = s1
		}
	}
	times(back, 1)
	times(fore, 1)
	// walk sums the times of a path; crossing is the time at which it first rises
	// through top, or of its apex if it never does.
	walk := func(p []vertex) (total, crossing float64, crossed bool) {
		rmax := p[0].r
		for i := 1; i < len(p); i++ {
			d := p[i].seconds
			if !crossed {
				if p[i-1].r < top && p[i].r >= top {
					crossing = total + d*(top-p[i-1].r)/(p[i].r-p[i-1].r)
					crossed = true
				} else if p[i].r > rmax {
					rmax, crossing = p[i].r, total+d
				}
			}
			total += d
		}
		return total, crossing, crossed
	}
	tauBack, topBack, crossBack := walk(back)
	tauFore, topFore, crossFore := walk(fore)
	if open && c.outflow != nil { // inward trains run against the flow
		times(back, -1)
		times(fore, -1)
		_, topBack, crossBack = walk(back)
		_, topFore, crossFore = walk(fore)
	}
	if a {
		t.tau[0] = tauBack
	}
	if b {
		t.tau[1] = tauFore
	}
	// The inward train comes from the side on which the line rises to top; a point
	// above top is reached by none: minus the time down to top.
	switch {
	case r > top && a:
		t.top = -timeDownTo(back, top)
	case r > top && b:
		t.top = -timeDownTo(fore, top)
	case crossFore:
		t.top = topFore
	case crossBack:
		t.top = topBack
	default:
		t.top = max(topFore, topBack)
	}
	if !a && b || t.closes && t.foot[1] < t.foot[0] { // surface end first; northern first
		t.foot[0], t.foot[1] = t.foot[1], t.foot[0]
		t.tau[0], t.tau[1] = t.tau[1], t.tau[0]
	}
	return t
}

// timeDownTo returns the time along a path until it first sinks
// to the radius top.
func timeDownTo(p []vertex, top float64) float64 {
	total := 0.0
	for i := 1; i < len(p); i++ {
		d := p[i].seconds
		if p[i].r <= top {
			return total + d*(p[i-1].r-top)/(p[i-1].r-p[i].r)
		}
		total += d
	}
	return total
}

// A lineTable holds traced lines at the nodes of a grid over ln r and the
// colatitude of the northern hemisphere; the southern is its mirror image.
type lineTable struct {
	nr, nt int
	top    float64
	node   []traced // [i*nt + j]
}

func (c *Corona) traceAll(ctx context.Context, s Settings) (*lineTable, error) {
	t := &lineTable{
		nr:  int(math.Ceil(math.Log(max(s.Outer, 1.01))/tableLnR)) + 2,
		nt:  int(math.Round(math.Pi/2/tableTheta)) + 1,
		top: s.InwardFrom,
	}
	t.node = make([]traced, t.nr*t.nt)
	err := parallel.For(ctx, t.nr, s.Workers, func(_, i int) error {
		for j := range t.nt {
			t.node[i*t.nt+j] = c.traceTimes(math.Exp(float64(i)*tableLnR), math.Min(float64(j)*tableTheta, math.Pi/2), closeBelow, t.top)
		}
		return nil
	})
	return t, err
}

// at returns the line through (r, theta): bilinear where the four nodes around
// belong to one family of lines, traced afresh where a separatrix passes between.
func (t *lineTable) at(c *Corona, r, theta float64) flatLine {
	south := theta > math.Pi/2
	if south {
		theta = math.Pi - theta
	}
	u, v := math.Log(r)/tableLnR, theta/tableTheta
	i := min(max(int(u), 0), t.nr-2)
	j := min(max(int(v), 0), t.nt-2)
	u -= float64(i)
	v -= float64(j)
	a, b := &t.node[i*t.nt+j], &t.node[i*t.nt+j+1]
	d, e := &t.node[(i+1)*t.nt+j], &t.node[(i+1)*t.nt+j+1]
	var m traced
	// Lines that rise above closed_below count as open: only their first end matters.
	ends := 2
	if min(a.apex, b.apex, d.apex, e.apex) > c.closedBelow {
		ends = 1
	}
	if family(a, b, ends) && family(a, d, ends) && family(a, e, ends) {
		wa, wb, wd, we := (1-u)*(1-v), (1-u)*v, u*(1-v), u*v
		mix := func(x, y, z, w float64) float64 { return wa*x + wb*y + wd*z + we*w }
		m.closes = a.closes
		m.apex = mix(a.apex, b.apex, d.apex, e.apex)
		m.top = mix(a.top, b.top, d.top, e.top)
		for k := range 2 {
			m.foot[k] = mix(a.foot[k], b.foot[k], d.foot[k], e.foot[k])
			m.tau[k] = mix(a.tau[k], b.tau[k], d.tau[k], e.tau[k])
		}
	} else {
		m = c.traceTimes(r, theta, closeBelow, t.top)
	}
	l := flatLine{Closed: m.closes && m.apex <= c.closedBelow, Apex: m.apex, Foot: m.foot, Tau: m.tau, TauTop: m.top}
	if !l.Closed {
		l.Foot[1], l.Tau[1] = math.NaN(), math.NaN()
	}
	if south {
		l.Foot[0], l.Foot[1] = math.Pi-l.Foot[0], math.Pi-l.Foot[1]
		if l.Closed {
			l.Foot[0], l.Foot[1] = l.Foot[1], l.Foot[0]
			l.Tau[0], l.Tau[1] = l.Tau[1], l.Tau[0]
		}
	}
	return l
}

// family says whether two neighbouring nodes belong to one family of lines, so that
// interpolating their first ends or both is sound: the same ends, and footpoints
// that moved little.
func family(a, b *traced, ends int) bool {
	const jump = 10 * math.Pi / 180
	if a.landed != b.landed || ends == 2 && (a.closes != b.closes || a.apex > 1.25*b.apex || b.apex > 1.25*a.apex) {
		return false
	}
	for k := range ends {
		if math.Abs(a.foot[k]-b.foot[k]) > jump {
			return false
		}
	}
	return true
}
