package explain

import (
	"math"
	"strings"

	"offplane/invert"
	"offplane/scenarios/units"
	"offplane/synth"
	"offplane/synth/obs"
	"offplane/synth/random"
)

// mm is one Mm in km.
const mm = 1e3

// follow fills in what the tracker did: track, estimators, curves.
func (s *Session) follow(p *Pixel, v *synth.Sight, d *invert.Diagnosis, i int) error {
	t := &p.Track
	*t = Track{Length: Number(nan), Inner: Number(nan), Outer: Number(nan), Wavelengths: Number(nan), True: Number(nan), Rise: Number(nan), Off: Number(nan), Elongation: Number(nan)}
	for k, name := range s.options.Estimators {
		suffix := ""
		if k > 0 {
			suffix = "_" + strings.ToUpper(name)
		}
		e := Estimator{Name: name, Plane: Number(nan), Path: Number(nan), OnePlane: Number(nan)}
		if k == 0 && s.onePlane != nil {
			e.OnePlane = single(s.onePlane[i])
		}
		e.Speed, e.SpeedErr, e.Field = s.value("SPEED"+suffix, i), s.value("SPEED_ERR"+suffix, i), s.value("B"+suffix, i)
		p.Estimators = append(p.Estimators, e)
	}
	if d == nil {
		return nil
	}
	p.Curves.Doppler = Doppler{curve(d.Times), curve(d.Series)}
	for _, q := range d.Island {
		p.Curves.Island = append(p.Curves.Island, Member{q.X + 1, q.Y + 1, curve([]float64{q.Coherence})[0], q.Inside})
		if q.Inside {
			t.Island++
		}
	}
	t.Elongation, t.Filled = Number(d.Major/d.Minor), d.WindowFilled
	n := len(d.Track)
	if n < 2 {
		return nil
	}
	w := s.walk(d, v.FlowSpeed)
	centre, step := w.centre, w.step
	length := step * float64(n-1)
	t.Points, t.Rise, t.Off = n, Number(d.Rise), Number(w.off)
	t.Length, t.Inner, t.Outer = Number(length/mm), Number(step*float64(centre)/mm), Number(step*float64(n-1-centre)/mm)
	t.Wavelengths = Number(length * s.options.Centre / float64(p.Inferred.Speed))
	t.True = Number(length * s.options.Centre / float64(p.Truth.SpeedWave))
	s.curves(p, d, w)
	return s.method(p, v, d, w)
}

// value returns the value of an inferred map at a pixel.
func (s *Session) value(name string, i int) Number {
	if m := s.Inferred.Get(name); m != nil && m.Data != nil {
		return single(m.Data[i])
	}
	return Number(nan)
}

// A walk is the track through the true corona.
type walk struct {
	step     float64   // [km]
	centre   int       // index of the pixel
	speed    []float64 // SPEED_WAVE [km/s]
	offs     []float64 // angle between track and field [deg]
	off      float64   // its mean
	straight []float64 // arrival times [s] of a wave at one speed along the track,
	path     []float64 // and of one at the true speeds, along the field
}

// walk follows the track: at each point the true speed of the waves and the direction of
// the field in the plane of the sky. v is the speed at the pixel itself [km/s].
func (s *Session) walk(d *invert.Diagnosis, v float64) *walk {
	n := len(d.Track)
	w := &walk{step: s.Grid.Step() * units.SolarRadius / 1e5}
	at := func(m *obs.Map, x, y float64) float64 {
		ix, iy := int(math.Round(x)), int(math.Round(y))
		if ix < 0 || iy < 0 || ix >= s.Grid.Nx || iy >= s.Grid.Ny {
			return nan
		}
		return float64(m.Data[iy*s.Grid.Nx+ix])
	}
	speed, angle := s.Truth.Get("SPEED_WAVE"), s.Truth.Get("ANGLE_SKY")
	last, lastOff := nan, 0.0
	for i, q := range d.Track {
		if q.Distance == 0 {
			w.centre = i
		}
		a, b := d.Track[max(i-1, 0)], d.Track[min(i+1, n-1)]
		// Angle of the track from north, counter-clockwise.
		pa := math.Atan2(b.Y-a.Y, b.X-a.X)*180/math.Pi + s.Grid.Roll - 90
		if x := at(angle, q.X, q.Y); !math.IsNaN(x) {
			lastOff = math.Abs(fold(pa - x))
		}
		if x := at(speed, q.X, q.Y); !math.IsNaN(x) {
			last = x
		}
		w.speed, w.offs = append(w.speed, last), append(w.offs, lastOff)
		w.off += lastOff / float64(n)
	}
	for i := n - 1; i > 0; i-- { // before the first pixel with a truth
		if math.IsNaN(w.speed[i-1]) {
			w.speed[i-1] = w.speed[i]
		}
	}
	w.straight, w.path = make([]float64, n), make([]float64, n)
	scale := v / w.speed[w.centre] // flow, which the map leaves out
	for i := 1; i < n; i++ {
		w.straight[i] = w.straight[i-1] + w.step/v
		half := 0.0
		for _, k := range []int{i - 1, i} {
			half += math.Cos(w.offs[k]*math.Pi/180) / (w.speed[k] * scale) / 2
		}
		w.path[i] = w.path[i-1] + w.step*half
	}
	return w
}

