package scenarios

import (
	"fmt"
	"math"
	"slices"

	"offplane/scenarios/strict"
	"offplane/scenarios/units"
)

// maxPixels bounds the rectangle around the field of view, maxFrames the bytes of all
// its frames: beyond lie mistyped numbers.
const (
	maxPixels = 4e6
	maxFrames = 200e9
)

// A validator notes broken rules, each at the key to change.
type validator struct {
	at       *strict.Positions
	problems strict.Problems
}

// rule holds unless the keys it is about are unsound already. The first is where the
// problem is located.
func (v *validator) rule(ok bool, keys []string, format string, args ...any) {
	if !ok && v.at.Sound(keys...) {
		v.problems = append(v.problems, v.at.Problem(keys[0], format, args...))
	}
}

// Validate checks the rules that tie keys together; the tags' own are strict's. at may
// be nil: problems then have a path but no line.
func Validate(s *Scenario, at *strict.Positions) strict.Problems {
	v := &validator{at: at}
	v.corona(s)
	v.waves(s)
	v.image(s)
	v.camera(s)
	v.problems = append(v.problems, validateInversion(&s.Inversion, "inversion.", at)...)
	v.problems.Sort()
	return v.problems
}

// RefusedLaws are copies of density laws that are known to be wrong, and what to write.
var RefusedLaws = map[string]string{
	"baumbach":              "copies of the Baumbach-Allen law without its r^-1.5 term, or with 1e6 for 1e8, are wrong; write baumbach-allen",
	"saito":                 "copies with 2.51e4 for 2.51e6 give a hundredth of the density at 1 au; write saito-1970, which has 2.51e6",
	"saito-1977":            "write saito-poland-munro-1977",
	"saito-1977-hole":       "the hole forms of Saito, Poland & Munro 1977 are ten times too thin below 2 solar radii; write guhathakurta-1996-pole or doyle-1999-hole",
	"sittler-1999":          "copies call the polar coefficients a streamer; write sittler-guhathakurta-1999 for the streamer, sittler-guhathakurta-1999-pole for the hole",
	"sittler-1999-streamer": "copies call the polar coefficients a streamer; write sittler-guhathakurta-1999",
}

func (v *validator) corona(s *Scenario) {
	c := &s.Corona
	v.refused("corona.density.streamer.named", c.Density.Streamer.Named)
	if c.Density.Hole != nil {
		v.refused("corona.density.hole.named", c.Density.Hole.Named)
	}
	for i := range c.Density.Active {
		v.refused(fmt.Sprintf("corona.density.active.%d.law.named", i), c.Density.Active[i].Law.Named)
	}
	v.rule(len(c.Density.Active) <= MaxActive, []string{"corona.density.active"}, "holds more than %d regions", MaxActive)
	v.rule(c.Outflow == nil || c.Strands == nil || c.Strands.Waves != "own", []string{"corona.outflow", "corona.strands"},
		"cannot be given with strands whose waves ride their own density; leave one out or write strands.waves: collective")
	if c.Grid != nil {
		return
	}
	v.rule(len(c.Fields) > 0, []string{"corona.fields"}, "is empty; give at least one field")
	if c.Density.Hole == nil || len(c.Fields) == 0 {
		return
	}
	closed := false // has any field both open and closed lines?
	for _, f := range c.Fields {
		closed = closed || f.DipoleSheet != nil || f.SourceSurface != nil
	}
	v.rule(closed, []string{"corona.density.hole", "corona.fields"},
		"a hole needs closed lines beside the open ones, but every line of a radial field is open; leave hole out or add a dipole_sheet or source_surface to fields")
}

// MaxActive is the greatest number of active regions.
const MaxActive = 8

// refused says why a wrong copy of a law is refused, beside the list of right ones.
func (v *validator) refused(path, name string) {
	if why := RefusedLaws[name]; why != "" {
		v.problems = append(v.problems, v.at.Problem(path, "%s", why))
	}
}

func (v *validator) waves(s *Scenario) {
	w := &s.Waves
	v.rule(w.Spectrum.High > w.Spectrum.Low, []string{"waves.spectrum.high", "waves.spectrum.low"},
		"%v must be more than low, %v", w.Spectrum.High, w.Spectrum.Low)
	v.rule(w.Inward == 0 || w.InwardFrom > s.Image.Outer, []string{"waves.inward_from", "waves.inward", "image.outer"},
		"%v must be more than image.outer, %v, so that inward waves cross the whole image", w.InwardFrom, s.Image.Outer)
	// A line counts as open from closed_below on and must reach inward_from.
	v.rule(w.Inward == 0 || w.InwardFrom <= s.Corona.ClosedBelow, []string{"waves.inward_from", "waves.inward", "corona.closed_below"},
		"%v must be at most corona.closed_below, %v: lower open lines do not reach it", w.InwardFrom, s.Corona.ClosedBelow)
}

