package invert

import "math"

const (
	leastLagCoherence = 0.3 // below it a lag cannot be measured: noise alone reaches about that
	leastLags         = 5   // points of a fit
	slowest           = 50. // slowest wave whose lags are searched for [km/s]
	lagSteps          = 32. // steps of the search grid in one period of the band's centre
)

// A lagger measures phase speeds on tracks; one worker's scratch.
type lagger struct {
	*band
	step    float64 // between points [km]
	kzero   float64 // weight of zero wavenumber in the separation
	power   float64 // of the coherence in the weights of the fit
	pad     int
	centre  float64 // of the band [Hz]
	grid    float64 // step of the lag search [s]
	reach   int     // lags searched, in steps either way
	phasor  []float32
	kernel  map[int][]float32
	wave    [2][]float32
	cross   []float32
	parts   []float32
	pure    []complex128
	product []float32
	fit     []lag
	terms   [2][]float64
	omega   []float32
	share   []float32    // of each frequency in the curvature of the peaks
	pull    [2][]float32 // what each frequency adds to the fit's weighted sums of tau and s tau
}

// A lag is that of one point of a track against its centre.
type lag struct{ s, tau, weight float64 } // [km, s]

// points is the longest track, step the distance of its points [km], grid the step
// of the lag search [s]: the parabola's error is (2 pi f grid)^2/12 of the distance
// to the nearest step, 0.3 % of at most half a step at lagSteps.
func newLagger(b *band, opt *Options, points int, step, grid float64) *lagger {
	l := &lagger{band: b, step: step, grid: grid, pad: opt.Padding, centre: opt.Centre, kzero: opt.KZero.weight(), power: 1, kernel: map[int][]float32{}}
	longest := min(step*float64(points-1)/slowest, float64(b.frames)*b.cadence/4)
	l.reach = max(int(longest/l.grid), 4)
	l.phasor = make([]float32, (2*l.reach+1)*b.row)
	n := len(b.freq)
	for m := -l.reach; m <= l.reach; m++ {
		r := l.phasor[(m+l.reach)*b.row:]
		for j, f := range b.freq {
			s, c := math.Sincos(2 * math.Pi * f * float64(m) * l.grid)
			r[j], r[n+j] = float32(c), float32(-s)
		}
	}
	l.parts = make([]float32, points*b.row)
	l.product = make([]float32, points*b.row)
	l.wave[0] = make([]float32, points*b.row)
	l.wave[1] = make([]float32, points*b.row)
	l.cross = make([]float32, b.row)
	l.share, l.omega = make([]float32, n), make([]float32, n)
	for j, f := range b.freq {
		l.omega[j] = float32(2 * math.Pi * f)
	}
	for i := range l.terms {
		l.terms[i] = make([]float64, n)
	}
	for i := range l.pull {
		l.pull[i] = make([]float32, n)
	}
	return l
}

// separate splits the spectra of n points into waves that run toward rising and
// toward falling index: the hard quadrant filter of the (k, omega) plane, written
// as a projection in s.
//
// At one frequency, a Fourier transform over M = padding n points, the choice of
// k of one sign and the way back multiply the column of points by the Toeplitz
// matrix P(d) = sum_k w_k exp(2 pi i k d / M) / M, with w = 1, 0 or, at k = 0, the
// weight asked for (the Nyquist column of an even M is halved). Its real part is
// half the identity plus (w_0 - 1/2)/M everywhere; its imaginary part is the
// antisymmetric kernel H. So one real multiplication by H serves both directions.
// With exp(-i omega t) for a spectrum, a wave toward rising s has k < 0.
func (l *lagger) separate(rows []float32, n int) (rising, falling []float32) {
	row, nf := l.row, len(l.freq)
	rising, falling = l.wave[0][:n*row], l.wave[1][:n*row]
	at := func(x []float32, i int) []float32 { return x[i*row : (i+1)*row : (i+1)*row] }
	h := l.toeplitz(n)

	// H turns what is even about the middle of the track into what is odd and back,
	// which halves the work: with e, o the sum and difference of mirrored points,
	// z_i = D_i + A_i and, mirrored, D_i - A_i, A from e and D from o.
	m := n / 2
	parts := l.parts[:2*m*row]
	for j := range m {
		x, y := at(rows, j), at(rows, n-1-j)
		e, o := at(parts, j), at(parts, m+j)
		for k, a := range x {
			e[k], o[k] = a+y[k], a-y[k]
		}
	}
	z := l.product[:n*row]
	clear(z)
	for i := range m {
		a, d := at(z, n-1-i), at(z, i)
		for j := range m {
			p, q := h[n-1+i-j], h[i+j] // H(i-j), H(i-(n-1-j))
			blas.Saxpy(row, (p+q)/2, at(parts, j), 1, a, 1)
			blas.Saxpy(row, (p-q)/2, at(parts, m+j), 1, d, 1)
		}
		if n%2 == 1 {
			blas.Saxpy(row, h[n-1+i-m], at(rows, m), 1, a, 1)
			blas.Saxpy(row, h[n-1+m-i], at(parts, m+i), 1, at(z, m), 1)
		}
		for k, a0 := range a {
			d0 := d[k]
			d[k], a[k] = d0+a0, d0-a0
		}
	}

	zero := l.cross // the k = 0 part beyond one half, the same at every point
	clear(zero)
	if c := float32((l.kzero - 0.5) / float64(l.pad*n)); c != 0 {
		for j := range n {
			blas.Saxpy(row, c, at(rows, j), 1, zero, 1)
		}
	}
	for i := range n {
		x, y := at(rows, i), at(z, i)
		up, down := at(rising, i), at(falling, i)
		// i H x = (-hi, hr); rising waves take its negative.
		xr, xi, hr, hi := x[:nf], x[nf:2*nf], y[:nf], y[nf:2*nf]
		upr, upi, dor, doi := up[:nf], up[nf:2*nf], down[:nf], down[nf:2*nf]
		zr, zi := zero[:nf], zero[nf:2*nf]
		for j := range xr {
			r, q := float32(0.5*xr[j])+zr[j], float32(0.5*xi[j])+zi[j]
			upr[j], upi[j] = r+hi[j], q-hr[j]
			dor[j], doi[j] = r-hi[j], q+hr[j]
		}
	}
	return rising, falling
}

