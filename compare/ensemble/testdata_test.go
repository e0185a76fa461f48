package ensemble

import (
	"io/fs"
	"os"
	"path/filepath"
	"testing"
	"testing/fstest"
)

// tinyBase is a scenario of few pixels in the plane of the sky, done in a fraction of a
// second.
const tinyBase = `
corona:
  fields:
    - radial: {strength: 3 G}
  density:
    streamer:
      power_law: {surface: 1.5e8 cm-3, exponent: 4}
waves: {inward: 0, far_end: false}
sight: {plane: true, reach: 0.2 Rsun}
image: {pixel: 15 arcsec, inner: 1.05 Rsun, outer: 1.25 Rsun, from: 264 deg, to: 276 deg}
camera: {duration: 20 min, aperture: 50 cm}
inversion: {box: 5, track: 7, estimators: [lag, pair]}
`

// tinyEnsemble has four members, two of them without waves.
const tinyEnsemble = `
base: base.yaml
design: grid
parameters:
  - path: corona.fields.0.radial.strength
    values: [2 G, 4 G]
  - path: waves.amplitude
    values: [10 km/s, 0 km/s]
`

// load reads an ensemble on tinyBase.
func load(t testing.TB, text string) (*Loaded, error) {
	t.Helper()
	dir := t.TempDir()
	if err := os.WriteFile(filepath.Join(dir, "base.yaml"), []byte(tinyBase), 0o666); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, "e.yaml")
	if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
		t.Fatal(err)
	}
	return Load(path)
}

// tiny is the ensemble of most tests.
func tiny(t testing.TB) *Loaded {
	t.Helper()
	l, err := load(t, tinyEnsemble)
	if err != nil {
		t.Fatal(err)
	}
	return l
}

// run computes the members of one task of so many.
func run(t testing.TB, l *Loaded, dir string, task, tasks int, s Settings) {
	t.Helper()
	s.Version = "test"
	if err := Run(t.Context(), l, dir, l.Share(task, tasks), s); err != nil {
		t.Fatal(err)
	}
}

// open opens a folder.
func open(t testing.TB, dir string) *Set {
	t.Helper()
	s, err := Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// computed holds the folder of tiny with every member; several tests start from it.
var computed fstest.MapFS

// whole returns a folder of its own with every member of tiny.
func whole(t testing.TB) (l *Loaded, dir string) {
	t.Helper()
	l, dir = tiny(t), t.TempDir()
	if computed != nil {
		if err := os.CopyFS(dir, computed); err != nil {
			t.Fatal(err)
		}
		return l, dir
	}
	run(t, l, dir, 0, 1, Settings{Workers: 3})
	kept := fstest.MapFS{}
	err := fs.WalkDir(os.DirFS(dir), ".", func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := os.ReadFile(filepath.Join(dir, path))
		kept[path] = &fstest.MapFile{Data: data, Mode: 0o666}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	computed = kept
	return l, dir
}
