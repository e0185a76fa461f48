package report

import (
	"image/color"
	"math"
	"slices"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"
)

// An axes maps numbers to a box of the canvas.
type axes struct {
	c                  *canvas
	x, y, w, h         float64 // lower left corner and size [px]
	xlo, xhi, ylo, yhi float64
	ylog               bool
}

func (a *axes) px(v float64) float64 { return a.x + (v-a.xlo)/(a.xhi-a.xlo)*a.w }

func (a *axes) py(v float64) float64 {
	if a.ylog {
		return a.y + math.Log(v/a.ylo)/math.Log(a.yhi/a.ylo)*a.h
	}
	return a.y + (v-a.ylo)/(a.yhi-a.ylo)*a.h
}

// draws frame, ticks and labels; no x numbers if xlabel is empty.
func (a *axes) decorate(xticks, yticks []tick, xlabel, ylabel string) {
	c := a.c
	c.frame(a.x, a.y, a.w, a.h)
	mark := stroke{ink, 2, nil}
	for _, t := range xticks {
		p := a.px(t.at)
		c.line(mark, pt(p, a.y), pt(p, a.y-8))
		if xlabel != "" && t.label != "" {
			c.text(p, a.y-13, t.label, textStyle{size: small, x: text.XCenter, y: text.YTop})
		}
	}
	if xlabel != "" {
		c.text(a.x+a.w/2, a.y-48, xlabel, textStyle{size: small, x: text.XCenter, y: text.YTop})
	}
	left := 0.0
	for _, t := range yticks {
		p, long := a.py(t.at), 8.0
		if t.label == "" {
			long = 5
		} else {
			left = max(left, width(t.label, small))
			c.text(a.x-13, p, t.label, textStyle{size: small, x: text.XRight, y: text.YCenter})
		}
		c.line(mark, pt(a.x, p), pt(a.x-long, p))
	}
	c.text(a.x-28-left, a.y+a.h/2, ylabel, textStyle{size: small, turned: true, x: text.XCenter, y: text.YBottom})
}

func (a *axes) grid(yticks []tick) {
	for _, t := range yticks {
		if t.label != "" {
			a.c.line(stroke{faint, 1.5, nil}, pt(a.x, a.py(t.at)), pt(a.x+a.w, a.py(t.at)))
		}
	}
}

func (a *axes) box() *vgdraw.Canvas { return a.c.clip(a.x, a.y, a.w, a.h) }

// drawable says whether a point has a place on the axes.
func (a *axes) drawable(v float64) bool {
	return !math.IsNaN(v) && !math.IsInf(v, 0) && (!a.ylog || v > 0)
}

// line draws a curve, broken where it has no value; marked puts a dot on each point.
func (a *axes) line(s stroke, x, y []float64, marked bool) {
	var run []vg.Point
	box := a.box()
	flush := func() {
		if len(run) > 1 {
			box.StrokeLines(s.style(), box.ClipLinesXY(run)...)
		}
		run = nil
	}
	for i := range x {
		if !a.drawable(y[i]) {
			flush()
			continue
		}
		run = append(run, pt(a.px(x[i]), a.py(y[i])))
	}
	flush()
	for i := range x {
		alone := a.drawable(y[i]) && (i == 0 || !a.drawable(y[i-1])) && (i == len(x)-1 || !a.drawable(y[i+1]))
		if (marked || alone) && a.drawable(y[i]) {
			box.DrawGlyph(vgdraw.GlyphStyle{Color: s.colour, Radius: vg.Length(s.width + 2.5), Shape: vgdraw.CircleGlyph{}}, pt(a.px(x[i]), a.py(y[i])))
		}
	}
}

// band fills between lo and hi, broken where either has no value; a point alone
// gets a bar.
func (a *axes) band(k color.RGBA, x, lo, hi []float64) {
	fill := color.NRGBA{k.R, k.G, k.B, 0x40}
	box := a.box()
	for i := 0; i < len(x); {
		if !a.drawable(lo[i]) || !a.drawable(hi[i]) {
			i++
			continue
		}
		j := i
		for j+1 < len(x) && a.drawable(lo[j+1]) && a.drawable(hi[j+1]) {
			j++
		}
		if i == j {
			l := []vg.Point{pt(a.px(x[i]), a.py(lo[i])), pt(a.px(x[i]), a.py(hi[i]))}
			box.StrokeLines(stroke{fill, 12, nil}.style(), box.ClipLinesXY(l)...)
		} else {
			var p []vg.Point
			for k := i; k <= j; k++ {
				p = append(p, pt(a.px(x[k]), a.py(hi[k])))
			}
			for k := j; k >= i; k-- {
				p = append(p, pt(a.px(x[k]), a.py(lo[k])))
			}
			if p = box.ClipPolygonXY(p); len(p) > 2 {
				box.FillPolygon(fill, p)
			}
		}
		i = j + 1
	}
}

