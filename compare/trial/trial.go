// Package trial runs one scenario through the whole sentence in memory: scenario,
// corona, observation, inferred maps, verdict.
package trial

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"offplane/compare"
	"offplane/invert"
	"offplane/model"
	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/synth"
	"offplane/synth/line"
	"offplane/synth/obs"
)

// A File is one file that a scenario names.
type File = compare.File

// Settings of a trial: what does not change its result, and what names it.
type Settings struct {
	Workers  int    // < 1: every core
	Version  string // of the program, for the verdict
	Method   bool   // measure the tracker's own bias too, on one plane
	Progress func(stage string, done, total int)
}

func (s *Settings) report(stage string) func(done, total int) {
	if s.Progress == nil {
		return nil
	}
	return func(done, total int) { s.Progress(stage, done, total) }
}

// An Outcome holds every noun of the sentence.
type Outcome struct {
	Scene       *synth.Scene
	Observation *obs.Observation
	Truth       *synth.Truth
	Inferred    *invert.Result
	Plane       []float32 // see Plane; nil unless it was asked for
	Verdict     *compare.Verdict
	Files       []File
}

// Run runs a scenario. The frames of its observation are not kept.
func Run(ctx context.Context, l *scenarios.Loaded, s Settings) (*Outcome, error) {
	o, rec, err := Begin(ctx, l, s)
	if err != nil {
		return nil, err
	}
	v := l.Scenario.Inversion
	emitter, _, err := Model("inversion.line", v.Line, v.Helium)
	if err != nil {
		return nil, err
	}
	inversion, err := invert.Begin(rec.Head, emitter, Options(v))
	if err != nil {
		return nil, err
	}
	take := func(part *obs.Observation) error { return inversion.Take(ctx, part, s.Workers) }
	if o.Observation, o.Truth, err = rec.Parts(ctx, s.Workers, s.report("synthesis"), take); err != nil {
		return nil, err
	}
	if o.Inferred, err = inversion.Finish(ctx, s.Workers, s.report("inversion")); err != nil {
		return nil, err
	}
	if s.Method {
		if o.Plane, err = Plane(ctx, l, o.Inferred.Maps.Get("ANGLE").Data, s); err != nil {
			return nil, err
		}
	}
	o.Verdict, err = Judge(l, o.Truth.Grid, o.Truth.Maps, o.Inferred.Maps, o.Plane, o.Files, s.Version)
	return o, err
}

// Begin runs a scenario as far as the scene, and prepares its observation.
func Begin(ctx context.Context, l *scenarios.Loaded, s Settings) (*Outcome, *synth.Recording, error) {
	c := &l.Scenario
	light, files, err := Light(c)
	if err != nil {
		return nil, nil, err
	}
	if v := c.Inversion.Line.Data; v != "" {
		_, file, err := atom("inversion.line", v)
		if err != nil {
			return nil, nil, err
		}
		if len(files) == 0 || files[0] != *file {
			files = append(files, *file)
		}
	}
	o := &Outcome{Files: files}
	if o.Scene, err = synth.NewScene(ctx, c, light, s.Workers); err != nil {
		return nil, nil, err
	}
	rec, err := o.Scene.Record()
	if err != nil {
		return nil, nil, err
	}
	rec.Head.Scenario = l.SHA256
	return o, rec, nil
}

// Observe runs a scenario as far as the observation, with its frames, and the truth.
func Observe(ctx context.Context, l *scenarios.Loaded, s Settings) (*Outcome, error) {
	o, rec, err := Begin(ctx, l, s)
	if err != nil {
		return nil, err
	}
	o.Observation, o.Truth, err = rec.Whole(ctx, s.Workers, s.report("synthesis"))
	return o, err
}

// Judge compares inferred maps with the truth of a scenario. plane is what Plane returns;
// it may be nil.
func Judge(l *scenarios.Loaded, g obs.Grid, truth, inferred obs.Maps, plane []float32, files []File, version string) (*compare.Verdict, error) {
	o := Provenance(l, files, version)
	o.Plane = plane
	return compare.Compare(&g, truth, inferred, o)
}

