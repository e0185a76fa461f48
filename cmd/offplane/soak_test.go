//go:build soak

package main

import "testing"

// TestKillsSoak: 200 kills of each command; .ci/soak.
func TestKillsSoak(t *testing.T) {
	dir := t.TempDir()
	tryKills(t, dir, victims(t, dir), 200)
}
