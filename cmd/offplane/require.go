package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"reflect"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"offplane/compare"
	"offplane/scenarios/strict"
)

// gates are the conditions of --require.
type gates struct {
	text []string
	all  []gate
}

// A gate is one condition on a number of summary.json.
type gate struct {
	text  string
	path  []string
	op    string
	bound float64
}

func (g *gates) flags(cmd *cobra.Command) {
	cmd.Flags().StringArrayVar(&g.text, "require", nil,
		"exit 3 unless `CONDITION` holds on a number of summary.json, such as 'valid_fraction>=0.4' or 'ratios.field.sky.median<=1.1'; repeatable")
}

var condition = regexp.MustCompile(`^\s*([A-Za-z0-9_.]+)\s*(>=|<=|>|<)\s*(\S+)\s*$`)

// parse reads the conditions before the work begins.
func (g *gates) parse() error {
	var doc any
	template := reflect.New(reflect.TypeFor[compare.Summary]())
	fill(template.Elem())
	if err := decode(template.Interface(), &doc); err != nil {
		return err
	}
	for _, text := range g.text {
		m := condition.FindStringSubmatch(text)
		if m == nil {
			return misusef("--require %q: must be KEY>=NUMBER (or >, <=, <)", text)
		}
		bound, err := strconv.ParseFloat(m[3], 64)
		if err != nil {
			return misusef("--require %q: %s is not a number", text, m[3])
		}
		path := strings.Split(m[1], ".")
		if len(path) == 1 {
			path = append([]string{"pixels"}, path...) // the short names
		}
		if err := known(doc, path); err != nil {
			return misusef("--require %q: %v", text, err)
		}
		g.all = append(g.all, gate{text, path, m[2], bound})
	}
	return nil
}

// fill gives every pointer a value and every list an element, so that the JSON of v
// shows all keys.
func fill(v reflect.Value) {
	switch v.Kind() {
	case reflect.Pointer:
		v.Set(reflect.New(v.Type().Elem()))
		fill(v.Elem())
	case reflect.Slice:
		v.Set(reflect.MakeSlice(v.Type(), 1, 1))
		fill(v.Index(0))
	case reflect.Struct:
		for i := range v.NumField() {
			fill(v.Field(i))
		}
	}
}

// decode turns a value into what encoding/json makes of its JSON.
func decode(v any, into *any) error {
	var b bytes.Buffer
	if err := writeJSON(&b, v); err != nil {
		return err
	}
	return json.Unmarshal(b.Bytes(), into)
}

// known returns an error unless a path leads to a number of the document; any element
// of a list will do.
func known(doc any, path []string) error {
	for i, key := range path {
		switch d := doc.(type) {
		case map[string]any:
			next, ok := d[key]
			if !ok {
				return fmt.Errorf("summary.json has no key %q%s", strings.Join(path[:i+1], "."), strict.Hint(key, slices.Sorted(maps.Keys(d))))
			}
			doc = next
		case []any:
			if _, err := strconv.ParseUint(key, 10, 16); err != nil {
				return fmt.Errorf("%q of %q must be a number from 0", key, strings.Join(path[:i], "."))
			}
			doc = d[0]
		default:
			return fmt.Errorf("summary.json has nothing below %q", strings.Join(path[:i], "."))
		}
	}
	if _, ok := doc.(float64); !ok {
		return fmt.Errorf("%q is not a number", strings.Join(path, "."))
	}
	return nil
}

// check returns an error with the code for unmet gates.
func (g *gates) check(s *compare.Summary) error {
	var doc any
	if err := decode(s, &doc); err != nil {
		return err
	}
	var unmet []string
	for _, q := range g.all {
		v, ok := lookup(doc, q.path)
		var met bool
		switch q.op {
		case ">=":
			met = v >= q.bound
		case ">":
			met = v > q.bound
		case "<=":
			met = v <= q.bound
		case "<":
			met = v < q.bound
		}
		if !ok {
			unmet = append(unmet, q.text+" (there is no value)")
		} else if !met {
			unmet = append(unmet, fmt.Sprintf("%s (it is %.6g)", q.text, v))
		}
	}
	if unmet != nil {
		return &fault{exitUnmet, errors.New("not met: " + strings.Join(unmet, "; "))}
	}
	return nil
}

// lookup follows a path to a number; null is none.
func lookup(doc any, path []string) (float64, bool) {
	for _, key := range path {
		switch d := doc.(type) {
		case map[string]any:
			doc = d[key]
		case []any:
			i, _ := strconv.Atoi(key)
			if i >= len(d) {
				return 0, false
			}
			doc = d[i]
		}
	}
	v, ok := doc.(float64)
	return v, ok
}
