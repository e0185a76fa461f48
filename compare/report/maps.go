package report

import (
	"image"
	"image/color"
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"

	"offplane/compare/stat"
	"offplane/synth/obs"
)

// A scale turns values into colours.
type scale struct {
	lo, hi float64
	log    bool
	table  *table
	label  string
	ticks  []tick
}

// norm returns where v lies on the scale: 0 at lo, 1 at hi, not clamped; NaN for
// what has no place on it.
func (s *scale) norm(v float64) float64 {
	if s.log {
		if !(v > 0) {
			return math.NaN()
		}
		return math.Log(v/s.lo) / math.Log(s.hi/s.lo)
	}
	return (v - s.lo) / (s.hi - s.lo)
}

func (s *scale) colour(norm float64) color.RGBA {
	return s.table.level(int(math.Floor(norm * levels)))
}

// ratioScale is symmetric in the logarithm about one.
func ratioScale(label string) *scale {
	return &scale{lo: 0.5, hi: 2, log: true, table: &diverging, label: label, ticks: ratioTicks}
}

// sharedScale spans what the truth and the bulk of the inferred values need: the
// inferred maps have wild pixels, which saturate.
func sharedScale(label string, log bool, truth, inferred []float64) *scale {
	lo, hi := math.Inf(1), math.Inf(-1)
	add := func(x []float64, p float64) {
		if a := stat.Quantile(p, x); !math.IsNaN(a) {
			lo, hi = min(lo, a), max(hi, stat.Quantile(1-p, x))
		}
	}
	add(truth, 0.005)
	add(inferred, 0.03)
	s := &scale{log: log, table: &viridis, label: label}
	if log {
		if !(lo > 0) || math.IsInf(hi, 0) {
			lo, hi = 1, 10
		}
		s.lo, s.hi = roundLog(lo, false), roundLog(hi, true)
		if s.hi <= s.lo {
			s.hi = roundLog(s.lo*1.5, true)
		}
		s.ticks = logTicks(s.lo, s.hi)
		return s
	}
	if math.IsInf(lo, 0) {
		lo, hi = 0, 1
	}
	if lo > 0 && lo < 0.3*hi {
		lo = 0
	}
	if hi <= lo {
		hi = lo + max(math.Abs(lo), 1)*0.1
	}
	step := niceStep((hi - lo) / 10)
	s.lo, s.hi = math.Floor(lo/step+1e-9)*step, math.Ceil(hi/step-1e-9)*step
	s.ticks = linearTicks(s.lo, s.hi, 6)
	return s
}

// roundLog returns the next of 1, 1.5, 2, 3, 5, 7 times a power of ten, down or up.
func roundLog(v float64, up bool) float64 {
	p := math.Pow(10, math.Floor(math.Log10(v)))
	steps := []float64{1, 1.5, 2, 3, 5, 7, 10}
	if up {
		for _, m := range steps {
			if m*p >= v*(1-1e-9) {
				return m * p
			}
		}
	}
	for _, m := range slices.Backward(steps) {
		if m*p <= v*(1+1e-9) {
			return m * p
		}
	}
	return p
}

// A view lays the sky on a raster with north up and west to the right: the
// smallest box around the field. For an image that is not rolled, one raster cell
// is one pixel, or a block of them if the panel would not hold them all.
type view struct {
	g          *obs.Grid
	field      []bool
	step       float64 // pitch of a cell [solar radii]
	west0      float64 // sky y of the centre of column 0
	north0     float64 // sky z of the centre of the lowest row
	cols, rows int     // cells
	block      int     // cells averaged into one, each way
	zoom       int     // raster pixels a (blocked) cell, each way
	inner      float64 // inner edge of the field [solar radii]
	outer      float64
}

// Largest raster of one map panel [px].
const panelSize, panelHeight = 620, 800

// newView returns nil if the field is empty.
func newView(g *obs.Grid, field []bool) *view {
	v := &view{g: g, field: field, step: g.Step(), block: 1, zoom: 1, inner: math.Inf(1)}
	y0, y1, z0, z1 := math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
	for i, in := range field {
		if !in {
			continue
		}
		y, z := g.Sky(i%g.Nx, i/g.Nx)
		y0, y1, z0, z1 = min(y0, y), max(y1, y), min(z0, z), max(z1, z)
		r := math.Hypot(y, z)
		v.inner, v.outer = min(v.inner, r), max(v.outer, r)
	}
	if y1 < y0 {
		return nil
	}
	v.inner, v.outer = v.inner-v.step/2, v.outer+v.step/2
	const margin = 2
	v.west0, v.north0 = y0-margin*v.step, z0-margin*v.step
	v.cols = int(math.Round((y1-y0)/v.step)) + 1 + 2*margin
	v.rows = int(math.Round((z1-z0)/v.step)) + 1 + 2*margin
	if v.cols > panelSize || v.rows > panelHeight {
		v.block = max((v.cols+panelSize-1)/panelSize, (v.rows+panelHeight-1)/panelHeight)
	} else {
		v.zoom = min(panelSize/v.cols, panelHeight/v.rows)
	}
	return v
}

