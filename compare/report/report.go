// Package report writes the verdict for people: one HTML file that needs nothing
// else, with its figures inside. It is the only package that draws.
//
// Figures are drawn with the vector canvas of gonum/plot and encoded as PNG. Map
// rasters are laid on whole pixels, so what one sees is the map's own pixels.
// The bytes depend on the maps and the verdict only: no date, host or path.
package report

import (
	"bytes"
	"context"
	_ "embed"
	"encoding/base64"
	"errors"
	"fmt"
	"html/template"
	"image/png"
	"io"
	"math"
	"strings"

	"offplane/compare"
	"offplane/compare/budget"
	"offplane/compare/explain"
	"offplane/compare/stat"
	"offplane/scenarios/units"
	"offplane/synth/obs"
	"offplane/synth/parallel"
)

// A Report is what WriteHTML needs.
type Report struct {
	Grid            obs.Grid
	Truth, Inferred obs.Maps // as they were compared; any may be missing
	Verdict         *compare.Verdict
	Setup           Setup
	Pixel           *explain.Pixel // one that stands for the run; may be nil
	Budget          *budget.Budget // may be nil
}

// Setup says in plain sentences what was simulated; empty ones are left out.
type Setup struct {
	About       string // the scenario's own line
	Corona      string
	Waves       string
	Sight       string // integration along the line of sight
	Observation string // image, cadence, duration, camera, noise
	Inversion   string
}

// A Figure is one drawing with its words.
type Figure struct {
	Name    string // of its anchor
	Draw    func(Format) []byte
	Alt     string
	Caption string
}

// WriteHTML writes the report as one self-contained page.
func WriteHTML(w io.Writer, r *Report) error {
	if r.Verdict == nil {
		return errors.New("report: no verdict")
	}
	p := page{
		Setup: r.Setup, Summary: &r.Verdict.Summary, Sentences: r.Verdict.Summary.Sentences(),
		Identity: r.identitySentence(), Domain: r.domain(), Pixel: r.pixel(),
		Ratios: ratioRows(&r.Verdict.Summary), Heights: heightRows(r.Verdict), Structures: structureRows(&r.Verdict.Summary),
	}
	for _, f := range r.Verdict.Flags {
		if f.Pixels > 0 {
			p.Flags = append(p.Flags, f)
		}
	}
	figures := r.Figures()
	p.Figures = make([]pageFigure, len(figures))
	_ = parallel.For(context.Background(), len(figures), 0, func(_, i int) error { // nothing can fail
		p.Figures[i] = r.show(&figures[i])
		return nil
	})
	if r.Budget != nil {
		p.Budget = r.budget()
	}
	if q := r.Pixel; q != nil {
		p.Place = fmt.Sprintf("%.1f,%.1f", q.Place.SolarX, q.Place.SolarY)
	}
	var err error
	if p.Downloads, err = r.downloads(); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	var b bytes.Buffer
	if err := pageTemplate.Execute(&b, &p); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	_, err = w.Write(b.Bytes())
	return err
}

// A download is a file inside the page.
type download struct {
	Name, About string
	URL         template.URL
}

// show draws a figure for the page: a PNG to look at, all of whose type is drawn, and an
// SVG to save.
func (r *Report) show(f *Figure) pageFigure {
	image := f.Draw(PNG)
	c, err := png.DecodeConfig(bytes.NewReader(image))
	if err != nil {
		panic("report: png: " + err.Error()) // it is ours
	}
	return pageFigure{Figure: *f, Width: c.Width / 2, Narrow: c.Width / 3,
		// Ready-made attributes: the template would write every + as five characters.
		Image: template.HTMLAttr(`src="data:image/png;base64,` + base64.StdEncoding.EncodeToString(image) + `"`),
		// What is base64 within need not be so again.
		SVG:  template.HTMLAttr(`href="data:image/svg+xml,` + inAttribute.Replace(string(f.Draw(SVG))) + `"`),
		File: r.Verdict.Summary.Scenario + "-" + f.Name + ".svg",
	}
}

