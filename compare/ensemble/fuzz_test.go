package ensemble

import (
	"errors"
	"os"
	"path/filepath"
	"testing"

	"offplane/scenarios/strict"
	"offplane/synth/fits/fitstest"
)

// FuzzParse: no bytes may panic or give an ensemble that is not its own canonical form,
// and every member of one that is taken has values.
func FuzzParse(f *testing.F) {
	for _, name := range Names() {
		text, err := Source(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(text)
	}
	for _, rest := range []string{
		"design: grid\nparameters:\n  - {path: waves.damping, values: [1, 2]}\n  - {path: corona.mix, values: [\"null\", \"{filling: 0.3}\"]}\n",
		"design: random\nmembers: 3\nparameters:\n  - {path: waves.amplitude, log_normal: {median: 12 km/s, deviation: 0.3, from: 6 km/s, to: 20 km/s}}\n",
		"members: 3\nset: [image.pixel=9 arcsec]\nparameters:\n  - {path: waves.amplitude, normal: {mean: 12 km/s, deviation: 3 km/s, from: 6 km/s, to: 20 km/s}}\n",
	} {
		f.Add([]byte("base: quick\n" + rest))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		if r, err := parseResolved("dir/ensemble.yaml", text); err == nil {
			r.Values(0)
			r.Values(r.Members - 1)
		}
		l, err := Parse("f", text)
		if err != nil {
			if ps := (strict.Problems)(nil); !errors.As(err, &ps) {
				t.Fatalf("%T: %v", err, err)
			}
			return
		}
		l.Values(0)
		l.Values(l.Members - 1)
		again, err := parseResolved("dir/ensemble.yaml", l.Canonical)
		if err != nil || string(strict.Encode(again.Ensemble)) != string(l.Canonical) {
			t.Fatalf("%v\n%s", err, l.Canonical)
		}
	})
}

// FuzzMember: a damaged member ends in an error or is read; never in a panic.
func FuzzMember(f *testing.F) {
	f.Add(fitstest.File("SIMPLE  = T\nBITPIX  = 8\nNAXIS   = 0\nENSSHA  = 'x'\nMEMBER  = 0\n\n" +
		"XTENSION= 'BINTABLE'\nBITPIX  = 8\nNAXIS   = 2\nNAXIS1  = 4\nNAXIS2  = 2\nPCOUNT  = 0\nGCOUNT  = 1\nTFIELDS = 1\nTTYPE1  = 'FLAG'\nTFORM1  = 'J'\nEXTNAME = 'PIXELS'\n\n@8\n" +
		"XTENSION= 'BINTABLE'\nBITPIX  = 8\nNAXIS   = 2\nNAXIS1  = 8\nNAXIS2  = 1\nPCOUNT  = 0\nGCOUNT  = 1\nTFIELDS = 2\nTTYPE1  = 'path'\nTFORM1  = '4A'\nTTYPE2  = 'value'\nTFORM2  = '4A'\nEXTNAME = 'PARAMETERS'\n\n@8\n"))
	f.Fuzz(func(t *testing.T, raw []byte) {
		path := filepath.Join(t.TempDir(), "member.fits")
		if err := os.WriteFile(path, raw, 0o666); err != nil {
			t.Fatal(err)
		}
		if m, err := ReadMember(path); (m == nil) == (err == nil) {
			t.Errorf("%v, %v", m, err)
		}
	})
}
