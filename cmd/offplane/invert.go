package main

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"offplane/compare"
	"offplane/compare/trial"
	"offplane/invert"
	"offplane/scenarios"
	"offplane/synth/fits"
	"offplane/synth/obs"
)

func (p *program) invertCommand() *cobra.Command {
	var w work
	var own ownFrames
	var set []string
	var with, estimator string
	cmd := &cobra.Command{
		Use:   "invert OBSERVATION.fits -o DIR",
		Short: "Invert frames to maps of speed, density and field, blind",
		Long: `invert applies the standard inversion to an observation with its frames. It leaves
inferred.fits, series.fits and run.json in DIR.

Frames of your own are taken too: tunings (x, y, wavelength, time) with a second line, or
Doppler shifts (x, y, time) with a map of the line ratio or the density. What their
headers do not say, flags do.

The recipe is the inversion section of a scenario by itself: --with reads it from a file,
--set changes single keys, and the rest is the default of all scenarios.`,
		Example: `  offplane invert data/observation.fits -o maps
  offplane invert data/observation.fits -o maps --with recipe.yaml --set track=21
  offplane invert mine.fits --second-line second.fits --filter 0.13 --estimator pair,lag -o maps`,
		Args: argument("an observation file"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		keys := inversionKeys(set)
		if estimator != "" {
			keys = append(keys, "estimators=["+estimator+"]")
		}
		v, err := scenarios.LoadInversion(with, keys...)
		if err != nil {
			return misuse(err)
		}
		paths := append([]string{args[0]}, own.inputs()...)
		parts := []string{string(scenarios.EncodeInversion(v)), fmt.Sprintf("%+v", own)}
		var ins []entry
		for _, path := range paths {
			in, err := entryOf(path)
			if err != nil {
				return misuse(err)
			}
			ins = append(ins, in)
			parts = append(parts, in.SHA256)
		}
		m, _, err := trial.Model("line", v.Line, v.Helium)
		if err != nil {
			return misuse(err)
		}
		j := job{Command: "invert", SHA256: digest(parts...), files: []string{"inferred.fits", "series.fits"}, inputs: paths}
		f, r, bar, err := p.start(&w, j)
		if err != nil {
			return err
		}
		defer f.abandon()
		defer bar.wipe()
		r.Inputs = append(r.Inputs, ins...)
		bar.update("reading", 0, 0)
		p.doubt(paths...)
		o, err := own.read(cmd, args[0], m.RestWavelengths())
		if err != nil {
			return misuse(err)
		}
		r.stage("reading")
		r.ScenarioSHA256 = o.Scenario
		out := &trial.Outcome{Observation: o}
		if err := p.infer(ctx, out, v, &w, f, r, bar); err != nil {
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
			valid := 0
			for _, flag := range out.Inferred.Maps.Get("FLAG").Ints {
				if flag&invert.Blocking == 0 {
					valid++
				}
			}
			fmt.Fprintf(p.stdout, "maps     %s\n", f.path("inferred.fits"))
			fmt.Fprintf(p.stdout, "valid    %d of %d pixels (%.1f %%)\n", valid, len(o.Pixels), 100*float64(valid)/float64(len(o.Pixels)))
			fmt.Fprintf(p.stdout, "next     offplane compare --truth TRUTH.fits --inferred %s -o DIR\n", f.path("inferred.fits"))
		}
		return nil
	})
	w.flags(cmd)
	own.flags(cmd)
	cmd.Flags().StringVar(&estimator, "estimator", "", "estimators of the phase speed, the first for SPEED and B: lag, unsplit, pair; short for --set estimators=[...]")
	cmd.Flags().StringVar(&with, "with", "", "`file` with the inversion section")
	cmd.Flags().StringArrayVar(&set, "set", nil, "change the inversion section: `KEY=VALUE`, such as track=21; repeatable")
	completeKeys(cmd, scenarios.Inversion{})
	completeWords(cmd, "estimator", "lag", "unsplit", "pair")
	return cmd
}

// readFrames reads an observation that can be inverted.
func readFrames(path string) (*obs.Observation, error) {
	o, err := obs.ReadObservation(path)
	if err != nil {
		return nil, err
	}
	if o.Frames[0] == nil {
		return nil, fmt.Errorf("%s: has no frames to invert, only their means: write it with offplane synth, or offplane run --frames", path)
	}
	return o, nil
}

// infer inverts an observation and writes maps and series.
func (p *program) infer(ctx context.Context, o *trial.Outcome, v scenarios.Inversion, w *work, f *folder, r *record, bar *progress) error {
	emitter, file, err := trial.Model("line", v.Line, v.Helium)
	if err != nil {
		return misuse(err)
	}
	bar.update("inversion", 0, 0)
	o.Inferred, err = invert.Invert(ctx, o.Observation, emitter, trial.Options(v), w.workers, bar.stageFunc("inversion"))
	if err != nil {
		return computing(ctx, err)
	}
	return p.writeInferred(ctx, o, v, file, f, r, bar)
}

// writeInferred writes maps and series; file holds the atomic data of the inversion, if
// they are not the embedded ones.
func (p *program) writeInferred(ctx context.Context, o *trial.Outcome, v scenarios.Inversion, file *compare.File, f *folder, r *record, bar *progress) error {
	r.stage("inversion")
	bar.update("writing", 0, 0)
	var files []compare.File
	if file != nil {
		files = append(files, *file)
		e, err := entryOf(file.Path)
		if err != nil {
			return err
		}
		if !slices.Contains(r.Inputs, e) {
			r.Inputs = append(r.Inputs, e)
		}
	}
	g := &o.Observation.Grid
	if err := obs.WriteMaps(f.path("inferred.fits"), g, o.Inferred.Maps, primary(), inversionHDU(v, files...)); err != nil {
		return err
	}
	if err := obs.WriteSeries(f.path("series.fits"), g, o.Observation.Pixels, o.Inferred.Series, primary(), fits.Header{{Key: "TIMESTEP", Value: o.Inferred.Cadence, Comment: "[s] between the values of a series"}}); err != nil {
		return err
	}
	r.stage("writing")
	return ctx.Err()
}

// digest returns the SHA-256 of texts and where they end.
func digest(parts ...string) string {
	h := sha256.New()
	for _, s := range parts {
		fmt.Fprintf(h, "%d\n%s", len(s), s)
	}
	return hex.EncodeToString(h.Sum(nil))
}

// cut splits name=value.
func cut(flag, s, form string) (name, value string, err error) {
	name, value, ok := strings.Cut(s, "=")
	if !ok || name == "" || value == "" {
		return "", "", fmt.Errorf("--%s %s: must be %s", flag, s, form)
	}
	return name, value, nil
}
