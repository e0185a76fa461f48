package table

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/compare/ensemble"
	"offplane/scenarios/strict"
)

// columnsOf names the columns of a member's pixels that hold a feature; %s is the suffix
// of the estimator.
var columnsOf = [features]string{"R", "B%s", "NE", "SPEED%s", "ANGLE_RADIAL", "TRACK", "COHERENCE"}

// truthsOf names the columns that hold the truth of a quantity; empty: there is none.
var truthsOf = map[string][quantities]string{
	"sky":      {"B_SKY", "SPEED_SKY", "NE_SKY"},
	"emission": {"B_EMIS", "", "NE_EMIS"},
	"wave":     {"B_WAVE", "SPEED_WAVE", ""},
	"total":    {"BTOT_SKY", "", ""},
}

// Load reads the members of an ensemble that are whole, against one truth and with the
// maps of one estimator (empty: the first), and the recipe that they share.
func Load(set *ensemble.Set, truth, estimator string) ([]Member, Recipe, error) {
	truths, ok := truthsOf[truth]
	if !ok {
		return nil, nil, fmt.Errorf("truth %q: must be one of %s%s", truth, strings.Join(Truths(), ", "), strict.Hint(truth, Truths()))
	}
	var members []Member
	var recipe Recipe
	for _, number := range set.Done {
		m, err := set.Read(number)
		if err != nil {
			return nil, nil, err
		}
		k := 0
		if all := m.Estimators(); estimator != "" {
			if k = slices.Index(all, estimator); k < 0 {
				return nil, nil, fmt.Errorf("the maps of the ensemble are by the estimators %s, not by %s", strings.Join(all, ", "), estimator)
			}
		}
		if recipe == nil {
			recipe = NewRecipe(m.Recipe(k))
		}
		members = append(members, newMember(m, truths, ensemble.Suffix(m.Estimators(), k)))
	}
	return members, recipe, nil
}

func newMember(m *ensemble.Member, truths [quantities]string, suffix string) Member {
	own := func(name string) []float32 {
		if strings.HasSuffix(name, "%s") {
			name = strings.TrimSuffix(name, "%s") + suffix
		}
		return m.Column(name)
	}
	var keep []int
	field := own(columnsOf[Field])
	for i, b := range field {
		if b > 0 {
			keep = append(keep, i)
		}
	}
	pick := func(x []float32) []float64 {
		if x == nil {
			return nil
		}
		out := make([]float64, len(keep))
		for k, i := range keep {
			out[k] = float64(x[i])
		}
		return out
	}
	out := Member{Name: fmt.Sprintf("%06d", m.Number), Bright: pick(m.Column("PEAK"))}
	for f, name := range columnsOf {
		out.Features[f] = pick(own(name))
	}
	for q, name := range truths {
		if truth := pick(own(name)); name != "" && truth != nil {
			out.Ln[q] = logs(truth, out.Features[Quantity(q).Feature()])
		}
	}
	return out
}

// logs returns ln(true/inferred), NaN where either is not positive.
func logs(truth, inferred []float64) []float64 {
	y := make([]float64, len(truth))
	for i := range y {
		y[i] = math.NaN()
		if truth[i] > 0 && inferred[i] > 0 {
			y[i] = math.Log(truth[i] / inferred[i])
		}
	}
	return y
}
