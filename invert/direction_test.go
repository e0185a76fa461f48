package invert

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"offplane/synth/obs"
)

// painted is a square field whose pixels carry one of two orthogonal spectra, or
// none.
func painted(t *testing.T, n, box int, wave func(x, y int) int) *field {
	opt := Default()
	opt.Box = box
	f := &field{opt: &opt, grid: &obs.Grid{Nx: n, Ny: n, Pixel: 4.35, CentreX: 500, CentreY: float64(n+1) / 2, Distance: 215}, band: mustBand(t, opt, 180, 30)}
	f.spec = make([]float32, n*n*f.band.row)
	f.norm = make([]float32, n*n)
	f.axis = make([][2]float32, n*n)
	for p := range n * n {
		f.pixels = append(f.pixels, int32(p))
		f.index = append(f.index, int32(p))
		if k := wave(p%n, p/n); k >= 0 {
			f.norm[p] = 1
			f.spec[p*f.band.row+k] = 1
		}
	}
	return f
}

// Islands of known shape: their pixels, their axis, their error (derived).
func TestIsland(t *testing.T) {
	const n, c = 41, 20
	for _, q := range []struct {
		what  string
		in    func(x, y int) bool // relative to the pixel
		count int
		angle float64 // [deg]; NaN: round
		full  bool
	}{
		{"a row", func(x, y int) bool { return y == 0 }, 21, 0, false},
		{"a diagonal, connected over corners", func(x, y int) bool { return x == y }, 15, 45, false},
		{"a falling diagonal", func(x, y int) bool { return x == -y }, 15, -45, false},
		{"three rows", func(x, y int) bool { return y*y <= 1 }, 63, 0, false},
		{"a column with a gap", func(x, y int) bool { return x == 0 && y != 4 }, 14, 90, false},
		{"a row and a patch apart from it", func(x, y int) bool { return y == 0 || y > 4 }, 21, 0, false},
		{"everything", func(x, y int) bool { return true }, 349, math.NaN(), true},
		{"five pixels", func(x, y int) bool { return y == 0 && x*x <= 4 }, 5, math.NaN(), false},
	} {
		f := painted(t, n, 21, func(x, y int) int {
			if q.in(x-c, y-c) {
				return 3
			}
			return 5
		})
		r := newIslander(f).island(c*n + c)
		if r.count != q.count {
			t.Errorf("%s: %d pixels, want %d", q.what, r.count, q.count)
		}
		if r.full() != q.full {
			t.Errorf("%s: full %v", q.what, r.full())
		}
		if math.IsNaN(q.angle) {
			if r.count >= leastIsland && !r.round() {
				t.Errorf("%s: has an axis", q.what)
			}
		} else if d := turned(r.angle*180/math.Pi, q.angle); math.Abs(d) > 1e-9 || r.round() {
			t.Errorf("%s: angle %g, want %g; extents %g, %g", q.what, r.angle*180/math.Pi, q.angle, r.major, r.minor)
		}
	}
	// Three rows of 21: sqrt(<y^2>/<x^2>/62) with <y^2> = 2/3, <x^2> = 110/3.
	f := painted(t, n, 21, func(x, y int) int { return min((y-c)*(y-c), 2) / 2 })
	if r := newIslander(f).island(c*n + c); math.Abs(r.err-math.Sqrt(2./110/62)) > 1e-12 {
		t.Errorf("error %g, want %g", r.err, math.Sqrt(2./110/62))
	}
}

// Coherence of pure noise: sqrt(pi/(4 n)) with n independent samples, 0.28 for ten
// (derived); it makes no islands.
func TestNoiseHasNoDirection(t *testing.T) {
	q := defaultPatch()
	q.nx, q.ny, q.rms, q.noise, q.frames = 40, 40, 0, 0.3, 240
	opt := Default()
	r := q.invert(t, opt)
	checkFlags(t, r)
	b := mustBand(t, opt, q.frames, 30)
	sum := 0.0
	coh := values(r.Maps.Get("COHERENCE"))
	for _, c := range coh {
		sum += c / float64(len(coh))
	}
	if want := math.Sqrt(math.Pi / 4 / b.samples); math.Abs(sum/want-1) > 0.03 {
		t.Errorf("coherence %.4f, want %.4f", sum, want)
	}
	if s := flagged(r.Maps.Get("FLAG"), FlagIslandSmall); s < 0.98 {
		t.Errorf("%.3f of the pixels have too small an island", s)
	}
}

