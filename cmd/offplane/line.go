package main

import (
	"context"
	"encoding"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"offplane/compare/report"
	"offplane/compare/trial"
	"offplane/model"
	"offplane/scenarios"
	"offplane/scenarios/strict"
	"offplane/scenarios/units"
	"offplane/synth/ecsv"
	"offplane/synth/line"
)

func (p *program) lineCommand() *cobra.Command {
	var density, height, temperature, ratio, law, table string
	var figure figureFile
	var set []string
	var json bool
	cmd := &cobra.Command{
		Use:   "line",
		Short: "The physics of the two lines: emissivities, their ratio, density from a ratio",
		Long: `line prints what the atomic model says of the Fe XIII lines at 1074.7 and 1079.8 nm, for
every combination of the densities, heights and temperatures given:

  j        emissivity [erg cm-3 s-1 sr-1]
  ratio    j(1079.8)/j(1074.7), of energies
  exponent d ln j / d ln n_e at fixed temperature and height

--ratio turns it round: the density that gives a ratio, and the factor d ln n_e / d ln ratio
by which a small relative error of the ratio grows.

--law takes the densities from a published profile at its equator, and adds the total
radial slope -d ln j / d ln r: the fall of the density and that of the disc's light.

--figure draws the ratio, and the error amplification of the density, against density for
up to six combinations of height and temperature. --ecsv writes the rows as a table with
units.

Lists are separated by commas; numbers are in cm-3, solar radii and K, or carry a unit.`,
		Example: `  offplane line --density 1e7,1e8,1e9 --height 1.1,1.3
  offplane line --ratio 0.3,0.5 --height 1.1 --temperature '1.6 MK'
  offplane line --law gibson-1999 --height 1.05,1.1,1.2,1.35`,
		Args: noArguments,
	}
	cmd.RunE = do(func(_ context.Context, _ []string) error {
		if cmd.Flags().Changed("density") && (ratio != "" || law != "") || ratio != "" && law != "" {
			return misusef("--density, --ratio and --law exclude each other")
		}
		ns, err := list[units.Density]("density", density, "cm-3")
		if err != nil {
			return misuse(err)
		}
		rs, err := list[units.Height]("height", height, "Rsun")
		if err != nil {
			return misuse(err)
		}
		ts, err := list[units.Temperature]("temperature", temperature, "K")
		if err != nil {
			return misuse(err)
		}
		for i := range ts {
			ts[i] = units.Temperature(ts[i]).Kelvin()
		}
		base, err := scenarios.Resolve("defaults", scenarios.Default())
		if err != nil {
			return err
		}
		l, err := base.With(set...)
		if err != nil {
			return misuse(err)
		}
		m, _, err := trial.Model("line", l.Scenario.Line, l.Scenario.Corona.Helium)
		if err != nil {
			return misuse(err)
		}
		if figure.path != "" {
			if err := lineFigure(m, &figure, rs, ts); err != nil {
				return err
			}
		}
		if table != "" && (ratio != "" || law != "") {
			return misusef("--ecsv goes with --density, not with --ratio or --law")
		}
		switch {
		case ratio != "":
			q, err := numbers("ratio", ratio)
			if err != nil {
				return misuse(err)
			}
			return p.lineDensities(m, q, rs, ts, json)
		case law != "":
			return p.lineLaw(m, law, l.Scenario.Corona.Helium, rs, ts, json)
		}
		return p.lineRows(m, ns, rs, ts, json, table)
	})
	f := cmd.Flags()
	f.StringVar(&density, "density", "1e7,3e7,1e8,3e8,1e9", "electron densities")
	f.StringVar(&height, "height", "1.1", "distances from the Sun's centre")
	f.StringVar(&temperature, "temperature", "1.6e6", "temperatures")
	f.StringVar(&ratio, "ratio", "", "ratios of energies to turn into densities")
	f.StringVar(&law, "law", "", "published density profile, such as gibson-1999")
	f.StringArrayVar(&set, "set", nil, "change the light: `KEY=VALUE`, such as line.photo=0 or corona.helium=0.05; repeatable")
	completeKeys(cmd, scenarios.Scenario{})
	completeWords(cmd, "law", model.LawNames()...)
	f.Var(&figure, "figure", "draw the ratio against density into this PNG or SVG `file`")
	f.StringVar(&table, "ecsv", "", "write the rows into this ECSV `file`")
	f.BoolVar(&json, "json", false, "one JSON document")
	return cmd
}

