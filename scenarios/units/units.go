package units

import "math"

// Angle is a plane angle [deg].
type Angle float64

// SkyAngle is a small angle on the sky [arcsec].
type SkyAngle float64

// Distance is a distance between bodies [au].
type Distance float64

// Height is a heliocentric height, or a length in solar radii [Rsun].
type Height float64

// Length is a length on or above the Sun [Mm].
type Length float64

// Duration is a span of time [s].
type Duration float64

// Frequency is a frequency of waves [mHz].
type Frequency float64

// Temperature is a temperature [MK].
type Temperature float64

// Field is a magnetic flux density [G].
type Field float64

// Speed is a speed [km/s].
type Speed float64

// Density is a number density of electrons [cm-3].
type Density float64

// Wavelength is a wavelength or an offset from one, in vacuum [nm].
type Wavelength float64

// Diameter is a size in the laboratory [cm].
type Diameter float64

// Brightness is a radiance in millionths of the disc-centre continuum [ppm].
type Brightness float64

// Rad returns the angle [rad].
func (a Angle) Rad() float64 { return float64(a) * (math.Pi / 180) }

// Rad returns the angle [rad].
func (a SkyAngle) Rad() float64 { return float64(a) * (math.Pi / 648000) }

// CGS returns the distance [cm].
func (d Distance) CGS() float64 { return float64(d) * AU }

// Rsun returns the distance [solar radii].
func (d Distance) Rsun() float64 { return float64(d) * (AU / SolarRadius) }

// CGS returns the height [cm].
func (h Height) CGS() float64 { return float64(h) * SolarRadius }

// CGS returns the length [cm].
func (l Length) CGS() float64 { return float64(l) * 1e8 }

// Rsun returns the length [solar radii].
func (l Length) Rsun() float64 { return float64(l) / (SolarRadius / 1e8) }

// Hz returns the frequency [Hz].
func (f Frequency) Hz() float64 { return float64(f) / 1e3 }

// Kelvin returns the temperature [K].
func (t Temperature) Kelvin() float64 { return float64(t) * 1e6 }

// CGS returns the speed [cm/s].
func (s Speed) CGS() float64 { return float64(s) * 1e5 }

// CGS returns the wavelength [cm].
func (w Wavelength) CGS() float64 { return float64(w) / 1e7 }

// Fraction returns the radiance over that of the disc-centre continuum.
func (b Brightness) Fraction() float64 { return float64(b) / 1e6 }