// A key is one entry of a legend.
type key struct {
	label  string
	stroke stroke
	band   bool // with a 16..84 per cent band behind it
}

// legend lays keys out in a row from (x, y), leftwards to rightwards.
func (c *canvas) legend(x, y float64, keys []key) {
	for _, k := range keys {
		const long = 62
		switch {
		case k.band && k.stroke.dashes != nil:
			c.line(k.stroke.thin(), pt(x, y-12), pt(x+long, y-12))
			c.line(k.stroke.thin(), pt(x, y+12), pt(x+long, y+12))
		case k.band:
			r, g, b, _ := k.stroke.colour.RGBA()
			c.FillPolygon(color.NRGBA{uint8(r >> 8), uint8(g >> 8), uint8(b >> 8), 0x40}, []vg.Point{pt(x, y-12), pt(x+long, y-12), pt(x+long, y+12), pt(x, y+12)})
		}
		c.line(k.stroke, pt(x, y), pt(x+long, y))
		c.text(x+long+12, y, k.label, textStyle{size: small, x: text.XLeft, y: text.YCenter})
		x += long + 12 + width(k.label, small) + 46
	}
}

// A curve is one quantity against height: the median and, if lo is not nil, the
// 16th and 84th percentile of the pixels of each bin.
type curve struct {
	key
	median, lo, hi []float64
}

// A profile is one column of the height figure.
type profile struct {
	title, unit string
	log         bool
	curves      []curve
	ratio       *curve // inferred over the sky truth
}

