package plan

import (
	"fmt"
	"math"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"

	"offplane/compare/ensemble"
	"offplane/scenarios"
	"offplane/scenarios/strict"
)

// maxDesigns bounds the design space: each design is a scenario of its own that is
// checked.
const maxDesigns = 20_000

// paths of the knobs in a scenario; those that mean several keys at once have none.
var paths = map[string]string{
	"duration": "camera.duration", "cadence": "camera.cadence", "exposure": "camera.exposure", "coadds": "camera.coadds",
	"tunings": "camera.tunings", "aperture": "camera.aperture", "pixel": "image.pixel", "background": "camera.background",
	"track": "inversion.track",
}

// A validation collects the problems of a campaign file.
type validation struct {
	l        *Loaded
	at       *strict.Positions
	problems strict.Problems
}

func (v *validation) problem(path, format string, args ...any) {
	v.problems = append(v.problems, v.at.Problem(path, format, args...))
}

func (v *validation) region() {
	t := &v.l.Target
	if v.at.Sound("target.inner", "target.outer") && !(t.Inner < t.Outer) {
		v.problem("target.outer", "%v is not above inner, %v", t.Outer, t.Inner)
	}
	if f := &v.l.Facts; v.at.Sound("facts.hours", "facts.overhead") && !(f.Overhead < f.Hours) {
		v.problem("facts.overhead", "%v leaves nothing of the %v available", f.Overhead, f.Hours)
	}
}

// knobs lists the values of each knob.
func (v *validation) knobs() {
	l := v.l
	if len(l.Vary) == 0 && v.at.Sound("vary") {
		v.problem("vary", "nothing may vary; a plan chooses between designs (offplane run judges a single one)")
	}
	first, designs := map[string]int{}, 1
	l.values = make([][]string, len(l.Vary))
	for j := range l.Vary {
		k, path := &l.Vary[j], fmt.Sprintf("vary.%d", j)
		if !v.at.Sound(path) {
			continue
		}
		if i, again := first[k.What]; again {
			v.problem(path+".what", "%s varies already as number %d", k.What, i)
		}
		first[k.What] = j
		if k.What == "exposure" && l.Facts.Fill {
			v.problem(path+".what", "exposures fill the cadence (facts.fill); they cannot vary by themselves")
		}
		if _, both := first["duration"]; both && (k.What == "split" || k.What == "duration") {
			if _, both := first["split"]; both {
				v.problem(path+".what", "split fixes the duration: it is what the second line leaves of facts.hours")
			}
		}
		values, key, err := k.list()
		if err != nil {
			v.problem(path+key, "%v", err)
		}
		l.values[j] = values
		if designs *= max(len(values), 1); designs > maxDesigns {
			v.problem("vary", "there are more than %d designs; fewer values would do, predictions between them are smooth", maxDesigns)
			return
		}
	}
}

var quantityText = regexp.MustCompile(`^([-+]?[0-9.]+(?:[eE][-+]?[0-9]+)?)(.*)$`)

// list returns the values of a knob, or the key below it that is wrong.
func (k *Knob) list() (values []string, key string, err error) {
	if k.Range == nil {
		if len(k.Values) == 0 {
			return nil, ".values", fmt.Errorf("the list is empty")
		}
		for _, x := range k.Values {
			values = append(values, string(x))
		}
		return values, "", nil
	}
	var x [2]float64
	var unit [2]string
	for i, s := range []ensemble.Scalar{k.Range.From, k.Range.To} {
		key := [2]string{".range.from", ".range.to"}[i]
		m := quantityText.FindStringSubmatch(string(s))
		if m == nil {
			return nil, key, fmt.Errorf("%q is not a number with a unit", s)
		}
		if x[i], err = strconv.ParseFloat(m[1], 64); err != nil {
			return nil, key, fmt.Errorf("%q is not a number with a unit", s)
		}
		unit[i] = m[2]
	}
	switch {
	case unit[0] != unit[1]:
		return nil, ".range.to", fmt.Errorf("%q is not in the unit of %q", k.Range.To, k.Range.From)
	case !(x[0] < x[1]):
		return nil, ".range.to", fmt.Errorf("%s is not above %s", k.Range.To, k.Range.From)
	case k.Range.Ratio && !(x[0] > 0):
		return nil, ".range.from", fmt.Errorf("%s has no logarithm; it must be more than 0", k.Range.From)
	}
	for i := range k.Range.Steps {
		u := float64(i) / float64(k.Range.Steps-1)
		y := x[0] + float64(u*(x[1]-x[0]))
		if k.Range.Ratio {
			y = x[0] * math.Pow(x[1]/x[0], u)
		}
		if whole[k.What] {
			y = math.Round(y)
		}
		s := strconv.FormatFloat(y, 'g', 6, 64) + unit[0]
		if n := len(values); n == 0 || values[n-1] != s {
			values = append(values, s)
		}
	}
	return values, "", nil
}

