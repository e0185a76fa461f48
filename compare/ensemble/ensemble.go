package ensemble

import (
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"fmt"
	"path/filepath"
	"strings"

	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/synth/random"
)

//go:embed library/*.yaml
var library embed.FS

var shelf = strict.Library{Kind: "ensemble", Files: library}

// An Ensemble is what an ensemble file says.
type Ensemble struct {
	About      string      `yaml:"about" about:"one line that says what this is"`
	Base       string      `yaml:"base" need:"given" about:"scenario that the members share: an embedded one, or a file beside this one"`
	BaseSHA256 string      `yaml:"base_sha256" about:"of the resolved base; filled in, or written to hold the base to it"`
	Set        []string    `yaml:"set" about:"changes to the base, KEY=VALUE"`
	Seed       uint64      `yaml:"seed" about:"of the design and of the members' own seeds"`
	Design     string      `yaml:"design" one:"grid,random,latin-hypercube,sobol" about:"grid: all combinations of the values, the last parameter first"`
	Members    int         `yaml:"members" in:"0..1000000" about:"how many; 0 in a grid: all combinations"`
	Parameters []Parameter `yaml:"parameters" need:"given"`
}

// A Parameter is one key of the scenario and how it varies.
type Parameter struct {
	Path       string     `yaml:"path" need:"given" about:"key of the scenario, such as corona.belt.tilt"`
	Values     []Scalar   `yaml:"values" choice:"variation" about:"a list; groups of keys and null in quotes"`
	Uniform    *Span      `yaml:"uniform" choice:"variation"`
	LogUniform *Span      `yaml:"log_uniform" choice:"variation" about:"uniform in the logarithm"`
	Normal     *Normal    `yaml:"normal" choice:"variation" about:"cut off at from and to"`
	LogNormal  *LogNormal `yaml:"log_normal" choice:"variation" about:"normal in the logarithm, cut off at from and to"`
}

// Span is a range.
type Span struct {
	From Scalar `yaml:"from" need:"given"`
	To   Scalar `yaml:"to" need:"given"`
}

// Normal is a normal distribution between two ends.
type Normal struct {
	Mean      Scalar `yaml:"mean" need:"given"`
	Deviation Scalar `yaml:"deviation" need:"given"`
	From      Scalar `yaml:"from" need:"given"`
	To        Scalar `yaml:"to" need:"given"`
}

// LogNormal is a log-normal distribution between two ends.
type LogNormal struct {
	Median    Scalar  `yaml:"median" need:"given"`
	Deviation float64 `yaml:"deviation" in:">0..5" about:"standard deviation of the natural logarithm"`
	From      Scalar  `yaml:"from" need:"given"`
	To        Scalar  `yaml:"to" need:"given"`
}

// A Value is the value of one parameter in one member.
type Value struct {
	Path string
	Text string // as in YAML, such as "12 km/s"
}

// A Loaded ensemble is complete and valid.
type Loaded struct {
	Ensemble
	Name      string // of the embedded ensemble, or the file's name without folder and suffix
	Canonical []byte // with every default filled in; the same ensemble gives the same bytes
	SHA256    string // of Canonical, hexadecimal

	base   *scenarios.Loaded // nil where only the folder is read
	design design
}

// Names returns the names of the embedded ensembles in alphabetical order.
func Names() []string { return shelf.Names() }

// Source returns the YAML of an embedded ensemble with its comments.
func Source(name string) ([]byte, error) { return shelf.Source(name) }

// Load reads an ensemble and the scenario it is based on. A name that scenarios.IsFile
// takes for a file is one, any other that of an embedded ensemble. The error is of type
// strict.Problems if the ensemble was found but is not valid.
func Load(nameOrPath string) (*Loaded, error) {
	read := Source
	if scenarios.IsFile(nameOrPath) {
		read = strict.ReadFile
	}
	text, err := read(nameOrPath)
	if err != nil {
		return nil, err
	}
	return Parse(nameOrPath, text)
}

// Parse is Load from memory; source stands in messages and gives the name.
func Parse(source string, text []byte) (*Loaded, error) {
	l := &Loaded{Name: filepath.Base(source)}
	if scenarios.IsFile(source) {
		l.Name = strings.TrimSuffix(l.Name, filepath.Ext(l.Name))
	}
	l.Ensemble = Ensemble{Seed: 1, Design: "latin-hypercube", Set: []string{}}
	v := l.read(source, text)
	v.base(source)
	if err := v.problems.Err(); err != nil {
		return nil, err
	}
	l.BaseSHA256 = l.base.SHA256
	l.seal(strict.Encode(l.Ensemble))
	return l, nil
}

// read reads the text over what stands in l and checks all but the base.
func (l *Loaded) read(source string, text []byte) *validation {
	at, err := strict.Read(source, text, &l.Ensemble)
	v := &validation{l: l, at: at}
	v.problems, _ = err.(strict.Problems)
	v.count()
	v.parameters()
	return v
}

// seal fills in what follows from the resolved text.
func (l *Loaded) seal(canonical []byte) {
	sum := sha256.Sum256(canonical)
	l.Canonical, l.SHA256 = canonical, hex.EncodeToString(sum[:])
	l.design = newDesign(&l.Ensemble)
}

// parseResolved reads what Canonical was; the base is not needed.
func parseResolved(path string, text []byte) (*Loaded, error) {
	l := &Loaded{Name: filepath.Base(filepath.Dir(path))}
	if err := l.read(path, text).problems.Err(); err != nil {
		return nil, err
	}
	l.seal(text)
	return l, nil
}

// Values returns the values of the parameters in a member.
func (l *Loaded) Values(number int) []Value {
	values := make([]Value, len(l.Parameters))
	for j := range l.Parameters {
		p := &l.Parameters[j]
		values[j] = Value{p.Path, p.at(l.design.at(number, j))}
	}
	return values
}

// Member returns the scenario of a member and the values of its parameters. The ensemble
// must come from Load: a Set knows no base.
func (l *Loaded) Member(number int) (*scenarios.Loaded, []Value, error) {
	if l.base == nil {
		panic("ensemble: Member of an ensemble without its base")
	}
	values := l.Values(number)
	s, err := l.base.With(assignments(values, l.memberSeed(number))...)
	return s, values, err
}

// memberSeed has 53 bits, so that every reader of numbers keeps it exactly.
func (l *Loaded) memberSeed(number int) uint64 {
	return random.Hash(l.Seed, seedAddress, uint64(number)) >> 11
}

func assignments(values []Value, seed uint64) []string {
	var as []string
	for _, v := range values {
		as = append(as, v.Path+"="+v.Text)
	}
	return append(as, fmt.Sprintf("seed=%d", seed))
}
