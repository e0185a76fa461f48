package main

import (
	"context"
	"errors"
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"offplane/compare/ensemble"
	"offplane/compare/report"
	"offplane/compare/table"
)

func (p *program) tableCommand() *cobra.Command {
	return group("table", "Correction tables: from ensembles, and for published maps", p.tableBuild(), p.tableApply(), p.tableShow())
}

// tableFiles are what table build leaves.
var tableFiles = append([]string{"table.ecsv", "table.fits", "coverage.ecsv"}, bothFormats("table")...)

func (p *program) tableBuild() *cobra.Command {
	var w work
	var truth, estimator, features, prior string
	var width float64
	var least int
	cmd := &cobra.Command{
		Use:   "build ENSEMBLE-DIR --truth sky -o DIR",
		Short: "Turn an ensemble into a correction table",
		Long: `table build turns the members of an ensemble into a correction of the inferred field,
speed and density: the median of ln(true/inferred) and its 68 and 95 % intervals as a
function of what the reader of a map has. It leaves table.ecsv, table.fits (the same
content), coverage.ecsv, the figure table.png and table.svg, and run.json in DIR.

The intervals are calibrated by holding out whole members. The coverage that is printed
was achieved on members that were used neither for the fit nor for the calibration.

--prior weighs the members by how well their own maps agree with a profile of yours: a
table with the columns height [solRad] and density [cm-3, m-3], or brightness (shape
only): an ECSV file separated by commas or blanks, or plain comma-separated values.`,
		Example: `  offplane table build ensemble --truth sky -o table
  offplane table build ensemble --truth emission --features height,density -o coarse
  offplane table build ensemble --truth sky --prior density.ecsv -o mine`,
		Args: argument("the folder of an ensemble"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		fs, err := table.ParseFeatures(features)
		if err != nil {
			return misusef("--features: %w", err)
		}
		if len(fs) == 0 {
			return misusef("--features: names none: give some of %s", strings.Join(table.FeatureNames(), ", "))
		}
		if least < 1 {
			return misusef("--least %d: must be at least 1: without members there is nothing to correct by", least)
		}
		var q *table.Prior
		if prior != "" {
			if q, err = table.ReadPrior(prior, width); err != nil {
				return misusef("--prior: %w", err)
			}
		}
		set, err := ensemble.Open(args[0])
		if err != nil {
			return misuse(err)
		}
		members, recipe, err := table.Load(set, truth, estimator)
		if err != nil {
			return misuse(err)
		}
		if n := len(set.Missing) + len(set.Failed); n > 0 {
			p.say("%d of %d members are left out: %d failed, %d are not computed yet", n, set.Ensemble.Members, len(set.Failed), len(set.Missing))
		}
		o := table.Options{Features: fs, Least: least, Workers: w.workers}
		parts := []string{set.Ensemble.SHA256, fmt.Sprint(set.Done), truth, estimator, features, fmt.Sprint(least, width)}
		var inputs []string
		weighted := ""
		if q != nil {
			e, err := entryOf(prior)
			if err != nil {
				return misuse(err)
			}
			inputs, parts = append(inputs, prior), append(parts, e.SHA256)
			o.Weights, weighted = q.Weights(members), q.String()
		}
		f, r, bar, err := p.start(&w, job{Command: "table build", SHA256: digest(parts...), files: tableFiles, inputs: inputs})
		if err != nil {
			return err
		}
		defer f.abandon()
		defer bar.wipe()
		o.Progress = bar.stageFunc("calibration")
		t, err := table.Build(ctx, members, o)
		if errors.Is(err, table.ErrTooFew) {
			return &fault{exitUnmet, err}
		}
		if err != nil {
			return computing(ctx, err)
		}
		t.Truth, t.Recipe, t.Prior = truth, recipe, weighted
		t.Origin = table.Origin{Program: "offplane " + version().Version, Ensemble: set.Ensemble.Name, SHA256: set.Ensemble.SHA256, Varied: varied(set)}
		r.stage("calibration")
		if err := writeTable(f, t); err != nil {
			return err
		}
		r.stage("writing")
		if err := f.finish(ctx, r); err != nil {
			return err
		}
		bar.wipe()
		if !w.quiet {
			p.printTable(t)
			fmt.Fprintf(p.stdout, "table     %s\n", f.path("table.ecsv"))
		}
		return unmetCoverage(t)
	})
	w.flags(cmd)
	cmd.Flags().Lookup("json").Hidden = true
	f := cmd.Flags()
	f.StringVar(&truth, "truth", "sky", "`name` of the truth: sky, emission, wave or total")
	completeWords(cmd, "truth", table.Truths()...)
	f.StringVar(&estimator, "estimator", "", "estimator whose maps are to be corrected; empty: the ensemble's first")
	f.StringVar(&features, "features", "height,field,density,angle", "what the reader has: at most four, height among them always, of height,field,density,speed,angle,track,coherence")
	f.IntVar(&least, "least", table.DefaultLeast, "members that a cell needs to be in the domain")
	f.StringVar(&prior, "prior", "", "`file` with a profile of yours: weigh the members by it")
	f.Float64Var(&width, "prior-width", table.DefaultWidth, "scatter of ln(member/profile) that --prior lets pass")
	return cmd
}

// varied says what varies in an ensemble, and how much of it there is.
func varied(set *ensemble.Set) string {
	var paths []string
	for _, p := range set.Ensemble.Parameters {
		paths = append(paths, p.Path)
	}
	return fmt.Sprintf("%d of %d members, %s", len(set.Done), set.Ensemble.Members, strings.Join(paths, ", "))
}

