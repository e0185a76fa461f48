package main

import (
	"context"
	"fmt"
	"io"
	"math"

	"github.com/spf13/cobra"

	"offplane/compare"
	"offplane/compare/budget"
	"offplane/compare/explain"
	"offplane/compare/report"
	"offplane/compare/stat"
	"offplane/compare/trial"
	"offplane/invert"
	"offplane/scenarios"
	"offplane/synth/fits"
	"offplane/synth/obs"
)

func (p *program) runCommand() *cobra.Command {
	var w work
	var c choice
	var g gates
	var o runOptions
	cmd := &cobra.Command{
		Use:   "run SCENARIO -o DIR",
		Short: "Make the data of a known corona, invert them, report the bias",
		Long: `run takes a scenario (the name of an embedded one, or a file) through the whole job
and leaves in DIR

  report.html       the verdict for people
  summary.json      the verdict for machines
  bias.ecsv         the bias by height
  bias.fits         inferred over true, pixel by pixel, and METHOD_RATIO: what the
                    tracker alone makes of the same waves on one plane, without noise
  truth.fits        the corona as it was
  observation.fits  the data, without their frames unless --frames is given
  inferred.fits     what the inversion made of them
  series.fits       the Doppler series it used
  run.json          command line, versions, timings, sums of the files; written last

With --budget the report also shows the error budget that "offplane budget" left in a
folder, of the same scenario; seed and limits of the image may differ.

The same scenario, seed and program give the same bytes in every file but run.json.`,
		Example: `  offplane run quick -o out
  offplane run quiet-belt --set camera.cadence=15s --seed 7 -o out15
  offplane run my.yaml -o out --require 'valid_fraction>=0.4'
  offplane run quick -o out --budget terms`,
		Args: argument("the name of a scenario or a file"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		l, err := c.load(args[0])
		if err != nil {
			return err
		}
		if err := g.parse(); err != nil {
			return err
		}
		return p.run(ctx, l, &w, &g, o)
	})
	w.flags(cmd)
	c.flags(cmd)
	g.flags(cmd)
	cmd.Flags().BoolVar(&o.frames, "frames", false, "keep the frames in observation.fits, so that invert can read it")
	cmd.Flags().StringVar(&o.budget, "budget", "", "`folder` that offplane budget left for the same scenario: show it in the report")
	return cmd
}

type runOptions struct {
	frames bool   // keep them
	budget string // folder; empty: none
}

func (p *program) run(ctx context.Context, l *scenarios.Loaded, w *work, g *gates, opt runOptions) error {
	j := job{Command: "run", SHA256: l.SHA256, files: []string{
		"truth.fits", "observation.fits", "inferred.fits", "bias.fits", "series.fits", "summary.json", "bias.ecsv", "report.html"}}
	var terms *budget.Budget
	var inputs []entry
	if opt.budget != "" {
		b, e, err := readBudget(opt.budget, l)
		if err != nil {
			return misuse(err)
		}
		terms, inputs, j.inputs, j.SHA256 = b, []entry{e}, []string{e.Name}, digest(l.SHA256, e.SHA256)
	}
	f, r, bar, err := p.start(w, j)
	if err != nil {
		return err
	}
	r.Inputs = inputs
	defer f.abandon()
	defer bar.wipe()
	v := l.Scenario.Inversion
	emitter, file, err := trial.Model("line", v.Line, v.Helium)
	if err != nil {
		return misuse(err)
	}
	var inversion *invert.Inversion
	o, err := p.observe(ctx, l, w, f, r, bar, opt.frames, func(head *obs.Observation) (take func(*obs.Observation) error, err error) {
		inversion, err = invert.Begin(head, emitter, trial.Options(v))
		return func(part *obs.Observation) error { return inversion.Take(ctx, part, w.workers) }, err
	})
	if err != nil {
		return err
	}
	bar.update("inversion", 0, 0)
	if o.Inferred, err = inversion.Finish(ctx, w.workers, bar.stageFunc("inversion")); err != nil {
		return computing(ctx, err)
	}
	if err := p.writeInferred(ctx, o, v, file, f, r, bar); err != nil {
		return err
	}
	bar.update("method", 0, 0)
	o.Plane, err = trial.Plane(ctx, l, o.Inferred.Maps.Get("ANGLE").Data, trial.Settings{Workers: w.workers, Progress: bar.update})
	if err != nil {
		return computing(ctx, err)
	}
	r.stage("method")
	bar.update("verdict", 0, 0)
	if o.Verdict, err = trial.Judge(l, o.Truth.Grid, o.Truth.Maps, o.Inferred.Maps, o.Plane, o.Files, version().Version); err != nil {
		return err
	}
	if err := writeVerdict(f, &o.Truth.Grid, o.Verdict, l, o.Files); err != nil {
		return err
	}
	pixel, err := representative(l, o)
	if err != nil {
		return err
	}
	err = f.write("report.html", func(w io.Writer) error {
		return report.WriteHTML(w, &report.Report{
			Grid: o.Truth.Grid, Truth: o.Truth.Maps, Inferred: o.Inferred.Maps, Verdict: o.Verdict, Setup: setup(&l.Scenario), Pixel: pixel, Budget: terms,
		})
	})
	if err != nil {
		return err
	}
	r.stage("verdict")
	if err := f.finish(ctx, r); err != nil {
		return err
	}
	bar.wipe()
	if err := p.printVerdict(w, &o.Verdict.Summary); err != nil {
		return err
	}
	if !w.json && !w.quiet {
		fmt.Fprintf(p.stdout, "report   %s\n", f.path("report.html"))
		fmt.Fprintf(p.stdout, "next     offplane compare --truth %s --map B=YOURS.fits -o DIR    (your own map of it)\n", f.path("truth.fits"))
	}
	return g.check(&o.Verdict.Summary)
}

