package table

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"offplane/compare/ensemble"
	"offplane/scenarios/strict"
)

// A Recipe says how maps were observed and inverted, as far as it moves their bias: one
// Step for each choice, in a fixed order. A table is only good for maps of its recipe.
type Recipe []Step

// A Step is one choice of a recipe.
type Step struct{ Key, Value string }

// steps lists the choices with how close numbers have to be, as a share; 0: equal texts.
var steps = []struct {
	key, about string
	within     float64
}{
	{"estimator", "of the phase speed", 0},
	{"separation", "whether outward and inward waves were separated first", 0},
	{"k_zero", "what the separation did with zero wavenumber", 0},
	{"padding", "zero padding of the track for the separation", 0},
	{"track", "points along the track", 0},
	{"filter", "centre and width of the band-pass [mHz], and what the width means", 0},
	{"mu", "rho / (m_p n_e)", 0.005},
	{"atoms", "atomic data: embedded, or the SHA-256 of their file", 0},
	{"pixel", "[arcsec]", 0.02},
	{"camera", "class of camera: aperture and pixel", 0},
}

// RecipeKeys lists the keys of a recipe.
func RecipeKeys() []string {
	keys := make([]string, len(steps))
	for i := range steps {
		keys[i] = steps[i].key
	}
	return keys
}

// NewRecipe returns the recipe of maps that this program made. A camera of no class stays
// out.
func NewRecipe(r ensemble.Recipe) Recipe {
	v := r.Inversion
	number := func(x float64) string { return strconv.FormatFloat(x, 'g', 6, 64) }
	text := func(s, missing string) string {
		if s == "" {
			return missing
		}
		return s
	}
	if r.Camera == "none" { // described by its own keys, which an ensemble may vary
		r.Camera = ""
	}
	values := map[string]string{
		"estimator":  v.Estimators[0],
		"separation": strconv.FormatBool(v.Separation),
		"k_zero":     v.KZero,
		"padding":    strconv.Itoa(v.Padding),
		"track":      strconv.Itoa(v.Track),
		"filter":     fmt.Sprintf("%s %s %s", number(1e3*v.Filter.Centre.Hz()), number(1e3*v.Filter.Width.Hz()), v.Filter.Means),
		"mu":         number(v.Mu),
		"atoms":      text(r.Atoms, "embedded"),
		"pixel":      number(float64(r.Pixel)),
		"camera":     r.Camera,
	}
	var out Recipe
	for _, s := range steps {
		if v := values[s.key]; v != "" {
			out = append(out, Step{s.key, v})
		}
	}
	return out
}

// Get returns the value of a step; empty: not known.
func (r Recipe) Get(key string) string {
	for _, s := range r {
		if s.Key == key {
			return s.Value
		}
	}
	return ""
}

// Mu returns rho / (m_p n_e) of the recipe; 0: not known.
func (r Recipe) Mu() float64 {
	mu, _ := strconv.ParseFloat(r.Get("mu"), 64)
	return mu
}

// With returns the recipe with steps set by assignments KEY=VALUE.
func (r Recipe) With(assignments ...string) (Recipe, error) {
	out := append(Recipe{}, r...)
	for _, a := range assignments {
		key, value, ok := strings.Cut(a, "=")
		if !ok || value == "" {
			return nil, fmt.Errorf("%q: must be KEY=VALUE", a)
		}
		if key == "pixel" || key == "mu" || key == "track" || key == "padding" {
			if v, err := strconv.ParseFloat(value, 64); err != nil || !finite(v) || v < 0 || v == 0 && key != "padding" {
				return nil, fmt.Errorf("%q: %s must be a positive number", a, key)
			}
		}
		i := 0
		for i < len(steps) && steps[i].key != key {
			i++
		}
		if i == len(steps) {
			return nil, fmt.Errorf("%q: a recipe has the keys %s%s", a, strings.Join(RecipeKeys(), ", "), strict.Hint(key, RecipeKeys()))
		}
		k := 0
		for k < len(out) && out[k].Key != key {
			k++
		}
		if k == len(out) {
			out = append(out, Step{Key: key})
		}
		out[k].Value = value
	}
	return out, nil
}

// Differ lists what keeps maps of the recipe other from being corrected by a table of
// this one: steps that differ, and steps that other does not know.
func (r Recipe) Differ(other Recipe) (differ, unknown []string) {
	for _, s := range steps {
		mine, theirs := r.Get(s.key), other.Get(s.key)
		switch {
		case mine == "":
		case theirs == "":
			unknown = append(unknown, fmt.Sprintf("%s=%s", s.key, mine))
		case mine != theirs && !near(mine, theirs, s.within):
			differ = append(differ, fmt.Sprintf("%s is %s, the table's is %s", s.key, theirs, mine))
		}
	}
	return differ, unknown
}

// near compares numbers.
func near(a, b string, within float64) bool {
	x, err := strconv.ParseFloat(a, 64)
	if err != nil || within == 0 {
		return false
	}
	y, err := strconv.ParseFloat(b, 64)
	return err == nil && math.Abs(x-y) <= within*math.Abs(x)
}
