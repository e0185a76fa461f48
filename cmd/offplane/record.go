package main

import (
	"encoding/json"
	"io"
	"os"
	"path/filepath"
	"time"
)

// A record is run.json: everything about one execution, also what must not be in the
// other files because it changes from one to the next.
type record struct {
	Schema         int       `json:"schema"` // 1
	Command        string    `json:"command"`
	Arguments      []string  `json:"arguments"`
	Program        build     `json:"program"`
	Folder         string    `json:"folder"`
	Host           string    `json:"host"`
	Workers        int       `json:"workers"`
	Scenario       string    `json:"scenario,omitempty"`
	ScenarioSHA256 string    `json:"scenario_sha256,omitempty"`
	Seed           *uint64   `json:"seed,omitempty"`
	Started        time.Time `json:"started"`
	Ended          time.Time `json:"ended"`
	Seconds        float64   `json:"seconds"`
	Stages         []stage   `json:"stages"`
	Inputs         []entry   `json:"inputs,omitempty"`
	Files          []entry   `json:"files"`
}

type stage struct {
	Name    string  `json:"name"`
	Seconds float64 `json:"seconds"`
}

// newRecord begins the record of a command.
func newRecord(command string, arguments []string, dir string, workers int) *record {
	r := &record{Schema: 1, Command: command, Arguments: arguments, Program: version(), Folder: dir, Workers: workers, Started: time.Now().UTC()}
	if abs, err := filepath.Abs(dir); err == nil {
		r.Folder = abs
	}
	r.Host, _ = os.Hostname()
	return r
}

// stage notes the time since the last stage.
func (r *record) stage(name string) {
	s := time.Since(r.Started).Seconds()
	for _, t := range r.Stages {
		s -= t.Seconds
	}
	r.Stages = append(r.Stages, stage{name, s})
}

func (r *record) encode(w io.Writer) error {
	if r.Ended.IsZero() {
		r.Ended = time.Now().UTC()
		r.Seconds = r.Ended.Sub(r.Started).Seconds()
	}
	return writeJSON(w, r)
}

// writeJSON writes one document with a final newline.
func writeJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(v)
}
