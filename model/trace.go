package model

import (
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/scenarios/units"
)

// A tracer follows field lines in three dimensions.
type tracer struct {
	// tolerance of one step [solar radii] and longest step over r.
	tolerance, longest float64
	far                float64 // where lines are given up [solar radii]
}

// usual is the tracing of the table: travel times to about 1e-5 (tested against a
// tolerance of 1e-10).
func usual(far float64) tracer { return tracer{1e-5, 0.12, far} }

// How a walk along a field line ended.
type ending uint8

const (
	landed ending = iota // on the surface
	left                 // beyond far
	lost                 // at a null of the field, or running in circles
)

// A knot is one step of a walk: where it ends and its middle.
type knot struct {
	p, dir  r3.Vec  // dir: unit vector along the walk
	b       float64 // [G]
	mid     r3.Vec
	bMid    float64
	ds      float64 // length of the step that led here [solar radii]
	seconds float64 // and its travel time, once known
}

// Dormand & Prince 1980, J. Comput. Appl. Math. 6, 19: a pair of orders 5 and 4.
var (
	dpA = [7][6]float64{
		1: {1.0 / 5},
		2: {3.0 / 40, 9.0 / 40},
		3: {44.0 / 45, -56.0 / 15, 32.0 / 9},
		4: {19372.0 / 6561, -25360.0 / 2187, 64448.0 / 6561, -212.0 / 729},
		5: {9017.0 / 3168, -355.0 / 33, 46732.0 / 5247, 49.0 / 176, -5103.0 / 18656},
		6: {35.0 / 384, 0, 500.0 / 1113, 125.0 / 192, -2187.0 / 6784, 11.0 / 84},
	}
	dpE = [7]float64{71.0 / 57600, 0, -71.0 / 16695, 71.0 / 1920, -17253.0 / 339200, 22.0 / 525, -1.0 / 40}
)

const maxSteps = 500

// follow walks along the field (sign = +1) or against it (-1) from p, and appends the
// walk to path; its first knot is p itself.
func (t *tracer) follow(path []knot, f Field, p r3.Vec, sign float64) ([]knot, ending) {
	slope := func(p r3.Vec) (r3.Vec, float64) {
		b := f.B(p)
		n := norm(b)
		if !(n > 0) {
			return r3.Vec{}, 0
		}
		return r3.Scale(sign/n, b), n
	}
	dir, b := slope(p)
	path = append(path, knot{p: p, dir: dir, b: b})
	if b == 0 {
		return path, lost
	}
	if norm(p) <= 1 && r3.Dot(p, dir) < 0 {
		return path, landed
	}
	var k [7]r3.Vec
	// try makes one step; its last slope is that at its end.
	try := func(h float64) (q r3.Vec, b, err float64) {
		k[0] = dir
		for i := 1; i < 7; i++ {
			q = p
			for j := range i {
				if a := dpA[i][j]; a != 0 {
					q = r3.Add(q, r3.Scale(h*a, k[j]))
				}
			}
			k[i], b = slope(q)
			if b == 0 {
				return q, 0, math.Inf(1)
			}
		}
		var e r3.Vec
		for i, w := range dpE {
			e = r3.Add(e, r3.Scale(h*w, k[i]))
		}
		return q, b, norm(e)
	}
	r := norm(p)
	h := t.longest * r / 2
	for range maxSteps {
		h = min(h, t.longest*r)
		smallest := 1e-4 * r
		q, bq, err := try(h)
		for err > t.tolerance && h > smallest {
			h = max(smallest, h*max(0.2, 0.9*math.Pow(t.tolerance/err, 0.2)))
			q, bq, err = try(h)
		}
		if bq == 0 {
			return path, lost
		}
		grow := min(4, max(0.3, 0.9*math.Pow(t.tolerance/max(err, 1e-300), 0.2)))
		rq := norm(q)
		down := rq < 1
		if down { // shorten the step to end on the surface: by the cubic first, then by Newton
			end := k[6]
			x, lo, hi := 0.5, 0.0, 1.0
			for range 40 {
				y := 1 - x
				c := r3.Add(r3.Scale(y*y*(1+2*x), p), r3.Scale(x*x*(3-2*x), q))
				c = r3.Add(c, r3.Add(r3.Scale(h*x*y*y, dir), r3.Scale(-h*x*x*y, end)))
				if norm(c) > 1 {
					lo = x
				} else {
					hi = x
				}
				x = (lo + hi) / 2
			}
			h *= x
			for range 6 {
				q, bq, _ = try(h)
				d := norm(q) - 1
				fall := r3.Dot(k[6], q)
				if math.Abs(d) < 1e-9 || fall > -1e-3 {
					break
				}
				h = max(0, h-d/fall)
			}
			q = r3.Unit(q)
		}
		n := knot{p: q, dir: k[6], b: bq, ds: h}
		// The middle of the cubic through both ends and their directions.
		n.mid = r3.Add(r3.Scale(0.5, r3.Add(p, q)), r3.Scale(h/8, r3.Sub(dir, n.dir)))
		_, n.bMid = slope(n.mid)
		path = append(path, n)
		p, dir, r = q, n.dir, rq
		if down {
			return path, landed
		}
		if r > t.far {
			return path, left
		}
		h *= grow
	}
	return path, lost
}

