//go:build soak

package trial

import (
	"context"
	"fmt"
	"math"
	"testing"

	"offplane/compare/stat"
)

// Over 64 realisations of the waves in a wedge of the sphere the 68 % interval of the
// median of B over B_SKY holds the mean of the ensemble in 54 to 82 of 100 cases, for the
// whole wedge and in each height bin (64 draws of 68 % scatter by 6 %). Measured: 0.66 for the wedge, 0.70 0.70 0.77 0.75 0.75 0.72 by height;
// half-widths of 0.0027 to 0.0038 for a scatter of the medians of 0.0022 to 0.0036.
// Where the bias itself changes within three blocks the interval is wide on purpose: in
// the scenario quick, over 27 realisations, it held the mean in 0.89, and in 0.70 to 1.00
// by height. Two minutes on two cores.
//
//	go test -tags soak -run TestIntervalsHoldTheEnsemble -timeout 2h -v ./compare/trial
func TestIntervalsHoldTheEnsemble(t *testing.T) {
	const n = 64
	l := load(t, "sphere", "image.from=260 deg", "image.to=280 deg", "image.pixel=6.5 arcsec", "sight.step=1.5", "camera.duration=1 h", "inversion.box=15", "inversion.track=21")
	var all [][]*stat.Summary // by region, by realisation
	for seed := range n {
		m, err := l.With(fmt.Sprintf("seed=%d", seed+1))
		if err != nil {
			t.Fatal(err)
		}
		o, err := Run(context.Background(), m, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		s := &o.Verdict.Summary
		regions := []*stat.Summary{s.Ratios.Field.Sky}
		for i := range s.Heights {
			regions = append(regions, s.Heights[i].Ratios.Field.Sky)
		}
		all = append(all, regions)
	}
	for k := range all[0] {
		mean, scatter, width, held := 0.0, 0.0, 0.0, 0
		for _, r := range all {
			mean += r[k].Median / n
		}
		for _, r := range all {
			i := r[k].Interval
			scatter += math.Pow(r[k].Median-mean, 2) / (n - 1)
			width += (i.High - i.Low) / 2 / n
			if i.Low <= mean && mean <= i.High {
				held++
			}
		}
		f := float64(held) / n
		t.Logf("region %d: median %.4f +- %.4f, mean half-width %.4f, held in %.2f, %d blocks", k, mean, math.Sqrt(scatter), width, f, all[0][k].Interval.Blocks)
		if f < 0.54 || f > 0.82 {
			t.Errorf("region %d (0: all, then by height): held in %.2f", k, f)
		}
	}
}
