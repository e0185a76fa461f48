package scenarios

import (
	"time"

	"offplane/scenarios/units"
)

// Default returns what a scenario file that says nothing stands for: a quiet streamer
// belt without a hole, seen with a 20 cm coronagraph for three hours.
func Default() Scenario {
	line := Line{Ionisation: "modern", Iron: 7.85, Photo: 1} // Schmelz et al. 2012, ApJ 755, 33
	return Scenario{
		Seed:     1,
		Observer: Observer{Distance: 1, Start: units.Date{Time: time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)}},
		Corona: Corona{
			Fields: []Field{{DipoleSheet: &DipoleSheet{Strength: 3.3, Sheet: 4}}},
			Density: Density{
				Streamer: Law{Named: "gibson-1999", Factor: 1},
				Boundary: 3,
				Active:   []Active{},
			},
			Temperature: Temperature{Streamer: 1.6, Hole: 1},
			ClosedBelow: 2.5,
			Helium:      0.10,
			Nonthermal:  25,
		},
		Waves: Waves{
			Amplitude: 12,
			AtDensity: 1e8,
			Growth:    "wkb",
			Cell:      7,
			Spectrum:  Spectrum{Slope: 1.5, Floor: 0.1, Bump: 3, BumpAt: 3.5, BumpWidth: 0.4, Low: 0.2, High: 12},
			// From memory of Verth, Terradas & Goossens 2010, ApJ 718, L102.
			Damping:    2.69,
			Inward:     0.3,
			InwardFrom: 2.5,
			FarEnd:     true,
		},
		Line:  line,
		Sight: Sight{Step: 1.25, Reach: 2, Tail: 0.001},
		Image: Image{Pixel: 4.35, Inner: 1.05, Outer: 1.35, From: 0, To: 360},
		Camera: Camera{
			Like:        "none",
			Cadence:     30,
			Duration:    3 * 3600,
			Tunings:     []units.Wavelength{-0.12, 0, 0.12},
			Filter:      0.13,
			Order:       []int{},
			SecondLine:  12,
			Switching:   "together",
			Blocks:      1,
			PointSpread: 2,
			Background:  8,
			Noise:       true,
			Aperture:    20,
			Throughput:  0.05,
			Exposure:    2.5,
			Coadds:      10,
			ReadNoise:   50,
			Gaps:        []Gap{},
		},
		Inversion: Inversion{
			Filter:      Band{Centre: 3.5, Width: 1.5, Means: "1/e"},
			Taper:       0.1,
			Box:         21,
			Coherence:   0.5,
			Track:       31,
			Estimators:  []string{"lag"},
			Separation:  true,
			KZero:       "halved",
			Padding:     1,
			Temperature: 1.6,
			Mu:          1.1667, // (1 + 4A)/(1 + 2A) with A = He/H = 0.10
			Helium:      0.10,
			Line:        line,
		},
	}
}

// Prefill makes a law without factor the published one.
func (l *Law) Prefill() { l.Factor = 1 }

// Prefill makes the field free of divergence.
func (r *Radial) Prefill() { r.Exponent = 2 }

// Prefill makes the share fall as the cube of the angle beyond a minute of arc (common
// practice, no source).
func (s *Scatter) Prefill() { *s = Scatter{Share: 0.01, Core: 60, Exponent: 3} }

// Prefill makes an edge within the image of the default.
func (o *Occulter) Prefill() { *o = Occulter{Radius: 1.04, Width: 20} }

// like fills in an example camera and returns its pixel. Aperture, pixel, filter and
// background are within the ranges of present and planned coronagraphs; throughput,
// exposure and detector are common practice, no source.
func (c *Camera) like() units.SkyAngle {
	c.Stages, c.Sequential = 5, true
	c.PointSpread, c.Diffraction, c.Seeing = 0, true, 1.5
	c.Scatter = &Scatter{Share: 0.02, Core: 60, Exponent: 3}
	c.Pointing = &Pointing{Jitter: 0.3}
	c.Occulter = &Occulter{Radius: 1.03, Width: 20}
	c.KCorona = 1
	c.DeadTime = 0.5
	c.FullWell, c.Digit, c.FlatField = 2e5, 4, 1e-3
	switch c.Like {
	case "20cm-4.35arcsec":
		return 4.35
	case "20cm-3arcsec":
		return 3
	case "50cm-3arcsec":
		c.Aperture, c.Coadds = 50, 25
		return 3
	case "150cm-2arcsec":
		c.Aperture, c.Coadds, c.Background = 150, 100, 5
		return 2
	}
	panic("scenarios: no camera is like " + c.Like)
}