// A track follows a circle of directions by the midpoint rule, ends at the rim and
// turns outward.
func TestTrackFollowsAnArc(t *testing.T) {
	const n = 61
	f := painted(t, n, 21, func(x, y int) int { return 0 })
	const cx, cy = 70.0, -20.0 // of the circle
	for p := range f.pixels {
		ix, iy := f.at(p)
		a := math.Atan2(float64(iy)-cy, float64(ix)-cx) + math.Pi/2
		f.axis[p] = [2]float32{float32(math.Cos(2 * a)), float32(math.Sin(2 * a))}
	}
	tr := &tracker{field: f}
	p := 30*n + 30
	centre, rise := tr.trace(p, 15)
	if len(tr.points) != 31 || centre != 15 {
		t.Fatalf("%d points, centre %d", len(tr.points), centre)
	}
	r := math.Hypot(30-cx, 30-cy)
	for i, q := range tr.points {
		if d := math.Hypot(q.x-cx, q.y-cy) - r; math.Abs(d) > 0.02 {
			t.Errorf("point %d: %.3f pixels off the circle", i, d)
		}
		if i > 0 {
			if s := math.Hypot(q.x-tr.points[i-1].x, q.y-tr.points[i-1].y); math.Abs(s-1) > 1e-9 {
				t.Errorf("step %g", s)
			}
		}
	}
	// The Sun's centre is far to the right: outward is toward falling x.
	if tr.points[30].x > tr.points[0].x || rise < 0.5 {
		t.Errorf("from %v to %v, rise %g", tr.points[0], tr.points[30], rise)
	}
	centre, _ = tr.trace(30*n+3, 15)
	last := tr.points[len(tr.points)-1]
	if centre != 15 || len(tr.points) > 23 || last.x < -0.5 {
		t.Errorf("at the rim: %d points, centre %d, last %v", len(tr.points), centre, last)
	}
	// Directions at random: no track crosses them, and none leaves the field.
	rng := rand.New(rand.NewPCG(1, 1))
	for p := range f.axis {
		s, c := math.Sincos(2 * math.Pi * rng.Float64())
		f.axis[p] = [2]float32{float32(c), float32(s)}
	}
	for p := range f.pixels {
		tr.trace(p, 15)
		for _, q := range tr.points {
			if q.x < -0.5 || q.y < -0.5 || q.x > n-0.5 || q.y > n-0.5 {
				t.Fatalf("point %v", q)
			}
		}
	}
}

// Waves that are wide against the box fill it; a box that grows finds their direction.
func TestAdaptiveBox(t *testing.T) {
	q := defaultPatch()
	q.cell, q.frames, q.angle, q.noise = 22, 180, q.pa+25, 0.1
	opt := Default()
	opt.Box = 9
	fills, wrong, pixels := map[bool]float64{}, map[bool]float64{}, map[bool]float64{}
	for _, adaptive := range []bool{false, true} {
		opt.Adaptive = adaptive
		r := q.invert(t, opt)
		checkFlags(t, r)
		fills[adaptive] = flagged(r.Maps.Get("FLAG"), FlagIslandFills)
		_, wrong[adaptive] = angleErrors(r.Maps.Get("ANGLE"), q.angle)
		pixels[adaptive] = median(values(r.Maps.Get("ISLAND")))
		if e := median(values(r.Maps.Get("ELONGATION"))); !(e >= 1) {
			t.Errorf("elongation %g", e)
		}
	}
	t.Logf("fills %v, angle error %v deg, island %v pixels", fills, wrong, pixels)
	if fills[false] < 0.3 || fills[true] > 0.1 || wrong[true] > 0.5*wrong[false] || pixels[true] < 1.5*pixels[false] {
		t.Errorf("fills %v, angle error %v deg, island %v pixels", fills, wrong, pixels)
	}
}

// Directions from outside: those that the islands gave bring the same speeds back, but
// for their rounding to float32; tracks at an angle to waves that are coherent all along
// their fronts see them faster by its secant (derived).
func TestDirectionsFromOutside(t *testing.T) {
	opt := Default()
	opt.Separation = false
	q := defaultPatch()
	q.frames, q.roll, q.angle = 240, 33, q.pa+20
	own := q.invert(t, opt)
	opt.Directions = slices.Clone(own.Maps.Get("ANGLE").Data)
	again := q.invert(t, opt)
	checkFlags(t, again)
	for i, v := range own.Maps.Get("SPEED").Data {
		if w := again.Maps.Get("SPEED").Data[i]; (v == v) != (w == w) || math.Abs(float64(w/v)-1) > 1e-3 {
			t.Fatalf("pixel %d: %g km/s on its own track, %g on the same again", i, v, w)
		}
	}
	const off = 15.0
	q.cell = 1000
	for i := range opt.Directions {
		opt.Directions[i] = float32(q.angle + off)
	}
	ratio := median(values(q.invert(t, opt).Maps.Get("SPEED"))) / q.v
	if want := 1 / math.Cos(off*math.Pi/180); math.Abs(ratio/want-1) > 0.01 {
		t.Errorf("tracks %g deg off the waves: %.4f of the speed, want %.4f", off, ratio, want)
	}
	opt.Directions = opt.Directions[1:]
	if _, err := Invert(context.Background(), q.observe(), powerLaw{1.4, 1.8}, opt, 0, nil); err == nil || !strings.Contains(err.Error(), "directions") {
		t.Errorf("too few directions: %v", err)
	}
}
