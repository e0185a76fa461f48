package main

import (
	"os"
	"slices"
	"strings"
	"testing"

	"go.yaml.in/yaml/v4"
)

// CITATION.cff has what version 1.2.0 of the format asks for, by the words that it allows
// (from memory of its schema), and the licence that LICENSE is.
func TestCitation(t *testing.T) {
	text, err := os.ReadFile("../../CITATION.cff")
	if err != nil {
		t.Fatal(err)
	}
	var c map[string]any
	if err := yaml.Unmarshal(text, &c); err != nil {
		t.Fatal(err)
	}
	for key, want := range map[string]string{"cff-version": "1.2.0", "type": "software", "license": "Apache-2.0"} {
		if c[key] != want {
			t.Errorf("%s is %v, want %s", key, c[key], want)
		}
	}
	for key := range c {
		if !slices.Contains([]string{"cff-version", "message", "title", "type", "abstract", "keywords", "authors", "license", "version", "date-released", "doi", "url", "repository-code", "preferred-citation", "references"}, key) {
			t.Errorf("%s is no key of the format", key)
		}
	}
	for _, key := range []string{"message", "title", "abstract"} {
		if s, ok := c[key].(string); !ok || s == "" {
			t.Errorf("%s is %v", key, c[key])
		}
	}
	authors, _ := c["authors"].([]any)
	for _, a := range authors {
		a, _ := a.(map[string]any)
		if a["name"] == nil && a["family-names"] == nil {
			t.Errorf("author %v has no name", a)
		}
	}
	if len(authors) == 0 {
		t.Error("no authors")
	}
	licence, err := os.ReadFile("../../LICENSE")
	if err != nil || !strings.Contains(string(licence), "Apache License") || !strings.Contains(string(licence), "Version 2.0") {
		t.Errorf("LICENSE is another one (%v)", err)
	}
}
