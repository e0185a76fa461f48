package model

import (
	"math"

	"gonum.org/v1/gonum/spatial/r3"
)

// A Field is a magnetic field symmetric about the solar rotation axis.
type Field interface {
	// Meridional returns B [G] at distance r [solar radii] and colatitude theta
	// [rad]: along r and along growing theta. Such fields have no azimuthal part.
	Meridional(r, theta float64) (br, btheta float64)
}

// A DipoleSheet is a dipole, an octupole and an azimuthal current sheet in the
// equator: Banaszkiewicz, Axford & McKenzie 1998, A&A 337, 940 (formula and
// constants from memory; free of divergence and, off the sheet, of curl: tested).
type DipoleSheet struct {
	M  float64 // strength [G]
	A1 float64 // depth of the image monopole that makes the sheet [solar radii]
	Q  float64 // octupole strength, a pure number
}

// sheetMonopole is K of the paper: with K = 1 the sheet's monopole cancels the
// dipole's B_z far out on the equator.
const sheetMonopole = 1

// Cylindrical returns B [G] along the axis distance rho and along z at (rho, z)
// [solar radii].
func (f DipoleSheet) Cylindrical(rho, z float64) (bRho, bz float64) {
	r2 := rho*rho + z*z
	r := math.Sqrt(r2)
	r5 := r2 * r2 * r
	r9 := r5 * r2 * r2
	za := math.Abs(z) + f.A1
	d2 := za*za + rho*rho
	s := sheetMonopole / f.A1 / (d2 * math.Sqrt(d2))
	// Banaszkiewicz et al. 1998, Eqs. (1)-(2), from memory; the equations hold for
	// z >= 0, below the sheet only the monopole's radial part changes sign.
	bRho = 3*rho*z/r5 + 15*f.Q/8*rho*z*(4*z*z-3*rho*rho)/r9 + math.Copysign(s*rho, z)
	bz = (2*z*z-rho*rho)/r5 + 3*f.Q/8*(8*z*z*z*z+3*rho*rho*rho*rho-24*rho*rho*z*z)/r9 + s*za
	return f.M * bRho, f.M * bz
}

// Meridional implements Field.
func (f DipoleSheet) Meridional(r, theta float64) (br, bt float64) {
	s, c := math.Sincos(theta)
	bRho, bz := f.Cylindrical(r*s, r*c)
	return bRho*s + bz*c, bRho*c - bz*s
}

// Flux returns psi [G R^2] with B_z = (1/rho) d psi/d rho (derived): constant
// along field lines. Lines with psi below OpenFlux never close.
func (f DipoleSheet) Flux(r, theta float64) float64 {
	s, c := math.Sincos(theta)
	rho, z := r*s, r*c
	rho2, z2 := rho*rho, z*z
	za := math.Abs(z) + f.A1
	return f.M * (rho2/(r*r*r) + 3*f.Q/8*rho2*(4*z2-rho2)/math.Pow(r, 7) +
		sheetMonopole/f.A1*(1-za/math.Sqrt(za*za+rho2)))
}

// OpenFlux is the flux function of the last line that never closes.
func (f DipoleSheet) OpenFlux() float64 { return f.M * sheetMonopole / f.A1 }

// A RadialField is B = B0 r^-Exponent along r; divergence-free for Exponent 2.
type RadialField struct {
	B0       float64 // at the surface [G]
	Exponent float64
}

// Meridional implements Field.
func (f RadialField) Meridional(r, _ float64) (br, bt float64) {
	return f.B0 * math.Pow(r, -f.Exponent), 0
}

// fieldSum adds fields.
type fieldSum []Field

func (fs fieldSum) Meridional(r, theta float64) (br, bt float64) {
	for _, f := range fs {
		a, b := f.Meridional(r, theta)
		br += a
		bt += b
	}
	return br, bt
}

// cartesian turns meridional components at p into a vector.
func cartesian(p r3.Vec, r, br, bt float64) r3.Vec {
	rho := math.Hypot(p.X, p.Y)
	if rho == 0 { // on the axis the meridional part vanishes by symmetry
		return r3.Vec{Z: math.Copysign(1, p.Z) * br}
	}
	st, ct := rho/r, p.Z/r
	bRho := br*st + bt*ct
	return r3.Vec{X: bRho * p.X / rho, Y: bRho * p.Y / rho, Z: br*ct - bt*st}
}
