package synth

import (
	"math"
	"slices"

	"offplane/scenarios/units"
	"offplane/synth/camera"
	"offplane/synth/filter"
	"offplane/synth/kernel"
	"offplane/synth/wave"
)

// lightSpeed in km/s.
const lightSpeed = units.LightSpeed / kms

// A lamp adds up the light of the samples of neighbouring rays over the frames. It holds
// the scratch space of one worker.
type lamp struct {
	c      *Scene
	frames int
	second []int // frames at which the second line is exposed

	// The moments within a frame at which anything is exposed [s], and which of them is
	// that of a line and tuning.
	leads []float64
	lead  [2][]int

	waves    *wave.Bundle
	trains   []train
	atSecond []float32
	groups   []beam
	glow     [2]glow

	lyot   [2]filter.Birefringent // without stages: unused
	series []float64
}

// A beam is the light of kernel.Rays rays by line and tuning, frame by frame.
type beam [2][][]float32

// A glow is how the samples of a batch shine in a line: either a Gaussian or a sum of
// cosines of the velocity from a tuning.
type glow struct {
	amp, inv, flow [kernel.Lanes]float32
	cosine         []float32 // points
	period         float32   // inverse
}

func (c *Scene) newLamp(plan *camera.Schedule) *lamp {
	l := &lamp{c: c, frames: Frames(c.s), second: plan.Second}
	for line := range 2 {
		for _, t := range plan.Delay {
			if line == 1 {
				t += plan.After
			}
			k := slices.Index(l.leads, t)
			if k < 0 {
				k = len(l.leads)
				l.leads = append(l.leads, t)
			}
			l.lead[line] = append(l.lead[line], k)
		}
	}
	l.waves = c.Driver.NewBundle(l.leads)
	l.atSecond = make([]float32, len(l.second)*kernel.Lanes)
	if n := c.s.Camera.Stages; n > 0 {
		for line := range 2 {
			l.lyot[line] = filter.NewBirefringent(n, float64(c.s.Camera.Filter)*lightSpeed/c.light.Rest[line])
			l.glow[line].period = float32(1 / l.lyot[line].Period)
		}
	}
	return l
}

// dark returns n groups without light.
func (l *lamp) dark(n int) []beam {
	for len(l.groups) < n {
		var g beam
		for range l.c.tunings[0] {
			g[0] = append(g[0], make([]float32, l.frames*kernel.Rays))
			g[1] = append(g[1], make([]float32, len(l.second)*kernel.Rays))
		}
		l.groups = append(l.groups, g)
	}
	for _, g := range l.groups[:n] {
		for line := range g {
			for _, a := range g[line] {
				clear(a)
			}
		}
	}
	return l.groups[:n]
}

// A batch is two samples of every ray of a group; nil: none.
type batch [kernel.Lanes]*sample

// shine makes the radiance [erg cm^-2 s^-1 sr^-1] of neighbouring rays through every
// tuning: the sum over samples of each sample's own Gaussian, shifted by
// its own velocity at each tuning's own time, through the filter. Nothing is expanded;
// the functions of package kernel are good to 2e-6.
//
// The loop over depth is outside and that over rays inside, so that neighbours find
// the driver's spectra in the cache; each ray adds its samples from back to front.
func (l *lamp) shine(rays [][]sample) {
	groups := l.dark((len(rays) + kernel.Rays - 1) / kernel.Rays)
	back, front := 0, 0 // samples behind and before the plane of the sky
	plane := make([]int, len(rays))
	for i, r := range rays {
		for r[plane[i]].x < 0 {
			plane[i]++
		}
		back, front = max(back, plane[i]), max(front, len(r)-plane[i])
	}
	for k := -(back + 1) &^ 1; k < front; k += 2 {
		for g := range groups {
			var b batch
			lit := false
			first := g * kernel.Rays
			for i, r := range rays[first:min(first+kernel.Rays, len(rays))] {
				for side := range 2 {
					if q := plane[first+i] + k + side; q >= 0 && q < len(r) {
						b[side*kernel.Rays+i] = &r[q]
						lit = true
					}
				}
			}
			if lit {
				l.move(&b)
				l.emit(groups[g], &b)
			}
		}
	}
}

// move gives every lane the waves of its sample.
func (l *lamp) move(b *batch) {
	l.waves.Clear()
	for i, s := range b {
		if s == nil {
			continue
		}
		l.trains = l.c.trains(&s.point, l.trains)
		for n, t := range l.trains {
			l.waves.Add(i, n, t.colatitude, t.azimuth, t.dir, t.tau, [2]float64{s.los[0] * t.factor, s.los[1] * t.factor})
		}
	}
}

// emit adds the light of the samples that move with the waves.
func (l *lamp) emit(to beam, b *batch) {
	for line := range 2 {
		l.kindle(line, b)
	}
	for lead := range l.leads {
		l.expose(to, lead, l.waves.Velocity(lead))
	}
}

// kindle prepares how the samples shine in a line.
func (l *lamp) kindle(line int, b *batch) {
	c, g := l.c, &l.glow[line]
	*g = glow{cosine: g.cosine[:0], period: g.period}
	wf := c.filter
	if line == 1 {
		wf *= c.light.Rest[0] / c.light.Rest[1] // one filter in nm is two in km/s
	}
	for i, s := range b {
		if s == nil {
			continue
		}
		g.flow[i] = float32(s.flow)
		energy := s.j[line] * s.dx
		if c.s.Camera.Stages == 0 {
			// Peak transmission times the share of the line that passes: filter.Gaussian at
			// the line's own centre.
			g.amp[i] = float32(energy * filter.Gaussian(0, 0, s.width, wf))
			g.inv[i] = float32(1 / math.Sqrt(s.width*s.width+wf*wf))
			continue
		}
		l.series = l.lyot[line].Series(l.series, s.width)
		for m, x := range l.series {
			if m*kernel.Lanes == len(g.cosine) {
				g.cosine = append(g.cosine, make([]float32, kernel.Lanes)...)
			}
			g.cosine[m*kernel.Lanes+i] = float32(energy * x)
		}
	}
}

// expose adds the light of the samples through all tunings that are exposed at a lead,
// when they move with v.
func (l *lamp) expose(to beam, lead int, v []float32) {
	for line := range 2 {
		if line == 1 && slices.Contains(l.lead[1], lead) {
			for t, f := range l.second {
				copy(l.atSecond[t*kernel.Lanes:(t+1)*kernel.Lanes], v[f*kernel.Lanes:])
			}
			v = l.atSecond
		}
		for k, at := range l.lead[line] {
			if at == lead {
				l.filter(to, line, k, v)
			}
		}
	}
}

// filter adds the light of the samples through one tuning.
func (l *lamp) filter(to beam, line, tuning int, v []float32) {
	g := &l.glow[line]
	offset := float32(l.c.tunings[line][tuning])
	var d [kernel.Lanes]float32
	for i, flow := range g.flow {
		d[i] = offset - flow
	}
	switch {
	case l.c.s.Camera.Stages == 0:
		kernel.Profile(to[line][tuning], v, &g.amp, &d, &g.inv)
	case len(g.cosine) > 0:
		kernel.Cosines(to[line][tuning], v, g.cosine, &d, g.period)
	}
}

// take copies the light of up to kernel.Rays rays, of a group, through a tuning into
// their series.
func (l *lamp) take(series [][]float32, group, line, tuning int) {
	a := l.groups[group][line][tuning]
	for t := range len(a) / kernel.Rays {
		point := (*[kernel.Rays]float32)(a[t*kernel.Rays:])
		for i, s := range series {
			s[t] = point[i]
		}
	}
}
