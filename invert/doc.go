// Package invert is the standard inversion of coronal seismology: from frames of
// the near-infrared Fe XIII pair to maps of wave direction, phase speed, density
// and magnetic field. It is blind: it sees an observation, never the corona that
// made it, and takes from the rest of the program only leaves and the line model.
//
// The steps, in the order of the files:
//
//	profile.go    a Gaussian through the tunings: peak, Doppler shift, width, energy
//	series.go     Doppler series: repair, band-pass, noise, trend of the whole field
//	direction.go  coherence islands and the direction of their axis
//	track.go      a track along the directions, the wave signal on it
//	lag.go        outward and inward waves, lags along the track, phase speed
//	field.go      density from the ratio of the lines, field strength
//
// All wave work is done on the complex Fourier coefficients inside the band; a
// pixel's series is turned back into time only for the caller.
package invert
