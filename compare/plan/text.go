package plan

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
)

// Text returns half a page for a proposal.
func (p *Plan) Text() string {
	l, g, c := p.Campaign, &p.Campaign.Goal, p.Chosen()
	var b strings.Builder
	say := func(format string, args ...any) { fmt.Fprintf(&b, format+"\n", args...) }
	t := &l.Target
	say("Goal. A map of the coronal magnetic field at %v to %v and position angles %v to %v with a random", t.Inner, t.Outer, t.From, t.To)
	say("error of at most %s a pixel, a systematic shift of at most %s and a field in at least", percent(g.Random), percent(g.Systematic))
	say("%s of the pixels, with a chance of at least %s.", percent(g.Yield), percent(g.Success))
	say("")
	if p.Best != nil {
		say("Request. %.2f h of telescope time: %s.", c.Hours, c.describe(l))
	} else {
		say("No design of the %d that are possible meets this. The nearest takes %.2f h: %s.", len(p.Candidates), c.Hours, c.describe(l))
	}
	say("%s", c.camera())
	say("")
	say("Expected. Random error %s +- %s, systematic shift %+.1f %% +- %s, yield %s +- %s,", percent(c.Outcome.Random), percent(c.Error.Random),
		100*c.Outcome.Systematic, percent(c.Error.Systematic), percent(c.Outcome.Yield), percent(c.Error.Yield))
	say("chance to meet the goal %s. (Relative errors of B; +- is one standard deviation of one map", percent(c.Success))
	say("about the prediction.) One pixel's speed scatters by %s, of which photons make %s in", percent(c.Raw.Speed), percent(c.Raw.Photons))
	say("quadrature and the randomness of the waves the rest; photons scatter the density's part by %s.", percent(c.Raw.Density))
	if s := c.Trial; s != nil {
		say("Of %d simulated observations of this design %d met the goal.", len(s.Each), s.Met)
	}
	say("However long the observation, a random error of %s and a shift of %+.1f %% remain.", percent(p.Floor.Random), 100*p.Floor.Systematic)
	say("")
	if len(p.Limit) > 0 {
		say("Limit. %s", p.limitText())
	}
	say("Were it otherwise (chances by prediction alone; as planned %s):", percent(p.Cases[0].Success))
	for _, q := range p.Cases[1:] {
		say("with %s: random error %s, shift %+.1f %%, yield %s, chance %s", q.Name, percent(q.Outcome.Random), 100*q.Outcome.Systematic, percent(q.Outcome.Yield), percent(q.Success))
	}
	if q := p.choices(); len(q) > 0 {
		say("")
		say("Each choice by itself, all else as above (random error, chance):")
		say("%s", strings.Join(q, "\n"))
	}
	say("")
	say("Basis. %d designs predicted from %.3g h of simulated waves%s; seed %d, offplane %s.", len(p.Candidates), float64(l.Effort.Waves)/3600, p.basis(), l.Seed, p.Version)
	say("The corona is assumed (%s), and so is every number.", l.base.Name)
	return b.String()
}

func (p *Plan) basis() string {
	k := &p.Calibration
	if k.Designs == 0 {
		return ", not held to simulations of the whole chain"
	}
	return fmt.Sprintf(", held to %d designs simulated %d times each\n(random error x %.2f, spread %s; shift %+.1f %%, spread %s)",
		k.Designs, p.Campaign.Effort.Trials, k.Random, percent(k.Error.Random), 100*k.Systematic, percent(k.Error.Systematic))
}

