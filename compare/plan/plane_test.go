package plan

import (
	"regexp"
	"testing"
)

// plane is a campaign on the plane of the sky alone, which costs next to nothing: waves of
// one radial speed. What a plane alone shines is faint, and so is the background here:
// apertures of 20 to 200 cm have a noise of about 0.6 to 0.06 of the waves in the band.
const plane = `
target:
  scenario: plane-wave
  set: [camera.noise=true, camera.background=0.1 ppm, camera.aperture=20 cm, image.pixel=8.7 arcsec, inversion.box=11, inversion.track=15, "inversion.estimators=[pair]"]
  from: 266 deg
  to: 274 deg
  inner: 1.10 Rsun
  outer: 1.25 Rsun
goal: {random: 0.10, systematic: 0.10, yield: 0.7}
facts: {hours: 8 h, overhead: 10 min}
vary:
  - what: duration
    values: [1 h, 2 h, 4 h, 6 h]
  - what: cadence
    values: [15 s, 30 s, 60 s, 90 s]
  - what: aperture
    range: {from: 10 cm, to: 100 cm, steps: 7, ratio: true}
  - what: second_line
    values: [0.05, 0.2]
effort: {waves: 12 h, designs: 3, trials: 8}
`

func loadPlane(t *testing.T, set ...string) *Loaded {
	t.Helper()
	l, err := Parse("plane.yaml", []byte(plane), set...)
	if err != nil {
		t.Fatal(err)
	}
	return l
}

func match(t *testing.T, pattern, text string) bool {
	t.Helper()
	return regexp.MustCompile(pattern).MatchString(text)
}
