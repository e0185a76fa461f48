package report

import (
	"math"

	"gonum.org/v1/plot/text"
)

// A RatioCurve is the energy ratio of the two lines against electron density, at one
// height and temperature.
type RatioCurve struct {
	Label   string
	Density []float64 // ascending [cm^-3]
	Ratio   []float64 // j(1079.8)/j(1074.7)
}

// RatioFigure draws the ratio of the lines against density, and below it the factor
// d ln n / d ln ratio by which an error of the ratio grows, in that format. At most six
// curves can be told apart.
func RatioFigure(curves []RatioCurve, f Format) []byte {
	const wide, high = 1500, 1500
	c := newCanvas(f, wide, high)
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, q := range curves {
		lo, hi = min(lo, math.Log10(q.Density[0])), max(hi, math.Log10(q.Density[len(q.Density)-1]))
	}
	var xt []tick
	for e := math.Ceil(lo - 1e-9); e <= hi+1e-9; e++ {
		xt = append(xt, tick{e, power(1, int(e))})
	}
	top := 0.0
	for _, q := range curves {
		for _, y := range q.Ratio {
			top = max(top, y)
		}
	}
	a := &axes{c: c, x: 175, y: 640, w: 1270, h: 640, xlo: lo, xhi: hi, ylo: 0, yhi: 1.05 * top}
	b := &axes{c: c, x: 175, y: 118, w: 1270, h: 430, xlo: lo, xhi: hi, ylo: 1, yhi: 30, ylog: true}
	at, bt := linearTicks(0, top, 6), logTicks(1, 30)
	a.grid(at)
	b.grid(bt)
	var keys []key
	styles := []stroke{{ink, 4, nil}, {vermillion, 4, nil}, {blue, 4, []float64{18, 9}}, {green, 4, []float64{18, 7, 4, 7}}, {purple, 4, []float64{4, 7}}, {orange, 4, []float64{30, 9}}}
	for i, q := range curves {
		s := styles[i%len(styles)]
		x := make([]float64, len(q.Density))
		grows := make([]float64, len(x))
		for k, n := range q.Density {
			x[k] = math.Log10(n)
		}
		grows[0], grows[len(x)-1] = math.NaN(), math.NaN() // central differences end before the ends
		for k := 1; k < len(x)-1; k++ {
			l, r := k-1, k+1
			grows[k] = math.Log(q.Density[r]/q.Density[l]) / math.Log(q.Ratio[r]/q.Ratio[l])
		}
		a.line(s, x, q.Ratio, false)
		b.line(s, x, grows, false)
		keys = append(keys, key{q.Label, s, false})
	}
	a.decorate(xt, at, "", "ratio of energies 1079.8 nm / 1074.7 nm")
	b.decorate(xt, bt, "electron density [cm⁻³]", "d ln n / d ln ratio")
	c.text(a.x, a.y+a.h+120, "Fe XIII line ratio and density", textStyle{size: medium, bold: true, x: text.XLeft, y: text.YBottom})
	half := (len(keys) + 1) / 2
	c.legend(a.x, a.y+a.h+84, keys[:half])
	c.legend(a.x, a.y+a.h+40, keys[half:])
	return c.encode(nil, lineColours)
}
