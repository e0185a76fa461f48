package invert

import (
	"context"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"

	"offplane/synth/parallel"
)

// least is the smallest weight of the amplitude filter that is kept: what is left out
// holds 2e-4 of a flat spectrum's power, and four frequencies in ten.
const least = 0.03

// A band is the Gaussian band-pass on the frequencies of a series.
type band struct {
	frames  int
	cadence float64   // [s]
	first   int       // first Fourier bin kept, at least 1
	freq    []float64 // of the bins kept [Hz]
	weight  []float64 // of the amplitude
	row     int       // float32 numbers a spectrum takes: real parts, imaginary parts, zeros to a multiple of four
	samples float64   // effective number of independent spectral samples
	passes  float64   // share of a white series' variance that passes
	taper   []float64 // of the series
	kept    float64   // share of a series' power that the taper keeps
}

func newBand(opt *Options, frames int, cadence float64) (*band, error) {
	b := &band{frames: frames, cadence: cadence}
	two := 1.0 // the filter is exp[-(f-f0)^2/(two w^2)]
	if opt.WidthIsSigma {
		two = 2
	}
	var s2, s4 float64
	for j := 1; 2*j < frames; j++ {
		f := float64(j) / (float64(frames) * cadence)
		u := (f - opt.Centre) / opt.Width
		w := math.Exp(-u * u / two)
		if w < least {
			continue
		}
		if b.first == 0 {
			b.first = j
		}
		b.freq = append(b.freq, f)
		b.weight = append(b.weight, w)
		s2 += w * w
		s4 += w * w * w * w
	}
	if len(b.freq) < 4 {
		return nil, fmt.Errorf("series of %d frames every %g s has %d frequencies in the band %g +- %g mHz: needs 4 or more",
			frames, cadence, len(b.freq), opt.Centre*1e3, opt.Width*1e3)
	}
	// Cosine bells at both ends (Tukey window). Two delayed copies of one wave differ
	// where the observation begins and ends, and share the jump there that a Fourier
	// series sees: untapered, it draws lags to zero. Speeds of a noiseless wave on a
	// 31-point track then scatter by 1.4 % in 3 h and are 0.4 % high; tapered by 0.1
	// at each end, 0.09 % and 0.07 % (derived; own simulation).
	b.taper = make([]float64, frames)
	var t2, t4 float64
	for i := range b.taper {
		x := (math.Min(float64(i), float64(frames-1-i)) + 0.5) / (opt.Taper * float64(frames))
		b.taper[i] = 1
		if x < 1 {
			b.taper[i] = (1 - math.Cos(math.Pi*x)) / 2
		}
		w := b.taper[i] * b.taper[i]
		t2 += w / float64(frames)
		t4 += w * w / float64(frames)
	}
	b.kept = t2
	b.samples = s2 * s2 / s4 // T w sqrt(pi) for a 1/e width w, T w sqrt(2 pi) for a sigma
	b.samples *= t2 * t2 / t4
	b.passes = 2 * s2 / float64(frames)
	// Rows of whole 16-byte blocks: the order in which a vectorised dot product
	// sums depends on the alignment of its arguments.
	b.row = (2*len(b.freq) + 3) &^ 3
	return b, nil
}

// outlier is the distance from the mean, in rms of the series, beyond which a
// sample is taken for a hit on the detector: never reached by Gaussian waves
// (2.6e-12), reached by a lone spike in 50 frames or more.
const outlier = 7

// repair fills bad samples by interpolation, linear in time (the nearest good one
// at the ends), and returns their number. bad is updated with outliers.
func repair(v []float64, bad []bool) int {
	n := fill(v, bad)
	if n == len(v) {
		return n
	}
	var sum, sum2 float64 // about the first, which is near the mean
	low, high := v[0], v[0]
	for _, x := range v {
		d := x - v[0]
		sum += d
		sum2 += d * d
		low, high = min(low, x), max(high, x)
	}
	sum /= float64(len(v))
	mean := v[0] + sum
	limit := outlier * math.Sqrt(max(sum2/float64(len(v))-sum*sum, 0))
	if high-mean <= limit && mean-low <= limit {
		return n
	}
	for i, x := range v {
		bad[i] = bad[i] || math.Abs(x-mean) > limit
	}
	return fill(v, bad)
}

func fill(v []float64, bad []bool) int {
	n, last := 0, -1
	for i := range v {
		if bad[i] {
			n++
			continue
		}
		if gap := i - last; gap > 1 {
			for j := last + 1; j < i; j++ {
				if last < 0 {
					v[j] = v[i]
				} else {
					v[j] = v[last] + (v[i]-v[last])*float64(j-last)/float64(gap)
				}
			}
		}
		last = i
	}
	if last >= 0 {
		for j := last + 1; j < len(v); j++ {
			v[j] = v[last]
		}
	}
	return n
}