// inAttribute writes text as the body of a data URL in quotes.
var inAttribute = strings.NewReplacer("%", "%25", "#", "%23", `"`, "%22", "'", "%27", "&", "%26", "<", "%3C", ">", "%3E", "\n", "%0A")

// downloads puts the numbers behind the figures and tables into the page.
func (r *Report) downloads() ([]download, error) {
	v := r.Verdict
	var ds []download
	add := func(name, about, kind string, text []byte) {
		if len(text) > 0 {
			ds = append(ds, download{name, about, template.URL("data:" + kind + ";base64," + base64.StdEncoding.EncodeToString(text))})
		}
	}
	var table, summary bytes.Buffer
	if err := v.Heights.Write(&table); err != nil {
		return nil, err
	}
	if err := v.Summary.WriteJSON(&summary); err != nil {
		return nil, err
	}
	add("bias.ecsv", "bias by height, a table with units", "text/plain", table.Bytes())
	add("summary.json", "the whole verdict for programs", "application/json", summary.Bytes())
	add("scenario.yaml", "the scenario with every default filled in", "text/plain", []byte(v.Summary.Text))
	if b := r.Budget; b != nil {
		var terms, whole bytes.Buffer
		t := b.Table()
		if err := errors.Join(t.Write(&terms), b.WriteJSON(&whole)); err != nil {
			return nil, err
		}
		add("budget.ecsv", "the error budget, a table with heights", "text/plain", terms.Bytes())
		add("budget.json", "the same for programs", "application/json", whole.Bytes())
	}
	return ds, nil
}

//go:embed report.html
var pageText string

var pageTemplate = template.Must(template.New("report").Funcs(template.FuncMap{
	"percent": func(n stat.Number) string {
		if math.IsNaN(float64(n)) {
			return "–"
		}
		return fmt.Sprintf("%.0f %%", 100*float64(n))
	},
	"number": func(f pageFigure, before int) pageFigure {
		f.Number = before + 1
		return f
	},
}).Parse(pageText))

type page struct {
	Setup      Setup
	Summary    *compare.Summary
	Sentences  []string
	Identity   string
	Domain     string
	Pixel      string
	Figures    []pageFigure
	Budget     *budgetSection // nil without
	Place      string         // of the pixel, X,Y [arcsec]; empty without
	Ratios     []ratioRow
	Heights    []heightRow
	Structures []structureRow
	Flags      []compare.Flag
	Downloads  []download
}

type pageFigure struct {
	Figure
	Image, SVG    template.HTMLAttr // source of the picture, reference to the document
	File          string            // name of the SVG
	Number        int
	Width, Narrow int // shown width, and the least it shrinks to [CSS px]
}

// data returns the values of a map, nil without it.
func data(ms obs.Maps, name string) []float32 {
	if m := ms.Get(name); m != nil {
		return m.Data
	}
	return nil
}

// pixel states the pixel size.
func (r *Report) pixel() string {
	return fmt.Sprintf("%.3g″ = %.3g Mm", r.Grid.Pixel, r.Grid.Step()*units.SolarRadius/1e8)
}

// domain states which pixels a number is about.
func (r *Report) domain() string {
	h := r.Verdict.Summary.Heights
	if len(h) == 0 {
		return "no pixel of the field"
	}
	d := fmt.Sprintf("%.2f–%.2f solar radii from disc centre on the plane of the sky", h[0].From, h[len(h)-1].To)
	if math.IsNaN(float64(r.Verdict.Summary.Pixels.ValidFraction)) {
		return "all pixels of the field, " + d
	}
	return fmt.Sprintf("the %d valid of %d pixels of the field (inferred B finite and positive), %s", r.Verdict.Summary.Pixels.Valid, r.Verdict.Summary.Pixels.Total, d)
}

