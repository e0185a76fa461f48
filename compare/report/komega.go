package report

import (
	"cmp"
	"fmt"
	"image"
	"image/color"
	"math"
	"slices"

	"gonum.org/v1/plot/text"

	"offplane/compare/explain"
)

// pixelFigures draws the pixel that stands for the run.
func (r *Report) pixelFigures() []Figure {
	p := r.Pixel
	if p == nil {
		return nil
	}
	e := ""
	if len(p.Estimators) > 0 {
		e = p.Estimators[0].Name
	}
	where := fmt.Sprintf("the one pixel (%d, %d) at %.3f solar radii and position angle %.1f°, whose bias is near the median", p.Place.X, p.Place.Y, p.Place.Height, p.Place.PA)
	fs := []Figure{{
		Name: "pixel", Draw: func(f Format) []byte { return PixelFigure(p, f) },
		Alt: "One pixel: emission, wave power, density and field along its line of sight; Doppler shift along its track against time; lags against distance; causes of its bias.",
		Caption: fmt.Sprintf("A pixel that stands for the run. Left, along its line of sight: shares of the two lines' emission and of the wave power [1/R☉], electron density [cm⁻³], component of the field in the plane of the sky [G]; dashed: inferred. Right: Doppler shift [km/s] along the track, and the lags [s] against distance [Mm] with their fit (for an estimator that fits no lags, the share of the power it explains); dashed: truth SPEED_WAVE [km/s], dotted: 250 and 1000 km/s. Below: the causes of the bias against the truth B_SKY, as factors. Phase-speed estimator %q. Domain: %s.",
			e, where),
	}}
	if k := &p.Curves.KOmega; len(k.Power) > 1 && len(k.Frequency) > 1 {
		fs = append(fs, Figure{
			Name: "komega", Draw: func(f Format) []byte { return kOmegaFigure(p, f) },
			Alt: "Power of the Doppler shift on the track of that pixel against wavenumber and frequency, with lines of constant phase speed, and the spectra of outward and inward waves.",
			Caption: fmt.Sprintf("Waves on the track of the same pixel. Left: power of the band-passed Doppler shift against wavenumber [rad/Mm], positive outward, and frequency [mHz], over its peak, on a logarithmic scale; lines of constant phase speed: inferred SPEED (phase-speed estimator %q), truth SPEED_WAVE, and 250, 500 and 1000 km/s. Right: the same power summed over outward and over inward wavenumbers [km²/s²]. Domain: %s.",
				e, where),
		})
	}
	return fs
}

