package plan

import (
	"context"
	"math"
	"slices"
)

// A Limit is one thing that stands between a design and its goal: what the margin would be
// without it.
type Limit struct {
	Name   string
	Margin float64 // least margin of the goal, over its bound, without this
	Change string  // what would have to change
}

// A Point of the curve against duration.
type Point struct {
	Hours   float64 // of the first line
	Outcome Outcome
	Speed   float64 // random error of the speed
}

// A Case is the same design in other circumstances.
type Case struct {
	Name    string
	Outcome Outcome
	Success float64
}

// explain says of the chosen design what limits it and how it moves.
func (w *planner) explain(ctx context.Context) error {
	p := w.plan
	c := p.Chosen()
	law, err := w.law(ctx, &c.scenario.Scenario)
	if err != nil {
		return err
	}
	p.Density = law.densest
	hours := float64(c.scenario.Scenario.Camera.Duration) / 3600
	const endless = 1e7 // [h]
	forever, err := w.predict(ctx, c.Design, If{1, 1, endless / hours, [2]bool{}})
	if err != nil {
		return err
	}
	p.Floor = w.calibrated(forever)
	if err := w.limits(ctx, c); err != nil {
		return err
	}
	for _, t := range []float64{0.5, 0.75, 1, 1.5, 2, 3, 4, 6, 8, 12, 16, 24, 48, 96} {
		as := asItIs
		as.Duration = t / hours
		r, err := w.predict(ctx, c.Design, as)
		if err != nil {
			return err
		}
		p.Curve = append(p.Curve, Point{t, w.calibrated(r), r.Speed})
	}
	for _, q := range []struct {
		name string
		as   If
	}{
		{"as planned", asItIs},
		{"background x 0.5", If{0.5, 1, 1, [2]bool{}}}, {"background x 2", If{2, 1, 1, [2]bool{}}},
		{"wave amplitude x 0.5", If{1, 0.5, 1, [2]bool{}}}, {"wave amplitude x 2", If{1, 2, 1, [2]bool{}}},
	} {
		r, err := w.predict(ctx, c.Design, q.as)
		if err != nil {
			return err
		}
		d := Candidate{Design: c.Design, Raw: r}
		w.judge(&d)
		p.Cases = append(p.Cases, Case{q.name, d.Outcome, d.Success})
	}
	return nil
}

func (w *planner) calibrated(r *Prediction) Outcome {
	d := Candidate{Raw: r}
	w.judge(&d)
	return d.Outcome
}

// limits takes one thing at a time away.
func (w *planner) limits(ctx context.Context, c *Candidate) error {
	g := &w.l.Goal
	add := func(name, change string, r Outcome) {
		w.plan.Limit = append(w.plan.Limit, Limit{name, r.margin(g), change})
	}
	for _, q := range []struct {
		name, change string
		as           If
	}{
		{"duration", "four times the duration", If{1, 1, 4, [2]bool{}}},
		{"photons in the first line", "more light in the first line: aperture, exposure, throughput, larger pixels", If{1, 1, 1, [2]bool{true, false}}},
		{"photons in the second line", "more time for the second line", If{1, 1, 1, [2]bool{false, true}}},
	} {
		r, err := w.predict(ctx, c.Design, q.as)
		if err != nil {
			return err
		}
		add(q.name, q.change, w.calibrated(r))
	}
	now := c.Outcome
	o := now
	o.Systematic -= w.plan.Density
	add("density along the line of sight", "not the observation; a correction of the density, or a goal that allows its bias", o)
	o = now
	o.Systematic = w.plan.Density
	o.Random = math.Sqrt(max(0, now.Random*now.Random-w.plan.Floor.Random*w.plan.Floor.Random))
	add("track length", "the recipe: longer tracks or another estimator, whose bias differs from place to place", o)
	slices.SortStableFunc(w.plan.Limit, func(a, b Limit) int {
		switch {
		case a.Margin > b.Margin:
			return -1
		case a.Margin < b.Margin:
			return 1
		}
		return 0
	})
	return nil
}
