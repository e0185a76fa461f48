package report

import (
	"bytes"
	"cmp"
	"image"
	"image/color"
	"image/draw"
	"image/png"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"
	"sync"

	"codeberg.org/go-fonts/dejavu/dejavusans"
	"codeberg.org/go-fonts/dejavu/dejavusansbold"
	xfont "golang.org/x/image/font"
	"golang.org/x/image/font/opentype"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	vgdraw "gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"

	"offplane/scenarios/units"
)

// fonts returns the DejaVu faces: the ones that have superscripts and the solar
// symbol, without which "10⁸" would print as "10".
var fonts = sync.OnceValue(func() text.Handler {
	face := func(ttf []byte, weight xfont.Weight) font.Face {
		f, err := opentype.Parse(ttf)
		if err != nil {
			panic("report: embedded font: " + err.Error())
		}
		return font.Face{Font: font.Font{Typeface: "DejaVu", Variant: "Sans", Weight: weight}, Face: f}
	}
	return text.Plain{Fonts: font.NewCache(font.Collection{
		face(dejavusans.TTF, xfont.WeightNormal), face(dejavusansbold.TTF, xfont.WeightBold)})}
})

// Sizes of figures and of their type [px]. Figures are shown at half size.
const (
	figureWidth = 2200
	small       = 24.0
	medium      = 27.0
)

// A canvas draws in pixels with y upward from the bottom; one point is one pixel,
// so rasters land on whole pixels.
type canvas struct {
	w, h int
	img  *vgimg.Canvas // nil: svg
	svg  *vector
	vgdraw.Canvas
}

// newCanvas returns a white canvas for a figure of that format.
func newCanvas(f Format, w, h int) *canvas {
	if f == PNG {
		img := vgimg.NewWith(vgimg.UseWH(vg.Length(w), vg.Length(h)), vgimg.UseDPI(72))
		return &canvas{w: w, h: h, img: img, Canvas: vgdraw.New(img)}
	}
	svg := newVector(w, h)
	c := &canvas{w: w, h: h, svg: svg, Canvas: vgdraw.New(svg)}
	c.FillPolygon(paper, box(0, 0, float64(w), float64(h)))
	return c
}

// encode returns the figure in its format; see png.
func (c *canvas) encode(tables []*table, strokes []color.RGBA) []byte {
	if c.svg != nil {
		return c.svg.encode()
	}
	return c.png(tables, strokes)
}

// A textStyle says how a string hangs on its point.
type textStyle struct {
	size   float64
	colour color.Color // nil: ink
	bold   bool
	turned bool // reads upward
	x      text.XAlignment
	y      text.YAlignment
}

func (c *canvas) text(x, y float64, s string, st textStyle) {
	sty := text.Style{Color: ink, Font: font.Font{Typeface: "DejaVu", Variant: "Sans", Size: vg.Length(st.size)}, XAlign: st.x, YAlign: st.y, Handler: fonts()}
	if st.colour != nil {
		sty.Color = st.colour
	}
	if st.bold {
		sty.Font.Weight = xfont.WeightBold
	}
	if st.turned {
		sty.Rotation = math.Pi / 2
	}
	c.FillText(sty, vg.Point{X: vg.Length(x), Y: vg.Length(y)}, s)
}

// width returns the width of s in px.
func width(s string, size float64) float64 {
	w, _, _ := fonts().Box(s, font.Font{Typeface: "DejaVu", Variant: "Sans", Size: vg.Length(size)})
	return float64(w)
}

// A stroke is a line style.
type stroke struct {
	colour color.Color
	width  float64
	dashes []float64
}

func (s stroke) style() vgdraw.LineStyle {
	l := vgdraw.LineStyle{Color: s.colour, Width: vg.Length(s.width)}
	for _, d := range s.dashes {
		l.Dashes = append(l.Dashes, vg.Length(d))
	}
	return l
}

// thin is the stroke of what goes along with s.
func (s stroke) thin() stroke { return stroke{s.colour, 1.8, s.dashes} }

func (c *canvas) line(s stroke, pts ...vg.Point) { c.StrokeLines(s.style(), pts) }

func pt(x, y float64) vg.Point { return vg.Point{X: vg.Length(x), Y: vg.Length(y)} }

// clip returns the part of the canvas with that lower left corner and size.
func (c *canvas) clip(x, y, w, h float64) *vgdraw.Canvas {
	return &vgdraw.Canvas{Canvas: c.Canvas.Canvas, Rectangle: vg.Rectangle{Min: pt(x, y), Max: pt(x+w, y+h)}}
}

func (c *canvas) frame(x, y, w, h float64) {
	c.line(stroke{ink, 2, nil}, pt(x, y), pt(x+w, y), pt(x+w, y+h), pt(x, y+h), pt(x, y-1))
}

// blit copies a raster with its lower left corner at (x, y).
func (c *canvas) blit(x, y int, m image.Image) {
	b := m.Bounds()
	if c.svg != nil {
		c.DrawImage(vg.Rectangle{Min: pt(float64(x), float64(y)), Max: pt(float64(x+b.Dx()), float64(y+b.Dy()))}, m)
		return
	}
	draw.Draw(c.img.Image(), image.Rect(x, c.h-y-b.Dy(), x+b.Dx(), c.h-y), m, b.Min, draw.Src)
}

