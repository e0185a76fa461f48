package report

import (
	"fmt"
	"strconv"
	"strings"

	"offplane/compare/stat"
)

// direction draws the true and the inferred direction of the field on the sky and their
// difference.
func (r *Report) direction(v *view, foot string) (Figure, bool) {
	t, m, diff := data(r.Truth, "ANGLE_SKY"), data(r.Inferred, "ANGLE"), data(r.Verdict.Maps, "ANGLE_DIFF")
	if t == nil || m == nil || diff == nil {
		return Figure{}, false
	}
	degrees := func(lo, hi float64, colours *table, label string) *scale {
		s := &scale{lo: lo, hi: hi, table: colours, label: label}
		for k := range 5 {
			at := lo + (hi-lo)*float64(k)/4
			s.ticks = append(s.ticks, tick{at, strings.Replace(strconv.FormatFloat(at, 'g', -1, 64), "-", "−", 1)})
		}
		return s
	}
	shared := degrees(0, 180, &cyclic, "angle, from solar north over east [deg]")
	reach := 90.0 // the least that holds nine tenths of the field
	for _, x := range []float64{60, 40, 20, 10} {
		if lo, hi := stat.Quantile(0.05, r.good(diff)), stat.Quantile(0.95, r.good(diff)); -lo < x && hi < x {
			reach = x
		}
	}
	ps := []panel{{"truth", "ANGLE_SKY", t, shared}, {"inferred", "ANGLE, from the coherence", m, shared},
		{"inferred − truth", "ANGLE_DIFF", diff, degrees(-reach, reach, &diverging, "difference [deg]")}}
	alt := "Maps of the direction of the field around the occulted solar disc, north up, east left: truth, inferred, their difference"
	if a := r.Verdict.Summary.AngleError; a != nil && a.Count > 0 {
		alt += fmt.Sprintf("; the median absolute difference is %.1f degrees", a.Median)
	}
	return Figure{
		Name: "direction", Draw: func(f Format) []byte { return mapFigure(f, v, ps, foot) }, Alt: alt + ".",
		Caption: fmt.Sprintf("Maps of the direction of the field on the sky, counted from solar north over east, 0–180 [deg]; colours are cyclic. Truth: ANGLE_SKY, direction of the component whose size is B_SKY. Inferred: ANGLE, the direction in which the waves run, estimator: the elongation of the coherence island. Difference: ANGLE_DIFF [deg]. Axes, circles and grey as in the other maps. Pixel %s. Domain: all pixels of the field with a direction, %.2f–%.2f solar radii.",
			r.pixel(), v.inner+v.step/2, v.outer-v.step/2),
	}, true
}