// Provenance says of a scenario and its recipe what the verdict must name.
func Provenance(l *scenarios.Loaded, files []File, version string) compare.Options {
	c := &l.Scenario
	return compare.Options{
		Scenario: l.Name, Seed: c.Seed, Version: version, SHA256: l.SHA256, Text: string(l.Canonical), Files: files,
		Estimator: estimator(c), Mu: c.Inversion.Mu, MuTrue: model.Mu(c.Corona.Helium),
	}
}

// estimator returns the estimator behind SPEED and B; empty for a user's own maps.
func estimator(c *scenarios.Scenario) string {
	if len(c.Inversion.Estimators) == 0 {
		return ""
	}
	return c.Inversion.Estimators[0]
}

// Options turns the inversion section of a scenario into the inversion's own options.
func Options(v scenarios.Inversion) invert.Options {
	o := invert.Options{
		Centre: v.Filter.Centre.Hz(), Width: v.Filter.Width.Hz(), WidthIsSigma: v.Filter.Means == "sigma",
		Background: v.Background, Taper: v.Taper, Box: v.Box, Adaptive: v.Adaptive, Coherence: v.Coherence, Track: v.Track, Estimators: v.Estimators,
		Separation: v.Separation, Padding: v.Padding,
		Temperature: v.Temperature.Kelvin(), Mu: v.Mu,
	}
	switch v.KZero {
	case "kept":
		o.KZero = invert.Kept
	case "halved":
		o.KZero = invert.Halved
	case "dropped":
		o.KZero = invert.Dropped
	}
	return o
}

// Model builds the atomic model of one side of a scenario, whose key is for messages;
// the file is nil for the embedded data.
func Model(key string, l scenarios.Line, helium float64) (*line.Model, *File, error) {
	a, file, err := atom(key, l.Data)
	if err != nil {
		return nil, nil, err
	}
	opt := a.Options()
	opt.Helium, opt.Iron, opt.Ionisation, opt.Photo = helium, l.Iron, l.Ionisation, l.Photo
	m, err := line.New(a, opt)
	if err != nil {
		return nil, nil, fmt.Errorf("%s: %w", key, err)
	}
	return m, file, nil
}

func atom(key, path string) (*line.Atom, *File, error) {
	if path == "" {
		return line.Default(), nil, nil
	}
	data, err := strict.ReadFile(path)
	if err != nil {
		return nil, nil, fmt.Errorf("%s.data: %w", key, err)
	}
	a, err := line.Parse(path, data)
	if err != nil {
		return nil, nil, err
	}
	sum := sha256.Sum256(data)
	return a, &File{Name: filepath.Base(path), Path: path, SHA256: hex.EncodeToString(sum[:])}, nil
}

// Light returns the light of a scenario's corona, tabulated over the temperatures that
// occur in it, and the files it came from.
func Light(c *scenarios.Scenario) (synth.Light, []File, error) {
	m, file, err := Model("line", c.Line, c.Corona.Helium)
	if err != nil {
		return synth.Light{}, nil, err
	}
	over := m.Range()
	outer := float64(c.Image.Outer) + float64(c.Sight.Reach) + 0.2
	cold, hot, err := model.TemperatureRange(c.Corona, outer)
	if err != nil {
		return synth.Light{}, nil, err
	}
	over.Temperature = [2]float64{cold, hot}
	over.Height = [2]float64{1, outer}
	t, err := m.Table(over)
	if err != nil {
		return synth.Light{}, nil, fmt.Errorf("corona.temperature: %w", err)
	}
	l := synth.Light{Emitter: t, Rest: m.RestWavelengths(), Disc: m.DiscCentre(), Mass: m.Mass()}
	var files []File
	if file != nil {
		files = append(files, *file)
	}
	for _, path := range model.Files(c.Corona) {
		sum, err := digest(path)
		if err != nil {
			return synth.Light{}, nil, err
		}
		files = append(files, File{Name: filepath.Base(path), Path: path, SHA256: sum})
	}
	return l, files, nil
}

// digest returns the SHA-256 of a file.
func digest(path string) (string, error) {
	f, err := os.Open(path)
	if err != nil {
		return "", err
	}
	defer f.Close()
	h := sha256.New()
	if _, err := io.Copy(h, f); err != nil {
		return "", err
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}
