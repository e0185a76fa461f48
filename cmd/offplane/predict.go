package main

import (
	"math"

	"offplane/compare/trial"
	"offplane/model"
	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth"
	"offplane/synth/camera"
	"offplane/synth/filter"
	"offplane/synth/line"
	"offplane/synth/obs"
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
	Samples  float64 `json:"samples_per_line_of_sight"` // mean over the heights, within the streamer
	Workers  int     `json:"workers"`
	Seconds  float64 `json:"seconds"`
	Memory   float64 `json:"peak_memory_bytes"`
	Disk     float64 `json:"disk_bytes"`
	Framed   float64 `json:"disk_bytes_with_frames"`
	Heights  []dose  `json:"heights"`
}

// A dose is the light that a pixel gets at one height, looking through the streamer.
type dose struct {
	Height  float64   `json:"height_rsun"`
	Peak    float64   `json:"peak_ppm"`           // of the first line, millionths of the disc-centre continuum
	Photons []float64 `json:"photons"`            // detected of the first line, one tuning and exposure, in order of wavelength
	Noise   float64   `json:"doppler_noise_km_s"` // rms, one frame
	samples int
}

// Calibration of the estimates: CPU seconds and bytes of runs of the embedded scenarios
// and variants of them, measured on cores of an amd64 server with the vector kernels.
const (
	traceSeconds  = 2.5    // field lines of a dipole with a sheet, tables of the driver
	radialSeconds = 0.8    // the same for a radial field
	sampleSeconds = 3.1e-6 // one train of waves at one sample of a line of sight
	frameSeconds  = 9.5e-9 // and one frame of it
	invertSeconds = 3.5e-7 // the inversion, one pixel and frame
	reportSeconds = 0.6    // the figures
	baseBytes     = 60e6   // the program, lines and tables
	cacheBytes    = 1.1e9  // rows of the driver, at most
	pixelBytes    = 15e3   // rows of the driver for one pixel and train
	rowBytes      = 70     // and one frame of it
)

// predict estimates what a run would take.
func predict(l *scenarios.Loaded, workers int) (*prediction, error) {
	s := &l.Scenario
	m, _, err := trial.Model(s.Line, s.Corona.Helium)
	if err != nil {
		return nil, err
	}
	law, err := model.NewLaw(s.Corona.Density.Streamer, s.Corona.Helium)
	if err != nil {
		return nil, err
	}
	grid := synth.NewGrid(s, m.RestWavelengths()[0])
	p := &prediction{
		Schema: 1, Scenario: l.Name, SHA256: l.SHA256,
		Pixels: len(synth.Field(&grid, s)), Image: [2]int{grid.Nx, grid.Ny},
		Frames: synth.Frames(s), Workers: parallel.Workers(workers),
	}
	p.Second = min(s.Camera.SecondLine, p.Frames)
	cam := camera.New(s.Camera, s.Seed, grid.Pixel*obs.Arcsec, m.DiscCentre(), m.RestWavelengths())
	for _, r := range []float64{1.05, 1.1, 1.2, 1.35} {
		if r >= float64(s.Image.Inner) && r <= float64(s.Image.Outer) {
			p.Heights = append(p.Heights, doseAt(s, m, cam, law, r))
		}
	}
	middle := doseAt(s, m, cam, law, (float64(s.Image.Inner)+float64(s.Image.Outer))/2)
	p.Samples = float64(middle.samples)

	trains := 1.0
	if s.Waves.FarEnd || s.Waves.Inward > 0 {
		trains = 2
	}
	frames, pixels := float64(p.Frames), float64(p.Pixels)
	scene := radialSeconds
	for _, f := range s.Corona.Fields {
		if f.DipoleSheet != nil {
			scene = traceSeconds
		}
	}
	work := scene + pixels*p.Samples*trains*(sampleSeconds+frames*frameSeconds) + pixels*frames*invertSeconds
	p.Seconds = work/float64(p.Workers) + reportSeconds

	values := float64(len(s.Camera.Tunings)) * (frames + float64(p.Second))
	cube := 4 * pixels * values
	p.Memory = baseBytes + 2*cube // before and behind the camera
	if !s.Sight.Plane {
		p.Memory += min(cacheBytes, pixels*trains*(pixelBytes+frames*rowBytes))
	}
	size := float64(grid.Nx * grid.Ny)
	const maps = 14 + 16 + 4 // truth, inferred, bias
	p.Disk = 4*size*(maps+2*float64(len(s.Camera.Tunings))) + 4*pixels*frames + 1e6
	p.Framed = p.Disk + 4*size*values
	return p, nil
}

