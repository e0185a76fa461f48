package synth

import (
	"context"
	"sync"

	"offplane/model"
	"offplane/scenarios"
	"offplane/synth/camera"
	"offplane/synth/obs"
)

// Assume is what a scene takes over from another one, and what it pretends: with it an
// error budget turns one assumption of the inversion at a time into the truth. The zero
// value assumes nothing.
type Assume struct {
	// Corona is used instead of one of the scene's own, if not nil. It must be that of the
	// same scenario but for what model.New does not read.
	Corona *model.Corona
	// Delay is a travel time [s] that the driver holds in any case, and trains that took
	// longer are left out; 0: the scene's own. Lead is a time within a frame [s] that it
	// holds. Scenes of one seed, cadence and duration see the same waves only if these two
	// agree.
	Delay, Lead float64
	// Projected: the disc excites every parcel of plasma as if it lay at the projected
	// distance of its line of sight.
	Projected bool
	// Bright, if not nil, makes a plane of the sky that alone emits as bright as its whole
	// line of sight, so that it has the same photon noise; it keeps the columns for other
	// scenes of the same corona and grid.
	Bright *Columns
}

// Columns holds how much brighter the lines of sight are than their sample in the plane
// of the sky, in the first line.
type Columns struct{ m sync.Map }

// column returns the length [cm] of the sample in the plane that would shine like the
// whole line of sight through (y, z).
func (c *Scene) column(centre *sample, y, z float64) (float64, error) {
	at := [2]float64{y, z}
	if x, ok := c.as.Bright.m.Load(at); ok {
		return x.(float64), nil
	}
	s := *c.s
	s.Sight.Plane = false
	deep := *c
	deep.s, deep.as = &s, Assume{}
	ray, err := deep.ray(y, z, nil)
	if err != nil {
		return 0, err
	}
	sum := 0.0
	for i := range ray {
		sum += ray[i].j[0] * ray[i].dx
	}
	x := sum / centre.j[0]
	c.as.Bright.m.Store(at, x)
	return x, nil
}

// Exposed is the light of a scene before it passes the camera's stages.
type Exposed struct {
	*development
	raw [2]*obs.Cube
}

// Expose makes the light and the truth of a scene; Develop makes observations of it.
func (c *Scene) Expose(ctx context.Context, workers int, progress func(done, total int)) (*Exposed, *Truth, error) {
	d := c.newDevelopment()
	w := d.newWindow([]strip{{litTo: len(d.lit)}})
	w.slide(0, len(d.lit))
	l := d.newLighting(workers, tile, progress)
	if err := l.shine(ctx, w, 0); err != nil {
		return nil, nil, err
	}
	return &Exposed{d, w.raw}, l.truth, nil
}

// develop takes the light through the camera's stages. It uses the light up.
func (e *Exposed) develop(ctx context.Context, workers int) (*obs.Observation, error) {
	w := &window{to: len(e.lit), raw: e.raw}
	if s := e.scatter(); s != nil {
		if err := w.scatter(ctx, s, workers); err != nil {
			return nil, err
		}
	}
	o, err := e.development.develop(ctx, w, 0, len(e.field), workers)
	if err != nil {
		return nil, err
	}
	return o, lit(o)
}

// Develop makes an observation with a camera that may have fewer stages than the
// scene's, but no others, and the same tunings, times and field of view. Without lost
// frames none is lost, whatever the camera says. The light can be used again.
func (e *Exposed) Develop(ctx context.Context, cam scenarios.Camera, lost bool, workers int) (*obs.Observation, error) {
	s := *e.c.s
	s.Camera = cam
	c := *e.c
	c.s = &s
	d := *e.development
	d.c, d.cam = &c, c.camera()
	if cam.Pointing == nil {
		for l := range d.moves {
			d.moves[l] = make([][]camera.Move, len(d.moves[l]))
		}
	}
	if !lost {
		plan := *d.plan
		for l := range plan.Lost {
			plan.Lost[l] = make([]bool, len(plan.Lost[l]))
		}
		d.plan = &plan
	}
	d.whole = d.head()
	n := Exposed{development: &d}
	for l, raw := range e.raw {
		n.raw[l] = raw
		if cam.Scatter != nil && raw.Frames > 0 { // scattering works in place
			copied := *raw
			copied.Data = append([]float32(nil), raw.Data...)
			n.raw[l] = &copied
		}
	}
	return n.develop(ctx, workers)
}

// Piece returns the k-th of n pieces of equal length of an observation that keeps its
// frames and has a whole number of frames of each line in each.
func Piece(o *obs.Observation, k, n int) *obs.Observation {
	p := *o
	p.Exposures = nil
	p.Grid.Duration /= float64(n)
	for l, c := range o.Frames {
		part := obs.NewCube(c.Pixels, c.Tunings, c.Frames/n)
		for i := range c.Pixels {
			for j := range c.Tunings {
				copy(part.Series(i, j), c.Series(i, j)[k*part.Frames:])
			}
		}
		p.Frames[l] = part
		p.Mean[l] = obs.Means(part)
		log := o.LineExposures(l + 1)[k*part.Frames:][:part.Frames]
		for f := range log {
			log[f].Frame = f
			log[f].Time -= float64(k) * o.Grid.Duration / float64(n)
		}
		p.Exposures = append(p.Exposures, log...)
	}
	return withoutDark(&p)
}

// Latest returns the latest time within a frame at which a scenario's camera exposes [s].
func Latest(s *scenarios.Scenario) float64 { return camera.Latest(s.Camera) }
