package explain

import (
	"fmt"
	"math"
	"strings"

	"offplane/invert"
	"offplane/scenarios/units"
	"offplane/synth"
)

// telling is the part of ln(B/B_SKY) from which a cause is worth naming.
const telling = 0.01

// verdict says in a sentence or two what the pixel's field is and its two largest causes.
func verdict(p *Pixel) string {
	var head string
	switch {
	case p.Valid:
		head = fmt.Sprintf("The inferred field of %.3g G is %.2f times the %.3g G in the plane of the sky.", p.Inferred.Field, p.Ratios.FieldSky, p.Truth.FieldSky)
	default:
		var why []string
		for _, f := range p.Flags {
			if f.Blocking {
				why = append(why, reason(f))
			}
		}
		head = fmt.Sprintf("There is no inferred field (the true one is %.3g G): %s.", p.Truth.FieldSky, strings.Join(why, "; "))
	}
	var named []string
	for _, c := range p.Causes {
		if finite(c.Ln) && math.Abs(float64(c.Ln)) >= telling && len(named) < 2 {
			named = append(named, fmt.Sprintf("%s (%s): %s", c.Name, times(float64(c.Ln)), c.Text))
		}
	}
	switch {
	case len(named) == 0 && p.Valid:
		return head + " No cause changes it by a per cent or more."
	case len(named) == 0:
		return head
	}
	lead := "The largest cause is "
	if !p.Valid {
		lead = "Of what is known, the largest cause of a bias would be "
	}
	text := head + " " + lead + named[0]
	if len(named) > 1 {
		text += ". The next is " + named[1]
	}
	return text + "."
}

// reason is why a flag leaves a pixel without a field.
func reason(f Flag) string {
	text := strings.TrimPrefix(f.About, "no field: ")
	if f.Detail != "" {
		text += " (" + f.Detail + ")"
	}
	return text
}

// flagsOf lists the flags of a pixel.
func (s *Session) flagsOf(p *Pixel, i int) []Flag {
	out := []Flag{}
	bits := s.Inferred.Get("FLAG").Ints[i]
	for _, c := range invert.FlagCodes() {
		if bits&c.Value != 0 {
			out = append(out, Flag{Name: c.Name, About: c.About, Blocking: c.Value&invert.Blocking != 0, Detail: s.detail(p, c.Value)})
		}
	}
	return out
}

// detail adds the pixel's numbers to a flag.
func (s *Session) detail(p *Pixel, flag int32) string {
	t, o := &p.Track, &s.options
	switch flag {
	case invert.FlagIslandSmall:
		return fmt.Sprintf("%d pixels above a coherence of %g; the mean coherence with the neighbours is %.2f", t.Island, o.Coherence, p.Inferred.Coherence)
	case invert.FlagIslandRound:
		return fmt.Sprintf("%d pixels, %.2f times as long as wide", t.Island, t.Elongation)
	case invert.FlagIslandFills:
		return fmt.Sprintf("%d pixels in a window of %d across", t.Island, o.Box)
	case invert.FlagOneSided:
		return fmt.Sprintf("%.0f Mm inward, %.0f Mm outward", t.Inner, t.Outer)
	case invert.FlagUndirected:
		return fmt.Sprintf("it gains %.2f of its length in distance from the Sun", t.Rise)
	case invert.FlagNoSpeed:
		if t.Points > 0 {
			return fmt.Sprintf("track of %d points, %.2f wavelengths at the true speed", t.Points, t.True)
		}
	case invert.FlagDensity:
		if finite(p.Inferred.Ratio) {
			return fmt.Sprintf("%.3g; the light of this line of sight alone would give %s", p.Inferred.Ratio, density(p.Density.Sight))
		}
	case invert.FlagBelowNoise:
		if finite(p.Noise.InBand) {
			return fmt.Sprintf("%.2g km/s rms in the band", p.Noise.InBand)
		}
	}
	return ""
}

// caution adds what a reader of the answer should know.
func (s *Session) caution(p *Pixel, v *synth.Sight, i int) {
	add := func(format string, args ...any) { p.Cautions = append(p.Cautions, fmt.Sprintf(format, args...)) }
	for _, m := range s.Truth {
		x, ok := v.Truth[m.Name]
		if !ok || m.Data == nil {
			continue
		}
		if y := float64(m.Data[i]); math.Abs(x-y) > 1e-5*math.Abs(y)+1e-12 {
			add("%s is %g here and %g in truth.fits: the run was made by another version of the program", m.Name, x, y)
			break
		}
	}
	if p.Sight.HighBeta > 0.1 {
		add("%.0f %% of the emission comes from where beta > 1: the kink speed of low beta does not hold there", 100*p.Sight.HighBeta)
	}
	if p.Track.Off > 20 {
		add("the track lies %.0f deg off the field in the plane of the sky", p.Track.Off)
	}
	if p.Estimators[0].Name == invert.Unsplit && p.Sight.Inward > 0.2 {
		add("%.0f %% of the wave power runs inward, and the estimator does not separate it", 100*p.Sight.Inward)
	}
}

// times says a factor given by its logarithm.
func times(ln float64) string { return fmt.Sprintf("× %.3g", math.Exp(ln)) }

func density(n Number) string {
	if !finite(n) {
		return "no density"
	}
	return units.Scientific(float64(n), 2) + " cm⁻³"
}

func kelvin(t float64) string { return fmt.Sprintf("%.3g MK", t/1e6) }

func classText(class string) string {
	switch class {
	case "sheet":
		return "near the current sheet"
	case "active":
		return "active region"
	}
	return class + " field lines"
}