// size returns the raster's width and height [px].
func (v *view) size() (w, h int) {
	return (v.cols + v.block - 1) / v.block * v.zoom, (v.rows + v.block - 1) / v.block * v.zoom
}

// pixel returns the raster index of the image pixel under cell (col, row), -1
// outside the image.
func (v *view) pixel(col, row int) int {
	px, py := v.g.PixelAt(v.west0+float64(col)*v.step, v.north0+float64(row)*v.step)
	ix, iy := int(math.Round(px)), int(math.Round(py))
	if ix < 0 || iy < 0 || ix >= v.g.Nx || iy >= v.g.Ny {
		return -1
	}
	return iy*v.g.Nx + ix
}

// place returns the raster coordinates [px], y upward from the lower edge, of a
// point of the sky [solar radii].
func (v *view) place(west, north float64) (x, y float64) {
	k := float64(v.zoom) / float64(v.block) / v.step
	return (west - v.west0 + v.step/2) * k, (north - v.north0 + v.step/2) * k
}

// raster paints a map. In blocks, the mean place on the scale counts, of angles on the
// circle.
func (v *view) raster(data []float32, s *scale) *image.RGBA {
	w, h := v.size()
	m := image.NewRGBA(image.Rect(0, 0, w, h))
	for by := 0; by*v.block < v.rows; by++ {
		for bx := 0; bx*v.block < v.cols; bx++ {
			sum, n, in := 0.0, 0, false
			var turn complex128
			for row := by * v.block; row < min(v.rows, (by+1)*v.block); row++ {
				for col := bx * v.block; col < min(v.cols, (bx+1)*v.block); col++ {
					i := v.pixel(col, row)
					if i < 0 || !v.field[i] {
						continue
					}
					in = true
					if t := s.norm(float64(data[i])); !math.IsNaN(t) && !math.IsInf(float64(data[i]), 0) {
						sum += min(max(t, 0), 1)
						turn += cmplx.Rect(1, 2*math.Pi*t)
						n++
					}
				}
			}
			c := paper
			switch {
			case n > 0 && s.table == &cyclic:
				_, at := math.Modf(cmplx.Phase(turn)/(2*math.Pi) + 1)
				c = s.colour(at)
			case n > 0:
				c = s.colour(sum / float64(n))
			case in:
				c = noValue
			default:
				half := float64(v.block-1) / 2
				if math.Hypot(v.west0+(float64(bx*v.block)+half)*v.step, v.north0+(float64(by*v.block)+half)*v.step) < v.inner+v.step/2 {
					c = occulted
				}
			}
			for y := by * v.zoom; y < (by+1)*v.zoom; y++ {
				for x := bx * v.zoom; x < (bx+1)*v.zoom; x++ {
					m.SetRGBA(x, h-1-y, c)
				}
			}
		}
	}
	return m
}

// A panel is one map of a figure.
type panel struct {
	title, sub string
	data       []float32
	scale      *scale // neighbours with the same scale share one colour bar
}

// A mapLayout says where the rasters and colour bars of a figure are [px, y up]:
// tests look there.
type mapLayout struct {
	width, height int
	y             int   // lower edge of every raster
	x             []int // left edge of each raster
	barY          int
	bars          [][2]int // left edge and width of each panel's colour bar
}

const (
	mapsTop    = 150
	mapsBottom = 270
	mapsLeft   = 165
	mapsRight  = 125
	barHeight  = 26
)

func layoutMaps(v *view, ps []panel) mapLayout {
	w, h := v.size()
	l := mapLayout{height: mapsTop + h + mapsBottom, y: mapsBottom, barY: 92}
	gap := 60
	column := max(w, 430) // room for the title and the bar
	left := mapsLeft
	l.width = mapsLeft + len(ps)*column + (len(ps)-1)*gap + mapsRight
	for i := range ps {
		l.x = append(l.x, left+i*(column+gap)+(column-w)/2)
	}
	for i := 0; i < len(ps); {
		j := i
		for j+1 < len(ps) && ps[j+1].scale == ps[i].scale {
			j++
		}
		a, b := left+i*(column+gap)+20, left+j*(column+gap)+column-20
		for ; i <= j; i++ {
			l.bars = append(l.bars, [2]int{a, b - a})
		}
	}
	return l
}

