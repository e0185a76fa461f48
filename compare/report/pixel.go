package report

import (
	"fmt"
	"image"
	"image/color"
	"math"
	"path/filepath"
	"strings"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"

	"offplane/compare/explain"
)

// A Format is that of a figure's file.
type Format int

// Formats of figures.
const (
	PNG Format = iota
	SVG
)

// FormatOf returns the format that the name of a file asks for.
func FormatOf(path string) (Format, error) {
	switch strings.ToLower(filepath.Ext(path)) {
	case ".png":
		return PNG, nil
	case ".svg":
		return SVG, nil
	}
	return 0, fmt.Errorf("%s: a figure's name ends in .png or .svg", path)
}

// Where the panels of a pixel's figure are [px].
const (
	pixelHeight = 2140
	pixelTop    = 1940.0 // upper edge of the panels
	pixelBase   = 800.0  // lower edge of the lowest
)

// PixelFigure draws what explain says of a pixel: along the line of sight emission, wave
// power, density and field; the waves on the track and their lags; the causes of the bias.
func PixelFigure(v *explain.Pixel, f Format) []byte {
	c := newCanvas(f, figureWidth, pixelHeight)
	at := &v.Place
	c.text(60, pixelHeight-48, fmt.Sprintf("%s, pixel (%d, %d): X %s″, Y %s″, %.3f R☉, position angle %.1f°", v.Scenario, at.X, at.Y,
		number(float64(at.SolarX), 1), number(float64(at.SolarY), 1), at.Height, at.PA), textStyle{size: medium + 2, bold: true, y: text.YCenter})
	c.text(60, pixelHeight-96, pixelSummary(v), textStyle{size: small, y: text.YCenter})
	c.sightPanels(v)
	bar := c.timeDistance(v)
	c.lagPanel(v)
	c.causePanel(v)
	c.text(figureWidth-14, 8, fmt.Sprintf("estimator %s; the truth is that in the plane of the sky unless said otherwise", v.Estimators[0].Name),
		textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	return c.encode([]*table{bar}, lineColours)
}

func pixelSummary(v *explain.Pixel) string {
	if !v.Valid {
		var why []string
		for _, f := range v.Flags {
			if f.Blocking {
				why = append(why, f.About)
			}
		}
		return strings.Join(why, "; ")
	}
	return fmt.Sprintf("inferred B %.3g G, true component in the plane of the sky %.3g G: ratio %.3f", v.Inferred.Field, v.Truth.FieldSky, v.Ratios.FieldSky)
}

// floats are numbers for drawing.
func floats(xs []explain.Number) []float64 {
	out := make([]float64, len(xs))
	for i, x := range xs {
		out[i] = float64(x)
	}
	return out
}

// span returns the least and greatest finite value; 0 and 1 of none.
func span(xs ...[]float64) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, x := range xs {
		for _, v := range x {
			if !math.IsNaN(v) && !math.IsInf(v, 0) {
				lo, hi = min(lo, v), max(hi, v)
			}
		}
	}
	if lo > hi {
		return 0, 1
	}
	return lo, hi
}