func (r *Report) identitySentence() string {
	id := r.Verdict.Summary.Identity
	if id.Field == nil || id.Speed == nil || id.Density == nil || id.Kink == nil || id.Field.Count == 0 {
		return ""
	}
	s := fmt.Sprintf("Median factors: speed ×%.3f, square root of density ×%.3f, ", math.Exp(id.Speed.Median), math.Exp(id.Density.Median))
	if !math.IsNaN(float64(id.Mu)) {
		s += fmt.Sprintf("assumed composition ×%.3f, ", math.Exp(float64(id.Mu)))
	}
	s += fmt.Sprintf("density that the wave feels ×%.3f; the field as a whole ×%.3f.", math.Exp(id.Kink.Median), math.Exp(id.Field.Median))
	if !math.IsNaN(float64(id.ResidualMax)) {
		s += " Pixel by pixel the factors multiply to the bias of the field within " + units.Scientific(float64(id.ResidualMax), 0) + "."
	}
	return s + methodSentence(&id)
}

// methodSentence tells the method's own bias from that of the line of sight.
func methodSentence(id *compare.LnParts) string {
	if id.Method == nil || id.Sight == nil || id.Rest == nil || id.Rest.Count == 0 {
		return ""
	}
	return fmt.Sprintf(" Of the speed's factor, the method alone makes ×%.3f: the same tracker on the same tracks, where only the plane of the sky shines and no camera disturbs. The line of sight makes ×%.3f (wave-weighted over plane-of-sky kink speed); ×%.3f is left for the camera and for what method and line of sight do to each other (medians).",
		math.Exp(id.Method.Median), math.Exp(id.Sight.Median), math.Exp(id.Rest.Median))
}

// Figures draws the figures that the maps allow, in the order of the report.
func (r *Report) Figures() []Figure {
	v := newView(&r.Grid, r.Verdict.Field)
	if v == nil {
		return nil
	}
	var fs []Figure
	foot := "pixel " + r.pixel()
	s := &r.Verdict.Summary
	for _, q := range []struct {
		name, title, inferred, truth, about, unit, ratio string
		log                                              bool
		of                                               *stat.Summary
	}{
		{"field", "magnetic field", "B", "B_SKY", "component of the field in the plane of the sky, at x = 0", "G", "B_RATIO", false, s.Ratios.Field.Sky},
		{"speed", "phase speed", "SPEED", "SPEED_SKY", "kink speed at x = 0 projected on the sky, without flow", "km/s", "SPEED_RATIO", false, s.Ratios.Speed.Sky},
		{"density", "electron density", "NE", "NE_SKY", "electron density at x = 0", "cm⁻³", "NE_RATIO", true, s.Ratios.Density.Sky},
	} {
		t, m := data(r.Truth, q.truth), data(r.Inferred, q.inferred)
		if t == nil && m == nil {
			continue
		}
		shared := sharedScale(fmt.Sprintf("%s [%s]", q.title, q.unit), q.log, r.values(t), r.values(m))
		var ps []panel
		if t != nil {
			ps = append(ps, panel{"truth", q.truth, t, shared})
		}
		if m != nil {
			how := q.inferred
			if q.inferred != "NE" && s.Estimator != "" {
				how += ", estimator " + s.Estimator
			} else if q.inferred == "NE" {
				how += ", line ratio"
			}
			ps = append(ps, panel{"inferred", how, m, shared})
		}
		caption := fmt.Sprintf("Maps of the %s. Truth: %s, %s [%s].", q.title, q.truth, q.about, q.unit)
		alt := fmt.Sprintf("Maps of the %s around the occulted solar disc, north up, east left", q.title)
		if m != nil {
			caption += fmt.Sprintf(" Inferred: %s [%s], same colour scale", q.inferred, q.unit)
			switch {
			case q.inferred == "NE":
				caption += ", estimator: the ratio of the two lines."
			case s.Estimator != "":
				caption += fmt.Sprintf(", phase-speed estimator %q.", s.Estimator)
			default:
				caption += "."
			}
		}
		if q.of != nil {
			ps = append(ps, panel{"inferred / truth", q.ratio, data(r.Verdict.Maps, q.ratio), ratioScale("ratio inferred / truth, logarithmic")})
			caption += fmt.Sprintf(" Ratio: %s on a logarithmic scale, symmetric about 1.", q.ratio)
			if q.of.Count > 0 {
				alt += fmt.Sprintf("; the ratio inferred over truth has the median %.2f, 16 to 84 per cent between %.2f and %.2f", q.of.Median, q.of.P16, q.of.P84)
			}
		}
		caption += fmt.Sprintf(" North is up, east left; solar X grows toward west. Solid circle: limb; dashed: inner edge of the field; mid grey: pixels of the field without a value. Colour bars end in an arrow where values lie beyond the scale. Pixel %s. Domain of the ratio: %s.", r.pixel(), r.domain())
		fs = append(fs, Figure{q.name, func(f Format) []byte { return mapFigure(f, v, ps, foot) }, alt + ".", caption})
	}
	for _, draw := range []func() (Figure, bool){
		func() (Figure, bool) { return r.direction(v, foot) },
		func() (Figure, bool) { return r.unwrapped(v, foot) },
		func() (Figure, bool) { return r.joints(foot) },
		func() (Figure, bool) { return r.profiles(v, foot) },
		func() (Figure, bool) { return r.parts(foot) },
		func() (Figure, bool) { return r.quality(v, foot) },
	} {
		if f, ok := draw(); ok {
			fs = append(fs, f)
		}
	}
	return append(fs, r.pixelFigures()...)
}

