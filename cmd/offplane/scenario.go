package main

import (
	"context"
	"fmt"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"offplane/compare/report"
	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth"
)

func (p *program) scenarioCommand() *cobra.Command {
	return group("scenario", "The library of scenarios, and a check of your own", p.scenarioList(), p.scenarioShow(), p.scenarioCheck())
}

func (p *program) scenarioList() *cobra.Command {
	var json bool
	cmd := &cobra.Command{Use: "list", Short: "List the embedded scenarios", Args: noArguments}
	cmd.RunE = do(func(context.Context, []string) error {
		type item struct {
			Name  string `json:"name"`
			About string `json:"about"`
		}
		var list []item
		for _, name := range scenarios.Names() {
			about, err := scenarios.About(name)
			if err != nil {
				return err
			}
			list = append(list, item{name, about})
		}
		if json {
			return writeJSON(p.stdout, struct {
				Schema    int    `json:"schema"`
				Scenarios []item `json:"scenarios"`
			}{1, list})
		}
		t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', 0)
		for _, i := range list {
			fmt.Fprintf(t, "%s\t%s\n", i.Name, i.About)
		}
		return t.Flush()
	})
	cmd.Flags().BoolVar(&json, "json", false, "one JSON document")
	return cmd
}

func (p *program) scenarioShow() *cobra.Command {
	var resolved, json bool
	var figure figureFile
	var c choice
	cmd := &cobra.Command{
		Use:   "show SCENARIO",
		Short: "Print a scenario as it was written, or with every default filled in",
		Example: `  offplane scenario show quiet-belt > mine.yaml
  offplane scenario show quick --resolved --set camera.cadence=15s
  offplane scenario show two-loops --figure corona.png`,
		Args: argument("the name of a scenario or a file"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		l, err := c.load(args[0])
		if err != nil {
			return err
		}
		if figure.path != "" {
			return p.showFigure(ctx, l, &figure)
		}
		if json {
			return writeJSON(p.stdout, struct {
				Schema int    `json:"schema"`
				Name   string `json:"name"`
				About  string `json:"about"`
				SHA256 string `json:"sha256"`
				YAML   string `json:"yaml"`
			}{1, l.Name, l.Scenario.About, l.SHA256, string(l.Canonical)})
		}
		text := l.Canonical
		if source, err := scenarios.Source(args[0]); err == nil && !resolved && !c.changed() {
			text = source // with its comments
		}
		_, err = p.stdout.Write(text)
		return err
	})
	c.flags(cmd)
	cmd.Flags().Var(&figure, "figure", "draw the corona into this PNG or SVG `file` instead: density, field lines, border of the closed region")
	cmd.Flags().BoolVar(&resolved, "resolved", false, "with every default filled in; so are files and changed scenarios in any case")
	cmd.Flags().BoolVar(&json, "json", false, "one JSON document with the resolved scenario")
	return cmd
}

// showFigure draws the truth at a glance and prints how much of its light comes from
// where the kink speed of low beta does not hold.
func (p *program) showFigure(ctx context.Context, l *scenarios.Loaded, figure *figureFile) error {
	light, _, err := trial.Light(&l.Scenario)
	if err != nil {
		return misuse(err)
	}
	scene, err := synth.NewScene(ctx, &l.Scenario, light, 0)
	if err != nil {
		return misuse(err)
	}
	v, err := scene.Survey(ctx, 0)
	if err != nil {
		return err
	}
	if err := figure.write(func(f report.Format) []byte { return report.CoronaFigure(v, l.Name, f) }); err != nil {
		return err
	}
	_, err = fmt.Fprintf(p.stdout, "%.2g %% of the emission comes from where beta > 1; the kink speed of low beta fails there\n", 100*v.HighBeta)
	return err
}

func (p *program) scenarioCheck() *cobra.Command {
	var json bool
	var workers int
	var c choice
	cmd := &cobra.Command{
		Use:   "check SCENARIO",
		Short: "Check a scenario and say what its run would take",
		Long: `check reads a scenario and prints every mistake with its place, or what a run of it
would take: pixels, frames, and estimates of time, memory and disk. It also says what the
data would be worth: at a few heights, at the limb of the field of view that is nearest
to the equator, the electrons of each line in one tuning and exposure, and the rms error
of the Doppler shift, of one frame and in the inversion's band. For that the corona is
built, without waves: a second or two, longer for a corona without symmetry.`,
		Example: `  offplane scenario check quiet-belt
  offplane scenario check mine.yaml --set camera.exposure=5s`,
		Args: argument("the name of a scenario or a file"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error {
		l, err := c.load(args[0])
		if err != nil {
			return err
		}
		q, err := predict(ctx, l, workers)
		if err != nil {
			return misuse(err)
		}
		if json {
			return writeJSON(p.stdout, q)
		}
		return p.printPrediction(q, &l.Scenario)
	})
	c.flags(cmd)
	cmd.Flags().IntVar(&workers, "workers", 0, "cores to reckon with; 0: all")
	cmd.Flags().BoolVar(&json, "json", false, "one JSON document")
	return cmd
}

func (p *program) printPrediction(q *prediction, s *scenarios.Scenario) error {
	fmt.Fprintf(p.stdout, "scenario  %s, valid\nsha256    %s\n", q.Scenario, q.SHA256)
	fmt.Fprintf(p.stdout, "pixels    %d\n", q.Pixels)
	fmt.Fprintf(p.stdout, "frames    %d of the first line, %d of the second\n", q.Frames, q.Second)
	fmt.Fprintf(p.stdout, "samples   %.0f per line of sight\n\n", q.Samples)
	fmt.Fprintf(p.stdout, "estimates of the run with %d workers, good to a factor of two:\n", q.Workers)
	fmt.Fprintf(p.stdout, "time      %s\n", roundTime(time.Duration(q.Seconds*float64(time.Second))))
	fmt.Fprintf(p.stdout, "memory    %.2g GB\n", q.Memory/1e9)
	fmt.Fprintf(p.stdout, "disk      %.2g GB; %.2g GB with the frames\n", q.Disk/1e9, q.Framed/1e9)
	if why := coarse(s); why != "" {
		fmt.Fprintf(p.stdout, "caution   %s\n", why)
	}
	if len(q.Heights) == 0 {
		return nil
	}
	fmt.Fprintf(p.stdout, "\nat position angle %.0f deg, one tuning and exposure:\n", q.Heights[0].PA)
	t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprint(t, "line/nm\tr/Rsun\tpeak/ppm\t")
	for _, x := range s.Camera.Tunings {
		fmt.Fprintf(t, "e- at %s\t", x)
	}
	fmt.Fprintln(t, "e- of continuum\tDoppler noise/(km/s)\tin band/(km/s)\t")
	for i, name := range []string{"1074.7", "1079.8"} {
		for _, d := range q.Heights {
			l := &d.Lines[i]
			fmt.Fprintf(t, "%s\t%.2f\t%.3g\t", name, d.Height, l.Peak)
			for _, n := range l.Electrons {
				fmt.Fprintf(t, "%.3g\t", n)
			}
			fmt.Fprintf(t, "%.3g\t%.3g\t%.3g\t\n", l.Continuum, l.Noise, l.InBand)
		}
	}
	return t.Flush()
}
