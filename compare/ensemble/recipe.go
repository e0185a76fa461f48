package ensemble

import (
	"path/filepath"

	"offplane/compare"
	"offplane/scenarios"
	"offplane/scenarios/units"
)

// A Recipe is what a correction belongs to: how the maps were observed and inverted.
// All members of an ensemble share it.
type Recipe struct {
	Inversion scenarios.Inversion `yaml:"inversion"` // with one estimator
	Pixel     units.SkyAngle      `yaml:"pixel"`
	Camera    string              `yaml:"camera"` // class: camera.like of the scenario
	Atoms     string              `yaml:"atoms"`  // SHA-256 of the inversion's atomic data; empty: the embedded set
}

// recipeKeys are the parts of a scenario that make the recipe and so cannot vary.
var recipeKeys = []string{"inversion", "image.pixel", "camera.like"}

// Recipe returns the recipe of the member's maps by estimator k.
func (m *Member) Recipe(k int) Recipe { return recipeOf(&m.Scenario.Scenario, m.Files, k) }

func recipeOf(s *scenarios.Scenario, files []compare.File, k int) Recipe {
	r := Recipe{Inversion: s.Inversion, Pixel: s.Image.Pixel, Camera: s.Camera.Like}
	r.Inversion.Estimators = s.Inversion.Estimators[k : k+1 : k+1]
	if path := s.Inversion.Line.Data; path != "" {
		for _, f := range files {
			if filepath.Base(path) == f.Name {
				r.Atoms = f.SHA256
			}
		}
	}
	return r
}

// Estimators returns the estimators whose speeds and fields the member holds.
func (m *Member) Estimators() []string { return m.Scenario.Scenario.Inversion.Estimators }