// A dft is the discrete Fourier transform between a series folded about its middle
// and the bins of the band, as tables: for the few bins of a band cheaper than a
// fast transform. Read-only.
type dft struct {
	half    int       // numbers of a folded series, padded to whole 16-byte blocks
	forward []float32 // two rows a bin: weight * cos, -weight * sin
	inverse []float32 // two rows a bin: 2/n cos, -2/n sin
}

// largestDFT is the size of one table [numbers] up to which the tables stay in the
// second-level cache and beat the fast transform.
const largestDFT = 1 << 17

// newDFT returns nil if the tables would be too large.
func newDFT(b *band) *dft {
	n, nf := b.frames, len(b.freq)
	folded := n/2 + 1
	d := &dft{half: (folded + 3) &^ 3}
	if 2*nf*d.half > largestDFT {
		return nil
	}
	d.forward = make([]float32, 2*nf*d.half)
	d.inverse = make([]float32, 2*nf*d.half)
	for j, w := range b.weight {
		for i := range folded {
			s, c := math.Sincos(2 * math.Pi * float64(i*(b.first+j)%n) / float64(n))
			d.forward[2*j*d.half+i] = float32(w * c)
			d.forward[(2*j+1)*d.half+i] = float32(-w * s)
			d.inverse[2*j*d.half+i] = float32(2 * c / float64(n))
			d.inverse[(2*j+1)*d.half+i] = float32(-2 * s / float64(n))
		}
	}
	return d
}

// A transformer holds one worker's scratch for Fourier transforms of one length.
type transformer struct {
	*band
	dft       *dft
	fft       *fourier.FFT
	v         []float64
	bad       []bool
	even, odd []float32
	coeff     []complex128
	high      []float64
}

func newTransformer(b *band, d *dft) *transformer {
	t := &transformer{
		band:  b,
		dft:   d,
		fft:   fourier.NewFFT(b.frames), // holds scratch: one per worker
		v:     make([]float64, b.frames),
		bad:   make([]bool, b.frames),
		coeff: make([]complex128, b.frames/2+1),
	}
	if d != nil {
		t.even, t.odd = make([]float32, d.half), make([]float32, d.half)
	}
	return t
}

// forward puts the band-passed spectrum of t.v, tapered about its mean, into row
// and, if asked, returns the variance of the white noise in it; else NaN.
func (t *transformer) forward(row []float32, noise bool) float64 {
	mean := 0.0
	for _, v := range t.v {
		mean += v
	}
	mean /= float64(t.frames)
	for i, w := range t.taper {
		t.v[i] = (t.v[i] - mean) * w
	}
	n := len(t.freq)
	if d := t.dft; d != nil {
		t.fold()
		blas.Sgemv(none, n, d.half, 1, d.forward, 2*d.half, t.even, 1, 0, row, 1)
		blas.Sgemv(none, n, d.half, 1, d.forward[d.half:], 2*d.half, t.odd, 1, 0, row[n:], 1)
		if !noise {
			return math.NaN()
		}
	}
	t.fft.Coefficients(t.coeff, t.v)
	if t.dft == nil {
		for j, w := range t.weight {
			c := t.coeff[t.first+j]
			row[j], row[n+j] = float32(w*real(c)), float32(w*imag(c))
		}
	}
	if !noise {
		return math.NaN()
	}
	return t.noise()
}

// fold adds and subtracts the frames that are mirror images about frame 0: a cosine
// sees only the sum, a sine the difference.
func (t *transformer) fold() {
	v, n := t.v, t.frames
	t.even[0], t.odd[0] = float32(v[0]), 0
	for i := 1; 2*i < n; i++ {
		t.even[i], t.odd[i] = float32(v[i]+v[n-i]), float32(v[i]-v[n-i])
	}
	if n%2 == 0 {
		t.even[n/2], t.odd[n/2] = float32(v[n/2]), 0
	}
}

// noise returns the variance of the white noise as the highest frequencies of the
// spectrum in t.coeff tell it: the median power of their top quarter, over ln 2 for
// an exponential distribution. NaN if that quarter is in the band.
func (t *transformer) noise() float64 {
	top := (t.frames - 1) / 2
	from := max(top-top/4, t.first+len(t.freq))
	if top-from < 8 {
		return math.NaN()
	}
	t.high = t.high[:0]
	for j := from; j <= top; j++ {
		c := t.coeff[j]
		t.high = append(t.high, real(c)*real(c)+imag(c)*imag(c))
	}
	slices.Sort(t.high)
	m := (t.high[len(t.high)/2] + t.high[(len(t.high)-1)/2]) / 2
	return m / math.Ln2 / float64(t.frames) / t.kept
}