// doseAt looks through the streamer at projected distance r [solar radii]. The steps
// are those of package synth.
func doseAt(s *scenarios.Scenario, m *line.Model, cam *camera.Camera, law model.Law, r float64) dose {
	t := s.Corona.Temperature.Streamer.Kelvin()
	h := s.Sight.Step * s.Waves.Cell.Rsun()
	at := func(k int) (j, n float64) {
		d := r * math.Cosh(h*float64(k))
		n = law(d, 0)
		j, _ = m.Emissivities(n, t, d)
		return j * d * h * units.SolarRadius, n
	}
	total, n := at(0)
	d := dose{Height: r, samples: 1}
	if !s.Sight.Plane {
		last := total
		for k := 1; r*math.Sinh(h*float64(k)) <= float64(s.Sight.Reach); k++ {
			j, _ := at(k)
			if math.IsNaN(j) {
				break
			}
			total += 2 * j
			d.samples += 2
			if q := j / last; r*math.Sinh(h*float64(k)) > r && q < 1 && j*q/(1-q) < s.Sight.Tail*total {
				break
			}
			last = j
		}
	}
	// All of the light in one profile of the width at the plane of the sky.
	rest := m.RestWavelengths()[0]
	xi := float64(s.Corona.Nonthermal) * kms * math.Pow(n/float64(s.Waves.AtDensity), -0.25)
	w := line.Width(m.Mass(), t, xi) / units.LightSpeed * rest // [nm]
	d.Peak = total / (math.Sqrt(math.Pi) * w * 10) / m.DiscCentre()[0] * 1e6
	wf := filter.EFolding(float64(s.Camera.Filter))
	var x, radiance, noise []float64
	for _, off := range s.Camera.Tunings {
		i := total * filter.Gaussian(float64(off), 0, w, wf)
		x, radiance = append(x, float64(off)), append(radiance, i)
		noise = append(noise, cam.Sigma(0, i))
		d.Photons = append(d.Photons, i*cam.Electrons[0])
	}
	d.Noise = dopplerNoise(x, radiance, noise, math.Hypot(w, wf)) * units.LightSpeed / kms / rest
	if !s.Camera.Noise {
		d.Noise = 0
	}
	return d
}

// kms is one km/s in cgs.
const kms = 1e5

// dopplerNoise returns the smallest rms error that an unbiased estimate of the centre
// of a Gaussian of unknown height, centre and width w can have (Cramer-Rao), in the
// unit of x; for three tunings it is that of the analytic solution, which uses each
// value in full.
func dopplerNoise(x, i, sigma []float64, w float64) float64 {
	// Fisher matrix in ln height, centre and width.
	var f [3][3]float64
	for k := range x {
		g := [3]float64{i[k], i[k] * 2 * x[k] / (w * w), i[k] * 2 * x[k] * x[k] / (w * w * w)}
		for a := range 3 {
			for b := range 3 {
				f[a][b] += g[a] * g[b] / (sigma[k] * sigma[k])
			}
		}
	}
	minor := f[0][0]*f[2][2] - f[0][2]*f[2][0]
	det := f[0][0]*(f[1][1]*f[2][2]-f[1][2]*f[2][1]) - f[0][1]*(f[1][0]*f[2][2]-f[1][2]*f[2][0]) + f[0][2]*(f[1][0]*f[2][1]-f[1][1]*f[2][0])
	return math.Sqrt(minor / det)
}
