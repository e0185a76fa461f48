package invert

import "math"

// A tracker holds one worker's scratch for tracks.
type tracker struct {
	*field
	arm    [2][]point
	points []point
	rows   []float32 // the wave spectra on the track, band.row numbers a point
}

type point struct{ x, y float64 } // zero-based pixel coordinates

// share is the part of the bilinear weight that has to fall on pixels with a value.
const share = 0.5

// corners calls f for the four pixels around (x, y) that lie in the field, with
// their bilinear weights.
func (t *tracker) corners(x, y float64, f func(p int, w float64)) {
	fx, fy := math.Floor(x), math.Floor(y)
	i, j := int(fx), int(fy)
	u, v := x-fx, y-fy
	for k := range 4 {
		w := 1.0
		ii, jj := i, j
		if k&1 == 0 {
			w *= 1 - u
		} else {
			w *= u
			ii++
		}
		if k&2 == 0 {
			w *= 1 - v
		} else {
			w *= v
			jj++
		}
		if w == 0 {
			continue
		}
		if p := t.find(ii, jj); p >= 0 && t.norm[p] > 0 {
			f(p, w)
		}
	}
}

// direction returns the unit vector of the axis at (x, y) that points along
// (dx, dy). Angles of axes are interpolated as unit vectors of the double angle.
func (t *tracker) direction(x, y, dx, dy float64) (ux, uy float64, ok bool) {
	var c, s, sum float64
	t.corners(x, y, func(p int, w float64) {
		if a := t.axis[p]; a != ([2]float32{}) {
			c += w * float64(a[0])
			s += w * float64(a[1])
			sum += w
		}
	})
	m := math.Hypot(c, s)
	if sum < share || m < 0.1*sum { // axes at right angles cancel: no direction
		return 0, 0, false
	}
	c /= m
	ux = math.Sqrt(max((1+c)/2, 0))
	uy = math.Copysign(math.Sqrt(max((1-c)/2, 0)), s)
	if ux*dx+uy*dy < 0 {
		ux, uy = -ux, -uy
	}
	return ux, uy, true
}

// trace integrates the directions both ways from field pixel p by the midpoint
// rule in steps of one pixel, up to n points an arm, and puts the points into
// t.points in order of distance along the track. An arm ends where the field or
// the directions end. Outward is away from the Sun as the whole track has it;
// rise is the gain in distance from the Sun over the track's length, 0..1.
// centre is the index of the pixel.
func (t *tracker) trace(p, n int) (centre int, rise float64) {
	ix, iy := t.at(p)
	ry, rz := t.grid.Sky(ix, iy)
	// The outward direction in the image, from the sky by the roll.
	s, c := math.Sincos(t.grid.Roll * math.Pi / 180)
	ex, ey := c*ry+s*rz, -s*ry+c*rz
	for a := range t.arm {
		sign := 1 - 2*float64(a)
		arm := t.arm[a][:0]
		x, y := float64(ix), float64(iy)
		dx, dy := sign*ex, sign*ey
		if a == 1 && len(t.arm[0]) > 0 { // opposite to the first arm, also where the axis is tangential
			dx, dy = x-t.arm[0][0].x, y-t.arm[0][0].y
		}
		for len(arm) < n {
			ux, uy, ok := t.direction(x, y, dx, dy)
			if !ok {
				break
			}
			mx, my, ok := t.direction(x+ux/2, y+uy/2, ux, uy)
			if !ok {
				break
			}
			nx, ny := x+mx, y+my
			sum := 0.0
			t.corners(nx, ny, func(_ int, w float64) { sum += w })
			if sum < share {
				break
			}
			x, y, dx, dy = nx, ny, mx, my
			arm = append(arm, point{x, y})
		}
		t.arm[a] = arm
	}
	out, in := t.arm[0], t.arm[1]
	far := func(arm []point) float64 {
		q := point{float64(ix), float64(iy)}
		if len(arm) > 0 {
			q = arm[len(arm)-1]
		}
		return math.Hypot(q.x+1-t.grid.CentreX, q.y+1-t.grid.CentreY)
	}
	if len(out)+len(in) > 0 {
		rise = (far(out) - far(in)) / float64(len(out)+len(in))
	}
	if rise < 0 {
		out, in, rise = in, out, -rise
	}
	t.points = t.points[:0]
	for i := len(in) - 1; i >= 0; i-- {
		t.points = append(t.points, in[i])
	}
	t.points = append(t.points, point{float64(ix), float64(iy)})
	t.points = append(t.points, out...)
	return len(in), rise
}

// sample puts the wave spectra at t.points into t.rows, bilinear over the pixels
// that have one.
func (t *tracker) sample() []float32 {
	row := t.band.row
	if need := len(t.points) * row; cap(t.rows) < need {
		t.rows = make([]float32, need)
	}
	rows := t.rows[:len(t.points)*row]
	clear(rows)
	for i, q := range t.points {
		out := rows[i*row : (i+1)*row]
		sum := 0.0
		t.corners(q.x, q.y, func(_ int, w float64) { sum += w })
		t.corners(q.x, q.y, func(p int, w float64) {
			blas.Saxpy(row, float32(w/sum)*t.norm[p], t.spec[p*row:(p+1)*row], 1, out, 1)
		})
	}
	return rows
}