func writeTable(f *folder, t *table.Table) error {
	if err := f.write("table.ecsv", t.ECSV().Write); err != nil {
		return err
	}
	if err := t.WriteFITS(f.path("table.fits")); err != nil {
		return err
	}
	if err := f.write("coverage.ecsv", t.Coverage().Write); err != nil {
		return err
	}
	return f.writeFigure("table", func(g report.Format) []byte { return report.TableFigure(t, g) })
}

// printTable tells of a table; losses only if they are known.
func (p *program) printTable(t *table.Table) {
	out := p.stdout
	fmt.Fprintf(out, "truth     %s\n", t.Truth)
	fmt.Fprintf(out, "ensemble  %s (%.12s)\n", t.Origin.Ensemble, t.Origin.SHA256)
	fmt.Fprintf(out, "members   %d, effective %.1f\n", t.Members, t.Effective)
	if t.Prior != "" {
		fmt.Fprintf(out, "prior     %s\n", t.Prior)
	}
	var recipe []string
	for _, s := range t.Recipe {
		recipe = append(recipe, s.Key+"="+s.Value)
	}
	fmt.Fprintf(out, "recipe    %s\n", strings.Join(recipe, ", "))
	coarser := 0
	var beating, others [3][]string // of quantities
	for i := range t.Surfaces {
		s := &t.Surfaces[i]
		if len(s.Features()) < len(t.Features()) {
			coarser++
			if beats, known := s.Score.BeatsSingle(); beats {
				beating[s.Quantity] = append(beating[s.Quantity], strings.Join(featureNames(s.Features()), "+"))
			} else if known {
				others[s.Quantity] = append(others[s.Quantity], strings.Join(featureNames(s.Features()), "+"))
			}
			continue
		}
		fmt.Fprintf(out, "%-9s by %s: %s\n", s.Quantity, strings.Join(featureNames(s.Features()), ", "), &s.Score)
		if l := &s.Score.Loss; l.None > 0 {
			fmt.Fprintf(out, "          loss cut by %s against no correction, by %s against one factor; median |ln error| %.3f -> %.3f; %.0f %% in the domain\n",
				percent(l.CutNone), percent(l.CutSingle), s.Score.None, s.Score.Left, 100*s.Score.Share)
		}
	}
	if coarser > 0 {
		fmt.Fprintf(out, "coarser   %d more for readers who have less\n", coarser)
	}
	for q := range beating {
		if len(beating[q]) > 0 {
			fmt.Fprintf(out, "          %s: better than one factor by %s\n", table.Quantity(q), strings.Join(beating[q], ", "))
		}
		if len(others[q]) > 0 {
			fmt.Fprintf(out, "          %s: not better than one factor by %s\n", table.Quantity(q), strings.Join(others[q], ", "))
		}
	}
	fmt.Fprintf(out, "caution   %s\n", table.Caution)
}

func percent(v table.Interval) string {
	return fmt.Sprintf("%.1f %% (%.1f..%.1f)", 100*v.Value, 100*v.Low, 100*v.High)
}

// unmetCoverage is the gate of table build: coverage of members held out within three
// points of nominal, or two standard errors.
func unmetCoverage(t *table.Table) error {
	var bad []string
	for i := range t.Surfaces {
		s := &t.Surfaces[i]
		if !s.Score.Kept() {
			bad = append(bad, fmt.Sprintf("%s by %v", s.Quantity, s.Features()))
		}
	}
	if bad != nil {
		return &fault{exitUnmet, fmt.Errorf("the intervals do not hold what they promise on members held out: %s", strings.Join(bad, "; "))}
	}
	return nil
}

func (p *program) tableShow() *cobra.Command {
	var path string
	cmd := &cobra.Command{
		Use:   "show [TABLE]",
		Short: "Tell what a table is good for; copy an embedded one",
		Long: `table show tells truth, recipe and achieved coverage of a table, and where its axes end.
TABLE is a file or the name of an embedded one: ` + strings.Join(table.Names(), ", ") + `.`,
		Example: "  offplane table show\n  offplane table show sky --ecsv sky.ecsv",
		Args:    cobra.MaximumNArgs(1),

		ValidArgsFunction: cobra.FixedCompletions(table.Names(), cobra.ShellCompDirectiveDefault),
	}
	cmd.RunE = do(func(_ context.Context, args []string) error {
		name := table.DefaultName
		if len(args) > 0 {
			name = args[0]
		}
		t, err := table.Open(name)
		if err != nil {
			return misuse(err)
		}
		if path != "" {
			return t.ECSV().WriteFile(path)
		}
		p.printTable(t)
		for _, a := range t.Find(t.Surfaces[0].Quantity, t.Features()).Grid {
			fmt.Fprintf(p.stdout, "axis      %s %.4g..%.4g %s\n", a.Feature, a.Nodes[0], a.Nodes[len(a.Nodes)-1], a.Feature.Unit())
		}
		return nil
	})
	cmd.Flags().StringVar(&path, "ecsv", "", "write the table to this `file`")
	return cmd
}

// scaled multiplies numbers, NaN stays.
func scaled(x []float64, by float64) []float32 {
	out := make([]float32, len(x))
	for i, v := range x {
		out[i] = float32(v * by)
	}
	return out
}