// mapFigure draws panels side by side with shared axes.
func mapFigure(f Format, v *view, ps []panel, foot string) []byte {
	l := layoutMaps(v, ps)
	c := newCanvas(f, l.width, l.height)
	w, h := v.size()
	fw, fh, y := float64(w), float64(h), float64(l.y)
	for i, p := range ps {
		x := float64(l.x[i])
		c.blit(l.x[i], l.y, v.raster(p.data, p.scale))
		box := c.clip(x, y, fw, fh)
		circle := func(r float64, s stroke) {
			pts := make([]vg.Point, 721)
			for k := range pts {
				sin, cos := math.Sincos(float64(k) * math.Pi / 360)
				px, py := v.place(r*cos, r*sin)
				pts[k] = pt(x+px, y+py)
			}
			box.StrokeLines(s.style(), box.ClipLinesXY(pts)...)
		}
		circle(v.inner, stroke{grey, 1.5, []float64{6, 5}})
		circle(1, stroke{ink, 2.5, nil})
		c.frame(x, y, fw, fh)
		c.mapAxes(v, x, y, fw, fh, i == 0, i == len(ps)-1)
		middle := x + fw/2
		c.text(middle, y+fh+118, p.title, textStyle{size: medium + 2, bold: true, x: text.XCenter, y: text.YCenter})
		c.text(middle, y+fh+84, p.sub, textStyle{size: small - 1, colour: grey, x: text.XCenter, y: text.YCenter})
		if i == 0 || ps[i-1].scale != p.scale {
			c.colourBar(l.bars[i][0], l.barY, l.bars[i][1], p.scale, ps)
		}
	}
	c.compass(v, float64(l.x[0]), y, fw, fh)
	c.text(float64(l.width)-14, 10, foot, textStyle{size: small - 3, colour: grey, x: text.XRight, y: text.YBottom})
	var tables []*table
	for _, p := range ps {
		tables = append(tables, p.scale.table)
	}
	return c.encode(tables, []color.RGBA{grey})
}

// mapAxes marks arcsec below and left, solar radii above and right.
func (c *canvas) mapAxes(v *view, x, y, w, h float64, first, last bool) {
	perRadius := math.Atan(1/v.g.Distance) / obs.Arcsec // arcsec a solar radius at disc centre
	axis := func(unit float64, horizontal bool, draw func(at float64, label string)) {
		start, length := v.west0-v.step/2, w
		if !horizontal {
			start, length = v.north0-v.step/2, h
		}
		span := length / float64(v.zoom) * float64(v.block) * v.step
		n := int(min(max(length/95, 2), 6))
		ts := linearTicks(start*unit, (start+span)*unit, n)
		for len(ts) < 2 && n < 6 { // a round step may leave one only
			n++
			ts = linearTicks(start*unit, (start+span)*unit, n)
		}
		for _, t := range ts {
			at := (t.at/unit - start) / span * length
			draw(at, t.label)
		}
	}
	mark := stroke{ink, 2, nil}
	axis(perRadius, true, func(at float64, label string) {
		c.line(mark, pt(x+at, y), pt(x+at, y-9))
		c.text(x+at, y-13, label, textStyle{size: small, x: text.XCenter, y: text.YTop})
	})
	axis(1, true, func(at float64, label string) {
		c.line(mark, pt(x+at, y+h), pt(x+at, y+h+9))
		c.text(x+at, y+h+12, label, textStyle{size: small - 2, colour: grey, x: text.XCenter, y: text.YBottom})
	})
	c.text(x+w/2, y-48, "solar X [arcsec]", textStyle{size: small, x: text.XCenter, y: text.YTop})
	left := 0.0
	axis(perRadius, false, func(at float64, label string) {
		c.line(mark, pt(x, y+at), pt(x-9, y+at))
		if first {
			left = max(left, width(label, small))
			c.text(x-14, y+at, label, textStyle{size: small, x: text.XRight, y: text.YCenter})
		}
	})
	if first {
		c.text(x-30-left, y+h/2, "solar Y [arcsec]", textStyle{size: small, turned: true, x: text.XCenter, y: text.YBottom})
	}
	right := 0.0
	axis(1, false, func(at float64, label string) {
		c.line(mark, pt(x+w, y+at), pt(x+w+9, y+at))
		if last {
			right = max(right, width(label, small-2))
			c.text(x+w+14, y+at, label, textStyle{size: small - 2, colour: grey, x: text.XLeft, y: text.YCenter})
		}
	})
	if last {
		c.text(x+w+22+right, y+h/2, "solar radii", textStyle{size: small - 2, colour: grey, turned: true, x: text.XCenter, y: text.YTop})
	}
}

