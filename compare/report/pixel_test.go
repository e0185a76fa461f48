package report

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"strings"
	"testing"

	"offplane/compare/explain"
)

// somePixel is an answer with a Gaussian line of sight, a wave of 400 km/s on its track
// and one cause.
func somePixel() *explain.Pixel {
	number := func(x float64) explain.Number { return explain.Number(x) }
	p := &explain.Pixel{Scenario: "made up", Valid: true, Estimators: []explain.Estimator{{Name: "lag"}}}
	p.Place.Height, p.Place.PA = 1.1, 270
	p.Inferred.Field, p.Inferred.Ne, p.Inferred.Speed = 2, 1.1e8, 380
	p.Truth.FieldSky, p.Truth.SpeedWave = 2.4, 400
	p.Ratios.FieldSky, p.Identity.Field = number(2/2.4), number(math.Log(2/2.4))
	p.Causes = []explain.Cause{{Name: "density along the line of sight", Ln: p.Identity.Field}, {Name: "unknown", Ln: number(math.NaN())}}
	s := &p.Curves.Sight
	for x := -1.5; x < 1.51; x += 0.05 {
		y := number(math.Exp(-x * x * 8))
		s.X = append(s.X, number(x))
		s.Emission, s.Emission2, s.Wave = append(s.Emission, y), append(s.Emission2, y*1.1), append(s.Wave, y*y)
		s.Ne, s.Field = append(s.Ne, 1.5e8*y), append(s.Field, 2.4*y)
	}
	t, l := &p.Curves.TimeDistance, explain.Lags{Name: "lag", Slope: number(1e3 / 380.)}
	for i := range 120 {
		t.Time = append(t.Time, number(30*float64(i)))
	}
	for d := -40.0; d < 41; d += 4 {
		t.Distance = append(t.Distance, number(d))
		row := make([]explain.Number, 120)
		for i := range row {
			row[i] = number(math.Sin(2 * math.Pi * 3.5e-3 * (30*float64(i) - d*2.5)))
		}
		t.Waves = append(t.Waves, row)
		l.Distance, l.Lag = append(l.Distance, number(d)), append(l.Lag, number(d*2.6))
	}
	p.Curves.Lags = []explain.Lags{l}
	k := &p.Curves.KOmega
	for f := 0.5; f < 9; f += 0.5 {
		k.Frequency = append(k.Frequency, explain.Number(f))
	}
	for w := -0.4; w < 0.41; w += 0.05 {
		k.Wavenumber = append(k.Wavenumber, explain.Number(w))
		row := make([]explain.Number, len(k.Frequency))
		for i, f := range k.Frequency { // 400 km/s outward
			d := w - 2*math.Pi*float64(f)/400
			row[i] = explain.Number(math.Exp(-d * d * 400))
		}
		k.Power = append(k.Power, row)
	}
	return p
}

// The figure of a pixel in both formats: an image of its size, a document that is
// well-formed and says units and names; the same answer gives the same bytes.
func TestPixelFigure(t *testing.T) {
	p := somePixel()
	m, err := png.Decode(bytes.NewReader(PixelFigure(p, PNG)))
	if err != nil || m.Bounds().Dx() != figureWidth || m.Bounds().Dy() != pixelHeight {
		t.Fatalf("%v %v", m.Bounds(), err)
	}
	svg := PixelFigure(p, SVG)
	if !bytes.Equal(svg, PixelFigure(p, SVG)) || !bytes.Equal(PixelFigure(p, PNG), PixelFigure(p, PNG)) {
		t.Error("two figures of one answer differ")
	}
	text := texts(t, svg)
	for _, want := range []string{"share of the whole [1/R☉]", "electron density [cm⁻³]", "B in plane of sky [G]", "distance from the plane of the sky, toward the observer [R☉]",
		"time [min]", "distance along the track [Mm]", "Doppler shift [km/s]", "lag [s]", "density along the line of sight", "0.833", "inferred 380 km/s", "true (waves) 400 km/s", "estimator lag"} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not on the figure", want)
		}
	}
	if strings.Contains(text, "unknown") || strings.Contains(text, "NaN") {
		t.Error("a cause without value is drawn")
	}
}

// texts returns the character data of a document.
func texts(t *testing.T, svg []byte) string {
	t.Helper()
	var all strings.Builder
	d := xml.NewDecoder(bytes.NewReader(svg))
	for {
		k, err := d.Token()
		if errors.Is(err, io.EOF) {
			return all.String()
		}
		if err != nil {
			t.Fatal(err)
		}
		if c, ok := k.(xml.CharData); ok {
			all.Write(c)
			all.WriteByte('\n')
		}
	}
}

// A pixel without field, track or line of sight beyond the plane has a figure that says so.
func TestPixelFigureOfLittle(t *testing.T) {
	p := somePixel()
	nan := explain.Number(math.NaN())
	p.Valid, p.Inferred.Field, p.Inferred.Ne, p.Inferred.Speed, p.Identity.Field, p.Causes = false, nan, nan, nan, nan, nil
	p.Flags = []explain.Flag{{About: "no field: <track> too short", Blocking: true}}
	s := &p.Curves.Sight
	for _, x := range []*[]explain.Number{&s.X, &s.Emission, &s.Emission2, &s.Wave, &s.Ne, &s.Field} {
		*x = (*x)[:1]
	}
	s.X[0] = 0
	p.Curves.TimeDistance, p.Curves.Lags = explain.TimeDistance{}, nil
	text := texts(t, PixelFigure(p, SVG))
	if !strings.Contains(text, "no field: <track> too short") || !strings.Contains(text, "no track") || strings.Contains(text, "NaN") {
		t.Error(text)
	}
	for path, want := range map[string]Format{"a.PNG": PNG, "b/c.svg": SVG} {
		if f, err := FormatOf(path); f != want || err != nil {
			t.Errorf("%s: %v %v", path, f, err)
		}
	}
	if _, err := FormatOf("a.jpg"); err == nil {
		t.Error("a.jpg was taken")
	}
}
