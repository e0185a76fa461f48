package ensemble

import (
	"testing"
)

// small is the embedded ensemble that is quick to compute.
func small(t testing.TB) *Loaded {
	t.Helper()
	l, err := Load("small")
	if err != nil {
		t.Fatal(err)
	}
	return l
}

// What is read back is what was written.
func TestMemberFile(t *testing.T) {
	l, dir := small(t), t.TempDir()
	if err := Run(t.Context(), l, dir, []int{1}, Settings{Version: "test"}); err != nil {
		t.Fatal(err)
	}
	s, err := Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Log(s.Done, s.Failed, s.Missing)
	m, err := s.Read(1)
	if err != nil {
		t.Fatal(err, s.Reason(1))
	}
	n, u := m.Columns()
	t.Log(m.Len(), n, u, m.Values, m.Heights, m.Flags, m.Recipe(0))
	total, valid := m.Counts()
	t.Log(total, valid)
}
