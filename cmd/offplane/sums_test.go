package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// flip changes one byte of a file: the first that follows a mark by so many bytes.
func flip(t *testing.T, path, mark string, after int) {
	t.Helper()
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	i := bytes.Index(raw, []byte(mark))
	if i < 0 {
		t.Fatalf("%s: no %q", path, mark)
	}
	raw[i+after] ^= 1
	if err := os.WriteFile(path, raw, 0o666); err != nil {
		t.Fatal(err)
	}
}

// Files whose sums are wrong are used, and said to be so: by file, HDU and sum, once each.
func TestWrongSumsAreTold(t *testing.T) {
	dir := t.TempDir()
	in := func(name string) string { return filepath.Join(dir, name) }
	field, density := writePublished(t, dir, false)
	if code, _, stderr := call("synth", "testdata/tiny.yaml", "--set", "image.from=268 deg", "--set", "image.to=272 deg", "--quiet", "-o", in("data")); code != exitOK {
		t.Fatal(stderr)
	}
	frames := in("data/observation.fits")
	commands := [][]string{
		{"table", "apply", field, "--density", density, "--recipe", "as-table", "--recipe", "pixel=4.35", "--quiet", "--force", "-o", in("corrected")},
		{"compare", "--true", "B_SKY=" + field, "--map", "B=" + field, "--quiet", "--force", "-o", in("verdict")},
		{"invert", frames, "--set", "box=11", "--set", "track=11", "--quiet", "--force", "-o", in("maps")},
	}
	for _, args := range commands {
		if code, _, stderr := call(args...); code != exitOK || stderr != "" {
			t.Fatalf("%v: %d %s", args, code, stderr)
		}
	}
	flip(t, field, "MINE", 2880*2) // in the pixels: the header has one block from here, or two
	flip(t, density, "mine", 1)    // a card of the header
	flip(t, frames, "LINE1   ", 2880*4)
	for i, want := range [][]string{
		{density + "[MINE]: the HDU does not add up to CHECKSUM", field + "[MINE]: the data do not add up to DATASUM"},
		{field + "[MINE]: the data do not add up to DATASUM"},
		{frames + "[LINE1]: the data do not add up to DATASUM"},
	} {
		code, _, stderr := call(commands[i]...)
		lines := strings.Split(strings.TrimSuffix(stderr, "\n"), "\n")
		if code != exitOK || len(lines) != len(want) {
			t.Errorf("%v: %d\n%s", commands[i], code, stderr)
			continue
		}
		for k := range want {
			if !strings.HasPrefix(lines[k], "offplane: "+want[k]) || !strings.HasSuffix(lines[k], "; it is used as it is") {
				t.Errorf("want %s, got\n%s", want[k], lines[k])
			}
		}
	}
}
