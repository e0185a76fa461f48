package main

import (
	"os/exec"
	"slices"
	"strings"
	"testing"
)

// leaves may be imported by any package and import only leaves.
var leaves = []string{"scenarios/units", "scenarios/strict", "synth/obs", "synth/fits", "synth/ecsv", "synth/parallel", "synth/random", "synth/filter", "compare/stat"}

// sentence is the order of the packages that are not leaves: each may import those
// before it. Sub-packages stand with their parent.
var sentence = []string{"scenarios", "model", "synth", "invert", "compare", "cmd"}

// imports returns the direct imports of every package of the module, test files left
// out, as paths below the module.
func imports(t *testing.T) map[string][]string {
	t.Helper()
	out, err := exec.Command("go", "list", "-f", `{{.ImportPath}}:{{range .Imports}} {{.}}{{end}}`, "offplane/...").Output()
	if err != nil {
		t.Fatal(err)
	}
	all := map[string][]string{}
	for _, l := range strings.Split(strings.TrimSpace(string(out)), "\n") {
		path, list, _ := strings.Cut(l, ":")
		path = strings.TrimPrefix(path, "offplane/")
		all[path] = nil
		for _, i := range strings.Fields(list) {
			if p, ok := strings.CutPrefix(i, "offplane/"); ok {
				all[path] = append(all[path], p)
			}
		}
	}
	return all
}

func place(path string) int {
	head, _, _ := strings.Cut(path, "/")
	return slices.Index(sentence, head)
}

// Packages import leftwards in the sentence, leaves only leaves. Packages that only
// tests use (name ends in "test") are not bound.
func TestImportsRunLeftwards(t *testing.T) {
	all := imports(t)
	if len(all) < 15 {
		t.Fatalf("only %d packages listed", len(all))
	}
	for path, list := range all {
		if strings.HasSuffix(path, "test") {
			continue
		}
		if place(path) < 0 {
			t.Errorf("%s is no part of the sentence", path)
		}
		for _, i := range list {
			switch {
			case slices.Contains(leaves, i):
			case slices.Contains(leaves, path):
				t.Errorf("the leaf %s imports %s, which is no leaf", path, i)
			case place(i) > place(path):
				t.Errorf("%s imports %s, which comes after it", path, i)
			}
		}
	}
}

// The inversion may not see the truth: it depends on leaves and synth/line alone,
// also through other packages.
func TestInversionIsBlind(t *testing.T) {
	all := imports(t)
	var walk func(path string, trail []string)
	seen := map[string]bool{}
	walk = func(path string, trail []string) {
		trail = append(trail, path)
		if path != "invert" && path != "synth/line" && !slices.Contains(leaves, path) {
			t.Errorf("the inversion reaches %s", strings.Join(trail, " -> "))
			return
		}
		if seen[path] {
			return
		}
		seen[path] = true
		for _, i := range all[path] {
			walk(i, trail)
		}
	}
	walk("invert", nil)
	if !seen["synth/line"] {
		t.Error("the walk did not reach synth/line")
	}
}

// One package imports the deprecated random generator, one plots, one reads FITS.
func TestLibrariesHaveOneImporter(t *testing.T) {
	out, err := exec.Command("go", "list", "-f", `{{.ImportPath}}:{{range .Imports}} {{.}}{{end}}`, "offplane/...").Output()
	if err != nil {
		t.Fatal(err)
	}
	for library, only := range map[string]string{
		"golang.org/x/exp/rand": "offplane/synth/random", "github.com/astrogo/fitsio": "offplane/synth/fits", "gonum.org/v1/plot": "offplane/compare/report",
	} {
		for _, l := range strings.Split(string(out), "\n") {
			path, list, _ := strings.Cut(l, ":")
			for _, i := range strings.Fields(list) {
				if (i == library || strings.HasPrefix(i, library+"/")) && path != only {
					t.Errorf("%s imports %s; only %s may", path, i, only)
				}
			}
		}
	}
}

// Nothing talks to a network but the viewer, on loopback.
func TestNoNetworkImports(t *testing.T) {
	out, err := exec.Command("go", "list", "-f", `{{.ImportPath}}:{{range .Imports}} {{.}}{{end}}`, "offplane/...").Output()
	if err != nil {
		t.Fatal(err)
	}
	for _, l := range strings.Split(string(out), "\n") {
		path, list, _ := strings.Cut(l, ":")
		for _, i := range strings.Fields(list) {
			if (i == "net" || strings.HasPrefix(i, "net/") && i != "net/url" && i != "net/netip") && path != "offplane/cmd/offplane/view" {
				t.Errorf("%s imports %s; only cmd/offplane/view may", path, i)
			}
		}
	}
}
