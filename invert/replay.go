package invert

import (
	"context"
	"fmt"
	"math"
	"slices"

	"offplane/compare/stat"
	"offplane/scenarios/units"
	"offplane/synth/obs"
)

// Reach returns how far from a pixel the series count that decide its track [pixels].
func (o *Options) Reach() int {
	window := o.Box
	if o.Adaptive {
		window *= largest
	}
	return o.trackReach() + window/2 + 1
}

// DiagnoseSeries is Diagnose of an inversion that is over, from what it left of the
// Doppler shift: the band-passed series [km/s] of the given pixels of the field
// (raster indices, ascending), cadence [s] apart. Pixels farther away than opt.Reach need
// not be given. The series are neither tapered nor filtered again, so that island, track
// and speeds are those of that inversion, to the rounding of the series. Without frames
// there is no line profile: PEAK, WIDTH, RATIO, NE and B have no value, FLAG has NO_RATIO
// and none of REPAIRED, NARROW and BELOW_NOISE, and DOPPLER_RMS contains the noise.
func DiagnoseSeries(g *obs.Grid, pixels []int32, series *obs.Cube, cadence float64, opt Options, pixel int) (*Diagnosis, error) {
	if series.Tunings != 1 {
		return nil, fmt.Errorf("%d series a pixel: want one", series.Tunings)
	}
	o := &obs.Observation{Grid: *g, Pixels: pixels, Unit: "km/s"}
	o.Frames[0] = series
	for i := range series.Frames {
		o.Exposures = append(o.Exposures, obs.Exposure{Line: 1, Frame: i, Time: float64(i) * cadence})
	}
	r, err := newRun(o, nil, opt)
	if err != nil {
		return nil, err
	}
	near, err := r.around(pixel)
	if err != nil {
		return nil, err
	}
	as := *r.band // the series as they are
	as.weight, as.taper = slices.Repeat([]float64{1}, len(as.weight)), slices.Repeat([]float64{1}, len(as.taper))
	r.hire(0)
	d := newDFT(&as)
	for _, w := range r.scratch {
		w.transform = newTransformer(&as, d)
	}
	if err := r.steps(context.Background(), 0, nil, r.spectrum, r.normalise, near[0], near[1], near[2]); err != nil {
		return nil, err
	}
	return r.diagnose(r.scratch[0], pixel), nil
}

// A PlaneWave is a wave on a track of equidistant points, alone in the data: one wave
// runs toward rising index and may meet one of its own speed.
type PlaneWave struct {
	Step     float64                 // between the points [km]
	Centre   int                     // index of the pixel
	Outward  bool                    // rising index leads away from the Sun
	Arrivals []float64               // of the wave at each point [s]
	Inward   float64                 // power of the wave toward falling index over that of the other
	Power    func(f float64) float64 // spectrum of both at a frequency [Hz], in any unit
}

// Measure returns what each estimator of opt makes of the wave [km/s], without noise, in
// frames that are cadence [s] apart: the bias of the method alone. NaN: not significant.
//
// A wave by itself stands for all its realisations with the mean power of each
// frequency, because lags come from the power in the cross-spectrum alone. Where two waves
// meet their cross terms matter, and the median of realisations is taken, whose random
// numbers normal gives.
func (q *PlaneWave) Measure(opt Options, frames int, cadence float64, normal func() float64) ([]float64, error) {
	if len(opt.Estimators) == 0 {
		opt.Estimators = []string{Lag}
	}
	if err := opt.check(); err != nil {
		return nil, err
	}
	b, err := newBand(&opt, frames, cadence)
	if err != nil {
		return nil, err
	}
	n := len(q.Arrivals)
	if n < leastLags || n > opt.Track || q.Centre < 0 || q.Centre >= n {
		return nil, fmt.Errorf("track of %d points about point %d: want %d to %d", n, q.Centre, leastLags, opt.Track)
	}
	w := planeWorker(b, &opt, q.Step)
	realisations := 1
	if q.Inward > 0 {
		realisations = planeRealisations
	}
	rows := make([]float32, n*b.row)
	speeds := make([][]float64, len(w.estimators))
	for range realisations {
		q.fill(b, rows, normal)
		for i, e := range w.estimators {
			if m := e.measure(w, rows, n, q.Centre, q.Outward); m.ok && m.v > 0 {
				speeds[i] = append(speeds[i], m.v)
			}
		}
	}
	out := make([]float64, len(speeds))
	for i, x := range speeds {
		out[i] = math.NaN()
		if 2*len(x) > realisations {
			out[i] = stat.Median(x)
		}
	}
	return out, nil
}

// planeRealisations leave the median uncertain by a tenth of the scatter of one.
const planeRealisations = 151

// planeWorker is a worker for tracks alone.
func planeWorker(b *band, opt *Options, step float64) *worker {
	g := obs.Grid{Distance: 1, Pixel: step * 1e5 / units.SolarRadius / obs.Arcsec}
	r := &run{field: &field{opt: opt, grid: &g, band: b}, cube: &obs.Cube{Tunings: 1}}
	return r.newWorker()
}

// fill makes one realisation of the spectra on the track.
func (q *PlaneWave) fill(b *band, rows []float32, normal func() float64) {
	nf := len(b.freq)
	for j, f := range b.freq {
		a := b.weight[j] * math.Sqrt(q.Power(f))
		out, in := complex(a, 0), complex(0, 0)
		if q.Inward > 0 {
			out = complex(a*normal(), a*normal())
			a *= math.Sqrt(q.Inward)
			in = complex(a*normal(), a*normal())
		}
		for i, t := range q.Arrivals {
			s, c := math.Sincos(2 * math.Pi * f * t)
			z := out*complex(c, -s) + in*complex(c, s)
			rows[i*b.row+j], rows[i*b.row+nf+j] = float32(real(z)), float32(imag(z))
		}
	}
}
