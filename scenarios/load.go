package scenarios

import (
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"offplane/scenarios/strict"
)

//go:embed library/*.yaml
var library embed.FS

var shelf = strict.Library{Kind: "scenario", Files: library}

// A Loaded scenario is complete and valid.
type Loaded struct {
	Scenario  Scenario
	Name      string // of the embedded scenario, or the file's name without folder and suffix
	Canonical []byte // the scenario with every default filled in; the same scenario gives the same bytes
	SHA256    string // of Canonical, hexadecimal
	// Paths in Scenario lead from the folder in which the program runs; those in
	// Canonical are as they were written: beside the scenario's file.

	source      string // for messages
	data        []byte
	assignments []string
}

// Names returns the names of the embedded scenarios in alphabetical order.
func Names() []string { return shelf.Names() }

// About returns the one-line description of an embedded scenario.
func About(name string) (string, error) {
	l, err := Load(name)
	if err != nil {
		return "", err
	}
	return l.Scenario.About, nil
}

// Source returns the YAML of an embedded scenario with its comments.
func Source(name string) ([]byte, error) { return shelf.Source(name) }

// Load reads a scenario, applies assignments (see strict.Set) and validates it. A
// name with the suffix .yaml or .yml or with a path separator is a file, any other
// an embedded scenario. The error is of type strict.Problems if the scenario was
// found but is not valid, or names a file that is not there.
func Load(nameOrPath string, assignments ...string) (*Loaded, error) {
	if IsFile(nameOrPath) {
		data, err := strict.ReadFile(nameOrPath)
		if err != nil {
			stem := strings.TrimSuffix(filepath.Base(nameOrPath), filepath.Ext(nameOrPath))
			if _, no := Source(stem); no == nil {
				return nil, fmt.Errorf("%w; the embedded scenario is called %s, without suffix", err, stem)
			}
			return nil, err
		}
		return parse(nameOrPath, data, assignments, missing)
	}
	data, err := Source(nameOrPath)
	if err != nil {
		return nil, err
	}
	return parse(nameOrPath, data, assignments, missing)
}

// IsFile reports whether Load takes a name for a file: it has the suffix .yaml or .yml or
// a path separator.
func IsFile(name string) bool {
	ext := filepath.Ext(name)
	return ext == ".yaml" || ext == ".yml" || strings.ContainsRune(name, '/') || strings.ContainsRune(name, filepath.Separator)
}

// Parse is Load from memory; source stands in messages and gives the name. The files that
// the scenario names need not be there: it may have been made elsewhere.
func Parse(source string, data []byte, assignments ...string) (*Loaded, error) {
	return parse(source, data, assignments, nil)
}

// parse is Parse; wrong, if given, says what is wrong with a file that is named.
func parse(source string, data []byte, assignments []string, wrong func(path string) string) (*Loaded, error) {
	l := &Loaded{Scenario: Default(), source: source, data: data, assignments: assignments}
	l.Name = filepath.Base(source)
	if IsFile(source) {
		l.Name = strings.TrimSuffix(l.Name, filepath.Ext(l.Name))
	}
	at, err := strict.Read(source, data, &l.Scenario, assignments...)
	if c := l.Scenario.Camera; c.Like != "none" && at.Sound("camera.like") {
		// Once more, on the example camera: what is written goes before it.
		l.Scenario = Default()
		l.Scenario.Camera.Like = c.Like
		l.Scenario.Image.Pixel = l.Scenario.Camera.like()
		at, err = strict.Read(source, data, &l.Scenario, assignments...)
	}
	problems, _ := err.(strict.Problems)
	problems = append(problems, Validate(&l.Scenario, at)...)
	named := files(&l.Scenario)
	for i := range named {
		f := &named[i]
		f.place = beside(source, assignments, f.key, *f.path)
		problems = append(problems, f.check(at, wrong)...)
	}
	if err := problems.Err(); err != nil {
		return nil, err
	}
	// Canonical tells paths as they were written.
	l.Canonical = strict.Encode(l.Scenario)
	for _, f := range named {
		*f.path = f.place
	}
	sum := sha256.Sum256(l.Canonical)
	l.SHA256 = hex.EncodeToString(sum[:])
	return l, nil
}

// A namedFile is a path in a scenario, the key under which it stands, and where it leads
// from the folder in which the program runs.
type namedFile struct {
	key   string
	path  *string
	place string
}

