package units

import (
	"encoding"
	"fmt"
	"math"
	"reflect"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// all holds one value of every quantity with its text.
var all = []struct {
	zero  encoding.TextUnmarshaler
	kind  kind
	units map[string]float64 // canonical units in one of each; derived from the definitions
}{
	{new(Angle), angle, map[string]float64{"deg": 1, "rad": 57.29577951308232, "arcmin": 1. / 60, "arcsec": 1. / 3600}},
	{new(SkyAngle), skyAngle, map[string]float64{"arcsec": 1, "arcmin": 60, "deg": 3600}},
	// 1 au = 215.03 solar radii of 6.957e8 m, from the two IAU resolutions.
	{new(Distance), distance, map[string]float64{"au": 1, "Rsun": 1 / 215.0321555, "km": 1 / 1.495978707e8}},
	{new(Height), height, map[string]float64{"Rsun": 1, "Mm": 1 / 695.7, "km": 1 / 695700.}},
	{new(Length), length, map[string]float64{"Mm": 1, "km": 0.001, "Rsun": 695.7}},
	{new(Duration), duration, map[string]float64{"s": 1, "ms": 0.001, "min": 60, "h": 3600}},
	{new(Frequency), frequency, map[string]float64{"mHz": 1, "Hz": 1000}},
	{new(Temperature), temperature, map[string]float64{"MK": 1, "K": 1e-6}},
	{new(Field), field, map[string]float64{"G": 1, "mG": 0.001, "mT": 10, "T": 1e4}},
	{new(Speed), speed, map[string]float64{"km/s": 1, "m/s": 0.001, "Mm/s": 1000}},
	{new(Density), density, map[string]float64{"cm-3": 1, "m-3": 1e-6}},
	{new(Wavelength), wavelength, map[string]float64{"nm": 1, "pm": 0.001, "Angstrom": 0.1}},
	{new(Diameter), diameter, map[string]float64{"cm": 1, "m": 100, "mm": 0.1}},
	{new(Brightness), brightness, map[string]float64{"ppm": 1}},
}

func number64(u encoding.TextUnmarshaler) float64 { return reflect.ValueOf(u).Elem().Float() }

func TestEveryUnit(t *testing.T) {
	for _, q := range all {
		if len(q.units) != len(q.kind.units) {
			t.Errorf("%T: %d units, the test knows %d", q.zero, len(q.kind.units), len(q.units))
		}
		for name, one := range q.units {
			for _, text := range []string{"2.5 " + name, "2.5" + name, " +25e-1   " + name + " "} {
				if err := q.zero.UnmarshalText([]byte(text)); err != nil {
					t.Errorf("%T %q: %v", q.zero, text, err)
				} else if got := number64(q.zero); math.Abs(got/(2.5*one)-1) > 1e-9 {
					t.Errorf("%T %q = %g, want %g", q.zero, text, got, 2.5*one)
				}
			}
		}
	}
}

func TestDecimalUnitsAreExact(t *testing.T) {
	for _, c := range []struct {
		into encoding.TextUnmarshaler
		text string
		want float64
	}{
		{new(Length), "7000 km", 7}, {new(Duration), "250 ms", 0.25}, {new(Duration), "1.5 h", 5400},
		{new(Temperature), "1.6e6 K", 1.6}, {new(Field), "0.3 mT", 3}, {new(Wavelength), "1.2 Angstrom", 0.12},
		{new(Density), "1e14 m-3", 1e8}, {new(Frequency), "0.0035 Hz", 3.5}, {new(Height), "695.7 Mm", 1},
		{new(Speed), "25000 m/s", 25}, {new(Diameter), "1.5 m", 150}, {new(Angle), "90 arcmin", 1.5},
	} {
		if err := c.into.UnmarshalText([]byte(c.text)); err != nil || number64(c.into) != c.want {
			t.Errorf("%T %q = %v, %v; want %v", c.into, c.text, number64(c.into), err, c.want)
		}
	}
}

func TestNegativeZeroIsZero(t *testing.T) {
	a := Angle(1)
	if err := a.UnmarshalText([]byte("-0 deg")); err != nil || math.Signbit(float64(a)) {
		t.Errorf("-0 deg = %v (sign bit %v), %v", a, math.Signbit(float64(a)), err)
	}
}

func TestRoundTrip(t *testing.T) {
	for _, q := range all {
		rapid.Check(t, func(t *rapid.T) {
			x := rapid.Float64Range(-math.MaxFloat64, math.MaxFloat64).Draw(t, "x")
			v := reflect.ValueOf(q.zero)
			v.Elem().SetFloat(x)
			text := fmt.Sprint(v.Elem().Interface())
			v.Elem().SetFloat(0)
			if err := q.zero.UnmarshalText([]byte(text)); err != nil || number64(q.zero) != x {
				t.Fatalf("%g prints %q, read back as %g, %v", x, text, number64(q.zero), err)
			}
		})
	}
}

func TestPrint(t *testing.T) {
	for want, v := range map[string]fmt.Stringer{
		"1.6 MK": Temperature(1.6), "1e8 cm-3": Density(1e8), "4.35 arcsec": SkyAngle(4.35), "-0.12 nm": Wavelength(-0.12),
		"0 deg": Angle(math.Copysign(0, -1)), "1.5e-7 G": Field(1.5e-7), "10800 s": Duration(10800), "2.5e7 cm-3": Density(2.5e7),
		"2025-01-01T00:00:00.5Z": Date{time.Date(2025, 1, 1, 1, 0, 0, 5e8, time.FixedZone("", 3600))},
	} {
		if v.String() != want {
			t.Errorf("%q, want %q", v, want)
		}
	}
}

func TestMessages(t *testing.T) {
	for _, c := range []struct {
		into encoding.TextUnmarshaler
		text string
		want string
	}{
		{new(Length), "7", `7 has no unit; write a length with a unit, such as 7 Mm or 7000 km`},
		{new(Length), "7 mm", `"mm" is not a unit here; write a length with a unit, such as 7 Mm or 7000 km (units: Mm, km, Rsun)`},
		{new(Length), "nan Mm", `"nan Mm" is not a number with a unit; write a length with a unit, such as 7 Mm or 7000 km`},
		{new(Length), "Inf Mm", `"Inf Mm" is not a number with a unit; write a length with a unit, such as 7 Mm or 7000 km`},
		{new(Length), "1e999 Mm", `"1e999" is too large a number; write a length with a unit, such as 7 Mm or 7000 km`},
		{new(Field), "1e308 T", `"1e308 T" is too large a number; write a magnetic field with a unit, such as 3 G or 0.3 mT`},
		{new(Density), "1,5 cm-3", `",5 cm-3" is not a unit here; write a density with a unit, such as 1e8 cm-3 (units: cm-3, m-3)`},
		{new(Angle), "0x10 deg", `"x10 deg" is not a unit here; write an angle with a unit, such as 30 deg or 0.5 rad (units: deg, rad, arcmin, arcsec)`},
		{new(Speed), "", `"" is not a number with a unit; write a speed with a unit, such as 25 km/s`},
		{new(Date), "2025-01-01", `"2025-01-01" is not a date in UTC; write a date in UTC, such as 2025-01-01T00:00:00Z`},
		{new(Date), "2025-01-01T00:00:00+01:00", `"2025-01-01T00:00:00+01:00" is not a date in UTC; write a date in UTC, such as 2025-01-01T00:00:00Z`},
	} {
		before := fmt.Sprint(c.into)
		if err := c.into.UnmarshalText([]byte(c.text)); err == nil || err.Error() != c.want {
			t.Errorf("%T %q:\n got %v\nwant %s", c.into, c.text, err, c.want)
		}
		if after := fmt.Sprint(c.into); after != before {
			t.Errorf("%T %q changed the value from %s to %s", c.into, c.text, before, after)
		}
	}
}

// Every example that a message offers must itself be readable.
func TestExamplesAreReadable(t *testing.T) {
	for _, q := range all {
		for _, example := range splitOr(q.kind.example) {
			if err := q.zero.UnmarshalText([]byte(example)); err != nil {
				t.Errorf("%T: %v", q.zero, err)
			}
		}
	}
}

func splitOr(s string) []string {
	for i := 0; i+4 <= len(s); i++ {
		if s[i:i+4] == " or " {
			return []string{s[:i], s[i+4:]}
		}
	}
	return []string{s}
}

// Derived by hand from the definitions of the units.
func TestConversions(t *testing.T) {
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"Angle.Rad", Angle(180).Rad(), math.Pi},
		{"SkyAngle.Rad", SkyAngle(3600).Rad(), math.Pi / 180},
		{"Distance.CGS", Distance(1).CGS(), 1.495978707e13},
		{"Distance.Rsun", Distance(1).Rsun(), 215.0321555},
		{"Height.CGS", Height(2).CGS(), 1.3914e11},
		{"Length.CGS", Length(7).CGS(), 7e8},
		{"Length.Rsun", Length(695.7).Rsun(), 1},
		{"Frequency.Hz", Frequency(3.5).Hz(), 3.5e-3},
		{"Temperature.Kelvin", Temperature(1.6).Kelvin(), 1.6e6},
		{"Speed.CGS", Speed(25).CGS(), 2.5e6},
		{"Wavelength.CGS", Wavelength(1074.7).CGS(), 1.0747e-4},
		{"Brightness.Fraction", Brightness(8).Fraction(), 8e-6},
		// The limb of the nominal Sun at 1 au is at arcsin 6.957e8 m / 1 au = 959.231 arcsec.
		{"limb", math.Asin(SolarRadius/AU) / SkyAngle(1).Rad(), 959.2311861},
		// B = v sqrt(4 pi mu m_p n) is 0.45846 G at 100 km/s, mu n = 1e8 cm^-3 (derived, CODATA m_p).
		{"field", Speed(100).CGS() * math.Sqrt(4*math.Pi*ProtonMass*1e8) / 0.45846, 1},
	} {
		if tol := 1e-9 + 1e-5*map[string]float64{"field": 1}[c.name]; math.Abs(c.got/c.want-1) > tol {
			t.Errorf("%s = %.12g, want %.12g", c.name, c.got, c.want)
		}
	}
}
