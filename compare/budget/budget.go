// Package budget says which assumption of the inversion costs what.
//
// The field that a pixel shows is the product of two halves,
//
//	ln(B/B_SKY) = ln(v/SPEED_SKY) + 1/2 ln(n/NE_KINK) + 1/2 ln(mu/mu_true)
//
// and each half is a game: its value is known for any set of assumptions that are kept
// while the others are made true. The wave game takes sets through the whole chain and
// has a value for both halves. The light game has the density of lines without waves and
// noise, where a set costs nearly nothing; what waves and noise then add to the density
// is the wave game's second value less that of the light game. So the field, which would
// need every pair of sets, needs only their sum.
//
// Each assumption is charged three ways: turned on alone in the ideal world, where all
// others are true; turned off alone in the scenario as it is; and by its share (see
// Average), which adds up.
//
// What a state is worth is the mean over the pixels that have a field in the scenario as
// it is and in the ideal world, so that the halves and the height bins add up too; a
// state that lacks some of them is worth the mean of the others.
//
// Chance is kept apart from bias: one long run holds several pieces, each as long as the
// scenario's observation. Each piece is one realisation; without the assumption "finite
// duration" all of them are inverted as one observation. All states have the same waves
// and the same noise. What differs between pieces, pixel by pixel, is the scatter of a
// share; its mean is the bias, and its error is that of the mean over the pieces.
//
// A plane of the sky that alone emits is made as bright as its whole line of sight, so
// that it has the same photon noise.
package budget

import (
	"context"
	"fmt"

	"offplane/compare/stat"
	"offplane/scenarios"
)

// Settings of a budget.
type Settings struct {
	Pieces  int // realisations, 2 or more
	Orders  int // random orders, 4 or more, even; 0: all of them if the game has at most exactPlayers, else 16
	Workers int // < 1: every core
	Version string
	// Progress, if not nil, is called now and then, one call at a time.
	Progress func(stage string, done, total int)
}

// exactPlayers is the greatest number of players of a game that is played out by itself.
const exactPlayers = 9

// ordersByDefault is the number of random orders of a larger one.
const ordersByDefault = 16

// A Budget is budget.json. Numbers are natural logarithms of factors, unless said.
type Budget struct {
	Schema         int         `json:"schema"` // 1
	Scenario       string      `json:"scenario"`
	Seed           uint64      `json:"seed"`
	Version        string      `json:"version"`
	ScenarioSHA256 string      `json:"scenario_sha256"`
	Estimator      string      `json:"estimator"`
	Pieces         int         `json:"realisations"`
	Duration       float64     `json:"duration_s"`      // of one
	Long           float64     `json:"long_duration_s"` // what finite_duration is held against
	Orders         int         `json:"orders"`          // sampled; 0: all
	States         int         `json:"states"`          // that went through the whole chain
	Pixels         Pixels      `json:"pixels"`
	Method         Term        `json:"method"` // the ideal world: what the method costs by itself
	Terms          []Term      `json:"terms"`
	Total          Term        `json:"total"`           // the scenario as it is
	Closure        stat.Number `json:"closure"`         // total less method and shares, greatest absolute value
	MedianRatio    stat.Number `json:"field_median_ln"` // ln of the median B/B_SKY of the same pixels, for comparison
	Heights        []Height    `json:"heights"`
	Text           string      `json:"scenario_text"`
}

// Pixels counts pixels of the field.
type Pixels struct {
	Total   int         `json:"total"`
	Used    int         `json:"used"`           // that have a field in the ideal world and in a piece of the scenario as it is
	Samples int         `json:"samples"`        // of these, in all pieces
	Scatter int         `json:"scatter"`        // pixels that have one in every state and piece: scatter and spread are theirs
	Least   stat.Number `json:"least_fraction"` // of the samples of a piece, in the state in which the fewest have a field
}

// A Term is one line of the budget.
type Term struct {
	Key     string `json:"key"`
	Name    string `json:"name"`
	Off     string `json:"switched_off,omitempty"` // what its absence means
	On      bool   `json:"on"`                     // in the scenario; else everything is exactly 0
	Field   Effect `json:"field"`
	Speed   Effect `json:"speed"`
	Density Effect `json:"density"`
}

// An Effect is what a term does to the field or to one half of it.
type Effect struct {
	Share     stat.Number `json:"share"`
	Error     stat.Number `json:"share_error"` // one standard error: of the mean over the pieces, and of sampled orders
	FromIdeal stat.Number `json:"from_ideal"`  // turned on alone
	FromFull  stat.Number `json:"from_full"`   // less what is left when it is turned off alone
	Scatter   stat.Number `json:"scatter"`     // of a pixel's share between pieces, standard deviation
	Spread    stat.Number `json:"spread"`      // of the pixels' own mean shares, standard deviation
	// ScatterShare is the part of a term in the scatter of the total: the covariance of both
	// over the latter. It adds up.
	ScatterShare stat.Number `json:"scatter_share"`
}

// A Height holds the shares in one bin of projected distance from the Sun's centre.
type Height struct {
	From   stat.Number `json:"from_rsun"`
	To     stat.Number `json:"to_rsun"`
	Pixels int         `json:"pixels"`
	Method Shares      `json:"method"`
	Terms  []Shares    `json:"terms"` // in the order of the budget's
	Total  Shares      `json:"total"`
}

// Shares of one term.
type Shares struct {
	Key     string      `json:"key"`
	Field   stat.Number `json:"field"`
	Error   stat.Number `json:"field_error"`
	Speed   stat.Number `json:"speed"`
	Density stat.Number `json:"density"`
}

// Run makes the budget of a scenario.
func Run(ctx context.Context, l *scenarios.Loaded, o Settings) (*Budget, error) {
	if err := o.Check(); err != nil {
		return nil, err
	}
	w, err := newWorld(ctx, l, o)
	if err != nil {
		return nil, err
	}
	t := newTally(w)
	w.total = lights(t.wave.sets, t.wave.players) + lights(t.light.sets, t.light.players)
	if t.lines, err = w.still(t.light.players, t.light.sets); err != nil {
		return nil, err
	}
	if t.chain, err = w.waves(t.wave.players, t.wave.sets); err != nil {
		return nil, err
	}
	b, err := t.budget()
	if err != nil {
		return nil, err
	}
	b.Schema, b.Scenario, b.Seed, b.Version, b.ScenarioSHA256, b.Text = 1, l.Name, l.Scenario.Seed, o.Version, l.SHA256, string(l.Canonical)
	if e := l.Scenario.Inversion.Estimators; len(e) > 0 {
		b.Estimator = e[0]
	}
	b.Pieces, b.Orders, b.States = o.Pieces, len(t.wave.average.orders), len(t.wave.sets)
	b.Duration = float64(w.frames) * float64(l.Scenario.Camera.Cadence)
	b.Long = b.Duration * float64(o.Pieces)
	return b, nil
}

// Check returns an error if the settings cannot be met.
func (o *Settings) Check() error {
	switch {
	case o.Pieces < 2:
		return fmt.Errorf("%d realisations: at least 2 are needed to tell scatter from bias", o.Pieces)
	case o.Orders != 0 && (o.Orders < 4 || o.Orders%2 != 0):
		return fmt.Errorf("%d orders: write an even number, 4 or more, or 0", o.Orders)
	}
	return nil
}
