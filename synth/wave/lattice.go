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
	s, c := math.Sincos((u - float64(i)) * math.Pi / 2)
	var out [4]Site
	for k, w := range [2]float64{c, s} {
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
		sv, cv := math.Sincos((v - j) * math.Pi / 2)
		a := ((int(j) % n) + n) % n
		b := (a + 1) % n
		out[2*k] = Site{uint64(l.offset[ring] + a), w * cv}
		out[2*k+1] = Site{uint64(l.offset[ring] + b), w * sv}
	}
	return out
}
