package trial

import (
	"context"
	"testing"
)

// BenchmarkQuick is the regression gauge: the whole sentence for the scenario quick, but
// for files and figures.
func BenchmarkQuick(b *testing.B) {
	l := load(b, "quick")
	pixels := 0
	for b.Loop() {
		o, err := Run(context.Background(), l, Settings{Method: true})
		if err != nil {
			b.Fatal(err)
		}
		pixels = len(o.Observation.Pixels)
	}
	b.ReportMetric(float64(pixels)*float64(b.N)/b.Elapsed().Seconds(), "pixels/s")
}