// leak returns the power that the separation of n points lets a pure wave toward rising
// index lose to the other direction, over what it keeps; theta is its phase from one point
// to the next.
func (l *lagger) leak(n int, theta float64) float64 {
	h := l.toeplitz(n)
	zero := complex(0, 0)
	if cap(l.pure) < n {
		l.pure = make([]complex128, n)
	}
	x := l.pure[:n]
	for i := range x {
		s, c := math.Sincos(theta * float64(i))
		x[i] = complex(c, -s)
		zero += x[i] * complex((l.kzero-0.5)/float64(l.pad*n), 0)
	}
	var up, down float64
	for i := range x {
		var zr, zi float64
		for j, y := range x {
			w := float64(h[n-1+i-j])
			zr += w * real(y)
			zi += w * imag(y)
		}
		r := x[i]/2 + zero
		u, d := r-complex(-zi, zr), r+complex(-zi, zr)
		up += real(u)*real(u) + imag(u)*imag(u)
		down += real(d)*real(d) + imag(d)*imag(d)
	}
	return down / up
}

// toeplitz returns H(d) for d = -(n-1)..n-1.
func (l *lagger) toeplitz(n int) []float32 {
	if h := l.kernel[n]; h != nil {
		return h
	}
	m := l.pad * n
	h := make([]float32, 2*n-1)
	for d := -(n - 1); d < n; d++ {
		sum := 0.0
		for k := 1; 2*k < m; k++ {
			sum += math.Sin(2 * math.Pi * float64(k*d%m) / float64(m))
		}
		h[n-1+d] = float32(sum / float64(m))
		if math.Abs(sum) < 1e-9 {
			h[n-1+d] = 0
		}
	}
	l.kernel[n] = h
	return h
}

// A speed is a measured phase speed [km/s], positive toward rising index.
type speed struct {
	v, err float64
	power  float64 // of the waves on the track, summed over points
	points int     // with a lag
	ok     bool    // significant: err < |v|
}

