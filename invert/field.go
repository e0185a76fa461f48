package invert

import (
	"fmt"
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

// newInverter prepares the density for the heights of the field. Pixels inside the
// limb get none.
func newInverter(e line.Emitter, t float64, f *field) (*line.Inverter, error) {
	low, high := math.Inf(1), 1.0
	for p := range f.pixels {
		ix, iy := f.at(p)
		d, _ := f.grid.Polar(ix, iy)
		low, high = min(low, d), max(high, d)
	}
	inv, err := line.NewInverter(e, t, max(min(low, high), 1), high)
	if err != nil {
		return nil, fmt.Errorf("density at %.3g K from %.3f to %.3f solar radii: %w", t, low, high, err)
	}
	return inv, nil
}
