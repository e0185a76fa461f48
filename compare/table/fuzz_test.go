package table

import (
	"bytes"
	"testing"
)

// FuzzParse: no bytes may panic, and a table that is taken can be applied and reads back
// from what it writes.
func FuzzParse(f *testing.F) {
	f.Add([]byte("# %ECSV 1.0\n# ---\n# datatype:\n# - {name: quantity, datatype: string}\n# - {name: features, datatype: string}\n# - {name: height, unit: solRad, datatype: float64}\n" +
		"# - {name: ln_median, datatype: float64}\n# - {name: ln_low68, datatype: float64}\n# - {name: ln_high68, datatype: float64}\n# - {name: ln_low95, datatype: float64}\n# - {name: ln_high95, datatype: float64}\n# - {name: members, datatype: int64}\n" +
		"# meta: !!omap\n# - {members: 60}\n# - {least: 8}\n# - {effective_members: 60.0}\n# - {truth: sky}\n# - {recipe_estimator: lag}\n" +
		"quantity,features,height,ln_median,ln_low68,ln_high68,ln_low95,ln_high95,members\nfield,height,1.05,0.1,0.0,0.2,-0.1,0.3,60\nfield,height,1.35,0.2,0.1,0.3,0.0,0.4,60\n"))
	f.Add([]byte("quantity,features,height\nfield,height,1.05\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		table, err := parse(text)
		if err != nil {
			return
		}
		in := Input{Values: []float64{1, nan}, SameWay: true}
		in.Features[Height] = []float64{1.1, 1.2}
		for in.Quantity = range quantities {
			table.Apply(in)
		}
		var b bytes.Buffer
		if err := table.ECSV().Write(&b); err != nil {
			return // text that no table can hold
		}
		if _, err := parse(b.Bytes()); err != nil {
			t.Fatalf("%v\n%s", err, b.Bytes())
		}
	})
}
