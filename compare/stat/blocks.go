package stat

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"offplane/synth/random"
)

// A Layout says where the values of a sample lie in the image: distance from the disc
// centre and position along the limb, in steps of one pixel.
type Layout struct {
	r, t   []int // of each value
	nr, nt int
	step   float64 // [solar radii]
}

// NewLayout returns the layout of values at distances r [solar radii] and position
// angles pa [deg] in an image with pixels of that step [solar radii].
func NewLayout(r, pa []float64, step float64) *Layout {
	l := &Layout{r: make([]int, len(r)), t: make([]int, len(r)), step: step}
	if len(r) == 0 {
		return l
	}
	inner := slices.Min(r)
	sum := 0.0
	for i, x := range r {
		l.r[i] = int((x - inner) / step)
		l.nr = max(l.nr, l.r[i]+1)
		sum += x
	}
	// Along the limb at the mean distance, from the end of the longest gap.
	around := max(1, int(2*math.Pi*sum/float64(len(r))/step))
	taken := make([]bool, around)
	for i, a := range pa {
		l.t[i] = int(a/360*float64(around)) % around
		taken[l.t[i]] = true
	}
	start, longest := 0, 0
	for i, gap := 0, 0; i < 2*around; i++ {
		if taken[i%around] {
			if gap > longest {
				start, longest = i%around, gap
			}
			gap = 0
		} else {
			gap++
		}
	}
	for i := range l.t {
		l.t[i] = (l.t[i] - start + around) % around
		l.nt = max(l.nt, l.t[i]+1)
	}
	return l
}

// A Scale is the size of a patch of an image whose values go together, in pixels: the
// sum of the autocorrelation over all lags, away from the Sun and along the limb.
type Scale struct{ Radial, Along float64 }

// Bounds of the measurement of a Scale.
const (
	sector           = 0.3  // length along the limb of the pieces in which the trend is fitted [solar radii]
	leastCorrelation = 0.05 // autocorrelation at which the sum ends
)

// Scale measures how far the values of a sample go together, one a place of the layout.
// What is correlated is on which side of the median they lie, which is all that a median
// knows of them, less a cubic trend over distance and position in pieces of 0.3 solar
// radii: a bias that changes over the field is no chance. Sums end where the correlation
// falls below 0.05.
func (l *Layout) Scale(x []float64) Scale {
	n := l.nr * l.nt
	mean, count := make([]float64, n), make([]float64, n)
	m := Median(x)
	for i, v := range x {
		if finite(v) {
			k := l.r[i]*l.nt + l.t[i]
			mean[k] += side(v, m)
			count[k]++
		}
	}
	for k := range mean {
		mean[k] /= count[k] // NaN where there is none
	}
	pieces := max(1, int(math.Round(float64(l.nt)*l.step/sector)))
	for p := range pieces {
		l.detrend(mean, l.nt*p/pieces, l.nt*(p+1)/pieces)
	}
	return Scale{l.sum(mean, l.nt, l.nr), l.sum(mean, 1, l.nt)}
}

func side(v, m float64) float64 {
	switch {
	case v > m:
		return 1
	case v < m:
		return -1
	}
	return 0
}

// detrend subtracts from columns from..to of an image the cubic in both coordinates that
// fits best.
func (l *Layout) detrend(g []float64, from, to int) {
	const terms = 10
	var a [terms * terms]float64
	var b [terms]float64
	basis := func(i, j int) (f [terms]float64) {
		x, y := 2*float64(i)/float64(max(1, l.nr-1))-1, 2*float64(j-from)/float64(max(1, to-from-1))-1
		return [terms]float64{1, x, y, x * x, x * y, y * y, x * x * x, x * x * y, x * y * y, y * y * y}
	}
	each := func(do func(v *float64, f *[terms]float64)) {
		for i := range l.nr {
			for j := from; j < to; j++ {
				if v := &g[i*l.nt+j]; *v == *v {
					f := basis(i, j)
					do(v, &f)
				}
			}
		}
	}
	each(func(v *float64, f *[terms]float64) {
		for p := range terms {
			b[p] += *v * f[p]
			for q := range terms {
				a[p*terms+q] += f[p] * f[q]
			}
		}
	})
	for p := range terms {
		a[p*terms+p] += 1e-9 * (a[0] + 1) // terms that the places cannot tell apart
	}
	var c mat.Cholesky
	var s mat.VecDense
	if !c.Factorize(mat.NewSymDense(terms, a[:])) || c.SolveVecTo(&s, mat.NewVecDense(terms, b[:])) != nil {
		return
	}
	each(func(v *float64, f *[terms]float64) {
		for p := range terms {
			*v -= s.AtVec(p) * f[p]
		}
	})
}

// sum returns the sum of the autocorrelation along the axis of an image whose n steps are
// stride apart.
func (l *Layout) sum(g []float64, stride, n int) float64 {
	correlation := func(lag int) float64 {
		sum, count := 0.0, 0.0
		for k := 0; k+lag*stride < len(g); k++ {
			if stride == 1 && k%l.nt+lag >= l.nt {
				continue
			}
			if p := g[k] * g[k+lag*stride]; p == p {
				sum += p
				count++
			}
		}
		return sum / count
	}
	v := correlation(0)
	tau := 1.0
	for lag := 1; lag < n; lag++ {
		rho := correlation(lag) / v
		if !(rho > leastCorrelation) {
			break
		}
		tau += 2 * rho
	}
	return tau
}