// sightPanels draws the line of sight as far as light or waves count.
func (c *canvas) sightPanels(v *explain.Pixel) {
	const left, wide, high, gap = 200.0, 880.0, 346.0, 51.0
	s := &v.Curves.Sight
	x, light, light2, waves := floats(s.X), floats(s.Emission), floats(s.Emission2), floats(s.Wave)
	reach := reachOf(x, light, waves)
	xt := linearTicks(-reach, reach, 6)
	panel := func(i int) *axes {
		return &axes{c: c, x: left, y: pixelBase + float64(2-i)*(high+gap), w: wide, h: high, xlo: -reach, xhi: reach}
	}
	near := func(a *axes) {
		c.FillPolygon(color.NRGBA{grey.R, grey.G, grey.B, 0x20}, []vg.Point{pt(a.px(-0.1), a.y), pt(a.px(0.1), a.y), pt(a.px(0.1), a.y+a.h), pt(a.px(-0.1), a.y+a.h)})
		c.line(stroke{grey, 1.5, []float64{6, 5}}, pt(a.px(0), a.y), pt(a.px(0), a.y+a.h))
	}
	marked := len(x) == 1

	a := panel(0)
	_, top := span(light, light2, waves)
	a.yhi = top * 1.08
	yt := linearTicks(0, a.yhi, 4)
	near(a)
	a.line(stroke{blue, 4, nil}, x, light, marked)
	a.line(stroke{orange, 3, []float64{14, 8}}, x, light2, marked)
	a.line(stroke{vermillion, 4, nil}, x, waves, marked)
	a.decorate(xt, yt, "", "share of the whole [1/R☉]")
	c.legend(left, pixelTop+28, []key{{label: "1074.7 nm", stroke: stroke{blue, 4, nil}}, {label: "1079.8 nm", stroke: stroke{orange, 3, []float64{14, 8}}}, {label: "wave power", stroke: stroke{vermillion, 4, nil}}})

	inside := func(ys []float64) []float64 {
		out := make([]float64, len(ys))
		for i, y := range ys {
			if out[i] = y; math.Abs(x[i]) > reach {
				out[i] = math.NaN()
			}
		}
		return out
	}
	a = panel(1)
	ne := floats(s.Ne)
	lo, hi := span(inside(ne), []float64{float64(v.Inferred.Ne)})
	a.ylog, a.ylo, a.yhi = true, roundLog(lo*0.95, false), roundLog(hi*1.05, true)
	near(a)
	a.line(stroke{blue, 4, nil}, x, ne, marked)
	level(a, v.Inferred.Ne)
	a.decorate(xt, logTicks(a.ylo, a.yhi), "", "electron density [cm⁻³]")

	a = panel(2)
	b := floats(s.Field)
	_, top = span(inside(b), []float64{float64(v.Inferred.Field)})
	a.yhi = top * 1.1
	near(a)
	a.line(stroke{blue, 4, nil}, x, b, marked)
	level(a, v.Inferred.Field)
	a.decorate(xt, linearTicks(0, a.yhi, 4), "distance from the plane of the sky, toward the observer [R☉]", "B in plane of sky [G]")
	c.legend(left+20, pixelBase+high+25, []key{{label: "true", stroke: stroke{blue, 4, nil}}, {label: "inferred", stroke: stroke{ink, 3, []float64{14, 8}}}})
}

// level draws the inferred value across a panel.
func level(a *axes, v explain.Number) {
	a.line(stroke{ink, 3, []float64{14, 8}}, []float64{a.xlo, a.xhi}, []float64{float64(v), float64(v)}, false)
}

// reachOf returns how far from the plane to draw: within it lies all but half a per cent
// of light and of waves.
func reachOf(x, light, waves []float64) float64 {
	reach := 0.2
	for _, y := range [][]float64{light, waves} {
		total, _ := trapezoid(x, y, math.Inf(1))
		for _, at := range x {
			if in, _ := trapezoid(x, y, math.Abs(at)); in < 0.995*total {
				reach = max(reach, math.Abs(at)*1.05)
			}
		}
	}
	return reach
}

// trapezoid returns the integral of y at |x| <= reach.
func trapezoid(x, y []float64, reach float64) (sum float64, n int) {
	for i := 1; i < len(x); i++ {
		if math.Abs(x[i]) <= reach && math.Abs(x[i-1]) <= reach {
			sum += (y[i] + y[i-1]) / 2 * (x[i] - x[i-1])
			n++
		}
	}
	return sum, n
}

const (
	waveLeft = 1340.0
	waveWide = 770.0
)