// good returns the values of a map at the valid pixels: a scale that serves them shows
// more than one that serves the noise around them. Without any it returns those of the
// field.
func (r *Report) good(m []float32) []float64 {
	if x := pick(m, r.Verdict.Valid); len(x) > 0 {
		return x
	}
	return r.values(m)
}

// values returns the values of a map in the field.
func (r *Report) values(m []float32) []float64 { return pick(m, r.Verdict.Field) }

// pick returns the values of a map, if there is one, at the pixels that count.
func pick(m []float32, pixels []bool) []float64 {
	if m == nil {
		return nil
	}
	var x []float64
	for i, in := range pixels {
		if in {
			x = append(x, float64(m[i]))
		}
	}
	return x
}

func nans(n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = math.NaN()
	}
	return x
}

// profiles draws medians and bands against height in steps fine enough to see
// the shape but no finer than two pixels.
func (r *Report) profiles(v *view, foot string) (Figure, bool) {
	perRadius := 100
	for _, n := range []int{50, 20, 10} {
		if 1/float64(perRadius) < 2*v.step {
			perRadius = n
		}
	}
	edges := compare.Edges(v.inner+v.step/2, v.outer-v.step/2, perRadius)
	n := len(edges) - 1
	heights := make([]float64, n)
	for i := range heights {
		heights[i] = (edges[i] + edges[i+1]) / 2
	}
	known := !math.IsNaN(float64(r.Verdict.Summary.Pixels.ValidFraction))
	in := make([][]int, n) // pixels by bin
	for i, field := range r.Verdict.Field {
		if !field || known && !r.Verdict.Valid[i] {
			continue
		}
		d, _ := r.Grid.Polar(i%r.Grid.Nx, i/r.Grid.Nx)
		if k := int((d - edges[0]) * float64(perRadius)); k >= 0 && k < n {
			in[k] = append(in[k], i)
		}
	}
	curveOf := func(m []float32, k key) *curve {
		if m == nil {
			return nil
		}
		c := curve{key: k, median: nans(n)}
		if k.band {
			c.lo, c.hi = nans(n), nans(n)
		}
		for i, pixels := range in {
			x := make([]float64, len(pixels))
			for j, p := range pixels {
				x[j] = float64(m[p])
			}
			if s := stat.Summarise(x); s.Count > 0 {
				c.median[i] = s.Median
				if k.band {
					c.lo[i], c.hi[i] = s.P16, s.P84
				}
			}
		}
		return &c
	}
	sky := key{"truth at the plane of the sky", stroke{ink, 4, nil}, true}
	inferred := key{"inferred", stroke{vermillion, 4, nil}, true}
	emission := key{"truth, emission-weighted", stroke{blue, 3.5, []float64{18, 9}}, true}
	wave := key{"truth, wave-weighted", stroke{green, 3.5, []float64{14, 7, 4, 7}}, true}
	total := key{"truth, total field", stroke{purple, 3.5, []float64{5, 7}}, true}
	any := false
	var ps []profile
	for _, q := range []struct {
		title, unit, inferred, ratio string
		log                          bool
		truths                       []string
		keys                         []key
	}{
		{"magnetic field", "G", "B", "B_RATIO", false, []string{"B_SKY", "B_EMIS", "B_WAVE", "BTOT_SKY"}, []key{sky, emission, wave, total}},
		{"phase speed", "km/s", "SPEED", "SPEED_RATIO", false, []string{"SPEED_SKY", "SPEED_WAVE"}, []key{sky, wave}},
		{"electron density", "cm⁻³", "NE", "NE_RATIO", true, []string{"NE_SKY", "NE_EMIS"}, []key{sky, emission}},
	} {
		p := profile{title: q.title, unit: q.unit, log: q.log}
		for i, name := range q.truths {
			if c := curveOf(data(r.Truth, name), q.keys[i]); c != nil {
				p.curves = append(p.curves, *c)
			}
		}
		if c := curveOf(data(r.Inferred, q.inferred), inferred); c != nil {
			p.curves = append(p.curves, *c)
			if data(r.Truth, q.truths[0]) != nil {
				p.ratio = curveOf(data(r.Verdict.Maps, q.ratio), inferred)
			}
		}
		if len(p.curves) > 0 {
			any = true
			ps = append(ps, p)
		}
	}
	if !any {
		return Figure{}, false
	}
	e := r.Verdict.Summary.Estimator
	if e != "" {
		e = fmt.Sprintf(" (phase-speed estimator %q)", e)
	}
	return Figure{
		Name: "profiles",
		Draw: func(f Format) []byte { return profileFigure(f, heights, [2]float64{edges[0], edges[n]}, ps, foot) },
		Alt:  "Height profiles of field, phase speed and density: truths and inferred values with bands from the 16th to the 84th percentile, and below them the ratio of inferred to true.",
		Caption: fmt.Sprintf("Height profiles: median of the pixels in steps of %.2g solar radii; bands, of the dashed truths between thin lines, run from the 16th to the 84th percentile. Black: truth at the plane of the sky (B_SKY [G], SPEED_SKY [km/s], NE_SKY [cm⁻³]); dashed and dotted: the other truths, weighted by emission (B_EMIS, NE_EMIS) or by wave power (B_WAVE, SPEED_WAVE), and the total field (BTOT_SKY); orange: inferred B, SPEED, NE%s. Below: inferred over the sky truth, pixel by pixel, on a logarithmic axis from 0.5 to 2. Domain: %s; truths over the same pixels.",
			1/float64(perRadius), e, r.domain()),
	}, true
}

