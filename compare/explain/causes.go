package explain

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/synth"
)

// causesOf splits ln(B/B_SKY) further than the identity does, the largest part first. What
// enters is known exactly but for two rests, that of the speed and that of the density,
// which are what is left of the measured values; so the parts add up.
//
//	v/SPEED_SKY = line of sight, without and with fine structure, times outflow,
//	              times the method's part, times the rest
//	n/NE_KINK   = ratio as measured over that of the line of sight, over that without fine
//	              structure, over that of the plane of the sky, over the density there
//
// The method's part is METHOD_RATIO, what the run's own one-plane run found on this track
// with these waves, less the outflow that carries them there too; without it, what the
// estimator makes of a plane wave on the track, at one speed and along the true ones.
// Where a value is missing its rest is NaN and the other parts stand.
func (s *Session) causesOf(p *Pixel, v *synth.Sight) []Cause {
	ln := func(a, b Number) float64 { return math.Log(float64(a / b)) }
	t, d := &p.Truth, &p.Density
	kink := Number(v.Samples[v.Sky].Point.Kink)
	known := func(x float64) float64 { // a part that is not known is left to the rest
		if math.IsNaN(x) || math.IsInf(x, 0) {
			return 0
		}
		return x
	}
	smooth := math.Log(v.SmoothSpeeds[1] / v.SmoothSpeeds[0])
	fineSpeed := ln(t.SpeedWave, t.SpeedSky) - smooth
	flow := ln(Number(v.FlowSpeed), t.SpeedWave)
	e := &p.Estimators[0]
	measured := finite(e.OnePlane)
	method, along := known(ln(e.Plane, 1)), known(ln(e.Path, e.Plane))
	if measured {
		method, along = known(ln(e.OnePlane, 1)-flow), 0 // it holds the true speeds along the track
	}
	speedRest := ln(p.Inferred.Speed, t.SpeedSky) - smooth - fineSpeed - flow - method - along

	sight := known(ln(d.Smooth, d.Local) / 2)
	fine := known((ln(d.Sight, d.Smooth) + ln(d.Mean, kink)) / 2)
	plasma := known(ln(d.Local, d.Mean) / 2)
	mu := math.Log(s.mu[0]/s.mu[1]) / 2
	densityRest := ln(p.Inferred.Ne, kink)/2 - sight - fine - plasma

	var cs []Cause
	add := func(key, name string, x float64, text string) {
		cs = append(cs, Cause{Key: key, Name: name, Ln: Number(x), Factor: Number(math.Exp(x)), Text: text})
	}
	add(SightWaves, "waves off the plane of the sky", smooth, p.sightWavesText())
	add(SightDensity, "density along the line of sight", sight, p.sightDensityText())
	add(FineStructure, "fine structure of the density", fineSpeed+fine, s.fineText(p, fineSpeed, fine))
	add(Plasma, "temperature and atomic data of the inversion", plasma, fmt.Sprintf(
		"the plasma in the plane of the sky is at %s; the inversion assumes %s and its own atomic data", kelvin(v.Samples[v.Sky].Point.T), kelvin(s.options.Temperature)))
	add(Mu, "mean mass of the inversion", mu, fmt.Sprintf("mu is %.3f in the corona, the inversion takes %.3f", s.mu[1], s.mu[0]))
	add(Outflow, "outflow", flow, "the plasma carries the waves")
	if measured {
		add(Method, "method: the estimator on this track, with these waves", method, p.onePlaneText(method))
	} else {
		add(Method, "method: the estimator on this track", method, p.methodText())
		add(TrackPath, "speed and direction along the track", along, p.pathText())
	}
	add(SpeedRest, p.speedRestName(speedRest), speedRest, p.speedRestText())
	add(DensityRest, "noise, point spread and the rest of the density", densityRest, p.densityRestText())
	slices.SortStableFunc(cs, func(a, b Cause) int { return cmp.Compare(weight(b), weight(a)) })
	return cs
}

// weight orders causes; what is not known comes last.
func weight(c Cause) float64 {
	if !finite(c.Ln) {
		return -1
	}
	return math.Abs(float64(c.Ln))
}

func (p *Pixel) sightWavesText() string {
	s := &p.Sight
	if q := p.second(func(q *Structure) Number { return q.Wave }); q != "" {
		return q
	}
	return fmt.Sprintf("half of the wave power comes from farther than %.2f solar radii from the plane of the sky; its projected speed is %.3g km/s, that in the plane %.3g km/s",
		s.WaveDepth50, p.Truth.SpeedWave, p.Truth.SpeedSky)
}

func (p *Pixel) sightDensityText() string {
	if q := p.second(func(q *Structure) Number { return q.Emission }); q != "" {
		return q
	}
	return fmt.Sprintf("half of the emission comes from farther than %.2f solar radii from the plane of the sky; the mean density that emits it is %s, that in the plane %s",
		p.Sight.Depth50, density(p.Density.Line1), density(p.Density.Mean))
}

