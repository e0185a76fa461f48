package invert

import (
	"context"
	"fmt"
	"math"
	"slices"

	"offplane/scenarios/units"
	"offplane/synth/line"
	"offplane/synth/obs"
)

// A Diagnosis holds what the inversion of one pixel went through. Positions are
// zero-based pixel coordinates of the image, distances along the track in km from the
// pixel, outward positive.
type Diagnosis struct {
	X, Y  int
	Flag  int32
	Maps  obs.Maps // of the inversion, filled at this pixel alone
	Times []float64
	// Series is the pixel's band-passed Doppler series [km/s].
	Series []float32

	// Island holds every pixel whose coherence with this one was asked for.
	Island       []IslandPixel
	Angle        float64 // of the axis, from +x to +y of the image [rad]; NaN: none
	Major, Minor float64 // rms extents along and across the axis [pixel]
	WindowFilled bool

	Track []TrackPoint // empty: no direction, or the track is too short
	Rise  float64      // gain in distance from the Sun over the track's length, 0 to 1
	// Time-distance maps of the band-passed Doppler shift [km/s], a row a track point:
	// the waves as they are, and what the separation makes of them.
	Waves, Outward, Inward [][]float32
	// Power of Waves in (wavenumber, frequency) [(km/s)^2], a row a wavenumber: a wave
	// away from the Sun has a positive one.
	Wavenumbers []float64 // [rad/km]
	Frequencies []float64 // [Hz]
	Power       [][]float64

	Estimates []Estimate
}

// An IslandPixel is a pixel near the one looked at.
type IslandPixel struct {
	X, Y      int
	Coherence float64
	Inside    bool // belongs to the island
}

// A TrackPoint is one point of a track.
type TrackPoint struct {
	X, Y     float64
	Distance float64 // along the track [km]
}

// An Estimate is what one estimator made of the track.
type Estimate struct {
	Name       string
	Speed, Err float64 // [km/s]; NaN: not significant
	// Lags and the line through them, lag = Slope distance + Intercept; none for Pair.
	Lags             []LagPoint
	Slope, Intercept float64 // [s/km, s]
	// Explained is the share of the power that a pair of waves of a speed explains, for
	// Pair alone.
	Explained []Explained
	Inward    float64 // share of the inward waves in the power, for Pair alone; NaN: not known
}

// A LagPoint is the lag of a point of the track against the pixel.
type LagPoint struct{ Distance, Lag, Weight float64 } // [km, s]

// Explained is a point of the curve that Pair maximises.
type Explained struct{ Speed, Share float64 } // [km/s]

// finest is how many wavenumbers there are to a point of the track.
const finest = 4

// Diagnose inverts as Invert does, and tells how it came to the values of the pixel of
// that raster index.
func Diagnose(ctx context.Context, o *obs.Observation, e line.Emitter, opt Options, pixel, workers int) (*Diagnosis, error) {
	r, err := newRun(o, e, opt)
	if err != nil {
		return nil, err
	}
	near, err := r.around(pixel)
	if err != nil {
		return nil, err
	}
	if err := r.steps(ctx, workers, nil, r.spectrum); err != nil {
		return nil, err
	}
	if err := r.removeTrend(ctx, workers); err != nil {
		return nil, err
	}
	if err := r.steps(ctx, workers, nil, r.normalise, near[0], near[1], near[2]); err != nil {
		return nil, err
	}
	return r.diagnose(r.newWorker(), pixel), nil
}

// trackReach is how far directions are needed for the track of a pixel and those that
// tell its error [pixels].
func (o *Options) trackReach() int { return o.Track/2 + 2 + swayReach + angleLattice }

// around returns the steps between those of the series and measure for one pixel alone.
func (r *run) around(pixel int) (steps [3]func(w *worker, q int), err error) {
	nx := r.grid.Nx
	if pixel < 0 || pixel >= nx*r.grid.Ny || r.index[pixel] < 0 {
		return steps, fmt.Errorf("pixel (%d, %d) is outside the observed field", pixel%nx+1, pixel/nx+1)
	}
	px, py := pixel%nx, pixel/nx
	within := func(reach int, step func(w *worker, q int)) func(w *worker, q int) {
		return func(w *worker, q int) {
			if x, y := r.at(q); max(x-px, px-x) <= reach && max(y-py, py-y) <= reach {
				step(w, q)
			}
		}
	}
	far := r.opt.trackReach()
	return [3]func(w *worker, q int){within(far, r.direct), within(far, r.swing), within(swayReach, r.sway)}, nil
}

// diagnose tells of a pixel of the field whose surroundings have directions.
func (r *run) diagnose(w *worker, pixel int) *Diagnosis {
	p, nx := int(r.index[pixel]), r.grid.Nx
	d := &Diagnosis{X: pixel % nx, Y: pixel / nx, Angle: math.NaN(), Maps: r.result.Maps}
	for i := range r.band.frames {
		d.Times = append(d.Times, float64(i)*r.band.cadence)
	}
	d.Series = slices.Clone(r.result.Series.Series(p, 0))
	if r.norm[p] > 0 {
		d.island(r, w, p)
	}
	r.measure(w, p)
	for i := range d.Maps { // directions filled the neighbours' too
		for j := range d.Maps[i].Data {
			if j != pixel {
				d.Maps[i].Data[j] = float32(math.NaN())
			}
		}
	}
	r.finish()
	d.Flag = r.flag[p]
	if d.Flag&FlagTrackShort == 0 && r.axis[p] != ([2]float32{}) {
		d.track(r, w, p)
	}
	return d
}

