package model

import (
	"context"
	"math"
	"slices"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/synth/parallel"
)

// Spacing of the table in three dimensions: in ln r and in both angles [rad].
const (
	spaceLnR   = 0.03
	spaceTheta = 2 * math.Pi / 180
)

// A spaceTable holds traced lines at the nodes of a grid over ln r, colatitude and
// azimuth; only the nodes that may be asked for are traced.
type spaceTable struct {
	nr, nt, np int
	at         []int32 // [(i*nt + j)*np + k]: index in node, -1 for none
	node       []spaceNode
}

// A spaceNode is a spatialLine in single precision (6e-8 of a travel time), to spare
// the memory.
type spaceNode struct {
	kind  LineKind
	ends  uint8
	value [nodeValues]float32
}

// The values of a node, in order: apex, two times, time from the top, two feet, e1.
const (
	atApex     = 0
	atTau      = 1
	atTop      = 3
	atFoot     = 4
	atFrame    = 10
	nodeValues = 13
)

func (n *spaceNode) vector(at int) r3.Vec {
	return r3.Vec{X: float64(n.value[at]), Y: float64(n.value[at+1]), Z: float64(n.value[at+2])}
}

func (t *spaceTable) position(i, j, k int) r3.Vec {
	return r3.Scale(math.Exp(float64(i)*spaceLnR), spherical(float64(j)*math.Pi/float64(t.nt-1), float64(k)*2*math.Pi/float64(t.np)))
}

// traceSpace traces the lines of all nodes that seen lets in, with a margin [solar
// radii] that covers the stencil.
func (c *Corona) traceSpace(ctx context.Context, s Settings) (*spaceTable, error) {
	t := &spaceTable{
		nr: int(math.Ceil(math.Log(max(s.Outer, 1.01))/spaceLnR)) + 2,
		nt: int(math.Round(math.Pi/spaceTheta)) + 1,
		np: int(math.Round(2 * math.Pi / spaceTheta)),
	}
	t.at = make([]int32, t.nr*t.nt*t.np)
	var wanted [][3]int16
	for i := range t.nr {
		for j := range t.nt {
			for k := range t.np {
				n := (i*t.nt+j)*t.np + k
				t.at[n] = -1
				p := t.position(i, j, k)
				if s.Seen == nil || s.Seen(p, 3*spaceTheta*norm(p)) {
					t.at[n] = int32(len(wanted))
					wanted = append(wanted, [3]int16{int16(i), int16(j), int16(k)})
				}
			}
		}
	}
	t.node = make([]spaceNode, len(wanted))
	const batch = 64
	scratch := make([][2][]knot, parallel.Workers(s.Workers))
	how := c.tracing()
	err := parallel.For(ctx, (len(wanted)+batch-1)/batch, s.Workers, func(w, b int) error {
		for n := b * batch; n < min((b+1)*batch, len(wanted)); n++ {
			q := wanted[n]
			l := c.line(how, t.position(int(q[0]), int(q[1]), int(q[2])), &scratch[w])
			t.node[n] = l.node()
		}
		return nil
	})
	return t, err
}

func (l *spatialLine) node() spaceNode {
	n := spaceNode{kind: l.kind, ends: uint8(l.ends)}
	n.value[atApex], n.value[atTop] = float32(l.apex), float32(l.top)
	for e := range 2 {
		n.value[atTau+e] = float32(l.tau[e])
		f := l.foot[e]
		n.value[atFoot+3*e], n.value[atFoot+3*e+1], n.value[atFoot+3*e+2] = float32(f.X), float32(f.Y), float32(f.Z)
	}
	n.value[atFrame], n.value[atFrame+1], n.value[atFrame+2] = float32(l.e1.X), float32(l.e1.Y), float32(l.e1.Z)
	return n
}

// Limits within which neighbouring nodes belong to one family of lines.
const (
	footJump  = 8 * math.Pi / 180 // their feet [rad]
	frameTurn = 0.9               // cosine of the turn of their frames
	apexRatio = 1.3
	// An interpolated time whose correction beyond the linear is more than this share of
	// it is traced afresh: the error control of the table.
	curved = 0.02
)

// akin says whether two nodes belong to one family, so that interpolating between them
// is sound.
func (n *spaceNode) akin(o *spaceNode) bool {
	if n.kind != o.kind || n.ends != o.ends || n.ends == 0 || n.kind == NullLine {
		return false
	}
	if n.ends == 2 {
		if a, b := n.value[atApex], o.value[atApex]; a > apexRatio*b || b > apexRatio*a {
			return false
		}
	} else if math.IsInf(float64(n.value[atTop]), 0) != math.IsInf(float64(o.value[atTop]), 0) {
		return false
	}
	for e := range int(n.ends) {
		d := r3.Sub(n.vector(atFoot+3*e), o.vector(atFoot+3*e))
		if r3.Dot(d, d) > footJump*footJump {
			return false
		}
	}
	return r3.Dot(n.vector(atFrame), o.vector(atFrame)) > frameTurn
}

