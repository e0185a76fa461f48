package plan

import (
	"context"
	"fmt"
	"math"

	"offplane/compare/stat"
	"offplane/compare/trial"
	"offplane/invert"
	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth"
	"offplane/synth/camera"
	"offplane/synth/line"
	"offplane/synth/obs"
	"offplane/synth/random"
)

// A reference is long noise-free Doppler series of the target in pixels of one size, and
// what one recipe makes of them.
type reference struct {
	*still
	l      *Loaded
	o      *Settings
	recipe scenarios.Inversion

	doppler *obs.Observation // a Doppler cube [km/s]
	band    float64          // noise bandwidth of the recipe [Hz]
	region  region
	offset  []float64 // ln(B/B_SKY) less ln v of the same map, each pixel of the region: speed of the truth and density
	sky     []float64 // ln SPEED_SKY
	signal  []float64 // in-band rms of the Doppler shift, median of each bin [km/s]
	densest float64   // |median| of the part of the density, for the text
}

// restful is the longest cadence of the reference [s]; waves faster than its Nyquist
// frequency would be folded.
const restful = 30

// A still is noise-free frames of the target in pixels of one size.
type still struct {
	frames  *obs.Observation
	truth   *synth.Truth
	atom    line.Emitter
	cadence float64          // [s]
	camera  scenarios.Camera // that of the scenario
}

// observe simulates the waves once, without noise.
func (p *predictor) observe(ctx context.Context, s scenarios.Scenario) (*still, error) {
	whole := s.Camera
	cadence := min(restful, math.Floor(450/float64(s.Waves.Spectrum.High)*10)/10)
	c := &s.Camera
	c.Cadence, c.Duration = units.Duration(cadence), p.l.Effort.Waves
	c.Noise, c.Sequential, c.TuningTime, c.DeadTime, c.Order = false, false, 0, 0, []int{}
	c.Exposure, c.Coadds = min(c.Exposure, 1), 1
	c.SecondLine, c.Switching = 4, "together"
	c.Lost, c.Gaps, c.Pointing, c.FullWell, c.Digit, c.FlatField, c.Brightening = 0, nil, nil, 0, 0, 0, 0
	s.Seed = random.Hash(p.l.Seed, 0x77617665) >> 11 // "wave"
	scene, k, err := p.scene(ctx, &s)
	if err != nil {
		return nil, err
	}
	frames, truth, err := scene.Observe(ctx, p.o.Workers, p.o.report("waves"))
	return &still{frames, truth, k.atom, cadence, whole}, err
}

// newReference is what a recipe needs of a still.
func (l *Loaded) newReference(ctx context.Context, recipe scenarios.Inversion, q *still, o *Settings) (*reference, error) {
	r := &reference{l: l, o: o, recipe: recipe, still: q, band: recipe.Filter.Width.Hz() * math.Sqrt(math.Pi/2)}
	if recipe.Filter.Means == "sigma" {
		r.band *= math.Sqrt2
	}
	if err := r.learn(ctx, q.frames, q.truth); err != nil {
		return nil, err
	}
	r.doppler = dopplerCube(q.frames)
	return r, nil
}

// A bin of the region is about so high [solar radii], so that noise and waves change little
// within it, and has so many pixels.
const (
	bin     = 0.025
	crowded = 20
)

// newRegion finds the pixels of the target that have a truth.
func newRegion(t *Target, o *obs.Observation, truth obs.Maps) (g region, err error) {
	inner, outer := float64(t.Inner), float64(t.Outer)
	sky := truth.Get("B_SKY").Data
	var up []float64 // place of each pixel between inner and outer
	for i, p := range o.Pixels {
		h, _ := o.Grid.Polar(int(p)%o.Grid.Nx, int(p)/o.Grid.Nx)
		if u := (h - inner) / (outer - inner); u >= 0 && u < 1 && sky[p] > 0 {
			g.pixels, up = append(g.pixels, i), append(up, u)
		}
	}
	n := max(1, min(int(math.Round((outer-inner)/bin)), len(up)/crowded))
	for b := range n {
		g.from = append(g.from, inner+(outer-inner)*float64(b)/float64(n))
		g.to = append(g.to, inner+(outer-inner)*float64(b+1)/float64(n))
	}
	for _, u := range up {
		g.bin = append(g.bin, int(u*float64(n)))
	}
	if len(g.pixels) < leastPixels {
		return g, fmt.Errorf("target: %d pixels lie in the region, %d are too few to tell scatter: a wider wedge or smaller pixels would do", len(g.pixels), leastPixels-1)
	}
	return g, nil
}