func (d *Diagnosis) island(r *run, w *worker, p int) {
	s := w.islands
	island := s.adapt(p)
	if island.count >= leastIsland && !island.round() {
		d.Angle = island.angle
	}
	d.Major, d.Minor, d.WindowFilled = island.major, island.minor, island.full()
	row, nf := r.band.row, len(r.band.freq)
	a := r.spec[p*row : (p+1)*row]
	for k, state := range s.state {
		x, y := d.X+int(s.dx[k]), d.Y+int(s.dy[k])
		q := r.find(x, y)
		if state == 0 || s.outside[k] != 0 || q < 0 || r.norm[q] == 0 {
			continue
		}
		b := r.spec[q*row : (q+1)*row]
		var re, im float64
		for j := range nf {
			re += float64(a[j])*float64(b[j]) + float64(a[nf+j])*float64(b[nf+j])
			im += float64(a[j])*float64(b[nf+j]) - float64(a[nf+j])*float64(b[j])
		}
		g := math.Hypot(re, im)
		d.Island = append(d.Island, IslandPixel{X: x, Y: y, Coherence: g, Inside: g > r.opt.Coherence})
	}
}

func (d *Diagnosis) track(r *run, w *worker, p int) {
	t := &w.track
	centre, rise := t.trace(p, r.opt.Track/2)
	n := len(t.points)
	d.Rise = rise
	step := r.grid.Step() * units.SolarRadius / 1e5
	for i, q := range t.points {
		d.Track = append(d.Track, TrackPoint{q.x, q.y, float64(i-centre) * step})
	}
	rows := t.sample()
	maps := func(rows []float32) (out [][]float32) {
		for i := range n {
			s := make([]float32, r.band.frames)
			w.transform.backward(rows[i*r.band.row:(i+1)*r.band.row], s)
			out = append(out, s)
		}
		return out
	}
	d.Waves = maps(rows)
	rising := w.lags.rising(rows, n)
	falling := w.lags.falling(rows, rising, n)
	d.Outward, d.Inward = maps(rising), maps(falling)
	d.power(r.band, rows, n, step)
	w.noise = r.noise(p)
	for i, e := range w.estimators {
		m := e.measure(w, rows, n, centre, rise >= leastRise)
		x := Estimate{Name: r.opt.Estimators[i], Speed: m.v, Err: m.err, Inward: m.inward}
		if !m.ok || !(m.v > 0) {
			x.Speed, x.Err = math.NaN(), math.NaN()
		}
		if x.Name == Pair {
			x.Explained = w.pairs.curve(n)
		} else {
			if x.Name == Lag && r.opt.Separation { // the last fit was that of the inward waves
				w.lags.speed(rising, n, centre)
			}
			for _, q := range w.lags.fit {
				x.Lags = append(x.Lags, LagPoint{q.s, q.tau, q.weight})
			}
			slices.SortFunc(x.Lags, func(a, b LagPoint) int { return int(math.Copysign(1, a.Distance-b.Distance)) })
			if len(x.Lags) >= leastLags {
				x.Slope, x.Intercept, _, _ = straight(w.lags.fit)
			}
		}
		d.Estimates = append(d.Estimates, x)
	}
}

// power fills the spectrum in wavenumber and frequency.
func (d *Diagnosis) power(b *band, rows []float32, n int, step float64) {
	d.Frequencies = slices.Clone(b.freq)
	nf := len(b.freq)
	m := finest * n
	// 2 |c|^2/frames^2 is the power of a frequency of a series.
	scale := 2 / (float64(b.frames) * float64(b.frames) * b.kept * float64(n) * float64(n))
	for k := -(m / 2); k <= m/2; k++ {
		kk := 2 * math.Pi * float64(k) / (float64(m) * step)
		out := make([]float64, nf)
		for j := range out {
			var re, im float64
			for i := range n {
				s, c := math.Sincos(kk * float64(i) * step) // exp(-i omega t) for a spectrum: an outward wave has exp(-i k s)
				x, y := float64(rows[i*b.row+j]), float64(rows[i*b.row+nf+j])
				re += c*x - s*y
				im += c*y + s*x
			}
			out[j] = scale * (re*re + im*im)
		}
		d.Wavenumbers, d.Power = append(d.Wavenumbers, kk), append(d.Power, out)
	}
}

// curve returns the share of the power that slownesses explain, of the track that fit
// saw last.
func (q *pairer) curve(n int) []Explained {
	m := (n + 1) / 2
	total := 0.0
	for i := 0; i < len(q.bins)*m*4; i++ {
		weight := 0.5 // of sums and differences of two points
		if n%2 == 1 && i%(4*m) < 4 {
			weight = 1
		}
		total += weight * q.fold[i] * q.fold[i]
	}
	var out []Explained
	const finer = 4
	for g := finer * q.grid; g >= 1; g-- {
		p := q.dp * float64(g) / finer
		out = append(out, Explained{Speed: 1 / p, Share: q.explain(p, n, m, q.power[0]) / total})
	}
	return out
}
