package plan

import (
	"context"
	"errors"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/synth/obs"
	"offplane/synth/random"
)

// What is known of such observations comes out, and a plan of a thousand designs is whole.
func TestPlane(t *testing.T) {
	l := loadPlane(t, "effort.designs=1", "effort.trials=4")
	o := &Settings{}
	ctx := context.Background()
	ds, err := l.designs(ctx)
	if err != nil {
		t.Fatal(err)
	}
	w := &planner{predictor: newPredictor(l, o, ds), plan: &Plan{Campaign: l}}
	if err := w.predictAll(ctx, ds); err != nil {
		t.Fatal(err)
	}
	find := func(values ...string) *Candidate {
		for i := range w.plan.Candidates {
			if c := &w.plan.Candidates[i]; strings.Join(c.Values, " ") == strings.Join(values, " ") {
				return c
			}
		}
		t.Fatalf("no design %v", values)
		return nil
	}
	// Cadence below about 60 s hardly matters at 3.5 mHz (derived): without photon noise,
	// and with exposures that fill the cadence.
	fast, slow := find("4 h", "15 s", "100 cm", "0.05"), find("4 h", "60 s", "100 cm", "0.05")
	speed := func(d *Design, as If) float64 {
		r, err := w.predict(ctx, d, as)
		if err != nil {
			t.Fatal(err)
		}
		return r.Speed
	}
	dark := If{1, 1, 1, [2]bool{true, true}}
	if q := speed(slow.Design, dark) / speed(fast.Design, dark); math.Abs(q-1) > 0.1 {
		t.Errorf("random error of the speed without photon noise at 60 s over 15 s: %.3f", q)
	}
	filled := loadPlane(t, "facts.fill=true")
	quick, patient := Design{Values: fast.Values}, Design{Values: slow.Values}
	for _, d := range []*Design{&quick, &patient} {
		if filled.resolve(d); d.scenario == nil {
			t.Fatal(d.Refuse)
		}
	}
	if q := speed(&patient, asItIs) / speed(&quick, asItIs); math.Abs(q-1) > 0.1 {
		t.Errorf("random error of the speed with filled cadences at 60 s over 15 s: %.3f", q)
	}
	// Photons matter: a small telescope does worse.
	if small := find("4 h", "30 s", "21.5443 cm", "0.05").Raw; !(small.Speed > 1.2*fast.Raw.Speed) {
		t.Errorf("random error of the speed %.4f with 22 cm, %.4f with 100 cm", small.Speed, fast.Raw.Speed)
	}
	// Waves without noise leave an error: the prediction keeps it (5 % at 1 h, 1.5 % at 3 h
	// in one simulation, derived; it depends on waves, track and estimator).
	var law *law
	for _, law = range w.laws {
	}
	for b := range law.abc {
		if e := law.at(b, 1, 0, 30).random; !(e > 1e-3 && e < 0.2) {
			t.Errorf("bin %d: random error %.4f without noise at 1 h", b, e)
		}
	}
	// T^-1/2 holds from two hours on (derived): pieces of 2 h and of 3 h, tried apart.
	_, field, err := law.try(ctx, node{3, 0.5, 1})
	if err != nil {
		t.Fatal(err)
	}
	var got, want float64
	for b, s := range law.region.scatters(field) {
		got += s.random * s.random
		want += law.formula(b, 3, 0.5) * law.formula(b, 3, 0.5)
	}
	if math.Abs(math.Log(got/want)/2) > 0.2 { // four pieces
		t.Errorf("random error %.4f in 3 h, law of 2 h %.4f", math.Sqrt(got), math.Sqrt(want))
	}
	if err := w.simulate(ctx); err != nil {
		t.Fatal(err)
	}
	w.choose()
	if err := w.explain(ctx); err != nil {
		t.Fatal(err)
	}
	c := w.plan.Chosen()
	if c.Trial == nil && w.plan.Calibration.Designs != 1 {
		t.Errorf("nothing was simulated")
	}
	for i := range w.plan.Candidates {
		if s := w.plan.Candidates[i].Trial; s != nil {
			r := w.plan.Candidates[i].Raw
			t.Logf("%v: predicted %.4f, simulated %.4f", w.plan.Candidates[i].Values, r.Outcome, s.Outcome)
			if math.Abs(math.Log(s.Random/r.Random)) > 0.5 || math.Abs(s.Systematic-r.Systematic) > 0.1 || math.Abs(s.Yield-r.Yield) > 0.2 {
				t.Errorf("%v: predicted %.4f, simulated %.4f", w.plan.Candidates[i].Values, r.Outcome, s.Outcome)
			}
		}
	}
	// The curve falls to its floor.
	last := w.plan.Curve[len(w.plan.Curve)-1].Outcome
	if !(last.Random >= w.plan.Floor.Random*0.999) || !(w.plan.Curve[2].Outcome.Random > last.Random) {
		t.Errorf("curve %.4v, floor %.4f", w.plan.Curve, w.plan.Floor)
	}
	// More background and smaller waves make it worse.
	if q := w.plan.Cases; !(q[1].Outcome.Random <= q[2].Outcome.Random && q[4].Outcome.Random <= q[3].Outcome.Random) {
		t.Errorf("cases %.4v", q)
	}
	t.Logf("\n%s", w.plan.Text())
}

