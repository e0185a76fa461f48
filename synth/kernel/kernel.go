// Package kernel holds the inner loops of the synthesis, over the frames of
// line-of-sight samples. Products before sums are rounded by explicit conversions, so
// that no compiler fuses them; the vector code does the same operations in the same
// order, so that every path gives the same bits.
package kernel

import "math"

// Combine sets dst[t] = sum over i of coef[i] * rows[i][t], in the order of the rows.
// Every row has at least len(dst) elements.
func Combine(dst []float32, rows [][]float32, coef []float32) {
	coef = coef[:len(rows)]
	for _, r := range rows {
		_ = r[:len(dst)] // the vector code does not check
	}
	done := combineVector(dst, rows, coef)
	combine(dst, rows, coef, done)
}

// combine is the portable path, from element from on.
func combine(dst []float32, rows [][]float32, coef []float32, from int) {
	n := len(dst)
	if from == n {
		return
	}
	clear(dst[from:])
	i := 0
	for ; i+4 <= len(rows); i += 4 {
		a, b, c, d := rows[i][:n], rows[i+1][:n], rows[i+2][:n], rows[i+3][:n]
		ca, cb, cc, cd := coef[i], coef[i+1], coef[i+2], coef[i+3]
		for t := from; t < n; t++ {
			s := dst[t] + float32(ca*a[t])
			s += float32(cb * b[t])
			s += float32(cc * c[t])
			dst[t] = s + float32(cd*d[t])
		}
	}
	for ; i < len(rows); i++ {
		a, ca := rows[i][:n], coef[i]
		for t := from; t < n; t++ {
			dst[t] += float32(ca * a[t])
		}
	}
}

// Constants of exp2Neg; the vector code has them too.
const (
	exp2End  = 120.0      // beyond this Gaussians are dark
	rounding = 12582912.0 // 1.5 * 2^23: adding it rounds to an integer
	exp2C1   = -0.693147181
	exp2C2   = 0.24022349
	exp2C3   = -0.0555038063
	exp2C4   = 0.00966636852
	exp2C5   = -0.00133814255
)

// exp2Neg is 2^-s for s >= 0 in single precision: s = r - n, |r| <= 1/2, and the
// polynomial of degree 5 that interpolates 2^-r at the Chebyshev nodes of that interval
// to 1e-7 (derived). Beyond 120 it stays at 2^-120.
func exp2Neg(s float32) float32 {
	if !(s < exp2End) {
		s = exp2End
	}
	n := rounding - s
	k := math.Float32bits(n) << 23 // the bits of the constant fall out
	n -= rounding
	r := s + n
	r2 := float32(r * r)
	p := float32(exp2C5*r) + exp2C4
	p = float32(p*r2) + (float32(exp2C3*r) + exp2C2)
	p = float32(p*r2) + (float32(exp2C1*r) + 1)
	return math.Float32frombits(math.Float32bits(p) + k)
}

// Taylor series of (2 cos(2 pi y) - 2)/y^2 in y^2, whose error at the end, y = 1/2, is
// 3e-7; the vector code has it too.
const (
	cosT1 = -39.47841760435743
	cosT2 = 129.87878804533656
	cosT3 = -170.91363441338743
	cosT4 = 120.48928274375328
	cosT5 = -52.852513566748776
	cosT6 = 15.80707274263693
	cosT7 = -3.4287814221773423
	cosT8 = 0.564011936911582
)

// cosines is the sum over m of coef[m*Lanes] cos(2 pi m y), by Clenshaw's recurrence in
// Reinsch's form, which keeps its digits where cos is near 1 (Oliver 1977, J. Inst.
// Maths Applics 20, 379, from memory).
func cosines(y float32, coef []float32) float32 {
	n := y + rounding
	n -= rounding
	y -= n
	s := float32(y * y)
	q := float32(s*cosT8) + cosT7
	q = float32(q*s) + cosT6
	q = float32(q*s) + cosT5
	q = float32(q*s) + cosT4
	q = float32(q*s) + cosT3
	q = float32(q*s) + cosT2
	q = float32(q*s) + cosT1
	q = float32(q * s) // 2 cos - 2
	var e, b float32
	for m := (len(coef) - 1) / Lanes; m > 0; m-- {
		e = float32(e+coef[m*Lanes]) + float32(q*b)
		b += e
	}
	q = float32(q * 0.5)
	return float32(e+coef[0]) + float32(q*b)
}
