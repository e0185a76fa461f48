package budget

import (
	"context"
	"math"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"

	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth/line"
)

func run(t *testing.T, o Settings, name string, set ...string) *Budget {
	t.Helper()
	l, err := scenarios.Load(name, set...)
	if err != nil {
		t.Fatal(err)
	}
	b, err := Run(context.Background(), l, o)
	if err != nil {
		t.Fatal(err)
	}
	check(t, b)
	return b
}

// check: method and shares add up to the total, halves and mu to the field, scatter
// shares to the scatter; what is off is exactly 0.
func check(t *testing.T, b *Budget) {
	t.Helper()
	if !(b.Closure < 1e-9) {
		t.Errorf("method and shares miss the total by %g", b.Closure)
	}
	var scatter float64
	for _, l := range b.Lines() {
		mu := float64(b.term("mu").Field.Share)
		if l.Key != "mu" && l.Key != "total" {
			mu = 0
		}
		if d := float64(l.Field.Share-l.Speed.Share-l.Density.Share) - mu; math.Abs(d) > 1e-9 {
			t.Errorf("%s: the halves miss the field by %g", l.Key, d)
		}
		if !l.On && (l.Field != Effect{} || l.Speed != Effect{} || l.Density != Effect{}) {
			t.Errorf("%s is off: %+v", l.Key, l)
		}
		if l.Key != "total" {
			scatter += float64(l.Field.ScatterShare)
		}
	}
	if total := float64(b.Total.Field.Scatter); math.Abs(scatter-total) > 1e-9 {
		t.Errorf("scatter %g, its shares %g", total, scatter)
	}
}

// term returns the term with a key.
func (b *Budget) term(key string) *Term {
	for i := range b.Terms {
		if b.Terms[i].Key == key {
			return &b.Terms[i]
		}
	}
	panic("budget: no term " + key)
}

// quadrature is the density that the lines of a sphere show over that at its plane of
// the sky, at projected distance r, by an independent integral over the angle from the
// plane; with photo-excitation as at r or where the plasma is.
func quadrature(t *testing.T, r float64, projected bool) float64 {
	t.Helper()
	l, err := scenarios.Load("sphere")
	if err != nil {
		t.Fatal(err)
	}
	m, _, err := trial.Model("line", l.Scenario.Line, 0.1)
	if err != nil {
		t.Fatal(err)
	}
	n := func(r float64) float64 { return 4e8 * math.Pow(r, -8) }
	sum := func(k int) float64 {
		return quad.Fixed(func(g float64) float64 {
			q := r / math.Cos(g)
			lit := q
			if projected {
				lit = r
			}
			j1, j2 := m.Emissivities(n(q), 1.6e6, lit)
			return [2]float64{j1, j2}[k] / math.Pow(math.Cos(g), 2)
		}, -1.15, 1.15, 400, nil, 0)
	}
	got, _, err := line.Density(m, sum(1)/sum(0), 1.6e6, r)
	if err != nil {
		t.Fatal(err)
	}
	return got / n(r)
}

// checkSphere: the density's terms equal the quadrature within 1 %, the emission alone
// that with projected photo-excitation; what else is in the density is less than a
// thousandth.
func checkSphere(t *testing.T, b *Budget) {
	t.Helper()
	emission, photo := b.term("emission_off_plane"), b.term("photo_excitation")
	var alone, both, n float64
	for _, h := range b.Heights {
		if h.Pixels == 0 {
			continue
		}
		r := float64(h.From+h.To) / 2
		want := quadrature(t, r, false)
		got := 0.0
		for _, s := range h.Terms {
			if s.Key == emission.Key || s.Key == photo.Key {
				got += float64(s.Density)
			}
		}
		if got = math.Exp(2 * got); math.Abs(got/want-1) > 0.01 {
			t.Errorf("%.3f: density %.4f, quadrature %.4f", r, got, want)
		}
		t.Logf("%.3f: density %.4f, quadrature %.4f", r, got, want)
		alone += float64(h.Pixels) * math.Log(quadrature(t, r, true)) / 2
		both += float64(h.Pixels) * math.Log(want) / 2
		n += float64(h.Pixels)
	}
	if got, want := math.Exp(2*float64(emission.Density.FromIdeal)), math.Exp(2*alone/n); math.Abs(got/want-1) > 0.01 {
		t.Errorf("emission alone: density %.4f, quadrature with projected photo-excitation %.4f", got, want)
	}
	if got := float64(b.Total.Density.Share - emission.Density.Share - photo.Density.Share); math.Abs(got) > 1e-3 {
		t.Errorf("%.5f of the density comes from elsewhere", got)
	}
	if photo.Density.FromIdeal != 0 {
		t.Errorf("photo-excitation costs %g where only the plane of the sky emits", photo.Density.FromIdeal)
	}
}

// A narrow wedge of the sphere for half an hour: too short for a speed, but the density
// is all there.
func TestDensityOfTheSphere(t *testing.T) {
	set := []string{"image.from=269 deg", "image.to=271 deg", "image.outer=1.25 Rsun", "camera.duration=30 min", "inversion.box=7", "inversion.track=11"}
	checkSphere(t, run(t, Settings{Pieces: 2}, "sphere", set...))
}

// On one plane without a camera's imperfections nothing but the method and the duration
// costs anything; here the field is small and the time short (see the soak test).
func TestNarrowPlaneWave(t *testing.T) {
	b := run(t, Settings{Pieces: 2}, "plane-wave", "image.from=266 deg", "image.to=274 deg", "camera.duration=1 h")
	for _, l := range b.Terms {
		t.Logf("%-20s %+.5f +- %.5f", l.Key, l.Field.Share, l.Field.Error)
		if l.On && l.Key != "mu" && l.Key != "finite_duration" {
			t.Errorf("%s is on", l.Key)
		}
	}
	t.Logf("method %+.5f +- %.5f, %d of %d pixels", b.Method.Field.Share, b.Method.Field.Error, b.Pixels.Used, b.Pixels.Total)
	// Speed comes back within 1 % (derived), with the errors of so small a field.
	for _, e := range []Effect{b.term("finite_duration").Field, b.Method.Field} {
		if !(math.Abs(float64(e.Share)) < 0.01 && e.Error < 0.01) {
			t.Errorf("%+v", e)
		}
	}
}
