package wave

import "math"

// A lattice spreads sites over the sphere: rings of equal spacing in colatitude,
// each with sites of equal spacing in azimuth, one cell apart both ways.
type lattice struct {
	rings  int
	width  float64 // of a ring [rad]
	count  []int   // sites per ring
	offset []int   // index of a ring's first site
}

func newLattice(cell float64) lattice {
	l := lattice{rings: max(2, int(math.Round(math.Pi/cell)))}
	l.width = math.Pi / float64(l.rings)
	total := 0
	for i := range l.rings {
		n := max(4, int(math.Round(2*math.Pi*math.Sin((float64(i)+0.5)*l.width)/cell)))
		l.count = append(l.count, n)
		l.offset = append(l.offset, total)
		total += n
	}
	return l
}

// A Site is one site's share in the motion of a footpoint.
type Site struct {
	ID     uint64
	Weight float64
}

// Footpoint returns the four sites around a footpoint (colatitude, azimuth [rad])
// and their weights: cosine and sine of a quarter turn between neighbours, both
// ways, so that the squares add up to one and the motion is smooth with the same
// variance everywhere.
func (d *Driver) Footpoint(colatitude, azimuth float64) [4]Site {
	l := &d.sites
	u := colatitude/l.width - 0.5
	i := int(math.Floor(u))
	w := quarter(u - float64(i))
	var out [4]Site
	for k := range 2 {
		ring, az := i+k, azimuth
		switch { // beyond the last ring lies the same ring on the far side of the pole
		case ring < 0:
			ring, az = 0, az+math.Pi
		case ring >= l.rings:
			ring, az = l.rings-1, az+math.Pi
		}
		n := l.count[ring]
		v := az / (2 * math.Pi) * float64(n)
		j := math.Floor(v)
		x := quarter(v - j)
		a := int(j) % n
		if a < 0 {
			a += n
		}
		b := a + 1
		if b == n {
			b = 0
		}
		out[2*k] = Site{uint64(l.offset[ring] + a), w[k] * x[0]}
		out[2*k+1] = Site{uint64(l.offset[ring] + b), w[k] * x[1]}
	}
	return out
}

// quarter returns cosine and sine of x quarter turns, 0 <= x <= 1: from a table, and by
// their Taylor series between its nodes, to 1e-14.
func quarter(x float64) [2]float64 {
	const h = math.Pi / 2 / quarters
	i := int(x * quarters)
	d := (x*quarters - float64(i)) * h
	d2 := d * d
	c, s := 1-d2/2*(1-d2/12), d*(1-d2/6*(1-d2/20))
	at := &quarterTable[i]
	return [2]float64{at[0]*c - at[1]*s, at[1]*c + at[0]*s}
}

// turn returns exp(2 pi i x).
func turn(x float64) complex128 {
	x = 4 * (x - math.Floor(x))
	q := math.Floor(x)
	t := quarter(x - q)
	c, s := t[0], t[1]
	switch int(q) & 3 {
	case 1:
		c, s = -s, c
	case 2:
		c, s = -c, -s
	case 3:
		c, s = s, -c
	}
	return complex(c, s)
}

const quarters = 256

var quarterTable = func() (t [quarters + 1][2]float64) {
	for i := range t {
		s, c := math.Sincos(math.Pi / 2 * float64(i) / quarters)
		t[i] = [2]float64{c, s}
	}
	return t
}()
