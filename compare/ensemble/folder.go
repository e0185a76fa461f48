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
	Done     []int // numbers of the members that are whole, ascending
	Failed   []int // of those that left FAILED
	Missing  []int // of those not computed yet
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
		switch stateOf(dir, i) {
		case done:
			s.Done = append(s.Done, i)
		case failed:
			s.Failed = append(s.Failed, i)
		default:
			s.Missing = append(s.Missing, i)
		}
	}
	return s, nil
}

// Read reads member number, which must be one of Done.
func (s *Set) Read(number int) (*Member, error) {
	path := filepath.Join(memberFolder(s.Dir, number), memberName)
	m, err := ReadMember(path)
	if err == nil && (m.Ensemble != s.Ensemble.SHA256 || m.Number != number) {
		err = fmt.Errorf("%s: is member %d of the ensemble %.12s, not %d of %.12s", path, m.Number, m.Ensemble, number, s.Ensemble.SHA256)
	}
	return m, err
}

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
)

func stateOf(dir string, number int) state {
	folder := memberFolder(dir, number)
	if _, err := os.Stat(filepath.Join(folder, memberName)); err == nil {
		return done
	}
	if _, err := os.Stat(filepath.Join(folder, failedName)); err == nil {
		return failed
	}
	return missing
}
