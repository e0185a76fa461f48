package main

import (
	"fmt"
	"io"
	"strings"

	"offplane/compare/table"
)

// An account is what table apply tells of what it did.
type account struct {
	*table.Applied
	table  *table.Table
	differ []string  // steps of the recipe
	remedy string    // what may be done about them
	units  []suspect // maps that look like one in another unit
}

// A suspect is a feature whose values would be in the table if multiplied by a factor.
type suspect struct {
	feature table.Feature
	factor  float64
}

func (s suspect) String() string {
	much := fmt.Sprintf("%.0f times too small", s.factor)
	if s.factor < 1 {
		much = fmt.Sprintf("%.0f times too large", 1/s.factor)
	}
	return fmt.Sprintf("the values of the %s are about %s: is BUNIT right (%s)?", s.feature, much, unitsOf(s.feature))
}

// A cause counts the pixels left for one reason.
type cause struct {
	Flag   string `json:"flag"`
	About  string `json:"about"`
	Pixels int    `json:"pixels"`
}

// causes lists why pixels with a value were left.
func (a *account) causes() []cause {
	out := []cause{}
	for _, c := range table.FlagCodes {
		if c.Value&(table.OtherWay|table.OutOfRange|table.TooFew) == 0 {
			continue
		}
		n := 0
		for _, f := range a.Flag {
			if f&c.Value != 0 {
				n++
			}
		}
		if n > 0 {
			out = append(out, cause{c.Name, strings.TrimSuffix(c.About, ": left as it is"), n})
		}
	}
	return out
}

func side(p table.Past) string {
	if p.Above {
		return "above"
	}
	return "below"
}

// beyond tells a feature, how many pixels, and where the table ends.
func beyond(p table.Past) string {
	return fmt.Sprintf("%s: %s %s %s", p.Feature, pixelCount(p.Pixels), side(p), strings.TrimSpace(fmt.Sprintf("%.4g %s", p.End, p.Feature.Unit())))
}

func pixelCount(n int) string {
	if n == 1 {
		return "1 pixel"
	}
	return fmt.Sprintf("%d pixels", n)
}

// reason says in a few words why pixels were not corrected.
func (a *account) reason() string {
	var parts []string
	if len(a.differ) > 0 {
		parts = append(parts, "the map was made by another recipe: "+strings.Join(a.differ, "; "))
		if a.remedy != "" {
			parts = append(parts, a.remedy)
		}
	} else {
		for _, c := range a.causes() {
			text := fmt.Sprintf("%s: %s", pixelCount(c.Pixels), c.About)
			if c.Flag == "BEYOND" && len(a.Past) > 0 {
				var ends []string
				for _, p := range a.Past {
					ends = append(ends, beyond(p))
				}
				text += " (" + strings.Join(ends, ", ") + ", where it ends)"
			}
			parts = append(parts, text)
		}
	}
	for _, s := range a.units {
		parts = append(parts, s.String())
	}
	return strings.Join(parts, "; ")
}

func (a *account) print(out io.Writer, path string) {
	t := a.table
	fmt.Fprintf(out, "map        %s\n", path)
	fmt.Fprintf(out, "table      truth %s, ensemble %s of %d members\n", t.Truth, t.Origin.Ensemble, t.Members)
	fmt.Fprintf(out, "corrected  %d of %d pixels with a value (%.1f %%)\n", a.Corrected, a.Valid, 100*float64(a.Corrected)/float64(max(a.Valid, 1)))
	if why := a.reason(); why != "" {
		fmt.Fprintf(out, "left       %s\n", why)
	}
	if a.Corrected > 0 {
		fmt.Fprintf(out, "factor     %.3f, median of true over inferred\n", a.Median)
	}
	all := t.Features()
	for _, u := range a.Used {
		if u.Corrected == 0 {
			continue
		}
		have := u.Surface.Features()
		note := ""
		if len(have) < len(all) {
			note = " (coarser: the full table takes " + strings.Join(featureNames(all), ", ") + ")"
		}
		fmt.Fprintf(out, "by         %s for %d pixels%s\n", strings.Join(featureNames(have), ", "), u.Corrected, note)
		fmt.Fprintf(out, "coverage   %s\n", &u.Surface.Score)
		if beats, known := u.Surface.Score.BeatsSingle(); known && !beats {
			fmt.Fprintf(out, "note       this does not beat a single factor for all pixels: its loss is cut by %s\n", percent(u.Surface.Score.Loss.CutSingle))
		}
	}
	fmt.Fprintf(out, "caution    %s\n", table.Caution)
}

