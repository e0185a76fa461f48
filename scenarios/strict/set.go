package strict

import (
	"fmt"
	"reflect"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v4"
)

const setPrefix = "--set "

// assign applies one PATH=VALUE.
func (d *decoder) assign(root reflect.Value, assignment string) {
	source, prefix := d.source, d.prefix
	defer func() { d.source, d.prefix = source, prefix }()
	path, text, found := strings.Cut(assignment, "=")
	path = strings.TrimSpace(path)
	if !found || path == "" || strconv.Quote(path) != `"`+path+`"` {
		d.problems = append(d.problems, Problem{Source: strings.TrimSpace(setPrefix), Message: fmt.Sprintf("%s is no assignment; write KEY=VALUE, such as seed=7", clip(assignment))})
		return
	}
	d.source, d.prefix = setPrefix+path, path
	n := d.document([]byte(text))
	if n == nil {
		return
	}
	for p := range d.pos.at {
		if strings.HasPrefix(p, path+".") {
			delete(d.pos.at, p)
		}
	}
	for p := range d.pos.failed { // mended, or found again
		if p == path || strings.HasPrefix(p, path+".") {
			delete(d.pos.failed, p)
		}
	}
	d.descend(root, n, strings.Split(path, "."), "")
}

// descend follows the rest of a path from v, at path.
func (d *decoder) descend(v reflect.Value, n *yaml.Node, rest []string, path string) {
	if len(rest) == 0 {
		d.note(path, n, n)
		d.value(v, n, path)
		return
	}
	if v.Kind() == reflect.Pointer && !isText(v.Type()) {
		if v.IsNil() {
			v.Set(fresh(v.Type().Elem()).Addr())
			d.note(path, n, n)
		}
		v = v.Elem()
	}
	refuse := func(format string, args ...any) {
		d.problems = append(d.problems, Problem{Source: d.source, Path: d.prefix, Message: fmt.Sprintf(format, args...)})
	}
	key, t := rest[0], v.Type()
	at := join(path, key)
	switch {
	case t.Kind() == reflect.Struct && !isText(t):
		fs := fields(t)
		f := find(fs, key)
		if f == nil {
			message := unknown(key, keys(fs))
			if path != "" {
				message += " (in " + path + ")"
			}
			refuse("%s", message)
			return
		}
		if f.choice != "" {
			clearOthers(v, fs, *f)
		}
		d.descend(v.Field(f.index), n, rest[1:], at)
	case t.Kind() == reflect.Slice:
		i, err := strconv.Atoi(key)
		switch {
		case v.Len() == 0:
			refuse("the list %s is empty; set it as a whole", path)
		case err != nil || i < 0 || i >= v.Len() || strconv.Itoa(i) != key:
			refuse("%s is no entry of the list %s; its entries are 0 to %d", clip(key), path, v.Len()-1)
		default:
			d.descend(v.Index(i), n, rest[1:], at)
		}
	case t.Kind() == reflect.Map:
		k := reflect.ValueOf(key).Convert(t.Key())
		e := fresh(t.Elem())
		if old := v.MapIndex(k); old.IsValid() {
			e.Set(old)
		}
		d.descend(e, n, rest[1:], at)
		if v.IsNil() {
			v.Set(reflect.MakeMap(t))
		}
		v.SetMapIndex(k, e)
	default:
		refuse("%s is a single value; there is no %s in it", path, clip(key))
	}
}
