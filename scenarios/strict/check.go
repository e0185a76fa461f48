package strict

import (
	"encoding"
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"
)

// check goes through the whole value, defaults included, and holds it against the
// tags.
func (d *decoder) check(v reflect.Value, path string, f field) {
	if d.pos.failed[path] {
		return
	}
	t := v.Type()
	switch {
	case t.Kind() == reflect.Float64, v.CanInt(), v.CanUint():
		if f.in != "" {
			d.checkRange(v, path, f)
		}
	case isText(t):
	case t.Kind() == reflect.Pointer:
		if !v.IsNil() {
			d.check(v.Elem(), path, f)
		}
	case t.Kind() == reflect.Struct:
		d.checkStruct(v, path)
	case t.Kind() == reflect.Slice:
		for i := range v.Len() {
			d.check(v.Index(i), join(path, strconv.Itoa(i)), f)
		}
	case t.Kind() == reflect.Map:
		for _, k := range sortedKeys(v) {
			d.check(v.MapIndex(k), join(path, pathKey(k.String())), f)
		}
	case t.Kind() == reflect.String && f.one != "":
		words := strings.Split(f.one, ",")
		if !slices.Contains(words, v.String()) {
			if v.String() == "" && !d.pos.Given(path) {
				d.wrong(path, "is missing; write one of %s", strings.Join(words, ", "))
			} else {
				d.wrong(path, "%s is not allowed; write one of %s%s", clip(v.String()), strings.Join(words, ", "), Hint(v.String(), words))
			}
		}
	}
}

// wrong notes a problem at the value of path.
func (d *decoder) wrong(path, format string, args ...any) {
	p := d.pos.Problem(path, format, args...)
	if at, ok := d.pos.at[path]; ok {
		p.Line, p.Column = at.line, at.col
	}
	d.pos.failed[path] = true
	d.problems = append(d.problems, p)
}

func (d *decoder) checkStruct(v reflect.Value, path string) {
	fs := fields(v.Type())
	groups := map[string]int{}
	var order []string
	broken := map[string]bool{}
	for _, f := range fs {
		at := join(path, f.key)
		if f.need && d.strictNeeds && !d.pos.Given(at) {
			d.wrong(at, "is missing; write %s", strings.TrimSuffix(want(v.Type().Field(f.index).Type), noText))
		}
		if f.choice != "" {
			if _, seen := groups[f.choice]; !seen {
				order = append(order, f.choice)
				groups[f.choice] = 0
			}
			if !v.Field(f.index).IsZero() {
				groups[f.choice]++
			}
			broken[f.choice] = broken[f.choice] || d.pos.failed[at]
		}
		if f.choice == "" || !v.Field(f.index).IsZero() {
			d.check(v.Field(f.index), at, f)
		}
	}
	for _, g := range order {
		if groups[g] != 1 && !broken[g] {
			d.pos.failed[path] = true
			d.problems = append(d.problems, d.pos.Problem(path, "exactly one of %s must be given", members(fs, g)))
		}
	}
}

func (d *decoder) checkRange(v reflect.Value, path string, f field) {
	low, high, found := strings.Cut(f.in, "..")
	if !found {
		panic(fmt.Sprintf("strict: range %q of %s is not LOW..HIGH", f.in, f.key))
	}
	above, low := strings.HasPrefix(low, ">"), strings.TrimPrefix(low, ">")
	below, high := strings.HasPrefix(high, "<"), strings.TrimPrefix(high, "<")
	x, l, h := toFloat(v), end(v.Type(), low, f), end(v.Type(), high, f)
	if (x > l || x == l && !above) && (x < h || x == h && !below) {
		return
	}
	from, to := "at least "+low, "at most "+high
	if above {
		from = "more than " + low
	}
	if below {
		to = "less than " + high
	}
	if x == 0 && !d.pos.Given(path) {
		d.wrong(path, "is missing; write %s, %s and %s", want(v.Type()), from, to)
		return
	}
	limits := from + " and " + to
	if l == h {
		limits = low
	}
	text := scalarText(v)
	if at := d.pos.at[path]; at.text != "" {
		text = at.text // in the unit in which it was written
	}
	d.wrong(path, "%s is out of range; it must be %s", text, limits)
}

func toFloat(v reflect.Value) float64 {
	switch {
	case v.CanInt():
		return float64(v.Int())
	case v.CanUint():
		return float64(v.Uint())
	}
	return v.Float()
}

// end reads one end of a range as a value of type t.
func end(t reflect.Type, text string, f field) float64 {
	if isText(t) {
		p := reflect.New(t)
		if err := p.Interface().(encoding.TextUnmarshaler).UnmarshalText([]byte(text)); err != nil {
			panic(fmt.Sprintf("strict: range %q of %s: %v", f.in, f.key, err))
		}
		return p.Elem().Float()
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		panic(fmt.Sprintf("strict: range %q of %s: %v", f.in, f.key, err))
	}
	return x
}

// unknown is the message for a key that does not exist.
func unknown(key string, known []string) string {
	if h := Hint(key, known); h != "" {
		return fmt.Sprintf("unknown key %s%s", clip(key), h)
	}
	return fmt.Sprintf("unknown key %s; known here: %s", clip(key), strings.Join(known, ", "))
}

// Hint is the end of a message about an unknown word: what was most likely meant, or "".
func Hint(word string, known []string) string {
	if near := Nearest(word, known); near != "" {
		return fmt.Sprintf("; did you mean %q?", near)
	}
	return ""
}

// Nearest returns the known word that was most likely meant, or "".
func Nearest(word string, known []string) string {
	best, least := "", len(word)/3+1
	for _, k := range known {
		if dist := distance(strings.ToLower(word), strings.ToLower(k), least); dist < least {
			best, least = k, dist
		}
	}
	return best
}

// distance is the number of letters to insert, delete, replace or swap with their
// neighbour (optimal string alignment); at least limit if it is not less.
func distance(a, b string, limit int) int {
	if len(a)-len(b) >= limit || len(b)-len(a) >= limit {
		return limit
	}
	d := make([][]int, len(a)+1)
	for i := range d {
		d[i] = make([]int, len(b)+1)
		d[i][0] = i
	}
	for j := range d[0] {
		d[0][j] = j
	}
	for i := 1; i <= len(a); i++ {
		for j := 1; j <= len(b); j++ {
			cost := 1
			if a[i-1] == b[j-1] {
				cost = 0
			}
			d[i][j] = min(d[i-1][j]+1, d[i][j-1]+1, d[i-1][j-1]+cost)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				d[i][j] = min(d[i][j], d[i-2][j-2]+1)
			}
		}
	}
	return d[len(a)][len(b)]
}
