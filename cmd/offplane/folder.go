package main

import (
	"bufio"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"syscall"
)

// Names in a folder of results. A folder is complete when the record stands, which is
// written last. Until then the marker stands, locked, and says what is being made.
const (
	recordName = "run.json"
	markerName = ".offplane"
	part       = ".part" // suffix of a file that is being written
)

var (
	errHeld    = errors.New("held by another process")
	errNoLocks = errors.New("this file system has no locks")
)

// A job is what a command makes in a folder.
type job struct {
	Command string   `json:"command"`
	SHA256  string   `json:"sha256"` // of all that decides the bytes of the files
	files   []string // their names, without the record
	inputs  []string // paths that the command reads
}

// A folder is where a job is being done.
type folder struct {
	dir    string
	job    job
	marker *os.File
	made   bool // the folder itself is new
	fresh  bool // nothing was being made here
	mine   bool // the marker tells of this job
	warn   func(format string, args ...any)
}

// open takes a folder for a job. It refuses one that is complete, that holds another
// job or files of the same names, unless force is set, and one held by another process
// in any case. What an earlier try at the same job left is removed: it starts afresh.
func (p *program) open(dir string, j job, force bool) (*folder, error) {
	f := &folder{dir: dir, job: j, warn: p.say}
	// What an earlier command left is removed, and may be what this one reads.
	for _, name := range slices.Concat(j.files, recorded(f.path(recordName))) {
		for _, in := range j.inputs {
			if sameFile(in, f.path(name)) {
				return nil, misusef("%s would be read and written: choose another folder", in)
			}
		}
	}
	if err := f.take(); err != nil {
		return nil, err
	}
	if err := f.claim(force); err != nil {
		f.abandon()
		return nil, err
	}
	return f, nil
}

// hold takes a folder for the time of a command that keeps other books of what it holds:
// none that another command has not finished, unless force is set.
func (p *program) hold(dir, command string, force bool) (*folder, error) {
	f := &folder{dir: dir, warn: p.say}
	if err := f.take(); err != nil {
		return nil, err
	}
	old, unfinished, err := f.begun()
	if err == nil && unfinished && old.Command != command && !force {
		err = f.occupied(&old)
	}
	if err != nil {
		f.abandon()
		return nil, err
	}
	return f, nil
}

// begun returns the job that the marker tells of; ok is false if there is none.
func (f *folder) begun() (old job, ok bool, err error) {
	text, err := io.ReadAll(f.marker)
	f.fresh = len(text) == 0
	// A marker that its maker had no time to fill in says nothing.
	return old, err == nil && json.Unmarshal(text, &old) == nil && old.SHA256 != "", err
}

func (f *folder) occupied(old *job) error {
	return misusef("%s holds an unfinished %s of other input: choose another folder, or write over it with --force", f.dir, old.Command)
}

func (f *folder) complete() error {
	return misusef("%s is complete: choose another folder, or write over it with --force", f.dir)
}

// take makes the folder if need be and locks it.
func (f *folder) take() error {
	_, err := os.Stat(f.dir)
	f.made = errors.Is(err, fs.ErrNotExist)
	if err := os.MkdirAll(f.dir, 0o777); err != nil {
		return unmade(err)
	}
	return f.lock()
}

// unmade is the error of a folder that cannot be made: a file in its place is misuse, a
// disk that takes nothing a failure.
func unmade(err error) error {
	if errors.Is(err, syscall.ENOTDIR) || errors.Is(err, fs.ErrExist) {
		return misuse(err)
	}
	return err
}

// claim holds what is in the folder against the job and clears it for it.
func (f *folder) claim(force bool) error {
	old, unfinished, err := f.begun()
	if err != nil {
		return err
	}
	same := unfinished && old.Command == f.job.Command && old.SHA256 == f.job.SHA256
	complete := exists(f.path(recordName))
	switch {
	case force:
	case complete:
		return f.complete()
	case unfinished && !same:
		return f.occupied(&old)
	case !unfinished && !f.carriesJob():
		for _, name := range f.job.files {
			if exists(f.path(name)) {
				return misusef("%s is there already: choose another folder, or write over it with --force", f.path(name))
			}
		}
	}
	// The record goes first: from here on the folder is not complete. What another
	// command left goes too, so that nothing of it stands beside the new files.
	gone := append([]string{recordName}, f.job.files...)
	if complete {
		gone = append(gone, recorded(f.path(recordName))...)
	}
	for _, name := range gone {
		for _, name := range []string{name, name + part} {
			if err := os.Remove(f.path(name)); err != nil && !errors.Is(err, fs.ErrNotExist) {
				return err
			}
		}
	}
	text, err := json.Marshal(f.job)
	if err != nil {
		return err
	}
	if err := f.marker.Truncate(0); err != nil {
		return err
	}
	_, err = f.marker.WriteAt(append(text, '\n'), 0)
	f.mine = err == nil
	return err
}

