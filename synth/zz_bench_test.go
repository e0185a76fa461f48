package synth

import (
	"context"
	"testing"
)

func BenchmarkBelt(b *testing.B) {
	s, l := load(b, "quiet-belt", "image.from=262 deg", "image.to=270 deg")
	c := scene(b, s, l)
	var samples int
	for b.Loop() {
		o, _, err := c.Observe(context.Background(), 1, nil)
		if err != nil {
			b.Fatal(err)
		}
		samples = len(o.Pixels)
	}
	b.ReportMetric(float64(samples)*float64(b.N)/b.Elapsed().Seconds(), "pixels/s")
}
