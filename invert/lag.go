package invert

import "math"

const (
	leastLagCoherence = 0.3 // below it a lag cannot be measured: noise alone reaches about that
	leastLags         = 5   // points of a fit
	slowest           = 50. // slowest wave whose lags are searched for [km/s]
	lagSteps          = 16. // steps of the search grid in one period of the band's centre
)

// A lagger measures phase speeds on tracks; one worker's scratch.
type lagger struct {
	*band
	step    float64 // between points [km]
	kzero   float64 // weight of zero wavenumber in the separation
	power   float64 // of the coherence in the weights of the fit
	pad     int
	grid    float64 // step of the lag search [s]
	reach   int     // lags searched, in steps either way
	phasor  []float32
	omega   []float32 // of the band [rad/s]
	splits  map[int]*split
	folded  []float32
	product []float32
	wave    [2][]float32
	zero    []float32
	pure    []complex128

	middle []float32 // spectrum of the track's centre
	turned []float32 // middle turned by every lag of the search
	stamp  []int     // when that was done
	turn   int
	fit    []lag
	parts  []float32 // what each frequency adds at the lags of fit to the first derivative and to curve
	pull   [2][]float32
	terms  [2][]float64 // of the last speed: see resampled
	spare  [2][]float64
}

// A lag is that of one point of a track against its centre.
type lag struct {
	s, tau, weight float64 // [km, s]
	curve          float64 // minus the second derivative of the cross-correlation at its peak [1/s^2]
	off            float64 // of the peak from the step of the search nearest to it [s]
}

// A split holds what the separation of tracks of one length needs.
type split struct {
	h         []float32 // H(d) for d = -(n-1)..n-1
	even, odd []float32 // H from even parts to odd ones, a row of zeros beneath if n is odd, and back, by columns
	leaks     []float64 // of a pure wave; NaN: not asked for yet
}

// points is the longest track, step the distance of its points [km], grid the step
// of the lag search [s].
func newLagger(b *band, opt *Options, points int, step, grid float64) *lagger {
	l := &lagger{band: b, step: step, grid: grid, pad: opt.Padding, kzero: opt.KZero.weight(), power: 1, splits: map[int]*split{}}
	longest := min(step*float64(points-1)/slowest, float64(b.frames)*b.cadence/4)
	l.reach = max(int(longest/l.grid), 4)
	lags := 2*l.reach + 1
	l.phasor = make([]float32, lags*b.row)
	n := len(b.freq)
	for m := range lags {
		r := l.phasor[m*b.row:]
		for j, f := range b.freq {
			s, c := math.Sincos(2 * math.Pi * f * float64(m-l.reach) * l.grid)
			r[j], r[n+j] = float32(c), float32(s)
		}
	}
	l.turned, l.stamp = make([]float32, lags*b.row), make([]int, lags)
	l.parts = make([]float32, 2*points*n)
	l.folded = make([]float32, (points+1)*b.row)
	l.product = make([]float32, (points+1)*b.row)
	l.wave[0] = make([]float32, points*b.row)
	l.wave[1] = make([]float32, points*b.row)
	l.zero = make([]float32, b.row)
	for _, f := range b.freq {
		l.omega = append(l.omega, float32(2*math.Pi*f))
	}
	for i := range l.terms {
		l.terms[i], l.spare[i], l.pull[i] = make([]float64, n), make([]float64, n), make([]float32, n)
	}
	return l
}

