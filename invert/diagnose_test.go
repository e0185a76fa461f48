package invert

import (
	"context"
	"math"
	"strings"
	"testing"
)

// A diagnosis tells what the maps say, and its parts agree with each other and with the
// waves that went in.
func TestDiagnose(t *testing.T) {
	q := defaultPatch()
	q.nx, q.ny, q.frames, q.inward, q.noise, q.electrons = 30, 28, 180, 0.2, 0.05, 1000
	o := q.observe()
	opt := Default()
	opt.Box, opt.Track, opt.Estimators = 13, 21, Estimators()
	e := powerLaw{1.4, 1.8}
	r, err := Invert(context.Background(), o, e, opt, 0, nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, pixel := range []int{14*q.nx + 15, 2*q.nx + 3} {
		d, err := Diagnose(context.Background(), o, e, opt, pixel, 0)
		if err != nil {
			t.Fatal(err)
		}
		for i, m := range r.Maps {
			if m.Data == nil {
				continue
			}
			for j := range m.Data {
				got, want := d.Maps[i].Data[j], m.Data[j]
				if j != pixel {
					want = float32(math.NaN())
				}
				if got != want && !(math.IsNaN(float64(got)) && math.IsNaN(float64(want))) {
					t.Fatalf("%s of pixel %d: %g, the inversion has %g", m.Name, j, got, want)
				}
			}
		}
		if d.Flag != r.Maps.Get("FLAG").Ints[pixel] || d.X+d.Y*q.nx != pixel {
			t.Errorf("pixel %d: flag %b, the inversion has %b", pixel, d.Flag, r.Maps.Get("FLAG").Ints[pixel])
		}
		// The track passes through the pixel, one pixel a step.
		centre := -1
		for i, p := range d.Track {
			if p.Distance == 0 {
				centre = i
			}
			if i > 0 {
				if s := math.Hypot(p.X-d.Track[i-1].X, p.Y-d.Track[i-1].Y); math.Abs(s-1) > 1e-6 {
					t.Errorf("step of %g pixels", s)
				}
			}
		}
		if centre < 0 || d.Track[centre].X != float64(d.X) || d.Track[centre].Y != float64(d.Y) {
			t.Fatalf("track %v", d.Track)
		}
		n := len(d.Track)
		if len(d.Waves) != n || len(d.Outward) != n || len(d.Waves[0]) != len(d.Times) {
			t.Fatalf("time-distance map of %d by %d", len(d.Waves), len(d.Waves[0]))
		}
		var out, in, whole, gone float64
		for i := range d.Waves {
			for k, v := range d.Waves[i] {
				whole += float64(v) * float64(v)
				out += float64(d.Outward[i][k]) * float64(d.Outward[i][k])
				in += float64(d.Inward[i][k]) * float64(d.Inward[i][k])
				x := float64(v - d.Outward[i][k] - d.Inward[i][k])
				gone += x * x
			}
		}
		if gone > 1e-6*whole || out < in { // zero wavenumber is halved: nothing is lost
			t.Errorf("power %g, outward %g, inward %g, lost %g", whole, out, in, gone)
		}
		for k, v := range d.Series {
			if math.Abs(float64(v-d.Waves[centre][k])) > 1e-4 {
				t.Fatalf("the pixel's series is %g at frame %d, the track's %g", v, k, d.Waves[centre][k])
			}
		}
		// The spectrum peaks where omega = v k, outward. Its mean over wavenumbers times
		// their number over the points is the mean power (Parseval).
		var plus, minus, sum float64
		for k, kk := range d.Wavenumbers {
			for j, p := range d.Power[k] {
				if k > 0 { // both ends are the Nyquist wavenumber
					sum += p
				}
				if f := d.Frequencies[j]; math.Abs(f-3.5e-3) < 1e-3 && math.Abs(kk) > 0 {
					if kk > 0 {
						plus += p
					} else {
						minus += p
					}
				}
			}
		}
		mean := whole / float64(n*len(d.Times))
		if got := sum * float64(n) / float64(len(d.Wavenumbers)-1); math.Abs(got/mean-1/r.kept(opt)) > 0.01/r.kept(opt) || plus < 1.5*minus {
			t.Errorf("spectrum holds %g, the series %g; outward %g, inward %g", got, mean, plus, minus)
		}
		if len(d.Estimates) != 3 {
			t.Fatalf("%d estimates", len(d.Estimates))
		}
		for i, name := range []string{"SPEED", "SPEED_UNSPLIT", "SPEED_PAIR"} {
			x := d.Estimates[i]
			if got, want := x.Speed, float64(r.Maps.Get(name).Data[pixel]); math.Abs(got/want-1) > 1e-6 {
				t.Errorf("%s %g, the inversion has %g", x.Name, got, want)
			}
			if x.Name == Pair {
				best := Explained{}
				for _, c := range x.Explained {
					if c.Share > best.Share {
						best = c
					}
				}
				if math.Abs(best.Speed/x.Speed-1) > 0.2 || !(best.Share > 0.8 && best.Share <= 1) {
					t.Errorf("the curve peaks at %+v, the speed is %g", best, x.Speed)
				}
				continue
			}
			if math.Abs(1/x.Slope/x.Speed-1) > 1e-6 || len(x.Lags) < leastLags {
				t.Errorf("%s: slope %g, %d lags, speed %g", x.Name, x.Slope, len(x.Lags), x.Speed)
			}
		}
		inside := 0
		for _, i := range d.Island {
			if i.Inside != (i.Coherence > opt.Coherence) {
				t.Errorf("%+v", i)
			}
			if i.Inside {
				inside++
			}
		}
		if inside < leastIsland || !(d.Major > d.Minor) || math.IsNaN(d.Angle) {
			t.Errorf("island of %d pixels, extents %g, %g, angle %g", inside, d.Major, d.Minor, d.Angle)
		}
	}
	if _, err := Diagnose(context.Background(), o, e, opt, q.nx*q.ny, 0); err == nil || !strings.Contains(err.Error(), "outside the observed field") {
		t.Errorf("%v", err)
	}
}

// kept is the share of a series' power that the taper keeps.
func (r *Result) kept(opt Options) float64 {
	b, err := newBand(&opt, r.Series.Frames, r.Cadence)
	if err != nil {
		panic(err)
	}
	return b.kept
}
