package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/rogpeppe/go-internal/txtar"

	"offplane/synth/fits/fitstest"
)

// TestBadInput reads the broken files of testdata/bad: each archive begins with the
// command that reads them, in place of FILE, and holds pairs of a file and what is said
// of it. Files *.cards are headers of FITS files, see fitstest.File; those whose name begins
// with "ok" are material for the command line.
func TestBadInput(t *testing.T) {
	archives, err := filepath.Glob("testdata/bad/*.txtar")
	if err != nil {
		t.Fatal(err)
	}
	count := 0
	for _, path := range archives {
		a, err := txtar.ParseFile(path)
		if err != nil {
			t.Fatal(err)
		}
		kind := strings.TrimSuffix(filepath.Base(path), ".txtar")
		t.Run(kind, func(t *testing.T) { count += tryBad(t, a) })
	}
	if count < 196 {
		t.Errorf("%d broken files; there were 196 once", count)
	}
}

// tryBad plays the cases of one archive and returns their number.
func tryBad(t *testing.T, a *txtar.Archive) (count int) {
	t.Chdir(t.TempDir())
	command, _, _ := strings.Cut(string(a.Comment), "\n")
	var want = map[string]string{}
	var names []string
	for _, f := range a.Files {
		name, data := f.Name, f.Data
		if is, ok := strings.CutSuffix(name, ".want"); ok {
			want[is] = string(data)
			continue
		}
		if is, ok := strings.CutSuffix(name, ".cards"); ok {
			name, data = is+".fits", fitstest.File(string(data))
		}
		if err := os.WriteFile(name, data, 0o666); err != nil {
			t.Fatal(err)
		}
		if !strings.HasPrefix(name, "ok") {
			names = append(names, name)
		}
	}
	for _, name := range names {
		t.Run(name, func(t *testing.T) {
			words := strings.Fields(command)
			for i := range words {
				words[i] = strings.ReplaceAll(words[i], "FILE", name)
			}
			code, stdout, stderr := call(words[1:]...)
			if code != exitMisuse || stdout != "" {
				t.Errorf("code %d, %q", code, stdout)
			}
			stem := strings.TrimSuffix(name, filepath.Ext(name))
			if diff := cmp.Diff(want[stem], stderr); diff != "" || stderr == "" {
				t.Errorf("%s\n-- %s.want --\n%s", diff, stem, stderr)
			}
			if exists("out") {
				t.Error("a folder was left")
			}
		})
	}
	return len(names)
}
