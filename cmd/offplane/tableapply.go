package main

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"offplane/compare/table"
	"offplane/synth/fits"
)

// application holds what table apply is told.
type application struct {
	table  string
	maps   [6]string // by companions
	from   string
	recipe []string
}

// companions are the maps that may go with the one to be corrected.
var companions = [6]table.Feature{table.Field, table.Density, table.Speed, table.Angle, table.Track, table.Coherence}

// asTable is the assertion that a map was made by the table's recipe.
const asTable = "as-table"

func (p *program) tableApply() *cobra.Command {
	var w work
	var a application
	cmd := &cobra.Command{
		Use:   "apply MAP.fits[EXT] [--table T] [--density N.fits[EXT]] [--speed V.fits[EXT]] -o DIR",
		Short: "Correct a published map",
		Long: `table apply corrects a map of the coronal field, or of the phase speed or the density:
which, its unit tells. The map may be any FITS image with a helioprojective WCS, rotated
or on any grid. Other maps of the same observation (--field, --density,
--speed, --angle, --track, --coherence; each may be on a grid of its own, the nearest pixel counts)
narrow the correction; what is missing is answered by a coarser table, which is said.
From an inferred.fits of this program B is taken, and the other maps with it.

A table is only good for maps made by its recipe. What the header does not say of the
map's recipe, --recipe does: KEY=VALUE, or "as-table" if all that is not said is as in the
table. "pixel" is that of the data: give it if the map was put on another grid since. A map
by another recipe lies outside the domain as a whole.

corrected.fits holds the corrected map, the factor true over inferred, the ends of the
systematic 68 and 95 % intervals, and FLAG: outside the domain the value is left as it is,
flagged and not counted. Exit code 3: nothing could be corrected.`,
		Example: `  offplane table apply field.fits --density density.fits --recipe as-table -o corrected
  offplane table apply maps/inferred.fits --table table/table.ecsv -o corrected`,
		Args: argument("a map"),
	}
	cmd.RunE = do(func(ctx context.Context, args []string) error { return p.apply(ctx, &w, &a, args[0]) })
	w.flags(cmd)
	cmd.Flags().Lookup("workers").Hidden = true
	f := cmd.Flags()
	f.StringVar(&a.table, "table", table.DefaultName, "`file` of a table, or the name of an embedded one")
	completeWords(cmd, "table", table.Names()...)
	for i, c := range companions {
		f.StringVar(&a.maps[i], c.String(), "", fmt.Sprintf("map of the %s in %s: `FILE[EXT]`", c, unitsOf(c)))
	}
	f.StringVar(&a.from, "angle-from", "north", "where the angles of --angle count from, counter-clockwise: north, west or radial")
	completeWords(cmd, "angle-from", "north", "west", "radial")
	f.StringArrayVar(&a.recipe, "recipe", nil, "how the map was made: `KEY=VALUE`, repeatable, or as-table. Keys: "+strings.Join(table.RecipeKeys(), ", "))
	return cmd
}

