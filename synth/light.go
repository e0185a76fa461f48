package synth

import (
	"math"

	"offplane/synth/filter"
	"offplane/synth/kernel"
)

// A lamp adds up the light of the samples of a few neighbouring rays over the frames.
// It holds the scratch space of one worker.
type lamp struct {
	c      *Scene
	frames int
	second []int // frames at which the second line is exposed

	velocity []float32
	atSecond []float32
	rows     [][]float32
	coef     []float32
	delay    []float64
	trains   []train
	acc      [][2][][]float32 // ray, line, tuning, frame

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

func (c *Scene) newLamp(second []int, rays int) *lamp {
	l := &lamp{c: c, frames: Frames(c.s), second: second, acc: make([][2][][]float32, rays)}
	l.velocity = make([]float32, l.frames)
	l.atSecond = make([]float32, len(second))
	for i := range l.acc {
		for range c.tunings[0] {
			l.acc[i][0] = append(l.acc[i][0], make([]float32, l.frames))
			l.acc[i][1] = append(l.acc[i][1], make([]float32, len(second)))
		}
	}
	return l
}

// shine fills acc with the radiance [erg cm^-2 s^-1 sr^-1] of every ray through every
// tuning: the sum over samples of each sample's own Gaussian, shifted by its own
// velocity, through the filter. Nothing is expanded; the exponential of package
// kernel is good to 4e-7, and the velocity to wave.Tolerance.
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
	c := l.c
	l.move(s)
	for t, f := range l.second {
		l.atSecond[t] = l.velocity[f]
	}
	wf := c.filter
	for line := range 2 {
		v := l.velocity
		if line == 1 {
			v = l.atSecond
			wf *= c.light.Rest[0] / c.light.Rest[1] // one filter in nm is two in km/s
		}
		// Peak transmission times the share of the line that passes: filter.Gaussian at
		// the line's own centre.
		amp := s.j[line] * s.dx * filter.Gaussian(0, 0, s.width, wf)
		inv := float32(1 / math.Hypot(s.width, wf))
		for k, d := range c.tunings[line] {
			kernel.Profile(l.acc[i][line][k], v, float32(amp), float32(d), inv)
		}
	}
}

// move fills velocity with the Doppler velocity [km/s] of a sample at every frame: the
// sum over its trains, polarisations and the sites around their footpoints.
func (l *lamp) move(s *sample) {
	d := l.c.Driver
	n := d.RowLength()
	l.rows, l.coef = l.rows[:0], l.coef[:0]
	l.trains = l.c.trains(&s.point, s.azimuth, l.trains)
	for i := range l.trains {
		t := &l.trains[i]
		stretch := d.Stretch(t.tau)
		var at int
		l.delay, at = d.Coefficients(l.delay, stretch, t.tau, 0)
		for _, site := range d.Footpoint(t.colatitude, t.azimuth) {
			for pol, a := range s.los {
				k := a * t.factor * site.Weight
				if math.Abs(k) < 1e-6 { // [km/s]
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
	kernel.Combine(l.velocity, l.rows, l.coef)
}
