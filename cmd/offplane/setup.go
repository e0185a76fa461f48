package main

import (
	"fmt"
	"math"
	"strings"

	"offplane/compare/report"
	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth"
)

// setup says in plain sentences what a scenario simulates.
func setup(s *scenarios.Scenario) report.Setup {
	return report.Setup{
		About: s.About, Corona: coronaText(s), Waves: wavesText(&s.Waves), Sight: sightText(s),
		Observation: observationText(s), Inversion: inversionText(&s.Inversion),
	}
}

func coronaText(s *scenarios.Scenario) string {
	var fields []string
	for _, f := range s.Corona.Fields {
		switch {
		case f.DipoleSheet != nil:
			d := f.DipoleSheet
			fields = append(fields, fmt.Sprintf("a dipole of %s with octupole Q = %g and a current sheet of a1 = %s", d.Strength, d.Octupole, d.Sheet))
		case f.Radial != nil:
			fields = append(fields, fmt.Sprintf("a radial field of %s at the surface that falls as r^-%g", f.Radial.Strength, f.Radial.Exponent))
		case f.SourceSurface != nil:
			table := "the embedded table"
			if f.SourceSurface.Table != "" {
				table = f.SourceSurface.Table
			}
			fields = append(fields, fmt.Sprintf("a potential field of harmonics (%s, times %g) with a source surface at %s", table, f.SourceSurface.Factor, f.SourceSurface.Height))
		case f.BuriedDipole != nil:
			b := f.BuriedDipole
			fields = append(fields, fmt.Sprintf("a dipole buried %s deep at latitude %s and longitude %s with %s above it", b.Depth, b.Latitude, b.Longitude, b.Strength))
		case f.Uniform != nil:
			fields = append(fields, fmt.Sprintf("a uniform field of %s", f.Uniform.Strength))
		}
	}
	c := &s.Corona
	seen := fmt.Sprintf(" The observer is at latitude %s, %s away.", s.Observer.Latitude, s.Observer.Distance)
	if c.Grid != nil {
		return fmt.Sprintf("Field, density and temperature are those of the file %s.", c.Grid.File) + extras(c) + seen
	}
	t := c.Temperature
	d := c.Density
	text := fmt.Sprintf("The field is %s. ", strings.Join(fields, " plus "))
	if c.Belt != nil {
		text += fmt.Sprintf("The belt is tilted by %s and warped by %s with %d waves around the Sun. ", c.Belt.Tilt, c.Belt.Warp, c.Belt.Waves)
	}
	if d.Hole == nil {
		text += fmt.Sprintf("The density is %s at %s everywhere.", lawText(&d.Streamer), t.Streamer)
	} else {
		text += fmt.Sprintf("The density is %s at %s in the streamer and %s at %s in the hole, blended over %s of footpoint latitude.",
			lawText(&d.Streamer), t.Streamer, lawText(d.Hole), t.Hole, d.Boundary)
	}
	for _, a := range d.Active {
		text += fmt.Sprintf(" An active region within %s of latitude %s and longitude %s adds a density %s at %s.", a.Radius, a.Latitude, a.Longitude, lawText(&a.Law), a.Temperature)
	}
	return text + extras(c) + seen
}

// extras tells of what is off in most scenarios.
func extras(c *scenarios.Corona) string {
	text := ""
	if v := c.Strands; v != nil {
		text += fmt.Sprintf(" Strands of %s scatter ln n by %g (%s).", v.Size, v.Spread, v.Waves)
	}
	if v := c.Mix; v != nil {
		text += fmt.Sprintf(" Unresolved plasma %g times as dense fills %g of the volume (%s).", v.Contrast, v.Filling, v.Tubes)
	}
	if v := c.Outflow; v != nil {
		text += fmt.Sprintf(" On open lines it flows out at up to %s.", v.Terminal)
	}
	if v := c.Rotation; v != nil {
		text += fmt.Sprintf(" It rotates rigidly once in %s.", v.Period)
	}
	return text
}

func lawText(l *scenarios.Law) string {
	text := ""
	switch {
	case l.Named != "":
		text = "that of " + l.Named
	case l.PowerLaw != nil:
		text = fmt.Sprintf("%s r^-%g", l.PowerLaw.Surface, l.PowerLaw.Exponent)
	case l.Hydrostatic != nil:
		text = fmt.Sprintf("hydrostatic with %s at the surface and a scale height of %s", l.Hydrostatic.Surface, l.Hydrostatic.Temperature)
	}
	if l.Factor != 1 {
		text = fmt.Sprintf("%s times %s", units.Number(l.Factor), text)
	}
	return text
}

