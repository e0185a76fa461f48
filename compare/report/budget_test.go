package report

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"offplane/compare/budget"
	"offplane/compare/comparetest"
	"offplane/compare/stat"
)

// someBudget has a method and two terms that add up to the total, and one that is off.
func someBudget() *budget.Budget {
	term := func(key, name string, on bool, speed, density float64) budget.Term {
		x, y := stat.Number(speed), stat.Number(density)
		return budget.Term{Key: key, Name: name, On: on,
			Field: budget.Effect{Share: x + y, Error: 0.01, FromIdeal: x, FromFull: y, ScatterShare: 0.02},
			Speed: budget.Effect{Share: x}, Density: budget.Effect{Share: y}}
	}
	b := &budget.Budget{Schema: 1, Scenario: "made-up", Seed: 5, Estimator: "lag", Pieces: 4, Duration: 5400,
		Method: term("method", "the method itself", true, -0.2, 0),
		Terms:  []budget.Term{term("waves", "waves off the plane", true, 0.1, 0), term("emission", "emission <off> the plane", true, 0.05, -0.15), term("strands", "strands", false, 0, 0)},
		Total:  term("total", "total", true, -0.05, -0.15),
	}
	b.Pixels = budget.Pixels{Total: 100, Used: 90, Samples: 350, Scatter: 80}
	nan := stat.Number(math.NaN())
	for _, l := range []*budget.Term{&b.Method, &b.Total} {
		l.Field.FromIdeal, l.Field.FromFull = nan, nan
	}
	for _, from := range []stat.Number{1.05, 1.1, 1.15} {
		b.Heights = append(b.Heights, budget.Height{From: from, To: from + 0.05, Terms: make([]budget.Shares, 3)})
	}
	return b
}

// The bars of the waterfall start at the truth, hang together and end where the total does.
func TestWaterfallCloses(t *testing.T) {
	rows := present(someBudget())
	steps := waterfall(rows)
	if len(steps) != 4 || steps[0].from != 0 || steps[3].from != 0 {
		t.Fatalf("%+v", steps)
	}
	for i := 1; i < 3; i++ {
		if steps[i].from != steps[i-1].to {
			t.Errorf("a gap before %q", rows[i].Name)
		}
	}
	if gap := steps[2].to - steps[3].to; math.Abs(gap) > 1e-12 {
		t.Errorf("the terms end %g off the total", gap)
	}
}

// The budget's section tells total, method, terms by their size and domain; its figure is
// the same in other bytes; what is off is named and not drawn.
func TestBudgetSection(t *testing.T) {
	b := someBudget()
	r := &Report{Budget: b}
	r.Verdict = reportOf(t, comparetest.Wedge(0.02)).Verdict
	s := r.budget()
	for _, want := range []string{"the field is ×0.819 the truth", "makes ×0.819; most is added by waves off the plane (×1.105), emission <off> the plane (×0.905)", "add up to the total within 1×10⁻¹⁶"} {
		if !strings.Contains(s.Sentence, want) {
			t.Errorf("%q is not in %q", want, s.Sentence)
		}
	}
	if len(s.Rows) != 4 || s.Rows[2].Density != "−0.150" || s.Rows[1].Share != "+0.100" || s.Rows[0].Alone != "–" || !s.Rows[3].Whole {
		t.Errorf("%+v", s.Rows)
	}
	svg := Budget(b).Draw(SVG)
	if !bytes.Equal(svg, Budget(b).Draw(SVG)) {
		t.Error("two figures of one budget differ")
	}
	text := texts(t, svg)
	for _, want := range []string{"ln (B / B_SKY)", "standard deviation of ln B", "emission <off> the plane", "the method itself", "made-up, seed 5: 90 pixels"} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not on the figure", want)
		}
	}
	if strings.Contains(text, "strands") || strings.Contains(text, "too few pixels") {
		t.Error("the figure shows what is off")
	}
	b.ScenarioSHA256 = "of another image"
	if s := r.budget(); !strings.Contains(s.Sentence, "another image or seed") {
		t.Errorf("%q hides that the budget is of another scenario", s.Sentence)
	}
}
