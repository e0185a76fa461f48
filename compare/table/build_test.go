package table

import (
	"bytes"
	"context"
	"errors"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"offplane/synth/random"
)

// invented makes an ensemble whose ln(true/inferred) has a known law, plus an offset of
// 0.12 rms that is the member's own, plus noise of the pixels.
func invented(n, pixels int, seed uint64) []Member {
	ms := make([]Member, n)
	for m := range ms {
		r := random.At(seed, uint64(m))
		own, dense := 0.12*r.Normal(), 0.4*r.Normal()
		q := &ms[m]
		for f := range q.Features {
			q.Features[f] = make([]float64, pixels)
		}
		q.Ln[FieldQ] = make([]float64, pixels)
		for i := range pixels {
			h := 1.05 + 0.3*r.Uniform()
			v := 500 * math.Exp(0.3*r.Normal())
			ne := 1e8 * math.Exp(dense-8*(h-1.05)+0.2*r.Normal())
			for f, x := range []float64{h, 5 * r.Uniform(), ne, v, 90 * r.Uniform(), 1 + r.Uniform(), 0.9} {
				q.Features[f][i] = x
			}
			q.Ln[FieldQ][i] = law(h, v) + own + noise(h)*r.Normal()
		}
	}
	return ms
}

func law(h, v float64) float64 { return 0.5 - 2*(h-1.05) + 0.2*math.Log(v/500) }

func noise(h float64) float64 { return 0.1 + 0.2*(h-1.05)/0.3 }

func build(t *testing.T, ms []Member, o Options) *Table {
	t.Helper()
	tab, err := Build(context.Background(), ms, o)
	if err != nil {
		t.Fatal(err)
	}
	tab.Truth, tab.Recipe = "sky", Recipe{{"estimator", "lag"}, {"pixel", "4.35"}, {"mu", "1.167"}}
	tab.Origin = Origin{"offplane test", "invented", "00", "nothing"}
	return tab
}

// Members held out are covered as promised, overall within three points or two standard
// errors, in each bin of heights within eight points or 2.5 standard errors, and the law
// behind them is found, though the members' own offsets hide it.
func TestCoverage(t *testing.T) {
	tab := build(t, invented(240, 40, 1), Options{Features: []Feature{Height, Speed}})
	s := tab.Find(FieldQ, []Feature{Height, Speed})
	sc := &s.Score
	checkCoverage(t, "field", sc)
	if len(sc.Bins) != 6 {
		t.Errorf("%d bins of heights", len(sc.Bins))
	}
	for _, h := range []float64{1.08, 1.15, 1.22, 1.32} {
		for _, v := range []float64{350, 500, 700} {
			c, where := s.At([]float64{h, v}, tab.Least)
			// The median of 240 members' own offsets has an error of 0.12*1.25/sqrt(240) = 0.01.
			if where != Inside || math.Abs(c.Median-law(h, v)) > 0.04 {
				t.Errorf("at %g, %g: %v %+v, want %.3f", h, v, where, c, law(h, v))
			}
			// Half the 68 % interval is the standard deviation of a Gaussian.
			if want := math.Hypot(0.12, noise(h)); math.Abs((c.High68-c.Low68)/2/want-1) > 0.2 {
				t.Errorf("at %g, %g: half the 68 %% interval is %.3f, want %.3f", h, v, (c.High68-c.Low68)/2, want)
			}
		}
	}
	// The mean of |Gaussian| is sqrt(2/pi) sd: nothing can do better than the law.
	best := 0.0
	for i := range 1000 {
		best += math.Hypot(0.12, noise(1.05+0.3*(float64(i)+0.5)/1000)) / math.Sqrt(2*math.Pi) / 1000
	}
	if sc.Loss.Table < 0.93*best || sc.Loss.Table > 1.05*best {
		t.Errorf("loss %.4f, that of the law is %.4f", sc.Loss.Table, best)
	}
	if sc.Loss.CutNone.Low <= 0 || sc.Loss.CutSingle.Low <= 0 || sc.Left >= sc.None {
		t.Errorf("no gain: %+v", sc.Loss)
	}
}

