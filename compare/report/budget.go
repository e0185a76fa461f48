package report

import (
	"fmt"
	"image/color"
	"math"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"

	"offplane/compare/budget"
)

// Columns of the budget's figure [px].
const (
	budgetLeft   = 640.0 // of the waterfall
	budgetWide   = 660.0
	budgetAlone  = 1350.0 // of what terms do alone
	budgetNarrow = 400.0
	budgetChance = 1800.0 // of the scatter
	budgetRow    = 62.0
	budgetBelow  = 150.0
	budgetAbove  = 170.0
)

// Budget draws an error budget: its terms from nothing to the total, what each does
// alone, and the scatter of one pixel. Terms that are not in the scenario are left out.
func Budget(b *budget.Budget) *Figure {
	return &Figure{
		Name: "budget", Draw: func(f Format) []byte { return budgetFigure(b, f) },
		Alt:     "Waterfall of the terms of the error budget, from the method alone to the total, with what each does alone and last, and its part in the scatter.",
		Caption: budgetCaption(b),
	}
}

func budgetFigure(b *budget.Budget, f Format) []byte {
	rows := present(b)
	hgt := budgetBelow + budgetAbove + budgetRow*float64(len(rows))
	c := newCanvas(f, figureWidth, int(hgt))
	base, top := budgetBelow, hgt-budgetAbove
	y := func(i int) float64 { return top - budgetRow*(float64(i)+0.5) }

	steps := waterfall(rows)
	lo, hi := 0.0, 0.0
	for _, s := range steps {
		lo, hi = min(lo, s.from, s.mid, s.to), max(hi, s.from, s.mid, s.to)
		if s.err > 0 { // false for NaN
			lo, hi = min(lo, s.to-s.err), max(hi, s.to+s.err)
		}
	}
	a := budgetAxes(c, budgetLeft, budgetWide, base, top, lo, hi)
	a.fall(steps, y)
	for i, r := range rows {
		bold := r.Key == b.Method.Key || r.Key == b.Total.Key
		c.text(budgetLeft-20, y(i), r.Name, textStyle{size: small, bold: bold, x: text.XRight, y: text.YCenter})
	}
	a.title("from the truth to the map")
	a.factors()

	lo, hi = 0, 0
	for _, r := range rows[1 : len(rows)-1] {
		e, err := r.Field, float64(r.Field.Error)
		for _, x := range []float64{float64(e.Share) - err, float64(e.Share) + err, float64(e.FromIdeal), float64(e.FromFull)} {
			lo, hi = min(lo, x), max(hi, x)
		}
	}
	d := budgetAxes(c, budgetAlone, budgetNarrow, base, top, lo, hi)
	d.alone(rows, y)
	d.title("share, alone, last")

	lo, hi = 0, 0.01
	for _, r := range rows {
		if x := float64(r.Field.ScatterShare); !math.IsNaN(x) { // NaN: of too few pixels
			lo, hi = min(lo, x), max(hi, x)
		}
	}
	s := budgetAxes(c, budgetChance, budgetNarrow-30, base, top, lo, hi)
	s.bars(rows, y)
	s.title("scatter of one pixel")
	if math.IsNaN(float64(b.Total.Field.ScatterShare)) {
		c.text(s.x+s.w/2, base+s.h/2, "too few pixels", textStyle{size: small, colour: grey, x: text.XCenter, y: text.YCenter})
	}

	for _, x := range []*budgetPanel{a, d} {
		x.label("ln (B / B_SKY)")
	}
	s.label("standard deviation of ln B")
	key := func(x float64, k color.RGBA, label string) float64 {
		c.FillPolygon(k, box(x, hgt-62, 44, 24))
		c.text(x+56, hgt-50, label, textStyle{size: small, x: text.XLeft, y: text.YCenter})
		return x + 56 + width(label, small) + 50
	}
	x := key(budgetLeft, blue, "speed")
	x = key(x, orange, "density")
	key(x, grey, "field")
	x = budgetAlone - 150
	for _, m := range budgetMarks {
		c.DrawGlyph(vgdraw.GlyphStyle{Color: m.colour, Radius: m.radius, Shape: m.shape}, pt(x+10, hgt-50))
		c.text(x+28, hgt-50, m.label, textStyle{size: small, x: text.XLeft, y: text.YCenter})
		x += 28 + width(m.label, small) + 40
	}
	c.text(figureWidth-14, 8, fmt.Sprintf("%s, seed %d: %d pixels, the scatter of %d, %d realisations of %.3g h", b.Scenario, b.Seed, b.Pixels.Used, b.Pixels.Scatter, b.Pieces, b.Duration/3600),
		textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode(nil, lineColours)
}

// A step of the waterfall runs over mid: speed first, density second.
type step struct{ from, mid, to, err float64 }

// waterfall places the terms one after the other; the last is the total, from zero.
func waterfall(rows []budget.Term) []step {
	var steps []step
	at := 0.0
	for i, r := range rows {
		if i == len(rows)-1 {
			at = 0
		}
		mid := at + float64(r.Speed.Share)
		to := at + float64(r.Field.Share)
		steps = append(steps, step{at, mid, to, float64(r.Field.Error)})
		at = to
	}
	return steps
}

// A budgetPanel is one panel whose rows are terms.
type budgetPanel struct{ axes }

func budgetAxes(c *canvas, x, w, base, top, lo, hi float64) *budgetPanel {
	pad := 0.06 * max(hi-lo, 0.02)
	p := &budgetPanel{axes{c: c, x: x, y: base, w: w, h: top - base, xlo: lo - pad, xhi: hi + pad, ylo: 0, yhi: 1}}
	for _, t := range p.ticks() {
		c.line(stroke{faint, 1.5, nil}, pt(p.px(t.at), base), pt(p.px(t.at), top))
	}
	if p.xlo < 0 {
		c.line(stroke{ink, 2, nil}, pt(p.px(0), base), pt(p.px(0), top))
	}
	return p
}

func (p *budgetPanel) ticks() []tick { return linearTicks(p.xlo, p.xhi, int(p.w/80)) }

func (p *budgetPanel) title(s string) {
	p.c.frame(p.x, p.y, p.w, p.h)
	p.c.text(p.x+p.w/2, p.y+p.h+56, s, textStyle{size: medium, bold: true, x: text.XCenter, y: text.YBottom})
}

// label writes the scale below the panel.
func (p *budgetPanel) label(s string) {
	for _, t := range p.ticks() {
		x := p.px(t.at)
		p.c.line(stroke{ink, 2, nil}, pt(x, p.y), pt(x, p.y-8))
		p.c.text(x, p.y-13, t.label, textStyle{size: small, x: text.XCenter, y: text.YTop})
	}
	p.c.text(p.x+p.w/2, p.y-50, s, textStyle{size: small, x: text.XCenter, y: text.YTop})
}

// factors writes the scale of B/B_SKY above the panel.
func (p *budgetPanel) factors() {
	for _, t := range linearTicks(math.Exp(p.xlo), math.Exp(p.xhi), 6) {
		x := p.px(math.Log(t.at))
		p.c.line(stroke{ink, 2, nil}, pt(x, p.y+p.h), pt(x, p.y+p.h+8))
		p.c.text(x, p.y+p.h+13, "×"+t.label, textStyle{size: small, x: text.XCenter, y: text.YBottom})
	}
}

func box(x, y, w, h float64) []vg.Point {
	return []vg.Point{pt(x, y), pt(x+w, y), pt(x+w, y+h), pt(x, y+h)}
}

// fall draws the waterfall.
func (p *budgetPanel) fall(steps []step, y func(i int) float64) {
	const half = 18.0
	for i, s := range steps {
		last := i == len(steps)-1
		bar := func(k color.RGBA, from, to, low, high float64) {
			if from != to {
				p.c.FillPolygon(k, box(min(p.px(from), p.px(to)), low, math.Abs(p.px(to)-p.px(from)), high-low))
			}
		}
		speed, density := s.mid-s.from, s.to-s.mid
		// One way; a half too thin to see does not count.
		same := speed*density >= 0 || min(math.Abs(speed), math.Abs(density)) < 0.002*(p.xhi-p.xlo)
		switch {
		case last || i == 0:
			bar(grey, s.from, s.to, y(i)-half, y(i)+half)
		case s.from == s.mid && s.mid == s.to:
		case same:
			bar(blue, s.from, s.mid, y(i)-half, y(i)+half)
			bar(orange, s.mid, s.to, y(i)-half, y(i)+half)
		default: // there and back: one above the other
			bar(blue, s.from, s.mid, y(i), y(i)+half)
			bar(orange, s.mid, s.to, y(i)-half, y(i))
		}
		x := p.px(s.to)
		p.c.line(stroke{ink, 3, nil}, pt(x, y(i)-half-3), pt(x, y(i)+half+3))
		if s.err > 0 {
			p.c.line(stroke{ink, 2, nil}, pt(p.px(s.to-s.err), y(i)), pt(p.px(s.to+s.err), y(i)))
		}
		if i+1 < len(steps) {
			p.c.line(stroke{grey, 1.5, []float64{6, 5}}, pt(x, y(i)-half-3), pt(x, y(i+1)+half+3))
		}
	}
}

// budgetMarks are the symbols of the middle panel.
var budgetMarks = []struct {
	label  string
	colour color.RGBA
	shape  vgdraw.GlyphDrawer
	radius vg.Length
}{
	{"share", ink, vgdraw.CircleGlyph{}, 7},
	{"alone in the ideal world", green, vgdraw.PyramidGlyph{}, 11},
	{"last in the scenario", vermillion, vgdraw.BoxGlyph{}, 9},
}

// alone draws share, first and last effect of every term.
func (p *budgetPanel) alone(rows []budget.Term, y func(i int) float64) {
	for i, r := range rows {
		e := r.Field
		if math.IsNaN(float64(e.FromIdeal)) {
			continue
		}
		p.c.line(stroke{grey, 2, nil}, pt(p.px(float64(e.FromIdeal)), y(i)), pt(p.px(float64(e.FromFull)), y(i)))
		x := []float64{float64(e.Share), float64(e.FromIdeal), float64(e.FromFull)}
		p.c.line(stroke{ink, 3, nil}, pt(p.px(x[0]-float64(e.Error)), y(i)), pt(p.px(x[0]+float64(e.Error)), y(i)))
		for _, k := range []int{1, 2, 0} {
			m := budgetMarks[k]
			p.c.DrawGlyph(vgdraw.GlyphStyle{Color: m.colour, Radius: m.radius, Shape: m.shape}, pt(p.px(x[k]), y(i)))
		}
	}
}

// bars draws the scatter of one pixel.
func (p *budgetPanel) bars(rows []budget.Term, y func(i int) float64) {
	for i, r := range rows {
		x := float64(r.Field.ScatterShare)
		if x == 0 || math.IsNaN(x) {
			continue
		}
		k := purple
		if i == len(rows)-1 {
			k = grey
		}
		p.c.FillPolygon(k, box(min(p.px(0), p.px(x)), y(i)-15, math.Abs(p.px(x)-p.px(0)), 30))
	}
}
