//go:build outside && linux

package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestKills is the short one of the two; the other is in .ci/soak.
func TestKills(t *testing.T) { tryKills(t, 20) }

// inNamespace returns a shell command line in mount and network namespaces of its own, as
// root or in a user namespace.
func inNamespace(script string) []string {
	words := []string{"unshare", "--mount", "--net"}
	if os.Getuid() != 0 {
		words = append(words, "--map-root-user")
	}
	return append(words, "sh", "-ec", script)
}

// A full disk, a limit on the size of files and a folder that cannot be written to give
// one message, exit code 1, and nothing that looks complete.
func TestNoRoom(t *testing.T) {
	dir := t.TempDir()
	for _, v := range victims(t, dir) {
		command := "exec offplane " + strings.Join(v.args, " ") + " -o "
		for _, c := range []struct{ name, script, say string }{
			{"full disk", "mkdir -p full && mount -t tmpfs -o size=16k none full && " + command + "full/out", "no space left on device"},
			{"file size", "ulimit -f 8 && " + command + "long-" + v.name, "file too large"},
			{"read-only", "mkdir -p bound && mount --bind bound bound && mount -o remount,bind,ro bound && " + command + "bound/out", "read-only file system"},
			{"read-only itself", "mkdir -p bound && mount --bind bound bound && mount -o remount,bind,ro bound && " + command + "bound", "read-only file system"},
		} {
			t.Run(v.name+" "+c.name, func(t *testing.T) {
				p := startCommand(t, dir, inNamespace(c.script)...)
				p.finish(exitFailed)
				said := p.stderr.String()
				if strings.Count(said, "\n") != 1 || !strings.HasPrefix(said, "offplane: ") || !strings.Contains(said, c.say) {
					t.Errorf("want one line with %q, got\n%s", c.say, said)
				}
				if exists(filepath.Join(dir, "long-"+v.name, recordName)) {
					t.Error("the folder looks complete")
				}
			})
		}
	}
}

// No command needs a network: all work where there is none, not even a loopback.
func TestNoNetwork(t *testing.T) {
	dir := t.TempDir()
	tiny, err := filepath.Abs("testdata/tiny.yaml")
	if err != nil {
		t.Fatal(err)
	}
	small := " --set 'image.from=268 deg' --set 'image.to=272 deg'"
	script := strings.Join([]string{
		"test \"$(cat /proc/net/route | wc -l)\" -le 1",
		"offplane run " + tiny + " --quiet --frames -o run",
		"offplane synth " + tiny + small + " --quiet -o data",
		"offplane invert run/observation.fits --set box=11 --set track=11 --quiet -o maps",
		"offplane compare --truth run/truth.fits --inferred maps/inferred.fits --quiet -o verdict",
		"offplane explain run --polar 270,1.15 >explained",
		"offplane table apply run/inferred.fits --recipe track=31 --recipe pixel=4.35 --quiet -o corrected",
		"offplane table show >table",
		"offplane scenario check " + tiny + " >checked",
		"offplane line --height 1.1,1.2 >line",
		"offplane ensemble show small >ensemble",
		"offplane budget " + tiny + small + " --set 'image.outer=1.15 Rsun' --realisations 2 --quiet -o terms",
	}, "\n")
	startCommand(t, dir, inNamespace(script)...).finish(0)
	for _, folder := range []string{"run", "data", "maps", "verdict", "corrected", "terms"} {
		if !exists(filepath.Join(dir, folder, recordName)) {
			t.Errorf("%s is not complete", folder)
		}
	}
}
