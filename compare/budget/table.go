package budget

import (
	"encoding/json"
	"fmt"
	"io"
	"math"

	"offplane/compare/stat"
	"offplane/synth/ecsv"
)

// WriteJSON writes the budget as indented JSON with a final newline.
func (b *Budget) WriteJSON(w io.Writer) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(b)
}

// Lines returns all lines of the budget: the method, the terms, the total.
func (b *Budget) Lines() []Term {
	return append(append([]Term{b.Method}, b.Terms...), b.Total)
}

// Table lays the budget out as budget.ecsv: one row a line for the whole field of view,
// then one row a height bin and line, which has shares only.
func (b *Budget) Table() ecsv.Table {
	t := ecsv.Table{Meta: []ecsv.Pair{
		{Key: "program", Value: "offplane " + b.Version},
		{Key: "scenario", Value: b.Scenario},
		{Key: "scenario_sha256", Value: b.ScenarioSHA256},
		{Key: "seed", Value: b.Seed},
		{Key: "estimator", Value: b.Estimator},
		{Key: "realisations", Value: b.Pieces},
		{Key: "duration_s", Value: b.Duration},
		{Key: "orders", Value: b.Orders},
		{Key: "pixels", Value: b.Pixels.Used},
		{Key: "domain", Value: "natural logarithms, means over the pixels that have a field in the scenario and in the ideal world; field is speed plus density plus mu; shares and method add up to the total"},
	}}
	var region, term []string
	var on []int64
	columns := map[string][]float64{}
	row := func(where string, l *Term, heights bool) {
		region, term = append(region, where), append(term, l.Key)
		k := int64(0)
		if l.On {
			k = 1
		}
		on = append(on, k)
		for _, c := range effectColumns {
			x := c.of(l)
			if heights && !c.heights {
				x = stat.Number(math.NaN())
			}
			columns[c.name] = append(columns[c.name], float64(x))
		}
	}
	lines := b.Lines()
	for i := range lines {
		row("all", &lines[i], false)
	}
	for _, h := range b.Heights {
		where := fmt.Sprintf("%.2f-%.2f", h.From, h.To)
		for i, s := range append(append([]Shares{h.Method}, h.Terms...), h.Total) {
			row(where, &Term{Key: s.Key, On: lines[i].On,
				Field: Effect{Share: s.Field, Error: s.Error}, Speed: Effect{Share: s.Speed}, Density: Effect{Share: s.Density}}, true)
		}
	}
	t.Columns = []ecsv.Column{
		{Name: "region", About: "all, or the bin of projected heliocentric distance in solar radii", Data: region},
		{Name: "term", About: "line of the budget", Data: term},
		{Name: "present", About: "1: in the scenario", Data: on},
	}
	for _, c := range effectColumns {
		t.Columns = append(t.Columns, ecsv.Column{Name: c.name, About: c.about, Data: columns[c.name]})
	}
	return t
}

// effectColumns are the columns of the table; those of the height bins are marked.
var effectColumns = func() []effectColumn {
	var cs []effectColumn
	for _, half := range []struct {
		name, about string
		of          func(*Term) *Effect
	}{
		{"field", "of ln(B/B_SKY)", func(t *Term) *Effect { return &t.Field }},
		{"speed", "of ln(v/SPEED_SKY)", func(t *Term) *Effect { return &t.Speed }},
		{"density", "of 1/2 ln(n/NE_KINK)", func(t *Term) *Effect { return &t.Density }},
	} {
		for _, e := range []struct {
			name, about string
			heights     bool
			of          func(*Effect) stat.Number
		}{
			{"share", "share " + half.about, true, func(e *Effect) stat.Number { return e.Share }},
			{"share_error", "its standard error", half.name == "field", func(e *Effect) stat.Number { return e.Error }},
			{"from_ideal", "turned on alone in the ideal world", false, func(e *Effect) stat.Number { return e.FromIdeal }},
			{"from_full", "less what is left when turned off alone", false, func(e *Effect) stat.Number { return e.FromFull }},
			{"scatter", "standard deviation between realisations, one pixel", false, func(e *Effect) stat.Number { return e.Scatter }},
			{"scatter_share", "part in the scatter of the total; adds up", false, func(e *Effect) stat.Number { return e.ScatterShare }},
			{"spread", "standard deviation between pixels", false, func(e *Effect) stat.Number { return e.Spread }},
		} {
			cs = append(cs, effectColumn{half.name + "_" + e.name, e.about, e.heights, func(t *Term) stat.Number { return e.of(half.of(t)) }})
		}
	}
	return cs
}()

type effectColumn struct {
	name, about string
	heights     bool
	of          func(*Term) stat.Number
}
