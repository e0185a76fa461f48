package trial

import (
	"context"

	"offplane/invert"
	"offplane/scenarios"
	"offplane/synth"
	"offplane/synth/obs"
)

// Plane measures what the tracker makes of waves that it sees without any line of sight
// or camera: the phase speed [km/s], one number a pixel of the grid, NaN where there is
// none. The corona, the driver and the times of the frames are those of the scenario and
// the tracks those of its inversion, because directions [deg] are the ANGLE it found;
// only the plane of the sky emits, all tunings are exposed at once, and nothing blurs or
// disturbs them. So SPEED over this speed is what the line of sight and the camera do,
// and this speed over SPEED_SKY is the method's own bias, outflow included if there is
// one, because it carries the waves.
func Plane(ctx context.Context, l *scenarios.Loaded, directions []float32, s Settings) ([]float32, error) {
	c := onePlane(l.Scenario)
	light, _, err := Light(&c)
	if err != nil {
		return nil, err
	}
	scene, err := synth.NewScene(ctx, &c, light, s.Workers)
	if err != nil {
		return nil, err
	}
	rec, err := scene.Record()
	if err != nil {
		return nil, err
	}
	opt := Options(c.Inversion)
	opt.Directions = directions
	head := *rec.Head
	head.Mean[1] = nil // no density is asked for
	inversion, err := invert.Begin(&head, nil, opt)
	if err != nil {
		return nil, err
	}
	inversion.MapsOnly = true
	take := func(part *obs.Observation) error { return inversion.Take(ctx, part, s.Workers) }
	if _, _, err = rec.Parts(ctx, s.Workers, nil, take); err != nil {
		return nil, err
	}
	r, err := inversion.Finish(ctx, s.Workers, s.report("method"))
	if err != nil {
		return nil, err
	}
	return r.Maps.Get("SPEED").Data, nil
}

// smallWave is the wave amplitude of the one-plane run [km/s]: nothing averages it out
// there, and the Doppler shift of a few tunings is a linear measure of small ones only.
const smallWave = 1

// onePlane leaves of a scenario what the tracker is judged on.
func onePlane(s scenarios.Scenario) scenarios.Scenario {
	s.Sight.Plane = true
	s.Waves.Amplitude = min(s.Waves.Amplitude, smallWave)
	// Every stage that this camera does not name is off.
	s.Camera = scenarios.Camera{
		Cadence: s.Camera.Cadence, Duration: s.Camera.Duration,
		Tunings: s.Camera.Tunings, Filter: s.Camera.Filter, Stages: s.Camera.Stages,
		SecondLine: 1, Switching: "together", Blocks: 1,
		Aperture: s.Camera.Aperture, Throughput: s.Camera.Throughput, Exposure: s.Camera.Exposure, Coadds: 1,
	}
	s.Inversion.Estimators = s.Inversion.Estimators[:min(1, len(s.Inversion.Estimators))]
	return s
}
