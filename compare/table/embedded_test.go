package table

import (
	"bytes"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"offplane/synth/ecsv"
)

// Every embedded table is whole, small, says where it comes from, and kept its promises on
// members held out, as its coverage.ecsv from the same build tells.
func TestEmbedded(t *testing.T) {
	if !slices.Contains(Names(), DefaultName) {
		t.Fatalf("no %s among %v", DefaultName, Names())
	}
	for _, name := range Names() {
		text, err := Source(name)
		if err != nil {
			t.Fatal(err)
		}
		if len(text) > 1e6 {
			t.Errorf("%s: %d bytes", name, len(text))
		}
		tab, err := Open(name)
		if err != nil {
			t.Fatal(err)
		}
		if tab.Origin.Ensemble == "" || len(tab.Origin.SHA256) != 64 || tab.Origin.Varied == "" || len(tab.Recipe) < 8 {
			t.Errorf("%s: no provenance: %+v %v", name, tab.Origin, tab.Recipe)
		}
		var again bytes.Buffer
		if err := tab.ECSV().Write(&again); err != nil || !bytes.Equal(again.Bytes(), text) {
			t.Errorf("%s: writes itself differently (%v)", name, err)
		}
		for i := range tab.Surfaces {
			if s := &tab.Surfaces[i]; !s.Score.Kept() || s.Score.Members < LeastEffective {
				t.Errorf("%s, %s: %s", name, scoreKey(s), &s.Score)
			}
		}
		cover, err := shipped.ReadFile("shipped/" + name + "/coverage.ecsv")
		if err != nil {
			t.Fatal(err)
		}
		e, err := ecsv.Read(bytes.NewReader(cover))
		if err != nil {
			t.Fatal(err)
		}
		checkShipped(t, tab, e)
	}
}

// An embedded table carries the losses of its coverage.ecsv; a copy elsewhere does so only if
// that stands beside it, and is of the same build.
func TestScoresBeside(t *testing.T) {
	tab, err := Open(DefaultName)
	if err != nil {
		t.Fatal(err)
	}
	for i := range tab.Surfaces {
		s := &tab.Surfaces[i].Score
		// By definition of the cut, to the five digits of the file.
		if _, known := s.BeatsSingle(); !known || math.Abs(1-s.Loss.Table/s.Loss.Single-s.Loss.CutSingle.Value) > 3e-4 || !(s.Left > 0 && s.None > s.Left) {
			t.Errorf("%s: %+v", scoreKey(&tab.Surfaces[i]), s)
		}
	}
	path := filepath.Join(t.TempDir(), "table.ecsv")
	known := func() bool {
		t.Helper()
		got, err := Open(path)
		if err != nil {
			t.Fatal(err)
		}
		_, known := got.Surfaces[0].Score.BeatsSingle()
		return known
	}
	if err := tab.ECSV().WriteFile(path); err != nil {
		t.Fatal(err)
	}
	if known() {
		t.Error("losses from nowhere")
	}
	beside := filepath.Join(filepath.Dir(path), coverageFile)
	if err := tab.Coverage().WriteFile(beside); err != nil {
		t.Fatal(err)
	}
	if !known() {
		t.Error("the coverage beside the table is not read")
	}
	tab.Origin.SHA256 = strings.Repeat("0", 64)
	if err := tab.Coverage().WriteFile(beside); err != nil {
		t.Fatal(err)
	}
	if known() {
		t.Error("the coverage of another table is taken")
	}
}

// checkShipped holds the rows of coverage.ecsv against what the project promises. The
// calibration leaves room for a member to come, so that intervals of few members cover more.
func checkShipped(t *testing.T, tab *Table, e *ecsv.Table) {
	col := func(name string) []float64 {
		x, err := e.Floats(name)
		if err != nil {
			t.Fatal(err)
		}
		return x
	}
	_, names, err := texts(e)
	if err != nil {
		t.Fatal(err)
	}
	from, members := col("height_from"), col("members")
	none, single := col("cut_none_low"), col("cut_single_low")
	quantity := e.Column("quantity").Data.([]string)
	for k, c := range []string{"coverage68", "coverage95"} {
		nominal := []float64{0.68, 0.95}[k]
		mean, se := col(c), col(c+"_error")
		for i := range mean {
			room := max(0.03, 2*se[i])
			if from[i] == from[i] {
				room = max(0.08, 2.5*se[i])
			}
			if members[i] >= 30 && (mean[i] < nominal-room || tab.Members >= 200 && mean[i] > nominal+room) {
				t.Errorf("%s by %s from %g: %s is %.3f +- %.3f", quantity[i], names[i], from[i], c, mean[i], se[i])
			}
		}
	}
	for i, n := range names {
		if from[i] != from[i] && quantity[i] == "field" && n == join(tab.Features()) && !(none[i] > 0 && single[i] > 0) {
			t.Errorf("the field's loss is not cut: %g against none, %g against one factor", none[i], single[i])
		}
	}
}
