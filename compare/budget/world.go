package budget

import (
	"context"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/compare/trial"
	"offplane/invert"
	"offplane/model"
	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth"
	"offplane/synth/line"
	"offplane/synth/obs"
	"offplane/synth/parallel"
)

// Values of one state, of each piece and pixel of the field: natural logarithms. A
// state that takes the pieces as one observation has one piece.
type values struct {
	speed   [][]float32 // ln(v/SPEED_SKY)
	density [][]float32 // 1/2 ln(n/NE_KINK): the density that was found, over that which the wave feels
}

// A world makes states and inverts them.
type world struct {
	ctx     context.Context
	o       Settings
	base    state // the scenario as it is, for as long as all pieces
	frames  int   // of the first line in a piece
	light   synth.Light
	grid    obs.Grid
	pixels  []int32   // of the field
	heights []float64 // of these [solar radii]
	warmth  []float64 // temperature at the plane of the sky [K]
	coronae map[parts]*model.Corona
	columns map[parts]*synth.Columns
	delay   float64         // of all drivers [s]
	atoms   [2]line.Emitter // of the inversion, of the corona

	done, total int // lights
}

// Undamped waves that took longer [s] than longestDelay are left out of every state. A
// driver for a shorter delay than shortestDelay has too few frequencies.
const (
	longestDelay  = 12 * 3600
	shortestDelay = 3600
)

func newWorld(ctx context.Context, l *scenarios.Loaded, o Settings) (*world, error) {
	s := l.Scenario
	w := &world{ctx: ctx, o: o, frames: synth.Frames(&s), coronae: map[parts]*model.Corona{}, columns: map[parts]*synth.Columns{}}
	var err error
	if w.light, _, err = trial.Light(&s); err != nil {
		return nil, err
	}
	if w.atoms[0], _, err = trial.Model("inversion.line", s.Inversion.Line, s.Inversion.Helium); err != nil {
		return nil, err
	}
	if w.atoms[1], _, err = trial.Model("line", s.Line, s.Corona.Helium); err != nil {
		return nil, err
	}
	s.Camera = Lasting(s.Camera, w.frames, o.Pieces)
	w.base = state{scenario: s, camera: s.Camera, lost: true}
	w.grid = synth.NewGrid(&s, w.light.Rest[0])
	w.pixels = synth.Field(&w.grid, &s)
	if len(w.pixels) == 0 {
		return nil, fmt.Errorf("image: the centre of no pixel lies in the field of view")
	}
	k, err := w.coronaOf(s)
	if err != nil {
		return nil, err
	}
	view := model.NewView(s.Observer.Latitude.Rad(), s.Observer.Longitude.Rad())
	for _, p := range w.pixels {
		y, z := w.grid.Sky(int(p)%w.grid.Nx, int(p)/w.grid.Nx)
		w.heights = append(w.heights, math.Hypot(y, z))
		q := k.At(view.ToSun(r3.Vec{Y: y, Z: z}))
		w.warmth = append(w.warmth, q.T)
	}
	// Every state holds the longest travel time of undamped waves, in slower coronae too,
	// so that all see the same waves.
	w.delay = 1.2*k.LongestDelay(s.Waves.FarEnd, s.Waves.Inward > 0) + 60
	w.delay = max(min(w.delay, longestDelay), shortestDelay)
	return w, nil
}

// Lasting returns the camera for a run of so many pieces, each as long as the frames.
// The drift of the pointing is that of one piece, spread over all.
func Lasting(c scenarios.Camera, frames, pieces int) scenarios.Camera {
	piece := c.Cadence * units.Duration(frames)
	gaps := c.Gaps
	c.Duration = piece * units.Duration(pieces)
	c.SecondLine = pieces * min(c.SecondLine, frames)
	c.Blocks *= pieces
	c.Gaps = nil
	for k := range pieces {
		for _, g := range gaps {
			g.From += piece * units.Duration(k)
			c.Gaps = append(c.Gaps, g)
		}
	}
	if c.Pointing != nil {
		p := *c.Pointing
		p.DriftX /= units.SkyAngle(pieces)
		p.DriftY /= units.SkyAngle(pieces)
		c.Pointing = &p
	}
	return c
}

// report tells how far the work is; share is that of the light being made.
func (w *world) report(share float64) {
	const fine = 1000
	if w.o.Progress != nil {
		w.o.Progress("budget", int(fine*(float64(w.done)+share)), fine*w.total)
	}
}