func featureNames(fs []table.Feature) []string {
	names := make([]string, len(fs))
	for i, f := range fs {
		names[i] = f.String()
	}
	return names
}

// applied is the JSON of table apply.
type applied struct {
	Schema    int       `json:"schema"`
	Truth     string    `json:"truth"`
	Ensemble  string    `json:"ensemble"`
	Valid     int       `json:"valid"`
	Corrected int       `json:"corrected"`
	Coarser   int       `json:"corrected_by_a_coarser_table"`
	Median    *float64  `json:"median_factor"`
	Differ    []string  `json:"recipe_differs"`
	Remedy    string    `json:"remedy,omitempty"`
	Left      []cause   `json:"left"`
	Beyond    []past    `json:"beyond"`
	Units     []string  `json:"units_in_doubt,omitempty"`
	By        []usedFor `json:"by"`
	Features  []string  `json:"features_of_the_full_table"`
	Caution   string    `json:"caution"`
}

// past is one end of the table that pixels lie beyond.
type past struct {
	Feature string  `json:"feature"`
	Side    string  `json:"side"` // above or below
	End     float64 `json:"end"`
	Unit    string  `json:"unit"`
	Pixels  int     `json:"pixels"`
}

// usedFor is one part of the table, and what it promises.
type usedFor struct {
	Features   []string    `json:"features"`
	Coarser    bool        `json:"coarser"`
	Pixels     int         `json:"pixels"`
	Corrected  int         `json:"corrected"`
	Coverage68 share       `json:"coverage68"`
	Coverage95 share       `json:"coverage95"`
	Members    int         `json:"members_held_out"`
	Beats      *bool       `json:"beats_one_factor"` // null: not known
	Cut        *[3]float64 `json:"loss_cut_against_one_factor"`
}

type share struct {
	Mean  float64 `json:"mean"`
	Error float64 `json:"error"`
}

func (a *account) summary() applied {
	t := a.table
	s := applied{Schema: 1, Truth: t.Truth, Ensemble: t.Origin.Ensemble, Valid: a.Valid, Corrected: a.Corrected, Coarser: a.Coarse,
		Differ: a.differ, Remedy: a.remedy, Left: a.causes(), Beyond: []past{}, By: []usedFor{}, Features: featureNames(t.Features()), Caution: table.Caution}
	if a.Corrected > 0 {
		s.Median = &a.Median
	}
	for _, u := range a.units {
		s.Units = append(s.Units, u.String())
	}
	for _, p := range a.Past {
		s.Beyond = append(s.Beyond, past{p.Feature.String(), side(p), p.End, p.Feature.Unit(), p.Pixels})
	}
	for _, u := range a.Used {
		c := &u.Surface.Score
		by := usedFor{Features: featureNames(u.Surface.Features()), Pixels: u.Pixels, Corrected: u.Corrected,
			Coverage68: share(c.Coverage68), Coverage95: share(c.Coverage95), Members: c.Members}
		by.Coarser = len(by.Features) < len(s.Features)
		if beats, known := c.BeatsSingle(); known {
			v := c.Loss.CutSingle
			by.Beats, by.Cut = &beats, &[3]float64{v.Value, v.Low, v.High}
		}
		s.By = append(s.By, by)
	}
	return s
}
