package report

import (
	_ "embed"
	"image/color"
	"math"
)

// Colours of what is not a number on a map.
var (
	noValue  = color.RGBA{0x9e, 0x9e, 0x9e, 0xff} // pixel of the field without a value
	occulted = color.RGBA{0xd9, 0xd9, 0xd9, 0xff} // inside the field's inner edge
	paper    = color.RGBA{0xff, 0xff, 0xff, 0xff} // outside the field
	ink      = color.RGBA{0x1a, 0x1a, 0x1a, 0xff}
	faint    = color.RGBA{0xd8, 0xd8, 0xd8, 0xff}
	grey     = color.RGBA{0x6e, 0x6e, 0x6e, 0xff}
)

// Line colours: the palette for colour-blind readers of Okabe & Ito 2008.
var (
	blue       = color.RGBA{0x00, 0x72, 0xb2, 0xff}
	orange     = color.RGBA{0xe6, 0x9f, 0x00, 0xff}
	green      = color.RGBA{0x00, 0x9e, 0x73, 0xff}
	vermillion = color.RGBA{0xd5, 0x5e, 0x00, 0xff}
	purple     = color.RGBA{0xcc, 0x79, 0xa7, 0xff}

	lineColours = []color.RGBA{blue, orange, green, vermillion, purple, grey, faint}
)

// A table is a colour table; entry 0 is the low end.
type table [256]color.RGBA

// Maps use every other entry or so, so that two tables and the greys of type fit
// the 256 colours of a PNG with a palette, a third of the size without.
const levels = 120

// level returns the colour of step k of levels; the ends are those of the table.
func (t *table) level(k int) color.RGBA {
	return t[(min(max(k, 0), levels-1)*255+(levels-1)/2)/(levels-1)]
}

// viridisBytes is the viridis table of matplotlib (CC0), red, green, blue.
//
//go:embed viridis.rgb
var viridisBytes string

// viridis is the sequential table, uniform in perceived lightness.
var viridis = func() (t table) {
	for i := range t {
		t[i] = color.RGBA{viridisBytes[3*i], viridisBytes[3*i+1], viridisBytes[3*i+2], 0xff}
	}
	return t
}()

// diverging runs from blue over near-white to red-brown. Both arms are straight
// lines from the middle in CIE 1976 L*a*b* with the same lightness and chroma at
// the same distance, so equal steps look equal on either side.
var diverging = func() (t table) {
	for i := range t {
		x := (float64(i) - 127.5) / 127.5
		hue := divergingLow
		if x > 0 {
			hue = divergingHigh
		}
		x = math.Abs(x)
		s, c := math.Sincos(hue * math.Pi / 180)
		rgb, _ := fromLab(divergingL0+x*(divergingL1-divergingL0), divergingC*x*c, divergingC*x*s)
		t[i] = rgb
	}
	return t
}()

const (
	divergingLow  = 288.0 // hue below the middle [deg]
	divergingHigh = 45.0  // above
	divergingL0   = 96.0  // lightness of the middle
	divergingL1   = 36.0  // of the ends
	divergingC    = 59.0  // chroma of the ends: the most that both arms have in sRGB
)

// fromLab converts CIE 1976 L*a*b* (white point D65) to sRGB (IEC 61966-2-1);
// inside says whether the colour needed no clipping.
func fromLab(l, a, b float64) (c color.RGBA, inside bool) {
	f := func(t float64) float64 {
		if t > 6.0/29 {
			return t * t * t
		}
		return 3 * 36.0 / 841 * (t - 4.0/29)
	}
	m := (l + 16) / 116
	x, y, z := 0.95047*f(m+a/500), f(m), 1.08883*f(m-b/200)
	inside = true
	gamma := func(v float64) uint8 {
		if v < -5e-4 || v > 1+5e-4 {
			inside = false
		}
		v = min(max(v, 0), 1)
		if v <= 0.0031308 {
			v *= 12.92
		} else {
			v = 1.055*math.Pow(v, 1/2.4) - 0.055
		}
		return uint8(math.Round(255 * v))
	}
	return color.RGBA{
		gamma(3.2404542*x - 1.5371385*y - 0.4985314*z),
		gamma(-0.9692660*x + 1.8760108*y + 0.0415560*z),
		gamma(0.0556434*x - 0.2040259*y + 1.0572252*z),
		0xff,
	}, inside
}

// cyclic returns to its beginning, for angles: an ellipse in CIE 1976 L*a*b*, light at 0
// and 180 deg, dark at 90, blue on the way there and red on the way back.
var cyclic = func() (t table) {
	for i := range t {
		s, c := math.Sincos(2 * math.Pi * float64(i) / 256)
		hue := divergingLow
		if s < 0 {
			hue = divergingHigh
		}
		sin, cos := math.Sincos(hue * math.Pi / 180)
		t[i], _ = fromLab(60+28*c, 38*math.Abs(s)*cos, 38*math.Abs(s)*sin)
	}
	return t
}()

// Colours names a colour table.
type Colours int

// Colour tables.
const (
	Sequential Colours = iota // of quantities
	Diverging                 // of what departs from a middle
	Cyclic                    // of angles
)

// ColourTable returns 256 colours, three bytes each: red, green, blue.
func ColourTable(c Colours) []byte {
	t := [...]*table{&viridis, &diverging, &cyclic}[c]
	b := make([]byte, 0, 3*len(t))
	for _, k := range t {
		b = append(b, k.R, k.G, k.B)
	}
	return b
}