func checkCoverage(t *testing.T, name string, s *Score) {
	t.Helper()
	check := func(where string, m Measure, nominal, points, errors float64) {
		if !(math.Abs(m.Mean-nominal) <= max(points, errors*m.Error)) {
			t.Errorf("%s, %s: %.3f +- %.3f, nominal %.2f", name, where, m.Mean, m.Error, nominal)
		}
	}
	check("68", s.Coverage68, 0.68, 0.03, 2)
	check("95", s.Coverage95, 0.95, 0.03, 2)
	for _, b := range s.Bins {
		if b.Members >= 30 {
			check("68 in a bin", b.Coverage68, 0.68, 0.08, 2.5)
			check("95 in a bin", b.Coverage95, 0.95, 0.08, 2.5)
		}
	}
}

// The interval of one pixel-rich member does not stand for an ensemble: where all scatter
// is between members, an interval calibrated on pixels would be far too narrow.
func TestMembersNotPixels(t *testing.T) {
	ms := invented(100, 20, 2)
	for m := range ms {
		own := random.NewKey(9).Normal(uint64(m))
		for i := range ms[m].Ln[FieldQ] {
			ms[m].Ln[FieldQ][i] = own
		}
	}
	s := build(t, ms, Options{Features: []Feature{Height}}).Surfaces[0]
	if w := s.High95[1] - s.Low95[1]; w < 3 || w > 6 {
		t.Errorf("the 95 %% interval of unit normal members is %.2f wide, want about 3.9", w)
	}
	checkCoverage(t, "offsets", &s.Score)
}

// A plane in the features of equally spaced nodes comes back exactly: the penalty does not
// see planes.
func TestPlanes(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		slope := rapid.SliceOfN(rapid.Float64Range(-2, 2), 3, 3).Draw(rt, "slopes")
		d := &design{width: 8, grid: Grid{{Height, []float64{1, 1.1, 1.2, 1.3}}, {Density, []float64{0, 1, 2}}, {Speed, []float64{0, 3, 6}}}}
		d.penalty = penalties(d.grid)
		plane := func(x []float64) float64 { return slope[0]*x[0] + slope[1]*x[1] + slope[2]*x[2] }
		var w []float64
		r := random.At(3)
		for range 60 {
			x := []float64{1 + 0.3*r.Uniform(), 2 * r.Uniform(), 6 * r.Uniform()}
			var tt [maxFeatures]float64
			corner, _ := d.grid.locate(x, tt[:])
			from := len(d.nodes)
			d.grid.corners(corner, tt[:], func(node int, w float64) {
				d.nodes, d.weights = append(d.nodes, int32(node)), append(d.weights, w)
			})
			sortNodes(d.nodes[from:], d.weights[from:])
			d.y = append(d.y, plane(x))
			w = append(w, 1)
		}
		for node, v := range d.fit(d.y, w) {
			if want := plane(d.grid.point(node)); math.Abs(v-want) > 0.02*(1+math.Abs(want)) {
				rt.Fatalf("node %v: %.4f, want %.4f", d.grid.point(node), v, want)
			}
		}
	})
}

// What no member supports has no answer.
func TestDomain(t *testing.T) {
	ms := invented(80, 30, 4)
	for m := range ms { // high up only 5 members are fast
		for i, h := range ms[m].Features[Height] {
			if h > 1.2 && m >= 5 {
				ms[m].Features[Speed][i] = 300 + float64(i)
			}
		}
	}
	tab := build(t, ms, Options{Features: []Feature{Height, Speed}})
	s := tab.Find(FieldQ, []Feature{Height, Speed})
	for _, c := range []struct {
		h, v float64
		want Where
	}{{1.1, 500, Inside}, {1.02, 500, Beyond}, {1.4, 500, Beyond}, {1.1, 5000, Beyond}, {1.34, 900, Sparse}} {
		if _, got := s.At([]float64{c.h, c.v}, tab.Least); got != c.want {
			t.Errorf("at %g, %g: %v, want %v; axes %v", c.h, c.v, got, c.want, s.Grid)
		}
	}
}

