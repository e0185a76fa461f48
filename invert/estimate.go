package invert

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/synth/obs"
)

// The phase-speed estimators.
const (
	Lag     = "lag"     // lags against the track's centre, of the waves as Options.Separation says
	Unsplit = "unsplit" // lags of the waves as they are
	Pair    = "pair"    // least-squares fit of an outward and an inward wave of one speed
)

// Estimators lists every estimator.
func Estimators() []string { return []string{Lag, Unsplit, Pair} }

func (o *Options) checkEstimators() error {
	for i, e := range o.Estimators {
		if !slices.Contains(Estimators(), e) {
			return fmt.Errorf("inversion: estimators has %q: want %s", e, strings.Join(Estimators(), ", "))
		}
		if slices.Contains(o.Estimators[:i], e) {
			return fmt.Errorf("inversion: estimators has %q twice: want each once", e)
		}
	}
	return nil
}

// An estimator measures one track. rows holds the spectra of n points; outward is
// toward rising index, if the track has an outward side.
type estimator interface {
	measure(w *worker, rows []float32, n, centre int, outward bool) estimate
}

type estimate struct {
	speed
	against bool    // the waves run toward falling index; v is the absolute value
	in      float64 // speed of the inward waves [km/s]; 0: none
	inward  float64 // share of the inward waves in the power; NaN: not known
}

func newEstimator(name string, opt *Options) estimator {
	switch {
	case name == Pair:
		return pairEstimator{}
	case name == Lag && opt.Separation:
		return splitEstimator{}
	}
	return unsplitEstimator{}
}

type splitEstimator struct{}

// aboveLeak is how far the power of inward waves, that of noise taken off, has to exceed
// the leak of the outward ones for its speed to be told.
const aboveLeak = 2

func (splitEstimator) measure(w *worker, rows []float32, n, centre int, outward bool) estimate {
	l := w.lags
	main := l.rising(rows, n)
	p := power(main)
	q := l.against(rows, main, n, p)
	var other []float32
	sign := 1.0
	if !outward && q > p {
		other, main = main, l.falling(rows, main, n)
		p, q, sign = q, p, -1
	}
	e := estimate{speed: l.speed(main, n, centre), inward: math.NaN()}
	e.v *= sign
	// What outward waves leak into the other direction has a speed too, but it is not
	// that of inward waves; white noise goes either way alike.
	white := w.noise / 2 * (p + q)
	if e.ok && q-white < aboveLeak*max(p-white, 0)*l.floor(n, e.v, main[centre*l.row:]) {
		return e
	}
	if other == nil {
		other = l.falling(rows, main, n)
	}
	l.terms, l.spare = l.spare, l.terms // e has those of the main waves
	if in := l.speed(other, n, centre); in.ok && in.v*sign < 0 {
		e.in = math.Abs(in.v)
	}
	return e
}

type unsplitEstimator struct{}

func (unsplitEstimator) measure(w *worker, rows []float32, n, centre int, _ bool) estimate {
	e := estimate{speed: w.lags.speed(rows, n, centre), inward: math.NaN()}
	if e.v < 0 {
		e.v, e.against = -e.v, true
	}
	return e
}

type pairEstimator struct{}

func (pairEstimator) measure(w *worker, rows []float32, n, _ int, outward bool) estimate {
	q := w.pairs.fit(rows, n)
	e := estimate{speed: q.speed, inward: q.inward, against: q.inward > 0.5}
	if !outward {
		e.inward = math.NaN()
	}
	return e
}

// estimatorMaps are the indices of an estimator's maps; 0: it has none.
type estimatorMaps struct{ speed, err, in, inward, field, fieldErr int }

// addEstimators adds the maps of the estimators. The first fills those of the result's
// own names; the others' names end in the estimator's.
func addEstimators(ms *obs.Maps, names []string) []estimatorMaps {
	out := make([]estimatorMaps, len(names))
	for i, name := range names {
		suffix, about := "", ""
		add := func(m obs.Map) int {
			m.Name += suffix
			m.About += about
			*ms = append(*ms, m)
			return len(*ms) - 1
		}
		if i == 0 {
			out[i] = estimatorMaps{speed: mapSpeed, err: mapSpeedErr, in: mapSpeedIn, field: mapField, fieldErr: mapFieldErr}
		} else {
			suffix, about = "_"+strings.ToUpper(name), ", estimator "+name
			out[i] = estimatorMaps{
				speed: add((*ms)[mapSpeed]), err: add((*ms)[mapSpeedErr]),
				field: add((*ms)[mapField]), fieldErr: add((*ms)[mapFieldErr]),
			}
			if name == Lag {
				out[i].in = add((*ms)[mapSpeedIn])
			}
		}
		if name == Pair {
			out[i].inward = add(obs.Map{Name: "INWARD", About: "share of the inward waves in the power of both"})
		}
	}
	return out
}

// errorBins is the number of neighbouring frequencies that count as one independent
// part of a series: a taper correlates neighbours.
const errorBins = 2

// resampled returns the variance of an estimate that the frequencies of a series made
// together. pull holds what each frequency moved it, which adds up to zero, and share its
// part in the curvature that holds it, which adds up to one.
//
// The parts of the spectrum of a stationary series are independent, so to leave them out
// one by one (the jackknife) stands for resampling in time, to first order and without
// its cost. Half the squared difference of neighbouring parts takes the place of a part's
// square: where the method pulls long waves one way and short ones the other, as the
// separation does in every realisation alike, that is bias and not scatter.
//
// So it holds whatever makes the estimate scatter on one track, noise as well as waves that
// are not those of the model, and no bias. What the track adds is in sway.go. With that the
// interval of one error holds the mean of 64 realisations in 62 to 76 % of the cases on patches
// of plane waves (TestCoverage, TestCoverageWhereTracksMatter; 50 to 57 % for pair without the
// track's part where it matters), in 62 to 81 % from no noise at all to that of a frame as
// large as three quarters of the waves (TestCoverageElsewhere: a few are too wide), and in 58
// to 72 % on a wedge of quick, where structures cross along the line of sight
// (TestCoverageOnQuick in compare/trial; derived). Unsplit is the exception there: where waves
// run both ways its slowness passes through zero, and no interval holds a mean of such speeds.
func resampled(pull, share []float64) float64 {
	sum, last := 0.0, 0.0
	for i := 0; i < len(pull); i += errorBins {
		p, h := 0.0, 0.0
		for j := i; j < min(i+errorBins, len(pull)); j++ {
			p += pull[j]
			h += share[j]
		}
		p /= 1 - min(max(h, 0), 0.9) // a part that alone holds the estimate cannot be left out
		d := p - last
		sum += d * d / 2
		last = p
	}
	return sum + last*last/2
}
