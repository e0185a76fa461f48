package scenarios_test

import (
	"strings"
	"testing"

	"offplane/scenarios"
)

// Known wrong copies of density laws, and parts that do not go together, are refused
// with the reason.
func TestCoronaRefused(t *testing.T) {
	for set, want := range map[string]string{
		"corona.density.streamer.named=baumbach":                          "without its r^-1.5 term",
		"corona.density.streamer.named=saito":                             "a hundredth of the density at 1 au",
		"corona.density.hole.named=saito-1977-hole":                       "ten times too thin below 2 solar radii",
		"corona.density.active=[{law: {named: sittler-1999}}]":            "corona.density.active.0.law.named: copies call the polar coefficients",
		"corona.outflow={terminal: 200 km/s}|corona.strands={waves: own}": "corona.outflow: cannot be given with strands whose waves ride their own density",
		"corona.density.active=[{},{},{},{},{},{},{},{},{}]":              "holds more than 8 regions",
		"corona.grid={}": "corona.grid.file: is missing",
		"corona.fields=[{uniform: {strength: 1 G}}]": "a hole needs closed lines",
	} {
		_, err := scenarios.Load("quiet-belt", strings.Split(set, "|")...)
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v; want %q", set, err, want)
		}
	}
	// Parts that are given by their name alone have sensible defaults.
	l, err := scenarios.Load("quiet-belt", "corona.strands={}", "corona.mix={}", "corona.belt={}", "corona.rotation={}", "corona.density.active=[{}]")
	if err != nil {
		t.Fatal(err)
	}
	c := l.Scenario.Corona
	if c.Strands.Size != 1 || c.Mix.Tubes != "bundle" || c.Belt.Waves != 2 || c.Rotation.Period != 27.2753*86400 || c.Density.Active[0].Law.Named != "vrsnak-2004" {
		t.Errorf("%+v", c)
	}
}