// An Interval is where the median of a sample may lie by the chance of the waves.
type Interval struct {
	Low, High float64 // 68 %: 16th and 84th percentile; NaN with less than three blocks
	Blocks    int     // that it was estimated from
}

// Parameters of the block bootstrap.
const (
	blockScales = 3   // side of a block over the scale
	together    = 3   // neighbouring blocks that are exchanged for one another
	resamples   = 499 // of the sample
	leastBlocks = 3
)

// MedianInterval returns the 68 % interval of the median of the values at the positions
// of, of all if it is nil, by a block bootstrap (Künsch 1989, Ann. Stat. 17, 1217) in the
// image plane: pixels share waves, tracks and islands, blocks hardly do.
//
// Blocks are three scales long away from the Sun and along the limb, or shares of the
// field near that. A resample draws, for each run of three neighbouring blocks along the
// limb, three of them with replacement: a bias that changes over the field at large does
// not count as chance, one that changes within three blocks does, so the interval errs
// on the wide side where structures are small. Of each block only the excess of values
// above the median over those below is needed: its sum over a resample says which
// quantile of the sample the median of the resample is (Woodruff 1952, J. Am. Stat.
// Assoc. 47, 635). The spread is multiplied by the root of K/(K-1) for runs of K, and for
// the correlation across the edges of blocks of length L by that of 1/(1 - s/2L) away
// from the Sun and 1/(1 - (1 + 1/K) s/2L) along the limb, s the scale (derived for a
// correlation that falls exponentially). Random numbers are addressed, so equal samples
// have equal intervals.
func (l *Layout) MedianInterval(x []float64, of []int, s Scale) Interval {
	none := Interval{math.NaN(), math.NaN(), 0}
	var values []float64
	blocks := l.newBlocks(s)
	each := func(do func(i int)) {
		if of == nil {
			for i := range x {
				do(i)
			}
		}
		for _, i := range of {
			do(i)
		}
	}
	each(func(i int) {
		if finite(x[i]) {
			values = append(values, x[i])
		}
	})
	if len(values) == 0 {
		return none
	}
	slices.Sort(values)
	m := quantile(0.5, values)
	each(func(i int) {
		if finite(x[i]) {
			blocks.add(l.r[i], l.t[i], side(x[i], m))
		}
	})
	runs := blocks.runs()
	for _, r := range runs {
		none.Blocks += len(r)
	}
	if none.Blocks < leastBlocks {
		return none
	}
	excess := make([]float64, resamples)
	key := random.NewKey(0x626c6f636b)
	drawn := uint64(0)
	for _, run := range runs {
		k := float64(len(run))
		for j := range excess {
			sum := 0.0
			for range run {
				sum += run[int(key.Uniform(drawn)*k)]
				drawn++
			}
			excess[j] += sum * math.Sqrt(k/(k-1))
		}
	}
	slices.Sort(excess)
	at := func(p float64) float64 {
		e := quantile(p, excess) * math.Sqrt(blocks.widen) / (2 * float64(len(values)))
		return quantile(min(max(0.5+e, 0), 1), values)
	}
	return Interval{at(0.16), at(0.84), none.Blocks}
}

// blocks holds the excess and the number of values of each block, ring by ring.
type blocks struct {
	*Layout
	rings, parts  int
	excess, count []float64
	widen         float64 // of the variance
}

func (l *Layout) newBlocks(s Scale) *blocks {
	b := &blocks{Layout: l, rings: shares(l.nr, s.Radial), parts: shares(l.nt, s.Along), widen: 1}
	b.excess, b.count = make([]float64, b.rings*b.parts), make([]float64, b.rings*b.parts)
	// Scale over length, bounded where the field is hardly larger than the scale.
	over := func(scale float64, n, shares int) float64 { return min(scale*float64(shares)/float64(n), 0.9) }
	if b.rings > 1 {
		b.widen /= 1 - over(s.Radial, l.nr, b.rings)/2
	}
	if b.parts > 1 {
		b.widen /= 1 - (1+1.0/together)*over(s.Along, l.nt, b.parts)/2
	}
	return b
}

// shares returns into how many blocks n pixels are cut.
func shares(n int, scale float64) int {
	return max(1, int(math.Round(float64(n)/(blockScales*scale))))
}

func (b *blocks) add(r, t int, excess float64) {
	k := r*b.rings/b.nr*b.parts + t*b.parts/b.nt
	b.excess[k] += excess
	b.count[k]++
}

// runs returns the excess of each block over its run's, run by run. The blocks of a ring
// that is alone in having one join the next ring's.
func (b *blocks) runs() [][]float64 {
	var runs [][]int
	var open []int
	for ring := range b.rings {
		for k := ring * b.parts; k < (ring+1)*b.parts; k++ {
			if b.count[k] > 0 {
				open = append(open, k)
			}
		}
		if len(open) < 2 {
			continue
		}
		n := max(1, len(open)/together)
		for i := range n {
			runs = append(runs, open[len(open)*i/n:len(open)*(i+1)/n])
		}
		open = nil
	}
	if len(open) > 0 && len(runs) > 0 {
		last := len(runs) - 1
		runs[last] = append(slices.Clone(runs[last]), open...)
	}
	out := make([][]float64, len(runs))
	for i, run := range runs {
		excess, count := 0.0, 0.0
		for _, k := range run {
			excess += b.excess[k]
			count += b.count[k]
		}
		for _, k := range run {
			out[i] = append(out[i], b.excess[k]-b.count[k]*(excess/count))
		}
	}
	return out
}