// rising returns the part of the spectra of n points that runs toward rising index: the
// hard quadrant filter of the (k, omega) plane, written as a projection in s.
//
// At one frequency, a Fourier transform over M = padding n points, the choice of
// k of one sign and the way back multiply the column of points by the Toeplitz
// matrix P(d) = sum_k w_k exp(2 pi i k d / M) / M, with w = 1, 0 or, at k = 0, the
// weight asked for (the Nyquist column of an even M is halved). Its real part is
// half the identity plus (w_0 - 1/2)/M everywhere; its imaginary part is the
// antisymmetric kernel H. So one real multiplication by H serves both directions.
// With exp(-i omega t) for a spectrum, a wave toward rising s has k < 0.
func (l *lagger) rising(rows []float32, n int) []float32 {
	row, nf := l.row, len(l.freq)
	at := func(x []float32, i int) []float32 { return x[i*row : (i+1)*row : (i+1)*row] }
	h := l.split(n)

	// H turns what is even about the middle of the track into what is odd and back,
	// which halves the work: e and o are the sum and difference of mirrored points x and y,
	// x/2 - i H x = D + A and, mirrored, D - A, with D = e/4 - i H o and A = o/4 - i H e.
	// -i (r, i) = (i, -r).
	m, k := n/2, n-n/2
	even, odd := l.folded[:k*row], l.folded[k*row:n*row]
	A, D := l.product[:k*row], l.product[k*row:2*k*row]
	for j := range m {
		x, y := at(rows, j), at(rows, n-1-j)
		fold(x[:nf], y[:nf], at(even, j)[nf:], at(odd, j)[nf:], at(D, j), at(A, j), -1)
		fold(x[nf:2*nf], y[nf:2*nf], at(even, j), at(odd, j), at(D, j)[nf:], at(A, j)[nf:], 1)
	}
	if k > m { // the middle is its own mirror image
		x, e, d := at(rows, m), at(even, m), at(D, m)
		for j := range nf {
			e[j], e[nf+j] = x[nf+j], -x[j]
			d[j], d[nf+j] = 0.5*x[j], 0.5*x[nf+j]
		}
		clear(at(A, m))
	}
	multiply(k, k, row, h.even, even, A)
	multiply(k, m, row, h.odd, odd, D)

	out := l.wave[0][:n*row]
	copy(out, D[:m*row])
	blas.Saxpy(m*row, 1, A, 1, out, 1)
	for i := range m {
		v := at(out, n-1-i)
		copy(v, at(D, i))
		blas.Saxpy(row, -1, at(A, i), 1, v, 1)
	}
	if k > m {
		copy(at(out, m), at(D, m))
	}
	if l.sum(rows, n) {
		for i := range n {
			blas.Saxpy(row, 1, l.zero, 1, at(out, i), 1)
		}
	}
	return out
}

// against returns the power of the falling part, given the rising one of power p.
func (l *lagger) against(rows, rising []float32, n int, p float64) float64 {
	if l.kzero == 0.5 {
		return power(rows) - 2*float64(blas.Sdot(len(rows), rows, 1, rising, 1)) + p
	}
	return power(l.falling(rows, rising, n))
}

// falling returns the part that runs toward falling index, given that toward rising.
func (l *lagger) falling(rows, rising []float32, n int) []float32 {
	out := l.wave[1][:n*l.row]
	copy(out, rows)
	blas.Saxpy(len(out), -1, rising, 1, out, 1)
	if l.sum(rows, n) {
		for i := range n {
			blas.Saxpy(l.row, 2, l.zero, 1, out[i*l.row:], 1)
		}
	}
	return out
}

// sum puts the part of zero wavenumber beyond one half, the same at every point, into
// l.zero; false: there is none.
func (l *lagger) sum(rows []float32, n int) bool {
	c := float32((l.kzero - 0.5) / float64(l.pad*n))
	if c == 0 {
		return false
	}
	clear(l.zero)
	for j := range n {
		blas.Saxpy(l.row, c, rows[j*l.row:], 1, l.zero, 1)
	}
	return true
}

// fold puts sum and difference of x and y, times sign, into even and odd, and a quarter
// of them into e and o.
func fold(x, y, even, odd, e, o []float32, sign float32) {
	y, even, odd, e, o = y[:len(x)], even[:len(x)], odd[:len(x)], e[:len(x)], o[:len(x)]
	for j, a := range x {
		b := y[j]
		s, d := a+b, a-b
		even[j], odd[j] = float32(sign*s), float32(sign*d)
		e[j], o[j] = float32(0.25*s), float32(0.25*d)
	}
}

// multiply adds a b to c, with the k columns of a, of length m, one after the other.
func multiply(m, k, row int, a, b, c []float32) {
	for j := range k {
		blas.Sger(m, row, 1, a[j*m:], 1, b[j*row:], 1, c, row)
	}
}

