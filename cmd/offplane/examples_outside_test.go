//go:build outside

package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"offplane/synth/fits/fitstest"
)

// The Python examples load every product, with every warning an error.
func TestExamplesOutside(t *testing.T) {
	dir := t.TempDir()
	in := func(name string) string { return filepath.Join(dir, name) }
	small := []string{"--quiet", "--set", "image.from=268 deg", "--set", "image.to=272 deg"}
	for _, args := range [][]string{
		{"run", "testdata/tiny.yaml", "--frames", "--quiet", "-o", in("run")},
		{"ensemble", "run", "small", "--quiet", "-o", in("ensemble")},
		{"table", "show", "sky", "--ecsv", in("sky.ecsv")},
		{"table", "apply", in("run/inferred.fits"), "--recipe", "track=31", "--recipe", "pixel=4.35", "--quiet", "-o", in("corrected")},
		append([]string{"budget", "testdata/tiny.yaml", "--realisations", "2", "--set", "image.outer=1.15 Rsun", "-o", in("budget")}, small...),
	} {
		if code, _, stderr := call(args...); code != exitOK {
			t.Fatalf("%v: exit %d: %s", args, code, stderr)
		}
	}
	tried := 0
	for script, args := range map[string][]string{
		"load_run.py": {in("run")}, "load_ensemble.py": {in("ensemble")}, "load_budget.py": {in("budget")},
		"load_table.py": {in("sky.ecsv"), in("corrected/corrected.fits")},
	} {
		text, err := os.ReadFile(filepath.Join("examples", script))
		if err != nil {
			t.Fatal(err)
		}
		if out := fitstest.Python(t, fitstest.Strict+string(text), args...); strings.Count(out, "\n") < 3 {
			t.Errorf("%s printed\n%s", script, out)
		}
		tried++
	}
	if all, err := filepath.Glob("examples/*.py"); err != nil || len(all) != tried {
		t.Errorf("%d examples, %d tried", len(all), tried)
	}
}
