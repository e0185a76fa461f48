package trial

import (
	"context"
	"fmt"
	"strings"
	"testing"

	"offplane/invert"
	"offplane/synth/obs"
)

// What the camera lost is flagged: pixels behind the occulter and saturated ones have
// no field and say so, lost frames are repaired and the pixel says so; too many of them
// and it has no field either.
func TestBadPixelsAreFlagged(t *testing.T) {
	small := []string{"image.from=267 deg", "image.to=273 deg", "image.pixel=8 arcsec", "camera.duration=1 h", "inversion.box=11", "inversion.track=11"}
	o := run(t, "plane-wave", append(small, "camera.lost=0.1", "camera.occulter={radius: 1.15 Rsun, width: 10 arcsec}")...)
	flag, b := o.Inferred.Maps.Get("FLAG").Ints, o.Inferred.Maps.Get("B").Data
	hidden, repaired := 0, 0
	g := &o.Observation.Grid
	for i := range flag {
		r, _ := g.Polar(i%g.Nx, i/g.Nx)
		switch sky := o.Truth.Maps.Get("B_SKY").Data[i]; {
		case sky != sky: // outside the field of view
		case r < 1.14:
			hidden++
			if flag[i]&invert.FlagOutside == 0 || b[i] == b[i] {
				t.Fatalf("behind the occulter: flag %b, %v G", flag[i], b[i])
			}
		case r > 1.16:
			repaired++
			if flag[i]&invert.FlagRepaired == 0 {
				t.Fatalf("a tenth of the frames is lost: flag %b", flag[i])
			}
		}
	}
	if hidden < 20 || repaired < 20 {
		t.Errorf("%d pixels behind the occulter, %d before it", hidden, repaired)
	}

	o = run(t, "plane-wave", append(small, "camera.lost=0.5")...)
	for _, p := range o.Observation.Pixels {
		if flag := o.Inferred.Maps.Get("FLAG").Ints[p]; flag&invert.FlagBadSeries == 0 {
			t.Fatalf("half of the frames is lost: flag %b", flag)
		}
	}

	budget, err := o.Scene.Budget([]float64{1.15})
	if err != nil {
		t.Fatal(err)
	}
	line := budget.Rows[0].Lines[0]
	full10 := (line.Electrons[1] + line.Continuum) / 10 // in one of ten reads
	o = run(t, "plane-wave", append(small, fmt.Sprintf("camera.full_well=%g", full10))...)
	full := 0
	for i, f := range o.Inferred.Maps.Get("FLAG").Ints {
		if sky := o.Truth.Maps.Get("B_SKY").Data[i]; sky == sky && !inField(o.Observation, int32(i)) {
			full++
			if f&invert.FlagOutside == 0 {
				t.Fatalf("saturated: flag %b", f)
			}
		}
	}
	if full == 0 || len(o.Observation.Pixels) == 0 {
		t.Errorf("%d pixels are saturated, %d not", full, len(o.Observation.Pixels))
	}
	small = append(small, "camera.full_well=1000")
	if _, err := Run(context.Background(), load(t, "plane-wave", small...), Settings{}); err == nil || !strings.Contains(err.Error(), "no pixel") {
		t.Errorf("all saturated: %v", err)
	}
}

func inField(o *obs.Observation, p int32) bool {
	for _, q := range o.Pixels {
		if p == q {
			return true
		}
	}
	return false
}
