package table

import (
	"math"
	"slices"

	"offplane/compare"
	"offplane/synth/random"
)

// A Score is how a surface did on members that took part neither in its fit nor in its
// calibration. Every member counts alike (by its prior weight), whatever its pixels.
type Score struct {
	Members    int     // with pixels in the domain
	Share      float64 // of the held-out pixels that lie in the domain
	Coverage68 Measure // share of the pixels within the interval
	Coverage95 Measure
	Loss       Losses     // of the median
	Levels     [2]float64 // mean pinball loss over the five levels: table, one factor for all pixels
	None, Left float64    // median of |ln(true/inferred)| without and with correction
	Bins       []Bin
}

// A Measure is a mean over members with its standard error.
type Measure struct{ Mean, Error float64 }

// Losses are mean pinball losses at the median, half the mean |ln(true/corrected)|, and
// the shares by which the table cuts them, with 95 per cent intervals over members.
type Losses struct {
	Table, Single, None float64 // with the table; with one median factor for all pixels; uncorrected
	CutSingle, CutNone  Interval
}

// An Interval is a value and its 95 per cent interval.
type Interval struct{ Value, Low, High float64 }

// A Bin is the coverage of one range of heights [solar radii].
type Bin struct {
	From, To               float64
	Members                int
	Coverage68, Coverage95 Measure
}

// memberScore holds means over the held-out pixels of one member.
type memberScore struct {
	weight     float64
	in68, in95 float64
	losses     [3]float64 // median: table, single, none
	levels     [2]float64
	bins       []binScore
}

type binScore struct{ pixels, in68, in95 float64 }

func pinball(p, r float64) float64 {
	if r < 0 {
		return (p - 1) * r
	}
	return p * r
}

// judge scores the surface on each fold with fits and residuals that never saw it.
func (c *calibration) judge() Score {
	d := c.d
	edges := compare.Edges(slices.Min(d.height), slices.Max(d.height), 20)
	var scores []memberScore
	var none, left, weights []float64
	total, inside := 0.0, 0.0
	for k := range folds {
		var z, zw []float64
		for b := range folds {
			if b != k {
				z, zw = c.held(&c.fits[c.index[[2]int{k, b}]], b, z, zw)
			}
		}
		q := ends(z, zw)
		e := &c.fits[c.index[[2]int{k, k}]]
		used := d.pixelWeights(c.w, func(m int) bool { return c.fold[m] != k })
		var single [5]float64
		for l, p := range levels {
			single[l] = weightedQuantile(p, d.y, used, 0)
		}
		for i := 0; i < d.pixels(); {
			m := int(d.member[i])
			s := memberScore{weight: c.w[m], bins: make([]binScore, len(edges)-1)}
			var pixels [][2]float64
			n := 0.0
			for ; i < d.pixels() && int(d.member[i]) == m; i++ {
				if c.fold[m] != k {
					continue
				}
				total++
				if e.members[d.corner[i]] < float64(c.least) {
					continue
				}
				n++
				y, median, spread := d.y[i], d.value(e.median, i), d.value(e.spread, i)
				var at [5]float64
				for l := range at {
					at[l] = median + float64(spread*q[l])
					s.levels[0] += pinball(levels[l], y-at[l]) / 5
					s.levels[1] += pinball(levels[l], y-single[l]) / 5
				}
				for l, v := range []float64{at[2], single[2], 0} {
					s.losses[l] += pinball(0.5, y-v)
				}
				bin := &s.bins[min(max(0, binOf(edges, d.height[i])), len(s.bins)-1)]
				bin.pixels++
				if y >= at[1] && y <= at[3] {
					s.in68++
					bin.in68++
				}
				if y >= at[0] && y <= at[4] {
					s.in95++
					bin.in95++
				}
				pixels = append(pixels, [2]float64{math.Abs(y), math.Abs(y - at[2])})
			}
			if n == 0 {
				continue
			}
			inside += n
			for _, v := range []*float64{&s.in68, &s.in95, &s.losses[0], &s.losses[1], &s.losses[2], &s.levels[0], &s.levels[1]} {
				*v /= n
			}
			for _, p := range pixels {
				none, left, weights = append(none, p[0]), append(left, p[1]), append(weights, c.w[m]/n)
			}
			scores = append(scores, s)
		}
	}
	s := summarise(scores, edges)
	s.Share = inside / total
	s.None, s.Left = weightedQuantile(0.5, none, weights, 0), weightedQuantile(0.5, left, weights, 0)
	return s
}

