package main

import (
	"encoding/json"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

// TestEnsembleStopped stops ensembles by a kill, by a request to terminate, by an
// interrupt and by a file system that takes no more: what stands is whole, the same
// command goes on, and the bytes are those of a run that nothing stopped.
func TestEnsembleStopped(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	tiny, err := os.ReadFile("testdata/tiny.yaml")
	if err != nil {
		t.Fatal(err)
	}
	const text = `base: tiny.yaml
set: [image.pixel=15 arcsec, inversion.box=5, inversion.track=7, camera.duration=20 min]
design: random
members: 2
parameters:
  - path: waves.amplitude
    uniform: {from: 5 km/s, to: 15 km/s}
`
	for name, data := range map[string][]byte{"tiny.yaml": tiny, "e.yaml": []byte(text)} {
		if err := os.WriteFile(filepath.Join(dir, name), data, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	// start begins a run after words of the shell.
	start := func(before, out string) *exec.Cmd {
		cmd := exec.Command("sh", "-c", before+"exec offplane ensemble run e.yaml --workers 1 --quiet -o "+out)
		cmd.Dir = dir
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		return cmd
	}
	if err := start("", "whole").Wait(); err != nil {
		t.Fatal(err)
	}
	member := func(out, number string) string { return filepath.Join(dir, out, "members", number, "member.fits") }
	checkTimes(t, filepath.Join(dir, "whole", recordName), member("whole", "000000"))
	sum := func(path string) string {
		e, err := entryOf(path)
		if err != nil {
			t.Fatal(err)
		}
		return e.SHA256
	}
	for _, c := range []struct {
		out, before, signal string
		code                int
	}{{"killed", "", "KILL", -1}, {"told", "", "TERM", exitStopped}, {"interrupted", "", "INT", exitInterrupted}, {"full", "ulimit -f 16; ", "", exitFailed}} {
		cmd := start(c.before, c.out)
		if c.signal != "" {
			for !exists(member(c.out, "000000")) {
				time.Sleep(time.Millisecond)
			}
			if b, err := exec.Command("kill", "-s", c.signal, itoa(cmd.Process.Pid)).CombinedOutput(); err != nil {
				t.Fatalf("%v %s", err, b)
			}
		}
		x := (*exec.ExitError)(nil)
		if err := cmd.Wait(); !errors.As(err, &x) || x.ExitCode() != c.code {
			t.Errorf("%s: %v, want code %d", c.out, err, c.code)
		}
		if exists(filepath.Join(dir, c.out, recordName)) {
			t.Errorf("%s: complete although it was stopped", c.out)
		}
		stood, err := filepath.Glob(filepath.Join(dir, c.out, "members", "??????", "*"))
		if err != nil {
			t.Fatal(err)
		}
		for _, path := range stood {
			if sum(path) != sum(member("whole", filepath.Base(filepath.Dir(path)))) {
				t.Errorf("%s: %s is not whole", c.out, path)
			}
		}
		if (c.signal == "") != (len(stood) == 0) || len(stood) == 2 {
			t.Errorf("%s: %d members stand", c.out, len(stood))
		}
		if err := start("", c.out).Wait(); err != nil {
			t.Errorf("%s: the same command does not go on: %v", c.out, err)
		}
		if sum(filepath.Join(dir, c.out, membersFile)) != sum(filepath.Join(dir, "whole", membersFile)) {
			t.Errorf("%s: another index", c.out)
		}
	}
}

// checkTimes holds the record of an ensemble against a member: it tells of the whole
// command, not of the gathering at its end.
func checkTimes(t *testing.T, path, member string) {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var r record
	if err := json.Unmarshal(text, &r); err != nil {
		t.Fatal(err)
	}
	info, err := os.Stat(member)
	if err != nil {
		t.Fatal(err)
	}
	if !r.Started.Before(info.ModTime()) {
		t.Errorf("started %v, after the first member %v", r.Started, info.ModTime())
	}
	if len(r.Stages) != 2 || r.Stages[0].Name != "members" || r.Stages[1].Name != "gather" || r.Stages[0].Seconds > r.Seconds {
		t.Errorf("stages %v of %v s", r.Stages, r.Seconds)
	}
}
