//go:build outside

package main

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

// Every file of a run but run.json is the same to the byte whatever the number of
// workers or processors, and whichever code computes: vector, portable by a build tag, or
// portable because the processor's vectors are switched off. (Tiles: package synth.)
func TestRunIsTheSameToTheByte(t *testing.T) {
	dir := t.TempDir()
	build := func(name string, args ...string) string {
		path := filepath.Join(dir, name)
		if out, err := exec.Command("go", append(append([]string{"build"}, args...), "-o", path, ".")...).CombinedOutput(); err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
		return path
	}
	plain, portable := build("plain"), build("portable", "-tags", "purego")
	var want map[string][]byte
	for _, c := range []struct {
		name, binary string
		env          []string
		args         []string
	}{
		{name: "one worker", binary: plain, args: []string{"--workers", "1"}},
		{name: "two workers", binary: plain, args: []string{"--workers", "2"}},
		{name: "three workers", binary: plain, args: []string{"--workers", "3"}},
		{name: "one processor", binary: plain, env: []string{"GOMAXPROCS=1"}},
		{name: "two processors", binary: plain, env: []string{"GOMAXPROCS=2"}},
		{name: "portable", binary: portable},
		{name: "without AVX2", binary: plain, env: []string{"GODEBUG=cpu.avx2=off"}},
		{name: "without AVX-512", binary: plain, env: []string{"GODEBUG=cpu.avx512f=off"}},
	} {
		out := filepath.Join(dir, "run of "+c.name)
		cmd := exec.Command(c.binary, append([]string{"run", "quick", "-o", out, "--quiet"}, c.args...)...)
		cmd.Env = append(os.Environ(), c.env...)
		if text, err := cmd.CombinedOutput(); err != nil {
			t.Fatalf("%s: %v\n%s", c.name, err, text)
		}
		got := map[string][]byte{}
		entries, err := os.ReadDir(out)
		if err != nil {
			t.Fatal(err)
		}
		for _, e := range entries {
			if e.Name() == "run.json" {
				continue
			}
			if got[e.Name()], err = os.ReadFile(filepath.Join(out, e.Name())); err != nil {
				t.Fatal(err)
			}
		}
		if want == nil {
			want = got
		}
		if len(got) != len(want) || len(got) < 8 {
			t.Errorf("%s: %d files, not %d", c.name, len(got), len(want))
		}
		for name, data := range want {
			if !bytes.Equal(got[name], data) {
				t.Errorf("%s: %s differs", c.name, name)
			}
		}
		os.RemoveAll(out)
	}
}
