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
	"offplane/synth/camera"
	"offplane/synth/line"
)

// A Prediction is what maps of one design will be like.
type Prediction struct {
	Outcome
	Bins    []scatter
	Speed   float64 // random error of ln v, mean of squares over the pixels with a field
	Photons float64 // part of it that photons of the first line make
	Density float64 // random error of 1/2 ln n by photons of both lines
	Ratio   float64 // rms of noise over waves in the band, mean of squares over the region
	chance  Outcome // scatter of single maps
}

// A predictor predicts and simulates designs. What is costly is kept: field lines, waves of
// each size of pixel, laws of each recipe, light of each camera.
type predictor struct {
	l       *Loaded
	o       *Settings
	cadence float64           // longest of all designs [s]
	stills  map[string]*still // by size of pixel
	laws    map[string]*law
	light   map[string][]shine
	coronae map[string]*corona
}

// A corona is what the light of the target needs; its seed is the campaign's, whatever that
// of the waves is.
type corona struct {
	light synth.Light
	atom  line.Emitter // of the inversion
	model *model.Corona
}

// corona returns that of a scenario, with its field lines traced.
func (p *predictor) corona(ctx context.Context, s scenarios.Scenario) (*corona, error) {
	key := fmt.Sprint(s.Image.Pixel, camera.Reach(s.Camera, s.Image.Pixel.Rad()))
	if k := p.coronae[key]; k != nil {
		return k, nil
	}
	s.Seed = p.l.Seed
	k := &corona{}
	var err error
	if k.light, _, err = trial.Light(&s); err != nil {
		return nil, err
	}
	if k.atom, _, err = trial.Model("inversion.line", s.Inversion.Line, s.Inversion.Helium); err != nil {
		return nil, err
	}
	if k.model, err = synth.NewCorona(ctx, &s, k.light, p.o.Workers); err != nil {
		return nil, err
	}
	p.coronae[key] = k
	return k, nil
}

// scene returns that of a scenario.
func (p *predictor) scene(ctx context.Context, s *scenarios.Scenario) (*synth.Scene, *corona, error) {
	k, err := p.corona(ctx, *s)
	if err != nil {
		return nil, nil, err
	}
	c, err := synth.NewSceneAs(ctx, s, k.light, p.o.Workers, synth.Assume{Corona: k.model})
	return c, k, err
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
		if q, err = p.observe(ctx, *s); err != nil {
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
	radii := make([]float64, w.region.bins())
	for b := range radii {
		radii[b] = (w.region.from[b] + w.region.to[b]) / 2
	}
	x, err := p.shine(ctx, s, radii)
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
	var valid, all float64
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
			r.Ratio += n * ratio * ratio
			all += n
			n *= q.yield
			valid += n
			quiet := w.at(b, hours, 0, float64(s.Camera.Cadence)).random
			r.Speed += n * q.random * q.random
			r.Photons += n * max(0, q.random*q.random-quiet*quiet)
			r.Density += n * density * density
			q.random = math.Hypot(q.random, density)
		}
		r.Bins = append(r.Bins, q)
	}
	r.Ratio = math.Sqrt(r.Ratio / all)
	for _, v := range []*float64{&r.Speed, &r.Photons, &r.Density} {
		*v = math.Sqrt(*v / valid)
	}
	r.Outcome = mixture(r.Bins)
	r.chance = w.nearest(hours, r.Ratio)
	return r
}