// parts tells the coronae of the states apart: which of mix, strands and flows they have.
type parts [3]bool

func partsOf(c *scenarios.Corona) parts {
	return parts{c.Mix != nil, c.Strands != nil, c.Outflow != nil || c.Rotation != nil}
}

// coronaOf returns the corona of a state, for whole lines of sight if the scenario has
// them.
func (w *world) coronaOf(s scenarios.Scenario) (*model.Corona, error) {
	key := partsOf(&s.Corona)
	if k := w.coronae[key]; k != nil {
		return k, nil
	}
	s.Sight.Plane = w.base.scenario.Sight.Plane
	k, err := synth.NewCorona(w.ctx, &s, w.light, w.o.Workers)
	w.coronae[key] = k
	if !s.Sight.Plane {
		w.columns[key] = new(synth.Columns)
	}
	return k, err
}

// expose makes the light of a state.
func (w *world) expose(st *state) (*synth.Exposed, obs.Maps, error) {
	s := &st.scenario
	k, err := w.coronaOf(*s)
	if err != nil {
		return nil, nil, err
	}
	scene, err := synth.NewSceneAs(w.ctx, s, w.light, w.o.Workers, synth.Assume{
		Corona: k, Delay: w.delay, Lead: synth.Latest(&w.base.scenario), Projected: st.projected, Bright: w.columns[partsOf(&s.Corona)],
	})
	if err != nil {
		return nil, nil, err
	}
	e, truth, err := scene.Expose(w.ctx, w.o.Workers, func(done, total int) { w.report(float64(done) / float64(total)) })
	if err != nil {
		return nil, nil, err
	}
	return e, truth.Maps, nil
}

// grouped calls f once for each group of sets that are the same in mask, with the sets
// of the group, all ascending.
func grouped(sets []Set, mask Set, f func(key Set, group []Set) error) error {
	groups := map[Set][]Set{}
	var keys []Set
	for _, s := range sets {
		k := s & mask
		if groups[k] == nil {
			keys = append(keys, k)
		}
		groups[k] = append(groups[k], s)
	}
	slices.Sort(keys)
	for _, k := range keys {
		if err := f(k, groups[k]); err != nil {
			return err
		}
	}
	return nil
}

func lights(sets []Set, ps []player) int {
	n := 0
	grouped(sets, mask(ps, raw), func(Set, []Set) error { n++; return nil })
	return n
}

// waves takes sets of the wave game through the whole chain: one light for those that
// differ only behind it, one development for those that differ only in how the frames
// are cut.
func (w *world) waves(ps []player, sets []Set) (map[Set]*values, error) {
	out := map[Set]*values{}
	err := grouped(sets, mask(ps, raw), func(key Set, group []Set) error {
		e, truth, err := w.expose(stateOf(&w.base, ps, key))
		if err != nil {
			return err
		}
		err = grouped(group, mask(ps, camera), func(key Set, group []Set) error {
			st := stateOf(&w.base, ps, key)
			o, err := e.Develop(w.ctx, st.camera, st.lost, w.o.Workers)
			if err != nil {
				return err
			}
			for _, s := range group {
				if out[s], err = w.invert(o, truth, stateOf(&w.base, ps, s).whole); err != nil {
					return err
				}
			}
			return nil
		})
		w.done++
		w.report(0)
		return err
	})
	return out, err
}

func (w *world) invert(o *obs.Observation, truth obs.Maps, whole bool) (*values, error) {
	pieces := []*obs.Observation{o}
	if !whole {
		pieces = pieces[:0]
		for k := range w.o.Pieces {
			pieces = append(pieces, synth.Piece(o, k, w.o.Pieces))
		}
	}
	v := &values{}
	for _, p := range pieces {
		r, err := invert.Invert(w.ctx, p, w.atoms[0], trial.Options(w.base.scenario.Inversion), w.o.Workers, nil)
		if err != nil {
			return nil, err
		}
		speed, density := w.ln(r.Maps.Get("SPEED"), truth.Get("SPEED_SKY"), 1), w.ln(r.Maps.Get("NE"), truth.Get("NE_KINK"), 0.5)
		for i := range speed { // a pixel has a field or nothing
			if x := speed[i] + density[i]; x != x {
				speed[i], density[i] = x, x
			}
		}
		v.speed, v.density = append(v.speed, speed), append(v.density, density)
	}
	return v, nil
}

