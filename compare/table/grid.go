package table

import (
	"cmp"
	"math"
	"slices"
)

// maxFeatures bounds the dimensions of a grid: with more, cells hold too few members of
// any ensemble that can be paid for.
const maxFeatures = 4

// A Grid is a rectangular grid over features.
type Grid []Axis

// Size returns the number of nodes.
func (g Grid) Size() int {
	n := 1
	for _, a := range g {
		n *= len(a.Nodes)
	}
	return n
}

// locate returns the lowest corner of the cell that holds x and where in the cell x
// lies, 0..1 along each axis; ok is false beyond the grid.
func (g Grid) locate(x, t []float64) (corner int, ok bool) {
	for k, a := range g {
		n := len(a.Nodes)
		v := x[k]
		if !(v >= a.Nodes[0] && v <= a.Nodes[n-1]) {
			return 0, false
		}
		i, exact := slices.BinarySearch(a.Nodes, v)
		if !exact || i == n-1 {
			i--
		}
		t[k] = (v - a.Nodes[i]) / (a.Nodes[i+1] - a.Nodes[i])
		corner = corner*n + i
	}
	return corner, true
}

// corners calls do with the nodes around a point and their weights.
func (g Grid) corners(corner int, t []float64, do func(node int, w float64)) {
	for bits := range 1 << len(g) {
		w, node, stride := 1.0, corner, 1
		for k := len(g) - 1; k >= 0; k-- {
			if bits>>k&1 == 1 {
				w *= t[k]
				node += stride
			} else {
				w *= 1 - t[k]
			}
			stride *= len(g[k].Nodes)
		}
		do(node, w)
	}
}

// point returns the features of a node.
func (g Grid) point(node int) []float64 {
	x := make([]float64, len(g))
	for k := len(g) - 1; k >= 0; k-- {
		n := len(g[k].Nodes)
		x[k] = g[k].Nodes[node%n]
		node /= n
	}
	return x
}

// tails is the share of the pixels beyond either end of an axis.
const tails = 0.005

// counts is how many nodes an axis has.
var counts = [features]int{Height: 4, Field: 4, Density: 4, Speed: 4, Angle: 3, Track: 3, Coherence: 3}

// newAxis places nodes at quantiles of the feature, evenly in probability between the
// tails, rounded to three digits. Features with a natural range keep its ends.
func newAxis(f Feature, values, weights []float64) Axis {
	n := counts[f]
	a := Axis{Feature: f}
	for i := range n {
		p := tails + (1-2*tails)*float64(i)/float64(n-1)
		v := rounded(weightedQuantile(p, values, weights, 0))
		if f == Angle && (i == 0 || i == n-1) {
			v = 90 * float64(i) / float64(n-1)
		}
		if len(a.Nodes) == 0 || v > a.Nodes[len(a.Nodes)-1] {
			a.Nodes = append(a.Nodes, v)
		}
	}
	return a
}

// rounded keeps three significant digits.
func rounded(v float64) float64 {
	if v == 0 || !finite(v) {
		return v
	}
	e := math.Floor(math.Log10(math.Abs(v))) - 2
	if e >= 0 {
		p := math.Pow(10, e)
		return math.Round(v/p) * p
	}
	p := math.Pow(10, -e) // a whole number, so that the quotient is the nearest to the decimal
	return math.Round(v*p) / p
}

// weightedQuantile returns the smallest value whose cumulated weight reaches the share p
// of all weight and of extra, which stands at +Inf; +Inf if none does. Values need not be
// sorted; they must not be NaN.
func weightedQuantile(p float64, values, weights []float64, extra float64) float64 {
	order := make([]int, len(values))
	sum := extra
	for i := range order {
		order[i] = i
		sum += weights[i]
	}
	slices.SortFunc(order, func(a, b int) int {
		return cmp.Or(cmp.Compare(values[a], values[b]), cmp.Compare(a, b))
	})
	cum := 0.0
	for _, i := range order {
		cum += weights[i]
		if cum >= p*sum*(1-1e-12) {
			return values[i]
		}
	}
	return math.Inf(1)
}
