package model

import (
	"math"
	"testing"

	"offplane/scenarios"
)

// The table of every law against the law, within the table, at its ends and beyond.
func TestLawTable(t *testing.T) {
	tabulated := 0
	for _, name := range LawNames() {
		if scenarios.RefusedLaws[name] != "" {
			continue
		}
		p, err := newLawTable(scenarios.Law{Named: name, Factor: 2}, 0.1, 3)
		if err != nil {
			t.Fatal(err)
		}
		if p.lnN != nil {
			tabulated++
		}
		for r := 0.99; r < 3.2; r += 0.00137 {
			want := math.Log(p.law(r, 0.3))
			if got := p.at(r, math.Log(r), 0.3); math.Abs(got-want) > 1e-7 {
				t.Fatalf("%s at %g: ln n %.9f, want %.9f", name, r, got, want)
			}
		}
	}
	if tabulated < 13 {
		t.Errorf("%d laws are tabulated", tabulated)
	}
}
