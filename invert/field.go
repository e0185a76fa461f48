package invert

import (
	"math"

	"offplane/scenarios/units"
	"offplane/synth/line"
)

// fieldStrength returns B = v sqrt(4 pi rho) [G] and its error for a phase speed v
// [km/s] and an electron density n [cm^-3], rho = mu m_p n (Nakariakov & Verwichte
// 2005, Living Rev. Sol. Phys. 2, 3): the kink speed in a field that is the same
// inside and outside the tube.
func fieldStrength(v, vErr, n, nErr, mu float64) (b, err float64) {
	b = v * 1e5 * math.Sqrt(4*math.Pi*mu*units.ProtonMass*n)
	return b, b * math.Hypot(vErr/v, nErr/(2*n))
}

// density returns the electron density [cm^-3] that gives the ratio of energies of
// the second line to the first at the projected distance r [solar radii], and
// d ln ratio / d ln n there. ok is false outside the range of the emitter.
func density(e line.Emitter, ratio, t, r float64) (n, slope float64, ok bool) {
	f := func(x float64) float64 {
		j1, j2 := e.Emissivities(math.Exp(x), t, r)
		return math.Log(j2/j1) - math.Log(ratio)
	}
	lo, hi := math.Log(1e6), math.Log(1e11)
	a, b := f(lo), f(hi)
	if !(a*b < 0) {
		return 0, 0, false
	}
	for range 60 {
		m := (lo + hi) / 2
		if c := f(m); a*c <= 0 {
			hi = m
		} else {
			lo, a = m, c
		}
	}
	x := (lo + hi) / 2
	return math.Exp(x), (f(x+1e-3) - f(x-1e-3)) / 2e-3, true
}
