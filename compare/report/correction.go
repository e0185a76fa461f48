package report

import (
	"fmt"
	"image/color"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/plot/text"

	correction "offplane/compare/table"
	"offplane/scenarios/units"
)

// TableFigure draws a correction table, one column a quantity: the factor with its
// intervals against height, at the middle of the other features; below it the coverage
// achieved on members that were never used.
func TableFigure(t *correction.Table, f Format) []byte {
	const (
		high            = 1250
		top, mid, below = 1010.0, 520.0, 130.0
		gap, left       = 185.0, 175.0
	)
	c := newCanvas(f, figureWidth, high)
	var ss []*correction.Surface
	for i := range t.Surfaces {
		if s := &t.Surfaces[i]; slices.Equal(s.Features(), t.Features()) {
			ss = append(ss, s)
		}
	}
	n := float64(len(ss))
	w := min((figureWidth-left-50-(n-1)*gap)/n, 900)
	for i, s := range ss {
		x := left + float64(i)*(w+gap)
		c.factor(&axes{c: c, x: x, y: mid + 30, w: w, h: top - mid - 30}, s, t.Least)
		c.text(x+w/2, top+54, s.Quantity.String(), textStyle{size: medium, bold: true, x: text.XCenter, y: text.YBottom})
		c.text(x+w/2, top+18, middleText(s), textStyle{size: small - 2, colour: grey, x: text.XCenter, y: text.YBottom})
		c.coverage(&axes{c: c, x: x, y: below, w: w, h: mid - below - 30}, s)
	}
	c.text(left, high-44, fmt.Sprintf("Correction against the truth “%s”; below, what the intervals held of members that were never used, ±2 standard errors", t.Truth),
		textStyle{size: medium, x: text.XLeft, y: text.YCenter})
	c.legend(left, high-100, []key{{"median", stroke{blue, 4, nil}, false}, {"68 %", stroke{blue, 0, nil}, true}, {"95 %", stroke{grey, 0, nil}, true},
		{"held by 68 %", stroke{blue, 3, nil}, false}, {"held by 95 %", stroke{vermillion, 3, nil}, false}, {"nominal", stroke{ink, 2.5, []float64{14, 8}}, false}})
	c.text(figureWidth-14, 8, fmt.Sprintf("%s; ensemble %s, %d members, effective %.0f", t.Origin.Program, t.Origin.Ensemble, t.Members, t.Effective),
		textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode(nil, lineColours)
}

// middle returns the middle of each axis.
func middle(s *correction.Surface) []float64 {
	x := make([]float64, len(s.Grid))
	for k, a := range s.Grid {
		m := len(a.Nodes)
		x[k] = (a.Nodes[(m-1)/2] + a.Nodes[m/2]) / 2
	}
	return x
}

// middleText tells at which features other than the height the correction is drawn.
func middleText(s *correction.Surface) string {
	var parts []string
	for k, x := range middle(s) {
		if f := s.Grid[k].Feature; f != correction.Height {
			v := fmt.Sprintf("%.3g", x)
			if x >= 1e4 {
				v = units.Scientific(x, 1)
			}
			parts = append(parts, strings.TrimSpace(fmt.Sprintf("%s %s %s", f, v, strings.Replace(f.Unit(), "-3", "⁻³", 1))))
		}
	}
	if parts == nil {
		return ""
	}
	return "at " + strings.Join(parts, ", ")
}

// factor draws the correction along the height axis.
func (c *canvas) factor(a *axes, s *correction.Surface, least int) {
	nodes := s.Grid[0].Nodes
	from, to := nodes[0], nodes[len(nodes)-1]
	x := middle(s)
	const steps = 120
	var h []float64
	var y [5][]float64
	lo, hi := 1.0, 1.0
	for i := range steps + 1 {
		x[0] = from + (to-from)*float64(i)/steps
		h = append(h, x[0])
		q, where := s.At(x, least)
		for k, v := range []float64{q.Median, q.Low68, q.High68, q.Low95, q.High95} {
			v = math.Exp(v)
			if where != correction.Inside {
				v = math.NaN()
			} else {
				lo, hi = min(lo, v), max(hi, v)
			}
			y[k] = append(y[k], v)
		}
	}
	a.xlo, a.xhi, a.ylo, a.yhi, a.ylog = from, to, lo/1.1, hi*1.1, true
	yt := factorTicks(a.ylo, a.yhi)
	a.grid(yt)
	a.band(grey, h, y[3], y[4])
	a.band(blue, h, y[1], y[2])
	a.line(stroke{ink, 2, nil}, []float64{from, to}, []float64{1, 1}, false)
	a.line(stroke{blue, 4, nil}, h, y[0], false)
	a.decorate(linearTicks(from, to, 5), yt, "", "true / inferred")
}

// factorTicks marks the simple factors within lo..hi.
func factorTicks(lo, hi float64) []tick {
	var out []tick
	for _, v := range []float64{0.1, 0.2, 0.3, 0.5, 0.7, 1, 1.5, 2, 3, 5, 10} {
		if v >= lo && v <= hi {
			out = append(out, tick{v, fmt.Sprint(v)})
		}
	}
	return out
}

// coverage draws what the intervals of a surface held.
func (c *canvas) coverage(a *axes, s *correction.Surface) {
	nodes := s.Grid[0].Nodes
	a.xlo, a.xhi, a.ylo, a.yhi = nodes[0], nodes[len(nodes)-1], 0.4, 1.02
	yt := []tick{{0.4, "40 %"}, {0.5, "50 %"}, {0.6, "60 %"}, {0.7, "70 %"}, {0.8, "80 %"}, {0.9, "90 %"}, {1, "100 %"}}
	a.grid(yt)
	for k, nominal := range []float64{0.68, 0.95} {
		colour := []color.RGBA{blue, vermillion}[k]
		a.line(stroke{colour, 2.5, []float64{14, 8}}, []float64{a.xlo, a.xhi}, []float64{nominal, nominal}, false)
		for _, b := range s.Score.Bins {
			if b.Members < 5 {
				continue
			}
			m := []correction.Measure{b.Coverage68, b.Coverage95}[k]
			at := (max(b.From, a.xlo)+min(b.To, a.xhi))/2 + (a.xhi-a.xlo)*0.008*(float64(k)-0.5)
			a.line(stroke{colour, 3, nil}, []float64{at, at}, []float64{m.Mean - 2*m.Error, min(m.Mean+2*m.Error, 1)}, false)
			a.line(stroke{colour, 5, nil}, []float64{at}, []float64{m.Mean}, true)
		}
	}
	a.decorate(linearTicks(a.xlo, a.xhi, 5), yt, "projected heliocentric distance [R☉]", "pixels within, held out")
	sc := &s.Score
	c.text(a.x+14, a.y+14, fmt.Sprintf("all: %.1f ± %.1f %% and %.1f ± %.1f %%", 100*sc.Coverage68.Mean, 100*sc.Coverage68.Error, 100*sc.Coverage95.Mean, 100*sc.Coverage95.Error),
		textStyle{size: small - 2, x: text.XLeft, y: text.YBottom})
}