// limitText says what stands in the way.
func (p *Plan) limitText() string {
	g, c := &p.Campaign.Goal, p.Chosen()
	now := c.Outcome.margin(g)
	best := p.Limit[0]
	helps := best.Margin > now+0.01
	switch {
	case now >= 0 && !helps:
		return fmt.Sprintf("The tightest bound, that of the %s, is kept with %.0f %% to spare; neither time nor photons\nwould add to that.", c.Outcome.tightest(g), 100*now)
	case !helps:
		return "No single thing helps: the goal is out of reach of this corona, camera and recipe together."
	case now >= 0:
		return fmt.Sprintf("The tightest bound, that of the %s, is kept with %.0f %% to spare.\nWhat limits it most is %s (without: %.0f %% to spare).", c.Outcome.tightest(g), 100*now, best.Name, 100*best.Margin)
	case best.Margin >= 0:
		return fmt.Sprintf("Limited by %s: without that the goal would be met.\nWhat would have to change: %s.", best.Name, best.Change)
	}
	return fmt.Sprintf("Limited most by %s, but that alone does not do:\nthe goal stays missed by %.0f %% of its bound instead of %.0f %%. What would have to change: %s.", best.Name, -100*best.Margin, -100*now, best.Change)
}

// describe lists the values that vary.
func (c *Candidate) describe(l *Loaded) string {
	var q []string
	for j, v := range c.Values {
		q = append(q, l.Vary[j].named()+" "+l.Vary[j].value(v))
	}
	return strings.Join(q, ", ")
}

func (k *Knob) named() string {
	switch k.What {
	case "second_line":
		return "second line's share of the time"
	case "split":
		return "second line's share of the night"
	}
	return k.What
}

// value words a value of a knob.
func (k *Knob) value(v string) string {
	if share, err := strconv.ParseFloat(v, 64); err == nil && (k.What == "second_line" || k.What == "split") {
		return fmt.Sprintf("%.3g %%", 100*share)
	}
	return v
}

// choices says of each knob what other values would do, all else as chosen: one line each.
func (p *Plan) choices() []string {
	const most = 6
	l, c := p.Campaign, p.Chosen()
	var lines []string
	for j := range l.Vary {
		var row []*Candidate
		for i := range p.Candidates {
			d := &p.Candidates[i]
			others := func(v []string) []string { return slices.Concat(v[:j], v[j+1:]) }
			if slices.Equal(others(d.Values), others(c.Values)) {
				row = append(row, d)
			}
		}
		n := min(len(row), most)
		if n < 2 {
			continue
		}
		var q []string
		for i := range n {
			d := row[(i*(len(row)-1)+(n-1)/2)/(n-1)]
			q = append(q, fmt.Sprintf("%s: %s, %.0f %%", l.Vary[j].value(d.Values[j]), percent(d.Outcome.Random), 100*d.Success))
		}
		lines = append(lines, l.Vary[j].named()+" "+strings.Join(q, "; "))
	}
	return lines
}

// camera says what the frames of a design are.
func (c *Candidate) camera() string {
	s := &c.scenario.Scenario
	n := c.frames()
	return fmt.Sprintf("That is %d frames of the 1074.7 nm line, one every %v, and %d of the 1079.8 nm line, of %d tunings\nof %v each, in pixels of %.3g arcsec with an aperture of %v over a background of %v.",
		n[0], s.Camera.Cadence, n[1], len(s.Camera.Tunings), round(float64(s.Camera.Exposure)), float64(s.Image.Pixel), s.Camera.Aperture, s.Camera.Background)
}

func round(seconds float64) string { return fmt.Sprintf("%.4g s", seconds) }

// Shortfall says how far the nearest design is from a goal that none meets.
func (p *Plan) Shortfall() string {
	c, g := p.Nearest, &p.Campaign.Goal
	var q []string
	if c.Outcome.Random > g.Random {
		q = append(q, fmt.Sprintf("random error %s, at most %s wanted", percent(c.Outcome.Random), percent(g.Random)))
	}
	if math.Abs(c.Outcome.Systematic) > g.Systematic {
		q = append(q, fmt.Sprintf("shift %+.1f %%, at most %s wanted", 100*c.Outcome.Systematic, percent(g.Systematic)))
	}
	if c.Outcome.Yield < g.Yield {
		q = append(q, fmt.Sprintf("yield %s, at least %s wanted", percent(c.Outcome.Yield), percent(g.Yield)))
	}
	if len(q) == 0 {
		q = append(q, fmt.Sprintf("its chance is %s, at least %s wanted", percent(c.Success), percent(g.Success)))
	}
	return strings.Join(q, "; ")
}
