package report

import (
	"bytes"
	"encoding/base64"
	"encoding/xml"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"strconv"
	"strings"

	xfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
)

// A vector is a vg.Canvas that writes an SVG document. Text stays text, in the figures'
// typeface or what stands in for it.
type vector struct {
	w, h  float64
	body  bytes.Buffer
	state vectorState
	stack []vectorState
}

// A vectorState is what Push saves. Points go through the affine map: x' = m[0] x + m[2] y
// + m[4], y' = m[1] x + m[3] y + m[5].
type vectorState struct {
	m      [6]float64
	colour color.Color
	width  float64
	dashes []vg.Length
	offset vg.Length
}

var _ vg.Canvas = (*vector)(nil)

func newVector(w, h int) *vector {
	v := &vector{w: float64(w), h: float64(h)}
	v.state = vectorState{m: [6]float64{1, 0, 0, 1, 0, 0}, colour: color.Black, width: 1}
	return v
}

func (v *vector) Size() (x, y vg.Length) { return vg.Length(v.w), vg.Length(v.h) }

func (v *vector) SetLineWidth(w vg.Length) { v.state.width = float64(w) }

func (v *vector) SetLineDash(pattern []vg.Length, offset vg.Length) {
	v.state.dashes, v.state.offset = append([]vg.Length(nil), pattern...), offset
}

func (v *vector) SetColor(c color.Color) { v.state.colour = c }

func (v *vector) Push() { v.stack = append(v.stack, v.state) }

func (v *vector) Pop() {
	v.state = v.stack[len(v.stack)-1]
	v.stack = v.stack[:len(v.stack)-1]
}

// then puts a map before those that are in force.
func (v *vector) then(n [6]float64) {
	m := v.state.m
	v.state.m = [6]float64{
		m[0]*n[0] + m[2]*n[1], m[1]*n[0] + m[3]*n[1],
		m[0]*n[2] + m[2]*n[3], m[1]*n[2] + m[3]*n[3],
		m[0]*n[4] + m[2]*n[5] + m[4], m[1]*n[4] + m[3]*n[5] + m[5],
	}
}

func (v *vector) Rotate(angle float64) {
	s, c := math.Sincos(angle)
	v.then([6]float64{c, s, -s, c, 0, 0})
}

func (v *vector) Translate(p vg.Point) {
	v.then([6]float64{1, 0, 0, 1, float64(p.X), float64(p.Y)})
}

func (v *vector) Scale(x, y float64) { v.then([6]float64{x, 0, 0, y, 0, 0}) }

// at returns a point in the document, whose y runs downward.
func (v *vector) at(p vg.Point) (x, y float64) {
	m := &v.state.m
	return m[0]*float64(p.X) + m[2]*float64(p.Y) + m[4], v.h - (m[1]*float64(p.X) + m[3]*float64(p.Y) + m[5])
}

// decimal prints a coordinate to a hundredth of a pixel.
func decimal(x float64) string {
	s := strconv.FormatFloat(math.Round(x*100)/100, 'f', -1, 64)
	if s == "-0" {
		return "0"
	}
	return s
}

// paint returns the attributes of a fill or stroke.
func (v *vector) paint(kind string) string {
	c := color.NRGBAModel.Convert(v.state.colour).(color.NRGBA)
	s := fmt.Sprintf(` %s="#%02x%02x%02x"`, kind, c.R, c.G, c.B)
	if c.A != 0xff {
		s += fmt.Sprintf(` %s-opacity="%s"`, kind, decimal(float64(c.A)/0xff))
	}
	return s
}

func (v *vector) Stroke(p vg.Path) {
	if !(v.state.width > 0) {
		return
	}
	fmt.Fprintf(&v.body, `<path d="%s" fill="none"%s stroke-width="%s"`, v.data(p), v.paint("stroke"), decimal(v.state.width))
	if len(v.state.dashes) > 0 {
		var d []string
		for _, x := range v.state.dashes {
			d = append(d, decimal(float64(x)))
		}
		fmt.Fprintf(&v.body, ` stroke-dasharray="%s" stroke-dashoffset="%s"`, strings.Join(d, ","), decimal(float64(v.state.offset)))
	}
	v.body.WriteString("/>\n")
}

