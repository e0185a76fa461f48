package invert

import "math"

// The errors of the directions move the tracks, and the speeds with them: where arrival
// times change across a track too, a small turn changes the slope of the lags in
// proportion. With tracks held at the mean directions of all realisations, the speeds of
// pair on quick scatter by 6.5 km/s in its lowest bin of height, with their own tracks by 20
// (own simulation, 11 realisations).
//
// So at one pixel in angleLattice both ways the track is traced twice more, along directions
// that are all turned by what the halves of the spectrum tell about their errors, one way and
// the other. Half the difference of the logarithms of both speeds is a draw of that error.
// What the frequencies disagree on in it is in the resampled error of any track already, which
// is why its square is taken less the square of its own resampled error. The mean within
// angleReach pixels joins the variance of the speed.

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

// nearestLattice returns the line of the lattice next to x.
func nearestLattice(x int) int { return x/angleLattice*angleLattice + angleLattice/2 }

// onLattice says whether a pixel is one of those that tell the errors of directions.
func (r *run) onLattice(p int) bool {
	x, y := r.at(p)
	return x == nearestLattice(x) && y == nearestLattice(y)
}

// sway measures a pixel of the lattice on tracks along the turned directions.
func (r *run) sway(w *worker, p int) {
	if !r.onLattice(p) {
		return
	}
	out := r.moved[p*len(w.estimators) : (p+1)*len(w.estimators)]
	for i := range out {
		out[i] = float32(math.NaN())
	}
	if r.axis[p] == ([2]float32{}) {
		return
	}
	for k := range w.swayed {
		centre, rise := w.track.along(r.swung[k], p, r.opt.Track/2)
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
		out[i] = float32(systematic(&w.swayed[0][i], &w.swayed[1][i]))
	}
}

// systematic returns the squared relative error of a speed that two turned tracks tell, less
// what would make them differ as much by chance.
func systematic(a, b *swayed) float64 {
	if math.IsNaN(a.v) || math.IsNaN(b.v) {
		return math.NaN()
	}
	d := math.Log(a.v/b.v) / 2
	for j := range a.pull {
		a.pull[j] = (a.v*a.pull[j] - b.v*b.pull[j]) / 2
		a.share[j] = (a.share[j] + b.share[j]) / 2
	}
	return d*d - resampled(a.pull, a.share)
}

// A swayed is a speed on a turned track.
type swayed struct {
	v           float64 // [km/s]; NaN: not significant
	pull, share []float64
}

// trackError returns the relative error of a speed of estimator i that comes from the
// track; 0 if it is not known.
func (r *run) trackError(p, i int) float64 {
	sum, n := 0.0, 0
	r.lattice(p, func(q int) {
		if m := float64(r.moved[q*len(r.estimatorMaps)+i]); !math.IsNaN(m) {
			sum += m
			n++
		}
	})
	return math.Sqrt(max(sum, 0) / float64(max(n, 1)))
}

// lattice calls f for the pixels of the lattice within angleReach of that nearest to p.
func (r *run) lattice(p int, f func(q int)) {
	x, y := r.at(p)
	x, y = nearestLattice(x), nearestLattice(y)
	for j := y - angleReach; j <= y+angleReach; j += angleLattice {
		for i := x - angleReach; i <= x+angleReach; i += angleLattice {
			if q := r.find(i, j); q >= 0 {
				f(q)
			}
		}
	}
}