// A spatialLine is the raw result of following one line both ways.
type spatialLine struct {
	kind LineKind
	ends int
	apex float64
	foot [2]r3.Vec // unit vectors
	tau  [2]float64
	top  float64
	e1   r3.Vec // polarisation direction at the point
}

// weakest keeps times finite where the field vanishes [G].
const weakest = 1e-9

// line follows the line through p both ways. Scratch space is the caller's.
func (c *Corona) line(t tracer, p r3.Vec, scratch *[2][]knot) spatialLine {
	var ends [2]ending
	for i, sign := range [2]float64{-1, 1} {
		scratch[i], ends[i] = t.follow(scratch[i][:0], c.field, p, sign)
	}
	var l spatialLine
	var peak [2]float64
	for i, path := range scratch {
		for _, k := range path {
			peak[i] = max(peak[i], norm(k.p))
		}
	}
	l.apex = max(peak[0], peak[1])
	on := [2]bool{ends[0] == landed, ends[1] == landed}
	order := [2]int{0, 1} // the end of outgoing field first
	switch {
	case on[0] && on[1] && l.apex <= c.closedBelow:
		l.kind, l.ends = ClosedLine, 2
	case on[0] && on[1]: // counts as open: the near leg
		l.kind, l.ends = OpenLine, 1
		if peak[1] < peak[0] {
			order = [2]int{1, 0}
		}
	case on[0] || on[1]:
		l.kind, l.ends = OpenLine, 1
		if !on[0] {
			order = [2]int{1, 0}
		}
		if ends[order[1]] == lost {
			l.kind = NullLine
		}
	case ends[0] == lost || ends[1] == lost:
		l.kind = NullLine
	default:
		l.kind = DetachedLine
	}
	down, away := scratch[order[0]], scratch[order[1]] // toward the first foot, and from it
	for i := range l.ends {
		path := scratch[order[i]]
		l.foot[i] = path[len(path)-1].p
	}
	mix := c.mixOf(&l)
	c.time(down, &mix, +1)
	for _, k := range down {
		l.tau[0] += k.seconds
	}
	switch l.ends {
	case 0:
		l.tau[0] = 0
	case 1:
		l.top = c.fromTop(down, away, &mix)
	case 2:
		c.time(away, &mix, +1)
		for _, k := range away {
			l.tau[1] += k.seconds
		}
	}
	l.e1 = transport(down, l.ends > 0)
	return l
}

// time fills the travel time of every step: ds/(c_k + sense u), by Simpson's rule.
func (c *Corona) time(path []knot, m *mixture, sense float64) {
	slow := func(p r3.Vec, b float64) float64 {
		v := KinkSpeed(max(b, weakest), c.kinkOf(c.density(p, m)), c.mu)
		if !m.closed && c.outflow != nil {
			v = max(v+sense*c.outflow(norm(p)), weakest)
		}
		return units.SolarRadius / v
	}
	s0 := slow(path[0].p, path[0].b)
	for i := 1; i < len(path); i++ {
		k := &path[i]
		s1 := slow(k.p, k.b)
		k.seconds = k.ds * (s0 + 4*slow(k.mid, k.bMid) + s1) / 6
		s0 = s1
	}
}

