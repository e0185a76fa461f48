package strict

import (
	"encoding"
	"errors"
	"fmt"
	"reflect"
	"regexp"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v4"
)

type decoder struct {
	pos         *Positions
	problems    Problems
	source      string
	prefix      string // the path of the assignment, empty while reading a file
	strictNeeds bool
}

type field struct {
	index           int
	key             string
	in, one, choice string
	need            bool
}

// fields returns the fields of a struct that have a key.
func fields(t reflect.Type) []field {
	var fs []field
	for i := range t.NumField() {
		f := t.Field(i)
		key := f.Tag.Get("yaml")
		if key == "-" || !f.IsExported() {
			continue
		}
		if key == "" || f.Anonymous {
			panic(fmt.Sprintf("strict: field %s.%s needs a yaml key", t, f.Name))
		}
		fs = append(fs, field{i, key, f.Tag.Get("in"), f.Tag.Get("one"), f.Tag.Get("choice"), f.Tag.Get("need") != ""})
	}
	return fs
}

func keys(fs []field) []string {
	ks := make([]string, len(fs))
	for i, f := range fs {
		ks[i] = f.key
	}
	return ks
}

// isText reports whether values of the type are written as one scalar of their own.
func isText(t reflect.Type) bool {
	return reflect.PointerTo(t).Implements(reflect.TypeFor[encoding.TextUnmarshaler]())
}

// fresh returns a new addressable value with the defaults of its type.
func fresh(t reflect.Type) reflect.Value {
	p := reflect.New(t)
	if f, ok := p.Interface().(Prefiller); ok {
		f.Prefill()
	}
	return p.Elem()
}

func isNull(n *yaml.Node) bool { return n.Kind == yaml.ScalarNode && n.Tag == "!!null" }

func isPlain(n *yaml.Node) bool { return n.Kind == yaml.ScalarNode && n.Style == 0 }

// fail notes a problem at the value n.
func (d *decoder) fail(n *yaml.Node, path, format string, args ...any) {
	d.pos.failed[path] = true
	p := Problem{Source: d.source, Path: path, Message: fmt.Sprintf(format, args...)}
	if d.prefix == "" {
		p.Line, p.Column = n.Line, n.Column
	}
	d.problems = append(d.problems, p)
}

func (d *decoder) note(path string, key, value *yaml.Node) {
	at := place{source: d.source}
	if d.prefix == "" {
		at = place{d.source, key.Line, key.Column, value.Line, value.Column, ""}
	}
	if value.Kind == yaml.ScalarNode {
		at.text = value.Value
	}
	d.pos.at[path] = at
}

// value reads node n into v, which is addressable.
func (d *decoder) value(v reflect.Value, n *yaml.Node, path string) {
	switch {
	case n.Kind == yaml.AliasNode:
		d.fail(n, path, "aliases (*) are not allowed; write the value out")
		return
	case n.Anchor != "":
		d.fail(n, path, "anchors (&) are not allowed; write the value alone")
		return
	case n.Style&yaml.TaggedStyle != 0:
		d.fail(n, path, "tags (!) are not allowed; write the value alone")
		return
	}
	t := v.Type()
	switch {
	case isText(t):
		d.text(v, n, path)
	case t.Kind() == reflect.Pointer:
		if isNull(n) {
			v.SetZero()
			return
		}
		if v.IsNil() {
			v.Set(fresh(t.Elem()).Addr())
		}
		d.value(v.Elem(), n, path)
	case t.Kind() == reflect.Struct:
		d.structure(v, n, path)
	case t.Kind() == reflect.Slice:
		d.list(v, n, path)
	case t.Kind() == reflect.Map && t.Key().Kind() == reflect.String:
		d.mapping(v, n, path)
	default:
		if n.Kind != yaml.ScalarNode || isNull(n) {
			d.fail(n, path, "%s; write %s", found(n), want(t))
			return
		}
		d.scalar(v, n, path)
	}
}

// found says what stands where something else is wanted.
func found(n *yaml.Node) string {
	switch {
	case n.Kind == yaml.MappingNode:
		return "a group of keys stands here"
	case n.Kind == yaml.SequenceNode:
		return "a list stands here"
	case isNull(n) && n.Value == "":
		return "has no value"
	}
	return clip(n.Value) + " stands here"
}