func binOf(edges []float64, r float64) int {
	i, exact := slices.BinarySearch(edges, r)
	if !exact {
		i--
	}
	return i
}

// summarise averages over members.
func summarise(ms []memberScore, edges []float64) Score {
	s := Score{Members: len(ms)}
	mean := func(of func(*memberScore) float64) Measure {
		return measure(ms, func(m *memberScore) (float64, bool) { return of(m), true })
	}
	s.Coverage68 = mean(func(m *memberScore) float64 { return m.in68 })
	s.Coverage95 = mean(func(m *memberScore) float64 { return m.in95 })
	loss := func(l int) float64 { return mean(func(m *memberScore) float64 { return m.losses[l] }).Mean }
	s.Loss = Losses{Table: loss(0), Single: loss(1), None: loss(2), CutSingle: cut(ms, 1), CutNone: cut(ms, 2)}
	for l := range s.Levels {
		s.Levels[l] = mean(func(m *memberScore) float64 { return m.levels[l] }).Mean
	}
	for b := range len(edges) - 1 {
		bin := Bin{From: edges[b], To: edges[b+1]}
		for i := range ms {
			if ms[i].bins[b].pixels > 0 {
				bin.Members++
			}
		}
		if bin.Members == 0 {
			continue
		}
		share := func(of func(*binScore) float64) Measure {
			return measure(ms, func(m *memberScore) (float64, bool) {
				b := &m.bins[b]
				return of(b) / b.pixels, b.pixels > 0
			})
		}
		bin.Coverage68 = share(func(b *binScore) float64 { return b.in68 })
		bin.Coverage95 = share(func(b *binScore) float64 { return b.in95 })
		s.Bins = append(s.Bins, bin)
	}
	return s
}

// measure is the weighted mean over the members that have a value, and its standard
// error from the scatter between them.
func measure(ms []memberScore, of func(*memberScore) (float64, bool)) Measure {
	var v, w []float64
	sum, sw := 0.0, 0.0
	for i := range ms {
		if x, ok := of(&ms[i]); ok {
			v, w = append(v, x), append(w, ms[i].weight)
			sum += float64(ms[i].weight * x)
			sw += ms[i].weight
		}
	}
	m := Measure{Mean: sum / sw}
	n := Effective(w)
	variance := 0.0
	for i := range v {
		variance += float64(w[i] * (v[i] - m.Mean) * (v[i] - m.Mean))
	}
	m.Error = math.Sqrt(variance / sw / max(n-1, 1))
	return m
}

// resamples of the members behind an interval.
const resamples = 1000

// cut returns 1 - loss of the table over loss l, with its interval from resampling the
// members (bootstrap: Efron 1979, Ann. Stat. 7, 1).
func cut(ms []memberScore, l int) Interval {
	share := func(pick func(i int) int) float64 {
		a, b := 0.0, 0.0
		for i := range ms {
			m := &ms[pick(i)]
			a += float64(m.weight * m.losses[0])
			b += float64(m.weight * m.losses[l])
		}
		return 1 - a/b
	}
	key := random.NewKey(0x637574)
	all := make([]float64, resamples)
	ones := make([]float64, resamples)
	for r := range all {
		all[r] = share(func(i int) int {
			return min(int(key.Uniform(uint64(r*len(ms)+i))*float64(len(ms))), len(ms)-1)
		})
		ones[r] = 1
	}
	return Interval{
		Value: share(func(i int) int { return i }),
		Low:   weightedQuantile(0.025, all, ones, 0),
		High:  weightedQuantile(0.975, all, ones, 0),
	}
}

// BeatsSingle reports whether the surface cuts the loss against one factor for all pixels,
// with 97.5 per cent confidence; known is false of a table read without its coverage.ecsv.
func (s *Score) BeatsSingle() (beats, known bool) {
	return s.Loss.CutSingle.Low > 0, s.Loss.None > 0
}

// Kept reports whether both intervals held what they promise: coverage not more than three
// points below nominal, or two standard errors over members if that is more. Above it may
// lie, by some 2/(members+1): the calibration leaves room for the member to come.
func (s *Score) Kept() bool {
	ok := func(m Measure, nominal float64) bool { return m.Mean >= nominal-max(0.03, 2*m.Error) }
	return ok(s.Coverage68, 0.68) && ok(s.Coverage95, 0.95)
}
