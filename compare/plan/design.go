package plan

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"offplane/scenarios"
	"offplane/synth"
)

// A Design is one choice of everything that may vary.
type Design struct {
	Number int
	Values []string // of the campaign's knobs, as in YAML
	Hours  float64  // of the telescope, overhead included
	Refuse string   // why it is impossible; empty: it is not

	scenario *scenarios.Loaded
}

// designs lists the whole design space, the last knob first.
func (l *Loaded) designs(ctx context.Context) ([]Design, error) {
	n := 1
	for _, v := range l.values {
		n *= len(v)
	}
	out := make([]Design, n)
	for i := range out {
		d := &out[i]
		d.Number, d.Values = i, make([]string, len(l.values))
		rest := i
		for j := len(l.values) - 1; j >= 0; j-- {
			v := l.values[j]
			d.Values[j] = v[rest%len(v)]
			rest /= len(v)
		}
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		l.resolve(d)
	}
	return out, nil
}

// resolve makes the scenario of a design and counts its hours.
func (l *Loaded) resolve(d *Design) {
	set, share, binning := []string{}, 0.0, 1
	for j, x := range d.Values {
		switch what := l.Vary[j].What; what {
		case "second_line":
			share, _ = strconv.ParseFloat(x, 64)
		case "split":
			share, _ = strconv.ParseFloat(x, 64)
			set = append(set, fmt.Sprintf("camera.duration=%.6g s", float64(l.Facts.Hours-l.Facts.Overhead)*(1-share)))
		case "binning":
			binning, _ = strconv.Atoi(x)
		default:
			set = append(set, paths[what]+"="+x)
		}
	}
	if l.Facts.Fill {
		set = append(set, "camera.exposure=1 ms") // what fits is known below
	}
	s, err := l.base.With(set...)
	if err != nil {
		d.Refuse = oneLine(err)
		return
	}
	c := &s.Scenario.Camera
	more := []string{}
	if l.Facts.Fill {
		slots := float64(len(c.Tunings)) // all find their time, at once or in turn
		if c.Switching == "interleaved" {
			slots *= 2
		}
		exposure := float64(c.Cadence)/slots - float64(c.DeadTime)
		if !(exposure > 0) {
			d.Refuse = fmt.Sprintf("the dead time of %v leaves no exposure in a cadence of %v", c.DeadTime, c.Cadence)
			return
		}
		read := float64(l.base.Scenario.Camera.Exposure) / float64(l.base.Scenario.Camera.Coadds)
		more = append(more, fmt.Sprintf("camera.exposure=%.9g s", exposure*(1-1e-7)), fmt.Sprintf("camera.coadds=%d", max(1, int(math.Round(exposure/read)))))
	}
	if share > 0 {
		frames := float64(synth.Frames(&s.Scenario))
		more = append(more, "camera.switching=together", fmt.Sprintf("camera.second_line=%d", max(1, int(math.Round(frames*share/(1-share))))))
	}
	if binning > 1 {
		more = append(more, binned(&s.Scenario, binning)...)
	}
	if len(more) > 0 {
		if s, err = l.base.With(append(set, more...)...); err != nil {
			d.Refuse = oneLine(err)
			return
		}
	}
	d.scenario = s
	// Frames of the second line that come beside the first ("together" and a share) are
	// taken before or after: their time counts.
	d.Hours = (float64(l.Facts.Overhead) + float64(s.Scenario.Camera.Duration)/(1-share)) / 3600
	if d.Hours > float64(l.Facts.Hours)/3600*(1+1e-6) {
		d.Refuse = fmt.Sprintf("it takes %.3g h of the %.3g h available", d.Hours, float64(l.Facts.Hours)/3600)
	}
}

// binned sums pixels after reading: reads and digits add up in squares, box and track
// keep their length on the sky.
func binned(s *scenarios.Scenario, b int) []string {
	c, v := &s.Camera, &s.Inversion
	odd := func(n int) int { return max(5, (n/b)|1) }
	f := float64(b)
	return []string{
		fmt.Sprintf("image.pixel=%g arcsec", float64(s.Image.Pixel)*f),
		fmt.Sprintf("camera.read_noise=%g", c.ReadNoise*f),
		fmt.Sprintf("camera.digit=%g", c.Digit*f),
		fmt.Sprintf("camera.full_well=%g", c.FullWell*f*f),
		fmt.Sprintf("inversion.box=%d", odd(v.Box)),
		fmt.Sprintf("inversion.track=%d", odd(v.Track)),
	}
}

func oneLine(err error) string { return strings.ReplaceAll(err.Error(), "\n", "; ") }

// Impossible says that no design of a campaign can be carried out.
type Impossible struct {
	Designs int
	Why     []string // the reasons, each once
}

func (e *Impossible) Error() string {
	why := strings.Join(e.Why[:min(len(e.Why), 3)], "; ")
	return fmt.Sprintf("none of the %d designs is possible: %s", e.Designs, why)
}

// possible returns an error that says why if no design is.
func possible(ds []Design) error {
	e := &Impossible{Designs: len(ds)}
	for i := range ds {
		if ds[i].Refuse == "" {
			return nil
		}
		if !slices.Contains(e.Why, ds[i].Refuse) {
			e.Why = append(e.Why, ds[i].Refuse)
		}
	}
	return e
}
