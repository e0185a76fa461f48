package main

import (
	"fmt"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"offplane/compare"
	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/synth/fits"
	"offplane/synth/obs"
)

// sources name the maps that compare reads.
type sources struct {
	truth, inferred string   // files of maps with our names
	truths, maps    []string // NAME=FILE[EXT]
}

func (s *sources) flags(cmd *cobra.Command) {
	cmd.Flags().StringVar(&s.truth, "truth", "", "`file` with the true maps")
	cmd.Flags().StringVar(&s.inferred, "inferred", "", "`file` with inferred maps")
	cmd.Flags().StringArrayVar(&s.maps, "map", nil, "an inferred map of your own: `NAME=FILE[EXT]`; repeatable")
	cmd.Flags().StringArrayVar(&s.truths, "true", nil, "a true map of your own: `NAME=FILE[EXT]`; repeatable")
}

func (s *sources) check() error {
	switch {
	case s.truth == "" && len(s.truths) == 0:
		return misusef("offplane compare needs the truth: --truth TRUTH.fits or --true NAME=FILE.fits")
	case s.inferred == "" && len(s.maps) == 0:
		return misusef("offplane compare needs maps to hold against the truth: --inferred MAPS.fits or --map NAME=FILE.fits")
	}
	return nil
}

// compared is all that compare reads, on the grid of the truth.
type compared struct {
	scenario        *scenarios.Loaded // nil: the truth is a user's own
	files           []trial.File
	grid            obs.Grid
	truth, inferred obs.Maps
	paths           []string
	recipe          bool // the inferred maps are as an inversion of ours left them
	resampled       []compare.Resampled
}

// read reads the maps. The recipe of the inversion is that of the inferred maps, which
// need not be the scenario's; of a map from elsewhere it is not known.
func (s *sources) read() (*compared, error) {
	c := &compared{}
	if err := c.readTruth(s); err != nil {
		return nil, err
	}
	v := scenarios.Inversion{}
	if s.inferred != "" {
		c.paths = append(c.paths, s.inferred)
		var err error
		if v, c.recipe, err = readInversion(s.inferred); err != nil {
			return nil, err
		}
		ims, err := imagesOf(s.inferred, compare.InferredNames, "FLAG")
		if err != nil {
			return nil, err
		}
		for _, im := range ims {
			if err := c.put(&c.inferred, im.Name, im, !c.recipe); err != nil {
				return nil, err
			}
		}
	}
	for _, text := range s.maps {
		name, im, err := c.open("map", text, compare.InferredNames)
		if err != nil {
			return nil, err
		}
		if name == "SPEED" || name == "ANGLE" {
			c.recipe = false // somebody else's tracker
		}
		if err := c.put(&c.inferred, name, im, true); err != nil {
			return nil, fmt.Errorf("--map %s: %w", name, err)
		}
	}
	if c.scenario == nil || c.inferred.Get("ANGLE") == nil {
		c.recipe = false
	}
	if c.scenario != nil {
		l := *c.scenario
		l.Scenario.Inversion = v
		c.scenario = &l
	}
	return c, nil
}

// readTruth reads the truth: a file of ours with its scenario, or maps of a user's own,
// the first of which gives the grid.
func (c *compared) readTruth(s *sources) error {
	if s.truth != "" {
		c.paths = append(c.paths, s.truth)
		own, err := lacks(s.truth, scenarioTable)
		if err != nil {
			return err
		}
		if !own {
			if c.scenario, c.files, err = readScenario(s.truth); err != nil {
				return err
			}
		}
		ims, err := imagesOf(s.truth, compare.TruthNames, "STRUCTURE")
		switch {
		case err != nil && own:
			return fmt.Errorf("%s: has no table %s: it is not a truth.fits that run or synth wrote; and as a truth of your own: %w", s.truth, scenarioTable, err)
		case err != nil:
			return err
		}
		for _, im := range ims {
			if err := c.put(&c.truth, im.Name, im, own); err != nil {
				return err
			}
		}
	}
	for _, text := range s.truths {
		name, im, err := c.open("true", text, compare.TruthNames)
		if err != nil {
			return err
		}
		if err := c.put(&c.truth, name, im, true); err != nil {
			return fmt.Errorf("--true %s: %w", name, err)
		}
	}
	return nil
}

// lacks tells whether a file has no table of that name.
func lacks(path, table string) (bool, error) {
	f, err := fits.Open(path)
	if err != nil {
		return false, err
	}
	defer f.Close()
	text, _, err := readYAML(f, table)
	return text == nil, err
}

