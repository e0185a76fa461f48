package strict

import (
	"encoding"
	"fmt"
	"math"
	"reflect"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Encode writes a struct, or a pointer to one, as canonical YAML: fields in order,
// every value written, map keys sorted, shortest numbers that read back the same, nil
// pointers and members of a choice that are not given left out. Decode gives back the
// same value if what it fills has no pointers outside a choice. NaN, infinities and
// text that is not UTF-8 panic: Decode never lets them in.
func Encode(v any) []byte {
	e := &encoder{}
	r := reflect.ValueOf(v)
	for r.Kind() == reflect.Pointer {
		r = r.Elem()
	}
	if r.Kind() != reflect.Struct {
		panic(fmt.Sprintf("strict: cannot write %T, want a struct", v))
	}
	e.block(r, "")
	if e.b.Len() == 0 {
		e.b.WriteString("{}\n")
	}
	return []byte(e.b.String())
}

type encoder struct{ b strings.Builder }

// An entry is a key and its value, of a struct or a map.
type entry struct {
	key   string
	value reflect.Value
}

func entries(v reflect.Value) []entry {
	var es []entry
	if v.Kind() == reflect.Map {
		for _, k := range sortedKeys(v) {
			es = append(es, entry{quoted(k.String()), v.MapIndex(k)})
		}
		return es
	}
	for _, f := range fields(v.Type()) {
		fv := v.Field(f.index)
		if fv.Kind() == reflect.Pointer && fv.IsNil() || f.choice != "" && fv.IsZero() {
			continue
		}
		es = append(es, entry{f.key, fv})
	}
	return es
}

func sortedKeys(m reflect.Value) []reflect.Value {
	ks := m.MapKeys()
	slices.SortFunc(ks, func(a, b reflect.Value) int { return strings.Compare(a.String(), b.String()) })
	return ks
}

// inline returns the text of a value that fits behind its key.
func inline(v reflect.Value) (string, bool) {
	switch {
	case isText(v.Type()):
		return scalarText(v), true
	case v.Kind() == reflect.Pointer:
		if v.IsNil() {
			return "null", true
		}
		return inline(v.Elem())
	case v.Kind() == reflect.Struct || v.Kind() == reflect.Map:
		return "{}", len(entries(v)) == 0
	case v.Kind() == reflect.Slice:
		parts := make([]string, v.Len())
		for i := range parts {
			var ok bool
			if parts[i], ok = inline(v.Index(i)); !ok {
				return "", false
			}
		}
		return "[" + strings.Join(parts, ", ") + "]", true
	}
	return scalarText(v), true
}

// block writes the entries of a struct or map, or the items of a list, one a line.
func (e *encoder) block(v reflect.Value, indent string) {
	if v.Kind() == reflect.Pointer {
		v = v.Elem()
	}
	if v.Kind() == reflect.Slice {
		for i := range v.Len() {
			item := v.Index(i)
			if s, ok := inline(item); ok {
				e.b.WriteString(indent + "- " + s + "\n")
				continue
			}
			// The first line of the item's own block stands behind the dash.
			sub := &encoder{}
			sub.block(item, indent+"  ")
			e.b.WriteString(indent + "- " + strings.TrimPrefix(sub.b.String(), indent+"  "))
		}
		return
	}
	for _, en := range entries(v) {
		if s, ok := inline(en.value); ok {
			e.b.WriteString(indent + en.key + ": " + s + "\n")
			continue
		}
		e.b.WriteString(indent + en.key + ":\n")
		e.block(en.value, indent+"  ")
	}
}

// plain is text that needs no quotes wherever it stands.
var plain = regexp.MustCompile(`^[-+.]?[\pL\pN]([-+./()%_^ \pL\pN]*[-+./()%_^\pL\pN])?$`)

func scalarText(v reflect.Value) string {
	if isText(v.Type()) {
		m, ok := v.Interface().(encoding.TextMarshaler)
		if !ok {
			panic(fmt.Sprintf("strict: %s has UnmarshalText but not MarshalText", v.Type()))
		}
		s, err := m.MarshalText()
		if err != nil {
			panic("strict: " + err.Error())
		}
		if text := string(s); !dateLike.MatchString(text) && !safe(text) {
			return strconv.Quote(text)
		}
		return string(s)
	}
	switch {
	case v.Kind() == reflect.String:
		return quoted(v.String())
	case v.Kind() == reflect.Bool:
		return strconv.FormatBool(v.Bool())
	case v.CanInt():
		return strconv.FormatInt(v.Int(), 10)
	case v.CanUint():
		return strconv.FormatUint(v.Uint(), 10)
	case v.Kind() == reflect.Float64:
		return floatText(v.Float())
	}
	panic(fmt.Sprintf("strict: cannot write values of type %s", v.Type()))
}

var dateLike = regexp.MustCompile(`^[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9:.]+Z$`)

func safe(s string) bool {
	return plain.MatchString(s) && !strings.Contains(s, "  ") && !strings.EqualFold(s, "null")
}

// word begins what no YAML reader takes for a number or a date.
var word = regexp.MustCompile(`^([A-Za-z]|1/)`)

// booleans of YAML 1.1 and 1.2.
var booleans = []string{"y", "n", "yes", "no", "on", "off", "true", "false"}

// quoted writes a string, with quotes unless every YAML reader takes it for text.
func quoted(s string) string {
	if !utf8.ValidString(s) {
		panic(fmt.Sprintf("strict: %q is not UTF-8", s))
	}
	if word.MatchString(s) && safe(s) && !slices.Contains(booleans, strings.ToLower(s)) {
		return s
	}
	return strconv.Quote(s)
}

// floatText is the shortest decimal that reads back as x, in a form that YAML 1.1
// readers too take for a number: 0.5, 100000000.0 as 100000000, 1.0e+21.
func floatText(x float64) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		panic("strict: " + strconv.FormatFloat(x, 'g', -1, 64) + " cannot be written")
	}
	if x == 0 {
		return "0"
	}
	if a := math.Abs(x); a >= 1e-5 && a < 1e15 {
		return strconv.FormatFloat(x, 'f', -1, 64)
	}
	s := strconv.FormatFloat(x, 'e', -1, 64)
	if mantissa, exponent, _ := strings.Cut(s, "e"); !strings.Contains(mantissa, ".") {
		return mantissa + ".0e" + exponent
	}
	return s
}
