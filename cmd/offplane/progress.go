package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"strings"
	"time"

	"golang.org/x/term"

	"offplane/compare/stat"
)

// Progress goes to standard error. On a terminal it is one line that is drawn again
// and again and wiped at the end: stage, bar, share, time left. Elsewhere it is a line
// a minute, so that the log of a long run shows life and that of a short one is clean.
// There is no colour, so NO_COLOR has nothing to turn off. For a program that waits it is
// a JSON document a line, one when a stage begins and one a second.
const (
	redraw  = 100 * time.Millisecond
	logline = time.Minute
	tell    = time.Second
)

// A progressKind is the value of --progress; empty is auto.
type progressKind string

func (k *progressKind) String() string { return string(*k) }
func (k *progressKind) Type() string   { return "KIND" }

func (k *progressKind) Set(s string) error {
	if s != "auto" && s != "json" && s != "none" {
		return fmt.Errorf("want auto, json or none")
	}
	*k = progressKind(s)
	return nil
}

// A step is one line of --progress=json.
type step struct {
	Schema  int         `json:"schema"` // 1
	Stage   string      `json:"stage"`
	Done    int         `json:"done"`
	Total   int         `json:"total"`     // 0: not known
	Elapsed stat.Number `json:"elapsed_s"` // of the stage
	Left    stat.Number `json:"left_s"`    // of the stage; null: not known
}

// A progress shows how far the work is. The nil progress shows nothing.
type progress struct {
	w       io.Writer
	width   func() int // of the terminal; nil: not a terminal
	json    bool
	stage   string
	started time.Time // of the stage
	shown   time.Time
}

func newProgress(w io.Writer, quiet bool, kind progressKind) *progress {
	if kind == "none" || quiet && kind != "json" {
		return nil
	}
	p := &progress{w: w, shown: time.Now(), json: kind == "json"}
	if p.json {
		return p
	}
	if f, ok := w.(*os.File); ok && term.IsTerminal(int(f.Fd())) && os.Getenv("TERM") != "dumb" {
		p.width = func() int {
			n, _, err := term.GetSize(int(f.Fd()))
			if err != nil || n < 1 {
				return 80
			}
			return n
		}
	}
	return p
}

// update tells the stage and how much of it is done; a total of 0 is not known. Calls
// come one at a time.
func (p *progress) update(stage string, done, total int) {
	if p == nil {
		return
	}
	now := time.Now()
	pause := redraw
	switch {
	case p.json:
		pause = tell
	case p.width == nil:
		pause = logline
	}
	if stage != p.stage {
		p.stage, p.started = stage, now
		if p.json || p.width != nil {
			p.shown = time.Time{}
		}
	}
	if now.Sub(p.shown) < pause {
		return
	}
	p.shown = now
	elapsed := now.Sub(p.started)
	if p.json {
		text, err := json.Marshal(step{1, stage, done, total, stat.Number(elapsed.Round(time.Millisecond).Seconds()), secondsLeft(left(done, total, elapsed))})
		if err == nil {
			fmt.Fprintf(p.w, "%s\n", text)
		}
		return
	}
	if p.width == nil {
		fmt.Fprintf(p.w, "offplane: %s\n", status(stage, done, total, elapsed, 0))
		return
	}
	line := status(stage, done, total, elapsed, 24)
	fmt.Fprintf(p.w, "\r\x1b[K%.*s", max(p.width()-1, 0), line)
}

// stageFunc returns update for one stage.
func (p *progress) stageFunc(stage string) func(done, total int) {
	if p == nil {
		return nil
	}
	return func(done, total int) { p.update(stage, done, total) }
}

// wipe takes the line away.
func (p *progress) wipe() {
	if p != nil && p.width != nil && p.stage != "" {
		fmt.Fprint(p.w, "\r\x1b[K")
		p.stage = ""
	}
}

// status is the text of the line; the bar has that many characters.
func status(stage string, done, total int, elapsed time.Duration, bar int) string {
	if total < 1 {
		return stage
	}
	s := fmt.Sprintf("%-9s", stage)
	share := float64(done) / float64(total)
	if bar > 0 {
		n := int(share * float64(bar))
		s += " [" + strings.Repeat("=", n) + strings.Repeat(" ", bar-n) + "]"
	}
	s += fmt.Sprintf(" %3.0f %%", 100*share)
	if t := left(done, total, elapsed); t > 0 {
		s += fmt.Sprintf(", %s left", roundTime(t))
	}
	return s
}

// left estimates the time left of a stage; 0 if it is not known yet.
func left(done, total int, elapsed time.Duration) time.Duration {
	if done < 1 || done >= total || elapsed < time.Second {
		return 0
	}
	return time.Duration(float64(elapsed) * (float64(total)/float64(done) - 1))
}

// secondsLeft is a time in seconds, null for none.
func secondsLeft(t time.Duration) stat.Number {
	if t == 0 {
		return stat.Number(math.NaN())
	}
	return stat.Number(t.Round(100 * time.Millisecond).Seconds())
}

// roundTime drops what nobody wants to know.
func roundTime(d time.Duration) time.Duration {
	switch {
	case d > 10*time.Minute:
		return d.Round(time.Minute)
	case d > time.Minute:
		return d.Round(10 * time.Second)
	}
	return max(d.Round(time.Second), time.Second)
}
