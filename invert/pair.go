package invert

import "math"

const (
	// leastPairWeight is the band-pass amplitude from which a frequency takes part: the
	// fringes of the band hold 3 % of a flat spectrum's power and more than half of its
	// frequencies.
	leastPairWeight = 0.3
	// pairStep is the step of the slowness search: the phase of the highest frequency
	// at the end of the longest track [rad]. The peak sought is about pi wide.
	pairStep = 0.8
	// pairCoarse is the least number of frequencies that the search looks at.
	pairCoarse = 16
)

// A pairer fits an outward and an inward wave of one speed to a track; one worker's
// scratch.
//
// At every frequency the model is u exp(-i omega p x) + w exp(i omega p x), p the
// slowness, x the distance from the track's middle, u and w free. For given p the
// best u and w are linear least squares, so they are eliminated (variable projection)
// and p maximises the power that the model explains, summed over the band. In terms of
// cos(omega p x) and sin(omega p x), which are orthogonal on a symmetric track, that
// power is |C|^2/sum(cos^2) + |S|^2/sum(sin^2), C and S the projections of the data
// (derived).
//
// Nothing is cut in wavenumber, so the length of the track does not bias the speed.
type pairer struct {
	*band
	step  float64   // between points [km]
	bins  []int     // of the band, that take part
	dp    float64   // step of the search [s/km]
	grid  int       // steps of the search: p = (g+1) dp
	thin  int       // the search looks at every thin-th of bins
	waves [2]*table // of the search, by the parity of the number of points
	norms map[int][2][]float32
	fold  []float64 // a frequency's points from the middle outward: sums and differences of mirrored points
	sums  [4][]float32
	found []float32
	power [3][]float64
	terms []projection
}

// A table holds cos and sin of omega p x: frequency, point from the middle, step.
type table struct{ cos, sin []float32 }

// A projection is C and S of one frequency and the norms of its cosine and sine.
type projection struct{ cr, ci, sr, si, cc, ss float64 }

func newPairer(b *band, points int, step float64) *pairer {
	q := &pairer{band: b, step: step, norms: map[int][2][]float32{}}
	top := 0
	for j, w := range b.weight {
		if w > b.weight[top] {
			top = j
		}
	}
	for j, w := range b.weight {
		if w >= leastPairWeight*b.weight[top] {
			q.bins = append(q.bins, j)
		}
	}
	highest := 2 * math.Pi * b.freq[q.bins[len(q.bins)-1]]
	q.dp = pairStep / (highest * step * float64(points-1) / 2)
	q.grid = int(math.Ceil(1 / (slowest * q.dp)))
	q.thin = max(len(q.bins)/pairCoarse, 1)
	q.fold = make([]float64, len(q.bins)*4*(points/2+1))
	for i := range q.sums {
		q.sums[i] = make([]float32, q.grid)
	}
	q.found = make([]float32, q.grid)
	for i := range q.power {
		q.power[i] = make([]float64, len(q.bins))
	}
	q.terms = make([]projection, len(q.bins))
	for parity := range q.waves {
		t := &table{}
		for b := 0; b < len(q.bins); b += q.thin {
			for k := range points/2 + 1 {
				x := (float64(k) + 0.5*float64(1-parity)) * step
				for g := range q.grid {
					s, c := math.Sincos(2 * math.Pi * q.freq[q.bins[b]] * q.dp * float64(g+1) * x)
					t.cos, t.sin = append(t.cos, float32(c)), append(t.sin, float32(s))
				}
			}
		}
		q.waves[parity] = t
	}
	return q
}

// squares returns the sums of cos^2 and sin^2 over n points, theta the phase from one
// to the next.
func squares(n int, theta float64) (cc, ss float64) {
	d := float64(n)
	if s := math.Sin(theta); math.Abs(s) > 1e-9 {
		d = math.Sin(float64(n)*theta) / s
	} else if n%2 == 0 && math.Cos(theta) < 0 {
		d = -d
	}
	return (float64(n) + d) / 2, (float64(n) - d) / 2
}

// least is the sum of squares, over the number of points, below which a wave has no
// part in a fit: the track does not see it.
const leastSquares = 1e-4

// normals returns 1/sum(cos^2) and 1/sum(sin^2) on the grid of the search.
func (q *pairer) normals(n int) [2][]float32 {
	v, ok := q.norms[n]
	if ok {
		return v
	}
	inverse := func(x float64) float32 {
		if x < leastSquares*float64(n) {
			return 0
		}
		return float32(1 / x)
	}
	for b := 0; b < len(q.bins); b += q.thin {
		for g := range q.grid {
			cc, ss := squares(n, 2*math.Pi*q.freq[q.bins[b]]*q.dp*float64(g+1)*q.step)
			v[0], v[1] = append(v[0], inverse(cc)), append(v[1], inverse(ss))
		}
	}
	q.norms[n] = v
	return v
}

// load folds the spectra of n points about the middle of the track.
func (q *pairer) load(rows []float32, n int) (m int) {
	row, nf := q.row, len(q.freq)
	m = (n + 1) / 2
	for k := range m {
		x, y := rows[((n-1)/2-k)*row:], rows[(n/2+k)*row:]
		twice := float32(1)
		if n%2 == 1 && k == 0 {
			twice = 0.5 // the middle is its own mirror image
		}
		for b, j := range q.bins {
			f := q.fold[(b*m+k)*4:]
			f[0], f[1] = float64(twice*(y[j]+x[j])), float64(twice*(y[nf+j]+x[nf+j]))
			f[2], f[3] = float64(y[j]-x[j]), float64(y[nf+j]-x[nf+j])
		}
	}
	return m
}

