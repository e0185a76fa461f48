package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"
)

func TestProgress(t *testing.T) {
	// Not a terminal: nothing at all within a minute.
	var b bytes.Buffer
	p := newProgress(&b, false, "")
	for i := range 100 {
		p.update("synthesis", i, 100)
	}
	p.wipe()
	if b.Len() > 0 {
		t.Errorf("%q", b.String())
	}
	// After it, one plain line.
	p.shown = time.Now().Add(-logline)
	p.update("synthesis", 50, 100)
	p.update("synthesis", 51, 100)
	if s := b.String(); s != "offplane: synthesis  50 %\n" {
		t.Errorf("%q", s)
	}
	// On a terminal one line is drawn again, no wider than the screen, and wiped.
	b.Reset()
	p = newProgress(&b, false, "")
	p.width = func() int { return 30 }
	p.update("synthesis", 0, 100)
	p.shown = time.Time{}
	p.update("synthesis", 50, 100)
	p.update("inversion", 1, 2) // a new stage shows at once
	p.wipe()
	s := b.String()
	lines := strings.Split(s, "\r\x1b[K")
	if len(lines) != 5 || lines[0] != "" || lines[4] != "" || strings.Contains(s, "\n") || !strings.HasPrefix(lines[3], "inversion") {
		t.Errorf("%q", lines)
	}
	for _, l := range lines {
		if len(l) > 29 {
			t.Errorf("%q is %d wide", l, len(l))
		}
	}
	newProgress(&b, true, "auto").update("synthesis", 1, 2) // quiet
	newProgress(&b, true, "auto").wipe()
	if b.String() != s {
		t.Error("quiet is not quiet")
	}
	if got := status("synthesis", 25, 100, time.Minute, 8); got != "synthesis [==      ]  25 %, 3m0s left" {
		t.Errorf("%q", got)
	}
	if got := status("synthesis", 0, 100, time.Minute, 8); strings.Contains(got, "left") {
		t.Errorf("time left of work that has not begun: %q", got)
	}
	if got := status("corona", 0, 0, time.Minute, 8); got != "corona" {
		t.Errorf("%q", got)
	}
}

// Programs get a document a line: each stage at once, then one a second, also with --quiet.
func TestProgressJSON(t *testing.T) {
	var b bytes.Buffer
	p := newProgress(&b, true, "json")
	p.update("corona", 0, 0)
	p.update("synthesis", 0, 100)
	p.update("synthesis", 1, 100) // too soon
	p.started, p.shown = p.started.Add(-time.Minute), p.shown.Add(-tell)
	p.update("synthesis", 25, 100)
	p.wipe()
	var got []string
	for _, line := range strings.Split(strings.TrimSuffix(b.String(), "\n"), "\n") {
		var s struct {
			Schema, Done, Total int
			Stage               string
			Elapsed             float64  `json:"elapsed_s"`
			Left                *float64 `json:"left_s"`
		}
		if err := json.Unmarshal([]byte(line), &s); err != nil || s.Schema != 1 {
			t.Fatalf("%q: %v", line, err)
		}
		text := fmt.Sprintf("%s %d/%d after %.0f s", s.Stage, s.Done, s.Total, s.Elapsed)
		if s.Left != nil {
			text += fmt.Sprintf(", %.0f s left", *s.Left)
		}
		got = append(got, text)
	}
	if want := []string{"corona 0/0 after 0 s", "synthesis 0/100 after 0 s", "synthesis 25/100 after 60 s, 180 s left"}; !slices.Equal(got, want) {
		t.Errorf("%q, want %q", got, want)
	}
	if newProgress(&b, false, "none") != nil {
		t.Error("none is something")
	}
	k := progressKind("")
	if k.Set("dots") == nil || k.Set("json") != nil || k != "json" {
		t.Errorf("kind %q", k)
	}
}
