package scenarios

import (
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"fmt"
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
// found but is not valid.
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
		return Parse(nameOrPath, data, assignments...)
	}
	data, err := Source(nameOrPath)
	if err != nil {
		return nil, err
	}
	return Parse(nameOrPath, data, assignments...)
}

// IsFile reports whether Load takes a name for a file: it has the suffix .yaml or .yml or
// a path separator.
func IsFile(name string) bool {
	ext := filepath.Ext(name)
	return ext == ".yaml" || ext == ".yml" || strings.ContainsRune(name, '/') || strings.ContainsRune(name, filepath.Separator)
}

// Parse is Load from memory; source stands in messages and gives the name.
func Parse(source string, data []byte, assignments ...string) (*Loaded, error) {
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
	if err := problems.Err(); err != nil {
		return nil, err
	}
	l.Canonical = strict.Encode(l.Scenario)
	sum := sha256.Sum256(l.Canonical)
	l.SHA256 = hex.EncodeToString(sum[:])
	s := &l.Scenario
	beside(source, assignments, "line.data", &s.Line.Data)
	beside(source, assignments, "inversion.line.data", &s.Inversion.Line.Data)
	if s.Corona.Grid != nil {
		beside(source, assignments, "corona.grid.file", &s.Corona.Grid.File)
	}
	s.Corona.Fields = slices.Clone(s.Corona.Fields)
	for i := range s.Corona.Fields {
		if f := &s.Corona.Fields[i]; f.SourceSurface != nil {
			v := *f.SourceSurface
			beside(source, assignments, fmt.Sprintf("corona.fields.%d.source_surface.table", i), &v.Table)
			f.SourceSurface = &v
		}
	}
	return l, nil
}

// beside makes a relative path that was written in a file one beside that file; paths
// in assignments are relative to the folder in which the program runs.
func beside(source string, assignments []string, key string, path *string) {
	if *path == "" || filepath.IsAbs(*path) || !IsFile(source) {
		return
	}
	for _, a := range assignments {
		if name, _, _ := strings.Cut(a, "="); strings.TrimSpace(name) == key {
			return
		}
	}
	*path = filepath.Join(filepath.Dir(source), *path)
}

// With returns the scenario with further assignments applied and validated; l stays
// as it is.
func (l *Loaded) With(assignments ...string) (*Loaded, error) {
	all := append(append([]string{}, l.assignments...), assignments...)
	n, err := Parse(l.source, l.data, all...)
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

// LoadInversion reads a file that holds an inversion section by itself, applies
// assignments and validates it. Missing keys have the values of Default.
func LoadInversion(path string, assignments ...string) (Inversion, error) {
	data, err := strict.ReadFile(path)
	if err != nil {
		return Inversion{}, err
	}
	return ParseInversion(path, data, assignments...)
}

// ParseInversion is LoadInversion from memory.
func ParseInversion(source string, data []byte, assignments ...string) (Inversion, error) {
	v := Default().Inversion
	at, err := strict.Read(source, data, &v, assignments...)
	problems, _ := err.(strict.Problems)
	problems = append(problems, validateInversion(&v, "", at)...)
	beside(source, assignments, "line.data", &v.Line.Data)
	return v, problems.Err()
}

// EncodeInversion returns the canonical YAML that ParseInversion reads.
func EncodeInversion(v Inversion) []byte { return strict.Encode(v) }