const leastPixels = 10

// learn takes from the whole of the noise-free frames what does not depend on duration.
func (r *reference) learn(ctx context.Context, o *obs.Observation, truth *synth.Truth) error {
	res, err := invert.Invert(ctx, o, r.atom, trial.Options(r.recipe), r.o.Workers, nil)
	if err != nil {
		return err
	}
	if r.region, err = newRegion(&r.l.Target, o, truth.Maps); err != nil {
		return err
	}
	at := func(m obs.Maps, name string, p int) float64 { return float64(m.Get(name).Data[o.Pixels[p]]) }
	signal := make([][]float64, r.region.bins())
	var density []float64
	for k, p := range r.region.pixels {
		// ln(B/B_SKY) = ln v + this; the constant is that of the map's own formula.
		field := math.Log(fieldOf(1, at(res.Maps, "NE", p), r.recipe.Mu)) - math.Log(at(truth.Maps, "B_SKY", p))
		r.offset = append(r.offset, field)
		r.sky = append(r.sky, math.Log(at(truth.Maps, "SPEED_SKY", p)))
		density = append(density, math.Log(at(res.Maps, "NE", p)/at(truth.Maps, "NE_SKY", p))/2)
		b := r.region.bin[k]
		signal[b] = append(signal[b], at(res.Maps, "DOPPLER_RMS", p))
	}
	r.densest = stat.Median(density)
	for _, s := range signal {
		r.signal = append(r.signal, stat.Median(s))
	}
	return nil
}

// fieldOf returns B [G] for a speed [km/s] and a density [cm^-3].
func fieldOf(v, n, mu float64) float64 {
	return v * 1e5 * math.Sqrt(4*math.Pi*mu*units.ProtonMass*n)
}

// dopplerCube turns noise-free frames into Doppler shifts: the centre of the parabola
// through the logarithms.
func dopplerCube(o *obs.Observation) *obs.Observation {
	x := speeds(o)
	solve := throughLogs(x)
	in := o.Frames[0]
	out := obs.NewCube(in.Pixels, 1, in.Frames)
	for p := range in.Pixels {
		v := out.Series(p, 0)
		for f := range v {
			var b, c float64
			for k := range x {
				y := math.Log(float64(in.Series(p, k)[f]))
				b += float64(solve.At(1, k) * y)
				c += float64(solve.At(2, k) * y)
			}
			v[f] = float32(-b / (2 * c))
		}
	}
	return cubeOf(o, out)
}

// speeds returns the tunings of the first line [km/s].
func speeds(o *obs.Observation) []float64 {
	ts := o.LineTunings(1)
	x := make([]float64, len(ts))
	for k, t := range ts {
		x[k] = t.Offset / (t.Wavelength - t.Offset) * units.LightSpeed / 1e5
	}
	return x
}

// turns returns how much each of the reference's frames counts in one frame of a cadence
// that many times as long. Tunings that are exposed in turn see the waves at different
// times: the logarithm of a Gaussian line of width w shifts by 2 x v/w^2 at the tuning x,
// so that a tuning's share in the shift is x times its part in the parabola's slope
// (derived).
func (q *still) turns(thin int) []float64 {
	weight := make([]float64, thin)
	x := speeds(q.frames)
	solve := throughLogs(x)
	c := q.camera
	c.Cadence, c.Gaps = units.Duration(float64(thin)*q.cadence), nil
	for k, t := range camera.NewSchedule(c, 1, 0).Delay {
		weight[min(int(math.Round(t/q.cadence)), thin-1)] += solve.At(1, k) * x[k]
	}
	return weight
}