// parts draws the identity by height bin.
func (r *Report) parts(foot string) (Figure, bool) {
	hs := r.Verdict.Summary.Heights
	n := len(hs)
	if n == 0 || r.Verdict.Summary.Identity.Field == nil {
		return Figure{}, false
	}
	heights, valid := make([]float64, n), make([]float64, n)
	get := func(k key, of func(*compare.LnParts) *stat.Summary) curve {
		c := curve{key: k, median: nans(n)}
		if k.band {
			c.lo, c.hi = nans(n), nans(n)
		}
		for i := range hs {
			if s := of(&hs[i].Identity); s != nil {
				c.median[i] = math.Exp(s.Median)
				if k.band {
					c.lo[i], c.hi[i] = math.Exp(s.P16), math.Exp(s.P84)
				}
			}
		}
		return c
	}
	for i, h := range hs {
		heights[i], valid[i] = float64(h.From+h.To)/2, float64(h.ValidFraction)
	}
	factors := []curve{
		get(key{"field: B / B_SKY", stroke{vermillion, 5, nil}, true}, func(p *compare.LnParts) *stat.Summary { return p.Field }),
		get(key{"speed: v / SPEED_SKY", stroke{blue, 3.5, []float64{18, 9}}, false}, func(p *compare.LnParts) *stat.Summary { return p.Speed }),
		get(key{"density: √(n / NE_SKY)", stroke{green, 3.5, []float64{14, 7, 4, 7}}, false}, func(p *compare.LnParts) *stat.Summary { return p.Density }),
		get(key{"composition: √(μ / μ true)", stroke{purple, 9, []float64{26, 8}}, false}, func(p *compare.LnParts) *stat.Summary {
			return &stat.Summary{Median: float64(p.Mu)}
		}),
		get(key{"density the wave feels: √(NE_SKY / NE_KINK)", stroke{orange, 3.5, []float64{5, 7}}, false}, func(p *compare.LnParts) *stat.Summary { return p.Kink }),
	}
	method := ""
	if r.Verdict.Summary.Identity.Method != nil {
		method = " The method alone, a factor of the speed's, is the same tracker on the same tracks where only the plane of the sky shines and there is no noise."
		factors = append(factors, get(key{"of the speed: method alone", stroke{ink, 3.5, []float64{3, 6}}, false}, func(p *compare.LnParts) *stat.Summary { return p.Method }))
	}
	e := r.Verdict.Summary.Estimator
	if e != "" {
		e = fmt.Sprintf("; phase-speed estimator %q", e)
	}
	return Figure{
		Name: "identity",
		Draw: func(f Format) []byte {
			return partsFigure(f, heights, [2]float64{float64(hs[0].From), float64(hs[n-1].To)}, factors, valid, foot)
		},
		Alt: "Left: the median factors of the field's bias against height: speed, square root of density, density that the wave feels, composition, and their product. Right: the fraction of valid pixels against height.",
		Caption: fmt.Sprintf("Where the bias comes from. Left: factors of B / B_SKY (pure numbers, logarithmic scale), median of each height bin; the band is the 16–84 %% range of the whole. Truths: B_SKY, SPEED_SKY, NE_SKY, NE_KINK%s. In each pixel B / B_SKY is the product of the four; medians of factors need not multiply exactly.%s Right: valid pixels over pixels of the field. Domain: %s.",
			e, method, r.domain()),
	}, true
}