// backward turns a band-passed spectrum into its series.
func (t *transformer) backward(row, series []float32) {
	n, nf := t.frames, len(t.freq)
	if d := t.dft; d != nil {
		blas.Sgemv(transposed, nf, d.half, 1, d.inverse, 2*d.half, row, 1, 0, t.even, 1)
		blas.Sgemv(transposed, nf, d.half, 1, d.inverse[d.half:], 2*d.half, row[nf:], 1, 0, t.odd, 1)
		half := n/2 + 1
		even, odd := t.even[:half], t.odd[:half]
		series[0] = even[0] + odd[0]
		for i, e := range even[1:] {
			o := odd[1+i]
			series[1+i] = e + o
			series[n-1-i] = e - o // for even n the middle frame again: its sines are zero
		}
		return
	}
	clear(t.coeff)
	scale := 1 / float64(n) // gonum leaves the round trip unscaled
	for j := range nf {
		t.coeff[t.first+j] = complex(scale*float64(row[j]), scale*float64(row[nf+j]))
	}
	t.fft.Sequence(t.v, t.coeff)
	for i, v := range t.v {
		series[i] = float32(v)
	}
}

const (
	sector       = 10.0 // [deg of position angle]: 120 Mm at the limb, many wave cells
	leastSectors = 6
	leastPixels  = 16 // in a sector
)

// removeTrend removes what the whole field does together in one frame: a constant
// and an east-west slope (rotation drifting against the wavelength scale). It
// works on the band-passed spectra, which is the same as a fit per frame, frame by
// frame, because everything is linear; what is steady or slow is gone already.
//
// Waves have to survive it. Sectors of position angle each give a median; waves in
// different sectors are independent, so a fit to n of them keeps 1/n of their
// power. Constant and slope are removed only where their power stands out of that
// by more than six standard deviations, otherwise nothing at all is done; nor is
// anything in a field of fewer than six sectors, where a trend cannot be told from
// a wave.
func (f *field) removeTrend(ctx context.Context, workers int) error {
	members := make([][]int, int(360/sector))
	west := make([]float64, len(f.pixels))
	for p := range f.pixels {
		if f.norm[p] == 0 {
			continue
		}
		ix, iy := f.at(p)
		_, pa := f.grid.Polar(ix, iy)
		west[p], _ = f.grid.Sky(ix, iy)
		i := min(int(pa/sector), len(members)-1)
		members[i] = append(members[i], p)
	}
	members = slices.DeleteFunc(members, func(m []int) bool { return len(m) < leastPixels })
	n := len(members)
	if n < leastSectors {
		return nil
	}
	row := f.band.row
	medians := make([]float64, n*row)
	y := make([]float64, n)
	err := parallel.For(ctx, n, workers, func(_, i int) error {
		m := members[i]
		column := make([]float32, 0, len(m))
		for _, p := range m {
			y[i] += west[p] / float64(len(m))
		}
		for j := range 2 * len(f.band.freq) {
			column = column[:0]
			for _, p := range m {
				column = append(column, f.spec[p*row+j])
			}
			medians[i*row+j] = medianOf(column)
		}
		return nil
	})
	if err != nil {
		return err
	}
	var mean, yy float64
	for i := range y {
		mean += y[i] / float64(n)
	}
	for i := range y {
		y[i] -= mean
		yy += y[i] * y[i]
	}
	limit := 1 + 6/math.Sqrt(f.band.samples)
	fit := func(h func(i int) float64) []float64 {
		c := make([]float64, row)
		alone, together := 0.0, 0.0
		for j := range c {
			for i := range n {
				x := h(i) * medians[i*row+j]
				c[j] += x
				alone += x * x
			}
			together += c[j] * c[j]
		}
		if !(together > limit*alone) {
			return nil
		}
		return c
	}
	constant := fit(func(int) float64 { return 1 / float64(n) })
	var slope []float64
	if yy > 0 {
		slope = fit(func(i int) float64 { return y[i] / yy })
	}
	if constant == nil && slope == nil {
		return nil
	}
	for p := range f.pixels {
		if f.norm[p] == 0 {
			continue
		}
		s := f.spec[p*row : (p+1)*row]
		for j := range s {
			if constant != nil {
				s[j] -= float32(constant[j])
			}
			if slope != nil {
				s[j] -= float32(slope[j] * (west[p] - mean))
			}
		}
	}
	return nil
}

// medianOf returns the median of x, which it reorders (Hoare 1961, Commun. ACM 4, 321, from
// memory: partition and go on in the part that holds it).
func medianOf(x []float32) float64 {
	k := len(x) / 2
	for low, high := 0, len(x)-1; low < high; {
		pivot := x[(low+high)/2]
		i, j := low, high
		for i <= j {
			for x[i] < pivot {
				i++
			}
			for x[j] > pivot {
				j--
			}
			if i <= j {
				x[i], x[j] = x[j], x[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			high = j
		case k >= i:
			low = i
		default:
			low = high
		}
	}
	if len(x)%2 == 1 {
		return float64(x[k])
	}
	return (float64(x[k]) + float64(slices.Max(x[:k]))) / 2
}
