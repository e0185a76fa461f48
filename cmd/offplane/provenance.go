package main

import (
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"offplane/compare"
	"offplane/scenarios"
	"offplane/synth/fits"
)

// Tables of one row that carry the input of a file byte for byte.
const (
	scenarioTable  = "SCENARIO"
	inversionTable = "INVERSION"
	yamlColumn     = "yaml"
)

// primary returns the cards of a primary HDU.
func primary() fits.Header {
	return fits.Header{{Key: "CREATOR", Value: "offplane " + version().Version, Comment: ""}}
}

// doubt says which HDUs of these files do not have the sums that their headers tell. They
// are used all the same: people edit headers and leave the sums as they were. What cannot
// be read is left to its reader to refuse.
func (p *program) doubt(paths ...string) {
	for _, path := range slices.Compact(slices.Sorted(slices.Values(paths))) {
		f, err := fits.Open(path)
		if err != nil {
			continue
		}
		for _, h := range f.HDUs {
			if err := f.VerifyHDU(h); err != nil {
				p.say("%v; it is used as it is", err)
			}
		}
		f.Close()
	}
}

// mapsOf returns the files of a run that explain and view read.
func mapsOf(dir string) (paths []string) {
	for _, name := range []string{"truth.fits", "inferred.fits", "bias.fits", "series.fits"} {
		paths = append(paths, filepath.Join(dir, name))
	}
	return paths
}

// splitExtension splits FILE[EXT].
func splitExtension(s string) (file, ext string) {
	if i := strings.LastIndexByte(s, '['); i > 0 && strings.HasSuffix(s, "]") {
		return s[:i], s[i+1 : len(s)-1]
	}
	return s, ""
}

// scenarioHDU carries the resolved scenario, the sums of the files that it names, the
// version and the seed.
func scenarioHDU(l *scenarios.Loaded, files []compare.File) fits.Table {
	t := yamlHDU(scenarioTable, l.Canonical, "resolved scenario")
	t.Header.Set("SCENNAME", l.Name, "name of the scenario")
	t.Header.Set("SCENSHA", l.SHA256, "")
	t.Header.Set("CREATOR", "offplane "+version().Version, "")
	if s := l.Scenario.Seed; s <= math.MaxInt64 {
		t.Header.Set("SEED", int64(s), "")
	} else {
		t.Header.Set("SEED", fmt.Sprint(s), "does not fit a FITS integer")
	}
	setFiles(&t.Header, files)
	return t
}

// setFiles names files and their SHA-256.
func setFiles(h *fits.Header, files []compare.File) {
	for i, f := range files {
		h.Set(fmt.Sprintf("FILE%d", i+1), f.Name, "")
		h.Set(fmt.Sprintf("FILSHA%d", i+1), f.SHA256, "")
	}
}

func filesOf(h fits.Header) (files []compare.File) {
	for i := 1; ; i++ {
		name, ok := h.Text(fmt.Sprintf("FILE%d", i))
		if !ok {
			return files
		}
		sum, _ := h.Text(fmt.Sprintf("FILSHA%d", i))
		files = append(files, compare.File{Name: name, SHA256: sum})
	}
}

// inversionHDU carries the resolved inversion section and the sum of its data file.
func inversionHDU(v scenarios.Inversion, files ...compare.File) fits.Table {
	t := yamlHDU(inversionTable, scenarios.EncodeInversion(v), "resolved inversion section")
	setFiles(&t.Header, files)
	return t
}

func yamlHDU(name string, text []byte, about string) fits.Table {
	return fits.Table{Name: name, Columns: []fits.Column{{Name: yamlColumn, About: about, Data: [][]byte{text}}}}
}

// readYAML returns the text of a table that yamlHDU made; nil if there is no such table.
func readYAML(f *fits.File, name string) (text []byte, h fits.Header, err error) {
	if !slices.ContainsFunc(f.HDUs, func(h *fits.HDU) bool { return h.Name == name && !h.IsImage() }) {
		return nil, nil, nil
	}
	t, err := f.Table(name)
	if err != nil {
		return nil, nil, err
	}
	text, err = t.Bytes(yamlColumn, 0)
	return text, t.Header, err
}

// readScenario returns the scenario that a truth file carries and the files it named.
func readScenario(path string) (*scenarios.Loaded, []compare.File, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, nil, err
	}
	defer f.Close()
	text, h, err := readYAML(f, scenarioTable)
	if err != nil {
		return nil, nil, err
	}
	if text == nil {
		return nil, nil, fmt.Errorf("%s: has no table %s: it is not a truth.fits that run or synth wrote", path, scenarioTable)
	}
	sum, _ := h.Text("SCENSHA")
	program, _ := h.Text("CREATOR")
	l, err := scenarios.Restore(fmt.Sprintf("%s[%s]", path, scenarioTable), text, sum, program)
	if err != nil {
		return nil, nil, err
	}
	l.Name, _ = h.Text("SCENNAME")
	return l, filesOf(h), nil
}

// readInversion returns the inversion section that a file of inferred maps carries; ok
// is false if it carries none.
func readInversion(path string) (v scenarios.Inversion, ok bool, err error) {
	f, err := fits.Open(path)
	if err != nil {
		return v, false, err
	}
	defer f.Close()
	text, _, err := readYAML(f, inversionTable)
	if err != nil || text == nil {
		return v, false, err
	}
	v, err = scenarios.ParseInversion(fmt.Sprintf("%s[%s]", path, inversionTable), text)
	return v, true, err
}