// speed cross-correlates every point of a track with point centre, takes the lag
// from a parabola through the peak, and fits a straight line, lag = s/v + c, with
// the coherence as weight. (Its square takes 1 % more off the scatter that noise
// makes, but where unseparated waves run both ways it favours the middle of the
// track, which looks fastest: on 63 Mm at a power ratio of 2 speeds are 1.65 of the
// truth unweighted, 1.76 and 1.89 with the coherence and its square; derived, own
// simulation.)
//
// The search goes outward from the centre, each point starting at the lag of the
// one before it, so a peak one period off is not taken.
//
// The error is that of resampled, from what each frequency adds to the slope. The
// scatter of the lags about the line says nothing about it: all lags share the waves
// of the centre and of the track.
func (l *lagger) speed(rows []float32, n, centre int) speed {
	row, nf := l.row, len(l.freq)
	c := rows[centre*row : (centre+1)*row]
	pc := float64(blas.Sdot(row, c, 1, c, 1))
	var r speed
	if !(pc > 0) {
		return r
	}
	r.power = pc
	l.fit = append(l.fit[:0], lag{weight: 1})
	clear(l.pull[0])
	clear(l.pull[1])
	clear(l.share)
	for _, way := range [2]int{1, -1} {
		start := 0
		for i := centre + way; i >= 0 && i < n; i += way {
			x := rows[i*row : (i+1)*row]
			ps := float64(blas.Sdot(row, x, 1, x, 1))
			if !(ps > 0) {
				continue
			}
			r.power += ps
			// Cross-spectrum x c*.
			xr, xi, cr, ci, zr, zi := x[:nf], x[nf:2*nf], c[:nf], c[nf:2*nf], l.cross[:nf], l.cross[nf:2*nf]
			for j, a := range xr {
				b, p, q := xi[j], cr[j], ci[j]
				zr[j] = float32(a*p) + float32(b*q)
				zi[j] = float32(b*p) - float32(a*q)
			}
			m, tau, peak, curve, ok := l.peak(start)
			if !ok {
				continue
			}
			g := peak / math.Sqrt(ps*pc)
			if g < leastLagCoherence {
				continue
			}
			start = m
			q := lag{s: float64(i-centre) * l.step, tau: tau, weight: math.Pow(min(g, 1), l.power)}
			l.fit = append(l.fit, q)
			l.influence(m, q, curve)
		}
	}
	r.points = len(l.fit)
	if r.points < leastLags {
		return r
	}
	slope, _, ws, sxx := straight(l.fit)
	for j, g := range l.pull[0] {
		l.terms[0][j] = (float64(l.pull[1][j]) - ws*float64(g)) / sxx
		l.terms[1][j] = float64(l.share[j]) / float64(r.points-1)
	}
	variance := resampled(l.terms[0], l.terms[1])
	r.v = 1 / slope
	r.err = r.v * r.v * math.Sqrt(variance)
	r.ok = r.err < math.Abs(r.v)
	return r
}

// straight fits lag = slope s + intercept by weighted least squares; ws is the weighted
// mean of s, sxx the weighted sum of squares about it.
func straight(fit []lag) (slope, intercept, ws, sxx float64) {
	var w, wt, sxy float64
	for _, q := range fit {
		w += q.weight
		ws += q.weight * q.s
		wt += q.weight * q.tau
	}
	ws /= w
	wt /= w
	for _, q := range fit {
		sxx += q.weight * (q.s - ws) * (q.s - ws)
		sxy += q.weight * (q.s - ws) * (q.tau - wt)
	}
	slope = sxy / sxx
	return slope, wt - slope*ws, ws, sxx
}

// influence adds what each frequency did to a lag, found at step m of the search, to
// l.pull. With Z the cross-spectrum turned by the lag, the peak is where the sum of
// omega Im Z is zero, and a frequency moved it by its omega Im Z over the sum of
// omega^2 Re Z, the curvature [1/s^2] of the peak.
func (l *lagger) influence(m int, q lag, curve float64) {
	nf := len(l.freq)
	r := l.phasor[(m+l.reach)*l.row:]
	zr, zi, c, s := l.cross[:nf], l.cross[nf:2*nf], r[:nf], r[nf:2*nf] // s is -sin
	omega, pull, slope, share := l.omega[:nf], l.pull[0][:nf], l.pull[1][:nf], l.share[:nf]
	off := float32(q.tau - float64(m)*l.grid)
	k, x, inverse := float32(-q.weight/curve), float32(q.s), float32(1/curve)
	for j, f := range omega {
		re := float32(zr[j]*c[j]) + float32(zi[j]*s[j])
		im := float32(zi[j]*c[j]) - float32(zr[j]*s[j])
		bend := float32(f * re)
		y := float32(k * f * (im + float32(off*bend)))
		pull[j] += y
		slope[j] += float32(x * y)
		share[j] += float32(f * bend * inverse)
	}
}

// peak climbs from step start to the nearest maximum of the cross-correlation
// whose cross-spectrum is in l.cross, and puts a parabola through it. curve is minus the
// second derivative [1/s^2].
func (l *lagger) peak(start int) (m int, tau, height, curve float64, ok bool) {
	at := func(m int) float32 {
		r := (m + l.reach) * l.row
		return blas.Sdot(l.row, l.cross, 1, l.phasor[r:r+l.row], 1)
	}
	m = max(min(start, l.reach-1), 1-l.reach)
	lo, mid, hi := at(m-1), at(m), at(m+1)
	for lo > mid || hi > mid {
		if hi >= lo {
			m++
			if m >= l.reach {
				return 0, 0, 0, 0, false
			}
			lo, mid, hi = mid, hi, at(m+1)
		} else {
			m--
			if m <= -l.reach {
				return 0, 0, 0, 0, false
			}
			lo, mid, hi = at(m-1), lo, mid
		}
	}
	a, b := float64(hi)-float64(lo), float64(lo)+float64(hi)-2*float64(mid)
	if !(b < 0) {
		return 0, 0, 0, 0, false
	}
	d := -a / (2 * b)
	return m, (float64(m) + d) * l.grid, float64(mid) - a*a/(8*b), -b / (l.grid * l.grid), true
}
