package line

// An Emitter gives the emissivities of the two lines. Synthesis and inversion
// take one each; they need not be the same.
type Emitter interface {
	// Emissivities returns the emissivities [erg cm^-3 s^-1 sr^-1] of the 1074.7
	// and the 1079.8 nm line at electron density n [cm^-3], temperature t [K] and
	// heliocentric distance r [solar radii]. Outside the range of the data both
	// are NaN.
	Emissivities(n, t, r float64) (j1, j2 float64)
}