// second tells of the structures beside that in the plane of the sky, if they hold a tenth
// or more of what share says.
func (p *Pixel) second(share func(q *Structure) Number) string {
	var best *Structure
	n, light, waves := 0, Number(0), Number(0)
	for i := range p.Sight.Structures {
		q := &p.Sight.Structures[i]
		if q.Main {
			continue
		}
		n++
		light, waves = light+q.Emission, waves+q.Wave
		if best == nil || share(q) > share(best) {
			best = q
		}
	}
	if best == nil || share(best) < 0.1 {
		return ""
	}
	where := "before"
	if best.X < 0 {
		where = "behind"
	}
	where = fmt.Sprintf("%.2f solar radii %s the plane of the sky", math.Abs(float64(best.X)), where)
	hold := fmt.Sprintf("%.0f %% of the emission and %.0f %% of the wave power", 100*light, 100*waves)
	if n == 1 {
		return fmt.Sprintf("a second structure (%s) %s holds %s", classText(best.Class), where, hold)
	}
	return fmt.Sprintf("%d more structures, the largest (%s) %s, hold %s", n, classText(best.Class), where, hold)
}

func (s *Session) fineText(p *Pixel, speed, density float64) string {
	c := &s.Scenario.Scenario.Corona
	var is []string
	if q := c.Strands; q != nil {
		is = append(is, fmt.Sprintf("strands of %s scatter ln n by %g", q.Size, q.Spread))
	}
	if q := c.Mix; q != nil {
		is = append(is, fmt.Sprintf("unresolved plasma %g times as dense fills %g of the volume", q.Contrast, q.Filling))
	}
	if len(is) == 0 {
		return "the corona has none"
	}
	return fmt.Sprintf("%s: dense plasma outshines thin plasma, which makes the field %s through the density and %s through the waves",
		strings.Join(is, "; "), times(density), times(speed))
}

func (p *Pixel) methodText() string {
	e, t := &p.Estimators[0], &p.Track
	switch {
	case t.Points == 0:
		return "there is no track"
	case !finite(e.Plane):
		return fmt.Sprintf("the track of %.0f Mm is %.2f wavelengths long; %s finds no speed of a plane wave on it", t.Length, t.True, e.Name)
	}
	return fmt.Sprintf("the track of %.0f Mm is %.2f wavelengths long; on it %s makes %.3f of the speed of a plane wave", t.Length, t.True, e.Name, e.Plane)
}

// onePlaneText sets the method's part [ln] as the run measured it beside that of a plane wave.
func (p *Pixel) onePlaneText(ln float64) string {
	return fmt.Sprintf("the run's own waves on one plane, without noise, come out at %.3f of the true speed on this track; for comparison, one plane wave: %s; %s",
		math.Exp(ln), p.methodText(), p.pathText())
}

func (p *Pixel) pathText() string {
	t := &p.Track
	if t.Points == 0 {
		return "there is no track"
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, q := range p.Curves.Track {
		lo, hi = min(lo, float64(q.Speed)), max(hi, float64(q.Speed))
	}
	return fmt.Sprintf("along the track the true speed runs from %.3g to %.3g km/s, and the track lies %.0f deg off the field in the mean", lo, hi, t.Off)
}

// speedRestName calls the rest [ln] chance only where chance may make it: within twice the
// stated error and the scatter of a run so short.
func (p *Pixel) speedRestName(ln float64) string {
	stated := 0.0
	if finite(p.Noise.SpeedErr) {
		stated = float64(p.Noise.SpeedErr)
	}
	switch {
	case math.IsNaN(ln):
		return "rest of the speed"
	case math.Abs(ln) > 2*math.Hypot(stated, float64(p.Noise.SpeedScatter)):
		return "rest of the speed, not explained by the parts above"
	}
	return "chance of the waves, noise and the rest of the speed"
}

func (p *Pixel) speedRestText() string {
	if !finite(p.Inferred.Speed) {
		return "there is no speed"
	}
	n := &p.Noise
	text := fmt.Sprintf("the error of the speed is given as %.1f %%, the waves of a run so short scatter it by %.1f %%", 100*n.SpeedErr, 100*n.SpeedScatter)
	if finite(n.SignalNoise) {
		text += fmt.Sprintf("; the waves are %.1f times the noise in the band", n.SignalNoise)
	}
	return text
}

func (p *Pixel) densityRestText() string {
	if !finite(p.Inferred.Ne) {
		return "there is no density"
	}
	text := fmt.Sprintf("the measured ratio gives %s, that of this line of sight %s", density(p.Inferred.Ne), density(p.Density.Sight))
	if finite(p.Noise.NeErr) && p.Noise.NeErr > 0 {
		text += fmt.Sprintf("; the error is given as %.1f %%", 100*p.Noise.NeErr)
	}
	return text
}
