package report

import (
	"bytes"
	"image"
	"image/color"
	"image/png"
	"math"
	"testing"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/model"
	"offplane/synth"
)

// A survey with one closed line before the disc, one open line behind it, and a border
// between west and east: what is in front is drawn, what is hidden is not, west is on
// the right, and the same survey gives the same bytes.
func TestCoronaFigure(t *testing.T) {
	v := &synth.Survey{Side: 101, Half: 1.6, Inner: 1.1, Outer: 1.3, From: -math.Pi / 4, To: 0}
	step := 3.2 / 100
	for j := range 101 {
		for i := range 101 {
			y, z := -1.6+float64(i)*step, -1.6+float64(j)*step
			n, k := 1e8, int32(model.Open)
			if y > 0 {
				n, k = 1e7, model.Closed
			}
			if math.Hypot(y, z) < 1 {
				n, k = math.NaN(), 0
			}
			v.Density = append(v.Density, float32(n))
			v.Structure = append(v.Structure, k)
		}
	}
	v.Lines = []synth.SurveyLine{
		{Closed: true, Sky: true, Points: []r3.Vec{{X: 1, Y: -0.5, Z: 0.3}, {X: 1, Y: 0.5, Z: 0.3}}},
		{Sky: true, Points: []r3.Vec{{X: -1, Y: -0.5, Z: -0.3}, {X: -1, Y: 0.5, Z: -0.3}}},
	}
	data := CoronaFigure(v, "test", PNG)
	if !bytes.Equal(data, CoronaFigure(v, "test", PNG)) {
		t.Error("other bytes")
	}
	m, err := png.Decode(bytes.NewReader(data))
	if err != nil {
		t.Fatal(err)
	}
	// Is the colour near the point (west, north) of the sky?
	near := func(m image.Image, y, z float64, k color.RGBA) bool {
		span := 1.6 + step/2
		px := 165 + (y+span)/(2*span)*606
		py := float64(m.Bounds().Dy()) - (270 + (z+span)/(2*span)*606)
		for dx := -5; dx <= 5; dx++ {
			for dy := -5; dy <= 5; dy++ {
				if at(m, int(px)+dx, int(py)+dy) == k {
					return true
				}
			}
		}
		return false
	}
	for _, c := range []struct {
		what string
		y, z float64
		k    color.RGBA
		want bool
	}{
		{"line before the disc", 0.2, 0.3, vermillion, true},
		{"line behind the disc", 0.2, -0.3, blue, false},
		{"border", 0, 1.4, ink, true},
		{"no border in the west", 0.7, 1.3, ink, false},
		{"thin in the west", 1.4, 0, viridis.level(0), true},
		{"dense in the east", -1.4, 0, viridis.level(levels - 1), true},
		{"field of view in the north-west", 1.2 * math.Sin(math.Pi/4), 1.2 * math.Cos(math.Pi/4), orange, true},
		{"no field of view in the north-east", -1.2 * math.Sin(math.Pi/4), 1.2 * math.Cos(math.Pi/4), orange, false},
	} {
		if near(m, c.y, c.z, c.k) != c.want {
			t.Errorf("%s: want %v", c.what, c.want)
		}
	}
}