// quality draws what the tracker had to work with.
func (r *Report) quality(v *view, foot string) (Figure, bool) {
	var ps []panel
	caption := "What the tracker had to work with."
	if m := data(r.Inferred, "DOPPLER_RMS"); m != nil {
		ps = append(ps, panel{"in-band Doppler rms", "DOPPLER_RMS", m, sharedScale("rms velocity [km/s]", false, nil, r.good(m))})
		caption += " DOPPLER_RMS [km/s]: rms of the band-passed Doppler velocity, noise variance subtracted."
		if t := data(r.Truth, "DOPPLER_LOCAL"); t != nil {
			q := make([]float32, len(m))
			for i := range q {
				q[i] = float32(math.NaN())
				if r.Verdict.Field[i] && t[i] > 0 {
					q[i] = m[i] / t[i]
				}
			}
			ps = append(ps, panel{"share left by the line of sight", "DOPPLER_RMS / DOPPLER_LOCAL", q, sharedScale("observed rms / local rms", false, nil, r.good(q))})
			caption += " Its share of the truth, the rms of the local in-band line-of-sight velocity at x = 0 (DOPPLER_LOCAL): what superposition along the line of sight leaves."
		}
	}
	if m := data(r.Inferred, "COHERENCE"); m != nil {
		ps = append(ps, panel{"coherence", "COHERENCE", m, &scale{lo: 0, hi: 1, table: &viridis, label: "coherence with the neighbours", ticks: linearTicks(0, 1, 5)}})
		caption += " COHERENCE (pure number, 0–1) of a pixel's series with those of its neighbours."
	}
	if len(ps) == 0 {
		return Figure{}, false
	}
	return Figure{
		Name: "quality", Draw: func(f Format) []byte { return mapFigure(f, v, ps, foot) },
		Alt:     "Maps of the in-band Doppler rms, its share of the local velocity, and the coherence, around the occulted solar disc, north up, east left.",
		Caption: caption + r.trackerText() + fmt.Sprintf(" Axes, circles and grey as in the other maps. Pixel %s. Domain: all pixels of the field.", r.pixel()),
	}, true
}

