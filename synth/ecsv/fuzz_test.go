package ecsv

import (
	"bytes"
	"testing"
)

// FuzzRead: no bytes may panic, and a table that can be written reads back as the same
// bytes.
func FuzzRead(f *testing.F) {
	var b bytes.Buffer
	if err := sample().Write(&b); err != nil {
		f.Fatal(err)
	}
	f.Add(b.Bytes())
	for _, text := range []string{
		"# %ECSV 1.0\n# ---\n# datatype:\n# - {name: a, datatype: float32}\n# - {name: b, datatype: uint8}\n# meta: !!omap\n# - {k: 1}\n# - {l: [1, 2]}\na,b\n1,2\n,3\n",
		"h,word\n1,x\n", "# \"\na\n\"\"\n", "# %ECSV 1.0\n# ---\n# datatype: &a [*a]\n",
	} {
		f.Add([]byte(text))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		table, err := Read(bytes.NewReader(data))
		if err != nil {
			return
		}
		var one, two bytes.Buffer
		if table.Write(&one) != nil {
			return // names given twice and the like
		}
		again, err := Read(bytes.NewReader(one.Bytes()))
		if err != nil {
			t.Fatalf("%v\n%s", err, one.Bytes())
		}
		if err := again.Write(&two); err != nil || !bytes.Equal(one.Bytes(), two.Bytes()) {
			t.Fatalf("%v\nfirst\n%ssecond\n%s", err, one.Bytes(), two.Bytes())
		}
	})
}
