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
	campaignFile(t, dir)
	small := []string{"--quiet", "--set", "image.from=268 deg", "--set", "image.to=272 deg"}
	for _, args := range [][]string{
		{"run", "testdata/tiny.yaml", "--frames", "--quiet", "-o", in("run")},
		{"ensemble", "run", "small", "--quiet", "-o", in("ensemble")},
		{"plan", in("campaign.yaml"), "--quiet", "-o", in("plan")},
		{"line", "--ecsv", in("line.ecsv")},
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
		"load_plan.py": {in("plan")}, "load_line.py": {in("line.ecsv")},
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

// campaignFile writes campaign.yaml and tiny.yaml, which it names.
func campaignFile(t *testing.T, dir string) {
	t.Helper()
	const campaign = `target: {scenario: tiny.yaml, set: ["inversion.estimators=[pair]"], from: 264 deg, to: 276 deg, inner: 1.10 Rsun, outer: 1.20 Rsun}
goal: {random: 0.9, systematic: 0.9, yield: 0.05, success: 0.5}
facts: {hours: 3 h}
vary:
  - {what: duration, values: [1 h, 2 h]}
effort: {waves: 4 h, designs: 1, trials: 4}
`
	tiny, err := os.ReadFile("testdata/tiny.yaml")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "tiny.yaml"), tiny, 0o666); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "campaign.yaml"), []byte(campaign), 0o666); err != nil {
		t.Fatal(err)
	}
}
