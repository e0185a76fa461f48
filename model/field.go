package model

import (
	"math"

	"gonum.org/v1/gonum/spatial/r3"
)

// A Field is a magnetic field. It is safe for concurrent use.
type Field interface {
	// B returns the field [G] at p [solar radii], outside the Sun.
	B(p r3.Vec) r3.Vec
}

// A Meridional field is symmetric about the z axis and has no azimuthal part: field
// lines stay in their half-plane, so that two coordinates describe them.
type Meridional interface {
	Field
	// Meridional returns B [G] at distance r [solar radii] and colatitude theta
	// [rad]: along r and along growing theta.
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

// Meridional implements Meridional.
func (f DipoleSheet) Meridional(r, theta float64) (br, bt float64) {
	s, c := math.Sincos(theta)
	bRho, bz := f.Cylindrical(r*s, r*c)
	return bRho*s + bz*c, bRho*c - bz*s
}

// B implements Field.
func (f DipoleSheet) B(p r3.Vec) r3.Vec {
	rho := fromAxis(p)
	bRho, bz := f.Cylindrical(rho, p.Z)
	if rho == 0 {
		return r3.Vec{Z: bz}
	}
	return r3.Vec{X: bRho * p.X / rho, Y: bRho * p.Y / rho, Z: bz}
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

// Meridional implements Meridional.
func (f RadialField) Meridional(r, _ float64) (br, bt float64) {
	return f.B0 * math.Pow(r, -f.Exponent), 0
}

// B implements Field.
func (f RadialField) B(p r3.Vec) r3.Vec {
	r := r3.Norm(p)
	return r3.Scale(f.B0*math.Pow(r, -f.Exponent-1), p)
}

// A UniformField is the same everywhere.
type UniformField struct{ Value r3.Vec } // [G]

// B implements Field.
func (f UniformField) B(r3.Vec) r3.Vec { return f.Value }

// A Dipole is a point dipole, usually below the surface: an active region.
type Dipole struct {
	At     r3.Vec // [solar radii]
	Moment r3.Vec // [G solar radii^3]
}

// B implements Field: [3 (m.R) R / R^2 - m]/R^3, R from the dipole (any textbook).
func (f Dipole) B(p r3.Vec) r3.Vec {
	d := r3.Sub(p, f.At)
	d2 := r3.Dot(d, d)
	d3 := d2 * math.Sqrt(d2)
	return r3.Add(r3.Scale(3*r3.Dot(f.Moment, d)/(d2*d3), d), r3.Scale(-1/d3, f.Moment))
}

// BuriedDipole returns the dipole at a depth [solar radii] below the surface point of
// the given latitude and longitude [rad] whose field straight above, at the surface,
// has the given strength [G]. Its moment points along heading [rad], from west
// (growing longitude) toward north, and rises by elevation [rad] from the horizontal.
func BuriedDipole(latitude, longitude, depth, strength, heading, elevation float64) Dipole {
	up := spherical(math.Pi/2-latitude, longitude)
	west := azimuthal(up)
	north := r3.Cross(up, west)
	sh, ch := math.Sincos(heading)
	se, ce := math.Sincos(elevation)
	m := r3.Add(r3.Scale(se, up), r3.Scale(ce, r3.Add(r3.Scale(ch, west), r3.Scale(sh, north))))
	// |B| above the dipole is m/d^3 sqrt(1 + 3 sin^2(elevation)).
	size := strength * depth * depth * depth / math.Sqrt(1+3*se*se)
	return Dipole{At: r3.Scale(1-depth, up), Moment: r3.Scale(size, m)}
}

// Sum adds fields.
type Sum []Field

// B implements Field.
func (fs Sum) B(p r3.Vec) r3.Vec {
	var b r3.Vec
	for _, f := range fs {
		b = r3.Add(b, f.B(p))
	}
	return b
}

// meridionalSum adds axisymmetric fields.
type meridionalSum []Meridional

func (fs meridionalSum) Meridional(r, theta float64) (br, bt float64) {
	for _, f := range fs {
		a, b := f.Meridional(r, theta)
		br += a
		bt += b
	}
	return br, bt
}

// cartesian turns meridional components at p into a vector.
func cartesian(p r3.Vec, r, br, bt float64) r3.Vec {
	rho := fromAxis(p)
	if rho == 0 { // on the axis the meridional part vanishes by symmetry
		return r3.Vec{Z: math.Copysign(1, p.Z) * br}
	}
	st, ct := rho/r, p.Z/r
	bRho := br*st + bt*ct
	return r3.Vec{X: bRho * p.X / rho, Y: bRho * p.Y / rho, Z: br*ct - bt*st}
}

// spherical returns the unit vector of a colatitude and an azimuth [rad].
func spherical(theta, phi float64) r3.Vec {
	st, ct := math.Sincos(theta)
	sp, cp := math.Sincos(phi)
	return r3.Vec{X: st * cp, Y: st * sp, Z: ct}
}

// azimuthal returns the unit vector of growing azimuth at p; y on the axis.
func azimuthal(p r3.Vec) r3.Vec {
	rho := fromAxis(p)
	if rho == 0 {
		return r3.Vec{Y: 1}
	}
	return r3.Vec{X: -p.Y / rho, Y: p.X / rho}
}

// norm is r3.Norm for lengths and fields far from overflow, several times faster.
func norm(v r3.Vec) float64 { return math.Sqrt(r3.Dot(v, v)) }

// fromAxis returns the distance from the z axis.
func fromAxis(v r3.Vec) float64 { return math.Sqrt(v.X*v.X + v.Y*v.Y) }
