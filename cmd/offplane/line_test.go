package main

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"offplane/synth/line"
)

// TestLineJSON: the rows are those of the atomic model, bit for bit, in their order.
func TestLineJSON(t *testing.T) {
	code, stdout, stderr := call("line", "--json", "--density", "1e8,3e8", "--height", "1.1, 1.3", "--temperature", "1.6e6,1.8 MK")
	if code != exitOK || stderr != "" {
		t.Fatalf("%d %s", code, stderr)
	}
	var doc struct {
		Schema int        `json:"schema"`
		Rows   []line.Row `json:"rows"`
	}
	if err := json.Unmarshal([]byte(stdout), &doc); err != nil {
		t.Fatal(err)
	}
	a := line.Default()
	m, err := line.New(a, a.Options())
	if err != nil {
		t.Fatal(err)
	}
	want, err := line.Rows(m, []float64{1e8, 3e8}, []float64{1.1, 1.3}, []float64{1.6e6, 1.8e6})
	if err != nil {
		t.Fatal(err)
	}
	if doc.Schema != 1 || len(doc.Rows) != 8 {
		t.Fatalf("schema %d, %d rows", doc.Schema, len(doc.Rows))
	}
	for i, r := range doc.Rows {
		w := want[i]
		if r.Density != w.Density || r.Height != w.Height || math.Abs(r.Temperature/w.Temperature-1) > 1e-15 || math.Abs(r.Ratio/w.Ratio-1) > 1e-12 || len(r.Populations) != len(w.Populations) {
			t.Errorf("row %d: %+v, want %+v", i, r, w)
		}
	}
	for _, key := range []string{"n_e_cm3", "height_rsun", "temperature_K", "emissivity_1074_erg_cm3_s_sr", "emissivity_1079_erg_cm3_s_sr",
		"ratio_1079_1074", "exponent_1074", "exponent_1079", "populations"} {
		if strings.Count(stdout, `"`+key+`"`) != 8 {
			t.Errorf("%s stands %d times", key, strings.Count(stdout, key))
		}
	}
}

// TestLineInverse: the density of a ratio gives the ratio.
func TestLineInverse(t *testing.T) {
	rows := func(args ...string) []map[string]any {
		code, stdout, stderr := call(append([]string{"line", "--json"}, args...)...)
		if code != exitOK {
			t.Fatal(stderr)
		}
		var doc struct{ Rows []map[string]any }
		if err := json.Unmarshal([]byte(stdout), &doc); err != nil {
			t.Fatal(err)
		}
		return doc.Rows
	}
	forward := rows("--density", "2e8", "--height", "1.2")
	ratio, _ := json.Marshal(forward[0]["ratio_1079_1074"])
	back := rows("--ratio", string(ratio), "--height", "1.2")
	if n := back[0]["n_e_cm3"].(float64); math.Abs(n/2e8-1) > 1e-6 {
		t.Errorf("density %g, want 2e8", n)
	}
	// A small error of the ratio grows by the slope.
	slope := back[0]["dln_n_e_dln_ratio"].(float64)
	x := forward[0]
	if want := 1 / (x["exponent_1079"].(float64) - x["exponent_1074"].(float64)); math.Abs(slope/want-1) > 1e-3 {
		t.Errorf("slope %g, the exponents give %g", slope, want)
	}
	// Along a profile the light falls faster than the density alone would make it.
	for _, r := range rows("--law", "gibson-1999", "--height", "1.1,1.2") {
		if q1, q2 := r["radial_slope_1074"].(float64), r["radial_slope_1079"].(float64); !(q1 > 10 && q2 > q1) {
			t.Errorf("slopes %g, %g", q1, q2)
		}
	}
	code, stdout, _ := call("line", "--ratio", "0.3,0.5")
	if code != exitOK || strings.Count(stdout, "\n") != 3 {
		t.Errorf("%d\n%s", code, stdout)
	}
}