// representative explains the pixel that stands for the run; nil if none is valid.
func representative(l *scenarios.Loaded, o *trial.Outcome) (*explain.Pixel, error) {
	s, err := explain.Of(l, o)
	if err != nil {
		return nil, err
	}
	ix, iy, ok := s.Representative()
	if !ok {
		return nil, nil
	}
	return s.At(ix, iy)
}

// writeVerdict writes the files that run and compare share; of a user's own truth there
// is no scenario.
func writeVerdict(f *folder, g *obs.Grid, v *compare.Verdict, l *scenarios.Loaded, files []compare.File) error {
	var tables []fits.Table
	if l != nil {
		tables = append(tables, scenarioHDU(l, files))
	}
	if err := obs.WriteMaps(f.path("bias.fits"), g, v.Maps, primary(), tables...); err != nil {
		return err
	}
	if err := f.write("summary.json", v.Summary.WriteJSON); err != nil {
		return err
	}
	return v.Heights.WriteFile(f.path("bias.ecsv"))
}

// printVerdict writes the verdict to standard output.
func (p *program) printVerdict(w *work, s *compare.Summary) error {
	if w.json {
		return s.WriteJSON(p.stdout)
	}
	if w.quiet {
		return nil
	}
	fmt.Fprintf(p.stdout, "inferred over true in the plane of the sky: median (16-84 %%)\n")
	for _, q := range []struct {
		name string
		s    *stat.Summary
	}{{"field", s.Ratios.Field.Sky}, {"speed", s.Ratios.Speed.Sky}, {"density", s.Ratios.Density.Sky}} {
		switch {
		case q.s == nil:
			fmt.Fprintf(p.stdout, "%-8s not compared\n", q.name)
		case q.s.Count == 0:
			fmt.Fprintf(p.stdout, "%-8s no pixel with a value\n", q.name)
		default:
			fmt.Fprintf(p.stdout, "%-8s %.3f (%.3f-%.3f)\n", q.name, q.s.Median, q.s.P16, q.s.P84)
		}
	}
	if id := &s.Identity; id.Method != nil && id.Method.Count > 0 {
		fmt.Fprintf(p.stdout, "of the speed, medians: method alone %.3f, line of sight %.3f, camera and rest %.3f\n",
			math.Exp(id.Method.Median), math.Exp(id.Sight.Median), math.Exp(id.Rest.Median))
	}
	if s.Ratios.Field.Sky != nil {
		fmt.Fprintf(p.stdout, "valid    %d of %d pixels (%.1f %%)\n", s.Pixels.Valid, s.Pixels.Total, 100*float64(s.Pixels.ValidFraction))
	}
	return nil
}