// kOmegaFigure draws the power on a track.
func kOmegaFigure(p *explain.Pixel, f Format) []byte {
	const left, y, wide, high = 165.0, 290.0, 1100, 640
	c := newCanvas(f, figureWidth, 1050)
	w := wavesOf(&p.Curves.KOmega)
	a := &axes{c: c, x: left, y: y, w: wide, h: high, xlo: -w.reach, xhi: w.reach, ylo: w.f[0], yhi: w.f[len(w.f)-1]}
	s := &scale{lo: 1e-4, hi: 1, log: true, table: &viridis, label: "power over its peak, logarithmic", ticks: logTicks(1e-4, 1)}
	m := image.NewRGBA(image.Rect(0, 0, wide, high))
	var drawn []float32
	for px := range wide {
		k := a.xlo + (float64(px)+0.5)/wide*(a.xhi-a.xlo)
		for py := range high {
			at := a.yhi - (float64(py)+0.5)/high*(a.yhi-a.ylo)
			colour := noValue
			power := w.at(k, at)
			drawn = append(drawn, float32(power))
			if t := s.norm(power); !math.IsNaN(t) {
				colour = s.colour(t)
			}
			m.SetRGBA(px, py, colour)
		}
	}
	c.blit(left, y, m)
	line := func(v float64, k stroke) { // f = v k / 2 pi; Mm/s * rad/Mm is 1e3 mHz
		if v != 0 && !math.IsNaN(v) {
			k0, k1 := 2*math.Pi*a.ylo/v, 2*math.Pi*a.yhi/v
			a.line(k, []float64{k0, k1}, []float64{a.ylo, a.yhi}, false)
		}
	}
	for _, v := range []float64{250, 500, 1000} {
		line(v, stroke{paper, 2, []float64{5, 7}})
		line(-v, stroke{paper, 2, []float64{5, 7}})
		c.text(a.px(-2*math.Pi*a.yhi/v)-8, y+high-20, fmt.Sprint(v), textStyle{size: small - 3, colour: paper, x: text.XRight, y: text.YCenter})
	}
	inferred, truth := stroke{paper, 5, nil}, stroke{vermillion, 5, []float64{14, 8}}
	line(float64(p.Inferred.Speed), inferred)
	line(float64(p.Truth.SpeedWave), truth)
	a.decorate(linearTicks(a.xlo, a.xhi, 7), linearTicks(a.ylo, a.yhi, 6), "wavenumber, outward positive [rad/Mm]", "frequency [mHz]")
	c.colourBar(int(left)+100, 92, wide-200, s, []panel{{data: drawn, scale: s}})
	c.text(left, y+high+36, fmt.Sprintf("inferred %.0f km/s (full), true %.0f km/s (dashed), 250, 500, 1000 km/s (dotted)", p.Inferred.Speed, p.Truth.SpeedWave), textStyle{size: small, y: text.YCenter})

	top := slices.Max(append(slices.Clone(w.out), w.in...))
	b := &axes{c: c, x: 1500, y: y, w: 640, h: high, xlo: a.ylo, xhi: a.yhi, ylo: top * 1e-4, yhi: top * 1.5, ylog: true}
	bt := logTicks(b.ylo, b.yhi)
	b.grid(bt)
	out, in := stroke{blue, 4, nil}, stroke{orange, 4, []float64{18, 9}}
	b.line(out, w.f, w.out, false)
	b.line(in, w.f, w.in, false)
	b.decorate(linearTicks(b.xlo, b.xhi, 5), bt, "frequency [mHz]", "power [km²/s²]")
	c.legend(b.x, y+high+36, []key{{label: "outward", stroke: out}, {label: "inward", stroke: in}})
	return c.encode([]*table{s.table}, []color.RGBA{vermillion, blue, orange, faint, grey})
}

// waves is the power on a track in order of wavenumber.
type waves struct {
	k, f    []float64 // [rad/Mm], [mHz], ascending
	power   [][]float64
	peak    float64
	reach   float64   // of the wavenumbers that are drawn
	out, in []float64 // power by frequency
}

// wavesOf sorts the power; what lies far beyond the peak is not drawn.
func wavesOf(q *explain.KOmega) *waves {
	const highest = 8.0 // [mHz]
	w := &waves{}
	for _, f := range floats(q.Frequency) {
		if f <= highest {
			w.f = append(w.f, f)
		}
	}
	order := make([]int, len(q.Wavenumber))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int { return cmp.Compare(q.Wavenumber[a], q.Wavenumber[b]) })
	w.out, w.in = make([]float64, len(w.f)), make([]float64, len(w.f))
	for _, i := range order {
		k, row := float64(q.Wavenumber[i]), floats(q.Power[i])[:len(w.f)]
		w.k, w.power = append(w.k, k), append(w.power, row)
		for j, x := range row {
			if w.peak = max(w.peak, x); k > 0 {
				w.out[j] += x
			} else if k < 0 {
				w.in[j] += x
			}
		}
	}
	for i, row := range w.power {
		if slices.Max(row) > 1e-2*w.peak {
			w.reach = max(w.reach, 1.2*math.Abs(w.k[i]))
		}
	}
	return w
}

// at returns the power over its peak at the nearest wavenumber and frequency.
func (w *waves) at(k, f float64) float64 {
	near := func(xs []float64, x float64) int {
		i, _ := slices.BinarySearch(xs, x)
		if i == len(xs) || i > 0 && x-xs[i-1] < xs[i]-x {
			i--
		}
		return i
	}
	return w.power[near(w.k, k)][near(w.f, f)] / w.peak
}
