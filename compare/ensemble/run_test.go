package ensemble

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"offplane/compare/trial"
	"offplane/synth/parallel"
)

// tree returns the sums of all files below a folder by their paths.
func tree(t testing.TB, dir string) map[string][32]byte {
	t.Helper()
	sums := map[string][32]byte{}
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := os.ReadFile(path)
		rel, _ := filepath.Rel(dir, path)
		sums[rel] = sha256.Sum256(data)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return sums
}

// One task, two tasks in either order, a task a member, any number of workers: the same
// bytes.
func TestShards(t *testing.T) {
	l, dir := whole(t)
	want := tree(t, dir)
	if len(want) != l.Members+1 {
		t.Fatalf("%d files for %d members", len(want), l.Members)
	}
	for _, tasks := range []int{2, l.Members} {
		dir := t.TempDir()
		for task := tasks - 1; task >= 0; task-- {
			run(t, l, dir, task, tasks, Settings{Workers: 1})
		}
		if diff := cmp.Diff(want, tree(t, dir)); diff != "" {
			t.Errorf("%d tasks: %s", tasks, diff)
		}
	}
}

// Shares are a partition whatever the number of tasks.
func TestShare(t *testing.T) {
	l := tiny(t)
	for tasks := 1; tasks <= 8; tasks++ {
		seen := map[int]int{}
		for task := range tasks {
			for _, i := range l.Share(task, tasks) {
				seen[i]++
			}
		}
		for i := range l.Members {
			if seen[i] != 1 || len(seen) != l.Members {
				t.Fatalf("%d tasks: %v", tasks, seen)
			}
		}
	}
}

// A rerun computes what is missing and nothing else; what a killed process left does no
// harm and is swept away.
func TestResume(t *testing.T) {
	l, dir := whole(t)
	want := tree(t, dir)
	before, err := os.Stat(filepath.Join(memberFolder(dir, 1), memberName))
	if err != nil {
		t.Fatal(err)
	}
	if err := os.RemoveAll(memberFolder(dir, 3)); err != nil {
		t.Fatal(err)
	}
	left := memberFolder(dir, 3) + partMark + "X"
	if err := os.MkdirAll(left, 0o777); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(left, memberName), []byte("half"), 0o666); err != nil {
		t.Fatal(err)
	}
	var calls []int
	run(t, l, dir, 0, 1, Settings{Progress: func(done, total int) { calls = append(calls, done, total) }})
	if diff := cmp.Diff([]int{4, 4}, calls); diff != "" {
		t.Errorf("progress: %s", diff)
	}
	if after, err := os.Stat(filepath.Join(memberFolder(dir, 1), memberName)); err != nil || !os.SameFile(before, after) || !before.ModTime().Equal(after.ModTime()) {
		t.Errorf("a member that was whole was computed again: %v", err)
	}
	if _, err := open(t, dir).Index(); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(want, tree(t, dir)); diff != "" {
		t.Error(diff)
	}
}

// pixelsStart returns where the data of PIXELS begin: after the END card of its header,
// at the next block of 2880 bytes.
func pixelsStart(t *testing.T, data []byte) int {
	t.Helper()
	const block = 2880
	header := bytes.Index(data, []byte("XTENSION"))
	end := bytes.Index(data[max(header, 0):], []byte("END     "))
	if header < 0 || end < 0 || !bytes.Contains(data[header:header+end], []byte("'PIXELS")) {
		t.Fatal("PIXELS is not the first extension")
	}
	return (header + end + block) / block * block
}

// Damage that the headers show is found by a look, damage of the content by a full read;
// a rerun makes either member again, the same bytes, and leaves the others.
func TestDamaged(t *testing.T) {
	l, dir := whole(t)
	want := tree(t, dir)
	file := func(i int) string { return filepath.Join(memberFolder(dir, i), memberName) }
	data, err := os.ReadFile(file(0))
	if err != nil {
		t.Fatal(err)
	}
	content := bytes.Replace(data, []byte("strength: 2 G"), []byte("strength: 3 G"), 1)
	if bytes.Equal(content, data) {
		t.Fatal("the scenario does not stand in the file")
	}
	flipped := bytes.Clone(data)
	flipped[pixelsStart(t, data)] ^= 1
	for _, c := range []struct {
		name  string
		data  []byte
		shown bool // by the headers
	}{
		{"empty", nil, true},
		{"garbage", bytes.Repeat([]byte("x"), len(data)), true},
		{"cut within data", data[:len(data)-2880], true},
		{"primary HDU only", data[:2880], true},
		{"other member", bytes.Replace(data, []byte("MEMBER  =                    0"), []byte("MEMBER  =                    1"), 1), true},
		{"content", content, false},
		{"one bit of a pixel", flipped, false},
	} {
		if err := os.WriteFile(file(0), c.data, 0o666); err != nil {
			t.Fatal(err)
		}
		s := open(t, dir)
		if shown := len(s.Damaged) == 1 && len(s.Missing) == 1 && s.Missing[0] == 0; shown != c.shown || shown && !strings.Contains(s.Damaged[0].Error(), file(0)) {
			t.Errorf("%s: damaged %v, missing %v", c.name, s.Damaged, s.Missing)
		}
		var d *Damage
		if _, err := s.Index(); !c.shown && (!errors.As(err, &d) || d.Number != 0) {
			t.Errorf("%s: index: %v", c.name, err)
		}
		begun := 0
		run(t, l, dir, 0, 1, Settings{Begin: func(todo int, damaged []*Damage) error {
			begun = todo
			if len(damaged) != 1 || damaged[0].Number != 0 {
				t.Errorf("%s: damaged %v", c.name, damaged)
			}
			return nil
		}})
		if diff := cmp.Diff(want, tree(t, dir)); diff != "" || begun != 1 {
			t.Errorf("%s: %d computed: %s", c.name, begun, diff)
		}
	}
}

