package report

import (
	"fmt"
	"image/color"
	"math"
	"strconv"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"

	"offplane/compare/plan"
)

// Plan draws a campaign plan: error and yield of every design against telescope time, and
// the error of the chosen design against its duration with the floor below it.
func Plan(p *plan.Plan) *Figure {
	return &Figure{Name: "plan", Draw: func(f Format) []byte { return planFigure(p, f) }, Alt: "Error and yield of designs against telescope time, and error against duration",
		Caption: "Left and middle: predictions for every design, and what simulations of the whole chain gave. Right: the chosen design at other durations; the dotted line is the random error that no duration removes."}
}

func planFigure(p *plan.Plan, f Format) []byte {
	const hgt, base, top = 1000.0, 150.0, 760.0
	c := newCanvas(f, figureWidth, hgt)
	g := &p.Campaign.Goal
	hours, high, worst := 0.0, 1.2*g.Random, max(g.Random, g.Systematic)
	least := math.Inf(1)
	for i := range p.Candidates {
		if e := p.Candidates[i].Outcome.Random; e < least { // false for NaN
			least = e
		}
	}
	for i := range p.Candidates {
		q := &p.Candidates[i]
		hours = max(hours, q.Hours)
		if e := q.Outcome.Random; e < 3*max(g.Random, least) {
			high = max(high, 1.1*e)
		}
	}
	for _, q := range p.Curve {
		if o := q.Outcome; !math.IsNaN(o.Random) {
			worst = max(worst, o.Random, math.Abs(o.Systematic))
		}
	}
	high, worst = 100*high, 130*worst
	xt := linearTicks(0, hours*1.05, 6)
	a := &axes{c: c, x: 160, y: base, w: 560, h: top - base, xlo: 0, xhi: hours * 1.05, ylo: 0, yhi: high}
	y := &axes{c: c, x: 900, y: base, w: 500, h: top - base, xlo: 0, xhi: hours * 1.05, ylo: 0, yhi: 104}
	planDesigns(a, p, func(o plan.Outcome) float64 { return 100 * o.Random }, 100*g.Random)
	planDesigns(y, p, func(o plan.Outcome) float64 { return 100 * o.Yield }, 100*g.Yield)
	a.decorate(xt, linearTicks(0, high, 6), "telescope time [h]", "random error of B [%]")
	y.decorate(xt, linearTicks(0, 100, 5), "telescope time [h]", "pixels with a field [%]")
	planCurve(c, p, 1580, base, 560, top-base, worst)

	title := func(x float64, s string) {
		c.text(x, top+26, s, textStyle{size: medium, bold: true, x: text.XLeft, y: text.YBottom})
	}
	title(a.x, "All designs: random error")
	title(y.x, "All designs: yield")
	title(1580, "Chosen design: any duration")
	x := a.x
	for _, m := range planMarks {
		c.DrawGlyph(vgdraw.GlyphStyle{Color: m.colour, Radius: 10, Shape: m.shape}, pt(x+10, hgt-60))
		c.text(x+30, hgt-60, m.label, textStyle{size: small, x: text.XLeft, y: text.YCenter})
		x += 30 + width(m.label, small) + 46
	}
	c.legend(x, hgt-60, []key{{"goal", stroke{grey, 3, []float64{12, 8}}, false}})
	c.legend(a.x, hgt-120, []key{{"random error", stroke{blue, 4, nil}, false}, {"absolute shift", stroke{vermillion, 4, nil}, false},
		{"speed of one pixel", stroke{green, 3, []float64{18, 9}}, false}, {"random error without end", stroke{blue, 3, []float64{4, 7}}, false}})
	c.text(figureWidth-14, 8, fmt.Sprintf("%s, seed %d: %d designs, %d simulated", p.Campaign.Name, p.Campaign.Seed, len(p.Candidates), p.Calibration.Designs),
		textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode(nil, lineColours)
}

// The symbols of designs, drawn in this order.
var planMarks = []struct {
	label  string
	colour color.RGBA
	shape  vgdraw.GlyphDrawer
}{
	{"design", faint, vgdraw.CircleGlyph{}},
	{"none is better in time, random error and yield", blue, vgdraw.CircleGlyph{}},
	{"simulated", orange, vgdraw.PyramidGlyph{}},
	{"chosen", vermillion, ring{}},
}

// A ring is a circle with a stroke wide enough to be seen behind symbols.
type ring struct{}

func (ring) DrawGlyph(c *vgdraw.Canvas, style vgdraw.GlyphStyle, at vg.Point) {
	var p vg.Path
	p.Move(vg.Point{X: at.X + style.Radius, Y: at.Y})
	p.Arc(at, style.Radius, 0, 2*math.Pi)
	p.Close()
	c.SetLineStyle(vgdraw.LineStyle{Color: style.Color, Width: style.Radius / 3})
	c.Stroke(p)
}

// planDesigns draws one number of every design against its hours, and the bound of it.
func planDesigns(a *axes, p *plan.Plan, of func(plan.Outcome) float64, goal float64) {
	box := a.box()
	dot := func(k int, hours float64, o plan.Outcome, radius float64) {
		if v := of(o); a.drawable(v) && v <= a.yhi {
			box.DrawGlyph(vgdraw.GlyphStyle{Color: planMarks[k].colour, Radius: vg.Length(radius), Shape: planMarks[k].shape}, pt(a.px(hours), a.py(v)))
		}
	}
	a.line(stroke{grey, 3, []float64{12, 8}}, []float64{a.xlo, a.xhi}, []float64{goal, goal}, false)
	for pass := range 3 {
		for i := range p.Candidates {
			q := &p.Candidates[i]
			switch {
			case pass == 0:
				dot(0, q.Hours, q.Outcome, 5)
			case pass == 1 && q.Pareto:
				dot(1, q.Hours, q.Outcome, 7)
			case pass == 2 && q.Trial != nil:
				dot(2, q.Hours, q.Trial.Outcome, 10)
			}
		}
	}
	q := p.Chosen()
	dot(3, q.Hours, q.Outcome, 16)
}

// planCurve draws the error against the duration.
func planCurve(c *canvas, p *plan.Plan, x, y, w, h, worst float64) {
	var lt, random, shift, speed []float64
	for _, q := range p.Curve {
		lt = append(lt, math.Log10(q.Hours))
		random, shift, speed = append(random, 100*q.Outcome.Random), append(shift, 100*math.Abs(q.Outcome.Systematic)), append(speed, 100*q.Speed)
	}
	a := &axes{c: c, x: x, y: y, w: w, h: h, xlo: lt[0], xhi: lt[len(lt)-1], ylo: 1, yhi: max(worst, 20), ylog: true}
	if floor := 80 * p.Floor.Random; floor > 0.1 {
		a.ylo = min(a.ylo, floor)
	}
	var ticks []tick
	for _, t := range []float64{0.5, 1, 2, 4, 8, 24, 96} {
		ticks = append(ticks, tick{math.Log10(t), strconv.FormatFloat(t, 'g', -1, 64)})
	}
	yt := logTicks(a.ylo, a.yhi)
	a.grid(yt)
	goal := 100 * p.Campaign.Goal.Random
	a.line(stroke{grey, 3, []float64{12, 8}}, []float64{a.xlo, a.xhi}, []float64{goal, goal}, false)
	floor := 100 * p.Floor.Random
	a.line(stroke{blue, 3, []float64{4, 7}}, []float64{a.xlo, a.xhi}, []float64{floor, floor}, false)
	a.line(stroke{green, 3, []float64{18, 9}}, lt, speed, false)
	a.line(stroke{vermillion, 4, nil}, lt, shift, false)
	a.line(stroke{blue, 4, nil}, lt, random, true)
	a.decorate(ticks, yt, "duration of the first line [h]", "error of B [%]")
}
