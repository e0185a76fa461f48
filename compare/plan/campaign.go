package plan

import (
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"path/filepath"
	"strings"

	"offplane/compare/ensemble"
	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/scenarios/units"
)

//go:embed library/*.yaml
var library embed.FS

var shelf = strict.Library{Kind: "campaign", Files: library}

// A Campaign is what a campaign file says.
type Campaign struct {
	About  string `yaml:"about" about:"one line that says what this is"`
	Seed   uint64 `yaml:"seed" about:"addresses every random number of the plan"`
	Target Target `yaml:"target"`
	Goal   Goal   `yaml:"goal"`
	Facts  Facts  `yaml:"facts"`
	Vary   []Knob `yaml:"vary" need:"given" about:"what the observer may choose; the last changes first"`
	Effort Effort `yaml:"effort"`
}

// Target is what is to be mapped.
type Target struct {
	Scenario string       `yaml:"scenario" need:"given" about:"corona, camera and recipe: an embedded scenario, or a file beside this one"`
	Set      []string     `yaml:"set" about:"changes to the scenario, KEY=VALUE: the fixed facts of the telescope, too"`
	From     units.Angle  `yaml:"from" need:"given" in:"-360 deg..360 deg" about:"first position angle of the region; only this wedge is simulated, and tracks end at its edges"`
	To       units.Angle  `yaml:"to" need:"given" in:"-360 deg..720 deg" about:"last position angle"`
	Inner    units.Height `yaml:"inner" need:"given" in:"1.01 Rsun..3 Rsun" about:"the goal holds from here"`
	Outer    units.Height `yaml:"outer" need:"given" in:">1.01 Rsun..3 Rsun" about:"to here"`
}

// Goal is what a map of the target has to reach, all three at once.
type Goal struct {
	Random     float64 `yaml:"random" in:">0..1" about:"half the width of the central 68 % of ln(B/B_SKY) of the pixels with a field, at most"`
	Systematic float64 `yaml:"systematic" in:">0..1" about:"absolute value of the median of ln(B/B_SKY), at most"`
	Yield      float64 `yaml:"yield" in:">0..1" about:"share of the pixels with a field, at least"`
	Success    float64 `yaml:"success" in:"0.5..0.99" about:"predicted chance to meet all that a recommended design must have"`
}

// Facts are what the observer cannot choose and no scenario says.
type Facts struct {
	Hours    units.Duration `yaml:"hours" in:"60 s..48 h" about:"telescope time available, overhead included"`
	Overhead units.Duration `yaml:"overhead" in:"0 s..24 h" about:"of the whole observation: pointing, calibration"`
	Fill     bool           `yaml:"fill" about:"each tuning is exposed for as long as the cadence leaves beside dead_time, in co-adds of the scenario's length"`
}

// A Knob is one thing that may vary, a list or a range.
type Knob struct {
	What   string            `yaml:"what" need:"given" one:"duration,cadence,exposure,coadds,tunings,second_line,split,binning,aperture,pixel,background,track" about:"second_line: share of the time that the second line adds; split: the same of a fixed night, which it shortens for the first; binning: pixels a side summed after reading"`
	Values []ensemble.Scalar `yaml:"values" choice:"span" about:"a list; lists of tunings in quotes"`
	Range  *Range            `yaml:"range" choice:"span"`
}

// A Range is evenly spaced values, ends included.
type Range struct {
	From  ensemble.Scalar `yaml:"from" need:"given"`
	To    ensemble.Scalar `yaml:"to" need:"given"`
	Steps int             `yaml:"steps" need:"given" in:"2..1000" about:"number of values"`
	Ratio bool            `yaml:"ratio" about:"even in the logarithm"`
}

// Effort bounds what is simulated.
type Effort struct {
	Waves   units.Duration `yaml:"waves" in:"4 h..400 h" about:"of noise-free waves, from which predictions are made"`
	Designs int            `yaml:"designs" in:"0..50" about:"that go through the whole chain; 0: predictions stay uncalibrated"`
	Trials  int            `yaml:"trials" in:"4..200" about:"realisations of waves and noise for each of these"`
}

// A Loaded campaign is complete and valid.
type Loaded struct {
	Campaign
	Name      string // of the embedded campaign, or the file's name without folder and suffix
	Canonical []byte // with every default filled in; the same campaign gives the same bytes
	SHA256    string // of Canonical and of the resolved target, hexadecimal

	base   *scenarios.Loaded
	values [][]string // of each knob
}

// Names returns the names of the embedded campaigns in alphabetical order.
func Names() []string { return shelf.Names() }

// Source returns the YAML of an embedded campaign with its comments.
func Source(name string) ([]byte, error) { return shelf.Source(name) }

// Load reads a campaign and its target, with assignments to the campaign's keys. A name
// that scenarios.IsFile takes for a file is one, any other that of an embedded campaign.
// The error is of type strict.Problems if the campaign was found but is not valid.
func Load(nameOrPath string, assignments ...string) (*Loaded, error) {
	read := Source
	if scenarios.IsFile(nameOrPath) {
		read = strict.ReadFile
	}
	text, err := read(nameOrPath)
	if err != nil {
		return nil, err
	}
	return Parse(nameOrPath, text, assignments...)
}

// Parse is Load from memory; source stands in messages and gives the name.
func Parse(source string, text []byte, assignments ...string) (*Loaded, error) {
	l := &Loaded{Name: filepath.Base(source)}
	if scenarios.IsFile(source) {
		l.Name = strings.TrimSuffix(l.Name, filepath.Ext(l.Name))
	}
	l.Campaign = Campaign{
		Seed: 1, Target: Target{Set: []string{}},
		Goal:   Goal{Random: 0.10, Systematic: 0.15, Yield: 0.70, Success: 0.9},
		Facts:  Facts{Hours: 8 * 3600},
		Effort: Effort{Waves: 24 * 3600, Designs: 6, Trials: 12},
	}
	at, err := strict.Read(source, text, &l.Campaign, assignments...)
	v := validation{l: l, at: at}
	v.problems, _ = err.(strict.Problems)
	v.region()
	v.knobs()
	if len(v.problems) == 0 {
		v.target(source)
	}
	if err := v.problems.Err(); err != nil {
		return nil, err
	}
	l.Canonical = strict.Encode(l.Campaign)
	sum := sha256.Sum256(append(append([]byte{}, l.Canonical...), l.base.Canonical...))
	l.SHA256 = hex.EncodeToString(sum[:])
	return l, nil
}