// imagesOf reads the images of a file that are compared, and another.
func imagesOf(path string, names []string, also string) ([]*obs.Image, error) {
	ims, err := obs.ReadImages(path, func(name string) bool { return slices.Contains(names, name) || name == also })
	if err == nil && !slices.ContainsFunc(ims, func(m *obs.Image) bool { return m.Name != also }) {
		err = fmt.Errorf("%s holds none of the maps %s: is it a file of %s maps?", path, strings.Join(names, ", "), kindOf(also))
	}
	return ims, err
}

func kindOf(also string) string {
	if also == "FLAG" {
		return "inferred"
	}
	return "true"
}

// open reads the image that a flag NAME=FILE[EXT] names.
func (c *compared) open(flag, text string, names []string) (name string, im *obs.Image, err error) {
	name, file, err := cut(flag, text, "NAME=FILE.fits or NAME=FILE.fits[EXT]")
	if err != nil {
		return "", nil, err
	}
	name = strings.ToUpper(name)
	if !slices.Contains(names, name) {
		return "", nil, fmt.Errorf("--%s %s: NAME must be one of %s%s", flag, text, strings.Join(names, ", "), strict.Hint(name, names))
	}
	file, ext := splitExtension(file)
	if im, err = obs.ReadImage(file, ext); err != nil {
		return "", nil, fmt.Errorf("--%s %s: %w", flag, name, err)
	}
	c.paths = append(c.paths, file)
	return name, im, nil
}

// put brings an image into our unit and onto the grid and adds it to the maps, or in
// place of the one of its name. A foreign one must have a value in the field.
func (c *compared) put(to *obs.Maps, name string, im *obs.Image, foreign bool) error {
	if name != "FLAG" && name != "STRUCTURE" {
		if err := compare.Standardise(name, &im.Map); err != nil {
			return fmt.Errorf("%s %w", im.Where(), err)
		}
	}
	if c.grid.Nx == 0 { // the first map of the truth
		var err error
		if c.grid, err = im.Grid(); err != nil {
			return err
		}
	}
	if foreign && !hasValue(im.Map, nil) {
		return fmt.Errorf("%s: no pixel has a value, all are NaN or infinite", im.Where())
	}
	if foreign && slices.Contains(positive, name) && !slices.ContainsFunc(im.Map.Data, func(v float32) bool { return v > 0 }) {
		return fmt.Errorf("%s: no pixel has a positive value, as %s needs: is it a signed component, or a map of something else?", im.Where(), name)
	}
	m, how := im.On(&c.grid)
	m.Name = name
	if how != "" {
		c.resampled = append(c.resampled, compare.Resampled{Map: name, Method: string(how), Pixel: im.Pixel()})
	}
	if foreign && !hasValue(m, c.field()) {
		return fmt.Errorf("%s: none of its values lies in the field of the truth: do the world coordinates (CRPIX, CRVAL, CDELT, CUNIT, rotation) point there?", im.Where())
	}
	if old := to.Get(name); old != nil {
		*old = m
	} else {
		*to = append(*to, m)
	}
	return nil
}

// positive maps are compared by their ratios.
var positive = []string{"B", "SPEED", "NE", "B_SKY", "B_EMIS", "B_WAVE", "BTOT_SKY", "SPEED_SKY", "SPEED_WAVE", "NE_SKY", "NE_EMIS", "NE_KINK"}

// field returns the pixels where the truth has values; nil while there is none.
func (c *compared) field() []bool {
	if len(c.truth) == 0 {
		return nil
	}
	in := make([]bool, c.grid.Nx*c.grid.Ny)
	for i := range c.truth {
		for p, v := range c.truth[i].Data {
			in[p] = in[p] || v-v == 0
		}
	}
	return in
}

// hasValue tells whether a map has a finite value, within in if it is not nil.
func hasValue(m obs.Map, in []bool) bool {
	for i, v := range m.Data {
		if v-v == 0 && (in == nil || in[i]) { // x - x is 0 for finite x only
			return true
		}
	}
	return m.Ints != nil
}

// options says what cannot be read from the maps.
func (c *compared) options(truth string) compare.Options {
	o := compare.Options{Scenario: filepath.Base(truth), Version: version().Version}
	if c.scenario != nil {
		o = trial.Provenance(c.scenario, c.files, version().Version)
	}
	o.Resampled = c.resampled
	return o
}
