package main

import (
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"golang.org/x/term"
)

// Progress goes to standard error. On a terminal it is one line that is drawn again
// and again and wiped at the end: stage, bar, share, time left. Elsewhere it is a line
// a minute, so that the log of a long run shows life and that of a short one is clean.
// There is no colour, so NO_COLOR has nothing to turn off.
const (
	redraw  = 100 * time.Millisecond
	logline = time.Minute
)

// A progress shows how far the work is. The nil progress shows nothing.
type progress struct {
	w       io.Writer
	width   func() int // of the terminal; nil: not a terminal
	stage   string
	started time.Time // of the stage
	shown   time.Time
}

func newProgress(w io.Writer, quiet bool) *progress {
	if quiet {
		return nil
	}
	p := &progress{w: w, shown: time.Now()}
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
	if p.width == nil {
		pause = logline
	}
	if stage != p.stage {
		p.stage, p.started = stage, now
		if p.width != nil {
			p.shown = time.Time{}
		}
	}
	if now.Sub(p.shown) < pause {
		return
	}
	p.shown = now
	if p.width == nil {
		fmt.Fprintf(p.w, "offplane: %s\n", status(stage, done, total, now.Sub(p.started), 0))
		return
	}
	line := status(stage, done, total, now.Sub(p.started), 24)
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
	if done > 0 && done < total && elapsed > time.Second {
		left := time.Duration(float64(elapsed) * (1 - share) / share)
		s += fmt.Sprintf(", %s left", roundTime(left))
	}
	return s
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
