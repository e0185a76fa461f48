package compare_test

import (
	"math"
	"strings"
	"testing"

	"offplane/compare"
	"offplane/synth/obs"
)

// Units as FITS files spell them, with the factor of their definition.
func TestStandardise(t *testing.T) {
	for _, c := range []struct {
		name, unit string
		value      float32
		want       float64
	}{
		{"B", "G", 3, 3}, {"B", "Gauss", 3, 3}, {"B", "T", 3e-4, 3}, {"B", "mT", 0.3, 3}, {"B", "10**-4 T", 3, 3}, {"B", "1e-4 T", 3, 3}, {"B_SKY", "kG", 0.003, 3},
		{"SPEED", "km/s", 400, 400}, {"SPEED", "km s-1", 400, 400}, {"SPEED", "km s**-1", 400, 400}, {"SPEED", "km.s^-1", 400, 400}, {"SPEED", "m / s", 4e5, 400}, {"SPEED", "cm s**(-1)", 4e7, 400}, {"SPEED_SKY", "Mm/s", 0.4, 400},
		{"NE", "cm-3", 2e8, 2e8}, {"NE", "cm^-3", 2e8, 2e8}, {"NE", "1 / cm3", 2e8, 2e8}, {"NE", "m-3", 2e14, 2e8}, {"NE", "m**-3", 2e14, 2e8}, {"NE", "1e8 cm-3", 2, 2e8}, {"NE", "10^8 cm^-3", 2, 2e8},
		{"NE", "log(cm-3)", 8, 1e8}, {"NE", "dex(1 / cm3)", 8, 1e8}, {"NE", "log10(m-3)", 14, 1e8}, {"NE_SKY", "ln(cm-3)", 18, math.Exp(18)},
		{"ANGLE", "deg", 90, 90}, {"ANGLE", "rad", math.Pi / 2, 90},
	} {
		m := obs.Map{Name: "X", Unit: c.unit, Data: []float32{c.value, float32(math.NaN())}}
		if err := compare.Standardise(c.name, &m); err != nil {
			t.Errorf("%s in %q: %v", c.name, c.unit, err)
			continue
		}
		if math.Abs(float64(m.Data[0])/c.want-1) > 1e-6 || m.Data[1] == m.Data[1] || m.Name != c.name || strings.Contains(m.Unit, "log") {
			t.Errorf("%s: %g %q became %g %q, want %g", c.name, c.value, c.unit, m.Data[0], m.Unit, c.want)
		}
	}
	for _, c := range []struct{ name, unit, want string }{
		{"B", "K", `is in "K"; it must be in G`}, {"B", "", "has no unit (BUNIT); it must be in G"}, {"NE", "dex", "must be in cm-3"}, {"NE", "cm-2", "must be in cm-3"},
		{"SPEED", "mm/s", "must be in km/s"}, {"NE", "log(G)", "must be in cm-3"}, {"PEAK", "G", "no map"}, {"B", "1..2 G", "must be in G"},
	} {
		m := obs.Map{Unit: c.unit, Data: []float32{1}}
		if err := compare.Standardise(c.name, &m); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s in %q: %v, want %q", c.name, c.unit, err, c.want)
		}
	}
	whole := obs.Map{Unit: "mT", Ints: []int32{2}}
	if err := compare.Standardise("B", &whole); err != nil || whole.Ints != nil || whole.Data[0] != 20 {
		t.Errorf("integers: %+v, %v", whole, err)
	}
}
