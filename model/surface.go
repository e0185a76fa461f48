package model

import (
	"context"
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/synth/parallel"
)

// A depthMap says how far inside the closed region a point of the surface lies: the
// angle [rad] to the nearest point of its boundary, negative in the open region.
type depthMap struct {
	nt, np int
	depth  []float64
}

const depthStep = 1.5 * math.Pi / 180

// traceDepths finds which lines from the surface close below closedBelow.
func (c *Corona) traceDepths(ctx context.Context, workers int) (*depthMap, error) {
	m := &depthMap{nt: int(math.Round(math.Pi/depthStep)) + 1, np: int(math.Round(2 * math.Pi / depthStep))}
	n := m.nt * m.np
	at := func(j, k int) r3.Vec {
		return spherical(float64(j)*math.Pi/float64(m.nt-1), float64(k)*2*math.Pi/float64(m.np))
	}
	how := c.tracing()
	how.far = c.closedBelow
	scratch := make([][]knot, parallel.Workers(workers))
	closes := func(w int, p r3.Vec) bool {
		sign := 1.0
		if r3.Dot(c.field.B(p), p) < 0 {
			sign = -1
		}
		var end ending
		scratch[w], end = how.follow(scratch[w][:0], c.field, p, sign)
		return end == landed
	}
	closed := make([]bool, n)
	if err := parallel.For(ctx, m.nt, workers, func(w, j int) error {
		for k := range m.np {
			closed[j*m.np+k] = closes(w, at(j, k))
		}
		return nil
	}); err != nil {
		return nil, err
	}
	// The boundary, by halving between neighbours of different kind.
	edges := make([][]r3.Vec, m.nt)
	if err := parallel.For(ctx, m.nt, workers, func(w, j int) error {
		for k := range m.np {
			for _, o := range [2][2]int{{j, (k + 1) % m.np}, {j + 1, k}} {
				if o[0] == m.nt || closed[j*m.np+k] == closed[o[0]*m.np+o[1]] {
					continue
				}
				a, b := at(j, k), at(o[0], o[1])
				for range 8 {
					if h := r3.Unit(r3.Add(a, b)); closes(w, h) == closed[j*m.np+k] {
						a = h
					} else {
						b = h
					}
				}
				edges[j] = append(edges[j], a)
			}
		}
		return nil
	}); err != nil {
		return nil, err
	}
	m.depth = make([]float64, n)
	return m, parallel.For(ctx, m.nt, workers, func(_, j int) error {
		for k := range m.np {
			p := at(j, k)
			best := -1.0
			for _, row := range edges {
				for _, e := range row {
					best = max(best, r3.Dot(p, e))
				}
			}
			d := math.Acos(min(1, best))
			if !closed[j*m.np+k] {
				d = -d
			}
			m.depth[j*m.np+k] = d
		}
		return nil
	})
}

// at interpolates the depth at a unit vector, linearly in both angles.
func (m *depthMap) at(p r3.Vec) float64 {
	u := math.Acos(max(-1, min(1, p.Z))) / math.Pi * float64(m.nt-1)
	v := math.Atan2(p.Y, p.X) / (2 * math.Pi) * float64(m.np)
	if v < 0 {
		v += float64(m.np)
	}
	j, k := min(int(u), m.nt-2), int(v)
	u -= float64(j)
	v -= float64(k)
	k %= m.np
	k1 := (k + 1) % m.np
	row := m.depth[j*m.np:]
	next := m.depth[(j+1)*m.np:]
	return (1-u)*((1-v)*row[k]+v*row[k1]) + u*((1-v)*next[k]+v*next[k1])
}
