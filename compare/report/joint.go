package report

import (
	"cmp"
	"fmt"
	"image"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"

	order "offplane/compare/stat"
)

// Size of the joint histograms [px] and their cells, each way.
const (
	jointSide  = 560
	jointCells = 56
)

// A joint is one histogram of inferred against true values; of a logarithmic one the
// coordinates are decadic logarithms.
type joint struct {
	title, unit, truth, inferred string
	log                          bool
	x, y                         []float64 // true, inferred: pixels with both
	lo, hi                       float64
	count                        []int // cells, rows upward
	ticks                        []tick
}

// joints draws inferred against true values of every pixel.
func (r *Report) joints(foot string) (Figure, bool) {
	var js []*joint
	most := 1
	for _, j := range []*joint{
		{title: "magnetic field", unit: "G", truth: "B_SKY", inferred: "B"},
		{title: "phase speed", unit: "km/s", truth: "SPEED_SKY", inferred: "SPEED"},
		{title: "electron density", unit: "cm⁻³", truth: "NE_SKY", inferred: "NE", log: true},
	} {
		if r.fill(j) {
			js = append(js, j)
			for _, n := range j.count {
				most = max(most, n)
			}
		}
	}
	if len(js) == 0 {
		return Figure{}, false
	}
	s := &scale{lo: 1, hi: roundLog(float64(max(most, 2)), true), log: true, table: &viridis, label: "pixels in a cell, logarithmic"}
	s.ticks = logTicks(s.lo, s.hi)
	return Figure{
		Name: "joint", Draw: func(f Format) []byte { return jointFigure(f, js, s, foot) },
		Alt: "Histograms of inferred against true field, phase speed and density, pixel by pixel, with the line where they are equal and the median in bins of the truth.",
		Caption: fmt.Sprintf("Inferred against true, pixel by pixel. Truth: B_SKY [G], SPEED_SKY [km/s], NE_SKY [cm⁻³], at the plane of the sky. Inferred: B and SPEED%s, NE from the line ratio. Colour: number of pixels in a cell, on a logarithmic scale. Line: inferred equals true. Points and bars: median and 16th to 84th percentile of the inferred values in bins of the truth. N pixels; r is the correlation of their ranks. Values beyond the axes lie in the outermost cells. Domain: %s.",
			r.estimator(), r.domain()),
	}, true
}

