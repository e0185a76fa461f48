package explain

import (
	"math"

	"offplane/compare/stat"
	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth/obs"
)

// Of returns a session over a run that is still in memory: scene, truth, inferred maps
// with their series, verdict. Nothing has to be closed.
func Of(l *scenarios.Loaded, o *trial.Outcome) (*Session, error) {
	s := &Session{
		Scenario: l, Grid: o.Truth.Grid, Truth: o.Truth.Maps, Inferred: o.Inferred.Maps, scene: o.Scene,
		series: memory{o.Inferred.Series}, cadence: o.Inferred.Cadence, close: func() error { return nil },
	}
	if m := o.Verdict.Maps.Get("METHOD_RATIO"); m != nil {
		s.onePlane = m.Data
	}
	s.listRows()
	return s, s.invertSide()
}

type memory struct{ cube *obs.Cube }

func (m memory) Read(row int, dst []float32) ([]float32, error) {
	return append(dst[:0], m.cube.Series(row, 0)...), nil
}

// Representative returns the zero-based pixel that stands for the run: the field's bias is
// near the median and the height near the middle of the valid pixels', each measured by
// the spread from the 16th to the 84th percentile. ok is false if no pixel is valid.
func (s *Session) Representative() (ix, iy int, ok bool) {
	n := s.Grid.Nx * s.Grid.Ny
	bias, height := make([]float64, n), make([]float64, n)
	for i := range n {
		bias[i], height[i] = s.identity.At(i).Field, nan
		if !math.IsNaN(bias[i]) {
			height[i], _ = s.Grid.Polar(i%s.Grid.Nx, i/s.Grid.Nx)
		}
	}
	b, h := stat.Summarise(bias), stat.Summarise(height)
	off := func(x float64, s *stat.Summary) float64 { return math.Abs(x-s.Median) / max(s.P84-s.P16, 1e-9) }
	best, least := -1, math.Inf(1)
	for i := range n {
		if d := off(bias[i], &b) + off(height[i], &h); d < least {
			best, least = i, d
		}
	}
	if best < 0 {
		return 0, 0, false
	}
	return best % s.Grid.Nx, best / s.Grid.Nx, true
}