// whole knobs are counted.
var whole = map[string]bool{"coadds": true, "binning": true, "track": true}

// target loads the scenario, puts the region in place and tries every value on it.
func (v *validation) target(source string) {
	l := v.l
	name := l.Target.Scenario
	if scenarios.IsFile(name) && !filepath.IsAbs(name) && scenarios.IsFile(source) {
		name = filepath.Join(filepath.Dir(source), name)
	}
	base, err := scenarios.Load(name)
	if err != nil {
		v.foreign("target.scenario", err)
		return
	}
	for i, set := range l.Target.Set {
		if _, err := base.With(set); err != nil {
			v.foreign(fmt.Sprintf("target.set.%d", i), err)
		}
	}
	if len(v.problems) > 0 {
		return
	}
	if base, err = base.With(append(append([]string{}, l.Target.Set...), fmt.Sprintf("seed=%d", l.Seed))...); err != nil {
		v.foreign("target.set", err)
		return
	}
	if l.base, err = base.With("image.from="+l.Target.From.String(), "image.to="+l.Target.To.String()); err != nil {
		v.foreign("target", err)
		return
	}
	s := &l.base.Scenario
	switch {
	case l.Target.Inner < s.Image.Inner || l.Target.Outer > s.Image.Outer:
		v.problem("target.inner", "the goal holds from %v to %v, but the image reaches from %v to %v only", l.Target.Inner, l.Target.Outer, s.Image.Inner, s.Image.Outer)
	case len(s.Inversion.Estimators) == 0:
		v.problem("target.scenario", "its inversion has no estimator")
	case !s.Camera.Noise:
		v.problem("target.scenario", "its camera has no noise; a plan needs to know it (camera.noise=true)")
	}
	for j := range l.Vary {
		for i, x := range l.values[j] {
			path := fmt.Sprintf("vary.%d.values.%d", j, i)
			if l.Vary[j].Range != nil {
				path = fmt.Sprintf("vary.%d.range", j)
			}
			if err := v.try(l.Vary[j].What, x); err != nil {
				v.foreign(path, err)
			}
		}
	}
}

// try returns an error if a value is none of its knob whatever else is chosen.
func (v *validation) try(what, x string) error {
	switch what {
	case "second_line", "split":
		if f, err := strconv.ParseFloat(x, 64); err != nil || !(f > 0 && f <= 0.5) {
			return fmt.Errorf("%q must be a share of the time, more than 0 and at most 0.5", x)
		}
		return nil
	case "binning":
		if n, err := strconv.Atoi(x); err != nil || n < 1 || n > 20 {
			return fmt.Errorf("%q must be a whole number of pixels from 1 to 20", x)
		}
		return nil
	}
	// Without the rules that tie keys together: those are for whole designs.
	c := scenarios.Default()
	_, err := strict.Read(v.l.base.Name, v.l.base.Canonical, &c, paths[what]+"="+x)
	return err
}

// foreign locates the problems of a scenario in this file.
func (v *validation) foreign(path string, err error) {
	ps, ok := err.(strict.Problems)
	if !ok {
		v.problem(path, "%v", err)
	}
	for _, p := range ps {
		v.problem(path, "%s", strings.TrimPrefix(p.Error(), "--set "))
	}
}
