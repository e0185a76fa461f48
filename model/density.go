package model

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/scenarios"
	"offplane/scenarios/units"
)

// A Law gives the electron density [cm^-3] at distance r [solar radii] and latitude
// [rad] over the middle of the streamer belt: heliographic if the belt is not tilted.
type Law func(r, latitude float64) float64

// laws holds the published profiles by author and year. To add one, write a file like
// laws_belt.go and add the name to the words of scenarios.Law.
var laws = map[string]Law{}

// register adds a law. It is called while the package's variables are set.
func register(name string, f Law) Law {
	if laws[name] != nil {
		panic("model: two density laws called " + name)
	}
	laws[name] = f
	return f
}

var _ = []Law{
	register("baumbach-allen", baumbachAllen),
	register("newkirk-1961", newkirk),
	register("saito-1970", saito),
	register("saito-1970-equator", func(r, _ float64) float64 { return saito(r, 0) }),
	register("saito-1970-pole", func(r, _ float64) float64 { return saito(r, math.Pi/2) }),
	register("saito-poland-munro-1977", saitoPolandMunro),
	register("leblanc-1998", leblanc),
	register("gibson-1999", gibson),
	register("sittler-guhathakurta-1999", sittlerStreamer),
	register("sittler-guhathakurta-1999-pole", sittlerPole),
	register("guhathakurta-1996-sheet", guhathakurtaSheet),
	register("guhathakurta-1996-pole", guhathakurtaPole),
	register("doyle-1999-hole", doyleHole),
	register("cranmer-1999-hole", cranmerHole),
	register("vrsnak-2004", vrsnak),
	register("mann-1999", mann),
}

// LawNames returns the names of the published profiles in alphabetical order.
func LawNames() []string {
	names := make([]string, 0, len(laws))
	for n := range laws {
		names = append(names, n)
	}
	slices.Sort(names)
	return names
}

// NewLaw builds the law that l describes; helium is He/H by number.
func NewLaw(l scenarios.Law, helium float64) (Law, error) {
	var f Law
	switch {
	case l.PowerLaw != nil:
		n0, a := float64(l.PowerLaw.Surface), l.PowerLaw.Exponent
		f = func(r, _ float64) float64 { return n0 * math.Pow(r, -a) }
	case l.Hydrostatic != nil:
		n0 := float64(l.Hydrostatic.Surface)
		// Hydrostatic balance of an isothermal, fully ionised gas of H and He:
		// n = n0 exp[-(1 - 1/r)/H0], H0 = k T R/(G M m), m the mean mass of a
		// particle, electrons included: m = m_p (1 + 4A)/(2 + 3A), A = He/H.
		m := units.ProtonMass * (1 + 4*helium) / (2 + 3*helium)
		h0 := units.Boltzmann * l.Hydrostatic.Temperature.Kelvin() * units.SolarRadius / (units.SolarGM * m)
		f = func(r, _ float64) float64 { return n0 * math.Exp(-(1-1/r)/h0) }
	default:
		if why := scenarios.RefusedLaws[l.Named]; why != "" {
			return nil, fmt.Errorf("density law %q: %s", l.Named, why)
		}
		var ok bool
		if f, ok = laws[l.Named]; !ok {
			return nil, fmt.Errorf("no density law named %q; there are %s", l.Named, strings.Join(LawNames(), ", "))
		}
	}
	if k := l.Factor; k != 1 {
		g := f
		f = func(r, lat float64) float64 { return k * g(r, lat) }
	}
	return f, nil
}

// ipow is x^n for small n, much faster than math.Pow.
func ipow(x float64, n int) float64 {
	y := 1.0
	for ; n > 0; n >>= 1 {
		if n&1 == 1 {
			y *= x
		}
		x *= x
	}
	return y
}

// Baumbach 1937, AN 263, 121; Allen 1947, MNRAS 107, 426. As copied in several
// independent codes; copies without the third term, or with 1e6 for 1e8, are wrong.
func baumbachAllen(r, _ float64) float64 {
	z := 1 / r
	return 1e8 * (2.99*ipow(z, 16) + 1.55*ipow(z, 6) + 0.036*z*math.Sqrt(z))
}