// search returns the step of the grid that explains most power.
func (q *pairer) search(n, m int) int {
	t := q.waves[n%2]
	norm := q.normals(n)
	clear(q.found)
	points := len(t.cos) / (q.grid * ((len(q.bins) + q.thin - 1) / q.thin))
	for b := 0; b < len(q.bins); b += q.thin {
		for i := range q.sums {
			clear(q.sums[i])
		}
		for k := range m {
			f := q.fold[(b*m+k)*4 : (b*m+k)*4+4]
			at := (b/q.thin*points + k) * q.grid
			c, s := t.cos[at:at+q.grid], t.sin[at:at+q.grid]
			blas.Saxpy(q.grid, float32(f[0]), c, 1, q.sums[0], 1)
			blas.Saxpy(q.grid, float32(f[1]), c, 1, q.sums[1], 1)
			blas.Saxpy(q.grid, float32(f[2]), s, 1, q.sums[2], 1)
			blas.Saxpy(q.grid, float32(f[3]), s, 1, q.sums[3], 1)
		}
		at := b / q.thin * q.grid
		nc, ns := norm[0][at:at+q.grid], norm[1][at:at+q.grid]
		cr, ci, sr, si := q.sums[0][:q.grid], q.sums[1][:q.grid], q.sums[2][:q.grid], q.sums[3][:q.grid]
		for g := range q.found {
			c := float32(cr[g]*cr[g]) + float32(ci[g]*ci[g])
			s := float32(sr[g]*sr[g]) + float32(si[g]*si[g])
			q.found[g] += float32(c*nc[g]) + float32(s*ns[g])
		}
	}
	best := 0
	for g, e := range q.found {
		if e > q.found[best] {
			best = g
		}
	}
	return best
}

// explain returns the power that slowness p explains, by frequency in out and in all.
func (q *pairer) explain(p float64, n, m int, out []float64) float64 {
	sum := 0.0
	for b, j := range q.bins {
		theta := 2 * math.Pi * q.freq[j] * p * q.step
		s1, c1 := math.Sincos(theta)
		c, s := 1.0, 0.0
		if n%2 == 0 {
			s, c = math.Sincos(theta / 2)
		}
		var v projection
		f := q.fold[b*m*4 : (b+1)*m*4]
		for len(f) >= 4 {
			v.cr += c * f[0]
			v.ci += c * f[1]
			v.sr += s * f[2]
			v.si += s * f[3]
			c, s = c*c1-s*s1, s*c1+c*s1
			f = f[4:]
		}
		v.cc, v.ss = squares(n, theta)
		e := 0.0
		if v.cc > leastSquares*float64(n) {
			e += (v.cr*v.cr + v.ci*v.ci) / v.cc
		}
		if v.ss > leastSquares*float64(n) {
			e += (v.sr*v.sr + v.si*v.si) / v.ss
		}
		q.terms[b] = v
		out[b] = e
		sum += e
	}
	return sum
}

// A pair is a fitted pair of waves.
type pair struct {
	speed
	inward float64 // share of the waves toward falling index in the power of both; NaN: the track is too short to tell
}

// fit fits the spectra of n points. The waves of the two directions share one speed,
// so it does not matter where on the track the pixel lies.
func (q *pairer) fit(rows []float32, n int) pair {
	m := q.load(rows, n)
	p := float64(q.search(n, m)+1) * q.dp
	h := q.dp / 2
	a, b, c := q.power[0], q.power[1], q.power[2]
	var d, curve float64
refine:
	for range 12 {
		ea, ec := q.explain(p-h, n, m, a), q.explain(p+h, n, m, c)
		eb := q.explain(p, n, m, b) // last: its terms are used below
		curve = ea + ec - 2*eb
		d = math.Copysign(1, ec-ea)
		if curve < 0 {
			d = max(-2, min(2, (ea-ec)/(2*curve)))
		}
		p += d * h
		switch {
		case !(curve < 0) || math.Abs(d) == 2:
		case h == q.dp/2:
			h = q.dp / 16
			d = 2
		case math.Abs(d) < 0.5: // else the parabola has moved too far to be exact
			break refine
		}
	}
	var r pair
	if !(p > 0) || !(curve < 0) || math.Abs(d) > 0.5 {
		return r
	}
	// What each frequency moved the maximum, and its share in the curvature.
	for i := range b {
		k := a[i] + c[i] - 2*b[i]
		a[i], c[i] = ((a[i]-c[i])/2-d*k)*h/curve, k/curve
	}
	r.v = 1 / p
	r.err = r.v * r.v * math.Sqrt(resampled(a, c))
	r.ok = r.err < r.v
	r.pull, r.share = a, c
	r.inward = q.inward(n)
	return r
}

// inward returns the share of the waves toward falling index. Frequencies whose wave is
// too long to tell the directions apart on this track do not count.
func (q *pairer) inward(n int) float64 {
	const least = 0.1
	var up, down float64
	for _, v := range q.terms {
		if min(v.cc, v.ss) < least*float64(n) {
			continue
		}
		cr, ci, sr, si := v.cr/v.cc, v.ci/v.cc, v.sr/v.ss, v.si/v.ss
		// u, w = (C +- i S)/2 with C, S over their norms.
		both, cross := (cr*cr+ci*ci+sr*sr+si*si)/4, (cr*si-ci*sr)/2
		up += both - cross
		down += both + cross
	}
	return down / (up + down)
}
