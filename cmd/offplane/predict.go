package main

import (
	"context"
	"time"

	"offplane/compare/trial"
	"offplane/scenarios"
	"offplane/synth"
	"offplane/synth/parallel"
)

// A prediction is what a run of a scenario would take and what its data would be
// worth. Counts are exact; the rest are estimates.
type prediction struct {
	Schema   int     `json:"schema"` // 1
	Scenario string  `json:"scenario"`
	SHA256   string  `json:"scenario_sha256"`
	Pixels   int     `json:"pixels"`
	Image    [2]int  `json:"image"`
	Frames   int     `json:"frames"`
	Second   int     `json:"frames_of_second_line"`
	Samples  float64 `json:"samples_per_line_of_sight"` // in the middle of the field
	Workers  int     `json:"workers"`
	Seconds  float64 `json:"seconds"`
	Memory   float64 `json:"peak_memory_bytes"`
	Disk     float64 `json:"disk_bytes"`
	Framed   float64 `json:"disk_bytes_with_frames"`
	Heights  []dose  `json:"heights"`
}

// A dose is the light that a pixel gets at one height, without waves.
type dose struct {
	Height float64     `json:"height_rsun"`
	PA     float64     `json:"position_angle_deg"`
	Open   float64     `json:"aperture_past_occulter"`
	Lines  [2]lineDose `json:"lines"`
}

// A lineDose is the dose in one line; lists are per tuning, in order of wavelength.
type lineDose struct {
	Peak      float64   `json:"peak_ppm"`  // of the line's profile, millionths of the disc-centre continuum
	Electrons []float64 `json:"electrons"` // of the line, one exposure
	Continuum float64   `json:"continuum_electrons"`
	SNR       []float64 `json:"signal_to_noise"`
	Noise     float64   `json:"doppler_noise_km_s"`         // rms of one frame
	InBand    float64   `json:"doppler_noise_in_band_km_s"` // rms in the inversion's band
	Saturated bool      `json:"saturated"`
}

// Calibration of the estimates: CPU seconds and bytes of runs of the embedded scenarios
// and variants of them, measured on cores of an amd64 server with the vector kernels.
const (
	sampleSeconds = 1.7e-6 // one sample of a line of sight
	trainSeconds  = 6.5e-7 // one train of waves there
	frameSeconds  = 2.2e-9 // one frame of it, for each moment at which tunings are exposed
	invertSeconds = 6e-7   // the inversion and the method's own bias, one pixel and frame
	reportSeconds = 0.6    // the figures
	baseBytes     = 60e6   // the program, lines and tables
	cacheBytes    = 160e6  // spectra of the driver, at most
	pixelBytes    = 15e3   // spectra of the driver for one pixel
	keptBytes     = 5.5    // of a pixel and frame: its series, and what of it lies in the band
	placeBytes    = 250    // of a pixel of the image: maps and lists
	stripRows     = 80     // rows of mean length of a strip of the image, of whose frames there are two copies
	slack         = 1.25   // of the heap
)

// predict builds the scene of a scenario, without observing it, and estimates what its
// run would take. Heights outside the field of view are left out.
func predict(ctx context.Context, l *scenarios.Loaded, workers int) (*prediction, error) {
	s := &l.Scenario
	light, _, err := trial.Light(s)
	if err != nil {
		return nil, err
	}
	if _, _, err := trial.Model("inversion.line", s.Inversion.Line, s.Inversion.Helium); err != nil {
		return nil, err
	}
	started := time.Now()
	scene, err := synth.NewScene(ctx, s, light, workers)
	if err != nil {
		return nil, err
	}
	build := time.Since(started).Seconds()
	inner, outer := float64(s.Image.Inner), float64(s.Image.Outer)
	radii := []float64{(inner + outer) / 2}
	for _, r := range []float64{1.05, 1.1, 1.2, 1.35} {
		if r >= inner && r <= outer {
			radii = append(radii, r)
		}
	}
	b, err := scene.Budget(radii)
	if err != nil {
		return nil, err
	}
	p := &prediction{
		Schema: 1, Scenario: l.Name, SHA256: l.SHA256,
		Pixels: b.Pixels, Image: [2]int{scene.Grid.Nx, scene.Grid.Ny},
		Frames: b.Frames[0], Second: b.Frames[1], Workers: parallel.Workers(workers),
		Samples: float64(b.Rows[0].Samples),
	}
	for _, r := range b.Rows[1:] {
		d := dose{Height: r.Height, PA: r.PA, Open: r.Open}
		for i, q := range r.Lines {
			d.Lines[i] = lineDose{q.Peak, q.Electrons, q.Continuum, q.SNR, q.Noise, q.InBand, q.Saturated}
		}
		p.Heights = append(p.Heights, d)
	}

	trains := 1.0
	if s.Waves.FarEnd || s.Waves.Inward > 0 {
		trains = 2
	}
	frames, pixels := float64(p.Frames), float64(p.Pixels)
	moments := 1.0
	if s.Camera.Sequential {
		moments = float64(len(s.Camera.Tunings))
	}
	work := pixels*p.Samples*(sampleSeconds+trains*trainSeconds+moments*frames*frameSeconds) + pixels*frames*invertSeconds
	p.Seconds = build + work/float64(p.Workers) + reportSeconds

	values := float64(len(s.Camera.Tunings)) * (frames + float64(p.Second))
	cube := 4 * pixels * values
	size := float64(scene.Grid.Nx * scene.Grid.Ny)
	held := 2 * cube * min(1, stripRows/float64(scene.Grid.Ny))
	if s.Camera.Scatter != nil { // each pixel lights all others
		held += cube
	}
	p.Memory = slack * (baseBytes + keptBytes*pixels*frames + placeBytes*size + held + min(cacheBytes, pixels*pixelBytes))
	const maps = 15 + 16 + 4 // truth, inferred, bias
	p.Disk = 4*size*(maps+2*float64(len(s.Camera.Tunings))) + 4*pixels*frames + 1e6
	p.Framed = p.Disk + float64(b.Bytes)
	return p, nil
}