// numbers reads a list of plain numbers.
func numbers(flag, text string) ([]float64, error) {
	var out []float64
	for _, s := range strings.Split(text, ",") {
		v, err := strconv.ParseFloat(strings.TrimSpace(s), 64)
		if err != nil {
			return nil, fmt.Errorf("--%s: %q is not a number", flag, s)
		}
		out = append(out, v)
	}
	return out, nil
}

// list reads a list of quantities; a plain number has the unit given. The results are
// in the quantity's own unit.
func list[T ~float64, P interface {
	*T
	encoding.TextUnmarshaler
}](flag, text, unit string) ([]float64, error) {
	var out []float64
	for _, s := range strings.Split(text, ",") {
		s = strings.TrimSpace(s)
		if _, err := strconv.ParseFloat(s, 64); err == nil {
			s += " " + unit
		}
		var v T
		if err := P(&v).UnmarshalText([]byte(s)); err != nil {
			return nil, fmt.Errorf("--%s: %w", flag, err)
		}
		out = append(out, float64(v))
	}
	return out, nil
}

// lineFigure draws the ratio over the density range of the model.
func lineFigure(m *line.Model, figure *figureFile, rs, ts []float64) error {
	if n := len(rs) * len(ts); n > 6 {
		return misusef("--figure: %d combinations of height and temperature; at most 6 can be told apart", n)
	}
	var ns []float64
	for l := 6.0; l < 10.0001; l += 0.025 {
		ns = append(ns, min(math.Pow(10, l), line.HighestDensity))
	}
	var curves []report.RatioCurve
	for _, r := range rs {
		for _, t := range ts {
			c := report.RatioCurve{Label: fmt.Sprintf("%g R☉, %g MK", r, t/1e6), Density: ns}
			for _, n := range ns {
				q, err := m.Ratio(n, t, r)
				if err != nil {
					return misuse(err)
				}
				c.Ratio = append(c.Ratio, q)
			}
			curves = append(curves, c)
		}
	}
	return figure.write(func(f report.Format) []byte { return report.RatioFigure(curves, f) })
}

// rowsTable is the table of line.Rows with units.
func rowsTable(rows []line.Row) *ecsv.Table {
	column := func(name, unit, about string, of func(*line.Row) float64) ecsv.Column {
		v := make([]float64, len(rows))
		for i := range rows {
			v[i] = of(&rows[i])
		}
		return ecsv.Column{Name: name, Unit: unit, About: about, Data: v}
	}
	return &ecsv.Table{Columns: []ecsv.Column{
		column("n_e", "cm-3", "electron density", func(r *line.Row) float64 { return r.Density }),
		column("height", "solRad", "distance from the centre of the Sun", func(r *line.Row) float64 { return r.Height }),
		column("temperature", "K", "electron temperature", func(r *line.Row) float64 { return r.Temperature }),
		column("emissivity_1074", "erg cm-3 s-1 sr-1", "emissivity of the 1074.7 nm line", func(r *line.Row) float64 { return r.Emissivity1 }),
		column("emissivity_1079", "erg cm-3 s-1 sr-1", "emissivity of the 1079.8 nm line", func(r *line.Row) float64 { return r.Emissivity2 }),
		column("ratio_1079_1074", "", "ratio of energies", func(r *line.Row) float64 { return r.Ratio }),
		column("exponent_1074", "", "d ln j / d ln n_e", func(r *line.Row) float64 { return r.Exponent1 }),
		column("exponent_1079", "", "d ln j / d ln n_e", func(r *line.Row) float64 { return r.Exponent2 }),
	}}
}

