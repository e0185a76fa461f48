package model

import (
	"math"

	"gonum.org/v1/gonum/spatial/r3"
)

// A rotation is an orthogonal matrix, by rows.
type rotation [3]r3.Vec

var identity = rotation{{X: 1}, {Y: 1}, {Z: 1}}

func (m *rotation) apply(v r3.Vec) r3.Vec {
	return r3.Vec{X: r3.Dot(m[0], v), Y: r3.Dot(m[1], v), Z: r3.Dot(m[2], v)}
}

func (m *rotation) back(v r3.Vec) r3.Vec {
	return r3.Add(r3.Scale(v.X, m[0]), r3.Add(r3.Scale(v.Y, m[1]), r3.Scale(v.Z, m[2])))
}

// tilt returns the rotation from the solar frame into that of a belt whose axis is
// tipped by angle toward a longitude [rad]; the node of the two equators keeps its
// longitude.
func tilt(angle, toward float64) rotation {
	s, c := math.Sincos(angle)
	sl, cl := math.Sincos(toward)
	axis := r3.Vec{X: s * cl, Y: s * sl, Z: c}
	node := r3.Vec{X: -sl, Y: cl}
	third := r3.Cross(node, axis)
	// In the frame (third, node, axis) longitude starts at toward: turn it back.
	return rotation{
		r3.Sub(r3.Scale(cl, third), r3.Scale(sl, node)),
		r3.Add(r3.Scale(sl, third), r3.Scale(cl, node)),
		axis,
	}
}

// A belt is the geometry of the streamer belt: a tilted axis and a warp, which shifts
// every meridian in latitude by its own amount.
type belt struct {
	turn   rotation
	turned bool
	warp   float64 // [rad]
	waves  float64 // around the Sun
	from   float64 // longitude of a crest [rad]
}

func (b *belt) into(p r3.Vec) r3.Vec {
	if !b.turned {
		return p
	}
	return b.turn.apply(p)
}

func (b *belt) out(p r3.Vec) r3.Vec {
	if !b.turned {
		return p
	}
	return b.turn.back(p)
}

// shift returns the warp at a longitude of the belt's frame [rad].
func (b *belt) shift(phi float64) float64 {
	if b.warp == 0 {
		return 0
	}
	return b.warp * math.Cos(b.waves*(phi-b.from))
}

// latitude returns the latitude of p over the belt's middle, the sheet [rad].
func (b *belt) latitude(p r3.Vec) float64 {
	p = b.into(p)
	rho := fromAxis(p)
	lat := math.Atan2(p.Z, rho)
	if b.warp == 0 {
		return lat
	}
	c2 := rho * rho / (rho*rho + p.Z*p.Z)
	return lat - b.shift(math.Atan2(p.Y, p.X))*c2
}

// A beltField is an axisymmetric field laid along a belt.
//
// The warp is a map of every sphere about the Sun's centre onto itself, colatitude
// theta' = theta + s(phi) sin^2(theta); the magnetic flux through every surface is
// that through its image (the pull-back of a two-form: derived). So the field stays
// free of divergence, its lines are the images of the old ones, each in its own
// half-plane, and the currents that hold the warp are spread through the corona.
type beltField struct {
	Meridional
	*belt
}

// B implements Field.
func (f beltField) B(p r3.Vec) r3.Vec {
	q := f.into(p)
	if f.warp == 0 {
		return f.out(f.Meridional.B(q))
	}
	r := norm(q)
	rho := fromAxis(q)
	st, ct := rho/r, q.Z/r
	s := f.shift(math.Atan2(q.Y, q.X))
	theta := math.Atan2(rho, q.Z)
	image := theta + s*st*st
	br, bt := f.Meridional.Meridional(r, image)
	squeeze := 1.0
	if st > 0 {
		squeeze = math.Sin(image) / st
	}
	return f.out(cartesian(q, r, br*squeeze*(1+2*s*st*ct), bt*squeeze))
}
