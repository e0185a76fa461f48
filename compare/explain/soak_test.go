//go:build soak

package explain

import (
	"math"
	"testing"

	"offplane/compare/stat"
	"offplane/scenarios"
)

// The expected bias of the method against what the run measured with its own waves on one
// plane, over a wedge of the default ring that holds closed and open lines.
//
//	go test -tags soak -run TestMethodAgainstTheRun ./compare/explain
func TestMethodAgainstTheRun(t *testing.T) {
	l, err := scenarios.Load("quiet-belt", "image.from=285 deg", "image.to=310 deg", "camera.noise=false", "image.pixel=6.5 arcsec")
	if err != nil {
		t.Fatal(err)
	}
	dir, _ := folderOf(t, l, true)
	s := open(t, dir)
	var plane, path, run, rest []float64
	for i := range s.rows {
		if s.rows[i] < 0 || i%11 != 0 {
			continue
		}
		p, err := s.At(i%s.Grid.Nx, i/s.Grid.Nx)
		if err != nil {
			t.Fatal(err)
		}
		e := &p.Estimators[0]
		if !p.Valid || !finite(e.OnePlane) || !finite(e.Path) {
			continue
		}
		plane, path, run = append(plane, float64(e.Plane)), append(path, float64(e.Path)), append(run, float64(e.OnePlane))
		rest = append(rest, math.Log(float64(e.OnePlane/e.Path)))
		for _, c := range p.Causes {
			if c.Key == SpeedRest && i%1001 == 0 {
				t.Logf("%s: %s", p.Verdict, c.Text)
			}
		}
	}
	q := stat.Summarise(rest)
	t.Logf("%d pixels: plane wave %.3f, along the track %.3f, the run %.3f; ln of run over track %.3f (%.3f..%.3f)", len(run), stat.Median(plane), stat.Median(path), stat.Median(run), q.Median, q.P16, q.P84)
	if len(run) < 100 || math.Abs(q.Median) > 0.03 {
		t.Errorf("the run's own waves show another bias")
	}
}
