package plan

import (
	"context"
	"math"

	"offplane/compare/budget"
	"offplane/compare/trial"
	"offplane/invert"
	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/synth"
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

// A lamp keeps the light of the last design: designs that differ in what the camera makes
// of it alone share it.
type lamp struct {
	key   string
	light *synth.Exposed
	truth *synth.Truth
	atom  invertEmitter
}

// invertEmitter is the atomic model of the inversion.
type invertEmitter interface {
	Emissivities(n, t, r float64) (j1, j2 float64)
}

// simulate takes a design through the whole chain: one long observation in pieces, each
// as long as the design's. Seed addresses waves and noise.
func (l *Loaded) simulate(ctx context.Context, d *Design, trials int, seed uint64, last *lamp, o *Settings) (*Simulation, error) {
	s := d.scenario.Scenario
	s.Seed = random.Hash(seed, 0x747269616c) >> 11 // "trial"
	s.Camera = budget.Lasting(s.Camera, synth.Frames(&s), trials)
	if err := last.turn(ctx, s, o); err != nil {
		return nil, err
	}
	long, err := last.light.Develop(ctx, s.Camera, true, o.Workers)
	if err != nil {
		return nil, err
	}
	r := &Simulation{}
	var speed sample
	truth := last.truth.Maps
	sky, kink := truth.Get("B_SKY").Data, truth.Get("SPEED_SKY").Data
	for k := range trials {
		part := synth.Piece(long, k, trials)
		if k == 0 {
			if r.region, err = newRegion(&l.Target, long, truth); err != nil {
				return nil, err
			}
		}
		res, err := invert.Invert(ctx, part, last.atom, trial.Options(s.Inversion), o.Workers, nil)
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
		if one.margin(&l.Goal) >= 0 {
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

// turn makes the light of a scenario, unless it is the last one's.
func (m *lamp) turn(ctx context.Context, s scenarios.Scenario, o *Settings) error {
	dark := s
	c := &dark.Camera
	c.Noise, c.Aperture, c.Throughput, c.Exposure, c.Coadds = false, 1, 1, 0, 1
	c.ReadNoise, c.FullWell, c.Digit, c.FlatField, c.Background, c.KCorona = 0, 0, 0, 0, 0, 0
	if s.Camera.Diffraction {
		c.Aperture = s.Camera.Aperture // blurs
	}
	key := string(strict.Encode(dark))
	if key == m.key {
		return nil
	}
	light, _, err := trial.Light(&s)
	if err != nil {
		return err
	}
	if m.atom, _, err = trial.Model("inversion.line", s.Inversion.Line, s.Inversion.Helium); err != nil {
		return err
	}
	scene, err := synth.NewScene(ctx, &s, light, o.Workers)
	if err != nil {
		return err
	}
	m.key = ""
	if m.light, m.truth, err = scene.Expose(ctx, o.Workers, o.report("trials")); err != nil {
		return err
	}
	m.key = key
	return nil
}
