package invert

import "math"

// The errors of the directions move the tracks, and the speeds with them: where arrival
// times change across a track too, a small turn changes the slope of the lags in
// proportion. With tracks held at the mean directions of all realisations, the speeds of
// pair on a wedge of quick scatter by 6 km/s in its lowest bin of height and errors without
// the track's part hold their mean in 72 % of the cases; with their own tracks they scatter by
// 29 km/s (own simulation, 64 realisations).
//
// So at one pixel in swayLattice both ways the track is traced again along directions that
// are all turned by what the halves of the spectrum tell about their errors, one way and the
// other. What the frequencies disagree on in the speeds' differences is in the resampled error
// of any track already, and is taken off. The mean variance within swayReach pixels joins that
// of the speed.

// swing turns the direction of a pixel both ways by the error of the nearest lattice point.
func (r *run) swing(_ *worker, p int) {
	a := r.axis[p]
	c, s := float32(1), float32(0)
	x, y := r.at(p)
	if q := r.find(nearestLattice(x), nearestLattice(y)); q >= 0 && r.turns[q] != ([2]float32{}) {
		c, s = r.turns[q][0], r.turns[q][1]
	}
	r.swung[0][p] = [2]float32{float32(a[0]*c) - float32(a[1]*s), float32(a[1]*c) + float32(a[0]*s)}
	r.swung[1][p] = [2]float32{float32(a[0]*c) + float32(a[1]*s), float32(a[1]*c) - float32(a[0]*s)}
}

// nearestLattice returns the line of the lattice of directions next to x.
func nearestLattice(x int) int { return (x + angleLattice/2) / angleLattice * angleLattice }

// on says whether a pixel lies on a lattice.
func (r *run) on(lattice, p int) bool {
	x, y := r.at(p)
	return x%lattice == 0 && y%lattice == 0
}

// One pixel in swayLattice both ways tells of those within swayReach, and none of more than
// swayMost: a speed that a turn changes by half is out of its expansion, and alone would
// take the speeds of all pixels around.
const (
	swayLattice = 2 * angleLattice
	swayReach   = 9
	swayMost    = 0.25
)

// sway measures a pixel of the lattice on tracks along the turned directions.
func (r *run) sway(w *worker, p int) {
	if !r.on(swayLattice, p) {
		return
	}
	out := r.moved[p*len(w.estimators) : (p+1)*len(w.estimators)]
	for i := range out {
		out[i] = float32(math.NaN())
	}
	if r.axis[p] == ([2]float32{}) || r.turns[p] == ([2]float32{}) {
		return
	}
	for k, axis := range [3][][2]float32{r.swung[0], r.swung[1], r.axis} {
		centre, rise := w.track.along(axis, p, r.opt.Track/2)
		n := len(w.track.points)
		if n < r.leastTrack() {
			return
		}
		rows := w.track.sample()
		w.noise = r.noise(p)
		for i, e := range w.estimators {
			m := e.measure(w, rows, n, centre, rise >= leastRise)
			s := &w.swayed[k][i]
			s.v, s.pull, s.share = math.NaN(), append(s.pull[:0], m.pull...), append(s.share[:0], m.share...)
			if m.ok && m.v > 0 {
				s.v = m.v
			}
		}
	}
	for i := range out {
		out[i] = float32(systematic(&w.swayed[0][i], &w.swayed[1][i], &w.swayed[2][i]))
	}
}

// A swayed is a speed on one of the tracks.
type swayed struct {
	v           float64 // [km/s]; NaN: not significant
	pull, share []float64
}

// systematic returns the squared relative error of a speed that tracks turned either way and
// the track between them tell: with x a turn in standard deviations ln v = a + d x + e x^2,
// whose variance is d^2 + 2 e^2 (derived). Each square is taken less what it is by chance.
func systematic(left, right, middle *swayed) float64 {
	if math.IsNaN(left.v * right.v * middle.v) {
		return math.NaN()
	}
	d, e := math.Log(left.v/right.v)/2, math.Log(left.v*right.v/(middle.v*middle.v))/2
	for j, m := range middle.pull {
		l, r := left.v*left.pull[j], right.v*right.pull[j]
		left.pull[j], right.pull[j] = (l-r)/2, (l+r)/2-middle.v*m
	}
	return min(d*d-resampled(left.pull, middle.share)+2*(e*e-resampled(right.pull, middle.share)), swayMost)
}

// withTrack returns the error of a speed v of estimator i, err what the frequencies tell.
func (r *run) withTrack(p, i int, v, err float64) float64 {
	sum, n := 0.0, 0
	r.lattice(swayLattice, swayReach, p, func(q int) {
		if m := float64(r.moved[q*len(r.estimatorMaps)+i]); !math.IsNaN(m) {
			sum += m
			n++
		}
	})
	return math.Hypot(err, v*math.Sqrt(max(sum, 0)/float64(max(n, 1))))
}

// lattice calls f for the pixels of a lattice within reach of p either way.
func (r *run) lattice(step, reach, p int, f func(q int)) {
	up := func(x int) int { return (max(x, 0) + step - 1) / step * step }
	x, y := r.at(p)
	for j := up(y - reach); j <= y+reach; j += step {
		for i := up(x - reach); i <= x+reach; i += step {
			if q := r.find(i, j); q >= 0 {
				f(q)
			}
		}
	}
}