// timeDistance draws the middle of the observation along the track and returns its
// colour table.
func (c *canvas) timeDistance(v *explain.Pixel) *table {
	const y, high, barY = 1450.0, 490.0, 1300
	t := &v.Curves.TimeDistance
	a := &axes{c: c, x: waveLeft, y: y, w: waveWide, h: high, xhi: 1, ylo: -1, yhi: 1}
	c.text(waveLeft, pixelTop+28, "Doppler shift along the track (dotted: 250, 1000 km/s)", textStyle{size: small, y: text.YCenter})
	if len(t.Waves) == 0 {
		c.missing(a, "no track")
		return &diverging
	}
	time, at := floats(t.Time), floats(t.Distance)
	const shown = 40 * 60.0 // [s]
	from, to := 0, len(time)
	if cadence := time[1] - time[0]; float64(to)*cadence > shown {
		n := int(shown / cadence)
		from = (to - n) / 2
		to = from + n
	}
	var all []float32
	_, peak := 0.0, 0.0
	for _, r := range t.Waves {
		for _, x := range r[from:to] {
			peak = max(peak, math.Abs(float64(x)))
			all = append(all, float32(x))
		}
	}
	peak = max(peak, 1e-6)
	step := niceStep(peak / 4)
	peak = math.Ceil(peak/step) * step
	s := &scale{lo: -peak, hi: peak, table: &diverging, label: "Doppler shift [km/s]: red away, blue toward", ticks: linearTicks(-peak, peak, 6)}
	m := image.NewRGBA(image.Rect(0, 0, waveWide, high))
	for px := range int(waveWide) {
		for py := range int(high) {
			i := min(from+px*(to-from)/int(waveWide), to-1)
			k := (int(high) - 1 - py) * len(at) / int(high)
			m.SetRGBA(px, py, s.colour(s.norm(float64(t.Waves[k][i]))))
		}
	}
	c.blit(int(waveLeft), int(y), m)
	half := 0.5
	if len(at) > 1 {
		half = (at[1] - at[0]) / 2
	}
	a.xlo, a.xhi, a.ylo, a.yhi = time[from]/60, (time[to-1]+time[1]-time[0])/60, at[0]-half, at[len(at)-1]+half
	middle := (a.xlo + a.xhi) / 2
	slope := func(speed explain.Number, at float64, k stroke) {
		f := 1e3 / float64(speed) / 60 // min/Mm
		c.cased(a, k, []float64{at + a.ylo*f, at + a.yhi*f}, []float64{a.ylo, a.yhi})
	}
	fan := a.xlo + 0.12*(a.xhi-a.xlo) // lines of constant speed, apart from the fit
	for _, speed := range []explain.Number{250, 1000} {
		f := 1e3 / float64(speed) / 60
		c.cased(a, stroke{ink, 2.5, []float64{3, 6}}, []float64{fan, fan + (a.yhi-a.ylo)*f}, []float64{a.ylo, a.yhi})
		c.label(a.px(fan+(a.yhi-a.ylo)*f)+8, y+high-22, fmt.Sprint(speed))
	}
	slope(v.Inferred.Speed, middle, inferredLine)
	slope(v.Truth.SpeedWave, middle, trueLine)
	a.decorate(linearTicks(a.xlo, a.xhi, 6), linearTicks(a.ylo, a.yhi, 5), "time [min]", "distance along the track [Mm]")
	c.colourBar(int(waveLeft)+60, barY, int(waveWide)-120, s, []panel{{data: all, scale: s}})
	return s.table
}

var (
	inferredLine = stroke{ink, 4, nil}
	trueLine     = stroke{vermillion, 4, []float64{14, 8}}
)

// cased draws a line with a white rim, to be seen on a map.
func (c *canvas) cased(a *axes, s stroke, x, y []float64) {
	a.line(stroke{paper, s.width + 4, nil}, x, y, false)
	a.line(s, x, y, false)
}

// label writes on a map.
func (c *canvas) label(x, y float64, s string) {
	c.FillPolygon(paper, box(x-3, y-13, width(s, small-4)+6, 26))
	c.text(x, y, s, textStyle{size: small - 4, x: text.XLeft, y: text.YCenter})
}

// missing says inside a panel why it is empty.
func (c *canvas) missing(a *axes, why string) {
	c.frame(a.x, a.y, a.w, a.h)
	c.text(a.x+a.w/2, a.y+a.h/2, why, textStyle{size: small, colour: grey, x: text.XCenter, y: text.YCenter})
}

