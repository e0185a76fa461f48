package strict

import "reflect"

// Paths lists the keys of a document of v's type that assignments may set, in the order of
// its fields; of a list of sections those of its first entry, below the list itself.
func Paths(v any) []string { return paths(reflect.TypeOf(v), "") }

func paths(t reflect.Type, at string) []string {
	for t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	switch {
	case t.Kind() == reflect.Struct && !isText(t):
		var all []string
		for _, f := range fields(t) {
			all = append(all, paths(t.Field(f.index).Type, join(at, f.key))...)
		}
		return all
	case t.Kind() == reflect.Slice && t.Elem().Kind() == reflect.Struct && !isText(t.Elem()):
		return append([]string{at}, paths(t.Elem(), join(at, "0"))...)
	}
	return []string{at}
}