// A goal beyond reach gets the nearest design and what is missing; a campaign without a
// possible design says why.
func TestOutOfReach(t *testing.T) {
	l := loadPlane(t, "effort.designs=0", "effort.waves=4 h", "goal.random=0.0005", "vary.2.range.steps=2")
	p, err := Run(context.Background(), l, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	if p.Best != nil || p.Nearest == nil || !strings.Contains(p.Shortfall(), "at most 0.05 % wanted") || !strings.Contains(p.Text(), "No design") {
		t.Errorf("%v %s\n%s", p.Best, p.Shortfall(), p.Text())
	}
	for set, want := range map[string]string{
		"facts.hours=1 h":     "available",
		"vary.1.values=[1 s]": "cadence",
	} {
		_, err := Run(context.Background(), loadPlane(t, set, "vary.2.range.steps=2"), Settings{})
		if e := (*Impossible)(nil); !errors.As(err, &e) || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v", set, err)
		}
	}
}

func TestProblems(t *testing.T) {
	for _, q := range []struct{ old, new, want string }{
		{"what: cadence", "what: cadense", "plane.yaml:14:11: vary.1.what: .*cadence"},
		{"values: [15 s, 30 s, 60 s, 90 s]", "values: [15 s, 30 kg]", "vary.1.values.1: .*kg"},
		{"to: 100 cm", "to: 100 m", "vary.2.range.to: .*unit"},
		{"what: cadence", "what: duration", "vary.1.what: duration varies already"},
		{"outer: 1.25 Rsun", "outer: 1.05 Rsun", "target.outer: .*not above"},
		{"outer: 1.25 Rsun", "outer: 1.95 Rsun", "image reaches"},
		{"scenario: plane-wave", "scenario: plain-wave", "target.scenario: .*plane-wave"},
		{"random: 0.10,", "random: 10 %,", "goal.random"},
		{"[0.05, 0.2]", "[0.05, 0.7]", "vary.3.values.1: .*share"},
		{"what: second_line", "what: split", "split fixes the duration"},
		{"overhead: 10 min", "overhead: 9 h", "facts.overhead: .*leaves nothing"},
		{"camera.noise=true", "camera.noise=false", "no noise"},
	} {
		_, err := Parse("plane.yaml", []byte(strings.Replace(plane, q.old, q.new, 1)))
		var ps strict.Problems
		if !errors.As(err, &ps) {
			t.Errorf("%s: %v", q.new, err)
			continue
		}
		found := false
		for _, p := range ps {
			found = found || match(t, q.want, p.Error())
		}
		if !found {
			t.Errorf("%s: %v", q.new, err)
		}
	}
}

func TestLibrary(t *testing.T) {
	for _, name := range Names() {
		l, err := Load(name)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		again, err := Parse(name, l.Canonical)
		if err != nil || string(again.Canonical) != string(l.Canonical) || again.SHA256 != l.SHA256 {
			t.Errorf("%s: its canonical form is another campaign: %v", name, err)
		}
		d := Design{}
		for _, v := range l.values {
			d.Values = append(d.Values, v[len(v)/2])
		}
		if l.resolve(&d); d.Refuse != "" {
			t.Errorf("%s: %v: %s", name, d.Values, d.Refuse)
		}
	}
}

// The energy of a Gaussian through three tunings, and what noise makes of it (Monte Carlo).
func TestParabola(t *testing.T) {
	x := []float64{-0.12, 0, 0.12}
	const w, v = 0.13, 0.01
	var y []float64
	for _, x := range x {
		y = append(y, 5*math.Exp(-(x-v)*(x-v)/(w*w)))
	}
	snr := []float64{100, 200, 100}
	e, rel := parabola(x, y, snr)
	if want := 5 * w * math.Sqrt(math.Pi); math.Abs(e/want-1) > 1e-9 {
		t.Errorf("energy %g, want %g", e, want)
	}
	key := random.NewKey(1)
	sum, n := 0.0, 4000
	for i := range n {
		z := make([]float64, len(y))
		for k := range z {
			z[k] = y[k] * (1 + key.Normal(uint64(3*i+k))/snr[k])
		}
		f, _ := parabola(x, z, snr)
		sum += (f/e - 1) * (f/e - 1)
	}
	if got := math.Sqrt(sum / float64(n)); math.Abs(got/rel-1) > 0.05 {
		t.Errorf("relative error %.5f, Monte Carlo %.5f", rel, got)
	}
}