// colourBar draws the bar of s; its ends point where a map of the figure goes
// beyond the scale.
func (c *canvas) colourBar(x, y, w int, s *scale, ps []panel) {
	m := image.NewRGBA(image.Rect(0, 0, w, barHeight))
	for i := range w {
		k := s.colour((float64(i) + 0.5) / float64(w))
		for j := range barHeight {
			m.SetRGBA(i, j, k)
		}
	}
	c.blit(x, y, m)
	below, above := false, false
	for _, p := range ps {
		if p.scale != s {
			continue
		}
		for _, v := range p.data {
			t := s.norm(float64(v))
			below, above = below || t < -1e-6, above || t > 1+1e-6
		}
	}
	fx, fy, fw, fh := float64(x), float64(y), float64(w), float64(barHeight)
	outline := stroke{ink, 1.5, nil}
	arrow := func(at, tip float64, k color.RGBA) {
		c.FillPolygon(k, []vg.Point{pt(at, fy), pt(at, fy+fh), pt(tip, fy+fh/2)})
		c.line(outline, pt(at, fy), pt(tip, fy+fh/2), pt(at, fy+fh))
	}
	c.line(outline, pt(fx, fy), pt(fx+fw, fy))
	c.line(outline, pt(fx, fy+fh), pt(fx+fw, fy+fh))
	if below {
		arrow(fx, fx-18, s.table[0])
	} else {
		c.line(outline, pt(fx, fy), pt(fx, fy+fh))
	}
	if above {
		arrow(fx+fw, fx+fw+18, s.table[255])
	} else {
		c.line(outline, pt(fx+fw, fy), pt(fx+fw, fy+fh))
	}
	end := math.Inf(-1)
	ticks := s.ticks
	if s.table == &diverging && s.log && w < 430 {
		ticks = sparseTicks
	}
	for _, t := range ticks {
		at := fx + s.norm(t.at)*fw
		long := 5.0
		if t.label != "" {
			long = 9
		}
		c.line(stroke{ink, 2, nil}, pt(at, fy), pt(at, fy-long))
		if half := width(t.label, small) / 2; t.label != "" && at-half > end+8 {
			c.text(at, fy-12, t.label, textStyle{size: small, x: text.XCenter, y: text.YTop})
			end = at + half
		}
	}
	c.text(fx+fw/2, fy+fh+8, s.label, textStyle{size: small, x: text.XCenter, y: text.YBottom})
}

// compass draws north and east where the first panel has room: inside the
// occulted disc, in a corner without field, or above the frame's left corner.
func (c *canvas) compass(v *view, x, y, w, h float64) {
	const long = 58.0
	box := func(cx, cy float64) bool { // free of field?
		for dx := -45.0; dx <= 95; dx += 5 {
			for dy := -30.0; dy <= 105; dy += 5 {
				// The arrow points east, to the left.
				rx, ry := cx-dx, cy+dy
				if rx < 4 || ry < 4 || rx > w-4 || ry > h-4 {
					return false
				}
				k := float64(v.zoom) / float64(v.block)
				i := v.pixel(min(int(rx/k), v.cols-1), min(int(ry/k), v.rows-1))
				if i >= 0 && v.field[i] {
					return false
				}
			}
		}
		return true
	}
	px, py := v.place(0, 0)
	for _, at := range [][2]float64{{px + 25, py - 35}, {w - 50, 40}, {110, 40}, {w - 50, h - 115}, {110, h - 115}, {-30, h + 30}} {
		if at[1] < h && !box(at[0], at[1]) {
			continue
		}
		cx, cy := x+at[0], y+at[1]
		s := stroke{ink, 2.5, nil}
		c.line(s, pt(cx, cy), pt(cx, cy+long))
		c.line(s, pt(cx, cy), pt(cx-long, cy))
		c.FillPolygon(ink, []vg.Point{pt(cx-7, cy+long), pt(cx+7, cy+long), pt(cx, cy+long+14)})
		c.FillPolygon(ink, []vg.Point{pt(cx-long, cy-7), pt(cx-long, cy+7), pt(cx-long-14, cy)})
		c.text(cx, cy+long+17, "N", textStyle{size: small, bold: true, x: text.XCenter, y: text.YBottom})
		c.text(cx-long-18, cy, "E", textStyle{size: small, bold: true, x: text.XRight, y: text.YCenter})
		return
	}
}
