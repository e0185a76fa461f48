package table

import (
	"context"
	"math"
)

// A calibration makes one surface. It holds out whole members, fold by fold: median and
// spread are fitted without a fold, and the standardised residuals of its members,
//
//	z = (y - median) / spread,
//
// say how far the ends of an interval have to lie (cross-conformal prediction: Vovk
// 2015, Ann. Math. Artif. Intell. 74, 9; of clusters: Dunn, Wasserman & Ramdas 2023, J.
// Am. Stat. Assoc. 118, 2491; weighted: Tibshirani et al. 2019, Adv. Neural Inf. Process.
// Syst. 32). To judge that on members never used, each fold is left out once more from
// the fits and from the residuals: fits exist for every pair of folds.
type calibration struct {
	quantity Quantity
	d        *design
	w        []float64 // prior weight of the members
	fold     []int     // of the members
	least    int
	pairs    [][2]int   // folds that a fit leaves out; {k, k}: one; {-1, -1}: none
	fits     []estimate // one a pair
	index    map[[2]int]int
}

// An estimate is what one fit yields: node values of median and spread, and the members
// in the cells.
type estimate struct {
	median, spread []float64
	members        []float64 // weight of the members in the cell, by lowest corner
}

// leastSpread keeps the spread of a surface from falling below a share of that overall.
const leastSpread = 0.3

func newCalibration(members []Member, weights []float64, fold []int, q Quantity, fs []Feature, least int) *calibration {
	d := newDesign(members, weights, q, fs)
	if d == nil {
		return nil
	}
	c := &calibration{quantity: q, d: d, w: weights, fold: fold, least: least, index: map[[2]int]int{}}
	add := func(a, b int) {
		c.index[[2]int{a, b}] = len(c.pairs)
		c.index[[2]int{b, a}] = len(c.pairs)
		c.pairs = append(c.pairs, [2]int{a, b})
	}
	add(-1, -1)
	for a := range folds {
		for b := a; b < folds; b++ {
			add(a, b)
		}
	}
	return c
}

func (c *calibration) surfaces(ctx context.Context, workers int, progress func(done, total int)) error {
	c.fits = make([]estimate, len(c.pairs))
	return forAll(ctx, len(c.pairs), workers, progress, func(i int) {
		p := c.pairs[i]
		c.fits[i] = c.estimate(func(member int) bool {
			f := c.fold[member]
			return f != p[0] && f != p[1]
		})
	})
}

// pixelWeights returns the weight of each pixel among those of the members that are
// used: a member's pixels share its weight.
func (d *design) pixelWeights(w []float64, used func(member int) bool) []float64 {
	count := make([]int, len(w))
	for _, m := range d.member {
		count[m]++
	}
	out := make([]float64, d.pixels())
	for i, m := range d.member {
		if used(int(m)) {
			out[i] = w[m] / float64(count[m])
		}
	}
	return out
}

// estimate fits median and spread to the members that are used.
func (c *calibration) estimate(used func(member int) bool) estimate {
	d := c.d
	w := d.pixelWeights(c.w, used)
	e := estimate{median: d.fit(d.y, w), members: make([]float64, d.grid.Size())}
	abs := make([]float64, d.pixels())
	for i := range abs {
		abs[i] = math.Abs(d.y[i] - d.value(e.median, i))
	}
	floor := max(leastSpread*weightedQuantile(0.5, abs, w, 0), 1e-9)
	e.spread = d.fit(abs, w)
	for i := range e.spread {
		e.spread[i] = max(e.spread[i], floor)
	}
	// The pixels of a member are neighbours in the list: count it once a cell.
	last := make([]int32, d.grid.Size())
	for i := range last {
		last[i] = -1
	}
	for i, m := range d.member {
		if at := d.corner[i]; w[i] > 0 && last[at] != m {
			last[at] = m
			e.members[at] += c.w[m]
		}
	}
	return e
}

// levels are the quantiles of the standardised residuals that a surface is made of.
var levels = [5]float64{0.025, 0.16, 0.5, 0.84, 0.975}

// held appends the standardised residuals of fold b under a fit that did not see it, for
// pixels within the domain, and their weights: a member's pixels there share its weight.
func (c *calibration) held(e *estimate, b int, z, w []float64) ([]float64, []float64) {
	d := c.d
	for i := 0; i < d.pixels(); {
		m := int(d.member[i])
		from := len(z)
		for ; i < d.pixels() && int(d.member[i]) == m; i++ {
			if c.fold[m] == b && e.members[d.corner[i]] >= float64(c.least) {
				z = append(z, (d.y[i]-d.value(e.median, i))/d.value(e.spread, i))
			}
		}
		for range z[from:] {
			w = append(w, c.w[m]/float64(len(z)-from))
		}
	}
	return z, w
}

// ends returns the five quantiles of standardised residuals. A member not yet seen, of
// weight 1, stands at either infinity.
func ends(z, w []float64) (q [5]float64) {
	minus := make([]float64, len(z))
	for i := range z {
		minus[i] = -z[i]
	}
	for k, p := range levels {
		switch {
		case p < 0.5:
			q[k] = -weightedQuantile(1-p, minus, w, 1)
		case p > 0.5:
			q[k] = weightedQuantile(p, z, w, 1)
		default:
			q[k] = weightedQuantile(p, z, w, 0)
		}
	}
	return q
}

// result returns the surface from all members and the residuals of each fold.
func (c *calibration) result() Surface {
	var z, w []float64
	for b := range folds {
		z, w = c.held(&c.fits[c.index[[2]int{b, b}]], b, z, w)
	}
	q := ends(z, w)
	e := &c.fits[c.index[[2]int{-1, -1}]]
	s := Surface{Quantity: c.quantity, Grid: c.d.grid, Members: make([]int64, len(e.members))}
	for k, to := range []*[]float64{&s.Low95, &s.Low68, &s.Median, &s.High68, &s.High95} {
		*to = make([]float64, len(e.median))
		for i := range e.median {
			(*to)[i] = digits(e.median[i] + float64(e.spread[i]*q[k]))
		}
	}
	for i, n := range e.members {
		s.Members[i] = int64(n + 1e-9)
	}
	s.Score = c.judge()
	return s
}

// digits rounds ln(true/inferred) to 1e-5, far below any interval, for short files.
func digits(v float64) float64 { return math.Round(v*1e5) / 1e5 }
