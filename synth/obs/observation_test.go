package obs

import (
	"math"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"offplane/synth/fits"
)

func testObservation(frames1, frames2 int) *Observation {
	g := testGrid()
	o := &Observation{Grid: g, Unit: "erg cm-2 s-1 sr-1", Scenario: strings.Repeat("0123456789abcdef", 4)}
	for p := range int32(g.Nx * g.Ny) {
		if p%3 != 1 && p > 9 {
			o.Pixels = append(o.Pixels, p)
		}
	}
	for line, n := range []int{frames1, frames2} {
		rest := []float64{1074.7, 1079.8}[line]
		for k := range 3 + line {
			d := 0.11 * float64(k-1)
			o.Tunings = append(o.Tunings, Tuning{line + 1, k, rest + d, 1.3 * float64(k), 0.13, d})
		}
		c := NewCube(len(o.Pixels), 3+line, n)
		for i := range c.Data {
			c.Data[i] = float32(math.Sin(float64(i*(line+1)))) * 1e-2
		}
		o.Frames[line] = c
		for f := range n {
			o.Exposures = append(o.Exposures, Exposure{line + 1, f, 30.1*float64(f) + float64(line), 2.1, 1.5e7, 3e-3, 40})
		}
		o.Mean[line] = make([][]float32, c.Tunings)
		for k := range o.Mean[line] {
			o.Mean[line][k] = make([]float32, c.Pixels)
			for p := range o.Mean[line][k] {
				sum := 0.0
				for _, v := range c.Series(p, k) {
					sum += float64(v)
				}
				o.Mean[line][k][p] = float32(sum / float64(n))
			}
		}
	}
	return o
}

func TestObservationRoundTrip(t *testing.T) {
	// 37 frames are two blocks of blockFrames and a rest.
	for _, frames := range []bool{true, false} {
		o := testObservation(37, 16)
		path := filepath.Join(t.TempDir(), "o.fits")
		if err := WriteObservation(path, o, fits.Header{{Key: "ORIGIN", Value: "test"}}, frames); err != nil {
			t.Fatal(err)
		}
		back, err := ReadObservation(path)
		if err != nil {
			t.Fatal(err)
		}
		if !frames {
			o.Frames = [2]*Cube{}
		}
		if d := cmp.Diff(o, back, cmpopts.EquateNaNs()); d != "" {
			t.Errorf("frames %v: %s", frames, d)
		}
	}
}
