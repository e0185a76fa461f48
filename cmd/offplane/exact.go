package main

import (
	"context"
	"fmt"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"offplane/compare/trial"
)

func (p *program) exactCommand() *cobra.Command {
	var json bool
	var workers int
	cmd := &cobra.Command{
		Use:   "exact",
		Short: "Hold this program against cases whose answers are exact",
		Long: `exact runs cases with a closed form on tiny grids, through the whole job, and prints
what was measured beside what is exact: a check of a program that was just installed or
changed. It takes seconds. Exit code 1 if a number is farther off than it may be.`,
		Example: `  offplane exact
  offplane exact --json`,
		Args: noArguments,
	}
	cmd.RunE = do(func(ctx context.Context, _ []string) error {
		if workers < 0 {
			return misusef("--workers %d: write 0 for all cores, or their number", workers)
		}
		checks, err := trial.Exact(ctx, trial.Settings{Workers: workers, Version: version().Version})
		if err != nil {
			return computing(ctx, err)
		}
		off := 0
		for i := range checks {
			if !checks[i].OK() {
				off++
			}
		}
		if json {
			err = p.checksJSON(checks)
		} else {
			err = p.printChecks(checks)
		}
		if err == nil && off > 0 {
			err = fmt.Errorf("%d of %d checks are off", off, len(checks))
		}
		return err
	})
	cmd.Flags().BoolVar(&json, "json", false, "one JSON document")
	cmd.Flags().IntVar(&workers, "workers", 0, "cores to use; 0: all")
	return cmd
}

func (p *program) printChecks(checks []trial.Check) error {
	t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "\tmeasured\texact\tmay differ by\t")
	for i := range checks {
		c := &checks[i]
		verdict := "ok"
		if !c.OK() {
			verdict = "OFF"
		}
		fmt.Fprintf(t, "%s\t%.7g\t%.7g\t%g\t%s\n", c.Name, c.Measured, c.Exact, c.Tolerance, verdict)
	}
	return t.Flush()
}

func (p *program) checksJSON(checks []trial.Check) error {
	type item struct {
		Name      string  `json:"name"`
		Source    string  `json:"source"`
		Measured  float64 `json:"measured"`
		Exact     float64 `json:"exact"`
		Tolerance float64 `json:"tolerance"`
		OK        bool    `json:"ok"`
	}
	list := make([]item, len(checks))
	for i := range checks {
		c := &checks[i]
		list[i] = item{c.Name, c.Source, c.Measured, c.Exact, c.Tolerance, c.OK()}
	}
	return writeJSON(p.stdout, struct {
		Schema int    `json:"schema"`
		Checks []item `json:"checks"`
	}{1, list})
}
