package main

import (
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"offplane/scenarios"
	"offplane/synth/parallel"
)

// work holds the flags of commands that fill a folder.
type work struct {
	out      string
	workers  int
	quiet    bool
	json     bool
	force    bool
	progress progressKind
}

func (w *work) flags(cmd *cobra.Command) {
	f := cmd.Flags()
	f.StringVarP(&w.out, "output", "o", "", "`folder` for the results")
	f.IntVar(&w.workers, "workers", 0, "cores to use; 0: all. Results do not depend on it")
	f.BoolVar(&w.quiet, "quiet", false, "no progress, and no results on standard output but with --json")
	f.BoolVar(&w.json, "json", false, "results on standard output as one JSON document")
	defer completeWords(cmd, "progress", "auto", "json", "none")
	f.Var(&w.progress, "progress", "progress on standard error: auto (a bar on a terminal, elsewhere a line a minute), json (a document a line, for programs) or none")
	f.BoolVar(&w.force, "force", false, "write over what is in the folder")
}

// start takes the folder of a job and begins its record.
func (p *program) start(w *work, j job) (*folder, *record, *progress, error) {
	if w.out == "" {
		return nil, nil, nil, misusef("offplane %s needs a folder for the results: -o DIR", j.Command)
	}
	if w.workers < 0 {
		return nil, nil, nil, misusef("--workers %d: write 0 for all cores, or their number", w.workers)
	}
	f, err := p.open(w.out, j, w.force)
	if err != nil {
		return nil, nil, nil, err
	}
	return f, newRecord(j.Command, p.args, w.out, parallel.Workers(w.workers)), newProgress(p.stderr, w.quiet, w.progress), nil
}

// choice holds the flags that change a scenario.
type choice struct {
	set  []string
	seed uint64
	cmd  *cobra.Command
}

func (c *choice) flags(cmd *cobra.Command) {
	c.cmd = cmd
	cmd.ValidArgsFunction = cobra.FixedCompletions(scenarios.Names(), cobra.ShellCompDirectiveDefault)
	cmd.Flags().StringArrayVar(&c.set, "set", nil, "change the scenario: `KEY=VALUE`, such as camera.duration=2h; repeatable")
	completeKeys(cmd, scenarios.Scenario{})
	cmd.Flags().Uint64Var(&c.seed, "seed", 0, "`number` that addresses all randomness; short for --set seed=")
}

// load reads the scenario with the changes that were asked for.
func (c *choice) load(name string) (*scenarios.Loaded, error) {
	set := c.set
	if c.cmd.Flags().Changed("seed") {
		set = append(set[:len(set):len(set)], fmt.Sprintf("seed=%d", c.seed))
	}
	l, err := scenarios.Load(name, set...)
	return l, misuse(err)
}

// inversionKeys turns assignments to a scenario's inversion section into those to the
// section by itself.
func inversionKeys(set []string) []string {
	out := make([]string, len(set))
	for i, s := range set {
		out[i] = strings.TrimPrefix(s, "inversion.")
	}
	return out
}

// argument wraps the check of the number of arguments: what names them.
func argument(what string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		switch {
		case len(args) == 0:
			return fmt.Errorf("%s needs %s", cmd.CommandPath(), what)
		case len(args) > 1:
			return fmt.Errorf("%s takes one argument, %s; %q is too much", cmd.CommandPath(), what, args[1])
		}
		return nil
	}
}

func noArguments(cmd *cobra.Command, args []string) error {
	if len(args) > 0 {
		return fmt.Errorf("%s takes no argument; %q is too much", cmd.CommandPath(), args[0])
	}
	return nil
}

func (c *choice) changed() bool { return len(c.set) > 0 || c.cmd.Flags().Changed("seed") }