// carriesJob reports whether the truth in the folder is that of the job's scenario: what
// is left of a complete folder whose record was taken away.
func (f *folder) carriesJob() bool {
	l, _, err := readScenario(f.path("truth.fits"))
	return err == nil && l.SHA256 == f.job.SHA256
}

// lock opens the marker and locks it.
func (f *folder) lock() error {
	for {
		m, err := os.OpenFile(f.path(markerName), os.O_RDWR|os.O_CREATE, 0o666)
		if err != nil {
			return unmade(err)
		}
		switch err := lock(m); {
		case errors.Is(err, errHeld):
			m.Close()
			return misusef("%s is held by another process that writes to it", f.dir)
		case errors.Is(err, errNoLocks):
			f.warn("%s: %v; take care that no other process writes here", f.dir, err)
		case err != nil:
			m.Close()
			return err
		}
		// Its holder may have removed it between opening and locking.
		if mine, err := m.Stat(); err == nil {
			if there, err := os.Stat(f.path(markerName)); err == nil && os.SameFile(mine, there) {
				f.marker = m
				return nil
			}
		}
		m.Close()
	}
}

func (f *folder) path(name string) string { return filepath.Join(f.dir, name) }

// write writes a file under a temporary name and renames it.
func (f *folder) write(name string, fill func(io.Writer) error) (err error) {
	out, err := os.Create(f.path(name + part))
	if err != nil {
		return err
	}
	w := bufio.NewWriterSize(out, 1<<16)
	if err = fill(w); err == nil {
		err = w.Flush()
	}
	if closing := out.Close(); err == nil {
		err = closing
	}
	if err == nil {
		err = os.Rename(out.Name(), f.path(name))
	}
	if err != nil {
		os.Remove(out.Name())
	}
	return err
}

// finish writes the record, which makes the folder complete, and lets go of it; not after
// an interrupt.
func (f *folder) finish(ctx context.Context, r *record) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	for _, name := range f.job.files {
		e, err := entryOf(f.path(name))
		if err != nil {
			return err
		}
		e.Name = name
		r.Files = append(r.Files, e)
	}
	if err := f.write(recordName, r.encode); err != nil {
		return err
	}
	f.release(true)
	return nil
}

// abandon lets go of a folder that is not complete; after finish it does nothing. The
// marker stays if there are files it tells about, so that the same job may start again;
// else no trace is left.
func (f *folder) abandon() {
	if f.marker == nil {
		return
	}
	trace := !f.fresh
	if f.mine {
		trace = false
		for _, name := range f.job.files {
			os.Remove(f.path(name + part))
			trace = trace || exists(f.path(name))
		}
	}
	f.release(!trace)
	if f.made {
		os.Remove(f.dir) // fails if it is not empty
	}
}

// release drops the lock, with or without the marker.
func (f *folder) release(remove bool) {
	gone := !remove || os.Remove(f.marker.Name()) == nil
	f.marker.Close()
	if !gone {
		os.Remove(f.path(markerName)) // where an open file cannot be removed
	}
	f.marker = nil
}

func exists(path string) bool {
	_, err := os.Lstat(path)
	return err == nil
}

func sameFile(a, b string) bool {
	x, err := os.Stat(a)
	if err != nil {
		return false
	}
	y, err := os.Stat(b)
	return err == nil && os.SameFile(x, y)
}

// An entry is one file with its sum.
type entry struct {
	Name   string `json:"name"`
	Bytes  int64  `json:"bytes"`
	SHA256 string `json:"sha256"`
}

func entryOf(path string) (entry, error) {
	f, err := os.Open(path)
	if err != nil {
		return entry{}, err
	}
	defer f.Close()
	h := sha256.New()
	n, err := io.Copy(h, f)
	if err != nil {
		return entry{}, fmt.Errorf("%s: %w", path, err)
	}
	return entry{path, n, hex.EncodeToString(h.Sum(nil))}, nil
}

// recorded returns the names of the files that a record lists; files elsewhere are
// nobody's to remove.
func recorded(path string) []string {
	var r record
	text, err := os.ReadFile(path)
	if err != nil || json.Unmarshal(text, &r) != nil {
		return nil
	}
	var names []string
	for _, e := range r.Files {
		if e.Name == filepath.Base(e.Name) {
			names = append(names, e.Name)
		}
	}
	return names
}
