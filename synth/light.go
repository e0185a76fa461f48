package synth

import (
	"math"
	"slices"

	"offplane/scenarios/units"
	"offplane/synth/camera"
	"offplane/synth/filter"
	"offplane/synth/kernel"
)

// lightSpeed in km/s.
const lightSpeed = units.LightSpeed / kms

// A lamp adds up the light of the samples of a few neighbouring rays over the frames.
// It holds the scratch space of one worker.
type lamp struct {
	c      *Scene
	frames int
	second []int // frames at which the second line is exposed

	// The moments within a frame at which anything is exposed [s], and which of them is
	// that of a line and tuning.
	leads []float64
	lead  [2][]int

	velocity [][]float32 // lead, frame
	atSecond []float32
	rows     [][]float32
	coef     []float32
	delay    []float64
	trains   []train
	acc      [][2][][]float32 // ray, line, tuning, frame

	// For more than one lead: rows and coefficients of each, sums over the sites.
	parts   [][][]float32
	weights [][]float32
	at      []int
	sums    [][]float32

	lyot   [2]filter.Birefringent // without stages: unused
	series []float64
	cosine []float32

	// memo remembers the rows that this worker used last, to spare it the driver's
	// shared cache.
	memo [4096]struct {
		key  rowKey
		rows []float32
	}
}

// A rowKey addresses the rows of the driver.
type rowKey struct {
	site              uint64
	pol, dir, stretch int
}

func (l *lamp) rowsOf(k rowKey) []float32 {
	m := &l.memo[(k.site*0x9e3779b97f4a7c15+uint64(k.stretch*4+k.pol*2+k.dir)*0xbf58476d1ce4e5b9)>>52]
	if m.rows == nil || m.key != k {
		m.key, m.rows = k, l.c.Driver.Rows(k.site, k.pol, k.dir, k.stretch)
	}
	return m.rows
}

func (c *Scene) newLamp(plan *camera.Schedule, rays int) *lamp {
	l := &lamp{c: c, frames: Frames(c.s), second: plan.Second, acc: make([][2][][]float32, rays)}
	for line := range 2 {
		for _, t := range plan.Delay {
			if line == 1 {
				t += plan.After
			}
			k := slices.Index(l.leads, t)
			if k < 0 {
				k = len(l.leads)
				l.leads = append(l.leads, t)
				l.velocity = append(l.velocity, make([]float32, l.frames))
			}
			l.lead[line] = append(l.lead[line], k)
		}
	}
	l.parts, l.weights = make([][][]float32, len(l.leads)), make([][]float32, len(l.leads))
	l.at = make([]int, len(l.leads))
	l.atSecond = make([]float32, len(l.second))
	for i := range l.acc {
		for range c.tunings[0] {
			l.acc[i][0] = append(l.acc[i][0], make([]float32, l.frames))
			l.acc[i][1] = append(l.acc[i][1], make([]float32, len(l.second)))
		}
	}
	if n := c.s.Camera.Stages; n > 0 {
		for line := range 2 {
			l.lyot[line] = filter.NewBirefringent(n, float64(c.s.Camera.Filter)*lightSpeed/c.light.Rest[line])
		}
	}
	return l
}

// shine fills acc with the radiance [erg cm^-2 s^-1 sr^-1] of every ray through every
// tuning: the sum over samples of each sample's own Gaussian, shifted by its own
// velocity at each tuning's own time, through the filter. Nothing is expanded; the
// functions of package kernel are good to 2e-6, and the velocity to wave.Tolerance.
//
// The loop over depth is outside and that over rays inside, so that neighbours find
// the driver's rows in the cache; each ray adds its samples from back to front.
func (l *lamp) shine(rays [][]sample) {
	back, front := 0, 0 // samples behind and before the plane of the sky
	plane := make([]int, len(rays))
	for i, r := range rays {
		for line := range 2 {
			for _, a := range l.acc[i][line] {
				clear(a)
			}
		}
		for r[plane[i]].x < 0 {
			plane[i]++
		}
		back, front = max(back, plane[i]), max(front, len(r)-plane[i])
	}
	for k := -back; k < front; k++ {
		for i, r := range rays {
			if q := plane[i] + k; q >= 0 && q < len(r) {
				l.add(i, &r[q])
			}
		}
	}
}

// add adds the light of one sample to that of ray i.
func (l *lamp) add(i int, s *sample) {
	if len(l.leads) == 1 {
		l.move(s)
	} else {
		l.moveApart(s)
	}
	l.emit(i, s)
}

