package plan

import (
	"encoding/json"
	"fmt"
	"io"

	"offplane/compare/stat"
	"offplane/synth"
	"offplane/synth/ecsv"
)

// Table lays the plan out as plan.ecsv: one row a design that is possible.
func (p *Plan) Table() ecsv.Table {
	l, k := p.Campaign, &p.Calibration
	t := ecsv.Table{Meta: []ecsv.Pair{
		{Key: "program", Value: "offplane " + p.Version},
		{Key: "campaign", Value: l.Name},
		{Key: "campaign_sha256", Value: l.SHA256},
		{Key: "scenario", Value: l.base.Name},
		{Key: "scenario_sha256", Value: l.base.SHA256},
		{Key: "seed", Value: l.Seed},
		{Key: "simulated_designs", Value: k.Designs},
		{Key: "designs_refused", Value: len(p.Refused)},
		{Key: "domain", Value: "errors are those of ln(B/B_SKY) in maps of the target; predictions are calibrated on the simulated designs"},
	}}
	n := len(p.Candidates)
	ints := func(name, about string, of func(c *Candidate) int) {
		x := make([]int64, n)
		for i := range x {
			x[i] = int64(of(&p.Candidates[i]))
		}
		t.Columns = append(t.Columns, ecsv.Column{Name: name, About: about, Data: x})
	}
	floats := func(name, unit, about string, of func(c *Candidate) float64) {
		x := make([]float64, n)
		for i := range x {
			x[i] = of(&p.Candidates[i])
		}
		t.Columns = append(t.Columns, ecsv.Column{Name: name, Unit: unit, About: about, Data: x})
	}
	truth := func(b bool) int {
		if b {
			return 1
		}
		return 0
	}
	ints("design", "number of the design", func(c *Candidate) int { return c.Number })
	for j := range l.Vary {
		x := make([]string, n)
		for i := range x {
			x[i] = p.Candidates[i].Values[j]
		}
		t.Columns = append(t.Columns, ecsv.Column{Name: l.Vary[j].What, About: "as in the campaign", Data: x})
	}
	floats("hours", "h", "telescope time, overhead included", func(c *Candidate) float64 { return c.Hours })
	floats("first_line", "h", "duration of the first line", func(c *Candidate) float64 { return float64(c.scenario.Scenario.Camera.Duration) / 3600 })
	floats("random", "", "half the width of the central 68 % of the pixels", func(c *Candidate) float64 { return c.Outcome.Random })
	floats("random_error", "", "standard deviation of the random error of one map about the prediction", func(c *Candidate) float64 { return c.Error.Random })
	floats("systematic", "", "median of the pixels", func(c *Candidate) float64 { return c.Outcome.Systematic })
	floats("systematic_error", "", "standard deviation of the median of one map about the prediction", func(c *Candidate) float64 { return c.Error.Systematic })
	floats("yield", "", "share of the pixels with a field", func(c *Candidate) float64 { return c.Outcome.Yield })
	floats("yield_error", "", "standard deviation of the share in one map about the prediction", func(c *Candidate) float64 { return c.Error.Yield })
	floats("success", "", "chance to meet the goal", func(c *Candidate) float64 { return c.Success })
	ints("pareto", "1: no design is better in hours, random error and yield at once", func(c *Candidate) int { return truth(c.Pareto) })
	floats("speed_random", "", "random error of ln(v) of one pixel, before calibration", func(c *Candidate) float64 { return c.Raw.Speed })
	floats("speed_photons", "", "part of it that photons make", func(c *Candidate) float64 { return c.Raw.Photons })
	floats("density_random", "", "random error of 1/2 ln(n) by photons", func(c *Candidate) float64 { return c.Raw.Density })
	floats("noise_ratio", "", "noise over waves in the band, rms", func(c *Candidate) float64 { return c.Raw.Ratio })
	ints("trials", "realisations of the whole chain", func(c *Candidate) int {
		if c.Trial == nil {
			return 0
		}
		return len(c.Trial.Each)
	})
	ints("trials_met", "of these, that met the goal", func(c *Candidate) int {
		if c.Trial == nil {
			return 0
		}
		return c.Trial.Met
	})
	return t
}

type outcomeJSON struct {
	Random     stat.Number `json:"random"`
	Systematic stat.Number `json:"systematic"`
	Yield      stat.Number `json:"yield"`
}

func numbers(o Outcome) outcomeJSON {
	return outcomeJSON{stat.Number(o.Random), stat.Number(o.Systematic), stat.Number(o.Yield)}
}

type designJSON struct {
	Number    int               `json:"design"`
	Values    map[string]string `json:"values"`
	Hours     float64           `json:"hours"`
	Predicted outcomeJSON       `json:"predicted"`
	Error     outcomeJSON       `json:"predicted_error"`
	Success   float64           `json:"success"`
	Simulated *simulatedJSON    `json:"simulated,omitempty"`
}

