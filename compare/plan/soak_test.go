//go:build soak

package plan

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io/fs"
	"math"
	"os"
	"slices"
	"testing"

	gstat "gonum.org/v1/gonum/stat"

	"offplane/compare/stat"
	"offplane/synth/random"
)

var (
	trials = flag.Int("plan.trials", 80, "realisations of each point")
	kept   = flag.String("plan.kept", "", "file to which the simulated scatter of each point is appended, and from which it is taken")
)

// The random error of the speed is predicted within 25 % of the simulated scatter at 90 %
// of the points of a grid over duration, cadence and photons, none used in calibration.
//
//	go test -tags soak -run TestSpeedOnAGrid ./compare/plan -timeout 0 [-plan.trials 80] [-plan.kept FILE]
//
// Measured, 30 points of 80 realisations, 13 CPU minutes: 29 within 25 %, predicted over
// simulated 0.79 to 1.11 and 1.28 (1 h at noise over waves of 1.6); before tunings in turn
// were part of the law for long cadences 28, 0.74 to 1.27. Noise over waves went from 0.05
// to 1.6, where a third of the pixels has a value (33 to 42 % predicted, 26 to 39 % seen).
// Beyond, at 3.7 (1 cm), no pixel has a value in half of the realisations: there is no
// scatter to predict, and the predicted yield says so (3 to 7 %). From 2 h on the simulated
// scatter goes as T^-0.504; 1 h every 90 s scatters by 0.0627, every 10 s by 0.0609; 2 h
// every 60 s by 0.0397, every 15 s by 0.0377.
func TestSpeedOnAGrid(t *testing.T) {
	// The wedge of the embedded campaigns, lines of sight and all. Exposures fill the
	// cadence, so that noise over waves depends on the aperture nearly alone.
	l, err := Load("cadence-or-photons", "effort.designs=0", "effort.waves=24 h", "facts.hours=8 h")
	if err != nil {
		t.Fatal(err)
	}
	l.Vary = []Knob{{What: "duration"}, {What: "cadence"}, {What: "aperture"}, {What: "second_line"}}
	aperture := []string{"16 cm", "9 cm", "5 cm", "2.8 cm", "1.6 cm"} // two decades of photons
	p := newPredictor(l, &Settings{}, nil)
	p.cadence = 90
	within, all := 0, 0
	var hours, quiet []float64 // logarithms, of points with little noise
	for i, at := range [][2]string{
		{"1 h", "10 s"}, {"1 h", "90 s"}, {"1.5 h", "30 s"}, {"2 h", "15 s"}, {"2 h", "60 s"},
		{"3 h", "20 s"}, {"3 h", "45 s"}, {"4 h", "75 s"}, {"6 h", "90 s"}, {"6 h", "60 s"},
	} {
		var lit *exposure // photons change, waves do not
		for k := range 4 {
			size := aperture[(i+2*k)%5]
			if k == 3 {
				if size = "1 cm"; i > 2 { // beyond the grid
					break
				}
			}
			d := &Design{Values: []string{at[0], at[1], size, "0.1"}}
			l.resolve(d)
			if d.scenario == nil {
				t.Fatal(d.Refuse)
			}
			r, err := p.predict(context.Background(), d, asItIs)
			if err != nil {
				t.Fatal(err)
			}
			got, share := scattered(t, p, d, random.Hash(99, uint64(i)), &lit)
			q := r.Speed / got
			note := ""
			if k == 3 {
				note = "; beyond the grid"
			} else {
				all++
				if math.Abs(q-1) <= 0.25 {
					within++
				}
				if c := &d.scenario.Scenario.Camera; c.Duration >= 2*3600 && c.Cadence <= 60 && r.Ratio < 0.3 {
					hours, quiet = append(hours, math.Log(float64(c.Duration))), append(quiet, math.Log(got))
				}
			}
			fmt.Printf("%v: predicted %.4f, simulated %.4f, ratio %.3f; noise over waves %.2f; pixels with a value %.3f, %.3f%s\n", d.Values, r.Speed, got, q, r.Ratio, r.Yield, share, note)
		}
	}
	if 10*within < 9*all {
		t.Errorf("%d of %d points are within 25 %%", within, all)
	}
	// From 2 h on the error falls as T^-1/2, and cadence below 60 s hardly matters (derived).
	_, slope := gstat.LinearRegression(hours, quiet, nil, false)
	if math.Abs(slope+0.5) > 0.1 {
		t.Errorf("error goes as T^%.3f", slope)
	}
	fmt.Printf("error goes as T^%.3f, %d points\n", slope, len(hours))
	fmt.Printf("%d of %d points of %d realisations are within 25 %%\n", within, all, *trials)
}

// A point is the simulated scatter of a design.
type point struct {
	Values []string
	Trials int
	Random []stat.Number // by bin
	Yield  []float64
	Pixels []int
}

