package invert

import (
	"os/exec"
	"slices"
	"strings"
	"testing"
)

// The inversion is blind: of the program it may know the leaves and the line model,
// not even through another package anything else.
func TestInvertSeesOnlyLeavesAndTheLine(t *testing.T) {
	const module = "offplane/"
	allowed := []string{"invert", "synth/line", "scenarios/units", "scenarios/strict", "synth/obs", "synth/fits", "synth/parallel", "synth/random", "synth/filter", "compare/stat"}
	out, err := exec.Command("go", "list", "-deps", "-f", "{{.ImportPath}} {{join .Imports \" \"}}", ".").CombinedOutput()
	if err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	from := map[string]string{} // an importer of each package
	var seen []string
	for line := range strings.Lines(string(out)) {
		f := strings.Fields(line)
		seen = append(seen, f[0])
		for _, i := range f[1:] {
			from[i] = f[0]
		}
	}
	if !slices.Contains(seen, module+"synth/line") {
		t.Fatalf("the line model is not among the dependencies: %v", seen)
	}
	for _, p := range seen {
		name, ours := strings.CutPrefix(p, module)
		if !ours || slices.Contains(allowed, name) {
			continue
		}
		path := p
		for q := p; from[q] != ""; q = from[q] {
			path = from[q] + " -> " + path
		}
		t.Errorf("invert may not see %s: %s", p, path)
	}
}