// jointFigure draws histograms side by side.
func jointFigure(f Format, js []*joint, s *scale, foot string) []byte {
	const left, bottom, gap, hgt = 165, 280, 160, 930
	c := newCanvas(f, left+len(js)*jointSide+(len(js)-1)*gap+60, hgt)
	for i, j := range js {
		c.joint(j, left+i*(jointSide+gap), bottom, s)
	}
	c.colourBar(left+60, 92, 900, s, nil)
	c.text(float64(c.w)-14, 8, foot, textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode([]*table{s.table}, lineColours)
}

// fill collects the pixels of a histogram; false if there are too few.
func (r *Report) fill(j *joint) bool {
	t, m := data(r.Truth, j.truth), data(r.Inferred, j.inferred)
	if t == nil || m == nil {
		return false
	}
	known := !math.IsNaN(float64(r.Verdict.Summary.Pixels.ValidFraction))
	for i, in := range r.Verdict.Field {
		x, y := float64(t[i]), float64(m[i])
		if !in || known && !r.Verdict.Valid[i] || !(x > 0) || !(y > 0) || math.IsInf(x, 0) || math.IsInf(y, 0) {
			continue
		}
		if j.log {
			x, y = math.Log10(x), math.Log10(y)
		}
		j.x, j.y = append(j.x, x), append(j.y, y)
	}
	if len(j.x) < 20 {
		return false
	}
	j.lo = min(order.Quantile(0.002, j.x), order.Quantile(0.01, j.y))
	j.hi = max(order.Quantile(0.998, j.x), order.Quantile(0.99, j.y))
	room := max(0.04*(j.hi-j.lo), 1e-3*math.Abs(j.hi))
	j.lo, j.hi = j.lo-room, j.hi+room
	if j.log {
		for _, t := range logTicks(math.Pow(10, j.lo), math.Pow(10, j.hi)) {
			j.ticks = append(j.ticks, tick{math.Log10(t.at), t.label})
		}
	} else {
		j.ticks = linearTicks(j.lo, j.hi, 5)
	}
	j.count = make([]int, jointCells*jointCells)
	cell := func(v float64) int {
		return min(max(int((v-j.lo)/(j.hi-j.lo)*jointCells), 0), jointCells-1)
	}
	for i := range j.x {
		j.count[cell(j.y[i])*jointCells+cell(j.x[i])]++
	}
	return true
}

func (c *canvas) joint(j *joint, x, y int, s *scale) {
	m := image.NewRGBA(image.Rect(0, 0, jointSide, jointSide))
	const step = jointSide / jointCells
	for px := range jointSide {
		for py := range jointSide {
			k := paper
			if n := j.count[(jointSide-1-py)/step*jointCells+px/step]; n > 0 {
				k = s.colour(s.norm(float64(n)))
			}
			m.SetRGBA(px, py, k)
		}
	}
	c.blit(x, y, m)
	a := &axes{c: c, x: float64(x), y: float64(y), w: jointSide, h: jointSide, xlo: j.lo, xhi: j.hi, ylo: j.lo, yhi: j.hi}
	a.line(stroke{ink, 3, nil}, []float64{j.lo, j.hi}, []float64{j.lo, j.hi}, false)
	j.medians(a)
	a.decorate(j.ticks, j.ticks, fmt.Sprintf("true %s [%s]", j.truth, j.unit), fmt.Sprintf("inferred %s [%s]", j.inferred, j.unit))
	c.text(a.x, a.y+a.h+20, j.title, textStyle{size: medium, bold: true, x: text.XLeft, y: text.YBottom})
	r := stat.Correlation(ranks(j.x), ranks(j.y), nil)
	c.text(a.x+a.w, a.y+a.h+20, fmt.Sprintf("N = %d, r = %s", len(j.x), cell(r, 2)), textStyle{size: small - 2, x: text.XRight, y: text.YBottom})
}

// ranks returns the place of every value in ascending order.
func ranks(x []float64) []float64 {
	at := make([]int, len(x))
	for i := range at {
		at[i] = i
	}
	slices.SortStableFunc(at, func(a, b int) int { return cmp.Compare(x[a], x[b]) })
	out := make([]float64, len(x))
	for place, i := range at {
		out[i] = float64(place)
	}
	return out
}

// medians marks the inferred values in bins of the truth that hold a hundredth of the
// pixels or more.
func (j *joint) medians(a *axes) {
	const bins = 12
	box := a.box()
	for b := range bins {
		lo, hi := j.lo+(j.hi-j.lo)*float64(b)/bins, j.lo+(j.hi-j.lo)*float64(b+1)/bins
		var x, y []float64
		for i, v := range j.x {
			if v >= lo && v < hi {
				x, y = append(x, v), append(y, j.y[i])
			}
		}
		if len(x) < 10 || len(x)*100 < len(j.x) {
			continue
		}
		s, at := order.Summarise(y), a.px(order.Median(x))
		for _, k := range []stroke{{paper, 9, nil}, {vermillion, 4, nil}} {
			bar := []vg.Point{pt(at, a.py(s.P16)), pt(at, a.py(s.P84))}
			box.StrokeLines(k.style(), box.ClipLinesXY(bar)...)
			box.DrawGlyph(vgdraw.GlyphStyle{Color: k.colour, Radius: vg.Length(5 + k.width/2), Shape: vgdraw.CircleGlyph{}}, pt(at, a.py(s.Median)))
		}
	}
}
