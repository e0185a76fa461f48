// Package invert is the standard inversion of coronal seismology: from frames of
// the near-infrared Fe XIII pair to maps of wave direction, phase speed, density
// and magnetic field. It is blind: it sees an observation, never the corona that
// made it, and takes from the rest of the program only leaves and the line model.
//
// The steps, in the order of the files:
//
//	log.go        a quick logarithm
//	profile.go    a Gaussian through the tunings: peak, Doppler shift, width, energy
//	fit.go        a line on a background by least squares, for four tunings or more
//	timing.go     frames that are late or missing
//	series.go     Doppler series: repair, band-pass, noise, trend of the whole field
//	direction.go  coherence islands and the direction of their axis
//	track.go      a track along the directions, the wave signal on it
//	sway.go       the error of a speed that its track makes
//	estimate.go   the phase-speed estimators side by side
//	lag.go        outward and inward waves, lags along the track, phase speed
//	pair.go       an outward and an inward wave of one speed, fitted together
//	field.go      density from the ratio of the lines, field strength
//	diagnose.go   how one pixel came by its values
//
// All wave work is done on the complex Fourier coefficients inside the band; a
// pixel's series is turned back into time only for the caller.
//
// # Estimators
//
// Lag is the published standard: waves are separated on the track by the sign of
// omega k, and a straight line is fitted to the lags. The separation needs whole
// wavelengths on the track, and customary tracks hold half a wavelength, so it
// reads low, lowest where waves are fast. Unsplit leaves the separation out: exact
// for waves that run one way, wrong by any factor where they run both ways. Pair
// needs neither whole wavelengths nor one direction.
//
// Speed over the wave-weighted truth, median and median absolute error, of 31-point
// tracks at 4.35 arcsec on the embedded scenarios, 90 min (own simulations;
// TestEstimatorsOnTheLibrary in compare/trial):
//
//	scenario        lag            unsplit        pair
//	plane-wave      0.861  0.139   1.002  0.006   1.002  0.006
//	sphere          0.885  0.115   1.001  0.016   1.001  0.017
//	quick           0.855  0.147   1.188  0.192   1.014  0.023
//	tilted-belt     0.810  0.191   1.151  0.162   1.085  0.102
//	warped-belt     0.814  0.189   1.261  0.266   1.061  0.079
//	clumpy-belt     0.849  0.152   1.196  0.203   1.017  0.031
//	two-loops       0.746  0.255   1.051  0.091   1.026  0.072
//	source-surface  0.856  0.144   1.024  0.058   1.007  0.041
//	quiet-belt      0.722  0.278   1.004  0.031   1.007  0.032   (300 to 316 deg)
//
// Pair loses a little to unsplit where nothing runs inward, because it has twice the
// unknowns.
// Two refinements of pair were tried and left out. A slowness that changes along the
// track, free or held to within 10 to 100 % of its mean, took a fifth off the errors on
// the sphere and added up to 50 % wherever waves run both ways. Weights that make all
// frequencies or all points of a track alike added up to 60 %. A taper of the
// series matters more: without one, the errors of pair on quick are 1.7 times as
// large.
package invert
