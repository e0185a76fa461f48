package plan

import (
	"math"
	"slices"

	"offplane/compare/stat"
)

// A region is the pixels that the goal is about, in bins of height.
type region struct {
	pixels []int     // indices into the observation's field
	bin    []int     // of each
	from   []float64 // edges of the bins [solar radii]
	to     []float64
}

func (g *region) bins() int { return len(g.from) }

// An Outcome is what maps of one design are like. Errors are those of ln(B/B_SKY).
type Outcome struct {
	Random     float64 // half the width of the central 68 % of the pixels
	Systematic float64 // median of the pixels
	Yield      float64 // share of the pixels that have a field
}

// margin returns how far an outcome is from a goal: 0 or more if it is met. It is the
// least of the three margins, each over its bound.
func (o Outcome) margin(g *Goal) float64 {
	m := slices.Min(o.margins(g))
	if math.IsNaN(m) {
		return -1
	}
	return m
}

// margins are those of random error, shift and yield.
func (o Outcome) margins(g *Goal) []float64 {
	return []float64{1 - o.Random/g.Random, 1 - math.Abs(o.Systematic)/g.Systematic, o.Yield/g.Yield - 1}
}

// tightest names the bound with the least margin.
func (o Outcome) tightest(g *Goal) string {
	m := o.margins(g)
	return []string{"random error", "shift", "yield"}[slices.Index(m, slices.Min(m))]
}

// A sample is the errors of many realisations: by realisation and pixel of the region,
// NaN where a pixel has no value.
type sample [][]float64

// outcome returns that of one realisation.
func outcome(x []float64) Outcome {
	s := stat.Summarise(x)
	return Outcome{(s.P84 - s.P16) / 2, s.Median, float64(s.Count) / float64(max(len(x), 1))}
}

// A scatter is a sample in one bin of height.
type scatter struct {
	random float64 // of one pixel from realisation to realisation
	shift  float64 // median over the pixels
	spread float64 // of the pixels' own means, without what chance makes of it
	yield  float64
	pixels int
}

// scatters splits a sample into what changes from realisation to realisation and what
// stays, bin by bin.
func (g *region) scatters(x sample) []scatter {
	out := make([]scatter, g.bins())
	for b := range out {
		var rest, middle []float64
		var all, valid, weights int
		for p := range g.pixels {
			if g.bin[p] != b {
				continue
			}
			out[b].pixels++
			var mine []float64
			for _, r := range x {
				all++
				if !math.IsNaN(r[p]) {
					mine = append(mine, r[p])
				}
			}
			valid += len(mine)
			if n := len(mine); n >= 2 && 2*n >= len(x) {
				mean := 0.0
				for _, y := range mine {
					mean += y / float64(n)
				}
				for _, y := range mine {
					rest = append(rest, (y-mean)*math.Sqrt(float64(n)/float64(n-1)))
				}
				middle = append(middle, mean)
				weights += n
			}
		}
		s := &out[b]
		s.yield = float64(valid) / float64(max(all, 1))
		s.random = (stat.Quantile(0.84, rest) - stat.Quantile(0.16, rest)) / 2
		s.shift = stat.Median(middle)
		if n := len(middle); n > 1 {
			w := (stat.Quantile(0.84, middle) - stat.Quantile(0.16, middle)) / 2
			s.spread = math.Sqrt(max(0, w*w-s.random*s.random*float64(n)/float64(weights)))
		}
	}
	return out
}

// mixture returns the outcome of a map whose bins have these scatters: each bin a normal
// distribution with the weight of its pixels that have a field.
func mixture(bins []scatter) Outcome {
	var all, valid float64
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, s := range bins {
		all += float64(s.pixels)
		valid += float64(s.pixels) * s.yield
		if s.pixels > 0 && s.yield > 0 {
			w := math.Hypot(s.random, s.spread)
			lo, hi = min(lo, s.shift-8*w), max(hi, s.shift+8*w)
		}
	}
	if !(valid > 0) || !(lo <= hi) {
		return Outcome{math.NaN(), math.NaN(), 0}
	}
	below := func(x float64) float64 {
		sum := 0.0
		for _, s := range bins {
			w := math.Hypot(s.random, s.spread)
			switch n := float64(s.pixels) * s.yield; {
			case !(n > 0):
			case w > 0:
				sum += n * 0.5 * math.Erfc((s.shift-x)/(w*math.Sqrt2))
			case x >= s.shift:
				sum += n
			}
		}
		return sum / valid
	}
	quantile := func(p float64) float64 {
		a, b := lo, hi
		for range 60 {
			if m := (a + b) / 2; below(m) < p {
				a = m
			} else {
				b = m
			}
		}
		return (a + b) / 2
	}
	return Outcome{(quantile(0.84) - quantile(0.16)) / 2, quantile(0.5), valid / all}
}