// scattered simulates a design, unless its result was kept, and returns the scatter of the
// speeds, mean of squares over the pixels that have a value, and the share of these.
func scattered(t *testing.T, p *predictor, d *Design, seed uint64, lit **exposure) (random, share float64) {
	q := point{Values: d.Values, Trials: *trials}
	if !q.find(t) {
		var err error
		if *lit == nil {
			if *lit, err = p.expose(context.Background(), d, *trials, seed); err != nil {
				t.Fatal(err)
			}
		}
		s, err := p.try(context.Background(), d, *lit)
		if err != nil {
			t.Fatal(err)
		}
		for _, x := range s.Speed {
			q.Random, q.Yield, q.Pixels = append(q.Random, stat.Number(x.random)), append(q.Yield, x.yield), append(q.Pixels, x.pixels)
		}
		q.keep(t)
	}
	var sum, weight, pixels float64
	for b, x := range q.Random {
		pixels += float64(q.Pixels[b])
		if n := q.Yield[b] * float64(q.Pixels[b]); !math.IsNaN(float64(x)) {
			sum += n * float64(x*x)
			weight += n
		}
	}
	return math.Sqrt(sum / weight), weight / pixels
}

func (q *point) find(t *testing.T) bool {
	text, err := os.ReadFile(*kept)
	if *kept == "" || errors.Is(err, fs.ErrNotExist) {
		return false
	}
	if err != nil {
		t.Fatal(err)
	}
	for d := json.NewDecoder(bytes.NewReader(text)); d.More(); {
		var have point
		if err := d.Decode(&have); err != nil {
			t.Fatal(err)
		}
		if slices.Equal(have.Values, q.Values) && have.Trials == q.Trials {
			*q = have
			return true
		}
	}
	return false
}

func (q *point) keep(t *testing.T) {
	if *kept == "" {
		return
	}
	f, err := os.OpenFile(*kept, os.O_APPEND|os.O_CREATE|os.O_WRONLY, 0o666)
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(json.NewEncoder(f).Encode(q), f.Close()); err != nil {
		t.Fatal(err)
	}
}

// The recommended design meets its goal in at least 80 % of its trials with fresh seeds,
// and the likeliest design at 70 % of its hours fails in most.
//
//	go test -tags soak -run TestRecommendation ./compare/plan -timeout 0 [-plan.trials 40]
//
// Measured, of 40 (in brackets the predicted chance of a map): on the plane with 2.5 % 36
// (0.95) and 13 (0.36); on the wedge with 6 % 38 (0.95) and 12 (0.44); on the plane with
// 1.8 % 40 (0.90) and 28 (0.59). The last is no matter of the floor, which is 0.2 %: there
// the error goes as T^-1/2, so that 30 % less time costs 20 % of error, less than one map's
// own error scatters (0.0020 to 0.0046 of 0.0166).
func TestRecommendation(t *testing.T) {
	short := "vary.0.range={from: 1 h, to: 6 h, steps: 21}"
	for _, q := range []struct {
		name  string
		l     *Loaded
		steep bool // the error falls faster with time than as T^-1/2
	}{
		{"plane, 2.5 %", loadPlane(t, "goal.random=0.025", "goal.systematic=0.2", "effort.designs=6", short, "vary.2.range.steps=2", "vary.3.values=[0.05]"), true},
		{"plane, 1.8 %", loadPlane(t, "goal.random=0.018", "goal.systematic=0.2", "effort.designs=6", short, "vary.2.range.steps=2", "vary.3.values=[0.05]"), false},
		{"wedge, 6 %", loadWedge(t), true},
	} {
		p, err := Run(context.Background(), q.l, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		if p.Best == nil {
			t.Fatalf("%s: no design meets the goal: %s", q.name, p.Shortfall())
		}
		var cheap *Candidate
		for i := range p.Candidates {
			if c := &p.Candidates[i]; c.Hours <= 0.7*p.Best.Hours && (cheap == nil || c.Success > cheap.Success) {
				cheap = c
			}
		}
		if cheap == nil {
			t.Fatalf("%s: nothing is cheaper than %.2f h", q.name, p.Best.Hours)
		}
		n, w := min(*trials, 40), newPredictor(q.l, &Settings{}, nil)
		for i, c := range []*Candidate{p.Best, cheap} {
			s, err := w.simulate(context.Background(), c.Design, n, random.Hash(7, uint64(i)))
			if err != nil {
				t.Fatal(err)
			}
			var each []float64
			for _, o := range s.Each {
				each = append(each, o.Random)
			}
			fmt.Printf("%s: %v, %.2f h: predicted %.4f, chance %.2f; simulated %.4f, one map +- %.4f, %d of %d met\n", q.name, c.Values, c.Hours, c.Outcome, c.Success, s.Outcome, deviation(each), s.Met, n)
			if i == 0 && 10*s.Met < 8*n || i == 1 && q.steep && 2*s.Met >= n {
				t.Errorf("%s: %v: %d of %d met", q.name, c.Values, s.Met, n)
			}
		}
	}
}

// loadWedge is an embedded campaign in which the duration alone may vary.
func loadWedge(t *testing.T) *Loaded {
	t.Helper()
	l, err := Load("quiet-night", "effort.waves=24 h", "effort.designs=6", "vary.0.range={from: 45 min, to: 240 min, steps: 27}", "vary.1.values=[30 s]",
		"vary.2.values=[0.1]", "vary.3.values=[2.5 s]", "vary.4.values=[8 ppm]")
	if err != nil {
		t.Fatal(err)
	}
	return l
}
