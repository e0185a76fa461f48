// Package strict reads and writes every YAML file of the program.
//
// It knows no file format: the caller passes a struct, filled with the defaults,
// and the struct's tags say what is allowed. All problems of a file are collected,
// each with its line, column and key path. What would be guessed at elsewhere is
// refused: unknown and duplicate keys, numbers without their unit or in quotes, 2.5
// for a whole number, further documents, anchors, aliases, merge keys and tags.
//
// Field tags:
//
//	yaml:"key"        the key; "-" leaves the field out. Every other field needs one.
//	in:"LOW..HIGH"    the range, ends included; ">" or "<" before an end excludes it.
//	                  The ends are written as the user would write them (">0 G..1 T").
//	                  On a list it holds for each entry.
//	one:"a,b,c"       the allowed words of a string.
//	choice:"group"    exactly one member of the group (pointers or strings) must be
//	                  given; giving one clears the others, defaults included.
//	need:"given"      the key must be written; there is no default.
//
// Types: structs, pointers to structs (null: none), lists, map[string]T, float64,
// integers, bool, string, and whatever implements encoding.TextUnmarshaler and
// encoding.TextMarshaler (units). A Want() string method on such a type says what to
// write. A list or map that is given replaces the default as a whole. A new value
// (of a pointer, list or map) is zero, or what its Prefill method makes of it.
package strict

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"reflect"
	"sort"
	"strings"
	"unicode/utf8"

	"go.yaml.in/yaml/v4"
)

// Limits of one file.
const (
	MaxBytes = 1 << 20
	MaxDepth = 32
)

// A Prefiller sets the defaults of a newly made value.
type Prefiller interface{ Prefill() }

// A Problem is one mistake and where it stands.
type Problem struct {
	Source       string // the file, or "--set PATH"
	Line, Column int    // from 1; 0 in an assignment
	Path         string // keys and list indices from 0, joined by dots; empty: the whole
	Message      string
}

// Error returns source:line:column: path: message.
func (p Problem) Error() string {
	var b strings.Builder
	b.WriteString(p.Source)
	if p.Line > 0 {
		fmt.Fprintf(&b, ":%d:%d", p.Line, p.Column)
	}
	if p.Path != "" && p.Source != setPrefix+p.Path {
		b.WriteString(": " + p.Path)
	}
	return strings.TrimPrefix(b.String()+": "+p.Message, ": ")
}

// Problems are sorted by position, those of assignments last.
type Problems []Problem

// Error returns one line per problem.
func (ps Problems) Error() string {
	lines := make([]string, len(ps))
	for i, p := range ps {
		lines[i] = p.Error()
	}
	return strings.Join(lines, "\n")
}

// Sort puts the problems into their order.
func (ps Problems) Sort() {
	sort.SliceStable(ps, func(i, j int) bool {
		a, b := ps[i], ps[j]
		switch {
		case (a.Line == 0) != (b.Line == 0):
			return b.Line == 0
		case a.Line != b.Line:
			return a.Line < b.Line
		}
		return a.Column < b.Column
	})
}

// Err returns the problems in order as an error, nil if there are none.
func (ps Problems) Err() error {
	if len(ps) == 0 {
		return nil
	}
	ps.Sort()
	return ps
}

// Positions says where each key of a file stands and which values are unsound. The
// nil Positions are those of a value that came from no file.
type Positions struct {
	name   string
	at     map[string]place
	failed map[string]bool // paths whose value could not be read or is not allowed
}

type place struct {
	source          string
	keyLine, keyCol int    // of the key; of the entry in a list
	line, col       int    // of the value
	text            string // of the value, if it is a single one
}

// Given reports whether the file or an assignment holds the key; "" stands for the
// file itself.
func (p *Positions) Given(path string) bool {
	if p == nil {
		return false
	}
	_, ok := p.at[path]
	return ok
}

func newPositions(name string) *Positions {
	return &Positions{name, map[string]place{}, map[string]bool{}}
}

// Sound reports whether no problem was found at the paths, above or below them, so
// that rules about them make sense. Nothing is sound in a file that is not YAML.
func (p *Positions) Sound(paths ...string) bool {
	if p == nil {
		return true
	}
	if !p.Given("") {
		return false
	}
	for f := range p.failed {
		for _, path := range paths {
			if f == path || f == "" || strings.HasPrefix(f, path+".") || strings.HasPrefix(path, f+".") {
				return false
			}
		}
	}
	return true
}

// Problem returns a problem at the key of path or, if it was not given, at the
// nearest key above it.
func (p *Positions) Problem(path, format string, args ...any) Problem {
	at := p.nearest(path)
	return Problem{at.source, at.keyLine, at.keyCol, path, fmt.Sprintf(format, args...)}
}

func (p *Positions) nearest(path string) place {
	if p == nil {
		return place{}
	}
	for up := path; ; {
		if at, ok := p.at[up]; ok {
			return at
		}
		if up == "" {
			return place{source: p.name}
		}
		up = up[:max(0, strings.LastIndexByte(up, '.'))]
	}
}

func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// ReadFile returns no more of a file than shows Read that it is too large.
func ReadFile(path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return io.ReadAll(io.LimitReader(f, MaxBytes+1))
}

// Decode reads one YAML document into the struct that into points to. Keys that are
// missing leave their fields alone. The error is of type Problems and holds all of
// them; the struct is then of no use. name stands in the messages.
func Decode(name string, data []byte, into any) error {
	_, err := Read(name, data, into)
	return err
}

