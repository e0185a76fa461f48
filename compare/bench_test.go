package compare_test

import (
	"testing"

	"offplane/compare"
	"offplane/compare/comparetest"
)

// A full ring in pixels of 4.35 arcsec, all medians with their intervals.
func BenchmarkCompareRing(b *testing.B) {
	c := comparetest.Ring(600)
	for b.Loop() {
		if _, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, c.Options); err != nil {
			b.Fatal(err)
		}
	}
}