// cubeOf makes an observation of Doppler shifts.
func cubeOf(like *obs.Observation, cube *obs.Cube) *obs.Observation {
	d := &obs.Observation{Grid: like.Grid, Pixels: like.Pixels, Unit: "km/s"}
	d.Frames[0] = cube
	log := like.LineExposures(1)
	for f := range cube.Frames {
		d.Exposures = append(d.Exposures, obs.Exposure{Line: 1, Frame: f, Time: log[f].Time, Exposure: 1})
	}
	return d
}

// A node is where the estimator is tried on the reference.
type node struct {
	hours float64 // duration
	ratio float64 // rms of the noise over that of the waves, both in the band
	thin  int     // every so manieth frame
}

// pieces is the number of realisations that a duration leaves.
func (r *reference) pieces(hours float64) int {
	return int(float64(r.l.Effort.Waves) / (3600 * hours) * (1 + 1e-9))
}

// try inverts the pieces of a node and returns their errors: of ln(v/SPEED_SKY) and of
// ln(B/B_SKY) without noise in the density.
func (r *reference) try(ctx context.Context, n node) (speed, field sample, err error) {
	long := r.doppler.Frames[0]
	frames := int(math.Round(n.hours * 3600 / r.cadence))
	opt := trial.Options(r.recipe)
	sigma := make([]float64, long.Pixels) // of one frame
	for k, p := range r.region.pixels {
		sigma[p] = r.signal[r.region.bin[k]]
	}
	r.beyond(sigma)
	for p := range sigma {
		// White noise of variance s^2 keeps 2 dt B s^2 of it in the band.
		sigma[p] *= n.ratio / math.Sqrt(2*r.cadence*float64(n.thin)*r.band)
	}
	turns := r.turns(n.thin)
	for k := range r.pieces(n.hours) {
		part := obs.NewCube(long.Pixels, 1, frames/n.thin)
		for p := range long.Pixels {
			key := random.NewKey(r.l.Seed, 0x6e6f6465, uint64(k), uint64(p), math.Float64bits(n.ratio), uint64(n.thin), uint64(frames)) // "node"
			in, out := long.Series(p, 0)[k*frames:], part.Series(p, 0)
			for f := range out {
				sum := 0.0
				for j, w := range turns {
					sum += float64(w * float64(in[f*n.thin+j]))
				}
				out[f] = float32(sum)
				if sigma[p] > 0 {
					out[f] += float32(sigma[p] * key.Normal(uint64(f)))
				}
			}
		}
		d := cubeOf(r.doppler, part)
		for f := range d.Exposures {
			d.Exposures[f].Time = float64(f*n.thin) * r.cadence
		}
		d.Grid.Duration = n.hours * 3600
		res, err := invert.Invert(ctx, d, nil, opt, r.o.Workers, nil)
		if err != nil {
			return nil, nil, err
		}
		v := res.Maps.Get("SPEED").Data
		a, b := make([]float64, len(r.region.pixels)), make([]float64, len(r.region.pixels))
		for i, p := range r.region.pixels {
			x := math.Log(float64(v[d.Pixels[p]]))
			a[i], b[i] = x-r.sky[i], x+r.offset[i]
		}
		speed, field = append(speed, a), append(field, b)
	}
	return speed, field, nil
}

// beyond gives pixels outside the region the signal of the nearest bin: they are on
// tracks, too.
func (r *reference) beyond(sigma []float64) {
	g := &r.doppler.Grid
	last := r.region.bins() - 1
	for p, i := range r.doppler.Pixels {
		if sigma[p] > 0 {
			continue
		}
		h, _ := g.Polar(int(i)%g.Nx, int(i)/g.Nx)
		b := 0
		for b < last && h >= r.region.to[b] {
			b++
		}
		sigma[p] = r.signal[b]
	}
}