// lagPanel draws the lags and the line through them, of the pair fit the share of the
// power that it explains.
func (c *canvas) lagPanel(v *explain.Pixel) {
	const high = 330.0
	a := &axes{c: c, x: waveLeft, y: pixelBase, w: waveWide, h: high}
	keys := []key{{label: fmt.Sprintf("inferred %.0f km/s", v.Inferred.Speed), stroke: inferredLine}, {label: fmt.Sprintf("true (waves) %.0f km/s", v.Truth.SpeedWave), stroke: trueLine}}
	if math.IsNaN(float64(v.Inferred.Speed)) {
		keys = keys[1:]
	}
	c.legend(waveLeft, pixelBase+high+28, keys)
	if len(v.Curves.Lags) == 0 {
		c.missing(a, "no track")
		return
	}
	l := &v.Curves.Lags[0]
	if len(l.Explained) > 0 {
		x, y := floats(l.Speeds), floats(l.Explained)
		a.xlo, a.xhi, a.ylo, a.yhi = 50, min(4*float64(v.Truth.SpeedWave), 3000), 0, 1
		a.line(stroke{blue, 4, nil}, x, y, false)
		for _, s := range []struct {
			at explain.Number
			k  stroke
		}{{v.Inferred.Speed, inferredLine}, {v.Truth.SpeedWave, trueLine}} {
			a.line(s.k, []float64{float64(s.at), float64(s.at)}, []float64{0, 1}, false)
		}
		a.decorate(linearTicks(a.xlo, a.xhi, 6), linearTicks(0, 1, 4), "phase speed [km/s]", "share explained")
		return
	}
	x, y := floats(l.Distance), floats(l.Lag)
	if len(x) < 2 {
		c.missing(a, "no lags")
		return
	}
	a.xlo, a.xhi = span(x)
	fit := func(at float64) float64 { return float64(l.Slope)*at + float64(l.Intercept) }
	truth := func(at float64) float64 { return 1e3 / float64(v.Truth.SpeedWave) * at }
	ends := []float64{a.xlo, a.xhi}
	lines := [][]float64{{fit(a.xlo), fit(a.xhi)}, {truth(a.xlo), truth(a.xhi)}}
	a.ylo, a.yhi = span(y, lines[0], lines[1])
	room := max(0.08*(a.yhi-a.ylo), 1)
	a.ylo, a.yhi = a.ylo-room, a.yhi+room
	wide := 0.03 * (a.xhi - a.xlo)
	a.xlo, a.xhi = a.xlo-wide, a.xhi+wide
	yt := linearTicks(a.ylo, a.yhi, 5)
	a.grid(yt)
	box := a.box()
	for i := range x {
		box.DrawGlyph(vgdraw.GlyphStyle{Color: blue, Radius: 7, Shape: vgdraw.CircleGlyph{}}, pt(a.px(x[i]), a.py(y[i])))
	}
	a.line(inferredLine, ends, lines[0], false)
	a.line(trueLine, ends, lines[1], false)
	a.decorate(linearTicks(a.xlo, a.xhi, 6), yt, "distance along the track, outward [Mm]", "lag [s]")
}

// causePanel draws the causes as factors of B/B_SKY and their product.
func (c *canvas) causePanel(v *explain.Pixel) {
	const left, wide, top, bottom = 900.0, 1180.0, 640.0, 130.0
	type row struct {
		name string
		ln   float64
		k    color.RGBA
	}
	var rows []row
	worst := math.Log(1.25)
	for _, q := range v.Causes {
		x := float64(q.Ln)
		if math.IsNaN(x) || math.Abs(x) < 0.0005 {
			continue
		}
		k := blue
		if x > 0 {
			k = vermillion
		}
		rows = append(rows, row{q.Name, x, k})
	}
	if v.Valid {
		rows = append(rows, row{"all together: B / B_SKY", float64(v.Identity.Field), grey})
	}
	for _, r := range rows {
		worst = max(worst, math.Abs(r.ln))
	}
	reach := math.Exp(worst * 1.18)
	a := &axes{c: c, x: left, y: bottom, w: wide, h: top - bottom, xlo: -math.Log(reach), xhi: math.Log(reach)}
	c.text(60, top+40, "causes of the bias of B, as factors", textStyle{size: medium, bold: true, y: text.YCenter})
	high := min(a.h/float64(max(len(rows), 1)), 70)
	for i, r := range rows {
		y := top - (float64(i)+0.5)*high
		x := a.px(r.ln)
		c.FillPolygon(r.k, []vg.Point{pt(a.px(0), y-0.3*high), pt(x, y-0.3*high), pt(x, y+0.3*high), pt(a.px(0), y+0.3*high)})
		c.text(left-24, y, r.name, textStyle{size: small, x: text.XRight, y: text.YCenter})
		side, off := text.XLeft, 10.0
		if r.ln < 0 {
			side, off = text.XRight, -10
		}
		c.text(x+off, y, number(math.Exp(r.ln), 3), textStyle{size: small, x: side, y: text.YCenter})
	}
	c.line(stroke{ink, 2, nil}, pt(a.px(0), bottom), pt(a.px(0), top))
	var xt []tick
	for _, f := range []float64{0.1, 0.2, 0.3, 0.5, 0.7, 0.8, 0.9, 1, 1.1, 1.25, 1.5, 2, 3, 5, 10} {
		if math.Abs(math.Log(f)) < a.xhi {
			xt = append(xt, tick{math.Log(f), fmt.Sprint(f)})
		}
	}
	a.decorate(xt, nil, "factor", "")
}