// method measures what each estimator makes of a plane wave on the track, without noise
// or line of sight: one speed, straight along the track, and with the true speeds and
// directions along it.
func (s *Session) method(p *Pixel, v *synth.Sight, d *invert.Diagnosis, w *walk) error {
	c := &s.Scenario.Scenario
	frames, cadence := len(d.Times), s.cadence
	tau := v.Samples[v.Sky].Point.Line.Tau[0]
	q := invert.PlaneWave{Step: w.step, Centre: w.centre, Outward: d.Flag&invert.FlagUndirected == 0,
		Power: func(f float64) float64 { return s.scene.Driver.Power(f, tau) }}
	if x := v.Inward; x > 0 && x < 1 {
		q.Inward = x / (1 - x)
	}
	measure := func(arrivals []float64, set func(e *Estimator, v float64)) error {
		q.Arrivals = arrivals
		normal := random.At(c.Seed, uint64(d.X), uint64(d.Y)).Normal
		vs, err := q.Measure(s.options, frames, cadence, normal)
		if err != nil {
			return err
		}
		for i, x := range vs {
			set(&p.Estimators[i], x/v.FlowSpeed)
		}
		return nil
	}
	if err := measure(w.straight, func(e *Estimator, x float64) { e.Plane = Number(x) }); err != nil {
		return err
	}
	return measure(w.path, func(e *Estimator, x float64) { e.Path = Number(x) })
}

// curves fills in the curves of the track.
func (s *Session) curves(p *Pixel, d *invert.Diagnosis, w *walk) {
	c := &p.Curves
	at := make([]float64, len(d.Track))
	for i, q := range d.Track {
		at[i] = q.Distance / mm
		x := curve([]float64{q.X + 1, q.Y + 1, at[i], w.speed[i], w.offs[i]})
		c.Track = append(c.Track, TrackPoint{x[0], x[1], x[2], x[3], x[4]})
	}
	rows := func(m [][]float32) (out [][]Number) {
		for _, r := range m {
			out = append(out, curve(r))
		}
		return out
	}
	c.TimeDistance = TimeDistance{curve(at), curve(d.Times), rows(d.Waves), rows(d.Outward), rows(d.Inward)}
	k := make([]float64, len(d.Wavenumbers))
	for i, x := range d.Wavenumbers {
		k[i] = x * mm
	}
	f := make([]float64, len(d.Frequencies))
	for i, x := range d.Frequencies {
		f[i] = x * 1e3
	}
	c.KOmega = KOmega{Wavenumber: curve(k), Frequency: curve(f)}
	for _, r := range d.Power {
		c.KOmega.Power = append(c.KOmega.Power, curve(r))
	}
	for _, e := range d.Estimates {
		l := Lags{Name: e.Name, Slope: Number(e.Slope * mm), Intercept: Number(e.Intercept)}
		for _, q := range e.Lags {
			x := curve([]float64{q.Distance / mm, q.Lag, q.Weight})
			l.Distance, l.Lag, l.Weight = append(l.Distance, x[0]), append(l.Lag, x[1]), append(l.Weight, x[2])
		}
		if len(e.Lags) == 0 || e.Slope == 0 {
			l.Slope, l.Intercept = Number(nan), Number(nan)
		}
		for _, q := range e.Explained {
			x := curve([]float64{q.Speed, q.Share})
			l.Speeds, l.Explained = append(l.Speeds, x[0]), append(l.Explained, x[1])
		}
		c.Lags = append(c.Lags, l)
	}
}
