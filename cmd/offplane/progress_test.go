package main

import (
	"bytes"
	"strings"
	"testing"
	"time"
)

func TestProgress(t *testing.T) {
	// Not a terminal: nothing at all within a minute.
	var b bytes.Buffer
	p := newProgress(&b, false)
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
	p = newProgress(&b, false)
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
	newProgress(&b, true).update("synthesis", 1, 2) // quiet
	newProgress(&b, true).wipe()
	if b.String() != s {
		t.Error("quiet is not quiet")
	}
	if got := status("synthesis", 25, 100, time.Minute, 8); got != "synthesis [==      ]  25 %, 3m0s left" {
		t.Errorf("%q", got)
	}
	if got := status("corona", 0, 0, time.Minute, 8); got != "corona" {
		t.Errorf("%q", got)
	}
}
