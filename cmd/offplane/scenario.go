package main

import (
	"context"
	"fmt"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"offplane/scenarios"
)

func (p *program) scenarioCommand() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "scenario",
		Short: "The library of scenarios, and a check of your own",
		Args:  noCommand,
		RunE:  func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	cmd.AddCommand(p.scenarioList(), p.scenarioShow(), p.scenarioCheck())
	return cmd
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
	var c choice
	cmd := &cobra.Command{
		Use:   "show SCENARIO",
		Short: "Print a scenario as it was written, or with every default filled in",
		Example: `  offplane scenario show quiet-belt > mine.yaml
  offplane scenario show quick --resolved --set camera.cadence=15s`,
		Args: argument("the name of a scenario or a file"),
	}
	cmd.RunE = do(func(_ context.Context, args []string) error {
		l, err := c.load(args[0])
		if err != nil {
			return err
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
	cmd.Flags().BoolVar(&resolved, "resolved", false, "with every default filled in; so are files and changed scenarios in any case")
	cmd.Flags().BoolVar(&json, "json", false, "one JSON document with the resolved scenario")
	return cmd
}

func (p *program) scenarioCheck() *cobra.Command {
	var json bool
	var workers int
	var c choice
	cmd := &cobra.Command{
		Use:   "check SCENARIO",
		Short: "Check a scenario and say what its run would take",
		Long: `check reads a scenario and prints every mistake with its place, or what a run of it
would take: pixels, frames, and estimates of time, memory and disk. It also estimates
what its data would be worth: at a few heights, looking through the streamer, the light
of the first line in one exposure and the rms error of one Doppler shift. No corona is
built, so it takes no time; a pixel that looks through a hole gets less light.`,
		Example: `  offplane scenario check quiet-belt
  offplane scenario check mine.yaml --set camera.exposure=5s`,
		Args: argument("the name of a scenario or a file"),
	}
	cmd.RunE = do(func(_ context.Context, args []string) error {
		l, err := c.load(args[0])
		if err != nil {
			return err
		}
		q, err := predict(l, workers)
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
	if len(q.Heights) == 0 {
		return nil
	}
	fmt.Fprintf(p.stdout, "\nfirst line through the streamer, one tuning and exposure:\n")
	t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprint(t, "r/Rsun\tpeak/ppm\t")
	for _, x := range s.Camera.Tunings {
		fmt.Fprintf(t, "photons at %s\t", x)
	}
	fmt.Fprintln(t, "Doppler noise/(km/s)\t")
	for _, d := range q.Heights {
		fmt.Fprintf(t, "%.2f\t%.3g\t", d.Height, d.Peak)
		for _, n := range d.Photons {
			fmt.Fprintf(t, "%.3g\t", n)
		}
		fmt.Fprintf(t, "%.3g\t\n", d.Noise)
	}
	return t.Flush()
}