func (p *program) apply(ctx context.Context, w *work, a *application, name string) error {
	t, err := table.Open(a.table)
	if err != nil {
		return misusef("--table: %w", err)
	}
	if err := bringsAlong(&name, a); err != nil {
		return misuse(err)
	}
	m, kind, err := readPublished(name, table.Field, table.Speed, table.Density)
	if err != nil {
		return misuse(err)
	}
	in := table.Input{Quantity: quantityOf(kind), Values: m.values}
	if t.Find(in.Quantity, t.Features()) == nil {
		return misusef("%s is a map of the %s: the table corrects none against the truth %s", name, kind, t.Truth)
	}
	inputs := []string{m.path}
	var pa []float64
	if in.Features[table.Height], pa, err = m.Polar(); err != nil {
		return misuse(err)
	}
	for i, c := range companions {
		if a.maps[i] == "" {
			continue
		}
		q, _, err := readPublished(a.maps[i], c)
		if err != nil {
			return misusef("--%s: %w", c, err)
		}
		inputs = append(inputs, q.path)
		in.Features[c] = q.on(m)
		if c == table.Angle {
			if err := toRadial(in.Features[c], pa, a.from); err != nil {
				return misuse(err)
			}
		}
	}
	derived, completed := in.Complete(t.Recipe.Mu())
	valid := 0
	for _, v := range m.values {
		if v > 0 && !math.IsInf(v, 0) {
			valid++
		}
	}
	if valid == 0 {
		return misusef("%s: none of its %d pixels has a positive value: there is nothing to correct", name, len(m.values))
	}
	told := account{table: t}
	if told.differ, told.remedy, err = a.mismatch(t, m); err != nil {
		return err
	}
	in.SameWay = len(told.differ) == 0
	for _, c := range companions[:3] {
		if by, ok := t.WrongUnit(in, c); ok && !(completed && c == derived) {
			told.units = append(told.units, suspect{c, by})
		}
	}

	var parts []string
	for _, path := range inputs {
		e, err := entryOf(path)
		if err != nil {
			return misuse(err)
		}
		parts = append(parts, e.SHA256)
	}
	parts = append(parts, fmt.Sprintf("%s %+v", name, *a))
	f, r, bar, err := p.start(w, job{Command: "table apply", SHA256: digest(parts...), files: []string{"corrected.fits"}, inputs: inputs})
	if err != nil {
		return err
	}
	defer f.abandon()
	defer bar.wipe()
	p.doubt(inputs...)
	told.Applied = t.Apply(in)
	if err := writeCorrected(f.path("corrected.fits"), m, kind, t, told.Applied); err != nil {
		return err
	}
	r.stage("correction")
	if err := f.finish(ctx, r); err != nil {
		return err
	}
	bar.wipe()
	switch {
	case w.json:
		err = writeJSON(p.stdout, told.summary())
	case !w.quiet:
		told.print(p.stdout, f.path("corrected.fits"))
		if completed && slices.Contains(t.Features(), derived) {
			fmt.Fprintf(p.stdout, "derived    the %s from the two others of field, density and speed\n", derived)
		}
	}
	if err == nil && told.Corrected == 0 {
		err = &fault{exitUnmet, errors.New("nothing was corrected: " + told.reason())}
	}
	return err
}

func quantityOf(f table.Feature) table.Quantity {
	switch f {
	case table.Speed:
		return table.SpeedQ
	case table.Density:
		return table.DensityQ
	}
	return table.FieldQ
}

// bringsAlong makes a file of inferred maps of this program bring B and the other maps,
// as far as they were not given.
func bringsAlong(name *string, a *application) error {
	file, ext := splitExtension(*name)
	f, err := fits.Open(file)
	if err != nil {
		return err
	}
	defer f.Close()
	text, _, err := readYAML(f, inversionTable)
	if err != nil || text == nil {
		return err
	}
	suffix := ""
	if ext == "" {
		*name = file + "[B]"
	} else if _, s, ok := strings.Cut(strings.ToUpper(ext), "_"); ok {
		suffix = "_" + s
	}
	for i, with := range []string{"B" + suffix, "NE", "SPEED" + suffix, "ANGLE", "TRACK", "COHERENCE"} {
		if _, err := f.FindImage(with); err == nil && a.maps[i] == "" {
			a.maps[i] = file + "[" + with + "]"
		}
	}
	return nil
}

// toRadial turns angles into those between track and radial, 0..90 degrees.
func toRadial(angles, pa []float64, from string) error {
	for i := range angles {
		switch from {
		case "north":
			angles[i] -= pa[i]
		case "west":
			angles[i] += 270 - pa[i] // west is at position angle 270
		case "radial":
		default:
			return fmt.Errorf("--angle-from %s: must be north, west or radial", from)
		}
		angles[i] = math.Abs(math.Remainder(angles[i], 180))
	}
	return nil
}