// ln returns times the logarithm of the ratio of two maps over the field, NaN where
// either has no positive value.
func (w *world) ln(a, b *obs.Map, times float64) []float32 {
	out := make([]float32, len(w.pixels))
	for i, p := range w.pixels {
		out[i] = float32(math.NaN())
		if x := times * math.Log(float64(a.Data[p])/float64(b.Data[p])); !math.IsInf(x, 0) {
			out[i] = float32(x)
		}
	}
	return out
}

// still returns 1/2 ln(n/NE_KINK) over the field for sets of the light game: lines
// without waves and noise.
func (w *world) still(ps []player, sets []Set) (map[Set][]float32, error) {
	base := w.base
	base.scenario.Waves.Amplitude = 0
	for _, c := range []*scenarios.Camera{&base.scenario.Camera, &base.camera} {
		c.Duration, c.SecondLine, c.Blocks = c.Cadence, 1, 1
		c.Sequential, c.Switching, c.Brightening = false, "together", 0
		c.Noise, c.FlatField, c.Digit, c.FullWell = false, 0, 0, 0
		c.Gaps = nil
		if c.Pointing != nil {
			p := *c.Pointing
			p.DriftX, p.DriftY = 0, 0
			c.Pointing = &p
		}
	}
	base.lost = false
	out := map[Set][]float32{}
	err := grouped(sets, mask(ps, raw), func(key Set, group []Set) error {
		e, truth, err := w.expose(stateOf(&base, ps, key))
		if err != nil {
			return err
		}
		err = grouped(group, mask(ps, camera), func(key Set, group []Set) error {
			o, err := e.Develop(w.ctx, stateOf(&base, ps, key).camera, false, w.o.Workers)
			if err != nil {
				return err
			}
			ratio, err := w.ratio(o)
			if err != nil {
				return err
			}
			for _, s := range group {
				st := stateOf(&base, ps, s)
				n, err := w.density(ratio, st.warm, st.atoms)
				if err != nil {
					return err
				}
				out[s] = w.ln(n, truth.Get("NE_KINK"), 0.5)
			}
			return nil
		})
		w.done++
		w.report(0)
		return err
	})
	return out, err
}

// ratio returns the ratio of the lines that the inversion finds in the mean profiles of
// an observation. It needs a series too: one at rest.
func (w *world) ratio(o *obs.Observation) (*obs.Map, error) {
	rest := *o
	rest.Frames = [2]*obs.Cube{obs.NewCube(len(o.Pixels), 1, w.frames), nil}
	rest.Exposures = nil
	for f := range w.frames {
		e := o.LineExposures(1)[0]
		e.Frame, e.Time = f, float64(w.base.camera.Cadence)*float64(f)
		rest.Exposures = append(rest.Exposures, e)
	}
	rest.Exposures = append(rest.Exposures, o.LineExposures(2)...)
	r, err := invert.Invert(w.ctx, &rest, w.atoms[0], trial.Options(w.base.scenario.Inversion), w.o.Workers, nil)
	if err != nil {
		return nil, err
	}
	return r.Maps.Get("RATIO"), nil
}

// density turns a map of the ratio into one of the density: at the temperature that the
// inversion assumes or, warm, at that of the plane of the sky; with the inversion's
// atomic data or the corona's own.
func (w *world) density(ratio *obs.Map, warm, own bool) (*obs.Map, error) {
	e := w.atoms[0]
	if own {
		e = w.atoms[1]
	}
	assumed := w.base.scenario.Inversion.Temperature.Kelvin()
	fast, err := line.NewInverter(e, assumed, slices.Min(w.heights), slices.Max(w.heights))
	if err != nil {
		return nil, err
	}
	m := &obs.Map{Data: make([]float32, len(ratio.Data))}
	return m, parallel.For(w.ctx, len(w.pixels), w.o.Workers, func(_, i int) error {
		p := w.pixels[i]
		x := float64(ratio.Data[p])
		var n float64
		if warm && !w.likely(i) {
			n, _, _ = line.Density(e, x, w.warmth[i], w.heights[i]) // NaN where there is none
		} else {
			n, _, _ = fast.Density(x, w.heights[i])
		}
		m.Data[p] = float32(n)
		return nil
	})
}

// likely reports whether the temperature that the inversion assumes is that of a pixel.
func (w *world) likely(i int) bool {
	return math.Abs(w.warmth[i]/w.base.scenario.Inversion.Temperature.Kelvin()-1) < 1e-9
}