func wavesText(w *scenarios.Waves) string {
	text := fmt.Sprintf("Random kink waves of %s rms per polarisation at %s", w.Amplitude, w.AtDensity)
	if w.Growth == "wkb" {
		text += ", growing as n^(-1/4),"
	} else {
		text += ", the same at every height,"
	}
	text += fmt.Sprintf(" are launched by cells of %s at the surface with a bump in the spectrum at %s.", w.Cell, w.Spectrum.BumpAt)
	if w.Damping > 0 {
		text += fmt.Sprintf(" They are damped over %g wavelengths.", w.Damping)
	} else {
		text += " They are not damped."
	}
	if w.Inward > 0 {
		text += fmt.Sprintf(" Inward waves start at %s on open lines with %g of the outward power.", w.InwardFrom, w.Inward)
	}
	if w.FarEnd {
		text += " Closed lines carry waves from both ends."
	}
	return text
}

func sightText(s *scenarios.Scenario) string {
	v := &s.Sight
	if v.Plane {
		return "Only the plane of the sky emits: there is no line of sight."
	}
	text := fmt.Sprintf("The full profile is summed along parallel lines of sight in steps of %g times the size of the cells where they shine, up to four times that where they are dark, as far as %s from the plane of the sky or until less than %g of either line is left out at an end.",
		v.Step, v.Reach, v.Tail)
	if why := coarse(s); why != "" {
		text += " Caution: " + why + "."
	}
	return text
}

// coarse says that strands are sampled less often than they vary; empty if they are not.
func coarse(s *scenarios.Scenario) string {
	step := s.Sight.Step * float64(s.Waves.Cell)
	if v := s.Corona.Strands; v == nil || s.Sight.Plane || step <= 2*float64(v.Size) {
		return ""
	}
	return fmt.Sprintf("lines of sight are sampled every %.2g Mm, strands are %s wide: light, density and Doppler signal scatter more than such strands make them; sight.step %.2g would do", step, s.Corona.Strands.Size, float64(s.Corona.Strands.Size/s.Waves.Cell))
}

func observationText(s *scenarios.Scenario) string {
	c, i := &s.Camera, &s.Image
	text := fmt.Sprintf("%d frames, one every %s for %s, from %s to %s", synth.Frames(s), c.Cadence, c.Duration, i.Inner, i.Outer)
	if math.Abs(float64(i.To-i.From)-360) < 1e-9 {
		text += " all around,"
	} else {
		text += fmt.Sprintf(" and from position angle %s to %s,", i.From, i.To)
	}
	text += fmt.Sprintf(" in pixels of %s; %d tunings", i.Pixel, len(c.Tunings))
	if c.Sequential {
		text += " one after the other"
	}
	if c.Stages > 0 {
		text += fmt.Sprintf(" of a birefringent filter of %d stages and %s", c.Stages, c.Filter)
	} else {
		text += fmt.Sprintf(" of a filter of %s", c.Filter)
	}
	text += fmt.Sprintf("; a point spread of %s", c.PointSpread)
	for _, on := range []struct {
		on   bool
		text string
	}{
		{c.Diffraction, "diffraction"}, {c.Seeing > 0, "seeing of " + c.Seeing.String()}, {c.Scatter != nil, "scattered light"},
		{c.Pointing != nil, "pointing errors"}, {c.Occulter != nil, "an occulter"}, {c.KCorona > 0, "the K corona"},
		{c.FlatField > 0, "a rest of the flat field"}, {c.Digit > 0, "digitisation"}, {c.Lost > 0 || len(c.Gaps) > 0, "lost frames"},
	} {
		if on.on {
			text += "; " + on.text
		}
	}
	if !c.Noise {
		return text + ". There is no noise."
	}
	return text + fmt.Sprintf(". Noise of an aperture of %s with a throughput of %g, %s a tuning in %d co-adds of %g electrons read noise, over a background of %s.",
		c.Aperture, c.Throughput, c.Exposure, c.Coadds, c.ReadNoise, c.Background)
}

func inversionText(v *scenarios.Inversion) string {
	text := fmt.Sprintf("Band-pass at %s, %s wide (%s); coherence above %g in a window of %d pixels; tracks of up to %d pixels; ",
		v.Filter.Centre, v.Filter.Width, v.Filter.Means, v.Coherence, v.Box, v.Track)
	if v.Separation {
		text += fmt.Sprintf("outward and inward waves separated with zero wavenumber %s", v.KZero)
		if v.Padding > 1 {
			text += fmt.Sprintf(" and the track padded to %d times its length", v.Padding)
		}
		text += "; "
	} else {
		text += "outward and inward waves not separated; "
	}
	return text + fmt.Sprintf("density from the line ratio at %s; mu = %g.", v.Temperature, v.Mu)
}