// png encodes the figure with a palette: the colours of strokes and tables, which
// stay as they are, then the most frequent others; rarer ones, at the rims of type and
// lines, become the nearest of these.
func (c *canvas) png(tables []*table, strokes []color.RGBA) []byte {
	m := c.img.Image().(*image.RGBA)
	at := func(i int) color.RGBA { return color.RGBA{m.Pix[i], m.Pix[i+1], m.Pix[i+2], m.Pix[i+3]} }
	count := map[color.RGBA]int{}
	for i := 0; i < len(m.Pix); {
		from, k := i, at(i)
		for i < len(m.Pix) && at(i) == k {
			i += 4
		}
		count[k] += (i - from) / 4
	}
	var palette []color.RGBA
	index := map[color.RGBA]uint8{}
	add := func(k color.RGBA) {
		if _, have := index[k]; !have && len(palette) < 256 {
			index[k] = uint8(len(palette))
			palette = append(palette, k)
		}
	}
	for _, k := range []color.RGBA{paper, ink, noValue, occulted} {
		add(k)
	}
	for _, k := range strokes {
		add(k)
	}
	for _, t := range tables {
		for k := range levels {
			add(t.level(k))
		}
	}
	common := slices.SortedFunc(maps.Keys(count), func(a, b color.RGBA) int {
		return cmp.Or(cmp.Compare(count[b], count[a]), cmp.Compare(hue(a), hue(b)))
	})
	for _, k := range common {
		add(k)
	}
	for _, k := range common {
		if _, have := index[k]; have {
			continue
		}
		best, nearest := 0, math.MaxInt
		for j, p := range palette {
			r, g, b := int(k.R)-int(p.R), int(k.G)-int(p.G), int(k.B)-int(p.B)
			if d := r*r + g*g + b*b; d < nearest {
				best, nearest = j, d
			}
		}
		index[k] = uint8(best)
	}
	p := image.NewPaletted(m.Bounds(), nil)
	for _, k := range palette {
		p.Palette = append(p.Palette, k)
	}
	last, n := at(0), index[at(0)]
	for i := range p.Pix {
		if k := at(4 * i); k != last {
			last, n = k, index[k]
		}
		p.Pix[i] = n
	}
	var b bytes.Buffer
	if err := png.Encode(&b, p); err != nil {
		panic("report: png: " + err.Error()) // a buffer takes all; sizes are ours
	}
	return b.Bytes()
}

// hue numbers a colour.
func hue(k color.RGBA) int { return int(k.R)<<16 | int(k.G)<<8 | int(k.B) }

// A tick is one mark of an axis or a colour bar.
type tick struct {
	at    float64
	label string // empty: minor
}

// linearTicks returns round ticks within lo..hi, at most n or so.
func linearTicks(lo, hi float64, n int) []tick {
	step := niceStep((hi - lo) / float64(n))
	if !(step > 0) {
		return nil
	}
	digits := max(0, -int(math.Floor(math.Log10(step)+1e-9)))
	var ts []tick
	for k := math.Ceil(lo/step - 1e-6); k*step <= hi+step*1e-6; k++ {
		ts = append(ts, tick{k * step, number(k*step, digits)})
	}
	return ts
}

// niceStep returns the smallest of 1, 2, 5 times a power of ten that is not below x.
func niceStep(x float64) float64 {
	if !(x > 0) || math.IsInf(x, 0) {
		return math.NaN()
	}
	p := math.Pow(10, math.Floor(math.Log10(x)))
	for _, m := range []float64{1, 2, 5} {
		if x <= m*p*(1+1e-9) {
			return m * p
		}
	}
	return 10 * p
}

// number prints v with that many decimals and a true minus sign.
func number(v float64, decimals int) string {
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return strings.Replace(s, "-", "−", 1)
}

// logTicks returns the 1, 2, 5 times powers of ten within lo..hi; the 2 and 5
// are labelled only where the range is about two decades or less.
func logTicks(lo, hi float64) []tick {
	var ts []tick
	dense := hi/lo < 150
	for e := math.Floor(math.Log10(lo)); e <= math.Ceil(math.Log10(hi)); e++ {
		for m := 1.0; m < 10; m++ {
			v := m * math.Pow(10, e)
			if v < lo*(1-1e-9) || v > hi*(1+1e-9) {
				continue
			}
			t := tick{at: v}
			if m == 1 || dense && (m == 2 || m == 5) {
				t.label = power(m, int(e))
			}
			ts = append(ts, t)
		}
	}
	labelled := 0
	for _, t := range ts {
		if t.label != "" {
			labelled++
		}
	}
	if labelled < 2 { // less than an octave or so
		for i, t := range ts {
			e := math.Floor(math.Log10(t.at) + 1e-9)
			ts[i].label = power(math.Round(t.at/math.Pow(10, e)), int(e))
		}
	}
	return ts
}

// power prints m times ten to the e; plainly where that is short.
func power(m float64, e int) string {
	if e >= -2 && e <= 3 {
		return strconv.FormatFloat(m*math.Pow(10, float64(e)), 'g', 6, 64)
	}
	s := "10" + units.Superscript(e)
	if m != 1 {
		s = strconv.FormatFloat(m, 'g', 3, 64) + "×" + s
	}
	return s
}

// ratioTicks are the marks of a ratio scale from a half to two; sparseTicks those
// of a short one.
var (
	ratioTicks  = []tick{{0.5, "0.5"}, {0.6, "0.6"}, {0.7, "0.7"}, {0.8, "0.8"}, {0.9, ""}, {1, "1"}, {1.1, ""}, {1.25, "1.25"}, {1.5, "1.5"}, {1.75, ""}, {2, "2"}}
	sparseTicks = []tick{{0.5, "0.5"}, {0.6, ""}, {0.7, "0.7"}, {0.8, ""}, {0.9, ""}, {1, "1"}, {1.1, ""}, {1.2, ""}, {1.4, "1.4"}, {1.6, ""}, {1.8, ""}, {2, "2"}}
)
