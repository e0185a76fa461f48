package main

import (
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// sums returns the SHA-256 of the files of a folder that may not depend on the execution.
func sums(t *testing.T, dir string) map[string]string {
	t.Helper()
	list, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]string{}
	for _, e := range list {
		if e.Name() == recordName {
			continue
		}
		f, err := entryOf(filepath.Join(dir, e.Name()))
		if err != nil {
			t.Fatal(err)
		}
		out[e.Name()] = f.SHA256
	}
	return out
}

// TestKilled kills runs at several points and starts the same command again: no
// --force, no leftovers, the same bytes.
func TestKilled(t *testing.T) {
	t.Parallel()
	tiny, err := filepath.Abs("testdata/tiny.yaml")
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	start := func(out string) *exec.Cmd {
		cmd := exec.Command("offplane", "run", tiny, "--workers", "1", "-o", out)
		cmd.Dir = dir
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		return cmd
	}
	if err := start("whole").Wait(); err != nil {
		t.Fatal(err)
	}
	want := sums(t, filepath.Join(dir, "whole"))
	if len(want) != 8 {
		t.Fatalf("files %v", want)
	}
	for _, first := range []string{markerName, "truth.fits", "series.fits"} {
		out := filepath.Join(dir, "killed-by-"+strings.TrimPrefix(first, "."))
		cmd := start(out)
		for !exists(filepath.Join(out, first)) {
			time.Sleep(200 * time.Microsecond)
		}
		if err := cmd.Process.Kill(); err != nil {
			t.Fatal(err)
		}
		if cmd.Wait() == nil || exists(filepath.Join(out, recordName)) {
			t.Fatalf("%s: the run was over before it was killed", first)
		}
		// What a writer had no time to rename.
		if err := os.WriteFile(filepath.Join(out, "bias.fits"+part), []byte("half"), 0o666); err != nil {
			t.Fatal(err)
		}
		if err := start(out).Wait(); err != nil {
			t.Fatalf("%s: the same command does not start again: %v", first, err)
		}
		got := sums(t, out)
		if len(got) != len(want) {
			t.Errorf("%s: files %v", first, got)
		}
		for name, sum := range want {
			if got[name] != sum {
				t.Errorf("%s: %s differs after the second start", first, name)
			}
		}
	}
}

// TestSignals: an interrupt and a request to terminate end a run with their codes and
// leave nothing half-written.
func TestSignals(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		signal string
		code   int
	}{{"INT", exitInterrupted}, {"TERM", exitStopped}} {
		out := filepath.Join(t.TempDir(), "out")
		var stderr strings.Builder
		cmd := exec.Command("offplane", "run", "quiet-belt", "-o", out)
		cmd.Stderr = &stderr
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		for !exists(filepath.Join(out, markerName)) {
			time.Sleep(time.Millisecond)
		}
		if b, err := exec.Command("kill", "-s", c.signal, itoa(cmd.Process.Pid)).CombinedOutput(); err != nil {
			t.Fatalf("%v %s", err, b)
		}
		err := cmd.Wait()
		x := (*exec.ExitError)(nil)
		if !errors.As(err, &x) || x.ExitCode() != c.code {
			t.Errorf("%s: %v, want code %d", c.signal, err, c.code)
		}
		if s := stderr.String(); strings.Count(s, "\n") != 1 || !strings.HasPrefix(s, "offplane: ") {
			t.Errorf("%s: %s", c.signal, s)
		}
		if exists(out) {
			t.Errorf("%s: left a folder behind", c.signal)
		}
	}
}