// A mixture of one is that one; two apart have their distance in the width.
func TestMixture(t *testing.T) {
	one := mixture([]scatter{{random: 0.03, spread: 0.04, shift: -0.1, yield: 0.5, pixels: 10}})
	// 68 % quantiles of a normal distribution are at 0.99446 standard deviations.
	if math.Abs(one.Random-0.05*0.99446) > 1e-5 || math.Abs(one.Systematic+0.1) > 1e-9 || one.Yield != 0.5 {
		t.Errorf("%v", one)
	}
	two := mixture([]scatter{{shift: -0.1, yield: 1, pixels: 10}, {shift: 0.1, yield: 1, pixels: 10}})
	if math.Abs(two.Random-0.1) > 1e-9 {
		t.Errorf("%v", two)
	}
	if none := mixture([]scatter{{pixels: 3}}); none.Yield != 0 || none.margin(&Goal{Random: 1, Systematic: 1, Yield: 0.1}) >= 0 {
		t.Errorf("%v", none)
	}
}

// A sample made of known scatter, spread and shift is split into them.
func TestScatters(t *testing.T) {
	key := random.NewKey(2)
	const pixels, trials = 400, 40
	g := region{from: []float64{1.1}, to: []float64{1.2}}
	x := make(sample, trials)
	for p := range pixels {
		g.pixels, g.bin = append(g.pixels, p), append(g.bin, 0)
		own := 0.02 * key.Normal(uint64(p))
		for k := range x {
			y := 0.1 + own + 0.05*key.Normal(uint64(pixels*(k+1)+p))
			if k%4 == 3 {
				y = math.NaN()
			}
			x[k] = append(x[k], y)
		}
	}
	s := g.scatters(x)[0]
	if math.Abs(s.random-0.05) > 0.002 || math.Abs(s.spread-0.02) > 0.003 || math.Abs(s.shift-0.1) > 0.004 || s.yield != 0.75 || s.pixels != pixels {
		t.Errorf("%+v", s)
	}
}

func TestPareto(t *testing.T) {
	c := func(hours, random, yield float64) Candidate {
		return Candidate{Design: &Design{Hours: hours}, Outcome: Outcome{random, 0, yield}}
	}
	cs := []Candidate{c(1, 0.2, 0.9), c(1, 0.3, 0.9), c(2, 0.2, 0.95), c(3, 0.1, 0.5), c(3, 0.25, 0.9), c(4, math.NaN(), 0)}
	pareto(cs)
	for i, want := range []bool{true, false, true, true, false, false} {
		if cs[i].Pareto != want {
			t.Errorf("design %d: %v", i, cs[i].Pareto)
		}
	}
}

// Lucky trials leave the chance as predicted, unlucky ones lower it, 7 of 8 at a chance of
// 0.9 are neither.
func TestJudge(t *testing.T) {
	l := &Loaded{Campaign: Campaign{Goal: Goal{Random: 0.1, Systematic: 0.1, Yield: 0.7}}}
	w := &planner{predictor: &predictor{l: l}, plan: &Plan{Calibration: Calibration{Random: 1, Error: Outcome{0.156, 0.01, 0.01}}}}
	chance := func(trial *Simulation) float64 {
		c := Candidate{Raw: &Prediction{Outcome: Outcome{1. / 12, 0, 1}}, Trial: trial}
		w.judge(&c)
		return c.Success
	}
	each := make([]Outcome, 8)
	p := chance(nil) // a margin of 1.28 standard deviations
	if math.Abs(p-0.9) > 0.005 {
		t.Errorf("chance %.3f", p)
	}
	for met, want := range []float64{0.3, 0.38, 0.47, 0.55, 0.63, 0.72, p, p, p} {
		if got := chance(&Simulation{Each: each, Met: met}); math.Abs(got-want) > 0.005 {
			t.Errorf("%d of 8 met: chance %.3f, want %.3f", met, got, want)
		}
	}
}

// Tunings in turn see the waves at different times: the wings make the shift, the centre
// has no part in it.
func TestTurns(t *testing.T) {
	q := &still{frames: &obs.Observation{}, cadence: 30, camera: scenarios.Default().Camera}
	for i, x := range q.camera.Tunings {
		q.frames.Tunings = append(q.frames.Tunings, obs.Tuning{Line: 1, Index: i, Wavelength: 1074.7 + float64(x), Offset: float64(x)})
	}
	same := cmpopts.EquateApprox(0, 1e-3)
	for _, c := range []struct {
		sequential bool
		order      []int
		thin       int
		want       []float64
	}{
		{false, nil, 3, []float64{1, 0, 0}},
		{true, nil, 1, []float64{1}},
		{true, nil, 3, []float64{0.5, 0, 0.5}},
		{true, []int{1, 0, 2}, 3, []float64{0, 0.5, 0.5}},
	} {
		q.camera.Sequential, q.camera.Order = c.sequential, c.order
		if got := q.turns(c.thin); !cmp.Equal(got, c.want, same) {
			t.Errorf("%+v: %v", c, got)
		}
	}
}
