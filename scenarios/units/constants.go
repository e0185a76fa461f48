// Package units holds the quantities that people write ("7 Mm", "1.6 MK") and the
// constants of nature.
//
// Every quantity is a defined float64 type in ONE canonical unit, the one it prints
// in; float64(q) is the number in that unit. Units end at the edge of the program:
// the methods CGS, Rad, Hz, Kelvin, Rsun hand plain numbers to the physics, which is
// cgs-Gaussian with lengths in solar radii.
package units

// Constants of nature and nominal solar constants, cgs-Gaussian.
const (
	SolarRadius = 6.957e10          // [cm] nominal, IAU 2015 Resolution B3
	SolarGM     = 1.3271244e26      // [cm^3 s^-2] nominal, IAU 2015 Resolution B3
	AU          = 1.495978707e13    // [cm] exact, IAU 2012 Resolution B2
	LightSpeed  = 2.99792458e10     // [cm/s] exact, SI
	Planck      = 6.62607015e-27    // [erg s] exact, SI 2019
	Boltzmann   = 1.380649e-16      // [erg/K] exact, SI 2019
	AtomicMass  = 1.66053906660e-24 // [g] CODATA 2018
	ProtonMass  = 1.67262192369e-24 // [g] CODATA 2018
)