// Newkirk 1961, ApJ 133, 983, quiet corona (N = 1).
func newkirk(r, _ float64) float64 { return 4.2e4 * math.Pow(10, 4.32/r) }

// Saito 1970, Ann. Tokyo Astron. Obs. 12, 53. The last coefficient is 2.51e6: the
// 2.51e4 of some copies gives a hundredth of the observed density at 1 au.
func saito(r, latitude float64) float64 {
	z, s := 1/r, math.Abs(math.Sin(latitude))
	return 3.09e8*ipow(z, 16)*(1-0.5*s) + 1.58e8*ipow(z, 6)*(1-0.95*s) + 2.51e6*z*z*math.Sqrt(z)*(1-math.Sqrt(s))
}

// Saito, Poland & Munro 1977, Sol. Phys. 55, 121: equatorial background, fitted at
// 2.5 to 5.5 solar radii. (Their hole forms are ten times too thin below 2.)
func saitoPolandMunro(r, _ float64) float64 {
	return 1.36e6*math.Pow(r, -2.14) + 1.68e8*math.Pow(r, -6.13)
}

// Leblanc, Dulk & Bougeret 1998, Sol. Phys. 183, 165; made for r > 1.8.
func leblanc(r, _ float64) float64 {
	z2 := 1 / (r * r)
	return z2 * (3.3e5 + z2*(4.1e6+z2*8.0e7))
}

// Gibson et al. 1999, JGR 104, 9691: solar-minimum streamer.
func gibson(r, _ float64) float64 {
	l := math.Log(r)
	return 3.60e8*math.Exp(-15.3*l) + 0.990e8*math.Exp(-7.34*l) + 0.365e8*math.Exp(-4.31*l)
}

// Sittler & Guhathakurta 1999, ApJ 523, 812. Which coefficient set is which, and the
// unit 1e8, were decided by size (derived).
func sittler(a1, a2, a3, a4, a5, r float64) float64 {
	z := 1 / r
	return 1e8 * a1 * math.Exp(a2*z) * z * z * (1 + z*(a3+z*(a4+z*a5)))
}

func sittlerStreamer(r, _ float64) float64 {
	return sittler(3.2565e-3, 3.6728, 4.8947, 7.6123, 5.9868, r)
}

func sittlerPole(r, _ float64) float64 {
	return sittler(1.2921e-3, 4.8039, 0.29696, -7.1743, 12.321, r)
}

// Guhathakurta, Holzer & MacQueen 1996, ApJ 458, 817 (from memory; the unit 1e7
// was chosen because the result then matches the other profiles).
func guhathakurtaSheet(r, _ float64) float64 {
	l := math.Log(r)
	return 1e7 * (1.07*math.Exp(-2.8*l) + 19.94*math.Exp(-8.45*l) + 22.10*math.Exp(-16.87*l))
}

func guhathakurtaPole(r, _ float64) float64 {
	l := math.Log(r)
	return 1e7 * (0.14*math.Exp(-2.8*l) + 8.02*math.Exp(-8.45*l) + 8.12*math.Exp(-16.87*l))
}

// Doyle, Teriaca & Banerjee 1999, A&A 349, 956: polar hole (slopes read in the
// abstract, coefficients from memory).
func doyleHole(r, _ float64) float64 {
	z2 := 1 / (r * r)
	return 1e8*ipow(z2, 4) + 2.5e3*z2*z2 + 2.9e5*z2
}

// Cranmer et al. 1999, ApJ 511, 481: polar hole, valid above about 1.5 solar radii
// (from memory); far too dense near the limb.
func cranmerHole(r, _ float64) float64 {
	return 1e5 * (3890*math.Pow(r, -10.5) + 8.69*math.Pow(r, -2.57))
}

// Vrsnak, Magdalenic & Zlobec 2004, A&A 413, 753: like an active region.
func vrsnak(r, _ float64) float64 {
	z2 := 1 / (r * r)
	return 1e8 * (15.45*ipow(z2, 8) + 3.16*ipow(z2, 3) + 1.0*z2*z2 + 0.0033*z2)
}

// Mann et al. 1999, A&A 348, 614: hydrostatic at 1.0 MK.
func mann(r, _ float64) float64 { return 5.14e9 * math.Exp(13.83*(1/r-1)) }
