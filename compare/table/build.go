package table

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"slices"

	"offplane/synth/parallel"
	"offplane/synth/random"
)

// Options of Build.
type Options struct {
	Features []Feature // height is always among them; nil: DefaultFeatures
	Weights  []float64 // of the members, 0..1; nil: all 1
	Least    int       // members that a cell needs to be in the domain, at least 1; 0: DefaultLeast
	Workers  int
	Progress func(done, total int)
}

// DefaultFeatures need no map but the one to be corrected, and serve best: with field and
// density the speed is known.
var DefaultFeatures = []Feature{Height, Field, Density, Angle}

// Limits.
const (
	DefaultLeast = 8
	// LeastEffective is how many members a table needs: the ends of a 95 per cent
	// interval lie beyond 1 in 40 members, and an eighth is held out.
	LeastEffective = 50
	// perMember bounds the pixels of one member that take part: neighbours tell the same.
	perMember = 160
	folds     = 8
)

// ErrTooFew is the error of an ensemble too small for a table, or too far from the
// reader's prior.
var ErrTooFew = errors.New("too few members")

// Effective returns the effective number of members of these weights (Kish 1965,
// Survey Sampling, from memory): the square of their sum over the sum of squares.
func Effective(weights []float64) float64 {
	s, q := 0.0, 0.0
	for _, w := range weights {
		s += w
		q += float64(w * w)
	}
	if q == 0 {
		return 0
	}
	return s * s / q
}

// Build makes the surfaces of a table, for every quantity that the members have a truth
// of and every subset of the features that holds the height. The caller fills in what
// the table says about itself: truth, recipe, origin, prior. Members without pixels
// count, but say nothing.
func Build(ctx context.Context, members []Member, o Options) (*Table, error) {
	if o.Features == nil {
		o.Features = DefaultFeatures
	}
	if !slices.Contains(o.Features, Height) {
		o.Features = append([]Feature{Height}, o.Features...)
	}
	slices.Sort(o.Features)
	if n := len(o.Features); n > maxFeatures {
		return nil, fmt.Errorf("%d features (%s): a table has at most %d, height among them", n, join(o.Features), maxFeatures)
	}
	if o.Weights == nil {
		o.Weights = make([]float64, len(members))
		for i := range o.Weights {
			o.Weights[i] = 1
		}
	}
	if o.Least < 0 {
		panic("table: Least is negative")
	}
	if o.Least == 0 {
		o.Least = DefaultLeast
	}
	t := &Table{Members: len(members), Effective: Effective(o.Weights), Least: o.Least}
	if t.Effective < LeastEffective {
		return nil, fmt.Errorf("%w: %.1f effective members of %d; a table needs %d", ErrTooFew, t.Effective, len(members), LeastEffective)
	}
	type task struct {
		q  Quantity
		fs []Feature
	}
	var tasks []task
	for q := range quantities {
		if !slices.ContainsFunc(members, func(m Member) bool { return m.Ln[q] != nil }) {
			continue
		}
		for _, fs := range subsets(o.Features) {
			tasks = append(tasks, task{q, fs})
		}
	}
	t.Surfaces = make([]Surface, len(tasks))
	fold := foldsOf(len(members))
	for i, k := range tasks {
		c := newCalibration(members, o.Weights, fold, k.q, k.fs, o.Least)
		if c == nil {
			return nil, fmt.Errorf("%w: fewer than %d members have %s and %s", ErrTooFew, LeastEffective, k.q, join(k.fs))
		}
		err := c.surfaces(ctx, o.Workers, func(done, total int) {
			if o.Progress != nil {
				o.Progress(i*total+done, len(tasks)*total)
			}
		})
		if err != nil {
			return nil, err
		}
		t.Surfaces[i] = c.result()
		if s := &t.Surfaces[i]; !finite(s.Low95[0]) || !finite(s.High95[0]) {
			return nil, fmt.Errorf("%w in the domain of %s by %s", ErrTooFew, k.q, join(k.fs))
		}
	}
	return t, nil
}

