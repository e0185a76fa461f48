package main

import (
	"context"
	"errors"
	"fmt"
	"io"

	"github.com/spf13/cobra"

	"offplane/compare/plan"
	"offplane/compare/report"
)

func (p *program) planCommand() *cobra.Command {
	var w work
	var set []string
	var show bool
	cmd := &cobra.Command{
		Use:   "plan CAMPAIGN -o DIR",
		Short: "Which observation reaches a wanted error",
		Long: `plan takes a campaign (the name of an embedded one, or a file): a target, a goal, the
facts and what the observer may choose. It predicts random error, systematic shift and
yield of every design, takes those on which the decision hangs through the whole chain,
and leaves in DIR

  plan.txt   half a page for a proposal
  plan.png   designs against telescope time; error against duration with its floor;
             plan.svg is the same
  plan.ecsv  every design
  plan.json  the same answer for machines: recommended and nearest design, those that no
             other beats, limits, curve, other backgrounds and wave amplitudes
  run.json   command line, versions, timings, sums of the files; written last

It exits with 3 if no design meets the goal, and says what comes nearest and what would
have to change.`,
		Example: `  offplane plan quiet-night -o night
  offplane plan split-night -o split
  offplane plan cadence-or-photons -o cadence
  offplane plan quiet-night --show > my.yaml
  offplane plan my.yaml --set goal.random=0.2 -o relaxed`,
		Args:              argument("the name of a campaign or a file"),
		ValidArgsFunction: cobra.FixedCompletions(plan.Names(), cobra.ShellCompDirectiveDefault),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		if show {
			text, err := plan.Source(args[0])
			if err != nil {
				return misuse(err)
			}
			_, err = p.stdout.Write(text)
			return err
		}
		l, err := plan.Load(args[0], set...)
		if err != nil {
			return misuse(err)
		}
		return p.plan(ctx, l, &w)
	})
	w.flags(cmd)
	cmd.Flags().BoolVar(&show, "show", false, "print an embedded campaign with its comments, a pattern for one's own")
	cmd.Flags().StringArrayVar(&set, "set", nil, "change the campaign: `KEY=VALUE`, such as goal.random=0.2; repeatable")
	completeKeys(cmd, plan.Campaign{})
	return cmd
}

func (p *program) plan(ctx context.Context, l *plan.Loaded, w *work) error {
	f, r, bar, err := p.start(w, job{Command: "plan", SHA256: l.SHA256, files: append([]string{"plan.json", "plan.ecsv", "plan.txt"}, bothFormats("plan")...)})
	if err != nil {
		return err
	}
	defer f.abandon()
	defer bar.wipe()
	r.Scenario, r.Seed = l.Target.Scenario, &l.Seed
	a, err := plan.Run(ctx, l, plan.Settings{Workers: w.workers, Version: version().Version, Progress: bar.update})
	if none := (*plan.Impossible)(nil); errors.As(err, &none) {
		return &fault{exitUnmet, err}
	}
	if err != nil {
		return computing(ctx, err)
	}
	r.stage("plan")
	if err := writePlan(f, a); err != nil {
		return err
	}
	r.stage("writing")
	if err := f.finish(ctx, r); err != nil {
		return err
	}
	bar.wipe()
	switch {
	case w.json:
		err = a.WriteJSON(p.stdout)
	case !w.quiet:
		_, err = io.WriteString(p.stdout, a.Text())
	}
	if err == nil && a.Best == nil {
		return &fault{exitUnmet, fmt.Errorf("no design meets the goal; of the nearest: %s", a.Shortfall())}
	}
	return err
}

func writePlan(f *folder, a *plan.Plan) error {
	text := func(s []byte) func(w io.Writer) error {
		return func(w io.Writer) error { _, err := w.Write(s); return err }
	}
	if err := f.write("plan.json", a.WriteJSON); err != nil {
		return err
	}
	table := a.Table()
	if err := table.WriteFile(f.path("plan.ecsv")); err != nil {
		return err
	}
	if err := f.write("plan.txt", text([]byte(a.Text()))); err != nil {
		return err
	}
	return f.writeFigure("plan", report.Plan(a).Draw)
}
