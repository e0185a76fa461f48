//go:build outside || soak

package main

import (
	"bytes"
	"errors"
	"io/fs"
	"maps"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"
)

// A victim is a command that is killed or that finds no room: its arguments without the
// place for its results.
type victim struct {
	name string
	args []string
	file string // flag of the one file that it writes, of the kind that name ends in; empty: -o DIR
}

// victims prepares what the commands read in dir.
func victims(t *testing.T, dir string) []victim {
	t.Helper()
	tiny, err := os.ReadFile("testdata/tiny.yaml")
	if err != nil {
		t.Fatal(err)
	}
	write := func(name, text string) {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	const vary = "parameters:\n  - {path: waves.amplitude, uniform: {from: 8 km/s, to: 16 km/s}}\n"
	write("tiny.yaml", string(tiny))
	write("few.yaml", "base: tiny.yaml\nmembers: 4\nset: [image.from=268 deg, image.to=272 deg]\n"+vary)
	// As few members as make a table.
	write("fifty.yaml", "base: tiny.yaml\nmembers: 52\nset: [image.from=268 deg, image.to=272 deg, image.outer=1.15 Rsun]\n"+vary)
	start(t, dir, "run", "tiny.yaml", "--frames", "--quiet", "-o", "data").finish(0)
	start(t, dir, "ensemble", "run", "fifty.yaml", "--quiet", "-o", "fifty").finish(0)
	return []victim{
		{name: "run", args: []string{"run", "tiny.yaml", "--quiet", "--workers", "2"}},
		{name: "ensemble", args: []string{"ensemble", "run", "few.yaml", "--quiet", "--workers", "2"}},
		{name: "table-build", args: []string{"table", "build", "fifty", "--features", "height", "--quiet"}},
		{name: "table-apply", args: []string{"table", "apply", "data/inferred.fits", "--recipe", "track=31", "--recipe", "pixel=4.35", "--quiet"}},
	}
}

// A process is one execution of the program.
type process struct {
	t              *testing.T
	cmd            *exec.Cmd
	stdout, stderr bytes.Buffer
}

func start(t *testing.T, dir string, args ...string) *process {
	t.Helper()
	return startCommand(t, dir, append([]string{"offplane"}, args...)...)
}

func startCommand(t *testing.T, dir string, words ...string) *process {
	t.Helper()
	p := &process{t: t, cmd: exec.Command(words[0], words[1:]...)}
	p.cmd.Dir, p.cmd.Stdout, p.cmd.Stderr = dir, &p.stdout, &p.stderr
	if err := p.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	return p
}

// finish waits and checks the exit code.
func (p *process) finish(code int) {
	p.t.Helper()
	err := p.cmd.Wait()
	x, got := (*exec.ExitError)(nil), 0
	if errors.As(err, &x) {
		got = x.ExitCode()
	} else if err != nil {
		p.t.Fatal(err)
	}
	if got != code {
		p.t.Fatalf("%v: exit code %d, want %d\n%s", p.cmd.Args, got, code, p.stderr.String())
	}
}

// treeSums returns the SHA-256 of the files below a folder that may not depend on the
// execution; those that are being written, and the marker, only with loose.
func treeSums(t *testing.T, dir string, loose bool) map[string]string {
	t.Helper()
	out := map[string]string{}
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if errors.Is(err, fs.ErrNotExist) {
			return nil
		}
		if err != nil || d.IsDir() || d.Name() == recordName || !loose && (strings.Contains(path, part) || d.Name() == markerName) {
			return err
		}
		name, err := filepath.Rel(dir, path)
		if err != nil {
			return err
		}
		e, err := entryOf(path)
		out[name] = e.SHA256
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// awaitWriting waits until a file is there, whole or in part, or the time is over.
func awaitWriting(path string, atMost time.Duration) {
	for began := time.Now(); time.Since(began) < atMost; time.Sleep(100 * time.Microsecond) {
		if exists(path) || exists(path+part) {
			return
		}
	}
}

// tryKills kills each command so many times, half of them at random moments, half while
// a random file is being written. Whenever a folder has its
// record, it holds the bytes of an undisturbed execution; whenever it has not, the files
// under their own names are whole; the same command always goes on, without --force.
func tryKills(t *testing.T, dir string, victims []victim, kills int) {
	for _, v := range victims {
		t.Run(v.name, func(t *testing.T) {
			whole := filepath.Join(dir, v.name+"-whole")
			began := time.Now()
			start(t, dir, append(v.args, "-o", whole)...).finish(0)
			took := time.Since(began)
			want := treeSums(t, whole, true)
			if len(want) == 0 {
				t.Fatal("no files")
			}
			names := slices.Sorted(maps.Keys(want))
			random := rand.New(rand.NewPCG(1, 2))
			out := filepath.Join(dir, v.name)
			landed, finished := 0, 0
			for landed < kills {
				if finished > 20*kills {
					t.Fatalf("%d of %d executions ended before they were killed", finished, finished+landed)
				}
				p := start(t, dir, append(v.args, "-o", out)...)
				if moment := time.Duration(random.Float64() * float64(took)); landed%2 == 0 {
					time.Sleep(moment)
				} else {
					awaitWriting(filepath.Join(out, names[random.IntN(len(names))]), took)
				}
				p.cmd.Process.Kill()
				err := p.cmd.Wait()
				if x := (*exec.ExitError)(nil); errors.As(err, &x) && x.ExitCode() >= 0 {
					t.Fatalf("after %d kills: %v\n%s", landed, err, p.stderr.String())
				}
				got := treeSums(t, out, false)
				for name, sum := range got {
					if want[name] != sum {
						t.Fatalf("after %d kills %s stands there and is not whole", landed, name)
					}
				}
				if exists(filepath.Join(out, recordName)) {
					finished++
					if len(got) != len(want) {
						t.Fatalf("after %d kills the folder looks complete and holds %d of %d files", landed, len(got), len(want))
					}
					if err := os.RemoveAll(out); err != nil {
						t.Fatal(err)
					}
					continue
				}
				landed++
			}
			start(t, dir, append(v.args, "-o", out)...).finish(0)
			got := treeSums(t, out, true)
			if len(got) != len(want) {
				t.Errorf("%d files, want %d: %v", len(got), len(want), got)
			}
			for name, sum := range want {
				if got[name] != sum {
					t.Errorf("%s differs from an undisturbed execution", name)
				}
			}
			t.Logf("%d kills, %d executions ended before, %v each", landed, finished, took)
		})
	}
}
