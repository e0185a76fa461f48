package main

import (
	"fmt"
	"os"
	"os/exec"
	"strconv"
	"strings"
	"testing"
)

func itoa(n int) string { return strconv.Itoa(n) }

// commands returns the lines that begin with "$ " in the fenced blocks of a Markdown
// text, in order, continued lines joined.
func commands(text string) ([]string, error) {
	var out []string
	fenced, more := false, false
	for n, line := range strings.Split(text, "\n") {
		if fence, ok := strings.CutPrefix(strings.TrimSpace(line), "```"); ok {
			if !fenced && strings.Contains(fence, "no-test") {
				return nil, fmt.Errorf("line %d: every block is tested", n+1)
			}
			fenced, more = !fenced, false
			continue
		}
		if !fenced {
			continue
		}
		switch command, ok := strings.CutPrefix(line, "$ "); {
		case ok:
			out = append(out, command)
		case more:
			out[len(out)-1] += "\n" + strings.TrimPrefix(line, "> ")
		default:
			continue
		}
		more = strings.HasSuffix(line, "\\")
	}
	if fenced {
		return nil, fmt.Errorf("a block is not closed")
	}
	return out, nil
}

// play executes commands with sh in one folder, where offplane is this program.
func play(dir string, lines []string) error {
	for _, line := range lines {
		cmd := exec.Command("sh", "-c", line)
		cmd.Dir = dir
		if b, err := cmd.CombinedOutput(); err != nil {
			return fmt.Errorf("$ %s\n%s%v", line, b, err)
		}
	}
	return nil
}

// TestReadme plays the commands of README.md, but for the first two if they are those
// that make the default run and test the whole project.
func TestReadme(t *testing.T) {
	t.Parallel()
	text, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	lines, err := commands(string(text))
	if err != nil {
		t.Fatal(err)
	}
	for range 2 {
		if len(lines) > 0 && strings.HasPrefix(lines[0], "go ") {
			lines = lines[1:]
		}
	}
	if len(lines) < 3 {
		t.Fatalf("README.md shows %d commands", len(lines))
	}
	if err := play(t.TempDir(), lines); err != nil {
		t.Error(err)
	}
}

// TestManualPlayer: what finds and plays the commands of a manual notices a broken one.
func TestManualPlayer(t *testing.T) {
	t.Parallel()
	const text = "# Manual\n$ not this\n```sh\n$ offplane scenario list > list\noutput of it\n$ test -s \\\n    list\n```\nmore\n```\n$ offplane rnu\n```\n"
	lines, err := commands(text)
	if err != nil || len(lines) != 3 || lines[1] != "test -s \\\n    list" {
		t.Fatalf("%q %v", lines, err)
	}
	dir := t.TempDir()
	if err := play(dir, lines[:2]); err != nil {
		t.Error(err)
	}
	if err := play(dir, lines); err == nil || !strings.Contains(err.Error(), "did you mean") {
		t.Errorf("a command that fails goes unnoticed: %v", err)
	}
	for _, bad := range []string{"```sh no-test\n$ false\n```\n", "```\n$ true\n"} {
		if _, err := commands(bad); err == nil {
			t.Errorf("%q is let through", bad)
		}
	}
}
