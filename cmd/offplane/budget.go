package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"offplane/compare/budget"
	"offplane/compare/report"
	"offplane/scenarios"
	"offplane/scenarios/strict"
)

func (p *program) budgetCommand() *cobra.Command {
	var w work
	var c choice
	o := budget.Settings{Pieces: 4}
	cmd := &cobra.Command{
		Use:   "budget SCENARIO -o DIR",
		Short: "Which assumption of the inversion costs what",
		Long: `budget makes the assumptions behind a field map true one by one, and in all their
combinations, and leaves in DIR

  budget.json  every term: for the field, the speed and the density, by height
  budget.ecsv  the same as a table
  budget.png   the terms from nothing to the total; budget.svg is the same
  run.json     command line, versions, timings, sums of the files; written last

Numbers are natural logarithms of B over B_SKY: -0.10 is a field ten per cent low. Each
term is given by its share, which is averaged over all orders in which assumptions can be
made and adds up to the total, and by what it does alone in an otherwise ideal world and
in the scenario as it is. What is not in the scenario is exactly 0.

The bias is told from the scatter of chance by realisations: pieces of one long run, each
as long as the observation of the scenario. "finite duration" compares them with the
inversion of all of them as one observation.

"offplane run SCENARIO --budget DIR" shows the budget in its report.`,
		Example: `  offplane budget quick -o terms
  offplane budget two-loops --set "image.from=80 deg" --set "image.to=100 deg" --orders 8 -o terms2`,
		Args: argument("the name of a scenario or a file"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		l, err := c.load(args[0])
		if err != nil {
			return err
		}
		if err := o.Check(); err != nil {
			return misuse(err)
		}
		return p.budget(ctx, l, &w, o)
	})
	w.flags(cmd)
	c.flags(cmd)
	cmd.Flags().IntVar(&o.Pieces, "realisations", o.Pieces, "`number` of realisations, 2 or more")
	cmd.Flags().IntVar(&o.Orders, "orders", 0, "`number` of random orders to average over, even; 0: all orders of up to nine assumptions about waves, else 16")
	return cmd
}

func (p *program) budget(ctx context.Context, l *scenarios.Loaded, w *work, o budget.Settings) error {
	f, r, bar, err := p.start(w, job{Command: "budget", SHA256: digest(l.SHA256, fmt.Sprint(o.Pieces, o.Orders)), files: append([]string{"budget.json", "budget.ecsv"}, bothFormats("budget")...)})
	if err != nil {
		return err
	}
	defer f.abandon()
	defer bar.wipe()
	r.Scenario, r.ScenarioSHA256, r.Seed = l.Name, l.SHA256, &l.Scenario.Seed
	bar.update("corona", 0, 0)
	o.Workers, o.Version, o.Progress = w.workers, version().Version, bar.update
	b, err := budget.Run(ctx, l, o)
	if err != nil {
		return computing(ctx, err)
	}
	r.stage("budget")
	if err := f.write("budget.json", b.WriteJSON); err != nil {
		return err
	}
	table := b.Table()
	if err := table.WriteFile(f.path("budget.ecsv")); err != nil {
		return err
	}
	if err := f.writeFigure("budget", report.Budget(b).Draw); err != nil {
		return err
	}
	r.stage("writing")
	if err := f.finish(ctx, r); err != nil {
		return err
	}
	bar.wipe()
	switch {
	case w.json:
		return b.WriteJSON(p.stdout)
	case !w.quiet:
		printBudget(p.stdout, b)
		fmt.Fprintf(p.stdout, "figure   %s\n", f.path("budget.png"))
	}
	return nil
}

// readBudget reads what budget left in a folder: of the scenario, or of another seed or
// part of the image.
func readBudget(dir string, l *scenarios.Loaded) (*budget.Budget, entry, error) {
	path := filepath.Join(dir, "budget.json")
	if !exists(filepath.Join(dir, recordName)) || !exists(path) {
		return nil, entry{}, fmt.Errorf("--budget %s: not a complete folder of offplane budget", dir)
	}
	e, err := entryOf(path)
	if err != nil {
		return nil, e, err
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, e, err
	}
	b := new(budget.Budget)
	if err := json.Unmarshal(text, b); err != nil {
		return nil, e, fmt.Errorf("%s: %w", path, err)
	}
	of, err := anywhere(b.Text)
	if err != nil {
		return nil, e, fmt.Errorf("%s: scenario_text: %w", path, err)
	}
	if here, err := anywhere(string(l.Canonical)); err != nil || !bytes.Equal(of, here) {
		return nil, e, fmt.Errorf("--budget %s: the budget is of another scenario, %s: only the seed and the limits of the image may differ", dir, b.Scenario)
	}
	return b, e, nil
}

// anywhere returns a resolved scenario without its words, seed and limits of the image.
func anywhere(text string) ([]byte, error) {
	l, err := scenarios.Parse("scenario", []byte(text))
	if err != nil {
		return nil, err
	}
	s := &l.Scenario
	i, d := &s.Image, scenarios.Default()
	s.About, s.Seed = "", 0
	i.Inner, i.Outer, i.From, i.To = d.Image.Inner, d.Image.Outer, d.Image.From, d.Image.To
	return strict.Encode(s), nil
}

// printBudget lists the lines that are on.
func printBudget(w io.Writer, b *budget.Budget) {
	fmt.Fprintf(w, "%-42s %9s %7s %8s %8s %8s %8s %8s\n", "ln(B/B_SKY)", "share", "error", "speed", "density", "alone", "last", "scatter")
	for _, l := range b.Lines() {
		if l.On {
			fmt.Fprintf(w, "%-42s %+9.4f %7.4f %+8.4f %+8.4f %8s %8s %8s\n", l.Name, l.Field.Share, l.Field.Error, l.Speed.Share, l.Density.Share,
				signed(float64(l.Field.FromIdeal)), signed(float64(l.Field.FromFull)), signed(float64(l.Field.ScatterShare)))
		}
	}
	fmt.Fprintf(w, "pixels   %d of %d, the scatter of %d, %d realisations of %.3g h; not in the scenario:",
		b.Pixels.Used, b.Pixels.Total, b.Pixels.Scatter, b.Pieces, b.Duration/3600)
	sep := " "
	for _, l := range b.Lines() {
		if !l.On {
			fmt.Fprintf(w, "%s%s", sep, l.Name)
			sep = "; "
		}
	}
	if sep == " " {
		fmt.Fprint(w, " nothing")
	}
	fmt.Fprintln(w)
}

// signed prints a number, nothing for none.
func signed(x float64) string {
	if math.IsNaN(x) {
		return ""
	}
	return fmt.Sprintf("%+.4f", x)
}
