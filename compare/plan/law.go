package plan

import (
	"context"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// A law says what one recipe makes of the waves of the target at any duration, noise
// and cadence.
//
// The coherence of two points is that of the waves themselves, g, times S/(S+N), with S
// and N the power of waves and noise in the band. A lag then has the error
//
//	sigma^2 = (1 - g'^2) / (g'^2 2 n (2 pi f)^2),   g' = g S/(S+N),
//
// n = T times the effective bandwidth being the number of independent frequencies
// (derived). With x = N/S the first factor is (1/g^2 - 1) + 2 x/g^2 + x^2/g^2, so that the
// variance of the speed is (a + b x + c x^2)/T, whatever points a track combines and
// however their errors hang together: each of them adds a quadratic. a is what the waves
// leave without any noise. The three numbers of each bin of height are fitted to what the
// recipe itself makes of the noise-free waves with noise added.
type law struct {
	*reference
	abc     [][3]float64 // of each bin, for T in hours
	nodes   []node
	seen    [][]scatter // of each node and bin
	chance  []Outcome   // scatter of the maps' own outcomes, of each node
	cadence []node      // those with thinned frames, the first of which is not
	thinned [][]scatter
}

// Durations of the nodes [h] and noise ratios.
const (
	shortNode = 1.0
	mainNode  = 2.0
)

var ratios = []float64{0, 0.3, 0.6, 0.85, 1.2}

// learnLaw tries the recipe on every node; cadence is the longest that is asked about [s].
func (r *reference) learnLaw(ctx context.Context, cadence float64) (*law, error) {
	w := &law{reference: r}
	for _, x := range ratios {
		w.nodes = append(w.nodes, node{mainNode, x, 1})
	}
	ends := []float64{shortNode}
	if long := float64(r.l.Effort.Waves) / 3600 / 6; long > 1.25*mainNode {
		ends = append(ends, long)
	}
	for _, t := range ends {
		w.nodes = append(w.nodes, node{t, 0, 1}, node{t, endRatio, 1})
	}
	w.cadence = []node{w.nodes[0]}
	top := 1 / (2 * (r.recipe.Filter.Centre.Hz() + r.recipe.Filter.Width.Hz())) // as the scenario's own rule
	for m := 2; float64(m-1)*r.cadence < cadence && float64(m)*r.cadence < top; m++ {
		w.cadence = append(w.cadence, node{mainNode, 0, m})
	}
	all := append(slices.Clone(w.nodes), w.cadence[1:]...)
	report := r.o.report("estimator on the waves")
	for i, n := range all {
		_, field, err := r.try(ctx, n)
		if err != nil {
			return nil, err
		}
		s := r.region.scatters(field)
		if n.thin > 1 {
			w.thinned = append(w.thinned, s)
		} else {
			w.seen = append(w.seen, s)
			w.chance = append(w.chance, chance(field))
		}
		if report != nil {
			report(i+1, len(all))
		}
	}
	w.thinned = slices.Insert(w.thinned, 0, w.seen[0])
	for b := range r.region.bins() {
		w.abc = append(w.abc, w.fit(b))
	}
	return w, nil
}

// chance returns the standard deviations of the outcomes of single maps.
func chance(x sample) Outcome {
	var q [3][]float64
	for _, r := range x {
		o := outcome(r)
		q[0], q[1], q[2] = append(q[0], o.Random), append(q[1], o.Systematic), append(q[2], o.Yield)
	}
	return Outcome{deviation(q[0]), deviation(q[1]), deviation(q[2])}
}

// deviation returns the standard deviation of the finite values.
func deviation(x []float64) float64 {
	n, sum, squares := 0.0, 0.0, 0.0
	for _, v := range x {
		if !math.IsNaN(v) {
			n++
			sum += v
		}
	}
	for _, v := range x {
		if !math.IsNaN(v) {
			squares += (v - sum/n) * (v - sum/n)
		}
	}
	if n < 2 {
		return math.NaN()
	}
	return math.Sqrt(squares / (n - 1))
}

// leastYield is the share of the pixels below which those that noise leaves are not what
// the formula is about.
const leastYield = 0.5

// fit returns a, b and c of a bin: least squares of relative errors, none negative.
func (w *law) fit(b int) [3]float64 {
	var rows [][3]float64
	for i := range ratios {
		v := w.seen[i][b].random
		if y := v * v * w.nodes[i].hours; y > 0 && w.seen[i][b].yield > leastYield {
			x := w.nodes[i].ratio * w.nodes[i].ratio
			rows = append(rows, [3]float64{1 / y, x / y, x * x / y})
		}
	}
	use := []int{0, 1, 2}
	for len(use) > 0 && len(rows) >= len(use) {
		m, ones := mat.NewDense(len(rows), len(use), nil), mat.NewVecDense(len(rows), nil)
		for i, r := range rows {
			ones.SetVec(i, 1)
			for j, u := range use {
				m.Set(i, j, r[u])
			}
		}
		var p mat.VecDense
		if p.SolveVec(m, ones) != nil {
			break
		}
		least := 0
		for j := range use {
			if p.AtVec(j) < p.AtVec(least) {
				least = j
			}
		}
		if p.AtVec(least) < 0 {
			use = slices.Delete(use, least, least+1)
			continue
		}
		var out [3]float64
		for j, u := range use {
			out[u] = p.AtVec(j)
		}
		return out
	}
	return [3]float64{math.NaN(), math.NaN(), math.NaN()}
}

// formula is the law without what short series and long cadences add.
func (w *law) formula(b int, hours, ratio float64) float64 {
	x := ratio * ratio
	q := w.abc[b]
	return math.Sqrt((q[0] + q[1]*x + q[2]*x*x) / hours)
}

// at returns what maps of a design are like in one bin, without the noise of the
// density. Between nodes it is linear in the logarithm of the duration and in N/(S+N).
func (w *law) at(b int, hours, ratio, cadence float64) scatter {
	u := ratio * ratio / (1 + ratio*ratio)
	s := w.seen[0][b]
	s.random = w.formula(b, hours, ratio)
	get := func(of func(*scatter) float64) float64 {
		y := w.noisy(b, u, of)
		return y + w.lasting(b, hours, u, func(i int, main float64) float64 { return of(&w.seen[i][b]) - main }, of)
	}
	s.shift = get(func(s *scatter) float64 { return s.shift })
	s.yield = min(max(get(func(s *scatter) float64 { return s.yield }), 0), 1)
	if n := len(w.nodes); n > len(ratios)+2 {
		s.spread = w.seen[n-2][b].spread // of the longest pieces, which tell it best
	}
	// What the nodes were seen to have beside the formula: short series more, and those in
	// which noise leaves the best pixels only, less.
	beside := func(i int) float64 {
		n := w.nodes[i]
		if d := math.Log(w.seen[i][b].random / w.formula(b, n.hours, n.ratio)); !math.IsNaN(d) {
			return d
		}
		return 0
	}
	main := w.noisyAt(u, beside)
	s.random *= math.Exp(main + w.lasting(b, hours, u, func(i int, _ float64) float64 { return beside(i) - beside(w.twin(i)) }, nil))
	w.sparse(&s, b, cadence)
	return s
}

// endRatio is the noise of the nodes of other durations than the main one.
const endRatio = 0.6

// twin returns the main node with the noise of another node.
func (w *law) twin(i int) int { return slices.Index(ratios, w.nodes[i].ratio) }

// noisy interpolates the main nodes in u.
func (w *law) noisy(b int, u float64, of func(*scatter) float64) float64 {
	return w.noisyAt(u, func(i int) float64 { return of(&w.seen[i][b]) })
}

func (w *law) noisyAt(u float64, of func(i int) float64) float64 {
	share := func(i int) float64 { return ratios[i] * ratios[i] / (1 + ratios[i]*ratios[i]) }
	i := 0
	for i+2 < len(ratios) && u > share(i+1) {
		i++
	}
	t := min((u-share(i))/(share(i+1)-share(i)), 1)
	lo, hi := of(i), of(i+1)
	if math.IsNaN(hi) { // no pixel has a value at that much noise
		return lo
	}
	return lo*(1-t) + hi*t
}

// lasting interpolates what another duration than the main one changes.
func (w *law) lasting(b int, hours, u float64, change func(i int, main float64) float64, of func(*scatter) float64) float64 {
	first := len(ratios)
	if hours > mainNode {
		first += 2
	}
	if first >= len(w.nodes) {
		return 0
	}
	t := math.Log(hours/mainNode) / math.Log(w.nodes[first].hours/mainNode)
	t = min(max(t, 0), 1)
	var y [2]float64
	for k := range y {
		main := 0.0
		if of != nil {
			main = of(&w.seen[w.twin(first+k)][b])
		}
		y[k] = change(first+k, main)
	}
	v := min(u*(1+endRatio*endRatio)/(endRatio*endRatio), 1)
	if d := t * (y[0]*(1-v) + y[1]*v); !math.IsNaN(d) {
		return d
	}
	return 0
}

// sparse adds what a cadence does to noise-free waves beyond that of the reference.
func (w *law) sparse(s *scatter, b int, cadence float64) {
	i, t := 0, 0.0
	for i+2 < len(w.thinned) && cadence > float64(w.cadence[i+1].thin)*w.reference.cadence {
		i++
	}
	if i+1 >= len(w.thinned) {
		return
	}
	lo, hi := float64(w.cadence[i].thin)*w.reference.cadence, float64(w.cadence[i+1].thin)*w.reference.cadence
	t = min(max((cadence-lo)/(hi-lo), 0), 1)
	of := func(get func(*scatter) float64) float64 {
		return get(&w.thinned[i][b])*(1-t) + get(&w.thinned[i+1][b])*t - get(&w.thinned[0][b])
	}
	first := w.thinned[0][b].random
	s.random *= (1 + of(func(s *scatter) float64 { return s.random })/first)
	s.shift += of(func(s *scatter) float64 { return s.shift })
	s.yield = min(max(s.yield+of(func(s *scatter) float64 { return s.yield }), 0), 1)
}

// nearest returns the scatter of single maps' outcomes at the node nearest to a design.
func (w *law) nearest(hours, ratio float64) Outcome {
	best, least := 0, math.Inf(1)
	for i, n := range w.nodes {
		du := ratio*ratio/(1+ratio*ratio) - n.ratio*n.ratio/(1+n.ratio*n.ratio)
		if d := math.Abs(math.Log(hours/n.hours)) + 2*math.Abs(du); d < least {
			best, least = i, d
		}
	}
	return w.chance[best]
}