// mismatch lists where the map's recipe differs from the table's, and what may be done
// about it; what is not known is asked for.
func (a *application) mismatch(t *table.Table, m *published) (differ []string, remedy string, err error) {
	r, err := m.recipe()
	if err != nil {
		return nil, "", misuse(err)
	}
	own := r.Get("estimator") != "" // the file tells its recipe
	assumed := false
	var set []string
	for _, s := range a.recipe {
		if s == asTable {
			assumed = true
		} else {
			set = append(set, s)
		}
	}
	if r, err = r.With(set...); err != nil {
		return nil, "", misusef("--recipe %w", err)
	}
	pixel := slices.ContainsFunc(set, func(s string) bool { return strings.HasPrefix(s, "pixel=") })
	if others, err := r.With("pixel=" + t.Recipe.Get("pixel")); err == nil && !own && !pixel {
		before, _ := t.Recipe.Differ(r)
		if after, _ := t.Recipe.Differ(others); len(after) < len(before) {
			remedy = fmt.Sprintf("if the map was put on this grid from data of the table's pixel, give --recipe pixel=%s", t.Recipe.Get("pixel"))
		}
	}
	differ, unknown := t.Recipe.Differ(r)
	if len(unknown) > 0 && len(differ) == 0 && !assumed {
		return nil, "", misusef("the table is for maps made with %s, and %s does not say how it was made: give --recipe KEY=VALUE for each, or --recipe as-table if it is all the same",
			strings.Join(unknown, ", "), m.path)
	}
	return differ, remedy, nil
}

// names of the corrected maps by what was corrected.
var correctedNames = map[table.Feature]string{table.Field: "B", table.Speed: "SPEED", table.Density: "NE"}

// writeCorrected writes the maps with the sky of the input and in its unit.
func writeCorrected(path string, m *published, kind table.Feature, t *table.Table, a *table.Applied) error {
	w, err := fits.Create(path, primary())
	if err != nil {
		return err
	}
	defer w.Abort()
	nx, ny := m.Size()
	axes := [2]int{nx, ny}
	add := func(name, unit, about string, data any, cards fits.Header) error {
		var h fits.Header
		if unit != "" {
			h.Set("BUNIT", unit, "")
		}
		h.Set("BTYPE", about, "")
		h = append(append(h, m.sky()...), cards...)
		if ints, ok := data.([]int32); ok {
			return fits.AddImage(w, name, h, axes, ints)
		}
		return fits.AddImage(w, name, h, axes, data.([]float32))
	}
	var told fits.Header
	told.Set("TRUTH", t.Truth, "the factor refers to")
	told.Set("ENSEMBLE", t.Origin.Ensemble, "behind the table")
	told.Set("ENSSHA", t.Origin.SHA256, "of the ensemble")
	told.Set("COMMENT", "Caution: "+table.Caution, "")
	name := correctedNames[kind]
	back := 1 / m.scale
	for _, o := range []struct {
		suffix, about string
		values        []float64
	}{
		{"", "corrected " + kind.String() + ", left as it was where FLAG says so", a.Values},
		{"_LOW68", "lower end of the systematic 68 % interval", a.Low68},
		{"_HIGH68", "upper end of the systematic 68 % interval", a.High68},
		{"_LOW95", "lower end of the systematic 95 % interval", a.Low95},
		{"_HIGH95", "upper end of the systematic 95 % interval", a.High95},
	} {
		if err := add(name+o.suffix, m.unit, o.about, scaled(o.values, back), told); err != nil {
			return err
		}
	}
	if err := add("FACTOR", "", "true over inferred, median", scaled(a.Factor, 1), told); err != nil {
		return err
	}
	var codes fits.Header
	for k, c := range table.FlagCodes {
		codes.Set(fmt.Sprintf("FLAG%02d", k), c.Name+": "+c.About, "")
	}
	if err := add("FLAG", "", "domain of the correction", a.Flag, codes); err != nil {
		return err
	}
	return w.Close()
}