// subsets returns all subsets that hold the first feature, the largest first.
func subsets(fs []Feature) [][]Feature {
	var out [][]Feature
	for bits := range 1 << (len(fs) - 1) {
		s := []Feature{fs[0]}
		for k, f := range fs[1:] {
			if bits>>k&1 == 1 {
				s = append(s, f)
			}
		}
		out = append(out, s)
	}
	slices.SortStableFunc(out, func(a, b []Feature) int {
		return cmp.Or(cmp.Compare(len(b), len(a)), slices.Compare(a, b))
	})
	return out
}

// foldsOf deals the members to the folds at random, evenly: designs have structure.
func foldsOf(n int) []int {
	key := random.NewKey(0x7461626c65)
	order := make([]int, n)
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int {
		return cmp.Or(cmp.Compare(key.Uniform(uint64(a)), key.Uniform(uint64(b))), cmp.Compare(a, b))
	})
	fold := make([]int, n)
	for rank, i := range order {
		fold[i] = rank % folds
	}
	return fold
}

// pick returns the pixels of a member that take part: those that have all features and
// the quantity, at most perMember of them, evenly spread.
func (m *Member) pick(q Quantity, fs []Feature) []int {
	if m.Ln[q] == nil {
		return nil
	}
	var all []int
	for i := range m.Pixels() {
		ok := finite(m.Ln[q][i])
		for _, f := range fs {
			ok = ok && m.Features[f] != nil && finite(m.Features[f][i])
		}
		if ok {
			all = append(all, i)
		}
	}
	if len(all) <= perMember {
		return all
	}
	out := make([]int, perMember)
	for k := range out {
		out[k] = all[(2*k+1)*len(all)/(2*perMember)]
	}
	return out
}

// newDesign lays the grid over the members and finds the basis of their pixels; those
// beyond the grid are left out. nil: too few members have such pixels.
func newDesign(members []Member, weights []float64, q Quantity, fs []Feature) *design {
	picks := make([][]int, len(members))
	have := 0.0
	values := make([][]float64, len(fs))
	var w []float64
	for m := range members {
		picks[m] = members[m].pick(q, fs)
		if len(picks[m]) == 0 {
			continue
		}
		have += weights[m]
		for _, i := range picks[m] {
			w = append(w, weights[m]/float64(len(picks[m])))
			for k, f := range fs {
				values[k] = append(values[k], members[m].Features[f][i])
			}
		}
	}
	if have < LeastEffective {
		return nil
	}
	d := &design{width: 1 << len(fs)}
	for k, f := range fs {
		a := newAxis(f, values[k], w)
		if len(a.Nodes) < 2 {
			return nil
		}
		d.grid = append(d.grid, a)
	}
	d.penalty = penalties(d.grid)
	var x, t [maxFeatures]float64
	for m := range members {
		for _, i := range picks[m] {
			for k, f := range fs {
				x[k] = members[m].Features[f][i]
			}
			corner, ok := d.grid.locate(x[:], t[:])
			if !ok {
				continue
			}
			d.corner = append(d.corner, int32(corner))
			d.member = append(d.member, int32(m))
			d.height = append(d.height, members[m].Features[Height][i])
			d.y = append(d.y, members[m].Ln[q][i])
			from := len(d.nodes)
			d.grid.corners(corner, t[:], func(node int, w float64) {
				d.nodes = append(d.nodes, int32(node))
				d.weights = append(d.weights, w)
			})
			sortNodes(d.nodes[from:], d.weights[from:])
		}
	}
	return d
}

// sortNodes puts the nodes of one pixel in ascending order.
func sortNodes(nodes []int32, w []float64) {
	for i := 1; i < len(nodes); i++ {
		for j := i; j > 0 && nodes[j] < nodes[j-1]; j-- {
			nodes[j], nodes[j-1] = nodes[j-1], nodes[j]
			w[j], w[j-1] = w[j-1], w[j]
		}
	}
}

// forAll runs work units; progress counts them.
func forAll(ctx context.Context, n, workers int, progress func(done, total int), f func(i int)) error {
	const chunk = 8 // progress in steps: units are short
	for from := 0; from < n; from += chunk {
		progress(from, n)
		k := min(chunk, n-from)
		if err := parallel.For(ctx, k, workers, func(_, i int) error { f(from + i); return nil }); err != nil {
			return err
		}
	}
	return nil
}