func (p *program) lineRows(m *line.Model, ns, rs, ts []float64, json bool, table string) error {
	rows, err := line.Rows(m, ns, rs, ts)
	if err != nil {
		return misuse(err)
	}
	if table != "" {
		if err := rowsTable(rows).WriteFile(table); err != nil {
			return err
		}
	}
	if json {
		return writeRows(p, rows)
	}
	t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "n_e/cm-3\tr/Rsun\tT/K\tj(1074.7)\tj(1079.8)\tratio\texponent(1074.7)\texponent(1079.8)\t")
	for _, r := range rows {
		fmt.Fprintf(t, "%.4g\t%.4g\t%.4g\t%.4e\t%.4e\t%.5f\t%.4f\t%.4f\t\n", r.Density, r.Height, r.Temperature, r.Emissivity1, r.Emissivity2, r.Ratio, r.Exponent1, r.Exponent2)
	}
	return t.Flush()
}

func writeRows[T any](p *program, rows []T) error {
	return writeJSON(p.stdout, struct {
		Schema int `json:"schema"`
		Rows   []T `json:"rows"`
	}{1, rows})
}

func (p *program) lineDensities(m *line.Model, qs, rs, ts []float64, json bool) error {
	type row struct {
		Ratio       float64 `json:"ratio_1079_1074"`
		Height      float64 `json:"height_rsun"`
		Temperature float64 `json:"temperature_K"`
		Density     float64 `json:"n_e_cm3"`
		Slope       float64 `json:"dln_n_e_dln_ratio"`
	}
	var rows []row
	for _, q := range qs {
		for _, r := range rs {
			for _, t := range ts {
				n, slope, err := line.Density(m, q, t, r)
				if err != nil {
					return misusef("ratio %g at %g solar radii and %g K: %w", q, r, t, err)
				}
				rows = append(rows, row{q, r, t, n, slope})
			}
		}
	}
	if json {
		return writeRows(p, rows)
	}
	t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "ratio\tr/Rsun\tT/K\tn_e/cm-3\tdln(n_e)/dln(ratio)\t")
	for _, r := range rows {
		fmt.Fprintf(t, "%.4g\t%.4g\t%.4g\t%.4e\t%.3f\t\n", r.Ratio, r.Height, r.Temperature, r.Density, r.Slope)
	}
	return t.Flush()
}

func (p *program) lineLaw(m *line.Model, name string, helium float64, rs, ts []float64, json bool) error {
	if !slices.Contains(model.LawNames(), name) {
		return misusef("--law %s: there are %s%s", name, strings.Join(model.LawNames(), ", "), strict.Hint(name, model.LawNames()))
	}
	law, err := model.NewLaw(scenarios.Law{Named: name, Factor: 1}, helium)
	if err != nil {
		return misuse(err)
	}
	density := func(r float64) float64 { return law(r, 0) }
	type row struct {
		line.Row
		Slope1 float64 `json:"radial_slope_1074"`
		Slope2 float64 `json:"radial_slope_1079"`
	}
	var rows []row
	for _, r := range rs {
		at, err := line.Rows(m, []float64{density(r)}, []float64{r}, ts)
		if err != nil {
			return misuse(err)
		}
		for _, q := range at {
			q1, q2 := line.RadialSlopes(m, density, q.Temperature, r)
			rows = append(rows, row{q, q1, q2})
		}
	}
	if json {
		return writeRows(p, rows)
	}
	t := tabwriter.NewWriter(p.stdout, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "r/Rsun\tn_e/cm-3\tT/K\tj(1074.7)\tj(1079.8)\tratio\tslope(1074.7)\tslope(1079.8)\t")
	for _, r := range rows {
		fmt.Fprintf(t, "%.4g\t%.4g\t%.4g\t%.4e\t%.4e\t%.5f\t%.3f\t%.3f\t\n", r.Height, r.Density, r.Temperature, r.Emissivity1, r.Emissivity2, r.Ratio, r.Slope1, r.Slope2)
	}
	return t.Flush()
}
