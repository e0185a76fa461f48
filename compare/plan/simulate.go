package plan

import (
	"context"
	"math"

	"offplane/compare/budget"
	"offplane/compare/trial"
	"offplane/invert"
	"offplane/synth"
	"offplane/synth/line"
	"offplane/synth/obs"
	"offplane/synth/random"
)

// A Simulation is what realisations of one design through the whole chain gave.
type Simulation struct {
	Outcome        // mean over the realisations
	Maps    sample // errors of ln B
	Each    []Outcome
	Speed   []scatter // of ln(v/SPEED_SKY), by bin
	region  region
	Met     int // realisations that met the goal
}

// An exposure is the light of many observations of one design, one after the other, before
// it passes the camera: designs that differ in photons alone can share it.
type exposure struct {
	light  *synth.Exposed
	truth  obs.Maps
	atom   line.Emitter
	trials int
}

// expose makes the light of a design, as long as all of its trials. Seed addresses waves
// and noise.
func (p *predictor) expose(ctx context.Context, d *Design, trials int, seed uint64) (*exposure, error) {
	s := d.scenario.Scenario
	s.Seed = random.Hash(seed, 0x747269616c) >> 11 // "trial"
	s.Camera = budget.Lasting(s.Camera, synth.Frames(&s), trials)
	scene, k, err := p.scene(ctx, &s)
	if err != nil {
		return nil, err
	}
	light, truth, err := scene.Expose(ctx, p.o.Workers, p.o.report("trials"))
	if err != nil {
		return nil, err
	}
	return &exposure{light, truth.Maps, k.atom, trials}, nil
}

// simulate takes a design through the whole chain.
func (p *predictor) simulate(ctx context.Context, d *Design, trials int, seed uint64) (*Simulation, error) {
	e, err := p.expose(ctx, d, trials, seed)
	if err != nil {
		return nil, err
	}
	return p.try(ctx, d, e)
}

// try makes observations of the light and inverts them.
func (p *predictor) try(ctx context.Context, d *Design, e *exposure) (*Simulation, error) {
	s := d.scenario.Scenario
	long, err := e.light.Develop(ctx, budget.Lasting(s.Camera, synth.Frames(&s), e.trials), true, p.o.Workers)
	if err != nil {
		return nil, err
	}
	r := &Simulation{}
	if r.region, err = newRegion(&p.l.Target, long, e.truth); err != nil {
		return nil, err
	}
	var speed sample
	sky, kink := e.truth.Get("B_SKY").Data, e.truth.Get("SPEED_SKY").Data
	for k := range e.trials {
		part := synth.Piece(long, k, e.trials)
		res, err := invert.Invert(ctx, part, e.atom, trial.Options(s.Inversion), p.o.Workers, nil)
		if err != nil {
			return nil, err
		}
		// Pixels that saturate are in no piece.
		at := map[int32]int{}
		for i, p := range part.Pixels {
			at[p] = i
		}
		b, v := make([]float64, len(r.region.pixels)), make([]float64, len(r.region.pixels))
		for i, q := range r.region.pixels {
			p := long.Pixels[q]
			b[i], v[i] = math.NaN(), math.NaN()
			if _, ok := at[p]; ok {
				b[i] = math.Log(float64(res.Maps.Get("B").Data[p]) / float64(sky[p]))
				v[i] = math.Log(float64(res.Maps.Get("SPEED").Data[p]) / float64(kink[p]))
			}
		}
		r.Maps, speed = append(r.Maps, b), append(speed, v)
		one := outcome(b)
		r.Each = append(r.Each, one)
		if one.margin(&p.l.Goal) >= 0 {
			r.Met++
		}
	}
	r.Outcome = mean(r.Each)
	r.Speed = r.region.scatters(speed)
	return r, nil
}

func mean(os []Outcome) (m Outcome) {
	for _, q := range []struct {
		to *float64
		of func(*Outcome) float64
	}{
		{&m.Random, func(o *Outcome) float64 { return o.Random }},
		{&m.Systematic, func(o *Outcome) float64 { return o.Systematic }},
		{&m.Yield, func(o *Outcome) float64 { return o.Yield }},
	} {
		n := 0.0
		for i := range os {
			if x := q.of(&os[i]); !math.IsNaN(x) {
				*q.to += x
				n++
			}
		}
		*q.to /= n
	}
	return m
}
