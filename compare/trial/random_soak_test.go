//go:build soak

package trial

import (
	"fmt"
	"testing"
)

// TestRandomScenariosSoak: .ci/soak tests.
func TestRandomScenariosSoak(t *testing.T) {
	for number := uint64(0); number < 200; number++ {
		t.Run(fmt.Sprint(number), func(t *testing.T) { sane(t, drawn(t, number)) })
	}
}

// TestSeenFromBehindSoak: .ci/soak tests.
func TestSeenFromBehindSoak(t *testing.T) {
	for number := uint64(0); number < 60; number++ {
		t.Run(fmt.Sprint(number), func(t *testing.T) { turned(t, drawn(t, number)) })
	}
}