// ECSV and FITS hold the same, and it does not depend on the workers.
func TestFiles(t *testing.T) {
	ms := invented(60, 20, 5)
	tab := build(t, ms, Options{Features: []Feature{Height, Density, Speed}, Workers: 1})
	other := build(t, ms, Options{Features: []Feature{Speed, Density}, Workers: 3})
	var a, b bytes.Buffer
	if err := errors.Join(tab.ECSV().Write(&a), other.ECSV().Write(&b)); err != nil || !bytes.Equal(a.Bytes(), b.Bytes()) {
		t.Errorf("workers change the table (%v)", err)
	}
	dir := t.TempDir()
	if err := errors.Join(tab.ECSV().WriteFile(filepath.Join(dir, "t.ecsv")), tab.WriteFITS(filepath.Join(dir, "t.fits"))); err != nil {
		t.Fatal(err)
	}
	e, err := Read(filepath.Join(dir, "t.ecsv"))
	if err != nil {
		t.Fatal(err)
	}
	f, err := Read(filepath.Join(dir, "t.fits"))
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(e, f) {
		t.Error("ECSV and FITS differ")
	}
	for i := range tab.Surfaces {
		want, got := tab.Surfaces[i], e.Surfaces[i]
		if got.Score.String() != want.Score.String() {
			t.Errorf("coverage %q, want %q", &got.Score, &want.Score)
		}
		got.Score = want.Score
		if !reflect.DeepEqual(want, got) {
			t.Errorf("surface %d came back changed", i)
		}
	}
	want, got := *tab, *e
	want.Surfaces, got.Surfaces = nil, nil
	if !reflect.DeepEqual(want, got) {
		t.Errorf("%+v came back as %+v", want, got)
	}
	if _, err := Read("build_test.go"); err == nil || !strings.Contains(err.Error(), "no correction table") {
		t.Errorf("a Go file: %v", err)
	}
}

// A profile may be in the units that maps may have, in the spelling of astropy too.
func TestPriorUnits(t *testing.T) {
	path := filepath.Join(t.TempDir(), "prior.ecsv")
	for _, c := range []struct{ unit, value, refused string }{
		{"1 / cm3", "2e8", ""}, {"1 / m3", "2e14", ""}, {"m-3", "2e14", ""}, {"cm-3", "2e8", ""}, {"G", "2", `density is in "G"; it must be in cm-3`},
	} {
		text := "# %ECSV 1.0\n# ---\n# datatype:\n# - {name: height, unit: solRad, datatype: float64}\n# - {name: density, unit: " + c.unit +
			", datatype: float64}\n# schema: astropy-2.0\nheight density\n1.1 " + c.value + "\n"
		if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		p, err := ReadPrior(path, DefaultWidth)
		switch {
		case c.refused != "":
			if err == nil || !strings.Contains(err.Error(), c.refused) {
				t.Errorf("%s: %v", c.unit, err)
			}
		case err != nil:
			t.Error(err)
		case math.Abs(p.Values[0]/2e8-1) > 1e-12:
			t.Errorf("%s %s is read as %g", c.value, c.unit, p.Values[0])
		}
	}
}

// Members that look like the reader's corona count; if too few do, there is no table.
func TestPrior(t *testing.T) {
	ms := invented(120, 20, 6)
	p := &Prior{Heights: []float64{1.1, 1.2, 1.3}, Width: 0.3}
	for _, h := range p.Heights {
		p.Values = append(p.Values, 1e8*math.Exp(-8*(h-1.05)))
	}
	w := p.Weights(ms)
	// The members' densities scatter by 0.4: the expected effective number follows from
	// Gaussian integrals, n (sigma/s1)^2 ... = n s2/(s1^2) with s1^2 = 1/(1+a), s2^2 = 1/(1+2a),
	// a = (0.4/0.3)^2: 0.360/0.469 = 0.769 of n (derived).
	if n := Effective(w); n < 0.6*120 || n > 0.9*120 {
		t.Errorf("effective members %.1f of 120, want about 92", n)
	}
	tab := build(t, ms, Options{Features: []Feature{Height}, Weights: w})
	if tab.Effective >= 120 || tab.Members != 120 {
		t.Errorf("%+v", tab)
	}
	if s := &tab.Surfaces[0].Score; !s.Kept() || s.Coverage95.Mean > 0.995 {
		t.Errorf("weighted: %s", s)
	}
	for i := range p.Values {
		p.Values[i] *= 5
	}
	if _, err := Build(context.Background(), ms, Options{Weights: p.Weights(ms)}); !errors.Is(err, ErrTooFew) {
		t.Errorf("a corona like none of the ensemble: %v", err)
	}
	// Of a brightness only the shape counts.
	for m := range ms {
		ms[m].Bright = ms[m].Features[Density]
	}
	p.Brightness = true
	if n := Effective(p.Weights(ms)); n < 100 {
		t.Errorf("effective members %.1f by the shape, which all share", n)
	}
}
