package strict

import (
	"embed"
	"fmt"
	"strings"
)

// A Library is the embedded files library/NAME.yaml of one kind.
type Library struct {
	Kind  string // for messages: scenario, ensemble, ...
	Files embed.FS
}

// Names returns the names in alphabetical order.
func (l Library) Names() []string {
	files, err := l.Files.ReadDir("library")
	if err != nil {
		panic("strict: " + err.Error())
	}
	names := make([]string, len(files))
	for i, f := range files {
		names[i] = strings.TrimSuffix(f.Name(), ".yaml")
	}
	return names
}

// Source returns the YAML of a name with its comments. The error names those there are
// and the nearest of them.
func (l Library) Source(name string) ([]byte, error) {
	text, err := l.Files.ReadFile("library/" + name + ".yaml")
	if err != nil {
		return nil, fmt.Errorf("no %s is called %q%s (there are %s; a file is named by its suffix, %s.yaml, or with a folder, ./%s)",
			l.Kind, name, Hint(name, l.Names()), strings.Join(l.Names(), ", "), name, name)
	}
	return text, nil
}
