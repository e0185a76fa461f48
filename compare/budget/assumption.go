package budget

import (
	"offplane/scenarios"
)

// An assumption of the inversion, or an imperfection that it does not know of: a switch
// that is on in the scenario and can be turned off by making it true.
type assumption struct {
	key, name string
	about     string // what is switched off
	games     games
	touches   touches
	present   func(*scenarios.Scenario) bool
	off       func(*state)
}

// games says in which half an assumption plays: the wave game is played with the whole
// chain and has a value for the speed and for the density, the light game with lines
// without waves and noise for the density.
type games uint8

const (
	waves games = 1 << iota
	light
)

// touches says from where on a state has to be made anew.
type touches uint8

const (
	nothing touches = iota // the inversion, or how frames are cut
	camera                 // the stages behind the light
	raw                    // the light
)

// A state of the world is a scenario with some assumptions made true.
type state struct {
	scenario  scenarios.Scenario // of the light
	camera    scenarios.Camera
	lost      bool // frames may be lost
	whole     bool // all pieces are inverted as one observation
	projected bool // see synth.Assume
	warm      bool // the inversion knows the temperature
	atoms     bool // the inversion has the corona's own atomic data
}

func always(*scenarios.Scenario) bool { return true }

func offPlane(s *scenarios.Scenario) bool { return !s.Sight.Plane }

func toPlane(s *state) { s.scenario.Sight.Plane = true }

// assumptions lists the switches in the order of the report. The temperature
// is off by itself where every pixel has the one that is assumed; mu is no switch but a
// factor.
func assumptions() []assumption {
	return []assumption{
		{key: wavesKey, name: "waves off the plane", about: "only the plane of the sky shows waves",
			games: waves, touches: raw, present: offPlane, off: toPlane},
		{key: emissionKey, name: "emission off the plane, in the density", about: "only the plane of the sky emits the lines of the density",
			games: light, touches: raw, present: offPlane, off: toPlane},
		{key: temperatureKey, name: "temperature assumed", about: "the inversion knows the temperature at the plane of the sky",
			games: light, touches: nothing, present: always, off: func(s *state) { s.warm = true }},
		{key: "photo_excitation", name: "photo-excitation at the projected height", about: "the disc excites all plasma as at the projected distance",
			games: light, touches: raw, present: func(s *scenarios.Scenario) bool { return offPlane(s) && s.Line.Photo > 0 },
			off: func(s *state) { s.projected = true }},
		{key: "mix", name: "unresolved mix", about: "no dense and thin plasma side by side",
			games: waves | light, touches: raw, present: func(s *scenarios.Scenario) bool { return s.Corona.Mix != nil },
			off: func(s *state) { s.scenario.Corona.Mix = nil }},
		{key: "strands", name: "strands", about: "no fine structure of the density",
			games: waves | light, touches: raw, present: func(s *scenarios.Scenario) bool { return s.Corona.Strands != nil },
			off: func(s *state) { s.scenario.Corona.Strands = nil }},
		{key: "inward_waves", name: "inward waves", about: "one outward train on each line",
			games: waves, touches: raw, present: func(s *scenarios.Scenario) bool { return s.Waves.Inward > 0 || s.Waves.FarEnd },
			off: func(s *state) { s.scenario.Waves.Inward, s.scenario.Waves.FarEnd = 0, false }},
		{key: "damping", name: "damping", about: "waves are not damped",
			games: waves, touches: raw, present: func(s *scenarios.Scenario) bool { return s.Waves.Damping > 0 },
			off: func(s *state) { s.scenario.Waves.Damping = 0 }},
		{key: "flows", name: "outflow and rotation", about: "the corona is at rest",
			games: waves | light, touches: raw,
			present: func(s *scenarios.Scenario) bool { return s.Corona.Outflow != nil || s.Corona.Rotation != nil },
			off:     func(s *state) { s.scenario.Corona.Outflow, s.scenario.Corona.Rotation = nil, nil }},
		{key: "point_spread", name: "point spread and scattered light", about: "every pixel sees its own light, and holds still",
			games: waves | light, touches: camera, present: func(s *scenarios.Scenario) bool {
				c := &s.Camera
				return c.PointSpread > 0 || c.Diffraction || c.Seeing > 0 || c.Scatter != nil || c.Pointing != nil
			},
			off: func(s *state) {
				c := &s.camera
				c.PointSpread, c.Diffraction, c.Seeing, c.Scatter, c.Pointing = 0, false, 0, nil, nil
			}},
		{key: "sequential_tuning", name: "sequential tuning", about: "all tunings and both lines at once, under a steady sky",
			games: waves, touches: raw, present: func(s *scenarios.Scenario) bool {
				return s.Camera.Sequential || s.Camera.Switching != "together" || s.Camera.Brightening != 0
			},
			off: func(s *state) {
				for _, c := range []*scenarios.Camera{&s.scenario.Camera, &s.camera} {
					c.Sequential, c.Switching, c.Brightening = false, "together", 0
				}
			}},
		{key: "photon_noise", name: "photon and detector noise", about: "no noise, no digits, a perfect flat field, no frame lost",
			games: waves, touches: camera, present: func(s *scenarios.Scenario) bool {
				c := &s.Camera
				return c.Noise || c.FlatField > 0 || c.Digit > 0 || c.FullWell > 0 || c.Lost > 0 || len(c.Gaps) > 0
			},
			off: func(s *state) {
				c := &s.camera
				c.Noise, c.FlatField, c.Digit, c.FullWell = false, 0, 0, 0
				s.lost = false
			}},
		{key: durationKey, name: "finite duration", about: "the pieces are one observation",
			games: waves, touches: nothing, present: always, off: func(s *state) { s.whole = true }},
		{key: "atomic_data", name: "atomic data", about: "the inversion has the corona's atomic data and helium",
			games: light, touches: nothing, present: func(s *scenarios.Scenario) bool {
				return s.Inversion.Line != s.Line || s.Inversion.Helium != s.Corona.Helium
			},
			off: func(s *state) { s.atoms = true }},
	}
}

// Keys that have a meaning beyond their assumption.
const (
	temperatureKey = "temperature"
	durationKey    = "finite_duration"
	wavesKey       = "waves_off_plane"
	emissionKey    = "emission_off_plane"
)

// A player is an assumption that takes part in a game.
type player struct {
	assumption
	of int // index of its term
}

// cast returns the players of a game.
func cast(all []assumption, on []bool, g games) []player {
	var ps []player
	for i, a := range all {
		if a.games&g != 0 && on[i] {
			ps = append(ps, player{a, i})
		}
	}
	return ps
}

// stateOf returns the scenario in which the players of a set keep their assumption and
// the others' are made true.
func stateOf(base *state, ps []player, s Set) *state {
	st := *base
	for i, p := range ps {
		if s>>i&1 == 0 {
			p.off(&st)
		}
	}
	return &st
}

// mask returns the players that touch at least so much.
func mask(ps []player, least touches) Set {
	var s Set
	for i, p := range ps {
		if p.touches >= least {
			s |= 1 << i
		}
	}
	return s
}
