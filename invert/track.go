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

// A corner is one of the pixels around a point, with its bilinear weight.
type corner struct {
	p int
	w float64
}

// corners returns the up to four pixels around (x, y) that have a series, and the
// sum of their weights.
func (f *field) corners(x, y float64, cs *[4]corner) (n int, sum float64) {
	fx, fy := math.Floor(x), math.Floor(y)
	u, v := x-fx, y-fy
	i, j := int(fx), int(fy)
	for k, w := range [4]float64{(1 - u) * (1 - v), u * (1 - v), (1 - u) * v, u * v} {
		if w == 0 {
			continue
		}
		if p := f.find(i+k&1, j+k>>1); p >= 0 && f.norm[p] > 0 {
			cs[n] = corner{p, w}
			n++
			sum += w
		}
	}
	return n, sum
}

// direction returns the unit vector of the axis at (x, y) that points along
// (dx, dy). Angles of axes are interpolated as unit vectors of the double angle.
func (f *field) direction(x, y, dx, dy float64) (ux, uy float64, ok bool) {
	var cs [4]corner
	n, _ := f.corners(x, y, &cs)
	var c, s, sum float64
	for _, q := range cs[:n] {
		if a := f.axis[q.p]; a != ([2]float32{}) {
			c += q.w * float64(a[0])
			s += q.w * float64(a[1])
			sum += q.w
		}
	}
	m := math.Sqrt(c*c + s*s)
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
			var cs [4]corner
			if _, sum := t.corners(nx, ny, &cs); sum < share {
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
		var cs [4]corner
		n, sum := t.corners(q.x, q.y, &cs)
		for _, c := range cs[:n] {
			blas.Saxpy(row, float32(c.w/sum)*t.norm[c.p], t.spec[c.p*row:(c.p+1)*row], 1, out, 1)
		}
	}
	return rows
}
