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
	abc     [][3]float64  // of each bin, for T in hours
	hours   []float64     // durations of the nodes
	seen    [][][]scatter // by duration, noise and bin
	chance  [][]Outcome   // scatter of the maps' own outcomes, by duration and noise
	slow    []float64     // cadences of fewer frames of noise-free waves [s]
	thinned [][]scatter   // by these and bin, at mainNode
}

// Durations of the nodes [h] beside one that the waves allow; noise over waves in the band,
// the last of which leaves hardly a pixel, and noise as a share of all.
const (
	shortNode = 1.0
	mainNode  = 2.0
)

var (
	ratios = []float64{0, 0.3, 0.6, 0.9, 1.3, 2.5}
	shares = func() (u []float64) {
		for _, x := range ratios {
			u = append(u, share(x))
		}
		return u
	}()
)

func share(ratio float64) float64 { return ratio * ratio / (1 + ratio*ratio) }

// main is the index of mainNode.
const main = 1

// learnLaw tries the recipe on every node; cadence is the longest that is asked about [s].
func (r *reference) learnLaw(ctx context.Context, cadence float64) (*law, error) {
	w := &law{reference: r, hours: []float64{shortNode, mainNode}}
	if long := float64(r.l.Effort.Waves) / 3600 / 6; long > 1.25*mainNode {
		w.hours = append(w.hours, long)
	}
	thin := []int{1}
	top := 1 / (2 * (r.recipe.Filter.Centre.Hz() + r.recipe.Filter.Width.Hz())) // as the scenario's own rule
	for m := 2; float64(m-1)*r.cadence < cadence && float64(m)*r.cadence < top; m++ {
		thin = append(thin, m)
	}
	report, done := r.o.report("estimator on the waves"), 0
	try := func(n node) (sample, error) {
		_, field, err := r.try(ctx, n)
		if done++; report != nil && err == nil {
			report(done, len(w.hours)*len(ratios)+len(thin)-1)
		}
		return field, err
	}
	for _, t := range w.hours {
		var seen [][]scatter
		var chances []Outcome
		for _, x := range ratios {
			field, err := try(node{t, x, 1})
			if err != nil {
				return nil, err
			}
			seen, chances = append(seen, r.region.scatters(field)), append(chances, chance(field))
		}
		w.seen, w.chance = append(w.seen, seen), append(w.chance, chances)
	}
	for _, m := range thin {
		w.slow = append(w.slow, float64(m)*r.cadence)
		if m == 1 {
			w.thinned = append(w.thinned, w.seen[main][0])
			continue
		}
		field, err := try(node{mainNode, 0, m})
		if err != nil {
			return nil, err
		}
		w.thinned = append(w.thinned, r.region.scatters(field))
	}
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
	for i, x := range ratios {
		v := w.seen[main][i][b]
		if y := v.random * v.random * mainNode; y > 0 && v.yield > leastYield {
			x *= x
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

// formula is the law without what short series and long cadences add. The noise counts as
// no more than that which leaves pixels enough to tell their scatter: those few that more
// of it leaves are the quiet ones.
func (w *law) formula(b int, hours, ratio float64) float64 {
	last := len(ratios) - 1
	for last > 0 && math.IsNaN(w.seen[main][last][b].random) {
		last--
	}
	x := min(ratio, ratios[last])
	x *= x
	q := w.abc[b]
	return math.Sqrt((q[0] + q[1]*x + q[2]*x*x) / hours)
}

// at returns what maps of a design are like in one bin, without the noise of the
// density. Between nodes it is linear in the logarithm of the duration and in N/(S+N).
func (w *law) at(b int, hours, ratio, cadence float64) scatter {
	d, t := between(w.hours, hours, math.Log)
	i, v := between(shares, share(ratio), nil)
	mix := func(of func(d, i int) float64) float64 {
		known := func(d, i int) float64 { // no pixel has a value at much noise
			x := of(d, i)
			for ; math.IsNaN(x) && i > 0; i-- {
				x = of(d, i-1)
			}
			return x
		}
		return (known(d, i)*(1-v)+known(d, i+1)*v)*(1-t) + (known(d+1, i)*(1-v)+known(d+1, i+1)*v)*t
	}
	s := w.seen[main][0][b]
	s.shift = mix(func(d, i int) float64 { return w.seen[d][i][b].shift })
	s.yield = mix(func(d, i int) float64 { return w.seen[d][i][b].yield })
	s.spread = w.seen[len(w.seen)-1][0][b].spread // of the longest pieces, which tell it best
	// What the nodes were seen to have beside the formula: short series more, and those in
	// which noise leaves the best pixels only, less.
	s.random = w.formula(b, hours, ratio) * math.Exp(mix(func(d, i int) float64 {
		return math.Log(w.seen[d][i][b].random / w.formula(b, w.hours[d], ratios[i]))
	}))
	w.sparse(&s, b, cadence)
	return s
}

// between finds the place of x in ascending numbers: x[i] (1-t) + x[i+1] t on a scale, nil
// being the numbers' own. Beyond the ends t is that of the end.
func between(xs []float64, x float64, scale func(float64) float64) (i int, t float64) {
	for i+2 < len(xs) && x > xs[i+1] {
		i++
	}
	if scale == nil {
		scale = func(x float64) float64 { return x }
	}
	lo, hi := scale(xs[i]), scale(xs[i+1])
	return i, min(max((scale(x)-lo)/(hi-lo), 0), 1)
}

// sparse adds what a cadence does to noise-free waves beyond that of the reference.
func (w *law) sparse(s *scatter, b int, cadence float64) {
	if len(w.slow) < 2 {
		return
	}
	i, t := between(w.slow, cadence, nil)
	of := func(get func(*scatter) float64) float64 {
		return get(&w.thinned[i][b])*(1-t) + get(&w.thinned[i+1][b])*t - get(&w.thinned[0][b])
	}
	s.random *= 1 + of(func(s *scatter) float64 { return s.random })/w.thinned[0][b].random
	s.shift += of(func(s *scatter) float64 { return s.shift })
	s.yield = min(max(s.yield+of(func(s *scatter) float64 { return s.yield }), 0), 1)
}

// nearest returns the scatter of single maps' outcomes at the node nearest to a design;
// nothing is known where no pixel is (ratio NaN).
func (w *law) nearest(hours, ratio float64) Outcome {
	if math.IsNaN(ratio) {
		return Outcome{math.NaN(), math.NaN(), math.NaN()}
	}
	d, t := between(w.hours, hours, math.Log)
	i, v := between(shares, share(ratio), nil)
	return w.chance[d+int(math.Round(t))][i+int(math.Round(v))]
}
