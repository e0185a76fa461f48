//go:build soak

package plan

import (
	"context"
	"flag"
	"fmt"
	"math"
	"testing"

	"offplane/synth/random"
)

var (
	trials = flag.Int("plan.trials", 80, "realisations of each point")
	points = flag.Int("plan.points", 30, "points of the grid")
)

// The random error of the speed is predicted within 25 % of the simulated scatter at 90 %
// of the points of a grid over duration, cadence and photons, none used in calibration.
//
//	go test -tags soak -run TestSpeedOnAGrid ./compare/plan -timeout 0 [-plan.trials 80] [-plan.points 30]
//
// Measured in the reduced form, 15 points of 8 realisations: all within 25 %, predicted
// over simulated 0.87 to 1.13, at noise over waves from 0.03 to 0.61. The
// full form has not been run. Beyond a ratio of about 1 hardly any pixel has a field.
func TestSpeedOnAGrid(t *testing.T) {
	l := loadPlane(t, "effort.designs=0", "facts.fill=true", "effort.waves=24 h")
	o := &Settings{}
	hours := []string{"1 h", "2 h", "3 h", "4 h", "6 h"}
	cadence := []string{"10 s", "20 s", "30 s", "45 s", "60 s", "90 s"}
	aperture := []string{"20 cm", "35 cm", "65 cm", "110 cm", "200 cm"} // two decades of photons
	within, all := 0, 0
	// Exposures fill the cadence, so that noise over waves depends on the
	// aperture nearly alone: 0.7 to 0.06; at more noise no pixel has a field.
	l.Vary = []Knob{{What: "duration"}, {What: "cadence"}, {What: "aperture"}, {What: "second_line"}}
	p := newPredictor(l, o, nil)
	p.cadence = 90
	for i := range 30 {
		// Every pair of duration and cadence once, photons in turn.
		if i*(*points)/30 == (i-1)*(*points)/30 && i > 0 {
			continue
		}
		d := &Design{Values: []string{hours[i%5], cadence[i/5], aperture[(i+i/5)%5], "0.1"}}
		l.resolve(d)
		if d.scenario == nil {
			t.Fatal(d.Refuse)
		}
		r, err := p.predict(context.Background(), d, asItIs)
		if err != nil {
			t.Fatal(err)
		}
		s, err := l.simulate(context.Background(), d, *trials, random.Hash(99, uint64(i)), &lamp{}, o)
		if err != nil {
			t.Fatal(err)
		}
		got, n, yield := 0.0, 0.0, 0.0
		for b, x := range s.Speed {
			yield += x.yield * float64(x.pixels)
			got += float64(s.Speed[b].pixels) * x.random * x.random
			n += float64(x.pixels)
		}
		got = math.Sqrt(got / n)
		all++
		if math.Abs(r.Speed/got-1) <= 0.25 {
			within++
		}
		fmt.Printf("%v: predicted %.4f, simulated %.4f, ratio %.3f; noise over waves %.2f; yield %.2f, %.2f\n", d.Values, r.Speed, got, r.Speed/got, r.Ratio, r.Yield, yield/n)
	}
	if 10*within < 9*all {
		t.Errorf("%d of %d points are within 25 %%", within, all)
	}
	fmt.Printf("%d of %d points of %d realisations are within 25 %%\n", within, all, *trials)
}

// The recommended design meets its goal in at least 80 % of its trials with fresh seeds,
// and the likeliest design at 70 % of its hours fails in most.
//
//	go test -tags soak -run TestRecommendation ./compare/plan -timeout 0 [-plan.trials 40]
//
// Measured with 40 trials each: 36 met by the recommended design (1.75 h), 12 by the
// likeliest at 70 % (1.22 h). With a goal of 0.018, near the floor, they were 36 and 29:
// there 30 % of the hours make little difference.
func TestRecommendation(t *testing.T) {
	n := min(*trials, 40)
	l := loadPlane(t, "goal.random=0.025", "goal.systematic=0.2", "effort.designs=6", "vary.0.range={from: 1 h, to: 6 h, steps: 21}", "vary.2.range.steps=2", "vary.3.values=[0.05]")
	p, err := Run(context.Background(), l, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	if p.Best == nil {
		t.Fatalf("no design meets the goal: %s", p.Shortfall())
	}
	var cheap *Candidate
	for i := range p.Candidates {
		if c := &p.Candidates[i]; c.Hours <= 0.7*p.Best.Hours && (cheap == nil || c.Success > cheap.Success) {
			cheap = c
		}
	}
	for i, c := range []*Candidate{p.Best, cheap} {
		if c == nil {
			t.Fatal("nothing is cheaper")
		}
		s, err := l.simulate(context.Background(), c.Design, n, random.Hash(7, uint64(i)), &lamp{}, &Settings{})
		if err != nil {
			t.Fatal(err)
		}
		fmt.Printf("%v, %.2f h: predicted %.4f, chance %.2f; simulated %.4f, %d of %d met\n", c.Values, c.Hours, c.Outcome, c.Success, s.Outcome, s.Met, n)
		if i == 0 && 10*s.Met < 8*n || i == 1 && 2*s.Met >= n {
			t.Errorf("%v: %d of %d met", c.Values, s.Met, n)
		}
	}
}
