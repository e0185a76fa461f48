package report

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/compare/budget"
	"offplane/compare/stat"
	"offplane/scenarios/units"
)

// A budgetSection is the error budget as the page shows it.
type budgetSection struct {
	Sentence, Domain string
	Figure           pageFigure
	Rows             []budgetLine
	SHA256           string // of its scenario
}

type budgetLine struct {
	Name, Factor, Share, Error, Speed, Density, Alone, Last, Scatter string
	Whole                                                            bool // the method or the total
}

// budget lays the error budget out for the page.
func (r *Report) budget() *budgetSection {
	b := r.Budget
	s := &budgetSection{Sentence: budgetSentence(b), Domain: budgetDomain(b), Figure: r.show(Budget(b)), SHA256: b.ScenarioSHA256}
	if b.ScenarioSHA256 != r.Verdict.Summary.ScenarioSHA256 {
		s.Sentence += " It is the budget of another image or seed of the same corona, observation and inversion."
	}
	for _, l := range present(b) {
		f := &l.Field
		s.Rows = append(s.Rows, budgetLine{
			Name: l.Name, Whole: l.Key == b.Method.Key || l.Key == b.Total.Key,
			Factor: "×" + cell(math.Exp(float64(f.Share)), 3), Share: signed(f.Share), Error: cell(float64(f.Error), 3),
			Speed: signed(l.Speed.Share), Density: signed(l.Density.Share),
			Alone: signed(f.FromIdeal), Last: signed(f.FromFull), Scatter: signed(f.ScatterShare),
		})
	}
	return s
}

// signed prints a logarithm with its sign, a dash for none.
func signed(v stat.Number) string {
	s := cell(float64(v), 3)
	if v >= 0.0005 { // what rounds to 0 has no sign
		s = "+" + s
	}
	return s
}

// present returns the lines that are in the scenario, the method first, the total last.
func present(b *budget.Budget) []budget.Term {
	return slices.DeleteFunc(b.Lines(), func(l budget.Term) bool { return !l.On })
}

// absent names the other lines.
func absent(b *budget.Budget) (names []string) {
	for _, l := range b.Lines() {
		if !l.On {
			names = append(names, l.Name)
		}
	}
	return names
}

// budgetSentence tells the total, what the method makes of it, and the largest terms.
func budgetSentence(b *budget.Budget) string {
	terms := slices.DeleteFunc(slices.Clone(b.Terms), func(l budget.Term) bool { return math.Abs(float64(l.Field.Share)) < 0.0005 })
	slices.SortStableFunc(terms, func(x, y budget.Term) int {
		return cmp.Compare(math.Abs(float64(y.Field.Share)), math.Abs(float64(x.Field.Share)))
	})
	factor := func(l *budget.Term) string { return "×" + cell(math.Exp(float64(l.Field.Share)), 3) }
	s := fmt.Sprintf("In the mean of ln(B/B_SKY) the field is %s the truth. The method alone, where every assumption is true, makes %s", factor(&b.Total), factor(&b.Method))
	for i, l := range terms[:min(len(terms), 3)] {
		sep := ", "
		if i == 0 {
			sep = "; most is added by "
		}
		s += sep + l.Name + " (" + factor(&l) + ")"
	}
	return s + fmt.Sprintf(". Method and terms add up to the total within %s.", units.Scientific(max(float64(b.Closure), 1e-16), 0))
}

// budgetDomain states which pixels a budget is about.
func budgetDomain(b *budget.Budget) string {
	s := fmt.Sprintf("the %d of %d pixels of the field of scenario “%s”, seed %d, that have a value in the scenario and in the ideal world", b.Pixels.Used, b.Pixels.Total, b.Scenario, b.Seed)
	if h := b.Heights; len(h) > 0 {
		s += fmt.Sprintf(", %.2f–%.2f solar radii", h[0].From, h[len(h)-1].To)
	}
	return s
}

func budgetCaption(b *budget.Budget) string {
	s := fmt.Sprintf("Error budget, read from top to bottom. Left: what the method itself and each assumption add to ln(B/B_SKY) (pure number; above, as a factor), the speed's part in blue, the density's in orange; the bars end where the last one, the total, does. "+
		"Middle: each term's share with its standard error, what it does alone in an otherwise ideal world and when it is the last to be turned on. "+
		"Right: standard deviation of ln B of one pixel between %d realisations of %.3g h, and what of it each term makes, from the %d pixels with a value in every realisation and world. "+
		"Truth: B_SKY, component of the field in the plane of the sky, at x = 0.", b.Pieces, b.Duration/3600, b.Pixels.Scatter)
	if b.Estimator != "" {
		s += fmt.Sprintf(" Phase-speed estimator %q.", b.Estimator)
	}
	if off := absent(b); len(off) > 0 {
		s += " Not in the scenario: " + strings.Join(off, ", ") + "."
	}
	return s + fmt.Sprintf(" Domain: %s.", budgetDomain(b))
}
