package report

import (
	"bytes"
	"encoding/base64"
	"errors"
	"html"
	"image"
	"image/color"
	"image/png"
	"math"
	"net/url"
	"regexp"
	"slices"
	"strings"
	"testing"

	"codeberg.org/go-fonts/dejavu/dejavusans"
	"golang.org/x/image/font/sfnt"

	"offplane/compare"
	"offplane/compare/comparetest"
	"offplane/synth/obs"
)

func reportOf(t *testing.T, c *comparetest.Case) *Report {
	t.Helper()
	v, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, c.Options)
	if err != nil {
		t.Fatal(err)
	}
	return &Report{Grid: c.Grid, Truth: c.Truth, Inferred: c.Inferred, Verdict: v,
		Setup: Setup{About: "invented data for a test", Corona: "No corona: smooth formulas.", Inversion: "No inversion: random numbers."}}
}

func render(t *testing.T, r *Report) string {
	t.Helper()
	var b bytes.Buffer
	if err := WriteHTML(&b, r); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func figure(t *testing.T, r *Report, name string) (Figure, image.Image) {
	t.Helper()
	for _, f := range r.Figures() {
		if f.Name == name {
			m, err := png.Decode(bytes.NewReader(f.Draw(PNG)))
			if err != nil {
				t.Fatal(err)
			}
			return f, m
		}
	}
	t.Fatalf("no figure %q", name)
	return Figure{}, nil
}

func at(m image.Image, x, y int) color.RGBA {
	return color.RGBAModel.Convert(m.At(x, y)).(color.RGBA)
}

func TestSameBytes(t *testing.T) {
	r := reportOf(t, comparetest.Wedge(0.01))
	if a, b := render(t, r), render(t, r); a != b {
		t.Error("two pages of the same verdict differ")
	}
}

// A full ring at the design size fits the limit that mail and reviewers accept.
func TestRingSize(t *testing.T) {
	s := render(t, reportOf(t, comparetest.Ring(600)))
	if t.Logf("%d bytes", len(s)); len(s) > 5e6 {
		t.Errorf("%d bytes, want below 5 MB", len(s))
	}
	if n := strings.Count(s, "<figure "); n != 9 {
		t.Errorf("%d figures, want 9", n)
	}
}

// fieldLayout returns the layout of the field figure: truth, inferred, ratio.
func fieldLayout(r *Report) (*view, mapLayout) {
	v := newView(&r.Grid, r.Verdict.Field)
	shared := &scale{}
	return v, layoutMaps(v, []panel{{scale: shared}, {scale: shared}, {scale: &scale{}}})
}

// screen returns the PNG coordinates of the middle of image pixel (ix, iy) in panel k.
func screen(v *view, l mapLayout, k, ix, iy int) (x, y int) {
	px, py := v.place(v.g.Sky(ix, iy))
	return l.x[k] + int(px), l.height - 1 - (l.y + int(py))
}

func TestMissingPixelsAreGrey(t *testing.T) {
	c := comparetest.Wedge(0.01)
	b := c.Inferred.Get("B").Data
	var hole, kept, outside int = -1, -1, -1
	for i := range b {
		switch {
		case hole < 0 && b[i] > 0:
			b[i], hole = float32(math.NaN()), i
		case b[i] > 0:
			kept = i
		}
	}
	r := reportOf(t, c)
	for i, in := range r.Verdict.Field {
		// Outside the ring, not the occulted disc.
		if d, _ := c.Grid.Polar(i%c.Grid.Nx, i/c.Grid.Nx); !in && d > 1.2 && d < 1.34 && i > c.Grid.Nx*10 {
			outside = i
			break
		}
	}
	_, m := figure(t, r, "field")
	v, l := fieldLayout(r)
	for _, q := range []struct {
		what     string
		panel, i int
		want     color.RGBA
		same     bool
	}{
		{"missing pixel, inferred", 1, hole, noValue, true},
		{"missing pixel, ratio", 2, hole, noValue, true},
		{"the same pixel, truth", 0, hole, noValue, false},
		{"pixel with a value, inferred", 1, kept, noValue, false},
		{"outside the field", 1, outside, paper, true},
	} {
		x, y := screen(v, l, q.panel, q.i%c.Grid.Nx, q.i/c.Grid.Nx)
		if q.what == "outside the field" && (x < l.x[1] || x >= l.x[1]+300) {
			continue // the box around the field does not show it
		}
		if got := at(m, x, y); (got == q.want) != q.same {
			t.Errorf("%s at (%d, %d): %v", q.what, x, y, got)
		}
	}
}

// North is up and west right, also for an image that is rolled: the truth is made
// to mark one spot of the sky.
func TestOrientation(t *testing.T) {
	for _, roll := range []float64{0, 90, -37} {
		c := comparetest.Ring(150)
		c.Grid.Roll = roll
		r := reportOf(t, c)
		v := newView(&c.Grid, r.Verdict.Field)
		marked := make([]float32, len(r.Verdict.Field))
		const west, north = 0.8, 0.9 // r = 1.204
		for i := range marked {
			y, z := c.Grid.Sky(i%c.Grid.Nx, i/c.Grid.Nx)
			if math.Hypot(y-west, z-north) < 0.06 {
				marked[i] = 1
			}
		}
		s := &scale{lo: 0, hi: 1, table: &viridis}
		m := v.raster(marked, s)
		px, py := v.place(west, north)
		h := m.Bounds().Dy()
		if got := at(m, int(px), h-1-int(py)); got != viridis[255] {
			t.Errorf("roll %g: the mark is not at its place: %v", roll, got)
		}
		if !(int(px) > m.Bounds().Dx()*3/4 && h-1-int(py) < h/4) {
			t.Errorf("roll %g: north-west is at (%d, %d) of %v", roll, int(px), h-1-int(py), m.Bounds())
		}
		px, py = v.place(-west, north)
		if got := at(m, int(px), h-1-int(py)); got != viridis[0] {
			t.Errorf("roll %g: the mark's mirror image is %v, want the low end", roll, got)
		}
	}
}

func TestColourBars(t *testing.T) {
	r := reportOf(t, comparetest.Ring(150))
	_, m := figure(t, r, "field")
	_, l := fieldLayout(r)
	for k, table := range map[int]*table{0: &viridis, 2: &diverging} {
		x, w := l.bars[k][0], l.bars[k][1]
		y := l.height - 1 - l.barY - barHeight/2
		if a, b := at(m, x+3, y), at(m, x+w-4, y); a != table[0] || b != table[255] {
			t.Errorf("bar %d runs from %v to %v, want %v to %v", k, a, b, table[0], table[255])
		}
	}
	if l.bars[0] != l.bars[1] {
		t.Error("truth and inferred do not share a bar")
	}
}

// The limb is a dark circle of one solar radius.
func TestLimb(t *testing.T) {
	r := reportOf(t, comparetest.Ring(150))
	_, m := figure(t, r, "speed")
	v, l := fieldLayout(r)
	for pa := 5.0; pa < 360; pa += 30 {
		s, c := math.Sincos(pa * math.Pi / 180)
		px, py := v.place(-s, c)
		k := at(m, l.x[0]+int(px), l.height-1-(l.y+int(py)))
		if k.R > 0x90 {
			t.Errorf("position angle %g: %v, want a dark line", pa, k)
		}
	}
}

func TestBlocks(t *testing.T) {
	// A field wider than the panel is shown in blocks of 2 x 2; a block with one
	// value shows it.
	g := obs.Grid{Nx: 1000, Ny: 1000, Pixel: 2.5, CentreX: 500.5, CentreY: 500.5, Distance: 215}
	field, m := make([]bool, 1e6), make([]float32, 1e6)
	for i := range field {
		field[i], m[i] = true, float32(math.NaN())
	}
	v := newView(&g, field)
	if v.block != 2 || v.zoom != 1 {
		t.Fatalf("block %d, zoom %d, want 2, 1", v.block, v.zoom)
	}
	m[500*1000+501] = 1
	s := &scale{lo: 0, hi: 1, table: &viridis}
	img := v.raster(m, s)
	px, py := v.place(g.Sky(501, 500))
	y := img.Bounds().Dy() - 1 - int(py)
	if got := at(img, int(px), y); got != viridis[255] {
		t.Errorf("block with one value: %v", got)
	}
	if got := at(img, int(px)+1, y); got != noValue {
		t.Errorf("block without: %v", got)
	}
}

func TestDivergingTable(t *testing.T) {
	for i := range 128 {
		a, b := diverging[i], diverging[255-i]
		// Same distance, same lightness: relative luminance (sRGB) agrees within rounding.
		if la, lb := luminance(a), luminance(b); math.Abs(la-lb) > 0.01 {
			t.Errorf("entries %d and %d have luminance %.3f and %.3f", i, 255-i, la, lb)
		}
		if i > 0 && luminance(a) < luminance(diverging[i-1]) {
			t.Errorf("entry %d is darker than entry %d", i, i-1)
		}
		x := (float64(i) - 127.5) / -127.5
		for _, hue := range []float64{divergingLow, divergingHigh} {
			s, c := math.Sincos(hue * math.Pi / 180)
			if _, inside := fromLab(divergingL0+x*(divergingL1-divergingL0), divergingC*x*c, divergingC*x*s); !inside {
				t.Errorf("entry %d, hue %g is clipped: steps are not uniform", i, hue)
			}
		}
		if a == noValue || b == noValue {
			t.Error("the table contains the colour of missing pixels")
		}
	}
	// sRGB red is L*a*b* (53.24, 80.09, 67.20) (CIE formulas, D65; common practice).
	if c, _ := fromLab(53.2408, 80.0925, 67.2032); c != (color.RGBA{255, 0, 0, 255}) {
		t.Errorf("red is %v", c)
	}
}

func luminance(c color.RGBA) float64 {
	lin := func(v uint8) float64 {
		x := float64(v) / 255
		if x <= 0.04045 {
			return x / 12.92
		}
		return math.Pow((x+0.055)/1.055, 2.4)
	}
	return 0.2126*lin(c.R) + 0.7152*lin(c.G) + 0.0722*lin(c.B)
}

func TestViridis(t *testing.T) {
	// Printed by matplotlib 3.6.3: colors.to_hex(cm.viridis(i)) for i = 0, 128, 255.
	for i, want := range map[int]color.RGBA{0: {0x44, 0x01, 0x54, 0xff}, 128: {0x21, 0x91, 0x8c, 0xff}, 255: {0xfd, 0xe7, 0x25, 0xff}} {
		if viridis[i] != want {
			t.Errorf("entry %d is %v, want %v", i, viridis[i], want)
		}
	}
	for i := 4; i < 256; i++ { // four entries outweigh the rounding to 8 bits
		if luminance(viridis[i]) <= luminance(viridis[i-4]) {
			t.Errorf("entry %d is not brighter than entry %d", i, i-4)
		}
	}
	if viridis.level(0) != viridis[0] || viridis.level(levels-1) != viridis[255] {
		t.Error("the levels lose an end of the table")
	}
}

// A font without a glyph drops it silently, and "km s⁻¹" would print a wrong unit.
func TestGlyphs(t *testing.T) {
	f, err := sfnt.Parse(dejavusans.TTF)
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range "−⁻⁰¹²³⁴⁵⁶⁷⁸⁹×√μ☉″[]°±–“”" {
		var b sfnt.Buffer
		if i, err := f.GlyphIndex(&b, r); err != nil || i == 0 {
			t.Errorf("no glyph for %q", r)
		}
	}
}

var (
	dataURI    = regexp.MustCompile(`src="data:image/png;base64,[A-Za-z0-9+/=]+"`)
	dataFile   = regexp.MustCompile(`href="data:(?:text/plain|application/json);base64,[A-Za-z0-9+/=&#;]+"`) // the template writes + as &#43;
	dataSVG    = regexp.MustCompile(`download="([a-z-]+\.svg)" href="data:image/svg\+xml,([^"]+)"`)
	external   = regexp.MustCompile(`(?i)https?:|//|<script|<link|<iframe|@import|url\(|\bon[a-z]+=|file:|/work|/tmp|/home`)
	caption    = regexp.MustCompile(`(?s)<figcaption>(.*?)</figcaption>`)
	notANumber = regexp.MustCompile(`\bNaN\b|\bInf\b`)
	figureID   = regexp.MustCompile(`<figure id="([a-z]+)">`)
	alt        = regexp.MustCompile(`alt="([^"]*)"`)
)

func TestPage(t *testing.T) {
	c := comparetest.Wedge(0.01)
	c.Options.Text, c.Options.Files = "seed: 7\n", []compare.File{{Name: "grid.fits", SHA256: "aa11"}}
	r := reportOf(t, c)
	r.Pixel, r.Budget = somePixel(), someBudget()
	s := render(t, r)
	checkDownloads(t, r, s)
	checkVectors(t, r, s)
	if !strings.Contains(s, `content="default-src 'none'; style-src 'unsafe-inline'; img-src data:"`) {
		t.Error("no strict content policy")
	}
	bare := dataSVG.ReplaceAllString(dataFile.ReplaceAllString(dataURI.ReplaceAllString(s, ""), ""), "")
	if strings.Contains(bare, "base64") {
		t.Error("a data URI was spoilt by escaping")
	}
	if m := external.FindString(bare); m != "" {
		t.Errorf("the page refers outside itself or runs code: %q", m)
	}
	captions := caption.FindAllStringSubmatch(s, -1)
	alts := alt.FindAllStringSubmatch(s, -1)
	want := [][]string{
		{"B_SKY", "estimator", "lag", "[G]", "Domain", "North is up, east left", "1.05–1.35 solar radii"},
		{"SPEED_SKY", "estimator", "lag", "[km/s]", "Domain"},
		{"NE_SKY", "ratio of the two lines", "[cm⁻³]", "Domain"},
		{"ANGLE_SKY", "estimator", "[deg]", "Domain", "1.05–1.35 solar radii"},
		{"B_SKY", "estimator", "lag", "[G]", "position angle", "Domain"},
		{"SPEED_SKY", "estimator", "lag", "[km/s]", "inferred equals true", "Domain"},
		{"B_EMIS", "estimator", "lag", "[G]", "[km/s]", "16th to the 84th", "Domain"},
		{"NE_KINK", "estimator", "lag", "pure numbers", "Domain"},
		{"DOPPLER_LOCAL", "[km/s]", "COHERENCE", "Domain"},
		{"SPEED_WAVE", "estimator", "lag", "[G]", "[Mm]", "the one pixel"},
		{"SPEED_WAVE", "estimator", "lag", "[mHz]", "[rad/Mm]", "the one pixel"},
		{"B_SKY", "estimator", "lag", "pure number", "Not in the scenario: strands", "the 90 of 100 pixels", "1.05–1.20 solar radii"},
	}
	if len(captions) != len(want) || len(alts) != len(want) {
		t.Fatalf("%d captions, %d alt texts, want %d", len(captions), len(alts), len(want))
	}
	for i, parts := range want {
		for _, p := range parts {
			if !strings.Contains(captions[i][1], p) {
				t.Errorf("caption %d lacks %q:\n%s", i+1, p, captions[i][1])
			}
		}
		// Every caption names its truth, the estimator, a unit and the domain.
		for what, found := range map[string]bool{
			"truth": truthName.MatchString(captions[i][1]), "estimator": strings.Contains(captions[i][1], "estimator"),
			"unit": unitName.MatchString(captions[i][1]), "domain": strings.Contains(captions[i][1], "Domain"),
		} {
			if !found {
				t.Errorf("caption %d names no %s:\n%s", i+1, what, captions[i][1])
			}
		}
		if len(alts[i][1]) < 60 {
			t.Errorf("alt text %d says little: %q", i+1, alts[i][1])
		}
	}
	for _, p := range append(r.Verdict.Summary.Sentences()[1:], "invented data for a test", r.Verdict.Summary.ScenarioSHA256, "1.05–1.10", "incoherent", "Not for operational use", "low-beta", "WKB", "closed",
		"aa11", "grid.fits", "offplane explain FOLDER --at") {
		if !strings.Contains(s, p) {
			t.Errorf("the page lacks %q", p)
		}
	}
}

var (
	truthName = regexp.MustCompile(`\b(B|BTOT|NE|SPEED|ANGLE)_(SKY|EMIS|WAVE|KINK)\b|\bDOPPLER_LOCAL\b`)
	unitName  = regexp.MustCompile(`\[(G|km/s|cm⁻³|s|Mm|mHz|rad/Mm|deg)\]|pure number`)
)

// checkDownloads: the numbers inside the page are the verdict's, byte for byte.
func checkDownloads(t *testing.T, r *Report, s string) {
	t.Helper()
	var summary bytes.Buffer
	if err := r.Verdict.Summary.WriteJSON(&summary); err != nil {
		t.Fatal(err)
	}
	var table bytes.Buffer
	if err := r.Verdict.Heights.Write(&table); err != nil {
		t.Fatal(err)
	}
	var terms, whole bytes.Buffer
	b := r.Budget.Table()
	if err := errors.Join(b.Write(&terms), r.Budget.WriteJSON(&whole)); err != nil {
		t.Fatal(err)
	}
	for name, want := range map[string]string{"summary.json": summary.String(), "bias.ecsv": table.String(), "scenario.yaml": "seed: 7\n",
		"budget.ecsv": terms.String(), "budget.json": whole.String()} {
		m := regexp.MustCompile(`download="` + name + `" href="data:[a-z/]+;base64,([^"]+)"`).FindStringSubmatch(s)
		if m == nil {
			t.Errorf("%s is not in the page", name)
			continue
		}
		got, err := base64.StdEncoding.DecodeString(html.UnescapeString(m[1]))
		if err != nil || string(got) != want {
			t.Errorf("%s is %.80q %v, want %.80q", name, got, err, want)
		}
	}
}

// checkVectors: every figure can be saved as the SVG that it draws.
func checkVectors(t *testing.T, r *Report, s string) {
	t.Helper()
	saved := map[string]string{}
	for _, m := range dataSVG.FindAllStringSubmatch(s, -1) {
		text, err := url.PathUnescape(m[2])
		if err != nil {
			t.Fatal(err)
		}
		saved[m[1]] = text
	}
	figures := append(r.Figures(), *Budget(r.Budget))
	if len(saved) != len(figures) {
		t.Errorf("%d SVG documents for %d figures", len(saved), len(figures))
	}
	for _, f := range figures {
		got := saved[r.Verdict.Summary.Scenario+"-"+f.Name+".svg"]
		if want := f.Draw(SVG); got != string(want) {
			t.Errorf("%s: the page holds another SVG than the figure", f.Name)
		}
		if text := texts(t, []byte(got)); len(text) < 100 || strings.Contains(text, "NaN") {
			t.Errorf("%s: texts %q", f.Name, text)
		}
	}
}

// The histogram counts every pixel once, and equal maps lie on the line.
func TestJoint(t *testing.T) {
	r := reportOf(t, comparetest.Ring(120))
	j := &joint{truth: "B_SKY", inferred: "B"}
	if !r.fill(j) {
		t.Fatal("no histogram")
	}
	sum := 0
	for _, n := range j.count {
		sum += n
	}
	if sum != r.Verdict.Summary.Pixels.Valid || len(j.x) != sum {
		t.Errorf("%d pixels, want %d", sum, r.Verdict.Summary.Pixels.Valid)
	}
	copy(r.Inferred.Get("B").Data, r.Truth.Get("B_SKY").Data)
	same := &joint{truth: "B_SKY", inferred: "B"}
	r.fill(same)
	for i, n := range same.count {
		if n > 0 && i%jointCells != i/jointCells {
			t.Fatalf("equal maps fill cell (%d, %d)", i%jointCells, i/jointCells)
		}
	}
}

// Laid flat, a mark on the sky is at its position angle and height; a wedge across north
// stays in one piece.
func TestUnwrapped(t *testing.T) {
	c := comparetest.Ring(120)
	r := reportOf(t, c)
	if from, to := r.angles(); from != 0 || to != 360 {
		t.Errorf("a ring from %g to %g", from, to)
	}
	v := newView(&c.Grid, r.Verdict.Field)
	marked := make([]float32, len(r.Verdict.Field))
	for i := range marked {
		if d, pa := c.Grid.Polar(i%c.Grid.Nx, i/c.Grid.Nx); math.Abs(d-1.2) < 0.05 && math.Abs(pa-100) < 10 {
			marked[i] = 1
		}
	}
	m := v.flat(panel{data: marked, scale: &scale{lo: 0, hi: 1, table: &viridis}}, 0, 360, v.inner, v.outer, 360, 100)
	row := int((v.outer - 1.2) / (v.outer - v.inner) * 100)
	if a, b := at(m, 100, row), at(m, 260, row); a != viridis[255] || b != viridis[0] {
		t.Errorf("at the mark %v, at its mirror image %v", a, b)
	}
	for i := range r.Verdict.Field {
		_, pa := c.Grid.Polar(i%c.Grid.Nx, i/c.Grid.Nx)
		r.Verdict.Field[i] = r.Verdict.Field[i] && (pa > 340 || pa < 30)
	}
	if from, to := r.angles(); math.Abs(from-340) > 1 || math.Abs(to-390) > 1 {
		t.Errorf("a wedge across north from %g to %g", from, to)
	}
}

func TestEscapes(t *testing.T) {
	r := reportOf(t, comparetest.Wedge(0.02))
	r.Verdict.Summary.Scenario = "<script>alert(1)</script>"
	r.Setup.Corona = `"><img src=x onerror=alert(1)>`
	if s := render(t, r); strings.Contains(s, "<script") || strings.Contains(s, "<img src=x") {
		t.Error("a name became markup")
	}
}

// What may be missing must not stop the report.
func TestPoorInput(t *testing.T) {
	nan := float32(math.NaN())
	for _, q := range []struct {
		name    string
		spoil   func(c *comparetest.Case)
		figures []string
	}{
		{"nothing inferred", func(c *comparetest.Case) {
			for _, m := range c.Inferred {
				for i := range m.Data {
					m.Data[i] = nan
				}
			}
		}, []string{"field", "speed", "density", "direction", "unwrapped", "profiles", "identity", "quality"}},
		{"infinities and zeros", func(c *comparetest.Case) {
			for i := range c.Inferred.Get("B").Data {
				c.Inferred.Get("B").Data[i] = float32(math.Inf(1 - 2*(i%2)))
				c.Inferred.Get("NE").Data[i] = 0
				c.Truth.Get("NE_SKY").Data[i] = 0
				c.Inferred.Get("COHERENCE").Data[i] = float32(math.Inf(1))
			}
		}, []string{"field", "speed", "density", "direction", "unwrapped", "profiles", "identity", "quality"}},
		{"constant maps", func(c *comparetest.Case) {
			for _, m := range slices.Concat(c.Truth, c.Inferred) {
				for i := range m.Data {
					if m.Data[i] == m.Data[i] {
						m.Data[i] = 3
					}
				}
			}
		}, []string{"field", "speed", "density", "direction", "unwrapped", "joint", "profiles", "identity", "quality"}},
		{"one pixel", func(c *comparetest.Case) {
			first := true
			s := c.Truth.Get("STRUCTURE").Ints
			for i := range s {
				if s[i] != 0 && !first {
					s[i] = 0
				}
				first = first && s[i] == 0
			}
		}, []string{"field", "speed", "density", "direction", "unwrapped", "profiles", "identity", "quality"}},
		{"no field", func(c *comparetest.Case) { clear(c.Truth.Get("STRUCTURE").Ints) }, nil},
		{"density alone", func(c *comparetest.Case) { c.Inferred = obs.Maps{*c.Inferred.Get("NE")} },
			[]string{"field", "speed", "density", "joint", "profiles"}},
		{"truth of the field alone", func(c *comparetest.Case) { c.Truth = obs.Maps{*c.Truth.Get("B_SKY")} },
			[]string{"field", "speed", "density", "unwrapped", "joint", "profiles", "identity", "quality"}},
	} {
		c := comparetest.Wedge(0.02)
		q.spoil(c)
		s := render(t, reportOf(t, c))
		var names []string
		for _, m := range figureID.FindAllStringSubmatch(s, -1) {
			names = append(names, m[1])
		}
		if !slices.Equal(names, q.figures) {
			t.Errorf("%s: figures %v, want %v", q.name, names, q.figures)
		}
		if bare := dataURI.ReplaceAllString(s, ""); notANumber.MatchString(bare) || !strings.HasSuffix(strings.TrimSpace(s), "</html>") {
			t.Errorf("%s: the page prints NaN or Inf, or is cut", q.name)
		}
	}
}

func TestTicks(t *testing.T) {
	join := func(ts []tick) string {
		var s []string
		for _, t := range ts {
			s = append(s, t.label)
		}
		return strings.Join(s, " ")
	}
	for _, c := range []struct {
		ts   []tick
		want string
	}{
		{linearTicks(-1290, 1290, 6), "−1000 −500 0 500 1000"},
		{linearTicks(0, 1, 5), "0.0 0.2 0.4 0.6 0.8 1.0"},
		{linearTicks(1.05, 1.35, 6), "1.05 1.10 1.15 1.20 1.25 1.30 1.35"},
		{linearTicks(-0.3, 0.3, 6), "−0.3 −0.2 −0.1 0.0 0.1 0.2 0.3"},
		{logTicks(1e8, 5e8), "10⁸ 2×10⁸   5×10⁸"},
		{logTicks(2e7, 3e7), "2×10⁷ 3×10⁷"},
		{logTicks(1e-4, 1e4), strings.Join([]string{"10⁻⁴", "10⁻³", "0.01", "0.1", "1", "10", "100", "1000", "10⁴"}, strings.Repeat(" ", 9))},
	} {
		if got := join(c.ts); got != c.want {
			t.Errorf("ticks %q, want %q", got, c.want)
		}
	}
}

func BenchmarkRing(b *testing.B) {
	c := comparetest.Ring(600)
	v, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, c.Options)
	if err != nil {
		b.Fatal(err)
	}
	r := &Report{Grid: c.Grid, Truth: c.Truth, Inferred: c.Inferred, Verdict: v}
	for b.Loop() {
		if err := WriteHTML(&bytes.Buffer{}, r); err != nil {
			b.Fatal(err)
		}
	}
}
