package main

import (
	"context"
	"fmt"

	"github.com/spf13/cobra"

	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth/obs"
)

func (p *program) synthCommand() *cobra.Command {
	var w work
	var c choice
	var frames bool
	cmd := &cobra.Command{
		Use:   "synth SCENARIO -o DIR",
		Short: "Make the data of a known corona, and its truth apart",
		Long: `synth makes the observation of a scenario, with its frames, and the true maps of the
corona behind it. It leaves observation.fits, truth.fits and run.json in DIR; only
truth.fits says what the corona was.`,
		Example: `  offplane synth quick -o data
  offplane invert data/observation.fits -o maps`,
		Args: argument("the name of a scenario or a file"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		l, err := c.load(args[0])
		if err != nil {
			return err
		}
		f, r, bar, err := p.start(&w, job{Command: "synth", SHA256: l.SHA256, files: []string{"truth.fits", "observation.fits"}})
		if err != nil {
			return err
		}
		defer f.abandon()
		defer bar.wipe()
		o, err := p.observe(ctx, l, &w, f, r, bar, frames, nil)
		if err != nil {
			return err
		}
		if err := f.finish(ctx, r); err != nil {
			return err
		}
		bar.wipe()
		if w.json {
			return r.encode(p.stdout)
		}
		if !w.quiet {
			fmt.Fprintf(p.stdout, "data     %s: %d pixels, %d frames\n", f.path("observation.fits"), len(o.Observation.Pixels), len(o.Observation.LineExposures(1)))
			fmt.Fprintf(p.stdout, "truth    %s\n", f.path("truth.fits"))
			if frames {
				fmt.Fprintf(p.stdout, "next     offplane invert %s -o DIR\n", f.path("observation.fits"))
			}
		}
		return nil
	})
	w.flags(cmd)
	c.flags(cmd)
	cmd.Flags().BoolVar(&frames, "frames", true, "keep the frames in observation.fits; --frames=false: their means only")
	return cmd
}

// observe makes observation and truth and writes them. Begin, if not nil, is given the head
// of the observation before it is made and returns what takes its parts.
func (p *program) observe(ctx context.Context, l *scenarios.Loaded, w *work, f *folder, r *record, bar *progress, frames bool, begin func(head *obs.Observation) (func(part *obs.Observation) error, error)) (*trial.Outcome, error) {
	r.Scenario, r.ScenarioSHA256, r.Seed = l.Name, l.SHA256, &l.Scenario.Seed
	bar.update("corona", 0, 0)
	o, rec, err := trial.Begin(ctx, l, trial.Settings{Workers: w.workers})
	if err != nil {
		// Whatever the corona or the data refuse was asked for by the scenario.
		return nil, computing(ctx, err)
	}
	for _, file := range o.Files {
		e, err := entryOf(file.Path)
		if err != nil {
			return nil, err
		}
		r.Inputs = append(r.Inputs, e)
		p.doubt(file.Path)
	}
	take := func(*obs.Observation) error { return nil }
	if begin != nil {
		if take, err = begin(rec.Head); err != nil {
			return nil, computing(ctx, err)
		}
	}
	out, err := obs.CreateObservation(f.path("observation.fits"), rec.Head, primary(), frames)
	if err != nil {
		return nil, err
	}
	defer out.Abort()
	var unwritten error
	o.Observation, o.Truth, err = rec.Parts(ctx, w.workers, bar.stageFunc("synthesis"), func(part *obs.Observation) error {
		if unwritten = out.Add(part); unwritten != nil {
			return unwritten
		}
		return take(part)
	})
	if unwritten != nil {
		return nil, unwritten
	}
	if err != nil {
		return nil, computing(ctx, err)
	}
	r.stage("synthesis")
	bar.update("writing", 0, 0)
	if err := obs.WriteMaps(f.path("truth.fits"), &o.Truth.Grid, o.Truth.Maps, primary(), scenarioHDU(l, o.Files)); err != nil {
		return nil, err
	}
	if err := out.Close(o.Observation); err != nil {
		return nil, err
	}
	r.stage("writing")
	return o, ctx.Err()
}

// computing turns an error of a computation, which reads and writes no results, into
// one of its input, unless it was cancelled.
func computing(ctx context.Context, err error) error {
	if err == nil || ctx.Err() != nil {
		return err
	}
	return misuse(err)
}
