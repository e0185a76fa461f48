package main

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth/obs"
)

// comparable lists the maps that may be given by --map.
var comparable = []string{"B", "SPEED", "NE", "ANGLE", "DOPPLER_RMS"}

func (p *program) compareCommand() *cobra.Command {
	var w work
	var g gates
	var truth, inferred string
	var maps []string
	cmd := &cobra.Command{
		Use:   "compare --truth TRUTH.fits [--inferred MAPS.fits] [--map NAME=FILE.fits[EXT]]... -o DIR",
		Short: "Hold inferred maps against the truth, also your own maps",
		Long: `compare holds inferred maps against a truth.fits that run or synth wrote and leaves
bias.fits, summary.json, bias.ecsv and run.json in DIR.

--map takes a map of your own: NAME is B [G], SPEED [km/s], NE [cm-3], ANGLE [deg] or
DOPPLER_RMS [km/s], EXT the name or number of its extension. It must be on the pixels
of the truth and say its unit in BUNIT. What is not given is null in summary.json.`,
		Example: `  offplane compare --truth out/truth.fits --inferred maps/inferred.fits -o verdict
  offplane compare --truth out/truth.fits --map B=mine.fits --map 'NE=mine.fits[DENSITY]' -o verdict`,
		Args: noArguments,
	}
	cmd.RunE = do(func(ctx context.Context, _ []string) error {
		if err := g.parse(); err != nil {
			return err
		}
		switch {
		case truth == "":
			return misusef("offplane compare needs the truth: --truth TRUTH.fits")
		case inferred == "" && len(maps) == 0:
			return misusef("offplane compare needs maps to hold against the truth: --inferred MAPS.fits or --map NAME=FILE.fits")
		}
		in, err := readCompared(truth, inferred, maps)
		if err != nil {
			return misuse(err)
		}
		j := job{Command: "compare", files: []string{"bias.fits", "summary.json", "bias.ecsv"}, inputs: in.paths}
		entries := make([]entry, len(in.paths))
		parts := append([]string{}, maps...)
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
		l := in.scenario
		r.Inputs, r.Scenario, r.ScenarioSHA256, r.Seed = entries, l.Name, l.SHA256, &l.Scenario.Seed
		v, err := trial.Judge(l, in.grid, in.truth, in.inferred, nil, in.files, version().Version)
		if err != nil {
			return misuse(err)
		}
		if err := writeVerdict(f, &in.grid, v, l, in.files); err != nil {
			return err
		}
		r.stage("verdict")
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := f.finish(r); err != nil {
			return err
		}
		bar.wipe()
		if err := p.printVerdict(&w, &v.Summary); err != nil {
			return err
		}
		if !w.json && !w.quiet {
			fmt.Fprintf(p.stdout, "verdict  %s\nheights  %s\n", f.path("summary.json"), f.path("bias.ecsv"))
		}
		return g.check(&v.Summary)
	})
	w.flags(cmd)
	g.flags(cmd)
	cmd.Flags().StringVar(&truth, "truth", "", "`file` with the true maps")
	cmd.Flags().StringVar(&inferred, "inferred", "", "`file` with inferred maps that run or invert wrote")
	cmd.Flags().StringArrayVar(&maps, "map", nil, "a map of your own: `NAME=FILE[EXT]`; repeatable")
	return cmd
}

// compared is all that compare reads.
type compared struct {
	scenario        *scenarios.Loaded
	files           []trial.File
	grid            obs.Grid
	truth, inferred obs.Maps
	paths           []string
}

func readCompared(truth, inferred string, maps []string) (*compared, error) {
	c := &compared{paths: []string{truth}}
	var err error
	if c.scenario, c.files, err = readScenario(truth); err != nil {
		return nil, err
	}
	if c.grid, c.truth, err = obs.ReadMaps(truth); err != nil {
		return nil, err
	}
	// The recipe is that of the maps, which need not be the scenario's; of a map
	// from elsewhere it is not known.
	v := scenarios.Inversion{}
	if inferred != "" {
		c.paths = append(c.paths, inferred)
		var g obs.Grid
		if g, c.inferred, err = obs.ReadMaps(inferred); err != nil {
			return nil, err
		}
		if err := sameSky(&c.grid, &g); err != nil {
			return nil, fmt.Errorf("%s: %w", inferred, err)
		}
		if !slices.ContainsFunc(c.inferred, func(m obs.Map) bool { return slices.Contains(comparable, m.Name) }) {
			return nil, fmt.Errorf("%s holds none of the maps %s: is it a file of inferred maps?", inferred, strings.Join(comparable, ", "))
		}
		if v, _, err = readInversion(inferred); err != nil {
			return nil, err
		}
	}
	l := *c.scenario
	l.Scenario.Inversion = v
	c.scenario = &l
	for _, s := range maps {
		name, file, err := cut("map", s, "NAME=FILE.fits or NAME=FILE.fits[EXT]")
		if err != nil {
			return nil, err
		}
		name = strings.ToUpper(name)
		if !slices.Contains(comparable, name) {
			return nil, fmt.Errorf("--map %s: NAME must be one of %s", s, strings.Join(comparable, ", "))
		}
		ext := ""
		if i := strings.LastIndex(file, "["); i > 0 && strings.HasSuffix(file, "]") {
			file, ext = file[:i], file[i+1:len(file)-1]
		}
		g, m, err := obs.ReadMap(file, ext)
		if err != nil {
			return nil, fmt.Errorf("--map %s: %w", name, err)
		}
		if err := sameSky(&c.grid, &g); err != nil {
			return nil, fmt.Errorf("--map %s: %s: %w", name, file, err)
		}
		m = obs.Map{Name: name, Unit: m.Unit, About: m.About, Data: m.Floats()}
		if old := c.inferred.Get(name); old != nil {
			*old = m
		} else {
			c.inferred = append(c.inferred, m)
		}
		c.paths = append(c.paths, file)
	}
	return c, nil
}

// sameSky returns an error unless the pixels of two grids coincide on the sky to a
// twentieth of a pixel: headers written elsewhere round.
func sameSky(truth, g *obs.Grid) error {
	if g.Nx != truth.Nx || g.Ny != truth.Ny {
		return fmt.Errorf("%d x %d pixels; the truth has %d x %d", g.Nx, g.Ny, truth.Nx, truth.Ny)
	}
	h := *g
	h.Distance = truth.Distance // maps agree in angle, whatever distance a header says
	worst := 0.0
	for _, c := range [][2]int{{0, 0}, {g.Nx - 1, 0}, {0, g.Ny - 1}, {g.Nx - 1, g.Ny - 1}} {
		px, py := truth.PixelAt(h.Sky(c[0], c[1]))
		worst = max(worst, math.Hypot(px-float64(c[0]), py-float64(c[1])))
	}
	if !(worst < 0.05) {
		return fmt.Errorf("its pixels lie up to %.3g pixels beside those of the truth: bring it onto the grid of the truth first", worst)
	}
	return nil
}