// profileFigure draws the columns: values above, ratios below.
func profileFigure(f Format, heights []float64, span [2]float64, ps []profile, foot string) []byte {
	const (
		hgt             = 1180
		top, mid, below = 1010.0, 480.0, 118.0
		gap             = 185.0
		left            = 175.0
	)
	c := newCanvas(f, figureWidth, hgt)
	n := float64(len(ps))
	w := min((figureWidth-left-50-(n-1)*gap)/n, 900)
	xt := linearTicks(span[0], span[1], 6)
	var legend []key
	have := map[string]bool{}
	for i, p := range ps {
		x := left + float64(i)*(w+gap)
		ylo, yhi := math.Inf(1), math.Inf(-1)
		for _, cv := range p.curves {
			if !have[cv.label] {
				have[cv.label] = true
				legend = append(legend, cv.key)
			}
			for _, ys := range [][]float64{cv.median, cv.lo, cv.hi} {
				for _, v := range ys {
					if !math.IsNaN(v) && (!p.log || v > 0) {
						ylo, yhi = min(ylo, v), max(yhi, v)
					}
				}
			}
		}
		if ylo > yhi {
			ylo, yhi = 1, 10
		}
		a := &axes{c: c, x: x, y: mid + 30, w: w, h: top - mid - 30, xlo: span[0], xhi: span[1], ylog: p.log}
		var yt []tick
		if p.log {
			a.ylo, a.yhi = roundLog(ylo, false), roundLog(yhi, true)
			if a.yhi <= a.ylo {
				a.yhi = a.ylo * 10
			}
			yt = logTicks(a.ylo, a.yhi)
		} else {
			d := max(yhi-ylo, math.Abs(yhi)*0.05)
			a.ylo, a.yhi = ylo-0.06*d, yhi+0.06*d
			if ylo >= 0 && ylo < 0.3*yhi {
				a.ylo = 0
			}
			yt = linearTicks(a.ylo, a.yhi, 6)
		}
		a.grid(yt)
		for _, cv := range p.curves {
			switch {
			case cv.lo == nil:
			case cv.stroke.dashes == nil:
				a.band(cv.stroke.colour.(color.RGBA), heights, cv.lo, cv.hi)
			default: // a fifth fill over the others would tell nothing
				a.line(cv.stroke.thin(), heights, cv.lo, false)
				a.line(cv.stroke.thin(), heights, cv.hi, false)
			}
		}
		for _, cv := range p.curves {
			a.line(cv.stroke, heights, cv.median, false)
		}
		a.decorate(xt, yt, "", p.title+" ["+p.unit+"]")
		c.text(x+w/2, top+26, p.title, textStyle{size: medium, bold: true, x: text.XCenter, y: text.YBottom})

		b := &axes{c: c, x: x, y: below, w: w, h: mid - below - 20, xlo: span[0], xhi: span[1], ylo: 0.5, yhi: 2, ylog: true}
		b.grid(ratioTicks)
		b.line(stroke{ink, 2, nil}, span[:], []float64{1, 1}, false)
		if p.ratio != nil {
			b.band(p.ratio.stroke.colour.(color.RGBA), heights, p.ratio.lo, p.ratio.hi)
			b.line(p.ratio.stroke, heights, p.ratio.median, false)
		} else {
			c.text(x+w/2, b.y+b.h*0.7, "not available", textStyle{size: small, colour: grey, x: text.XCenter, y: text.YCenter})
		}
		b.decorate(xt, ratioTicks, "projected heliocentric distance [R☉]", "inferred / sky truth")
	}
	c.legend(left, hgt-40, legend)
	c.text(figureWidth-14, 8, foot, textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode(nil, lineColours)
}

// partsFigure draws the factors of B/B_SKY and the valid fraction by height bin.
func partsFigure(f Format, heights []float64, edges [2]float64, factors []curve, valid []float64, foot string) []byte {
	const hgt = 940
	c := newCanvas(f, figureWidth, hgt)
	xt := linearTicks(edges[0], edges[1], 6)
	lo, hi := 0.7, 1.4
	for _, q := range factors {
		for _, v := range slices.Concat(q.median, q.lo, q.hi) {
			if v > 0 && !math.IsInf(v, 0) {
				lo, hi = min(lo, v*0.97), max(hi, v*1.03)
			}
		}
	}
	lo, hi = max(lo, 0.1), min(hi, 10)
	yt := []tick{{0.1, "0.1"}, {0.2, "0.2"}, {0.3, "0.3"}, {0.4, "0.4"}, {0.5, "0.5"}, {0.6, "0.6"}, {0.7, "0.7"}, {0.8, "0.8"}, {0.9, "0.9"}, {1, "1"},
		{1.1, "1.1"}, {1.2, "1.2"}, {1.3, "1.3"}, {1.5, "1.5"}, {2, "2"}, {3, "3"}, {5, "5"}, {10, "10"}}
	for len(yt) > 0 && yt[0].at < lo {
		yt = yt[1:]
	}
	for len(yt) > 0 && yt[len(yt)-1].at > hi {
		yt = yt[:len(yt)-1]
	}
	a := &axes{c: c, x: 175, y: 118, w: 1180, h: 650, xlo: edges[0], xhi: edges[1], ylo: lo, yhi: hi, ylog: true}
	a.grid(yt)
	a.line(stroke{ink, 1.5, nil}, edges[:], []float64{1, 1}, false)
	var keys []key
	for _, q := range factors {
		if q.lo != nil {
			a.band(q.stroke.colour.(color.RGBA), heights, q.lo, q.hi)
		}
		a.line(q.stroke, heights, q.median, true)
		keys = append(keys, q.key)
	}
	a.decorate(xt, yt, "projected heliocentric distance [R☉]", "factor of B / B_SKY")
	c.text(a.x+a.w/2, a.y+a.h+16, "factors of the field's bias (median of each bin)", textStyle{size: medium, bold: true, x: text.XCenter, y: text.YBottom})

	b := &axes{c: c, x: 1540, y: 118, w: 610, h: 650, xlo: edges[0], xhi: edges[1], ylo: 0, yhi: 1.05}
	vt := linearTicks(0, 1, 5)
	b.grid(vt)
	b.line(stroke{vermillion, 4, nil}, heights, valid, true)
	b.decorate(xt, vt, "projected heliocentric distance [R☉]", "valid pixels / pixels of the field")
	c.text(b.x+b.w/2, b.y+b.h+16, "valid fraction", textStyle{size: medium, bold: true, x: text.XCenter, y: text.YBottom})
	half := (len(keys) + 1) / 2
	c.legend(175, hgt-34, keys[:half])
	c.legend(175, hgt-76, keys[half:])
	c.text(figureWidth-14, 8, foot, textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode(nil, lineColours)
}