// A cancelled run leaves members that are whole and nothing else.
func TestCancelled(t *testing.T) {
	l, dir := tiny(t), t.TempDir()
	ctx, cancel := context.WithCancel(t.Context())
	err := Run(ctx, l, dir, l.Share(0, 1), Settings{Workers: 1, Version: "test", Progress: func(done, _ int) {
		if done == 2 {
			cancel()
		}
	}})
	if !errors.Is(err, context.Canceled) {
		t.Fatalf("%v", err)
	}
	s := open(t, dir)
	if diff := cmp.Diff([]int{0, 1}, s.Done); diff != "" || len(s.Failed) > 0 || len(tree(t, dir)) != 3 {
		t.Errorf("%s, failed %v, files %d", diff, s.Failed, len(tree(t, dir)))
	}
}

// A member that cannot be computed says why and stops no other; it is computed again
// only if that is asked for.
func TestFailed(t *testing.T) {
	l, err := load(t, `
base: base.yaml
design: grid
parameters:
  - path: image.inner
    values: [1.05 Rsun, 1.2 Rsun]
  - path: image.outer
    values: [1.15 Rsun, 1.25 Rsun]
`)
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	run(t, l, dir, 0, 1, Settings{})
	s := open(t, dir)
	if diff := cmp.Diff([]int{2}, s.Failed); diff != "" || len(s.Done) != 3 {
		t.Fatalf("%s, done %v", diff, s.Done)
	}
	if why := s.Reason(2); !strings.Contains(why, "image.outer") {
		t.Errorf("reason: %s", why)
	}
	index, err := s.Index()
	if err != nil {
		t.Fatal(err)
	}
	if state := index.Column("state").Data.([]string); state[2] != "failed" || state[1] != "done" {
		t.Errorf("%v", state)
	}
	// As if the reason were gone: a full disk, say.
	path := filepath.Join(memberFolder(dir, 0), memberName)
	if err := os.Remove(path); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(memberFolder(dir, 0), failedName), nil, 0o666); err != nil {
		t.Fatal(err)
	}
	run(t, l, dir, 0, 1, Settings{})
	if s := open(t, dir); len(s.Failed) != 2 {
		t.Errorf("failed %v without being asked for", s.Failed)
	}
	run(t, l, dir, 0, 1, Settings{RetryFailed: true})
	if s := open(t, dir); len(s.Done) != 3 || len(s.Failed) != 1 {
		t.Errorf("done %v, failed %v", s.Done, s.Failed)
	}
}

// Members of another ensemble, of another number or of another version do not pass.
func TestForeignMembers(t *testing.T) {
	l, dir := whole(t)
	if err := os.RemoveAll(memberFolder(dir, 1)); err != nil {
		t.Fatal(err)
	}
	if err := os.Rename(memberFolder(dir, 2), memberFolder(dir, 1)); err != nil {
		t.Fatal(err)
	}
	if _, err := open(t, dir).Read(1); err == nil || !strings.Contains(err.Error(), "is member 2 of") {
		t.Errorf("%v", err)
	}
	if err := os.RemoveAll(memberFolder(dir, 1)); err != nil {
		t.Fatal(err)
	}
	if err := Run(t.Context(), l, dir, []int{1}, Settings{Version: "other"}); err != nil {
		t.Fatal(err)
	}
	if _, err := open(t, dir).Index(); err == nil || !strings.Contains(err.Error(), "version") {
		t.Errorf("%v", err)
	}
	other, err := load(t, "seed: 2\n"+tinyEnsemble)
	if err != nil {
		t.Fatal(err)
	}
	if err := Prepare(other, dir); !errors.Is(err, ErrOther) {
		t.Errorf("%v", err)
	}
	if _, err := Open(t.TempDir()); err == nil || !strings.Contains(err.Error(), "no folder of an ensemble") {
		t.Errorf("%v", err)
	}
}

// BenchmarkPreset tells how many members of the shipped ensemble are done in a minute on
// the cores there are, a member a core as Run does it, and one member after the other on
// all cores. Both took 4.0 to 4.2 processor seconds a member, some 30 members a minute on
// two idle cores of an EPYC server; a core each has no wait for the last worker.
func BenchmarkPreset(b *testing.B) {
	l, err := Load("belts")
	if err != nil {
		b.Fatal(err)
	}
	n := parallel.Workers(0)
	rate := func(name string, compute func(b *testing.B, numbers []int) error) {
		b.Run(name, func(b *testing.B) {
			from := 0
			for b.Loop() {
				var numbers []int
				for i := range n {
					numbers = append(numbers, (from+i)%l.Members)
				}
				if err := compute(b, numbers); err != nil {
					b.Fatal(err)
				}
				from += n
			}
			b.ReportMetric(float64(from)/b.Elapsed().Minutes(), "members/min")
		})
	}
	rate("core-each", func(b *testing.B, numbers []int) error {
		return Run(b.Context(), l, b.TempDir(), numbers, Settings{Version: "bench"})
	})
	rate("all-cores-each", func(b *testing.B, numbers []int) error {
		for _, i := range numbers {
			s, _, err := l.Member(i)
			if err != nil {
				return err
			}
			if _, err := trial.Run(b.Context(), s, trial.Settings{}); err != nil {
				return err
			}
		}
		return nil
	})
}