// files returns the files that a scenario may name, its fields made its own.
func files(s *Scenario) []namedFile {
	all := []namedFile{{key: "line.data", path: &s.Line.Data}, {key: "inversion.line.data", path: &s.Inversion.Line.Data}}
	if s.Corona.Grid != nil {
		all = append(all, namedFile{key: "corona.grid.file", path: &s.Corona.Grid.File})
	}
	s.Corona.Fields = slices.Clone(s.Corona.Fields)
	for i := range s.Corona.Fields {
		if f := &s.Corona.Fields[i]; f.SourceSurface != nil {
			v := *f.SourceSurface
			f.SourceSurface = &v
			all = append(all, namedFile{key: fmt.Sprintf("corona.fields.%d.source_surface.table", i), path: &v.Table})
		}
	}
	return all
}

// check returns what is wrong with the file, at its key.
func (f *namedFile) check(at *strict.Positions, wrong func(path string) string) strict.Problems {
	if wrong == nil || f.place == "" || !at.Sound(f.key) {
		return nil
	}
	if text := wrong(f.place); text != "" {
		return strict.Problems{at.Problem(f.key, "%s", text)}
	}
	return nil
}

// missing says why a file cannot be read; it is empty if it can.
func missing(path string) string {
	switch i, err := os.Stat(path); {
	case errors.Is(err, fs.ErrNotExist):
		return fmt.Sprintf("there is no file %s", path)
	case err != nil:
		return err.Error()
	case !i.Mode().IsRegular():
		return fmt.Sprintf("%s is not a regular file", path)
	}
	f, err := os.Open(path)
	if err != nil {
		return err.Error()
	}
	f.Close()
	return ""
}

// beside makes a relative path that was written in a file one beside that file; paths
// in assignments are relative to the folder in which the program runs.
func beside(source string, assignments []string, key, path string) string {
	if path == "" || filepath.IsAbs(path) || !IsFile(source) {
		return path
	}
	for _, a := range assignments {
		if name, _, _ := strings.Cut(a, "="); strings.TrimSpace(name) == key {
			return path
		}
	}
	return filepath.Join(filepath.Dir(source), path)
}

// With returns the scenario with further assignments applied and validated; l stays
// as it is.
func (l *Loaded) With(assignments ...string) (*Loaded, error) {
	all := append(append([]string{}, l.assignments...), assignments...)
	n, err := parse(l.source, l.data, all, nil)
	if err == nil {
		n.Name = l.Name
	}
	return n, err
}

// Resolve validates a scenario that was made in memory. Lines in messages are those
// of its canonical form.
func Resolve(name string, s Scenario) (*Loaded, error) {
	return Parse(name, strict.Encode(s))
}

// Restore is Parse for the resolved scenario that a file of results carries, with its
// SHA-256 and the program that wrote it.
func Restore(source string, text []byte, sum, program string) (*Loaded, error) {
	if got := sha256.Sum256(text); hex.EncodeToString(got[:]) != sum {
		return nil, fmt.Errorf("%s: the scenario is damaged: its SHA-256 is %x, not %q as is told beside it", source, got, sum)
	}
	const remedy = "read it with that version, or make it again with this one"
	l, err := Parse(source, text)
	if err != nil {
		return nil, fmt.Errorf("%s: was written by another version (%s), whose scenarios this one cannot read: %s (%v)", source, program, remedy, err)
	}
	if l.SHA256 != sum {
		return nil, fmt.Errorf("%s: was written by another version (%s), whose scenarios have other keys: %s", source, program, remedy)
	}
	return l, nil
}

// LoadInversion reads a file that holds an inversion section by itself, applies
// assignments and validates it. Missing keys have the values of Default, all if the path
// is empty.
func LoadInversion(path string, assignments ...string) (Inversion, error) {
	if path == "" {
		return parseInversion("default", EncodeInversion(Default().Inversion), assignments, missing)
	}
	data, err := strict.ReadFile(path)
	if err != nil {
		return Inversion{}, err
	}
	return parseInversion(path, data, assignments, missing)
}

// ParseInversion is LoadInversion from memory. The file that the section names need not be
// there.
func ParseInversion(source string, data []byte, assignments ...string) (Inversion, error) {
	return parseInversion(source, data, assignments, nil)
}

func parseInversion(source string, data []byte, assignments []string, wrong func(path string) string) (Inversion, error) {
	v := Default().Inversion
	at, err := strict.Read(source, data, &v, assignments...)
	problems, _ := err.(strict.Problems)
	problems = append(problems, validateInversion(&v, "", at)...)
	file := namedFile{key: "line.data", place: beside(source, assignments, "line.data", v.Line.Data)}
	problems = append(problems, file.check(at, wrong)...)
	v.Line.Data = file.place
	return v, problems.Err()
}

// EncodeInversion returns the canonical YAML that ParseInversion reads.
func EncodeInversion(v Inversion) []byte { return strict.Encode(v) }
