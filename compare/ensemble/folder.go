package ensemble

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
)

// Names in the folder of an ensemble. Each member is a folder of its own, which appears
// whole, because it is renamed, or with the file FAILED that holds the reason.
const (
	ensembleName = "ensemble.yaml" // the resolved ensemble, written first
	membersName  = "members"
	memberName   = "member.fits"
	failedName   = "FAILED"
)

// Entries are the names in the folder of an ensemble that Run writes.
var Entries = []string{ensembleName, membersName}

func memberFolder(dir string, number int) string {
	return filepath.Join(dir, membersName, fmt.Sprintf("%06d", number))
}

// A Set is an ensemble's folder open for reading.
type Set struct {
	Dir      string
	Ensemble *Loaded
	Done     []int     // numbers of the members that are whole, ascending
	Failed   []int     // of those that left FAILED
	Missing  []int     // of those not computed yet, and of the damaged
	Damaged  []*Damage // a look at the headers finds them
}

// Open looks into the folder of an ensemble, complete or not.
func Open(dir string) (*Set, error) {
	path := filepath.Join(dir, ensembleName)
	text, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("%s: no folder of an ensemble: there is no %s in it", dir, ensembleName)
	}
	if err != nil {
		return nil, err
	}
	s := &Set{Dir: dir}
	if s.Ensemble, err = parseResolved(path, text); err != nil {
		return nil, err
	}
	for i := range s.Ensemble.Members {
		st, err := s.Ensemble.state(dir, i, Identify)
		switch st {
		case done:
			s.Done = append(s.Done, i)
		case failed:
			s.Failed = append(s.Failed, i)
		case damaged:
			s.Damaged = append(s.Damaged, &Damage{i, err})
			fallthrough
		default:
			s.Missing = append(s.Missing, i)
		}
	}
	return s, nil
}

// Read reads member number, which must be one of Done.
func (s *Set) Read(number int) (*Member, error) {
	return s.Ensemble.readMember(s.Dir, number, ReadMember)
}

// readMember reads a member by ReadMember or Identify and holds it against its place.
func (l *Loaded) readMember(dir string, number int, read func(path string) (*Member, error)) (*Member, error) {
	path := filepath.Join(memberFolder(dir, number), memberName)
	m, err := read(path)
	if err == nil && (m.Ensemble != l.SHA256 || m.Number != number) {
		err = fmt.Errorf("%s: is member %d of the ensemble %.12s, not %d of %.12s", path, m.Number, m.Ensemble, number, l.SHA256)
	}
	return m, err
}

// Damage is what is wrong with the file of a member. Run computes it again.
type Damage struct {
	Number int
	Err    error // with the path
}

func (d *Damage) Error() string { return d.Err.Error() }

// Unwrap returns Err.
func (d *Damage) Unwrap() error { return d.Err }

// Reason returns why member number failed.
func (s *Set) Reason(number int) string {
	text, err := os.ReadFile(filepath.Join(memberFolder(s.Dir, number), failedName))
	if err != nil {
		return err.Error()
	}
	return string(text)
}

type state int

const (
	missing state = iota
	done
	failed
	damaged
)

// state tells how far a member is; the error says why it is damaged.
func (l *Loaded) state(dir string, number int, read func(path string) (*Member, error)) (state, error) {
	folder := memberFolder(dir, number)
	if _, err := os.Stat(filepath.Join(folder, memberName)); err == nil {
		if _, err := l.readMember(dir, number, read); err != nil {
			return damaged, err
		}
		return done, nil
	}
	if _, err := os.Stat(filepath.Join(folder, failedName)); err == nil {
		return failed, nil
	}
	return missing, nil
}
