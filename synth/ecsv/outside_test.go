//go:build outside

package ecsv

import (
	"path/filepath"
	"testing"

	"offplane/synth/fits/fitstest"
)

// astropy reads units, metadata, missing values and NaN without a warning.
func TestAstropy(t *testing.T) {
	path := filepath.Join(t.TempDir(), "t.ecsv")
	if err := sample().WriteFile(path); err != nil {
		t.Fatal(err)
	}
	fitstest.Python(t, fitstest.Strict+`
from astropy.table import QTable, Table
import astropy.units as u
t = Table.read(sys.argv[1])
assert t["height"].unit == u.solRad and list(t["height"]) == [1.05, 1.2]
assert list(t["n_e"].mask) == [False, True] and t["n_e"][0] == 1e8
assert np.isnan(t["bias"][1]) and t["bias"].description == "B_inferred / B_true - 1"
assert t["count"].dtype == np.int64 and t["class"][1] == 'near, "it\'s" #1'
assert dict(t.meta) == {"program": "program 0.1.0", "scenario_sha256": "0123", "seed": 42, "share": 0.5, "done": True, "order": "height; n_e: 'x' – µ"}, t.meta
assert list(t.meta)[0] == "program"
QTable.read(sys.argv[1])
`, path)
}