// leak returns the power that the separation of n points lets a pure wave toward rising
// index lose to the other direction, over what it keeps; theta is its phase from one point
// to the next.
func (l *lagger) leak(n int, theta float64) float64 {
	h := l.split(n).h
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

// floor returns the power that a wave of speed v [km/s] toward rising index and with the
// spectrum x leaks into the other direction on n points, over what it keeps.
func (l *lagger) floor(n int, v float64, x []float32) float64 {
	const finer = 8 // a leak has lobes as wide as 2 pi/n
	t := l.split(n)
	if t.leaks == nil {
		t.leaks = make([]float64, finer*n+2)
		for i := range t.leaks {
			t.leaks[i] = math.NaN()
		}
	}
	nf := len(l.freq)
	scale := l.step / (math.Abs(v) * math.Pi) * finer * float64(n)
	var all, lost float64
	for j, o := range l.omega {
		u := min(float64(o)*scale, finer*float64(n))
		i := int(u)
		for k := i; k <= i+1; k++ {
			if math.IsNaN(t.leaks[k]) {
				t.leaks[k] = l.leak(n, float64(k)*math.Pi/(finer*float64(n)))
			}
		}
		p := float64(x[j])*float64(x[j]) + float64(x[nf+j])*float64(x[nf+j])
		all += p
		lost += p * (t.leaks[i] + (u-float64(i))*(t.leaks[i+1]-t.leaks[i]))
	}
	return lost / all
}

// split returns what tracks of n points need.
func (l *lagger) split(n int) *split {
	if t := l.splits[n]; t != nil {
		return t
	}
	M := l.pad * n
	h := make([]float32, 2*n-1)
	for d := -(n - 1); d < n; d++ {
		sum := 0.0
		for k := 1; 2*k < M; k++ {
			sum += math.Sin(2 * math.Pi * float64(k*d%M) / float64(M))
		}
		h[n-1+d] = float32(sum / float64(M))
		if math.Abs(sum) < 1e-9 {
			h[n-1+d] = 0
		}
	}
	t := &split{h: h}
	m, mid := n/2, n%2
	for j := range m {
		for i := range m {
			t.even = append(t.even, (h[n-1+i-j]+h[i+j])/2) // H(i-j), H(i-(n-1-j))
			t.odd = append(t.odd, (h[n-1+i-j]-h[i+j])/2)
		}
		if mid == 1 {
			t.even, t.odd = append(t.even, 0), append(t.odd, h[n-1+m-j])
		}
	}
	if mid == 1 {
		for i := range m {
			t.even = append(t.even, h[n-1+i-m])
		}
		t.even = append(t.even, 0)
	}
	l.splits[n] = t
	return t
}

// A speed is a measured phase speed [km/s], positive toward rising index.
type speed struct {
	v, err float64
	points int  // with a lag
	ok     bool // significant: err < |v|
	// What each frequency moved the slowness [s/km], and its share in what holds it: see
	// resampled. Valid until the next measurement.
	pull, share []float64
}

// speed cross-correlates every point of a track with point centre, takes the lag
// of the peak, and fits a straight line, lag = s/v + c, with
// the coherence as weight. (Its square takes 1 % more off the scatter that noise
// makes, but where unseparated waves run both ways it favours the middle of the
// track, which looks fastest: on 63 Mm at a power ratio of 2 speeds are 1.65 of the
// truth unweighted, 1.76 and 1.89 with the coherence and its square; derived, own
// simulation.)
//
// Lags bend where the speed changes along the track. On a track with two equal arms a line has
// the slope that a parabola has at the pixel, so the bend costs what the third order does:
// below 1 % where the speed grows by less than a factor 1.6 from end to end (see
// TestAverageOverTheTrack). A track with one arm reads the speed of its middle, which a
// parabola would mend at 3.8 times the error (derived; 16 points of like errors): such tracks
// are flagged instead.
//
// The search goes outward from the centre, each point starting where the two before it
// point, so a peak one period off is not taken.
//
// The error is that of resampled, from what each frequency adds to the slope. The
// scatter of the lags about the line says nothing about it: all lags share the waves
// of the centre and of the track.
func (l *lagger) speed(rows []float32, n, centre int) speed {
	row := l.row
	l.face(rows[centre*row : (centre+1)*row])
	pc := power(l.middle)
	var r speed
	if !(pc > 0) {
		return r
	}
	l.fit = append(l.fit[:0], lag{weight: 1})
	for _, way := range [2]int{1, -1} {
		var last, start float64
		for i := centre + way; i >= 0 && i < n; i += way {
			x := rows[i*row : (i+1)*row]
			ps := power(x)
			if !(ps > 0) {
				continue
			}
			q, height, ok := l.peak(x, start)
			if !ok {
				continue
			}
			g := height / math.Sqrt(ps*pc)
			if g < leastLagCoherence {
				continue
			}
			start, last = 2*q.tau-last, q.tau
			q.s, q.weight = float64(i-centre)*l.step, math.Pow(min(g, 1), l.power)
			l.fit = append(l.fit, q)
		}
	}
	r.points = len(l.fit)
	if r.points < leastLags {
		return r
	}
	slope, _, ws, sxx := straight(l.fit)
	r.v = 1 / slope
	r.err = r.v * r.v * math.Sqrt(l.variance(ws, sxx))
	r.ok = r.err < math.Abs(r.v)
	r.pull, r.share = l.terms[0], l.terms[1]
	return r
}

func power(x []float32) float64 { return float64(blas.Sdot(len(x), x, 1, x, 1)) }

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

// variance returns that of the slope of the line through l.fit. With Z the
// cross-spectrum turned by a lag, the peak is where the sum of omega Im Z is zero, and a
// frequency moved it by its omega Im Z over the sum of omega^2 Re Z, the curvature of
// the peak.
func (l *lagger) variance(ws, sxx float64) float64 {
	nf := len(l.freq)
	pull, share := l.pull[0][:nf], l.pull[1][:nf]
	clear(pull)
	clear(share)
	for i := 1; i < len(l.fit); i++ { // the first is the centre itself
		q := &l.fit[i]
		slopes, curves := l.part(i)
		a, b := float32(q.weight*(q.s-ws)/(sxx*q.curve)), float32(1/(q.curve*float64(len(l.fit)-1)))
		slopes, curves, off := slopes[:len(pull)], curves[:len(pull)], float32(q.off)
		share := share[:len(pull)]
		for j, v := range pull {
			c := curves[j]
			pull[j] = v + float32(a*(slopes[j]-float32(off*c)))
			share[j] += float32(b * c)
		}
	}
	for j := range nf {
		l.terms[0][j], l.terms[1][j] = float64(pull[j]), float64(share[j])
	}
	return resampled(l.terms[0], l.terms[1])
}

// face makes c the spectrum that lags refer to.
func (l *lagger) face(c []float32) {
	l.middle = c
	l.turn++
}

// at returns the spectrum that lags refer to, delayed by m steps.
func (l *lagger) at(m int) []float32 {
	row, nf := l.row, len(l.freq)
	i := m + l.reach
	t := l.turned[i*row : (i+1)*row]
	if l.stamp[i] == l.turn {
		return t
	}
	l.stamp[i] = l.turn
	r := l.phasor[i*row : (i+1)*row]
	c, s, xr, xi := r[:nf], r[nf:2*nf], l.middle[:nf], l.middle[nf:2*nf]
	zr, zi := t[:nf], t[nf:2*nf]
	for j, c := range c {
		s, a, b := s[j], xr[j], xi[j]
		zr[j], zi[j] = float32(a*c)+float32(b*s), float32(b*c)-float32(a*s)
	}
	return t
}

// derivatives returns the cross-correlation of x with the spectrum t, its first
// derivative by the lag and minus its second, and puts what each frequency adds to those
// into slopes and curves.
func (l *lagger) derivatives(x, t, slopes, curves []float32) (height, slope, curve float32) {
	nf := len(l.omega)
	xr, xi, zr, zi := x[:nf], x[nf:2*nf], t[:nf], t[nf:2*nf]
	slopes, curves = slopes[:nf], curves[:nf]
	for j, o := range l.omega {
		a, b, u, v := xr[j], xi[j], zr[j], zi[j]
		p := float32(a*u) + float32(b*v)
		s := float32(o * (float32(a*v) - float32(b*u)))
		c := float32(o * float32(o*p))
		slopes[j], curves[j] = s, c
		height += p
		slope += s
		curve += c
	}
	return height, slope, curve
}

// part returns the parts of lag i of the fit.
func (l *lagger) part(i int) (slopes, curves []float32) {
	nf := len(l.freq)
	p := l.parts[2*nf*i : 2*nf*(i+1)]
	return p[:nf], p[nf:]
}

// nearest is the distance of a lag from the step of the search that it is taken from
// [steps]: a little above one half, so that no peak lies between two.
const nearest = 0.6

// peak climbs from lag start to the nearest maximum of the cross-correlation of x, the
// next point of the fit: by Newton's method from the step of the search beside it, in the
// tangent of the phase, which makes it exact for one frequency. height is that of the
// maximum.
func (l *lagger) peak(x []float32, start float64) (q lag, height float64, ok bool) {
	slopes, curves := l.part(len(l.fit))
	m := max(min(int(math.Round(start/l.grid)), l.reach-1), 1-l.reach)
	for range l.reach {
		y, d1, d2 := l.derivatives(x, l.at(m), slopes, curves)
		h, slope, curve := float64(y), float64(d1), float64(d2)
		off := math.Copysign(l.grid, slope)
		if h > 0 && curve > 0 {
			w := math.Sqrt(curve / h)
			r := slope / curve
			u := w * r
			off = r * (1 - u*u/3)
			if math.Abs(u) > 0.25 {
				off = math.Atan(u) / w
			}
			if math.Abs(off) <= nearest*l.grid {
				q.tau, q.off, q.curve = float64(m)*l.grid+off, off, curve
				return q, h + slope*off/2, true
			}
		}
		m += max(-2, min(2, int(math.Round(off/l.grid))))
		if m >= l.reach || m <= -l.reach {
			break
		}
	}
	return lag{}, 0, false
}
