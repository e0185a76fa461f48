package report

import (
	"fmt"
	"image"
	"image/color"
	"math"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"

	"offplane/model"
	"offplane/synth"
)

// CoronaFigure draws the truth at a glance in that format: density in the plane of the sky,
// field lines projected on the sky, the border of the closed region in the plane of
// the sky and the field of view.
func CoronaFigure(v *synth.Survey, title string, f Format) []byte {
	const zoom = 6
	side := v.Side * zoom
	const left, bottom, top, right = 165, 270, 110, 60
	c := newCanvas(f, left+side+right, bottom+side+top)
	var outside []float64
	for _, n := range v.Density {
		if !math.IsNaN(float64(n)) {
			outside = append(outside, float64(n))
		}
	}
	s := sharedScale("electron density in the plane of the sky [cm⁻³]", true, outside, outside)
	m := image.NewRGBA(image.Rect(0, 0, side, side))
	for py := range side {
		for px := range side {
			n := (v.Side-1-py/zoom)*v.Side + px/zoom
			k := paper
			if t := s.norm(float64(v.Density[n])); !math.IsNaN(t) {
				k = s.colour(t)
			}
			m.SetRGBA(px, py, k)
		}
	}
	c.blit(left, bottom, m)
	step := 2 * v.Half / float64(v.Side-1)
	span := v.Half + step/2
	a := &axes{c: c, x: left, y: bottom, w: float64(side), h: float64(side), xlo: -span, xhi: span, ylo: -span, yhi: span}
	box := a.box()
	draw := func(k stroke, pts []vg.Point) {
		if len(pts) > 1 {
			box.StrokeLines(k.style(), box.ClipLinesXY(pts)...)
		}
	}
	// Lines all over the Sun first, thin; then those through the limb in the plane of the
	// sky. What lies behind the disc is hidden.
	for _, sky := range []bool{false, true} {
		for _, l := range v.Lines {
			if l.Sky != sky {
				continue
			}
			k := stroke{vermillion, 1.2, nil}
			if !l.Closed {
				k.colour = blue
			}
			if sky {
				k.width = 2.6
			}
			var pts []vg.Point
			for _, p := range l.Points {
				if p.X < 0 && math.Hypot(p.Y, p.Z) < 1 {
					draw(k, pts)
					pts = nil
					continue
				}
				pts = append(pts, pt(a.px(p.Y), a.py(p.Z)))
			}
			draw(k, pts)
		}
	}
	// The border of the closed region, between neighbouring points of the raster.
	closed := func(i, j int) (yes, known bool) {
		k := v.Structure[j*v.Side+i]
		return k == model.Closed || k == model.ActiveRegion, k != 0
	}
	border := stroke{ink, 3, nil}
	at := func(i, j float64) vg.Point { return pt(a.px(-v.Half+i*step), a.py(-v.Half+j*step)) }
	for j := range v.Side {
		for i := range v.Side {
			here, ok := closed(i, j)
			if !ok {
				continue
			}
			x, y := float64(i), float64(j)
			if i+1 < v.Side {
				if there, ok := closed(i+1, j); ok && there != here {
					draw(border, []vg.Point{at(x+0.5, y-0.5), at(x+0.5, y+0.5)})
				}
			}
			if j+1 < v.Side {
				if there, ok := closed(i, j+1); ok && there != here {
					draw(border, []vg.Point{at(x-0.5, y+0.5), at(x+0.5, y+0.5)})
				}
			}
		}
	}
	arc := func(r, from, to float64, k stroke) {
		pts := make([]vg.Point, 361)
		for i := range pts {
			sin, cos := math.Sincos(from + (to-from)*float64(i)/360)
			pts[i] = pt(a.px(-r*sin), a.py(r*cos))
		}
		draw(k, pts)
	}
	arc(1, 0, 2*math.Pi, stroke{ink, 3, nil})
	edge := stroke{orange, 4, []float64{14, 8}}
	arc(v.Inner, v.From, v.To, edge)
	arc(v.Outer, v.From, v.To, edge)
	if v.To-v.From < 2*math.Pi-1e-6 {
		for _, pa := range []float64{v.From, v.To} {
			sin, cos := math.Sincos(pa)
			draw(edge, []vg.Point{pt(a.px(-v.Inner*sin), a.py(v.Inner*cos)), pt(a.px(-v.Outer*sin), a.py(v.Outer*cos))})
		}
	}
	ticks := linearTicks(-v.Half, v.Half, 7)
	a.decorate(ticks, ticks, "west [solar radii]", "north [solar radii]")
	c.colourBar(left+20, 92, side-40, s, []panel{{data: v.Density, scale: s}})
	c.text(float64(left), float64(bottom+side+64), title, textStyle{size: medium + 2, bold: true, y: text.YCenter})
	keys := []key{{label: "closed", stroke: stroke{vermillion, 2.6, nil}}, {label: "open", stroke: stroke{blue, 2.6, nil}},
		{label: "border of the closed region", stroke: border}, {label: "field of view", stroke: edge}}
	c.legend(float64(left), float64(bottom+side+26), keys)
	c.text(float64(c.w)-14, 10, fmt.Sprintf("share of the emission with beta > 1: %.3g", v.HighBeta), textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode([]*table{s.table}, []color.RGBA{vermillion, blue, orange, grey})
}