func (v *vector) Fill(p vg.Path) {
	fmt.Fprintf(&v.body, `<path d="%s"%s/>`+"\n", v.data(p), v.paint("fill"))
}

// data writes a path. Arcs become chords that leave them by a twentieth of a pixel at most.
func (v *vector) data(p vg.Path) string {
	var b strings.Builder
	put := func(letter byte, q vg.Point) {
		x, y := v.at(q)
		b.WriteByte(letter)
		b.WriteString(decimal(x) + " " + decimal(y))
	}
	for _, c := range p {
		switch c.Type {
		case vg.MoveComp:
			put('M', c.Pos)
		case vg.LineComp:
			put('L', c.Pos)
		case vg.ArcComp:
			letter := byte('L')
			if b.Len() == 0 {
				letter = 'M'
			}
			n := int(math.Ceil(math.Abs(c.Angle) * math.Sqrt(max(float64(c.Radius), 1)/0.4)))
			for i := range n + 1 {
				s, co := math.Sincos(c.Start + c.Angle*float64(i)/float64(n))
				put(letter, vg.Point{X: c.Pos.X + c.Radius*vg.Length(co), Y: c.Pos.Y + c.Radius*vg.Length(s)})
				letter = 'L'
			}
		case vg.CurveComp:
			letter := byte('Q')
			if len(c.Control) == 2 {
				letter = 'C'
			}
			for _, q := range c.Control {
				put(letter, q)
				letter = ' '
			}
			put(' ', c.Pos)
		case vg.CloseComp:
			b.WriteByte('Z')
		}
	}
	return b.String()
}

func (v *vector) FillString(f font.Face, p vg.Point, text string) {
	x, y := v.at(p)
	fmt.Fprintf(&v.body, `<text x="%s" y="%s" font-size="%s"`, decimal(x), decimal(y), decimal(float64(f.Font.Size)))
	if f.Font.Weight >= xfont.WeightBold {
		v.body.WriteString(` font-weight="bold"`)
	}
	if turn := -math.Atan2(v.state.m[1], v.state.m[0]) * 180 / math.Pi; math.Abs(turn) > 1e-9 {
		fmt.Fprintf(&v.body, ` transform="rotate(%s %s %s)"`, decimal(turn), decimal(x), decimal(y))
	}
	v.body.WriteString(v.paint("fill") + ">")
	xml.EscapeText(&v.body, []byte(text)) // a buffer takes all
	v.body.WriteString("</text>\n")
}

func (v *vector) DrawImage(r vg.Rectangle, m image.Image) {
	x0, y0 := v.at(r.Min)
	x1, y1 := v.at(r.Max)
	var b bytes.Buffer
	if err := png.Encode(&b, fewColours(m)); err != nil {
		panic("report: png: " + err.Error()) // a buffer takes all; sizes are ours
	}
	fmt.Fprintf(&v.body, `<image x="%s" y="%s" width="%s" height="%s" style="image-rendering:pixelated" href="data:image/png;base64,%s"/>`+"\n",
		decimal(x0), decimal(y1), decimal(x1-x0), decimal(y0-y1), base64.StdEncoding.EncodeToString(b.Bytes()))
}

// fewColours returns the same image with a palette, if 256 colours are enough: it is
// smaller.
func fewColours(m image.Image) image.Image {
	rgba, ok := m.(*image.RGBA)
	if !ok {
		return m
	}
	p := image.NewPaletted(rgba.Rect, nil)
	index := map[[4]byte]uint8{}
	for i := range p.Pix {
		k := [4]byte(rgba.Pix[4*i:])
		n, have := index[k]
		if !have {
			if len(p.Palette) == 256 {
				return m
			}
			n = uint8(len(p.Palette))
			index[k] = n
			p.Palette = append(p.Palette, color.RGBA{k[0], k[1], k[2], k[3]})
		}
		p.Pix[i] = n
	}
	return p
}

// encode returns the document.
func (v *vector) encode() []byte {
	var b bytes.Buffer
	fmt.Fprintf(&b, `<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %s %s" width="%s" height="%s" font-family="DejaVu Sans, Verdana, sans-serif">`+"\n",
		decimal(v.w), decimal(v.h), decimal(v.w/2), decimal(v.h/2))
	b.Write(v.body.Bytes())
	b.WriteString("</svg>\n")
	return b.Bytes()
}
