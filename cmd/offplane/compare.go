package main

import (
	"context"
	"fmt"
	"slices"

	"github.com/spf13/cobra"

	"offplane/compare"
	"offplane/compare/trial"
)

func (p *program) compareCommand() *cobra.Command {
	var w work
	var g gates
	var from sources
	var method bool
	cmd := &cobra.Command{
		Use:   "compare --truth TRUTH.fits [--inferred MAPS.fits] [--map NAME=FILE.fits[EXT]]... -o DIR",
		Short: "Hold inferred maps against the truth, also your own maps",
		Long: `compare holds inferred maps against the truth and leaves bias.fits, summary.json,
bias.ecsv and run.json in DIR.

--map takes a map of your own: NAME is B, SPEED, NE, ANGLE or DOPPLER_RMS, EXT the name or
number of its extension. --true takes a true map of your own: B_SKY, BTOT_SKY, NE_SKY,
SPEED_SKY, ANGLE_SKY and so on. --inferred and --truth take files whose extensions have
these names. What is not given is null in summary.json.

Maps of your own need helioprojective world coordinates and a unit in BUNIT: G, T, mT;
km/s, m/s; cm-3, m-3, or the logarithm of these, log(cm-3); deg, rad. They may have any
pixels. On those of the truth (of its first map) finer ones are averaged, weighted by the
area they share with a pixel; coarser ones are interpolated bilinearly; NaN has no
weight, and a pixel of less than half of whose area or weight has a value is NaN.
Directions count from solar north, whatever way the image is turned, and are averaged as
undirected lines.

If the truth carries its scenario and the inferred maps their recipe, the bias of the
tracker itself is measured as in run: the same waves in one plane, without noise, on the
same tracks. --method=false leaves that out.`,
		Example: `  offplane compare --truth out/truth.fits --inferred maps/inferred.fits -o verdict
  offplane compare --truth out/truth.fits --map B=mine.fits --map 'NE=mine.fits[DENSITY]' -o verdict
  offplane compare --true B_SKY=model.fits --map B=mine.fits -o verdict`,
		Args: noArguments,
	}
	cmd.RunE = do(func(ctx context.Context, _ []string) error {
		if err := g.parse(); err != nil {
			return err
		}
		if err := from.check(); err != nil {
			return err
		}
		in, err := from.read()
		if err != nil {
			return misuse(err)
		}
		j := job{Command: "compare", files: []string{"bias.fits", "summary.json", "bias.ecsv"}, inputs: in.paths}
		entries := make([]entry, len(in.paths))
		parts := slices.Concat(from.maps, from.truths, []string{fmt.Sprint(method)})
		for i, path := range in.paths {
			if entries[i], err = entryOf(path); err != nil {
				return misuse(err)
			}
			parts = append(parts, entries[i].SHA256)
		}
		j.SHA256 = digest(parts...)
		f, r, bar, err := p.start(&w, j)
		if err != nil {
			return err
		}
		defer f.abandon()
		defer bar.wipe()
		r.Inputs = entries
		p.doubt(in.paths...)
		l := in.scenario
		if l != nil {
			r.Scenario, r.ScenarioSHA256, r.Seed = l.Name, l.SHA256, &l.Scenario.Seed
		}
		o := in.options(from.truth)
		if method && in.recipe {
			bar.update("method", 0, 0)
			o.Plane, err = trial.Plane(ctx, l, in.inferred.Get("ANGLE").Data, trial.Settings{Workers: w.workers, Progress: bar.update})
			if ctx.Err() != nil {
				return ctx.Err()
			}
			bar.wipe()
			if err != nil {
				p.say("the tracker's own bias is not measured: %v", err)
			}
			r.stage("method")
		}
		v, err := compare.Compare(&in.grid, in.truth, in.inferred, o)
		if err != nil {
			return misuse(err)
		}
		if err := writeVerdict(f, &in.grid, v, l, in.files); err != nil {
			return err
		}
		r.stage("verdict")
		if err := f.finish(ctx, r); err != nil {
			return err
		}
		bar.wipe()
		if err := p.printVerdict(&w, &v.Summary); err != nil {
			return err
		}
		if !w.json && !w.quiet {
			for _, q := range in.resampled {
				fmt.Fprintf(p.stdout, "%-8s resampled from pixels of %.3g arcsec: %s\n", q.Map, q.Pixel, q.Method)
			}
			fmt.Fprintf(p.stdout, "verdict  %s\nheights  %s\n", f.path("summary.json"), f.path("bias.ecsv"))
		}
		return g.check(&v.Summary)
	})
	w.flags(cmd)
	g.flags(cmd)
	from.flags(cmd)
	cmd.Flags().BoolVar(&method, "method", true, "measure the tracker's own bias too, if scenario and recipe are known")
	return cmd
}