func (v *validator) image(s *Scenario) {
	m := &s.Image
	v.rule(m.Outer > m.Inner, []string{"image.outer", "image.inner"}, "%v must be more than inner, %v", m.Outer, m.Inner)
	v.rule(m.To > m.From, []string{"image.to", "image.from"}, "%v must be more than from, %v", m.To, m.From)
	v.rule(m.To-m.From <= 360, []string{"image.to", "image.from"}, "%v is more than 360 deg beyond from, %v", m.To, m.From)
	n := m.pixels(s.Observer.Distance)
	v.rule(n <= maxPixels, []string{"image.pixel", "image.inner", "image.outer", "image.from", "image.to", "image.roll", "observer.distance"},
		"%v makes an image of %.3g pixels; at most %.3g are allowed", m.Pixel, n, float64(maxPixels))
	bytes := 4 * n * float64(len(s.Camera.Tunings)) * float64(s.Camera.Duration/s.Camera.Cadence)
	v.rule(bytes <= maxFrames, []string{"camera.cadence", "camera.duration", "camera.tunings", "image", "observer.distance"},
		"%.3g pixels, %d tunings and a frame every %v for %v make %.3g GB of frames; at most %.3g GB are allowed", n, len(s.Camera.Tunings), s.Camera.Cadence, s.Camera.Duration, bytes/1e9, maxFrames/1e9)
	if !s.Sight.Plane {
		step := s.Sight.Step * s.Waves.Cell.Rsun() * float64(m.Outer)
		v.rule(float64(s.Sight.Reach) >= 10*step, []string{"sight.reach", "sight.step", "waves.cell", "image.outer"},
			"%v holds fewer than 10 samples of step * cell * outer = %.3g Rsun; write at least %.3g Rsun", s.Sight.Reach, step, 10*step)
	}
	v.rule(float64(s.Sight.Reach) < s.Observer.Distance.Rsun(), []string{"sight.reach", "observer.distance"},
		"%v lies behind the observer at %.4g Rsun", s.Sight.Reach, s.Observer.Distance.Rsun())
}

// pixels returns how many pixels the rectangle around the wedge holds.
func (m *Image) pixels(distance units.Distance) float64 {
	pitch := m.Pixel.Rad() * distance.Rsun()
	left, right, low, high := math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
	corner := func(pa float64) {
		for _, r := range []units.Height{m.Inner, m.Outer} {
			sin, cos := math.Sincos((pa - float64(m.Roll)) * math.Pi / 180)
			x, y := -float64(r)*sin, float64(r)*cos
			left, right, low, high = min(left, x), max(right, x), min(low, y), max(high, y)
		}
	}
	from, to, roll := float64(m.From), float64(m.To), float64(m.Roll)
	corner(from)
	corner(to)
	// Where the rim touches the sides: four places, whatever the angles are.
	for i, q := 0, math.Ceil((from-roll)/90); i < 4 && q*90+roll < to; i, q = i+1, q+1 {
		corner(q*90 + roll)
	}
	return math.Ceil((right-left)/pitch) * math.Ceil((high-low)/pitch)
}

func (v *validator) camera(s *Scenario) {
	c := &s.Camera
	nyquist := units.Frequency(1e3 / (2 * float64(c.Cadence)))
	top := s.Inversion.Filter.Centre + s.Inversion.Filter.Width
	v.rule(nyquist > top, []string{"camera.cadence", "inversion.filter.centre", "inversion.filter.width"},
		"%v has its Nyquist frequency 1/(2 cadence) at %.4g mHz, but the inversion's filter reaches to centre + width = %.4g mHz; write less than %.4g s",
		c.Cadence, float64(nyquist), float64(top), 1e3/(2*float64(top)))
	v.band(c, &s.Inversion.Filter)
	n := len(c.Tunings)
	v.rule(!s.Inversion.Background || n >= 4, []string{"inversion.background", "camera.tunings"},
		"a fit with background needs more than %d tunings, such as [-0.12 nm, -0.06 nm, 0 nm, 0.06 nm, 0.12 nm]", n)
	v.rule(n >= 3, []string{"camera.tunings"}, "%d are too few; the three-point formula needs at least 3, such as [-0.12 nm, 0 nm, 0.12 nm]", n)
	v.timing(c)
	if n < 3 {
		return
	}
	ascending := true
	for i := range n - 1 {
		ascending = ascending && c.Tunings[i] < c.Tunings[i+1]
	}
	v.rule(ascending, []string{"camera.tunings"}, "must be in ascending order, each once")
	if !ascending {
		return
	}
	middle, symmetric := float64(c.Tunings[n/2]), n%2 == 1
	span := float64(c.Tunings[n-1] - c.Tunings[0])
	for i := range n {
		off := float64(c.Tunings[i]) + float64(c.Tunings[n-1-i]) - 2*middle
		symmetric = symmetric && math.Abs(off) <= 1e-9*span // decimals are not exact in binary
	}
	v.rule(symmetric, []string{"camera.tunings"},
		"the three-point formula needs an odd number of tunings, symmetric about the middle one, such as [-0.12 nm, 0 nm, 0.12 nm]")
}

// leastFrequencies is the number of frequencies in the band that the inversion needs, and
// leastWeight the weight of the amplitude filter from which one counts.
const (
	leastFrequencies = 4
	leastWeight      = 0.03
)