// trackerText names in the caption of quality whom its maps serve.
func (r *Report) trackerText() string {
	if e := r.Verdict.Summary.Estimator; e != "" {
		return fmt.Sprintf(" They serve the phase-speed estimator %q.", e)
	}
	return ""
}

type ratioRow struct {
	Quantity, Truth, Meaning  string
	Median, Interval          string
	P16, P84, P2_5, P97_5, Of string
}

func cell(v float64, decimals int) string {
	if math.IsNaN(v) {
		return "–"
	}
	return number(v, decimals)
}

// interval prints the 68 % interval of a median.
func interval(s *stat.Summary, decimals int) string {
	if s == nil || s.Interval == nil || math.IsNaN(s.Interval.Low) {
		return "–"
	}
	return cell(s.Interval.Low, decimals) + "–" + cell(s.Interval.High, decimals)
}

// exponential turns a summary of logarithms into one of ratios: quantiles go along.
func exponential(s *stat.Summary) *stat.Summary {
	if s == nil {
		return nil
	}
	e := stat.Summary{Median: math.Exp(s.Median), P2_5: math.Exp(s.P2_5), P16: math.Exp(s.P16), P84: math.Exp(s.P84), P97_5: math.Exp(s.P97_5), Count: s.Count}
	if i := s.Interval; i != nil {
		e.Interval = &stat.Interval{Low: math.Exp(i.Low), High: math.Exp(i.High), Blocks: i.Blocks}
	}
	return &e
}

func ratioRows(s *compare.Summary) (rows []ratioRow) {
	for _, q := range []struct {
		quantity, truth, meaning string
		of                       *stat.Summary
		decimals                 int
	}{
		{"B", "B_SKY", "field component in the plane of the sky, at the plane of the sky", s.Ratios.Field.Sky, 3},
		{"B", "B_EMIS", "the same, weighted by emission along the line of sight", s.Ratios.Field.Emission, 3},
		{"B", "B_WAVE", "the same, weighted by wave power", s.Ratios.Field.Wave, 3},
		{"B", "BTOT_SKY", "magnitude of the whole field vector at the plane of the sky", s.Ratios.Field.Total, 3},
		{"SPEED", "SPEED_SKY", "projected kink speed at the plane of the sky, without flow", s.Ratios.Speed.Sky, 3},
		{"SPEED", "SPEED_WAVE", "projected kink speed weighted by wave power", s.Ratios.Speed.Wave, 3},
		{"SPEED, one plane", "SPEED_SKY", "the method alone: same tracker and tracks, only the plane of the sky shines, no noise", exponential(s.Identity.Method), 3},
		{"NE", "NE_SKY", "electron density at the plane of the sky", s.Ratios.Density.Sky, 3},
		{"NE", "NE_EMIS", "electron density weighted by emission", s.Ratios.Density.Emission, 3},
		{"DOPPLER_RMS", "DOPPLER_LOCAL", "rms of the local line-of-sight velocity in the band", s.DopplerRMS, 3},
		{"|ANGLE − truth| [deg]", "ANGLE_SKY", "direction of the field on the sky; difference, not ratio", s.AngleError, 1},
	} {
		if q.of == nil {
			continue
		}
		d := q.decimals
		rows = append(rows, ratioRow{q.quantity, q.truth, q.meaning, cell(q.of.Median, d), interval(q.of, d), cell(q.of.P16, d), cell(q.of.P84, d), cell(q.of.P2_5, d), cell(q.of.P97_5, d), fmt.Sprint(q.of.Count)})
	}
	return rows
}

