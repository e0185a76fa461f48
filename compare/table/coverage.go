package table

import (
	"fmt"

	"offplane/synth/ecsv"
)

// Coverage returns the scores as a table: for each surface one row over all heights, with
// NaN bounds, and one for each bin of heights. Losses are over all heights.
func (t *Table) Coverage() *ecsv.Table {
	type row struct {
		s        *Surface
		from, to float64
		members  int
		in       [2]Measure
	}
	var rows []row
	for i := range t.Surfaces {
		s := &t.Surfaces[i]
		rows = append(rows, row{s, nan, nan, s.Score.Members, [2]Measure{s.Score.Coverage68, s.Score.Coverage95}})
		for _, b := range s.Score.Bins {
			rows = append(rows, row{s, b.From, b.To, b.Members, [2]Measure{b.Coverage68, b.Coverage95}})
		}
	}
	out := &ecsv.Table{Meta: t.meta()}
	var quantity, names []string
	var members []int64
	for _, r := range rows {
		quantity, names, members = append(quantity, r.s.Quantity.String()), append(names, join(r.s.Features())), append(members, int64(r.members))
	}
	add := func(name, unit, about string, data any) {
		out.Columns = append(out.Columns, ecsv.Column{Name: name, Unit: unit, About: about, Data: data})
	}
	floats := func(name, unit, about string, of func(r *row) float64) {
		x := make([]float64, len(rows))
		for i := range rows {
			x[i] = digits(of(&rows[i]))
		}
		add(name, unit, about, x)
	}
	add("quantity", "", "that is corrected", quantity)
	add("features", "", "that the surface needs", names)
	floats("height_from", "solRad", "of the bin; NaN: all heights", func(r *row) float64 { return r.from })
	floats("height_to", "solRad", "of the bin", func(r *row) float64 { return r.to })
	add("members", "", "held out, with pixels here", members)
	floats("coverage68", "", "share within the 68 % interval", func(r *row) float64 { return r.in[0].Mean })
	floats("coverage68_error", "", "standard error over members", func(r *row) float64 { return r.in[0].Error })
	floats("coverage95", "", "share within the 95 % interval", func(r *row) float64 { return r.in[1].Mean })
	floats("coverage95_error", "", "standard error over members", func(r *row) float64 { return r.in[1].Error })
	score := func(name, about string, of func(*Score) float64) {
		floats(name, "", about, func(r *row) float64 {
			if r.from == r.from {
				return nan
			}
			return of(&r.s.Score)
		})
	}
	score("domain", "share of pixels in the domain", func(s *Score) float64 { return s.Share })
	score("loss", "pinball loss of the median", func(s *Score) float64 { return s.Loss.Table })
	score("loss_single", "with one factor for all pixels", func(s *Score) float64 { return s.Loss.Single })
	score("loss_none", "without correction", func(s *Score) float64 { return s.Loss.None })
	score("cut_none", "of the loss, against no correction", func(s *Score) float64 { return s.Loss.CutNone.Value })
	score("cut_none_low", "95 % interval over members", func(s *Score) float64 { return s.Loss.CutNone.Low })
	score("cut_none_high", "95 % interval over members", func(s *Score) float64 { return s.Loss.CutNone.High })
	score("cut_single", "of the loss, against one factor", func(s *Score) float64 { return s.Loss.CutSingle.Value })
	score("cut_single_low", "95 % interval over members", func(s *Score) float64 { return s.Loss.CutSingle.Low })
	score("cut_single_high", "95 % interval over members", func(s *Score) float64 { return s.Loss.CutSingle.High })
	score("loss_levels", "mean over five quantiles", func(s *Score) float64 { return s.Levels[0] })
	score("loss_levels_single", "of one factor for all pixels", func(s *Score) float64 { return s.Levels[1] })
	score("median_error", "median of |ln(true/corrected)|", func(s *Score) float64 { return s.Left })
	score("median_error_none", "median of |ln(true/inferred)|", func(s *Score) float64 { return s.None })
	return out
}

// addScores takes losses and errors from the scores in e, over all heights, if e is of the
// build of this table: the same metadata, which include what was achieved.
func (t *Table) addScores(e *ecsv.Table) {
	theirs := map[string]string{}
	for _, p := range e.Meta {
		theirs[p.Key] = fmt.Sprint(p.Value)
	}
	for _, p := range t.meta() {
		if theirs[p.Key] != fmt.Sprint(p.Value) {
			return
		}
	}
	quantity, names, err := texts(e)
	if err != nil {
		return
	}
	from, err := e.Floats("height_from")
	if err != nil {
		return
	}
	rows := map[string]int{}
	for i := range quantity {
		if from[i] != from[i] {
			rows[quantity[i]+" "+names[i]] = i
		}
	}
	for k := range t.Surfaces {
		s := &t.Surfaces[k]
		i, ok := rows[s.Quantity.String()+" "+join(s.Features())]
		if !ok {
			continue
		}
		got, l := s.Score, &s.Score.Loss
		for _, c := range []struct {
			name string
			to   *float64
		}{
			{"domain", &s.Score.Share}, {"loss", &l.Table}, {"loss_single", &l.Single}, {"loss_none", &l.None},
			{"cut_none", &l.CutNone.Value}, {"cut_none_low", &l.CutNone.Low}, {"cut_none_high", &l.CutNone.High},
			{"cut_single", &l.CutSingle.Value}, {"cut_single_low", &l.CutSingle.Low}, {"cut_single_high", &l.CutSingle.High},
			{"median_error", &s.Score.Left}, {"median_error_none", &s.Score.None},
		} {
			x, err := e.Floats(c.name)
			if err != nil {
				s.Score = got
				return
			}
			*c.to = x[i]
		}
	}
}
