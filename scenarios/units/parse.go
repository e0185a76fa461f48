package units

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"
	"time"
)

// A kind is what text needs to know of a quantity.
type kind struct {
	name    string // with its article
	example string
	units   []unit // the canonical one first
}

// A unit is times over per canonical units. Two numbers, so that 7000 km / 1000 is
// exactly the 7 of 7 Mm.
type unit struct {
	name        string
	times, over float64
}

var (
	angle       = kind{"an angle", "30 deg or 0.5 rad", []unit{{"deg", 1, 1}, {"rad", 180, math.Pi}, {"arcmin", 1, 60}, {"arcsec", 1, 3600}}}
	skyAngle    = kind{"an angle on the sky", "4.35 arcsec", []unit{{"arcsec", 1, 1}, {"arcmin", 60, 1}, {"deg", 3600, 1}}}
	distance    = kind{"a distance", "1 au or 215 Rsun", []unit{{"au", 1, 1}, {"Rsun", SolarRadius, AU}, {"km", 1e5, AU}}}
	height      = kind{"a height", "1.1 Rsun", []unit{{"Rsun", 1, 1}, {"Mm", 1e8, SolarRadius}, {"km", 1e5, SolarRadius}}}
	length      = kind{"a length", "7 Mm or 7000 km", []unit{{"Mm", 1, 1}, {"km", 1, 1e3}, {"Rsun", SolarRadius, 1e8}}}
	duration    = kind{"a time", "30 s or 3 h", []unit{{"s", 1, 1}, {"ms", 1, 1e3}, {"min", 60, 1}, {"h", 3600, 1}}}
	frequency   = kind{"a frequency", "3.5 mHz", []unit{{"mHz", 1, 1}, {"Hz", 1e3, 1}}}
	temperature = kind{"a temperature", "1.6 MK or 1.6e6 K", []unit{{"MK", 1, 1}, {"K", 1, 1e6}}}
	field       = kind{"a magnetic field", "3 G or 0.3 mT", []unit{{"G", 1, 1}, {"mG", 1, 1e3}, {"mT", 10, 1}, {"T", 1e4, 1}}}
	speed       = kind{"a speed", "25 km/s", []unit{{"km/s", 1, 1}, {"m/s", 1, 1e3}, {"Mm/s", 1e3, 1}}}
	density     = kind{"a density", "1e8 cm-3", []unit{{"cm-3", 1, 1}, {"m-3", 1, 1e6}}}
	wavelength  = kind{"a wavelength", "0.12 nm or 1.2 Angstrom", []unit{{"nm", 1, 1}, {"pm", 1, 1e3}, {"Angstrom", 1, 10}}}
	diameter    = kind{"a diameter", "20 cm or 1.5 m", []unit{{"cm", 1, 1}, {"m", 100, 1}, {"mm", 1, 10}}}
	brightness  = kind{"a brightness", "8 ppm", []unit{{"ppm", 1, 1}}}
)

func (k kind) want() string { return k.name + " with a unit, such as " + k.example }

// number is what may stand before the unit. It is greedy, so "1e3" is a number and
// "1 eV" is not.
var number = regexp.MustCompile(`^[-+]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][-+]?[0-9]+)?`)

func (k kind) parse(text []byte) (float64, error) {
	s := strings.TrimSpace(string(text))
	digits := number.FindString(s)
	if digits == "" {
		return 0, fmt.Errorf("%s; write %s", quote(s, "is not a number with a unit"), k.want())
	}
	v, err := strconv.ParseFloat(digits, 64)
	if err != nil {
		return 0, fmt.Errorf("%s; write %s", quote(digits, "is too large a number"), k.want())
	}
	name := strings.TrimLeft(s[len(digits):], " ")
	if name == "" {
		return 0, fmt.Errorf("%s has no unit; write %s", digits, k.want())
	}
	for _, u := range k.units {
		if u.name == name {
			v = v * u.times / u.over
			if math.IsInf(v, 0) {
				return 0, fmt.Errorf("%s; write %s", quote(s, "is too large a number"), k.want())
			}
			return v + 0, nil // no negative zero
		}
	}
	names := make([]string, len(k.units))
	for i, u := range k.units {
		names[i] = u.name
	}
	return 0, fmt.Errorf("%s; write %s (units: %s)", quote(name, "is not a unit here"), k.want(), strings.Join(names, ", "))
}

func quote(s, what string) string {
	if r := []rune(s); len(r) > 40 {
		s = string(r[:40]) + "..."
	}
	return fmt.Sprintf("%q %s", s, what)
}

func (k kind) format(v float64) string { return Number(v) + " " + k.units[0].name }

// Number writes the shortest decimal that reads back as v: 0.12, 1e8, 1.5e-7.
func Number(v float64) string {
	if v == 0 {
		return "0"
	}
	s := strconv.FormatFloat(v, 'g', -1, 64)
	mantissa, exponent, found := strings.Cut(s, "e")
	if !found {
		return s
	}
	e, _ := strconv.Atoi(exponent)
	return mantissa + "e" + strconv.Itoa(e)
}

// Date is an instant, UTC, written as RFC 3339: 2025-01-01T00:00:00Z.
type Date struct{ time.Time }

// MarshalText writes the date as String does. It never fails.
func (d Date) MarshalText() ([]byte, error) { return []byte(d.String()), nil }

// String returns the date in RFC 3339 with as many decimals as needed.
func (d Date) String() string { return d.UTC().Format(time.RFC3339Nano) }

// Want says what to write.
func (d Date) Want() string { return "a date in UTC, such as 2025-01-01T00:00:00Z" }

// UnmarshalText reads RFC 3339 in UTC (ending in Z); any other zone is an error.
func (d *Date) UnmarshalText(text []byte) error {
	s := strings.TrimSpace(string(text))
	t, err := time.Parse(time.RFC3339Nano, s)
	if err != nil || !strings.HasSuffix(s, "Z") {
		return fmt.Errorf("%s; write %s", quote(s, "is not a date in UTC"), d.Want())
	}
	d.Time = t.UTC()
	return nil
}