func clip(s string) string {
	if r := []rune(s); len(r) > 40 {
		s = string(r[:40]) + "..."
	}
	return strconv.Quote(s)
}

// noText says how a text is left out, where it may be.
const noText = ` ("" for none)`

// want says what to write for a type.
func want(t reflect.Type) string {
	if w, ok := reflect.New(t).Interface().(interface{ Want() string }); ok {
		return w.Want()
	}
	switch t.Kind() {
	case reflect.Float64:
		return "a number without unit, such as 1.5"
	case reflect.Int, reflect.Int64, reflect.Int32:
		return "a whole number"
	case reflect.Uint, reflect.Uint64, reflect.Uint32:
		return "a whole number, 0 or more"
	case reflect.Bool:
		return "true or false"
	case reflect.String:
		return "text" + noText
	case reflect.Slice:
		return "a list ([] for none), each entry " + want(t.Elem())
	case reflect.Map:
		return "keys, each with " + want(t.Elem())
	case reflect.Pointer:
		return want(t.Elem())
	case reflect.Struct:
		if isText(t) {
			return "text"
		}
		return "keys and values (" + strings.Join(keys(fields(t)), ", ") + ")"
	}
	panic(fmt.Sprintf("strict: cannot read values of type %s", t))
}

func (d *decoder) text(v reflect.Value, n *yaml.Node, path string) {
	if n.Kind != yaml.ScalarNode || isNull(n) && isPlain(n) {
		d.fail(n, path, "%s; write %s", found(n), want(v.Type()))
		return
	}
	if err := v.Addr().Interface().(encoding.TextUnmarshaler).UnmarshalText([]byte(n.Value)); err != nil {
		d.fail(n, path, "%v", err)
	}
}

func (d *decoder) structure(v reflect.Value, n *yaml.Node, path string) {
	if n.Kind != yaml.MappingNode {
		d.fail(n, path, "%s; write %s", found(n), want(v.Type()))
		return
	}
	fs := fields(v.Type())
	chosen := map[string]*yaml.Node{} // by group
	d.pairs(n, path, func(key, value *yaml.Node) {
		f := find(fs, key.Value)
		if f == nil {
			d.problems = append(d.problems, d.located(key, path, unknown(key.Value, keys(fs))))
			return
		}
		at := join(path, f.key)
		d.note(at, key, value)
		if f.choice != "" && !isNull(value) && !(value.Kind == yaml.ScalarNode && value.Value == "") {
			if first := chosen[f.choice]; first != nil {
				d.pos.failed[path] = true
				d.problems = append(d.problems, d.located(key, at,
					fmt.Sprintf("%q is given already; exactly one of %s may be", first.Value, members(fs, f.choice))))
				return
			}
			chosen[f.choice] = key
			clearOthers(v, fs, *f)
		}
		d.value(v.Field(f.index), value, at)
	})
}

// pairs calls f for every key that is a word and stands for the first time.
func (d *decoder) pairs(n *yaml.Node, path string, f func(key, value *yaml.Node)) {
	lines := map[string]int{}
	for i := 0; i < len(n.Content); i += 2 {
		key, value := n.Content[i], n.Content[i+1]
		first, again := lines[key.Value]
		switch {
		case key.Kind != yaml.ScalarNode || key.Anchor != "" || key.Style&yaml.TaggedStyle != 0 || isNull(key):
			d.problems = append(d.problems, d.located(key, path, "a key must be a plain word"))
		case key.Tag == "!!merge":
			d.problems = append(d.problems, d.located(key, path, "merge keys (<<) are not allowed; write the keys out"))
		case again && d.prefix == "":
			d.problems = append(d.problems, d.located(key, path, fmt.Sprintf("key %s stands twice; the first is on line %d", clip(key.Value), first)))
		case again:
			d.problems = append(d.problems, d.located(key, path, fmt.Sprintf("key %s stands twice", clip(key.Value))))
		default:
			lines[key.Value] = key.Line
			f(key, value)
		}
	}
}

func (d *decoder) located(n *yaml.Node, path, message string) Problem {
	p := Problem{Source: d.source, Path: path, Message: message}
	if d.prefix == "" {
		p.Line, p.Column = n.Line, n.Column
	}
	return p
}