type heightRow struct {
	Range, Pixels                string
	Valid                        stat.Number
	B, BSky, Speed, SpeedSky     string
	NE, NESky                    string
	Field, FieldSpan, FieldBy    string
	SpeedRatio, SpeedSpan        string
	Density, DensitySpan, Angles string
}

func medianSpan(s *stat.Summary) (median, span string) {
	if s == nil || s.Count == 0 {
		return "–", ""
	}
	return cell(s.Median, 2), cell(s.P16, 2) + "–" + cell(s.P84, 2)
}

func heightRows(v *compare.Verdict) (rows []heightRow) {
	at := func(column string, i int) float64 {
		x, err := v.Heights.Floats(column)
		if err != nil {
			panic("report: " + err.Error())
		}
		return x[i]
	}
	for i, h := range v.Summary.Heights {
		row := heightRow{
			Range: fmt.Sprintf("%.2f–%.2f", h.From, h.To), Pixels: fmt.Sprint(h.Total), Valid: h.ValidFraction,
			B: cell(at("b", i), 2), BSky: cell(at("b_sky", i), 2),
			Speed: cell(at("speed", i), 0), SpeedSky: cell(at("speed_sky", i), 0),
			NE: units.Scientific(at("ne", i), 2), NESky: units.Scientific(at("ne_sky", i), 2), Angles: "–",
		}
		row.Field, row.FieldSpan = medianSpan(h.Ratios.Field.Sky)
		row.FieldBy = interval(h.Ratios.Field.Sky, 3)
		row.SpeedRatio, row.SpeedSpan = medianSpan(h.Ratios.Speed.Sky)
		row.Density, row.DensitySpan = medianSpan(h.Ratios.Density.Sky)
		if h.AngleError != nil {
			row.Angles = cell(h.AngleError.Median, 1)
		}
		rows = append(rows, row)
	}
	return rows
}

type structureRow struct {
	Name, Pixels                     string
	Valid                            stat.Number
	Field, FieldSpan, FieldBy        string
	Speed, SpeedSpan, Density, DSpan string
}

func structureRows(s *compare.Summary) (rows []structureRow) {
	for _, q := range []struct {
		name string
		of   *compare.Region
	}{{"open", s.Structure.Open}, {"closed", s.Structure.Closed}, {"near the sheet", s.Structure.NearSheet}, {"active region", s.Structure.ActiveRegion}} {
		if q.of == nil || q.of.Total == 0 {
			continue
		}
		row := structureRow{Name: q.name, Pixels: fmt.Sprint(q.of.Total), Valid: q.of.ValidFraction}
		row.Field, row.FieldSpan = medianSpan(q.of.Ratios.Field.Sky)
		row.FieldBy = interval(q.of.Ratios.Field.Sky, 3)
		row.Speed, row.SpeedSpan = medianSpan(q.of.Ratios.Speed.Sky)
		row.Density, row.DSpan = medianSpan(q.of.Ratios.Density.Sky)
		rows = append(rows, row)
	}
	return rows
}
