package ensemble

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"offplane/synth/ecsv"
)

// Index reads every member that is done, checks that they belong together and returns
// one row for each, failed ones included: state, seed, parameters, counts, checksum. What
// was left half-written by tries that ended is removed. The error is a *Damage if a member
// cannot be read.
func (s *Set) Index() (*ecsv.Table, error) {
	if err := s.sweep(); err != nil {
		return nil, err
	}
	n := s.Ensemble.Members
	number, total, valid := make([]int64, n), make([]int64, n), make([]int64, n)
	state, sha, sum := make([]string, n), make([]string, n), make([]string, n)
	for i := range n {
		number[i], state[i] = int64(i), "failed"
	}
	var first *Member
	for _, i := range s.Done {
		m, err := s.Read(i)
		if err != nil {
			return nil, &Damage{i, err}
		}
		if first == nil {
			first = m
		}
		if err := first.agrees(m); err != nil {
			return nil, fmt.Errorf("%s: %w", s.Dir, err)
		}
		a, b := m.Counts()
		total[i], valid[i], state[i], sha[i] = int64(a), int64(b), "done", m.Scenario.SHA256
		if sum[i], err = digest(filepath.Join(memberFolder(s.Dir, i), memberName)); err != nil {
			return nil, err
		}
	}
	t := &ecsv.Table{Meta: []ecsv.Pair{{Key: "ensemble", Value: s.Ensemble.About}, {Key: "ensemble_sha256", Value: s.Ensemble.SHA256}}}
	if first != nil {
		t.Meta = append(t.Meta, ecsv.Pair{Key: "program", Value: "offplane " + first.Version})
	}
	t.Columns = append(t.Columns,
		ecsv.Column{Name: "member", About: "number, from 0", Data: number},
		ecsv.Column{Name: "state", About: "done or failed", Data: state})
	t.Columns = append(t.Columns, s.Ensemble.columns()...)
	t.Columns = append(t.Columns,
		ecsv.Column{Name: "pixels", About: "of the field", Data: total},
		ecsv.Column{Name: "valid", About: "with a B of the first estimator", Data: valid},
		ecsv.Column{Name: "scenario_sha256", About: "of the resolved scenario", Data: sha},
		ecsv.Column{Name: "file_sha256", About: "of member.fits", Data: sum})
	return t, nil
}

// agrees returns an error if two members cannot stand in one table.
func (m *Member) agrees(other *Member) error {
	if m.Version != other.Version {
		return fmt.Errorf("member %d was computed by version %s, member %d by %s: compute one of them again", m.Number, m.Version, other.Number, other.Version)
	}
	for i, f := range m.Files {
		if i >= len(other.Files) || f.SHA256 != other.Files[i].SHA256 {
			return fmt.Errorf("the file %s is not the same in members %d and %d: compute one of them again", f.Name, m.Number, other.Number)
		}
	}
	return nil
}

// columns returns the values of the parameters: numbers in the unit in which the
// ensemble gives them, or text.
func (l *Loaded) columns() (cs []ecsv.Column) {
	texts := make([][]string, len(l.Parameters))
	for i := range l.Members {
		for j, v := range l.Values(i) {
			texts[j] = append(texts[j], v.Text)
		}
	}
	for j, p := range l.Parameters {
		cs = append(cs, parameterColumn(p.Path, texts[j]))
	}
	return cs
}

func parameterColumn(path string, texts []string) ecsv.Column {
	c := ecsv.Column{Name: path, Data: texts}
	numbers := make([]float64, len(texts))
	for i, text := range texts {
		q, err := parseQuantity(text)
		unit := strings.TrimSpace(q.unit)
		if err != nil || i > 0 && unit != c.Unit || math.IsInf(q.number, 0) {
			return ecsv.Column{Name: path, Data: texts}
		}
		c.Unit, numbers[i] = unit, q.number
	}
	c.Data = numbers
	if unit, other := tableUnits[c.Unit]; other {
		c.Unit, c.About = unit, "in "+c.Unit
	}
	return c
}

// tableUnits spells the units of a scenario that tables write otherwise or not at all.
var tableUnits = map[string]string{"Rsun": "solRad", "ppm": ""}

// sweep removes the temporary names that a process left that had no time to.
func (s *Set) sweep() error {
	for _, dir := range []string{s.Dir, filepath.Join(s.Dir, membersName)} {
		entries, err := os.ReadDir(dir)
		if err != nil {
			return err
		}
		for _, e := range entries {
			if !strings.Contains(e.Name(), partMark) {
				continue
			}
			if err := os.RemoveAll(filepath.Join(dir, e.Name())); err != nil {
				return err
			}
		}
	}
	return nil
}

func digest(path string) (string, error) {
	data, err := os.ReadFile(path)
	sum := sha256.Sum256(data)
	return hex.EncodeToString(sum[:]), err
}
