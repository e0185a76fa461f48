//go:build soak

package trial

import (
	"context"
	"fmt"
	"math"
	"testing"

	"offplane/compare/stat"
	"offplane/invert"
)

// Over 64 seeds of a wedge of quick the interval of one error either way holds a pixel's mean
// over the seeds in 60 to 76 % of the cases in every bin of height: directions, and speeds of
// lag and pair (68 % by definition). One of nine misses that: measured, from the lowest bin to
// the highest, lag 0.664, 0.610, 0.606; pair 0.610, 0.624, 0.567 (0.603, 0.631, 0.604 with other
// waves); angle 0.694, 0.719, 0.688; unsplit 0.428, 0.511, 0.563. With all tracks held at the
// mean directions pair has 0.720, 0.711, 0.695. Half of this wedge's tracks end at its sides.
//
//	go test -tags soak -run TestCoverageOnQuick -v -timeout 1h ./compare/trial
func TestCoverageOnQuick(t *testing.T) {
	const seeds, bins = 64, 3
	names := []string{"SPEED", "SPEED_PAIR", "ANGLE", "SPEED_UNSPLIT"}
	errs := []string{"SPEED_ERR", "SPEED_ERR_PAIR", "ANGLE_ERR", "SPEED_ERR_UNSPLIT"}
	var value, told [4][seeds][]float32
	var first *Outcome
	for i := range seeds {
		l := load(t, "quick", "image.from=266 deg", "image.to=274 deg", fmt.Sprintf("seed=%d", i+1))
		o, err := Observe(context.Background(), l, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		opt := Options(l.Scenario.Inversion)
		opt.Estimators = invert.Estimators()
		emitter, _, err := Model("inversion.line", l.Scenario.Inversion.Line, l.Scenario.Inversion.Helium)
		if err != nil {
			t.Fatal(err)
		}
		r, err := invert.Invert(context.Background(), o.Observation, emitter, opt, 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		for k := range names {
			value[k][i], told[k][i] = r.Maps.Get(names[k]).Data, r.Maps.Get(errs[k]).Data
		}
		if first == nil {
			first = o
		}
	}
	g, c := &first.Observation.Grid, &load(t, "quick").Scenario.Image
	for k, name := range names {
		var held, all [bins]float64
		var scatter, errors [bins][]float64
		for _, p := range first.Observation.Pixels {
			var v, e []float64
			for i := range seeds {
				if x := float64(value[k][i][p]); x == x {
					v, e = append(v, x), append(e, float64(told[k][i][p]))
				}
			}
			if len(v) < seeds/2 {
				continue
			}
			off, sd := deviations(v, name == "ANGLE")
			r, _ := g.Polar(int(p)%g.Nx, int(p)/g.Nx)
			b := min(int(bins*(r-float64(c.Inner))/float64(c.Outer-c.Inner)), bins-1)
			for i, d := range off {
				all[b]++
				if math.Abs(d) < e[i] {
					held[b]++
				}
			}
			scatter[b], errors[b] = append(scatter[b], sd), append(errors[b], stat.Median(e))
		}
		for b := range held {
			share := held[b] / all[b]
			t.Logf("%-13s height bin %d: %.3f of %.0f; scatter %.2f, error %.2f", name, b, share, all[b], stat.Median(scatter[b]), stat.Median(errors[b]))
			if name == "SPEED_PAIR" && b == bins-1 { // known to miss it
				if math.Abs(share-0.567) > 0.03 {
					t.Errorf("%s, height bin %d: %.3f of the intervals hold the mean, 0.567 was measured", name, b, share)
				}
				continue
			}
			// Where waves run both ways the slowness of waves as they are passes through zero:
			// no interval holds a mean of such speeds.
			if name != "SPEED_UNSPLIT" && !(share >= 0.60 && share <= 0.76) {
				t.Errorf("%s, height bin %d: %.3f of the intervals hold the mean", name, b, share)
			}
		}
	}
}

// deviations returns those from the mean and their root mean square; axes are directions
// modulo 180 deg.
func deviations(v []float64, axes bool) (off []float64, sd float64) {
	var mean, s, c float64
	for _, x := range v {
		sin, cos := math.Sincos(2 * x * math.Pi / 180)
		mean, s, c = mean+x/float64(len(v)), s+sin, c+cos
	}
	if axes {
		mean = math.Atan2(s, c) / 2 * 180 / math.Pi
	}
	for _, x := range v {
		d := x - mean
		if axes {
			d = math.Remainder(d, 180)
		}
		off = append(off, d)
		sd += d * d / float64(len(v)-1)
	}
	return off, math.Sqrt(sd)
}
