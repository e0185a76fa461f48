// Package plan answers an observer before the time is requested: which of many designs of
// an observation meets a goal, how surely, and what limits it.
//
// First every design is predicted: the light gives the noise of a Doppler shift and of the
// ratio of the lines, and the noise with the waves' own coherence, taken from one
// noise-free simulation, gives the error of the speed (see law). Then the designs on which
// the decision hangs go through the whole chain in several realisations, which calibrate
// the prediction and state its error.
package plan

import (
	"context"
	"math"
	"slices"

	"offplane/synth/random"
)

// Settings of a plan: what does not change its result, and what names it.
type Settings struct {
	Workers  int // < 1: every core
	Version  string
	Progress func(stage string, done, total int)
}

func (s *Settings) report(stage string) func(done, total int) {
	if s.Progress == nil {
		return nil
	}
	return func(done, total int) { s.Progress(stage, done, total) }
}

// A Candidate is a design with what is known of it.
type Candidate struct {
	*Design
	Raw     *Prediction // as predicted
	Outcome Outcome     // calibrated
	Error   Outcome     // of the calibrated prediction and of a single map together
	Success float64     // chance to meet the goal
	Trial   *Simulation // nil: not simulated
	Pareto  bool
}

// A Calibration is what simulations say of the predictions.
type Calibration struct {
	Designs    int
	Random     float64 // factor of the predicted random error
	Systematic float64 // added to the predicted shift
	Yield      float64 // added to the predicted yield
	Error      Outcome // standard deviations: of ln of the random error, of shift and yield
}

// Errors of predictions that have not been calibrated, from those of the embedded
// campaigns (own simulation).
var uncalibrated = Outcome{0.15, 0.05, 0.1}

// A Plan is the answer.
type Plan struct {
	Campaign    *Loaded
	Version     string
	Refused     []Design
	Candidates  []Candidate // of possible designs, by number
	Calibration Calibration
	Best        *Candidate // cheapest that meets the goal; nil: none
	Nearest     *Candidate // likeliest to meet it
	Limit       []Limit    // of Best or else Nearest, the worst first
	Curve       []Point    // of the same, against duration
	Floor       Outcome    // of the same: no duration takes this away
	Cases       []Case     // of the same: how the answer moves
	Density     float64    // median of 1/2 ln(n/NE_SKY) without noise
}

// Chosen is the design that the plan speaks about.
func (p *Plan) Chosen() *Candidate {
	if p.Best != nil {
		return p.Best
	}
	return p.Nearest
}

// Run makes the plan of a campaign.
func Run(ctx context.Context, l *Loaded, o Settings) (*Plan, error) {
	ds, err := l.designs(ctx)
	if err != nil {
		return nil, err
	}
	if err := possible(ds); err != nil {
		return nil, err
	}
	w := &planner{predictor: newPredictor(l, &o, ds), plan: &Plan{Campaign: l, Version: o.Version}}
	if err := w.predictAll(ctx, ds); err != nil {
		return nil, err
	}
	if err := w.simulate(ctx); err != nil {
		return nil, err
	}
	w.choose()
	if err := w.explain(ctx); err != nil {
		return nil, err
	}
	return w.plan, nil
}

type planner struct {
	*predictor
	plan *Plan
}

func (w *planner) predictAll(ctx context.Context, ds []Design) error {
	report := w.o.report("designs")
	for i := range ds {
		if ds[i].Refuse != "" {
			w.plan.Refused = append(w.plan.Refused, ds[i])
			continue
		}
		r, err := w.predict(ctx, &ds[i], asItIs)
		if err != nil {
			return err
		}
		w.plan.Candidates = append(w.plan.Candidates, Candidate{Design: &ds[i], Raw: r})
		if report != nil && i%32 == 0 {
			report(i, len(ds))
		}
	}
	w.calibrate()
	return nil
}

// simulate takes designs through the whole chain until the decision stands or the effort
// is spent.
func (w *planner) simulate(ctx context.Context) error {
	e := &w.l.Effort
	for n := range e.Designs {
		c := w.next()
		if c == nil {
			return nil
		}
		var err error
		if c.Trial, err = w.predictor.simulate(ctx, c.Design, e.Trials, random.Hash(w.l.Seed, uint64(n+1))); err != nil {
			return err
		}
		w.calibrate()
	}
	return nil
}

// next returns the design whose simulation tells most: the one that would be recommended,
// then cheaper ones that may do, the likeliest first; at last, what the calibration lacks.
func (w *planner) next() *Candidate {
	w.choose()
	cs := w.plan.Candidates
	pick := func(ok func(*Candidate) bool, worth func(*Candidate) float64) *Candidate {
		var best *Candidate
		for i := range cs {
			if c := &cs[i]; c.Trial == nil && ok(c) && (best == nil || worth(c) > worth(best)) {
				best = c
			}
		}
		return best
	}
	likely := func(c *Candidate) float64 { return c.Success }
	if b := w.plan.Best; b == nil {
		if c := pick(func(c *Candidate) bool { return c.Success > 0.05 }, likely); c != nil {
			return c
		}
	} else {
		if b.Trial == nil {
			return b
		}
		if c := pick(func(c *Candidate) bool { return c.Hours < b.Hours*0.999 && c.Success > 0.3 }, likely); c != nil {
			return c
		}
	}
	if w.plan.Calibration.Designs < leastCalibration {
		return pick(func(*Candidate) bool { return true }, func(c *Candidate) float64 { return -math.Abs(c.Success - 0.5) })
	}
	return nil
}

