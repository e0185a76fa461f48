package plan

import (
	"context"
	"fmt"
	"math"

	"offplane/compare/trial"
	"offplane/model"
	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth"
	"offplane/synth/line"
)

// A Prediction is what maps of one design will be like.
type Prediction struct {
	Outcome
	Bins    []scatter
	Speed   float64 // random error of ln v, mean of squares over the region
	Photons float64 // part of it that photons of the first line make
	Density float64 // random error of 1/2 ln n by photons of both lines
	Ratio   float64 // rms of noise over waves in the band, mean of squares
	chance  Outcome // scatter of single maps
}

// A predictor predicts designs. What is costly is kept: waves of each size of pixel,
// laws of each recipe, light of each camera.
type predictor struct {
	l       *Loaded
	o       *Settings
	cadence float64           // longest of all designs [s]
	stills  map[string]*still // by size of pixel, as coronae
	laws    map[string]*law
	light   map[string][]shine
	coronae map[string]*corona
}

// A corona is what the light of one size of pixel needs.
type corona struct {
	light  synth.Light
	atom   line.Emitter
	corona *model.Corona
}

func newPredictor(l *Loaded, o *Settings, ds []Design) *predictor {
	p := &predictor{l: l, o: o, stills: map[string]*still{}, laws: map[string]*law{}, light: map[string][]shine{}, coronae: map[string]*corona{}}
	for i := range ds {
		if ds[i].Refuse == "" {
			p.cadence = max(p.cadence, float64(ds[i].scenario.Scenario.Camera.Cadence))
		}
	}
	return p
}

// An If changes the circumstances of a prediction.
type If struct {
	Background float64 // factor
	Amplitude  float64 // of the waves, factor; the width of the line is left as it is
	Duration   float64 // factor
	Dark       [2]bool // photons of this line are without number
}

var asItIs = If{Background: 1, Amplitude: 1, Duration: 1}

// law returns what the recipe of a design makes of the waves.
func (p *predictor) law(ctx context.Context, s *scenarios.Scenario) (*law, error) {
	v := &s.Inversion
	key := fmt.Sprint(s.Image.Pixel, v.Box, v.Track)
	if w := p.laws[key]; w != nil {
		return w, nil
	}
	q := p.stills[s.Image.Pixel.String()]
	if q == nil {
		var err error
		if q, err = p.l.observe(ctx, *s, p.o); err != nil {
			return nil, err
		}
		p.stills[s.Image.Pixel.String()] = q
	}
	r, err := p.l.newReference(ctx, *v, q, p.o)
	if err != nil {
		return nil, err
	}
	w, err := r.learnLaw(ctx, p.cadence)
	if err != nil {
		return nil, err
	}
	p.laws[key] = w
	return w, nil
}

// shines returns the light of a design in the middle of each bin.
func (p *predictor) shines(ctx context.Context, s scenarios.Scenario, w *law) ([]shine, error) {
	// Time does not matter to one frame.
	c := &s.Camera
	key := fmt.Sprint(s.Image.Pixel, c.Tunings, c.Exposure, c.Coadds, c.Aperture, c.Background, c.ReadNoise, c.Digit, c.FullWell, s.Waves.Amplitude)
	if x := p.light[key]; x != nil {
		return x, nil
	}
	k := p.coronae[s.Image.Pixel.String()]
	if k == nil {
		k = &corona{}
		var err error
		if k.light, _, err = trial.Light(&s); err != nil {
			return nil, err
		}
		if k.atom, _, err = trial.Model("inversion.line", s.Inversion.Line, s.Inversion.Helium); err != nil {
			return nil, err
		}
		if k.corona, err = synth.NewCorona(ctx, &s, k.light, p.o.Workers); err != nil {
			return nil, err
		}
		p.coronae[s.Image.Pixel.String()] = k
	}
	radii := make([]float64, w.region.bins())
	for b := range radii {
		radii[b] = (w.region.from[b] + w.region.to[b]) / 2
	}
	x, err := shines(ctx, s, k.light, k.atom, k.corona, radii, p.o.Workers)
	if err != nil {
		return nil, err
	}
	p.light[key] = x
	return x, nil
}

// predict predicts a design.
func (p *predictor) predict(ctx context.Context, d *Design, as If) (*Prediction, error) {
	s := d.scenario.Scenario
	w, err := p.law(ctx, &s)
	if err != nil {
		return nil, err
	}
	s.Camera.Background *= units.Brightness(as.Background)
	x, err := p.shines(ctx, s, w)
	if err != nil {
		return nil, err
	}
	frames := float64(synth.Frames(&s)) * as.Duration
	hours := frames * float64(s.Camera.Cadence) / 3600
	second := math.Min(float64(s.Camera.SecondLine), float64(synth.Frames(&s))) * as.Duration
	return w.predict(x, &s, hours, frames, second, as), nil
}

func (w *law) predict(x []shine, s *scenarios.Scenario, hours, frames, second float64, as If) *Prediction {
	r := &Prediction{}
	var weight float64
	for b, y := range x {
		ratio := y.doppler * math.Sqrt(2*float64(s.Camera.Cadence)*w.band) / (w.signal[b] * as.Amplitude)
		if as.Dark[0] {
			ratio, y.energy[0] = 0, 0
		}
		if as.Dark[1] {
			y.energy[1] = 0
		}
		q := w.at(b, hours, ratio, float64(s.Camera.Cadence))
		density := y.slope / 2 * math.Sqrt(y.energy[0]*y.energy[0]/frames+y.energy[1]*y.energy[1]/second)
		if y.full || math.IsNaN(density) || math.IsNaN(q.random) {
			q.yield = 0
		} else {
			n := float64(q.pixels)
			weight += n
			quiet := w.at(b, hours, 0, float64(s.Camera.Cadence)).random
			r.Speed += n * q.random * q.random
			r.Photons += n * max(0, q.random*q.random-quiet*quiet)
			r.Density += n * density * density
			r.Ratio += n * ratio * ratio
			q.random = math.Hypot(q.random, density)
		}
		r.Bins = append(r.Bins, q)
	}
	for _, v := range []*float64{&r.Speed, &r.Photons, &r.Density, &r.Ratio} {
		*v = math.Sqrt(*v / weight)
	}
	r.Outcome = mixture(r.Bins)
	r.chance = w.nearest(hours, r.Ratio)
	return r
}
