package line

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// Dilution is the dilution factor W of a uniform disc at r >= 1 solar radii: the
// share of the sphere that the disc fills.
func Dilution(r float64) float64 {
	// (1 - s)/2 with s = sqrt(1 - 1/r^2), written without cancellation at large r.
	return 0.5 / (r * r * (1 + math.Sqrt((r-1)*(r+1))/r))
}

// A law is a limb-darkening law I(mu)/I(1) = sum of law[i] mu^i.
type law []float64

func (l law) at(mu float64) float64 {
	v := 0.0
	for i := len(l) - 1; i >= 0; i-- {
		v = v*mu + l[i]
	}
	return v
}

// nodes for the mean intensity far from the Sun, where the integrand is smooth.
var farNodes, farWeights = func() (x, w []float64) {
	x, w = make([]float64, 24), make([]float64, 24)
	quad.Legendre{}.FixedLocations(x, w, 0, 1)
	return
}()

// meanIntensity is J/I0 at r >= 1: the mean over the sphere of the intensity of
// the limb-darkened disc over its intensity at disc centre.
//
// A ray at angle theta from the Sun's centre meets the surface at
// mu^2 = 1 - r^2 sin^2 theta. With mu as the variable,
//
//	J/I0 = 1/(2r) sum of A_i K_(i+1),  K_m = integral over 0..1 of mu^m / sqrt(mu^2 + a^2),  a^2 = r^2 - 1.
//
// The K follow from K_0 = asinh(1/a), K_1 = r - a and, by parts,
// m K_m = r - (m-1) a^2 K_(m-2).
func (l law) meanIntensity(r float64) float64 {
	a2 := (r - 1) * (r + 1)
	a := math.Sqrt(a2)
	var sum float64
	if r > 1.5 {
		// The recurrence loses a factor a^2 of accuracy every other step; the
		// nearest singularities mu = +-ia are now far off and quadrature is exact
		// to rounding.
		for k, mu := range farNodes {
			sum += farWeights[k] * l.at(mu) * mu / math.Sqrt(mu*mu+a2)
		}
		return sum / (2 * r)
	}
	even := 0.0 // a^2 K_0 tends to 0 at the surface, where K_0 is infinite
	if a > 0 {
		even = math.Asinh(1 / a)
	}
	odd := r - a
	for i, c := range l {
		if i == 0 {
			sum += c * odd // K_1
			continue
		}
		m := float64(i + 1)
		if i%2 == 1 {
			even = (r - (m-1)*a2*even) / m
			sum += c * even
		} else {
			odd = (r - (m-1)*a2*odd) / m
			sum += c * odd
		}
	}
	return sum / (2 * r)
}

// darkening interpolates the coefficients linearly in wavelength [nm] between the
// two rows nearest to it; outside the rows it is the nearest row.
func (a *Atom) darkening(nm float64) law {
	rows := a.darkened
	i := 0
	for i < len(rows)-2 && rows[i+1].wavelength < nm {
		i++
	}
	if len(rows) == 1 {
		return rows[0].law
	}
	lo, hi := rows[i], rows[i+1]
	u := min(max((nm-lo.wavelength)/(hi.wavelength-lo.wavelength), 0), 1)
	out := make(law, max(len(lo.law), len(hi.law)))
	for k := range out {
		if k < len(lo.law) {
			out[k] += (1 - u) * lo.law[k]
		}
		if k < len(hi.law) {
			out[k] += u * hi.law[k]
		}
	}
	return out
}

// occupation is the number of photons per mode of radiance [erg cm^-2 s^-1 sr^-1
// A^-1] at a vacuum wavelength [cm]: I_lambda lambda^5 / (2 h c^2).
func occupation(radiance, wavelength float64) float64 {
	const perAngstrom = 1e8 // A per cm
	return radiance * perAngstrom * math.Pow(wavelength, 5) / twoHC2
}