// leastCalibration is the number of simulated designs that tell an error.
const leastCalibration = 3

// calibrate holds predictions to simulations and says of every design how likely it meets
// the goal.
func (w *planner) calibrate() {
	var q [3][]float64
	cs := w.plan.Candidates
	for i := range cs {
		if t := cs[i].Trial; t != nil {
			r := cs[i].Raw
			add := func(k int, x float64) {
				if !math.IsNaN(x) && !math.IsInf(x, 0) {
					q[k] = append(q[k], x)
				}
			}
			add(0, math.Log(t.Random/r.Random))
			add(1, t.Systematic-r.Systematic)
			add(2, t.Yield-r.Yield)
		}
	}
	k := &w.plan.Calibration
	k.Designs = len(q[2])
	k.Random, k.Error.Random = settle(q[0], uncalibrated.Random)
	k.Random = math.Exp(k.Random)
	k.Systematic, k.Error.Systematic = settle(q[1], uncalibrated.Systematic)
	k.Yield, k.Error.Yield = settle(q[2], uncalibrated.Yield)
	for i := range cs {
		w.judge(&cs[i])
	}
}

// settle returns the mean of some differences and the standard deviation of the next
// one; few of them count beside the first guess of the latter.
func settle(x []float64, guess float64) (mean, deviation float64) {
	n := float64(len(x))
	for _, v := range x {
		mean += v / n
	}
	sum := guess * guess
	for _, v := range x {
		sum += (v - mean) * (v - mean)
	}
	return mean, math.Sqrt(sum / max(n, 1))
}

// judge applies the calibration to a design.
func (w *planner) judge(c *Candidate) {
	k, r := &w.plan.Calibration, c.Raw
	c.Outcome = Outcome{r.Random * k.Random, r.Systematic + k.Systematic, min(max(r.Yield+k.Yield, 0), 1)}
	c.Error = Outcome{math.Hypot(k.Error.Random*c.Outcome.Random, known(r.chance.Random)), math.Hypot(k.Error.Systematic, known(r.chance.Systematic)), math.Hypot(k.Error.Yield, known(r.chance.Yield))}
	c.Success = success(c.Outcome, c.Error, &w.l.Goal)
	if t := c.Trial; t != nil {
		// Trials count if they speak against the prediction, by two standard deviations. Good
		// luck does not: the search would end at the design that had it.
		const weight = 4 // of the prediction, in trials
		n, met := float64(len(t.Each)), float64(t.Met)
		if p := c.Success; met < n*p-2*math.Sqrt(n*p*(1-p)) {
			c.Success = (weight*p + met) / (weight + n)
		}
	}
}

func known(x float64) float64 {
	if math.IsNaN(x) {
		return 0
	}
	return x
}

// success is the chance that three independent normal numbers are within their bounds.
func success(o, e Outcome, g *Goal) float64 {
	below := func(x, mean, s float64) float64 { return 0.5 * math.Erfc((mean-x)/(s*math.Sqrt2)) }
	p := below(g.Random, o.Random, e.Random) *
		(below(g.Systematic, o.Systematic, e.Systematic) - below(-g.Systematic, o.Systematic, e.Systematic)) *
		(1 - below(g.Yield, o.Yield, e.Yield))
	if math.IsNaN(p) {
		return 0
	}
	return p
}

// choose finds the cheapest design that meets the goal, the nearest to it, and those that
// no other beats in hours, total error and yield at once.
func (w *planner) choose() {
	p := w.plan
	p.Best, p.Nearest = nil, nil
	for i := range p.Candidates {
		c := &p.Candidates[i]
		if c.Success >= w.l.Goal.Success && (p.Best == nil || c.Hours < p.Best.Hours*(1-1e-9) || c.Hours < p.Best.Hours*(1+1e-9) && c.Success > p.Best.Success) {
			p.Best = c
		}
		if n := p.Nearest; n == nil || c.Success > n.Success+1e-12 || c.Success > n.Success-1e-12 && c.Outcome.margin(&w.l.Goal) > n.Outcome.margin(&w.l.Goal) {
			p.Nearest = c
		}
	}
	pareto(p.Candidates)
}

// pareto marks the designs than which none is better in hours, random error and yield at
// once. The shift is hardly a matter of the design, and known less well than it differs.
func pareto(cs []Candidate) {
	order := make([]*Candidate, len(cs))
	for i := range cs {
		order[i] = &cs[i]
	}
	slices.SortStableFunc(order, func(a, b *Candidate) int {
		switch {
		case a.Hours < b.Hours:
			return -1
		case a.Hours > b.Hours:
			return 1
		case a.Outcome.Random < b.Outcome.Random:
			return -1
		case a.Outcome.Random > b.Outcome.Random:
			return 1
		}
		return 0
	})
	var front []*Candidate
	for _, c := range order {
		e := c.Outcome.Random
		c.Pareto = !math.IsNaN(e)
		for _, f := range front {
			if f.Outcome.Random <= e && f.Outcome.Yield >= c.Outcome.Yield {
				c.Pareto = false
				break
			}
		}
		if c.Pareto {
			front = append(front, c)
		}
	}
}