type simulatedJSON struct {
	Outcome outcomeJSON `json:"outcome"`
	Trials  int         `json:"trials"`
	Met     int         `json:"met"`
}

type caseJSON struct {
	Name    string      `json:"case"`
	Outcome outcomeJSON `json:"outcome"`
	Success float64     `json:"success"`
}

type pointJSON struct {
	Hours   float64     `json:"duration_h"`
	Outcome outcomeJSON `json:"outcome"`
	Speed   stat.Number `json:"speed_random"`
}

type limitJSON struct {
	Name   string      `json:"name"`
	Margin stat.Number `json:"margin_without_it"`
	Change string      `json:"change"`
}

func (c *Candidate) json(l *Loaded) *designJSON {
	if c == nil {
		return nil
	}
	d := &designJSON{c.Number, map[string]string{}, c.Hours, numbers(c.Outcome), numbers(c.Error), c.Success, nil}
	for j, v := range c.Values {
		d.Values[l.Vary[j].What] = v
	}
	if t := c.Trial; t != nil {
		d.Simulated = &simulatedJSON{numbers(t.Outcome), len(t.Each), t.Met}
	}
	return d
}

// WriteJSON writes plan.json: indented, with a final newline.
func (p *Plan) WriteJSON(w io.Writer) error {
	l, k := p.Campaign, &p.Calibration
	type calibration struct {
		Designs    int         `json:"designs"`
		Random     stat.Number `json:"random_factor"`
		Systematic stat.Number `json:"systematic_offset"`
		Yield      stat.Number `json:"yield_offset"`
		Error      outcomeJSON `json:"error"`
	}
	doc := struct {
		Schema      int           `json:"schema"`
		Campaign    string        `json:"campaign"`
		Seed        uint64        `json:"seed"`
		Version     string        `json:"version"`
		SHA256      string        `json:"campaign_sha256"`
		Scenario    string        `json:"scenario_sha256"`
		Met         bool          `json:"met"`
		Goal        outcomeJSON   `json:"goal"`
		Wanted      float64       `json:"goal_success"`
		Designs     int           `json:"designs"`
		Refused     int           `json:"designs_refused"`
		Best        *designJSON   `json:"recommended"`
		Nearest     *designJSON   `json:"nearest"`
		Pareto      []*designJSON `json:"pareto"`
		Simulated   []*designJSON `json:"simulated"`
		Calibration calibration   `json:"calibration"`
		Limits      []limitJSON   `json:"limits"`
		Floor       outcomeJSON   `json:"floor"`
		Curve       []pointJSON   `json:"curve"`
		Cases       []caseJSON    `json:"cases"`
		Text        string        `json:"campaign_text"`
	}{
		1, l.Name, l.Seed, p.Version, l.SHA256, l.base.SHA256, p.Best != nil,
		numbers(Outcome{l.Goal.Random, l.Goal.Systematic, l.Goal.Yield}), l.Goal.Success,
		len(p.Candidates) + len(p.Refused), len(p.Refused), p.Best.json(l), p.Nearest.json(l), nil, nil,
		calibration{k.Designs, stat.Number(k.Random), stat.Number(k.Systematic), stat.Number(k.Yield), numbers(k.Error)},
		nil, numbers(p.Floor), nil, nil, string(l.Canonical),
	}
	for i := range p.Candidates {
		if c := &p.Candidates[i]; c.Pareto {
			doc.Pareto = append(doc.Pareto, c.json(l))
		}
		if c := &p.Candidates[i]; c.Trial != nil {
			doc.Simulated = append(doc.Simulated, c.json(l))
		}
	}
	for _, q := range p.Limit {
		doc.Limits = append(doc.Limits, limitJSON{q.Name, stat.Number(q.Margin), q.Change})
	}
	for _, q := range p.Curve {
		doc.Curve = append(doc.Curve, pointJSON{q.Hours, numbers(q.Outcome), stat.Number(q.Speed)})
	}
	for _, q := range p.Cases {
		doc.Cases = append(doc.Cases, caseJSON{q.Name, numbers(q.Outcome), q.Success})
	}
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(doc)
}

// frames counts those of either line.
func (c *Candidate) frames() [2]int {
	s := &c.scenario.Scenario
	n := synth.Frames(s)
	return [2]int{n, min(n, s.Camera.SecondLine)}
}

func percent(x float64) string {
	if x > 0 && x < 0.001 {
		return fmt.Sprintf("%.1g %%", 100*x)
	}
	return fmt.Sprintf("%.1f %%", 100*x)
}
