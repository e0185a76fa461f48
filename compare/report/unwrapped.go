package report

import (
	"fmt"
	"image"
	"math"
	"slices"

	"gonum.org/v1/plot/text"
)

// unwrapped draws truth, inferred map and ratio of the field against position angle and
// height: the ring laid flat.
func (r *Report) unwrapped(v *view, foot string) (Figure, bool) {
	t, m, ratio := data(r.Truth, "B_SKY"), data(r.Inferred, "B"), data(r.Verdict.Maps, "B_RATIO")
	if t == nil || m == nil {
		return Figure{}, false
	}
	shared := sharedScale("magnetic field [G]", false, r.values(t), r.values(m))
	ps := []panel{{"truth", "B_SKY", t, shared}, {"inferred", "B" + r.by(), m, shared},
		{"inferred / truth", "B_RATIO", ratio, ratioScale("ratio inferred / truth, logarithmic")}}
	return Figure{
		Name: "unwrapped", Draw: func(f Format) []byte { return r.flatFigure(f, v, ps, foot) },
		Alt: "The field against position angle and height above the limb: truth, inferred and their ratio one above the other.",
		Caption: fmt.Sprintf("The ring laid flat: position angle against projected heliocentric distance. Truth: B_SKY, component of the field in the plane of the sky, at x = 0 [G]. Inferred: B [G]%s, same colour scale. Ratio: B_RATIO on a logarithmic scale, symmetric about 1. Mid grey: pixels of the field without a value. Each point shows the pixel it lies in. Domain of the ratio: %s.",
			r.estimator(), r.domain()),
	}, true
}

// flatFigure draws panels one above the other; the last has a colour scale of its own.
func (r *Report) flatFigure(f Format, v *view, ps []panel, foot string) []byte {
	const left, wide, high, gap, bottom, top = 165, 1960, 300, 76, 290, 70
	c := newCanvas(f, figureWidth, bottom+len(ps)*high+(len(ps)-1)*gap+top)
	from, to := r.angles()
	// Within these distances every point lies in a pixel of the field.
	inner, outer := v.inner+1.3*v.step, v.outer-1.3*v.step
	if outer <= inner {
		inner, outer = v.inner, v.outer
	}
	heights := linearTicks(inner, outer, 4)
	for i, p := range ps {
		y := bottom + (len(ps)-1-i)*(high+gap)
		c.blit(left, y, v.flat(p, from, to, inner, outer, wide, high))
		a := &axes{c: c, x: left, y: float64(y), w: wide, h: high, xlo: from, xhi: to, ylo: inner, yhi: outer}
		xlabel := ""
		if i == len(ps)-1 {
			xlabel = "position angle, counter-clockwise from north [deg]"
		}
		a.decorate(angleTicks(from, to), heights, xlabel, "distance [R☉]")
		c.text(left, a.y+a.h+28, p.title, textStyle{size: medium, bold: true, y: text.YCenter})
		c.text(left+width(p.title, medium)+46, a.y+a.h+28, p.sub, textStyle{size: small, colour: grey, y: text.YCenter})
	}
	c.colourBar(left+60, 92, 800, ps[0].scale, ps)
	c.colourBar(left+1080, 92, 800, ps[2].scale, ps)
	c.text(figureWidth-14, 8, foot, textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode([]*table{ps[0].scale.table, ps[2].scale.table}, lineColours)
}

// estimator names the phase-speed estimator for a caption; by, for a panel.
func (r *Report) estimator() string {
	if e := r.Verdict.Summary.Estimator; e != "" {
		return fmt.Sprintf(", phase-speed estimator %q", e)
	}
	return ", estimator of a user's own"
}

func (r *Report) by() string {
	if e := r.Verdict.Summary.Estimator; e != "" {
		return ", estimator " + e
	}
	return ""
}

// angles returns the range of position angle [deg] of the field, 0 to 360 unless it
// leaves a gap; from is in 0..360, to may be beyond.
func (r *Report) angles() (from, to float64) {
	var pas []float64
	for i, in := range r.Verdict.Field {
		if in {
			_, pa := r.Grid.Polar(i%r.Grid.Nx, i/r.Grid.Nx)
			pas = append(pas, pa)
		}
	}
	slices.Sort(pas)
	gap := 0.0
	for i, pa := range pas {
		next := pas[(i+1)%len(pas)]
		if i == len(pas)-1 {
			next += 360
		}
		if next-pa > gap {
			gap, from, to = next-pa, math.Mod(next, 360), pa
		}
	}
	if gap < 5 {
		return 0, 360
	}
	if to <= from {
		to += 360
	}
	return from, to
}

// angleTicks are marks of position angle, of the whole circle every 30 deg.
func angleTicks(from, to float64) []tick {
	ts := linearTicks(from, to, 9)
	if to-from == 360 {
		ts = nil
		for pa := from; pa <= to; pa += 30 {
			ts = append(ts, tick{at: pa})
		}
	}
	for i, t := range ts {
		decimals := 0
		if to-from < 9 {
			decimals = 1
		}
		ts[i].label = number(math.Mod(t.at, 360), decimals)
		if t.at == 360 {
			ts[i].label = "360"
		}
	}
	return ts
}

// flat paints a map against position angle from..to and distance inner..outer.
func (v *view) flat(p panel, from, to, inner, outer float64, w, h int) image.Image {
	m := image.NewRGBA(image.Rect(0, 0, w, h))
	// Rows go by threes: they are much finer than pixels, and a third of the work.
	const rows = 3
	for px := range w {
		sin, cos := math.Sincos((from + (float64(px)+0.5)/float64(w)*(to-from)) * math.Pi / 180)
		for py := 0; py < h; py += rows {
			d := outer - (float64(py)+rows/2.)/float64(h)*(outer-inner)
			x, y := v.g.PixelAt(-d*sin, d*cos)
			ix, iy := int(math.Round(x)), int(math.Round(y))
			k := paper
			if ix >= 0 && iy >= 0 && ix < v.g.Nx && iy < v.g.Ny && v.field[iy*v.g.Nx+ix] {
				k = noValue
				if t := p.scale.norm(float64(p.data[iy*v.g.Nx+ix])); !math.IsNaN(t) && !math.IsInf(t, 0) {
					k = p.scale.colour(t)
				}
			}
			for y := py; y < min(py+rows, h); y++ {
				m.SetRGBA(px, y, k)
			}
		}
	}
	return m
}
