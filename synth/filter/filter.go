// Package filter describes the transmission of the tunable filter, which the
// camera applies and the inversion has to know.
package filter

import "math"

// Wavelength offsets are in any one unit (nm or km/s) throughout.

// EFolding returns the 1/e half-width of a Gaussian of the given full width at
// half maximum: w = FWHM / (2 sqrt(ln 2)).
func EFolding(fwhm float64) float64 { return fwhm / (2 * math.Sqrt(math.Ln2)) }

// Gaussian returns the part of a line of unit energy that passes a Gaussian
// filter of unit peak transmission: a Gaussian line of 1/e half-width w centred
// at u seen through a filter of 1/e half-width wf centred at d is itself Gaussian
// in d - u, with the widths added in quadrature.
func Gaussian(d, u, w, wf float64) float64 {
	s2 := w*w + wf*wf
	return wf / math.Sqrt(s2) * math.Exp(-(d-u)*(d-u)/s2)
}