// Read is Decode followed by assignments as in Set; ranges are checked after all of
// them. The positions are never nil.
func Read(name string, data []byte, into any, assignments ...string) (*Positions, error) {
	d := &decoder{pos: newPositions(name), source: name}
	v := target(into)
	n := d.document(data)
	if n == nil {
		return d.pos, d.problems.Err()
	}
	d.pos.at[""] = place{name, n.Line, n.Column, n.Line, n.Column, ""}
	d.value(v, n, "")
	for _, a := range assignments {
		d.assign(v, a)
	}
	d.strictNeeds = true
	d.check(v, "", field{})
	return d.pos, d.problems.Err()
}

// Set applies assignments PATH=VALUE, VALUE in YAML, PATH as in problems
// (corona.fields.0.radial.strength), and then checks the whole. On the way pointers
// are made as needed. Problems are located as "--set PATH"; what they leave in the
// struct is of no use.
func Set(into any, assignments ...string) error {
	d := &decoder{pos: newPositions("--set")}
	v := target(into)
	for _, a := range assignments {
		d.assign(v, a)
	}
	d.check(v, "", field{})
	return d.problems.Err()
}

func target(into any) reflect.Value {
	v := reflect.ValueOf(into)
	if v.Kind() != reflect.Pointer || v.IsNil() || v.Elem().Kind() != reflect.Struct {
		panic(fmt.Sprintf("strict: cannot read into %T, want a pointer to a struct", into))
	}
	return v.Elem()
}

// document parses data down to its only document; nil after a problem.
func (d *decoder) document(data []byte) *yaml.Node {
	fail := func(line, col int, format string, args ...any) *yaml.Node {
		d.problems = append(d.problems, Problem{d.source, line, col, d.prefix, fmt.Sprintf(format, args...)})
		return nil
	}
	first := 1
	if d.prefix != "" { // an assignment has no lines
		first = 0
	}
	if len(data) > MaxBytes {
		return fail(first, first, "is too large; at most %d bytes are read", MaxBytes)
	}
	if line, col, what := unreadable(data); what != "" {
		return fail(line*first, col*first, "%s; write plain UTF-8 text", what)
	}
	loader, err := yaml.NewLoader(bytes.NewReader(data))
	if err != nil {
		panic("strict: " + err.Error())
	}
	var doc, more yaml.Node
	if err = loader.Load(&doc); err == io.EOF {
		if d.prefix != "" {
			return fail(0, 0, "has no value; write KEY=VALUE")
		}
		return fail(1, 1, "holds nothing; write keys and values in YAML")
	}
	if err == nil {
		err = loader.Load(&more)
	}
	var bad *yaml.LoadError
	switch {
	case err == io.EOF:
	case errors.As(err, &bad):
		if line, col := tab(data); line > 0 {
			return fail(line*first, col*first, "a tab in the indentation; YAML allows spaces only")
		}
		if strings.Contains(bad.Message, "unknown anchor") {
			return fail(bad.Mark.Line*first, bad.Mark.Column*first, "aliases (*) are not allowed; write the value out")
		}
		context := ""
		if bad.ContextMsg != "" {
			context = " (" + bad.ContextMsg
			if bad.ContextMark.Line > 0 && first > 0 && bad.ContextMark.Line != bad.Mark.Line {
				context += fmt.Sprintf(" that starts on line %d", bad.ContextMark.Line)
			}
			context += ")"
		}
		return fail(max(bad.Mark.Line, 1)*first, max(bad.Mark.Column, 1)*first, "not YAML: %s%s", bad.Message, context)
	case err != nil:
		return fail(first, first, "not YAML: %v", err)
	default:
		return fail(more.Line*first, more.Column*first, "a second document; only one is read, so remove the line --- and what follows")
	}
	n := doc.Content[0]
	if isNull(n) && d.prefix == "" {
		return fail(n.Line*first, n.Column*first, "holds nothing; write keys and values in YAML")
	}
	if deep := deeper(n, MaxDepth); deep != nil {
		return fail(deep.Line*first, deep.Column*first, "nested more than %d deep", MaxDepth)
	}
	return n
}

// deeper returns the first node more than depth levels down.
func deeper(n *yaml.Node, depth int) *yaml.Node {
	if depth == 0 {
		return n
	}
	for _, c := range n.Content {
		if deep := deeper(c, depth-1); deep != nil {
			return deep
		}
	}
	return nil
}

// unreadable finds the first byte that is no text.
func unreadable(data []byte) (line, col int, what string) {
	line, col = 1, 1
	for i := 0; i < len(data); {
		r, size := utf8.DecodeRune(data[i:])
		switch {
		case r == utf8.RuneError && size == 1:
			return line, col, fmt.Sprintf("byte 0x%02x is not UTF-8", data[i])
		case r < ' ' && r != '\t' && r != '\n' && r != '\r', r == 0x7f:
			return line, col, fmt.Sprintf("control character 0x%02x", r)
		case r == '\n':
			line, col = line+1, 0
		}
		col++
		i += size
	}
	return 0, 0, ""
}

// tab finds the first tab among the blanks that begin a line.
func tab(data []byte) (line, col int) {
	for i, l := range bytes.Split(data, []byte("\n")) {
		blank := len(l) - len(bytes.TrimLeft(l, " \t"))
		if t := bytes.IndexByte(l[:blank], '\t'); t >= 0 {
			return i + 1, t + 1
		}
	}
	return 0, 0
}
