package invert

import (
	"fmt"
	"math"
	"slices"

	"offplane/synth/obs"
)

// A timing puts the frames of a line on evenly spaced times.
type timing struct {
	frames  int     // on the even times
	cadence float64 // [s]
	from    []blend // nil: the frames as they are
}

// A blend is (1-u) of frame a and u of frame a+1; a < 0: nothing near.
type blend struct {
	a int
	u float64
}

const (
	jitter    = 0.1  // of the cadence, that a frame may be off its time
	farthest  = 1.6  // cadences between frames that may be interpolated linearly
	mostGaps  = 0.25 // of the times, that may have no frame
	worstLost = 4    // missing frames named in a message
)

// newTiming takes frames as they are if none is off even times by more than a tenth of
// the cadence: what all pixels are late by cancels in lags. Otherwise it interpolates
// linearly on times of the median cadence, which is likewise the same for all pixels,
// and leaves gaps where frames are missing.
func newTiming(es []obs.Exposure) (timing, error) {
	n := len(es)
	if n < 2 {
		return timing{}, fmt.Errorf("log of line 1 has %d exposures: a time series needs many frames", n)
	}
	steps := make([]float64, n-1)
	for i := range steps {
		steps[i] = es[i+1].Time - es[i].Time
		if !(steps[i] > 0) {
			return timing{}, fmt.Errorf("frame %d of line 1 is at %g s, the one before at %g s: times have to ascend", i+1, es[i+1].Time, es[i].Time)
		}
	}
	dt := (es[n-1].Time - es[0].Time) / float64(n-1)
	even := true
	for i, d := range steps {
		even = even && math.Abs(d-dt) <= jitter*dt && math.Abs(es[i+1].Time-es[0].Time-float64(i+1)*dt) <= dt/2
	}
	if even {
		return timing{frames: n, cadence: dt}, nil
	}
	slices.Sort(steps)
	dt = steps[(n-1)/2]
	t := timing{frames: int(math.Round((es[n-1].Time-es[0].Time)/dt)) + 1, cadence: dt}
	if t.frames > 4*n {
		return timing{}, fmt.Errorf("line 1 has %d frames in %g s, but half of them follow within %g s: this is no series; give one run of frames", n, es[n-1].Time-es[0].Time, dt)
	}
	lost, at := 0, 0
	var gaps []int
	for i := range t.frames {
		x := es[0].Time + float64(i)*dt
		for at+1 < n && es[at+1].Time <= x {
			at++
		}
		b := blend{a: at}
		next := min(at+1, n-1)
		gap := es[next].Time - es[at].Time
		switch {
		case x-es[at].Time <= jitter*dt:
		case es[next].Time-x <= jitter*dt && next > at:
			b.a = next
		case next > at && gap <= farthest*dt:
			b.u = (x - es[at].Time) / gap
		default:
			b.a = -1
			lost++
			if len(gaps) == 0 || gaps[len(gaps)-1] != at {
				gaps = append(gaps, at)
			}
		}
		t.from = append(t.from, b)
	}
	if float64(lost) > mostGaps*float64(t.frames) {
		where := ""
		for i, g := range gaps[:min(len(gaps), worstLost)] {
			if i > 0 {
				where += ", "
			}
			where += fmt.Sprintf("%g s after frame %d", es[min(g+1, n-1)].Time-es[g].Time, g)
		}
		return timing{}, fmt.Errorf("%d of %d times of line 1 have no frame within the cadence of %g s (next frame %s): at most a quarter may be missing", lost, t.frames, dt, where)
	}
	return t, nil
}

// spread puts a series of the frames on the even times.
func (t *timing) spread(v []float64, bad []bool, out []float64, outBad []bool) {
	for i, b := range t.from {
		switch {
		case b.a < 0:
			out[i], outBad[i] = 0, true
		case b.u == 0:
			out[i], outBad[i] = v[b.a], bad[b.a]
		default:
			out[i], outBad[i] = (1-b.u)*v[b.a]+b.u*v[b.a+1], bad[b.a] || bad[b.a+1]
		}
	}
}
