package ensemble

import (
	"bytes"
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sync"

	"offplane/compare/trial"
	"offplane/synth/parallel"
)

// Settings of a run: what changes no byte of a member.
type Settings struct {
	Workers     int // members computed at a time, each on one core; < 1: every core
	Version     string
	RetryFailed bool // compute members again that left FAILED
	Progress    func(done, total int)

	// Begin, if set, is told before the first member is computed how many will be, and
	// which of them are damaged. Its error stops the run.
	Begin func(todo int, damaged []*Damage) error
}

// Prepare makes the folder of an ensemble and writes the resolved ensemble into it. It
// returns ErrOther if the folder is that of another ensemble.
func Prepare(l *Loaded, dir string) error {
	path := filepath.Join(dir, ensembleName)
	text, err := os.ReadFile(path)
	switch {
	case err == nil && bytes.Equal(text, l.Canonical):
		return nil
	case err == nil:
		return fmt.Errorf("%s: %w", dir, ErrOther)
	case !errors.Is(err, fs.ErrNotExist):
		return err
	}
	if err := os.MkdirAll(filepath.Join(dir, membersName), 0o777); err != nil {
		return err
	}
	return writeWhole(path, l.Canonical)
}

// ErrOther tells that a folder holds another ensemble.
var ErrOther = errors.New("holds another ensemble")

// writeWhole writes a file under a name of its own and renames it, so that several
// processes may write the same one.
func writeWhole(path string, text []byte) error {
	own := ownName(path)
	err := os.WriteFile(own, text, 0o666)
	if err == nil {
		err = os.Rename(own, path)
	}
	if err != nil {
		os.Remove(own)
	}
	return err
}

// partMark stands in the names of what is being written.
const partMark = ".part-"

// ownName returns a name beside path that nobody else uses.
func ownName(path string) string { return path + partMark + rand.Text() }

// Run computes those of the numbered members that are not there yet or cannot be read,
// each on one core.
// A member that cannot be computed leaves FAILED and does not stop the others. The error
// is that of the folder or of a cancelled context; members that are whole stay.
func Run(ctx context.Context, l *Loaded, dir string, numbers []int, s Settings) error {
	if err := Prepare(l, dir); err != nil {
		return err
	}
	var todo []int
	var harm []*Damage
	for _, i := range numbers {
		st, err := l.state(dir, i, ReadMember)
		if st == damaged {
			harm = append(harm, &Damage{i, err})
		}
		if st == missing || st == damaged || st == failed && s.RetryFailed {
			todo = append(todo, i)
		}
	}
	if s.Begin != nil {
		if err := s.Begin(len(todo), harm); err != nil {
			return err
		}
	}
	var mu sync.Mutex
	finished := len(numbers) - len(todo)
	return parallel.For(ctx, len(todo), s.Workers, func(_, k int) error {
		err := compute(ctx, l, dir, todo[k], s.Version)
		mu.Lock()
		defer mu.Unlock()
		if finished++; s.Progress != nil && err == nil {
			s.Progress(finished, len(numbers))
		}
		return err
	})
}

// compute makes the folder of one member.
func compute(ctx context.Context, l *Loaded, dir string, number int, version string) error {
	m, err := l.Compute(ctx, number, version)
	if ctx.Err() != nil {
		return ctx.Err()
	}
	if err != nil {
		reason := []byte(err.Error() + "\n")
		return l.settle(dir, number, func(folder string) error {
			return os.WriteFile(filepath.Join(folder, failedName), reason, 0o666)
		})
	}
	return l.settle(dir, number, func(folder string) error { return m.write(filepath.Join(folder, memberName)) })
}

// Compute returns a member, computed on one core.
func (l *Loaded) Compute(ctx context.Context, number int, version string) (*Member, error) {
	s, values, err := l.Member(number)
	if err != nil {
		return nil, err
	}
	o, err := trial.Run(ctx, s, trial.Settings{Workers: 1, Version: version})
	if err != nil {
		return nil, err
	}
	return newMember(number, l.SHA256, version, s, values, o)
}

// settle fills a folder under a name of its own and gives it that of the member. Whoever
// comes second finds the same bytes there and leaves them; what failed or is damaged gives way.
func (l *Loaded) settle(dir string, number int, fill func(folder string) error) error {
	folder := memberFolder(dir, number)
	part := ownName(folder)
	if err := os.Mkdir(part, 0o777); err != nil {
		return err
	}
	defer os.RemoveAll(part)
	if err := fill(part); err != nil {
		return err
	}
	if err := flush(part); err != nil {
		return err
	}
	if st, _ := l.state(dir, number, ReadMember); st == failed || st == damaged {
		if err := os.RemoveAll(folder); err != nil {
			return err
		}
	}
	err := os.Rename(part, folder)
	if st, _ := l.state(dir, number, Identify); st == done || st == failed {
		return nil
	}
	return err
}

// flush brings the files of a folder to the disk before it gets its name, so that a
// member is whole after a power cut too.
func flush(folder string) error {
	files, err := os.ReadDir(folder)
	if err != nil {
		return err
	}
	for _, e := range files {
		f, err := os.OpenFile(filepath.Join(folder, e.Name()), os.O_RDWR, 0)
		if err != nil {
			return err
		}
		if err := errors.Join(f.Sync(), f.Close()); err != nil {
			return err
		}
	}
	return nil
}

// Share returns the numbers of the members of task number of so many: every so-manieth, so
// that what the design varies slowly is spread over the tasks.
func (l *Loaded) Share(task, tasks int) (numbers []int) {
	for i := task; i < l.Members; i += tasks {
		numbers = append(numbers, i)
	}
	return numbers
}