func find(fs []field, key string) *field {
	for i := range fs {
		if fs[i].key == key {
			return &fs[i]
		}
	}
	return nil
}

func members(fs []field, choice string) string {
	var names []string
	for _, f := range fs {
		if f.choice == choice {
			names = append(names, f.key)
		}
	}
	return strings.Join(names, ", ")
}

func clearOthers(v reflect.Value, fs []field, keep field) {
	for _, f := range fs {
		if f.choice == keep.choice && f.key != keep.key {
			v.Field(f.index).SetZero()
		}
	}
}

func (d *decoder) list(v reflect.Value, n *yaml.Node, path string) {
	if n.Kind != yaml.SequenceNode {
		d.fail(n, path, "%s; write %s", found(n), want(v.Type()))
		return
	}
	s := reflect.MakeSlice(v.Type(), len(n.Content), len(n.Content))
	for i, c := range n.Content {
		at := join(path, strconv.Itoa(i))
		d.note(at, c, c)
		s.Index(i).Set(fresh(v.Type().Elem()))
		d.value(s.Index(i), c, at)
	}
	v.Set(s)
}

func (d *decoder) mapping(v reflect.Value, n *yaml.Node, path string) {
	if n.Kind != yaml.MappingNode {
		d.fail(n, path, "%s; write %s", found(n), want(v.Type()))
		return
	}
	m := reflect.MakeMap(v.Type())
	d.pairs(n, path, func(key, value *yaml.Node) {
		at := join(path, pathKey(key.Value))
		d.note(at, key, value)
		e := fresh(v.Type().Elem())
		d.value(e, value, at)
		m.SetMapIndex(reflect.ValueOf(key.Value).Convert(v.Type().Key()), e)
	})
	v.Set(m)
}

// pathKey keeps a message on its line whatever the key of a map holds.
func pathKey(key string) string {
	if q := strconv.Quote(key); q != `"`+key+`"` || strings.ContainsAny(key, " :") || key == "" {
		return q
	}
	return key
}

var (
	number = regexp.MustCompile(`^[-+]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][-+]?[0-9]+)?$`)
	whole  = regexp.MustCompile(`^[-+]?[0-9]+$`)
)

func (d *decoder) scalar(v reflect.Value, n *yaml.Node, path string) {
	t := v.Type()
	refuse := func(why string) { d.fail(n, path, "%s %s; write %s", clip(n.Value), why, want(t)) }
	if t.Kind() == reflect.String {
		if isPlain(n) && n.Tag != "!!str" {
			d.fail(n, path, "%s is not text here; put it in quotes", clip(n.Value))
			return
		}
		v.SetString(n.Value)
		return
	}
	if !isPlain(n) {
		refuse("is text because of its quotes")
		return
	}
	switch t.Kind() {
	case reflect.Float64:
		if !number.MatchString(n.Value) {
			refuse("is not a plain number")
			return
		}
		x, err := strconv.ParseFloat(n.Value, 64)
		if err != nil {
			refuse("is too large a number")
			return
		}
		v.SetFloat(x + 0) // no negative zero
	case reflect.Int, reflect.Int64, reflect.Int32, reflect.Uint, reflect.Uint64, reflect.Uint32:
		digits := strings.TrimLeft(n.Value, "+-")
		if !whole.MatchString(n.Value) {
			refuse("is not a whole number in plain digits")
			return
		}
		if len(digits) > 1 && digits[0] == '0' {
			refuse("begins with a zero")
			return
		}
		var err error
		if v.CanInt() {
			var i int64
			i, err = strconv.ParseInt(n.Value, 10, t.Bits())
			v.SetInt(i)
		} else if n.Value[0] == '-' {
			refuse("is negative")
			return
		} else {
			var u uint64
			u, err = strconv.ParseUint(strings.TrimPrefix(n.Value, "+"), 10, t.Bits())
			v.SetUint(u)
		}
		if errors.Is(err, strconv.ErrRange) {
			refuse("is too large")
		}
	case reflect.Bool:
		if n.Value != "true" && n.Value != "false" {
			refuse("is neither true nor false")
			return
		}
		v.SetBool(n.Value == "true")
	default:
		want(t) // panics
	}
}
