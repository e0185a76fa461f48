package ensemble

import (
	"fmt"
	"path/filepath"
	"strings"

	"offplane/scenarios"
	"offplane/scenarios/strict"
)

// A validation collects the problems of an ensemble file.
type validation struct {
	l        *Loaded
	at       *strict.Positions
	problems strict.Problems
	sound    []int // numbers of the parameters that are right by themselves
}

func (v *validation) problem(path, format string, args ...any) {
	v.problems = append(v.problems, v.at.Problem(path, format, args...))
}

// count holds the number of members against the design.
func (v *validation) count() {
	e := &v.l.Ensemble
	switch {
	case !v.at.Sound("design", "members", "parameters"):
	case e.Design != "grid":
		switch {
		case e.Members > 0:
		case v.at.Given("members"):
			v.problem("members", "0 is out of range; it must be at least 1")
		default:
			v.problem("members", "is missing; write how many members the design %s has", e.Design)
		}
		if e.Design == "sobol" && len(e.Parameters) > len(joeKuo)+1 {
			v.problem("parameters", "there are %d; the design sobol takes at most %d", len(e.Parameters), len(joeKuo)+1)
		}
	default:
		n := 1
		for j, p := range e.Parameters {
			if len(p.Values) == 0 {
				v.problem(fmt.Sprintf("parameters.%d", j), "has no values; in a grid every parameter is a list of values")
				return
			}
			if n *= len(p.Values); n > maxMembers {
				v.problem("parameters", "the grid has more than %d combinations", maxMembers)
				return
			}
		}
		if e.Members == 0 {
			e.Members = n
		}
		if e.Members != n {
			v.problem("members", "%d stands here; the grid has %d combinations (leave the key out)", e.Members, n)
		}
	}
}

const maxMembers = 1_000_000

// parameters checks each parameter by itself.
func (v *validation) parameters() {
	if len(v.l.Parameters) == 0 && v.at.Sound("parameters") {
		v.problem("parameters", "none is given; an ensemble varies something")
	}
	first := map[string]int{}
	for j := range v.l.Parameters {
		p, path, before := &v.l.Parameters[j], fmt.Sprintf("parameters.%d", j), len(v.problems)
		if !v.at.Sound(path) {
			continue
		}
		if i, again := first[p.Path]; again {
			v.problem(path+".path", "%s varies already as parameter %d", p.Path, i)
		}
		first[p.Path] = j
		if p.Path == "seed" {
			v.problem(path+".path", "every member has a seed of its own; write the ensemble's seed")
		}
		for _, key := range recipeKeys {
			if p.Path == key || strings.HasPrefix(p.Path, key+".") {
				v.problem(path+".path", "%s is part of the recipe, which all members share; write it under set, one ensemble a recipe", p.Path)
			}
		}
		if key, err := p.check(); err != nil {
			v.problem(path+key, "%v", err)
		}
		if len(v.problems) == before {
			v.sound = append(v.sound, j)
		}
	}
}

// base loads the base scenario, applies the changes and tries every value and every end
// of a range on it, as far as the other mistakes of the file allow.
func (v *validation) base(source string) {
	l := v.l
	if !v.at.Sound("base") {
		return
	}
	name := l.Base
	if scenarios.IsFile(name) && !filepath.IsAbs(name) && scenarios.IsFile(source) {
		name = filepath.Join(filepath.Dir(source), name)
	}
	base, err := scenarios.Load(name)
	if err != nil {
		v.foreign("base", err)
		return
	}
	var changes []string
	for i, set := range l.Set {
		if _, err := base.With(set); err != nil {
			v.foreign(fmt.Sprintf("set.%d", i), err)
			continue
		}
		changes = append(changes, set)
	}
	if l.base, err = base.With(changes...); err != nil {
		v.foreign("set", err)
		return
	}
	if l.BaseSHA256 != "" && len(changes) == len(l.Set) && v.at.Sound("base_sha256", "set") && l.BaseSHA256 != l.base.SHA256 {
		v.problem("base_sha256", "is %s, but the base with its changes has %s: it was changed since, or is of another version of offplane", l.BaseSHA256, l.base.SHA256)
	}
	for _, j := range v.sound {
		for _, s := range l.Parameters[j].samples() {
			if _, err := l.base.With(l.Parameters[j].Path + "=" + s.text); err != nil {
				v.foreign(fmt.Sprintf("parameters.%d.%s", j, s.key), err)
			}
		}
	}
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
