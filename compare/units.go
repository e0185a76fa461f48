package compare

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"

	"offplane/synth/obs"
)

// A quantity is what the maps of one kind hold: its unit in this program, and what others
// call it, each with the factor to ours.
type quantity struct {
	unit    string
	example string // of other units, for messages
	factors map[string]float64
}

var (
	fieldStrength = quantity{"G", "T, mT", map[string]float64{
		"G": 1, "Gauss": 1, "gauss": 1, "kG": 1e3, "mG": 1e-3, "T": 1e4, "Tesla": 1e4, "tesla": 1e4, "mT": 10, "uT": 1e-2, "nT": 1e-5}}
	speed = quantity{"km/s", "m/s, cm/s", map[string]float64{
		"km/s": 1, "kms-1": 1, "m/s": 1e-3, "ms-1": 1e-3, "cm/s": 1e-5, "cms-1": 1e-5, "Mm/s": 1e3, "Mms-1": 1e3}}
	density = quantity{"cm-3", "m-3, log(cm-3)", map[string]float64{
		"cm-3": 1, "1/cm3": 1, "/cm3": 1, "m-3": 1e-6, "1/m3": 1e-6, "/m3": 1e-6}}
	angle = quantity{"deg", "rad", map[string]float64{
		"deg": 1, "degree": 1, "degrees": 1, "rad": 180 / math.Pi}}

	truthMaps = map[string]*quantity{
		"B_SKY": &fieldStrength, "B_EMIS": &fieldStrength, "B_WAVE": &fieldStrength, "BTOT_SKY": &fieldStrength,
		"NE_SKY": &density, "NE_EMIS": &density, "NE_KINK": &density,
		"SPEED_SKY": &speed, "SPEED_WAVE": &speed, "ANGLE_SKY": &angle, "DOPPLER_LOCAL": &speed,
	}
	inferredMaps = map[string]*quantity{
		"B": &fieldStrength, "NE": &density, "SPEED": &speed, "ANGLE": &angle, "DOPPLER_RMS": &speed,
	}
)

// TruthNames and InferredNames list the maps that are compared, in the order of their files.
var (
	TruthNames    = []string{"B_SKY", "B_EMIS", "B_WAVE", "BTOT_SKY", "NE_SKY", "NE_EMIS", "NE_KINK", "SPEED_SKY", "SPEED_WAVE", "ANGLE_SKY", "DOPPLER_LOCAL"}
	InferredNames = []string{"B", "SPEED", "NE", "ANGLE", "DOPPLER_RMS"}
)

// Standardise converts a map of that name to the unit of Compare: G, km/s, cm-3, deg. A
// unit may have a number before it (1e8 cm-3, 10**8 cm-3) and may be that of a common or
// natural logarithm: log(cm-3), dex(cm-3), ln(cm-3). Integers become numbers. The error
// says which units there are.
func Standardise(name string, m *obs.Map) error {
	to, unit, err := Conversion(name, m.Unit)
	if err != nil {
		return err
	}
	x := m.Floats()
	m.Data, m.Ints, m.Codes = make([]float32, len(x)), nil, nil
	for i, v := range x {
		m.Data[i] = float32(to(float64(v)))
	}
	m.Name, m.Unit = name, unit
	return nil
}

// Conversion returns the function that takes values in a unit to that of Compare for maps
// of that name, and the name of the latter. The error says which units there are.
func Conversion(name, unit string) (to func(float64) float64, standard string, err error) {
	q := inferredMaps[name]
	if q == nil {
		q = truthMaps[name]
	}
	if q == nil {
		return nil, "", fmt.Errorf("no map %q is compared", name)
	}
	to, ok := q.conversion(unit)
	if !ok {
		if strings.TrimSpace(unit) == "" {
			return nil, "", fmt.Errorf("has no unit (BUNIT); it must be in %s (or %s)", q.unit, q.example)
		}
		return nil, "", fmt.Errorf("is in %q; it must be in %s (or %s)", unit, q.unit, q.example)
	}
	return to, q.unit, nil
}

var (
	logarithm = regexp.MustCompile(`^(log|log10|lg|dex|ln)\((.*)\)$`)
	multiple  = regexp.MustCompile(`^(?:10(?:\*\*|\^)\(?([-+]?\d+)\)?|([0-9.]+(?:[eE][-+]?\d+)?))\*?([A-Za-z].*)$`)
	powers    = strings.NewReplacer("**", "", "^", "", "(", "", ")", "", ".", "", "*", "")
)

// conversion returns the function from a unit to the quantity's own.
func (q *quantity) conversion(unit string) (to func(float64) float64, ok bool) {
	text := strings.ReplaceAll(unit, " ", "")
	kind := ""
	if m := logarithm.FindStringSubmatch(text); m != nil {
		kind, text = m[1], m[2]
	}
	factor := 1.0
	if m := multiple.FindStringSubmatch(text); m != nil {
		number := m[2]
		if m[1] != "" {
			number = "1e" + m[1]
		}
		var err error
		if factor, err = strconv.ParseFloat(number, 64); err != nil {
			return nil, false
		}
		text = m[3]
	}
	unity, ok := q.factors[powers.Replace(text)]
	factor *= unity
	switch kind {
	case "":
		return func(v float64) float64 { return factor * v }, ok
	case "ln":
		return func(v float64) float64 { return factor * math.Exp(v) }, ok
	}
	return func(v float64) float64 { return factor * math.Pow(10, v) }, ok
}
