package table

import (
	"bytes"
	"embed"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"offplane/scenarios/strict"
	"offplane/synth/ecsv"
)

// shipped holds a folder a table, with table.ecsv and coverage.ecsv of table build.
//
//go:embed shipped
var shipped embed.FS

// DefaultName is the name of the table that is used if none is named.
const DefaultName = "sky"

// Names lists the embedded tables.
func Names() []string {
	list, err := fs.ReadDir(shipped, "shipped")
	if err != nil {
		panic("table: " + err.Error())
	}
	var names []string
	for _, e := range list {
		names = append(names, e.Name())
	}
	return names
}

// Source returns the text of an embedded table.
func Source(name string) ([]byte, error) {
	if !slices.Contains(Names(), name) {
		return nil, fmt.Errorf("no embedded table %q: there are %s", name, strings.Join(Names(), ", "))
	}
	return shipped.ReadFile("shipped/" + name + "/table.ecsv")
}

// coverageFile is the name of the scores that table build leaves beside a table.
const coverageFile = "coverage.ecsv"

// Open reads a table by the name of an embedded one or from a file, with the losses of its
// coverage.ecsv if that is there.
func Open(nameOrPath string) (*Table, error) {
	if slices.Contains(Names(), nameOrPath) {
		text, err := Source(nameOrPath)
		if err != nil {
			return nil, err
		}
		t, err := parse(text)
		if err != nil {
			return nil, err
		}
		cover, err := shipped.ReadFile("shipped/" + nameOrPath + "/" + coverageFile)
		if err != nil {
			return nil, err
		}
		e, err := ecsv.Read(bytes.NewReader(cover))
		if err != nil {
			return nil, err
		}
		t.addScores(e)
		return t, nil
	}
	t, err := Read(nameOrPath)
	if os.IsNotExist(err) {
		return nil, fmt.Errorf("%s: no such file, and no embedded table of that name (there are %s)%s", nameOrPath, strings.Join(Names(), ", "), strict.Hint(nameOrPath, Names()))
	}
	if err == nil {
		// What stands beside the table serves if it is of the same build, and is not needed.
		if e, err := ecsv.ReadFile(filepath.Join(filepath.Dir(nameOrPath), coverageFile)); err == nil {
			t.addScores(e)
		}
	}
	return t, err
}
