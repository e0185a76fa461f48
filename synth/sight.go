package synth

import (
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/model"
	"offplane/scenarios/units"
	"offplane/synth/wave"
)

// A Sight is what one line of sight holds.
type Sight struct {
	Samples []SightSample // from the back to the front
	Sky     int           // index of the sample in the plane of the sky
	// Truth holds the truth of the pixel by the names of the maps of a Truth.
	Truth map[string]float64
	// Class is the truth STRUCTURE.
	Class int32
	// SmoothSpeeds are SPEED_SKY and SPEED_WAVE [km/s] of the same corona without strands
	// and unresolved mix, all plasma at the mean density; FlowSpeed is SPEED_WAVE with
	// steady flow along the field added.
	SmoothSpeeds [2]float64
	FlowSpeed    float64
	// Half-depths [solar radii] that hold 50 and 90 % of the wave power, and its share
	// near the plane of the sky, as DEPTH50, DEPTH90 and NEAR_SKY are of the emission.
	WaveDepth [2]float64
	WaveNear  float64
	// Inward is the share of the waves that come down from the top or the far end of
	// their line, of the power that the pixel shows.
	Inward float64
}

// A SightSample is one sample of a line of sight.
type SightSample struct {
	X      float64 // toward the observer [solar radii]
	Length float64 // of the ray that it stands for [solar radii]
	Point  model.Point
	Field  float64 // component of the field in the plane of the sky [G]
	Angle  float64 // of that component, from north [deg], 0..180
	Tilt   float64 // of the field out of the plane of the sky [deg], 0..90
	Speed  float64 // kink speed projected on the sky, no flow [km/s]
	// Emissivity in both lines [erg cm^-3 s^-1 sr^-1]; Smooth that of plasma at the mean
	// density, without strands and unresolved mix.
	Emissivity, Smooth [2]float64
	Emission, Wave     float64 // shares of this sample in the means, as in Weights
}

// Sight looks along the line of sight of pixel (ix, iy) of the grid.
func (c *Scene) Sight(ix, iy int) (*Sight, error) {
	y, z := c.Grid.Sky(ix, iy)
	ray, err := c.ray(y, z, nil)
	if err != nil {
		return nil, err
	}
	v := &Sight{Truth: map[string]float64{}}
	values, class := c.truthOf(ray)
	v.Class = class
	for i, x := range values {
		v.Truth[truthMaps[i].Name] = x
	}
	w := c.weights(ray)
	smooth := make([]sample, len(ray))
	slow := 0.0
	for i := range ray {
		s := &ray[i]
		smooth[i] = c.smoothed(s)
		slow += w.Wave[i] / ((s.point.Speed + c.along(s)) * s.sky)
		if s.x == 0 {
			v.Sky = i
		}
		b := c.view.ToSky(s.point.B)
		v.Samples = append(v.Samples, SightSample{
			X: s.x, Length: s.dx / units.SolarRadius, Point: s.point,
			Field: s.bSky, Angle: c.angle(s), Tilt: math.Atan2(math.Abs(b.X), s.bSky) * 180 / math.Pi,
			Speed: s.point.Speed * s.sky / kms, Emissivity: s.j, Smooth: smooth[i].j,
			Emission: w.Emission[i], Wave: w.Wave[i],
		})
	}
	v.FlowSpeed = 1 / slow / kms
	ws := c.waveWeights(smooth)
	normalise(ws)
	slow = 0
	for i := range smooth {
		slow += ws[i] / (smooth[i].point.Speed * smooth[i].sky)
	}
	sky := &smooth[v.Sky]
	v.SmoothSpeeds = [2]float64{sky.point.Speed * sky.sky / kms, 1 / slow / kms}
	v.WaveDepth = [2]float64(depths(ray, w.Wave, 0.5, 0.9))
	v.WaveNear = shareWithin(ray, w.Wave, nearPlane)
	v.Inward = c.inwardShare(ray, w.Wave)
	return v, nil
}

// smoothed returns a sample whose plasma has the mean density everywhere: no strands, no
// unresolved mix. Delays follow the speed, as strands and mix hold all along a line.
func (c *Scene) smoothed(s *sample) sample {
	t := *s
	p := &t.point
	slow := p.Mean / p.Kink
	if p.N == p.Mean && slow == 1 && p.Parts[1].Share == 0 {
		return t
	}
	grow := c.amplitude(p.Mean) / c.amplitude(p.Kink)
	p.N, p.Kink, p.Parts = p.Mean, p.Mean, [2]model.Part{{Share: 1, N: p.Mean}}
	p.Speed /= math.Sqrt(slow)
	for i := range p.Line.Tau {
		p.Line.Tau[i] *= math.Sqrt(slow)
	}
	p.Line.TauTop *= math.Sqrt(slow)
	t.los[0] *= grow
	t.los[1] *= grow
	t.j = c.emissivities(p, 1)
	return t
}

// along returns the steady flow along the field [cm/s], positive as the outward waves run.
func (c *Scene) along(s *sample) float64 {
	p := &s.point
	if c.s.Corona.Outflow == nil || p.Line.Closed || p.Line.Ends == 0 {
		return 0
	}
	return math.Abs(r3.Dot(p.B, p.Flow)) / r3.Norm(p.B)
}

// inwardShare returns the share of the wave power in trains other than that of the
// nearer foot.
func (c *Scene) inwardShare(ray []sample, w []float64) float64 {
	sum := 0.0
	var ts []train
	for i := range ray {
		s := &ray[i]
		ts = c.trains(&s.point, ts)
		in, all, nearest := 0.0, 0.0, math.Inf(1)
		for k := range ts {
			if ts[k].dir == wave.Outward {
				nearest = min(nearest, ts[k].tau)
			}
		}
		for k := range ts {
			p := c.inBand(s, &ts[k])
			all += p
			if ts[k].dir == wave.Inward || ts[k].tau > nearest {
				in += p
			}
		}
		if all > 0 {
			sum += w[i] * in / all
		}
	}
	return sum
}
