package stat

import (
	"math"
	"testing"

	"offplane/synth/random"
)

const pixelStep = 0.00453 // 4.35 arcsec at 1 au [solar radii]

// wedgeLayout places nr x nt values in a wedge from 1.05 solar radii on, across north.
func wedgeLayout(nr, nt int) (*Layout, []float64) {
	var r, pa []float64
	mean := 1.05 + pixelStep*float64(nr)/2
	for i := range nr {
		for j := range nt {
			r = append(r, 1.05+pixelStep*(float64(i)+0.5))
			pa = append(pa, math.Mod(350+(float64(j)+0.5)*pixelStep/mean*180/math.Pi, 360))
		}
	}
	return NewLayout(r, pa, pixelStep), r
}

// correlated returns a Gaussian field of unit variance whose correlation falls by a
// factor rho1 a pixel away from the Sun and rho2 along the limb: an autoregression of
// first order in both.
func correlated(nr, nt int, rho1, rho2 float64, seed uint64) []float64 {
	s := random.At(seed)
	x := make([]float64, nr*nt)
	for k := range x {
		x[k] = s.Normal()
	}
	for i := range nr {
		for j := 1; j < nt; j++ {
			x[i*nt+j] = rho2*x[i*nt+j-1] + math.Sqrt(1-rho2*rho2)*x[i*nt+j]
		}
	}
	for i := 1; i < nr; i++ {
		for j := range nt {
			x[i*nt+j] = rho1*x[(i-1)*nt+j] + math.Sqrt(1-rho1*rho1)*x[i*nt+j]
		}
	}
	return x
}

// The sides of two Gaussian numbers with correlation rho agree with the correlation
// (2/pi) asin(rho) (Sheppard 1899, Phil. Trans. R. Soc. A 192, 101, from memory): the
// scale is known, and a trend must not change it.
func TestScale(t *testing.T) {
	const nr, nt = 66, 150
	l, _ := wedgeLayout(nr, nt)
	if l.nr != nr || l.nt != nt {
		t.Fatalf("layout of %d x %d", l.nr, l.nt)
	}
	want := func(rho float64) float64 {
		tau := 1.0
		for p := rho; ; p *= rho {
			c := 2 / math.Pi * math.Asin(p)
			if c < leastCorrelation {
				return tau
			}
			tau += 2 * c
		}
	}
	for _, c := range []struct{ rho1, rho2, trend float64 }{{0.8, 0.5, 0}, {0.5, 0.8, 0}, {0.6, 0.6, 1.5}, {0, 0.9, 0}} {
		var radial, along float64
		const n = 20
		for k := range n {
			x := correlated(nr, nt, c.rho1, c.rho2, uint64(k))
			for i := range x {
				x[i] += c.trend * math.Sin(3*float64(i/nt)/nr+2*float64(i%nt)/nt)
			}
			s := l.Scale(x)
			radial, along = radial+s.Radial/n, along+s.Along/n
		}
		t.Logf("%+v: %.2f, %.2f; known %.2f, %.2f", c, radial, along, want(c.rho1), want(c.rho2))
		limit := 0.12
		if c.trend > 0 { // it also moves values away from the median
			limit = 0.25
		}
		if math.Abs(radial/want(c.rho1)-1) > limit || math.Abs(along/want(c.rho2)-1) > limit {
			t.Errorf("%+v: scales %.2f and %.2f, want %.2f and %.2f", c, radial, along, want(c.rho1), want(c.rho2))
		}
	}
}

// Over 100 fields of known correlation, with a bias that changes with height, the 68 %
// interval of the median holds the median of the ensemble in 54 to 82 of 100 cases,
// whole and in the lowest sixth. Pixels taken as independent would hold it in a fifth.
func TestMedianInterval(t *testing.T) {
	const nr, nt, n = 66, 90, 100
	l, r := wedgeLayout(nr, nt)
	var low []int
	for i := range r {
		if r[i] < 1.10 {
			low = append(low, i)
		}
	}
	for _, c := range []struct{ rho1, rho2 float64 }{{0.8, 0.4}, {0.3, 0.7}, {0.97, 0.3}} {
		for _, of := range [][]int{nil, low} {
			var medians []float64
			var in []Interval
			for k := range n {
				x := correlated(nr, nt, c.rho1, c.rho2, uint64(1000+k))
				for i := range x {
					x[i] = -0.3 + 0.16*x[i] - 0.5*(r[i]-1.05)
				}
				in = append(in, l.MedianInterval(x, of, l.Scale(x)))
				part := x
				if of != nil {
					part = nil
					for _, i := range of {
						part = append(part, x[i])
					}
				}
				medians = append(medians, Median(part))
			}
			mean := 0.0
			for _, m := range medians {
				mean += m / n
			}
			held, width, sd := 0, 0.0, 0.0
			for k, i := range in {
				if i.Low <= mean && mean <= i.High {
					held++
				}
				width += (i.High - i.Low) / 2 / n
				sd += (medians[k] - mean) * (medians[k] - mean) / (n - 1)
			}
			t.Logf("%+v, %d of %d pixels: held in %.2f; half-width %.4f, scatter %.4f; %d blocks", c, len(of), len(r), float64(held)/n, width, math.Sqrt(sd), in[0].Blocks)
			if f := float64(held) / n; f < 0.54 || f > 0.82 {
				t.Errorf("%+v, %d of %d pixels: held in %.2f", c, len(of), len(r), f)
			}
		}
	}
}

// Equal samples have equal intervals, which hold the median; values without number do not
// count; with too few blocks there is none.
func TestMedianIntervalEdges(t *testing.T) {
	l, _ := wedgeLayout(20, 60)
	x := correlated(20, 60, 0.3, 0.3, 5)
	s := l.Scale(x)
	a := l.MedianInterval(x, nil, s)
	if b := l.MedianInterval(x, nil, s); a != b || !(a.Low < Median(x) && Median(x) < a.High) || a.Blocks < 20 {
		t.Errorf("%+v and %+v around %g", a, b, Median(x))
	}
	all := make([]int, len(x))
	for i := range all {
		all[i] = i
	}
	if b := l.MedianInterval(x, all, s); a != b {
		t.Errorf("all positions: %+v, want %+v", b, a)
	}
	for i := range x {
		if i%60 >= 30 {
			x[i] = nan
		}
	}
	if b := l.MedianInterval(x, nil, s); !(b.Blocks < a.Blocks) || math.IsNaN(b.Low) {
		t.Errorf("half: %+v", b)
	}
	if b := l.MedianInterval(x, []int{3}, s); !math.IsNaN(b.Low) || b.Blocks > 2 {
		t.Errorf("one value: %+v", b)
	}
	if b := NewLayout(nil, nil, pixelStep).MedianInterval(nil, nil, Scale{1, 1}); !math.IsNaN(b.Low) || b.Blocks != 0 {
		t.Errorf("nothing: %+v", b)
	}
	same := make([]float64, 1200)
	if b := l.MedianInterval(same, nil, l.Scale(same)); b.Low != 0 || b.High != 0 {
		t.Errorf("a constant: %+v", b)
	}
}