// emit adds the light of a sample that moves with the velocities.
func (l *lamp) emit(i int, s *sample) {
	c := l.c
	wf := c.filter
	for line := range 2 {
		if line == 1 {
			wf *= c.light.Rest[0] / c.light.Rest[1] // one filter in nm is two in km/s
		}
		energy := s.j[line] * s.dx
		// Peak transmission times the share of the line that passes: filter.Gaussian at
		// the line's own centre.
		amp := energy * filter.Gaussian(0, 0, s.width, wf)
		inv := float32(1 / math.Hypot(s.width, wf))
		if c.s.Camera.Stages > 0 {
			l.series = l.lyot[line].Series(l.series, s.width)
			l.cosine = l.cosine[:0]
			for _, x := range l.series {
				l.cosine = append(l.cosine, float32(energy*x))
			}
			inv = float32(1 / l.lyot[line].Period)
		}
		gathered := -1
		for k, d := range c.tunings[line] {
			d -= s.flow
			v := l.velocity[l.lead[line][k]]
			if line == 1 {
				if gathered != l.lead[line][k] {
					for t, f := range l.second {
						l.atSecond[t] = v[f]
					}
					gathered = l.lead[line][k]
				}
				v = l.atSecond
			}
			if c.s.Camera.Stages > 0 {
				kernel.Cosines(l.acc[i][line][k], v, l.cosine, float32(d), inv)
			} else {
				kernel.Profile(l.acc[i][line][k], v, float32(amp), float32(d), inv)
			}
		}
	}
}

// darkVelocity is the amplitude [km/s] below which a site's motion is left out.
const darkVelocity = 1e-6

// move fills velocity with the Doppler velocity [km/s] of a sample at every frame: the
// sum over its trains, polarisations and the sites around their footpoints.
func (l *lamp) move(s *sample) {
	d := l.c.Driver
	n := d.RowLength()
	l.rows, l.coef = l.rows[:0], l.coef[:0]
	l.trains = l.c.trains(&s.point, l.trains)
	for i := range l.trains {
		t := &l.trains[i]
		stretch := d.Stretch(t.tau)
		var at int
		l.delay, at = d.Coefficients(l.delay, stretch, t.tau, l.leads[0])
		for _, site := range d.Footpoint(t.colatitude, t.azimuth) {
			for pol, a := range s.los {
				k := a * t.factor * site.Weight
				if math.Abs(k) < darkVelocity {
					continue
				}
				rows := l.rowsOf(rowKey{site.ID, pol, t.dir, stretch})
				for r, x := range l.delay {
					l.rows = append(l.rows, rows[r*n+at:r*n+at+l.frames])
					l.coef = append(l.coef, float32(k*x))
				}
			}
		}
	}
	kernel.Combine(l.velocity[0], l.rows, l.coef)
}

// moveApart is move for more than one lead. The sum over sites and polarisations of
// each row comes first: it is the same for all leads.
func (l *lamp) moveApart(s *sample) {
	d := l.c.Driver
	n := d.RowLength()
	for k := range l.leads {
		l.parts[k], l.weights[k] = l.parts[k][:0], l.weights[k][:0]
	}
	used := 0
	l.trains = l.c.trains(&s.point, l.trains)
	for i := range l.trains {
		t := &l.trains[i]
		stretch := d.Stretch(t.tau)
		for k, lead := range l.leads {
			l.delay, l.at[k] = d.Coefficients(l.delay, stretch, t.tau, lead)
			for _, x := range l.delay {
				l.weights[k] = append(l.weights[k], float32(x))
			}
		}
		ranks := len(l.delay)
		first := slices.Min(l.at)
		span := slices.Max(l.at) - first + l.frames
		l.rows, l.coef = l.rows[:0], l.coef[:0]
		for _, site := range d.Footpoint(t.colatitude, t.azimuth) {
			for pol, a := range s.los {
				k := a * t.factor * site.Weight
				if math.Abs(k) < darkVelocity {
					continue
				}
				l.rows = append(l.rows, l.rowsOf(rowKey{site.ID, pol, t.dir, stretch}))
				l.coef = append(l.coef, float32(k))
			}
		}
		whole := len(l.rows)
		for r := range ranks {
			for _, rows := range l.rows[:whole] {
				l.rows = append(l.rows, rows[r*n+first:r*n+first+span])
			}
			if used == len(l.sums) {
				l.sums = append(l.sums, make([]float32, 0, l.frames+64))
			}
			l.sums[used] = slices.Grow(l.sums[used][:0], span)[:span]
			kernel.Combine(l.sums[used], l.rows[whole:], l.coef)
			l.rows = l.rows[:whole]
			for k, at := range l.at {
				l.parts[k] = append(l.parts[k], l.sums[used][at-first:at-first+l.frames])
			}
			used++
		}
	}
	for k, v := range l.velocity {
		kernel.Combine(v, l.parts[k], l.weights[k])
	}
}
