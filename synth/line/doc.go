// Package line is the atomic model of the Fe XIII pair at 1074.7 and 1079.8 nm:
// the emissivities of the two lines for an electron density, a temperature and a
// height, and the density for a ratio of the two.
//
// # The ion
//
// The pair is magnetic-dipole radiation within the ground term 3s2 3p2 3P: 3P1-3P0
// at 1074.7 nm and 3P2-3P1 at 1079.8 nm. The levels are populated
//
//   - by electrons, directly within the ground configuration 3P0,1,2 1D2 1S0;
//   - by electrons that excite 3s 3p3, 3s2 3p 3d and higher levels, which decay to
//     the ground configuration in nanoseconds. This is the larger part: without it
//     the ratio gives densities three times too high;
//   - by protons, which drive the quadrupole transitions 3P0-3P2 and 3P1-3P2 and
//     those to 1D2;
//   - by the light of the disc in the two lines themselves, diluted and
//     limb-darkened, with absorption and stimulated emission.
//
// Statistical equilibrium balances these with the A-values. The first line is
// pumped by the disc in a single step and is close to a two-level radiative line in
// the outer corona; the second needs two steps and therefore collisions. Their ratio
// measures the density between about 1e6 and 1e10 cm^-3, the better the denser and
// the higher; Density returns the slope d ln n / d ln ratio that says how well.
//
// # Two models
//
// Ground, the default, solves for the five levels of the ground configuration, with
// direct rates in detailed balance and cascade rates that are listed in both
// directions (they obey no detailed balance: the cascade is not the inverse of
// itself). All solves for every level of the data, 27 in the embedded set, adds
// only the rates through levels above them, and also gives the levels that emit
// the extreme-ultraviolet lines. The two agree to 0.11 % in the ratio; see
// TestFoldedAgainstExplicit.
//
// # The data
//
// fexiii.yaml is embedded. Its collision set was calculated for this project and is
// not a published one; its estimated error is 0.05 dex in density. Its header
// states the format and how to put a published table of effective collision
// strengths in its place (Parse). Between its temperatures the logarithm of a rate
// is a cubic spline in log T that passes through the tabulated values, with two
// continuous derivatives (not-a-knot).
//
// # The disc's light
//
// J/I0 is the mean over the sphere of the limb-darkened disc, in closed form
// (meanIntensity), not the dilution factor times I0, which is 16 % too high at 1.1
// solar radii. The disc is taken as uniform in longitude and latitude and its
// spectrum as the continuum: no sunspots, no photospheric or terrestrial lines, no
// Doppler shift between the disc and the coronal ion.
//
// # Limits
//
//   - The anisotropy of the light aligns 3P1, which changes the emissivity of the
//     1074.7 nm line seen at right angles by about 2 % (from memory, no source).
//     Alignment is not modelled: emission is isotropic.
//   - Helium nuclei are left out of the ion collisions. They would add about 10 % to
//     the proton rates, 0.004 dex in density (derived).
//   - The disc pumps the pair only. Its light in 3P2-3P0 (539 nm), and in the lines
//     to 1D2 and 1S0, is left out: those A-values or the photons per mode there are
//     smaller by orders of magnitude.
//   - Ionisation is in equilibrium and electrons and protons are Maxwellian with
//     one temperature.
//   - Hydrogen and helium are fully ionised: n_H/n_e = n_p/n_e = 1/(1 + 2 He/H).
//
// # Use
//
// Model solves at every call (microseconds). Table interpolates its emissivities
// (about 0.1 microseconds, within 1e-4); Inverter does the same for densities. All
// three, and the power-law test double PowerLaw, are safe for concurrent use.
// Outside the range of the data they answer NaN or an error, never the value at
// the edge.
package line
