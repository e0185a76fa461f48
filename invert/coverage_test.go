package invert

import (
	"context"
	"fmt"
	"math"
	"slices"
	"testing"
)

// coverage inverts n realisations of a patch, and tells in three bins of height for every
// map of values and of errors how often value +- error holds the pixel's mean over the
// realisations. Axes are directions modulo 180 deg.
func coverage(t *testing.T, q patch, opt Options, n int, names, errs []string) [][3]float64 {
	var v, e [][][]float32 // map, realisation, pixel
	for range names {
		v, e = append(v, nil), append(e, nil)
	}
	for i := range n {
		q.seed = uint64(i + 1)
		r, err := Invert(context.Background(), q.observe(), powerLaw{1.4, 1.8}, opt, 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		for k := range names {
			v[k], e[k] = append(v[k], r.Maps.Get(names[k]).Data), append(e[k], r.Maps.Get(errs[k]).Data)
		}
	}
	shares := make([][3]float64, len(names))
	for k, name := range names {
		const bins = 3
		var held, all [bins]float64
		var scatter, told []float64
		for p := range q.nx * q.ny {
			var vs, es []float64
			for i := range n {
				if x := float64(v[k][i][p]); !math.IsNaN(x) {
					if name == "ANGLE" {
						x = turned(x, q.angle)
					}
					vs, es = append(vs, x), append(es, float64(e[k][i][p]))
				}
			}
			if len(vs) < n/2 {
				continue
			}
			mean, m2 := 0.0, 0.0
			for _, x := range vs {
				mean += x / float64(len(vs))
			}
			for i, x := range vs {
				m2 += (x - mean) * (x - mean) / float64(len(vs)-1)
				b := p % q.nx * bins / q.nx
				all[b]++
				if math.Abs(x-mean) < es[i] {
					held[b]++
				}
			}
			scatter, told = append(scatter, math.Sqrt(m2)), append(told, median(es))
		}
		for b := range held {
			shares[k][b] = held[b] / all[b]
			t.Logf("%s, height bin %d: %.3f of %.0f; scatter %.2f, error %.2f", name, b, shares[k][b], all[b], median(scatter), median(told))
		}
	}
	return shares
}

// coveragePatch has columns for heights.
func coveragePatch() (patch, Options, []string, []string) {
	q := defaultPatch()
	q.pa, q.angle = 90, 90
	q.nx, q.ny, q.frames, q.noise, q.inward = 24, 14, 240, 0.1, 0.1
	opt := Default()
	opt.Box, opt.Track, opt.Estimators = 13, 21, Estimators()
	return q, opt, []string{"SPEED", "SPEED_UNSPLIT", "SPEED_PAIR", "ANGLE"}, []string{"SPEED_ERR", "SPEED_ERR_UNSPLIT", "SPEED_ERR_PAIR", "ANGLE_ERR"}
}

// hold holds the shares to what is asked, 60 to 76 % in every bin of height. Bins that are
// known to miss it are told, as map and bin, and must miss it still: a list that is too long
// is an error too.
func hold(t *testing.T, q patch, opt Options, names, errs []string, misses ...string) {
	t.Helper()
	for k, shares := range coverage(t, q, opt, 64, names, errs) {
		for b, s := range shares {
			bin := fmt.Sprintf("%s %d", names[k], b)
			switch in := s >= 0.60 && s <= 0.76; {
			case !in && !slices.Contains(misses, bin):
				t.Errorf("%s: %.3f of the intervals hold the mean", bin, s)
			case in && slices.Contains(misses, bin):
				t.Errorf("%s: %.3f of the intervals hold the mean: it no longer misses", bin, s)
			}
		}
	}
}

// The errors of phase speed and direction hold what they promise.
func TestCoverage(t *testing.T) {
	q, opt, names, errs := coveragePatch()
	hold(t, q, opt, names, errs)
}

// They also do where the arrival times change across the tracks by half as much again as along
// them, so that what turns a track by a degree changes the speed by 2.6 %.
func TestCoverageWhereTracksMatter(t *testing.T) {
	q, opt, names, errs := coveragePatch()
	q.ny, q.shear = 20, 1.5
	hold(t, q, opt, names, errs)
}
