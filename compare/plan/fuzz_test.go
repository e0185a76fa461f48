package plan

import (
	"errors"
	"testing"

	"offplane/scenarios/strict"
)

// FuzzParse: no bytes may panic or give a campaign that is not its own canonical form.
func FuzzParse(f *testing.F) {
	for _, name := range Names() {
		text, err := Source(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(text)
	}
	f.Add([]byte("target: {scenario: quick, from: 268 deg, to: 272 deg, inner: 1.1 Rsun, outer: 1.2 Rsun}\nvary:\n  - {what: duration, values: [2 h, 3 h]}\n  - {what: background, range: {from: 1 ppm, to: 100 ppm, steps: 3, ratio: true}}\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		l, err := Parse("f", text)
		if err != nil {
			if ps := (strict.Problems)(nil); !errors.As(err, &ps) {
				t.Fatalf("%T: %v", err, err)
			}
			return
		}
		again, err := Parse("again", l.Canonical)
		if err != nil || again.SHA256 != l.SHA256 {
			t.Fatalf("%v\n%s", err, l.Canonical)
		}
	})
}