// lookup interpolates the line through p: linear in the cell, with the second
// differences along each axis taken from the nodes around it. It returns false where
// the cell or its neighbourhood does not hold one family of lines.
func (t *spaceTable) lookup(p r3.Vec) (l spatialLine, ok bool) {
	r := norm(p)
	u := math.Log(r) / spaceLnR
	v := math.Acos(max(-1, min(1, p.Z/r))) / math.Pi * float64(t.nt-1)
	w := math.Atan2(p.Y, p.X) / (2 * math.Pi) * float64(t.np)
	if w < 0 {
		w += float64(t.np)
	}
	i, j, k := int(u), int(v), int(w)
	if u < 0 || i > t.nr-2 {
		return l, false
	}
	j = min(j, t.nt-2)
	x := [3]float64{u - float64(i), v - float64(j), w - float64(k)}
	get := func(i, j, k int) *spaceNode {
		if i < 0 || i >= t.nr || j < 0 || j >= t.nt {
			return nil
		}
		n := t.at[(i*t.nt+j)*t.np+(k+t.np)%t.np]
		if n < 0 {
			return nil
		}
		return &t.node[n]
	}
	var corner [8]*spaceNode
	for n := range corner {
		q := get(i+n>>2, j+n>>1&1, k+n&1)
		if q == nil || n > 0 && !corner[0].akin(q) {
			return l, false
		}
		corner[n] = q
	}
	if corner[0].ends == 0 || corner[0].kind == NullLine {
		return l, false
	}
	var linear, bent [nodeValues]float64
	for n, q := range corner {
		g := 1.0
		for a := range 3 {
			if n>>(2-a)&1 == 1 {
				g *= x[a]
			} else {
				g *= 1 - x[a]
			}
		}
		for m, y := range q.value {
			linear[m] += g * float64(y)
		}
	}
	// Second differences along each axis, on the four edges of the cell.
	for a := range 3 {
		step := [3]int{}
		step[a] = 1
		b, c := (a+1)%3, (a+2)%3
		scale := -x[a] * (1 - x[a]) / 2
		for e := range 4 {
			at := [3]int{}
			at[b], at[c] = e>>1, e&1
			g := 1.0
			for _, o := range [2]int{b, c} {
				if at[o] == 1 {
					g *= x[o]
				} else {
					g *= 1 - x[o]
				}
			}
			lo := corner[at[0]<<2|at[1]<<1|at[2]]
			hi := corner[(at[0]+step[0])<<2|(at[1]+step[1])<<1|(at[2]+step[2])]
			before := get(i+at[0]-step[0], j+at[1]-step[1], k+at[2]-step[2])
			after := get(i+at[0]+2*step[0], j+at[1]+2*step[1], k+at[2]+2*step[2])
			if before != nil && !lo.akin(before) {
				before = nil
			}
			if after != nil && !hi.akin(after) {
				after = nil
			}
			if before == nil && after == nil {
				continue
			}
			half := 1.0
			if before != nil && after != nil {
				half = 0.5
			}
			for m := range nodeValues {
				d := 0.0
				if before != nil {
					d += float64(before.value[m]) - 2*float64(lo.value[m]) + float64(hi.value[m])
				}
				if after != nil {
					d += float64(lo.value[m]) - 2*float64(hi.value[m]) + float64(after.value[m])
				}
				bent[m] += scale * g * half * d
			}
		}
	}
	for e := range int(corner[0].ends) {
		if math.Abs(bent[atTau+e]) > curved*linear[atTau+e] {
			return l, false
		}
	}
	if math.Abs(bent[atTop]) > curved*math.Abs(linear[atTop]) { // false for NaN
		return l, false
	}
	for m := range linear {
		linear[m] += bent[m]
	}
	vector := func(m int) r3.Vec { return r3.Vec{X: linear[m], Y: linear[m+1], Z: linear[m+2]} }
	l.kind, l.ends = corner[0].kind, int(corner[0].ends)
	l.apex, l.tau, l.top = linear[atApex], [2]float64{linear[atTau], linear[atTau+1]}, linear[atTop]
	if math.IsNaN(l.top) || l.ends != 1 { // differences of -Inf
		l.top = math.Inf(-1)
	}
	for e := range l.ends {
		l.foot[e] = r3.Unit(vector(atFoot + 3*e))
		l.tau[e] = max(l.tau[e], 0)
	}
	l.e1 = r3.Unit(vector(atFrame))
	return l, true
}

// longest returns the travel time [s] that one train in a thousand exceeds.
func (t *spaceTable) longest(farEnd, inward bool) float64 {
	var times []float64
	for i := range t.node {
		n := &t.node[i]
		a, b := float64(n.value[atTau]), float64(n.value[atTau+1])
		switch {
		case n.kind == NullLine || n.ends == 0:
		case n.ends == 2 && farEnd:
			times = append(times, a, b)
		case n.ends == 2:
			times = append(times, min(a, b))
		default:
			times = append(times, a)
			if top := float64(n.value[atTop]); inward && top > 0 {
				times = append(times, top)
			}
		}
	}
	if len(times) == 0 {
		return 0
	}
	slices.Sort(times)
	return 1.1 * times[len(times)*999/1000]
}