// band checks that the series is long enough for the inversion's filter.
func (v *validator) band(c *Camera, f *Band) {
	reach := float64(f.Width) * math.Sqrt(-math.Log(leastWeight))
	if f.Means == "sigma" {
		reach *= math.Sqrt2
	}
	// Those of j/(frames cadence) below Nyquist's; counted, not listed: frames may be absurd.
	frequencies := func(frames float64) float64 {
		scale := frames * float64(c.Cadence) / 1e3
		first := max(1, math.Ceil((float64(f.Centre)-reach)*scale))
		last := min(math.Ceil(frames/2)-1, math.Floor((float64(f.Centre)+reach)*scale))
		return max(0, last-first+1)
	}
	frames := math.Floor(float64(c.Duration)/float64(c.Cadence) + 1e-9)
	have, enough := frequencies(frames), frames
	const most = 1 << 14
	for frequencies(enough) < leastFrequencies && enough < most {
		enough++
	}
	v.rule(have >= leastFrequencies || enough == most, []string{"camera.duration", "camera.cadence", "inversion.filter.width"},
		"%v is too short: the inversion's band needs %d frequencies and has %.0f; write %v or more", c.Duration, leastFrequencies, have, units.Duration(enough*float64(c.Cadence)))
}

// timing checks that everything finds its time.
func (v *validator) timing(c *Camera) {
	n := len(c.Tunings)
	slots, each := n, float64(c.Exposure+c.DeadTime)
	what := fmt.Sprintf("%d tunings of %v", n, c.Exposure)
	if c.DeadTime > 0 {
		what += fmt.Sprintf(" and %v of dead time", c.DeadTime)
	}
	keys := []string{"camera.exposure", "camera.tunings", "camera.cadence", "camera.dead_time"}
	if c.Sequential && c.TuningTime > 0 {
		v.rule(each <= float64(c.TuningTime), []string{"camera.tuning_time", "camera.exposure", "camera.dead_time", "camera.sequential"},
			"%v is less than exposure and dead_time together, %.4g s", c.TuningTime, each)
		each = float64(c.TuningTime)
		what = fmt.Sprintf("%d tunings of %v", n, c.TuningTime)
		keys = []string{"camera.tuning_time", "camera.tunings", "camera.cadence", "camera.sequential"}
	}
	if c.Switching == "interleaved" {
		slots *= 2
		what += " of each line"
		keys = append(keys, "camera.switching")
	}
	v.rule(each*float64(slots) <= float64(c.Cadence), keys, "%s take %.4g s, more than the cadence, %v", what, each*float64(slots), c.Cadence)

	if len(c.Order) > 0 {
		seen := make([]bool, n)
		each := len(c.Order) == n
		for _, k := range c.Order {
			if each = each && k < n && !seen[k]; each {
				seen[k] = true
			}
		}
		v.rule(each, []string{"camera.order", "camera.tunings"}, "must hold each number from 0 to %d once", n-1)
	}
	frames := float64(c.Duration) / float64(c.Cadence)
	if c.Switching == "blocks" {
		v.rule(4*float64(c.SecondLine) <= frames, []string{"camera.second_line", "camera.switching", "camera.duration", "camera.cadence"},
			"%d frames of the second line leave the first line less than three quarters of %.4g frames", c.SecondLine, frames)
		v.rule(c.Blocks <= c.SecondLine, []string{"camera.blocks", "camera.switching", "camera.second_line"},
			"%d are more than second_line, %d", c.Blocks, c.SecondLine)
	}
	gap := units.Duration(0)
	for _, g := range c.Gaps {
		gap += g.Length
	}
	v.rule(gap <= c.Duration/2, []string{"camera.gaps", "camera.duration"}, "last %v together, more than half of duration, %v", gap, c.Duration)
	if p := c.Pointing; p != nil {
		drift := units.SkyAngle(math.Hypot(float64(p.DriftX), float64(p.DriftY)) * float64(c.Duration) / 3600)
		v.rule(drift <= 600, []string{"camera.pointing", "camera.duration"}, "drifts by %v in all; at most 600 arcsec are allowed", drift)
	}
}

func validateInversion(s *Inversion, prefix string, at *strict.Positions) strict.Problems {
	v := &validator{at: at}
	v.rule(s.Box%2 == 1, []string{prefix + "box"}, "%d is even; the box needs a middle pixel, so write %d or %d", s.Box, s.Box-1, s.Box+1)
	v.rule(s.Track%2 == 1, []string{prefix + "track"}, "%d is even; the track needs a middle point, so write %d or %d", s.Track, s.Track-1, s.Track+1)
	v.rule(len(s.Estimators) > 0, []string{prefix + "estimators"}, "is empty; give at least one, such as [lag]")
	once := true
	for i, e := range s.Estimators {
		once = once && !slices.Contains(s.Estimators[:i], e)
	}
	v.rule(once, []string{prefix + "estimators"}, "names an estimator twice; write each once")
	return v.problems
}