// fromTop returns the travel time from where the line crosses the launch radius of
// inward trains to its first knot, against any outflow; minus the time to there for a
// point above that radius, and -Inf where no train comes from.
func (c *Corona) fromTop(down, away []knot, m *mixture) float64 {
	top := c.inwardFrom
	if r := norm(down[0].p); r > top {
		c.time(down, m, -1)
		if t, ok := crossing(down, top); ok {
			return -t
		}
		return math.Inf(-1)
	}
	c.time(away, m, -1)
	if t, ok := crossing(away, top); ok {
		return t
	}
	return math.Inf(-1)
}

// crossing returns the time along a path to where it first meets the radius top.
func crossing(path []knot, top float64) (float64, bool) {
	sum := 0.0
	a := norm(path[0].p)
	for i := 1; i < len(path); i++ {
		k := &path[i]
		b := norm(k.p)
		if (a-top)*(b-top) <= 0 && a != b {
			// The radius along the step is the parabola through its ends and its middle;
			// time runs along it like length, the step being short (quadratic terms of time
			// are below 1e-3 of a step's).
			m := norm(k.mid)
			x := (top - a) / (b - a)
			for range 5 {
				r := a*(1-x)*(1-2*x) + 4*m*x*(1-x) + b*x*(2*x-1)
				dr := a*(4*x-3) + 4*m*(1-2*x) + b*(4*x-1)
				if dr == 0 {
					break
				}
				x = min(1, max(0, x-(r-top)/dr))
			}
			return sum + x*k.seconds, true
		}
		sum += k.seconds
		a = b
	}
	return 0, false
}

// transport carries the azimuthal direction at the foot of a path, made normal to the
// line, along to its first knot without twist: Wang, Juettler, Zheng & Liu 2008, ACM
// Trans. Graph. 27, 2 (double reflection, of fourth order). Without a foot it is the
// azimuthal direction at the point.
func transport(path []knot, hasFoot bool) r3.Vec {
	if !hasFoot {
		path = path[:1]
	}
	k := &path[len(path)-1]
	e := normalTo(k.dir, azimuthal(k.p), r3.Vec{Z: 1})
	for i := len(path) - 2; i >= 0; i-- {
		n := &path[i]
		v := r3.Sub(n.p, k.p)
		e1, t1 := reflect(v, e), reflect(v, k.dir)
		e = reflect(r3.Sub(n.dir, t1), e1)
		k = n
	}
	return normalTo(k.dir, e, azimuthal(k.p))
}

// reflect mirrors x in the plane normal to v.
func reflect(v, x r3.Vec) r3.Vec {
	d := r3.Dot(v, v)
	if d < 1e-30 {
		return x
	}
	return r3.Sub(x, r3.Scale(2*r3.Dot(v, x)/d, v))
}

// normalTo returns the unit vector nearest to e that is normal to the unit vector t;
// or nearest to other if e is along t.
func normalTo(t, e, other r3.Vec) r3.Vec {
	for _, x := range [4]r3.Vec{e, other, {X: 1}, {Y: 1}} {
		x = r3.Sub(x, r3.Scale(r3.Dot(x, t), t))
		if n := norm(x); n > 1e-6 {
			return r3.Scale(1/n, x)
		}
	}
	return r3.Vec{X: 1}
}

// Trace follows the field line through p (solar frame) both ways, to the surface or
// out to the farthest distance of the corona, and returns its points in order along
// the field.
func (c *Corona) Trace(p r3.Vec) []r3.Vec {
	how := c.tracing()
	how.longest = 0.04
	back, _ := how.follow(nil, c.field, p, -1)
	fore, _ := how.follow(nil, c.field, p, 1)
	line := make([]r3.Vec, 0, len(back)+len(fore)-1)
	for i := len(back) - 1; i > 0; i-- {
		line = append(line, back[i].p)
	}
	for _, k := range fore {
		line = append(line, k.p)
	}
	return line
}
