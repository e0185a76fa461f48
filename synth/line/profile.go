package line

import (
	"math"

	"offplane/scenarios/units"
)

// Width returns the 1/e half-width [cm/s] of a line: thermal motion of ions of
// the given mass [g] at temperature t [K] and Gaussian unresolved motions of 1/e
// speed xi [cm/s]: w^2 = 2kT/M + xi^2. The standard deviation is w/sqrt 2.
func Width(mass, t, xi float64) float64 {
	return math.Sqrt(2*units.Boltzmann*t/mass + xi*xi)
}

// Doppler returns the velocity [cm/s], positive away from the observer, that
// moves a line from its rest wavelength to a wavelength in the same unit:
// v = c (wavelength - rest)/rest, to first order in v/c.
func Doppler(wavelength, rest float64) float64 {
	return units.LightSpeed * (wavelength - rest) / rest
}

// Shifted is the inverse of Doppler.
func Shifted(v, rest float64) float64 { return rest * (1 + v/units.LightSpeed) }

// Air returns the wavelength in standard air [nm] of a vacuum wavelength [nm]
// (Edlén 1966, Metrologia 2, 71).
func Air(vacuum float64) float64 {
	σ2 := 1e6 / (vacuum * vacuum) // squared wavenumber [µm^-2]
	return vacuum / (1 + 1e-8*(8342.13+2406030/(130-σ2)+15997/(38.9-σ2)))
}
