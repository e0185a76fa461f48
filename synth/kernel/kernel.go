// Package kernel holds the inner loops of the synthesis, over the frames of one
// line-of-sight sample. Products before sums are rounded by explicit conversions, so
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

// Profile adds one sample's light through one filter tuning: acc[t] +=
// amp * exp(-((d - v[t]) * invW)^2), with d the tuning's offset, v the sample's
// Doppler velocity and 1/invW its 1/e half-width with the filter's, all in one unit.
// The relative error of a term is below 4e-7 (tested).
func Profile(acc, v []float32, amp, d, invW float32) {
	v = v[:len(acc)]
	done := profileVector(acc, v, amp, d, invW)
	profile(acc[done:], v[done:], amp, d, invW)
}

// profile is the portable path.
func profile(acc, v []float32, amp, d, invW float32) {
	for t, x := range v {
		y := float32((d - x) * invW)
		acc[t] += float32(amp * expNeg(-float32(y*y)))
	}
}

// Constants of expNeg; the vector code has them too.
const (
	expLow   = -87.0 // below this Gaussians are dark
	log2e    = 1.44269504
	rounding = 12582912.0 // 1.5 * 2^23: adding it rounds to an integer
	ln2High  = 0.693359375
	ln2Low   = -2.12194440e-4
	expC2    = 0.5
	expC3    = 0.166664153
	expC4    = 0.0416663513
	expC5    = 0.00837513432
	expC6    = 0.0013941119
)

// expNeg is exp(x) for x <= 0 in single precision: x = n ln 2 + r, |r| <= ln 2 / 2,
// and the polynomial of degree 6 that interpolates exp at the Chebyshev nodes of that
// interval to 2e-8 (derived). Below -87 it is 0.
func expNeg(x float32) float32 {
	if !(x >= expLow) {
		return 0
	}
	n := float32(x*log2e) + rounding
	k := math.Float32bits(n) - math.Float32bits(rounding)
	n -= rounding
	r := x - float32(n*ln2High)
	r -= float32(n * ln2Low)
	p := float32(expC6*r) + expC5
	p = float32(p*r) + expC4
	p = float32(p*r) + expC3
	p = float32(p*r) + expC2
	p = float32(p*r) + 1
	p = float32(p*r) + 1
	return p * math.Float32frombits((k+127)<<23)
}

// Cosines adds one sample's light through one tuning of a filter whose transmission is
// a sum of cosines: acc[t] += sum over m of coef[m] * cos(2 pi m (d - v[t]) * inv), m
// from 0. The error is below 2e-6 of the sum of coef (tested).
func Cosines(acc, v, coef []float32, d, inv float32) {
	v = v[:len(acc)]
	done := cosinesVector(acc, v, coef, d, inv)
	cosines(acc[done:], v[done:], coef, d, inv)
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

// cosines is the portable path. The sum is that of Clenshaw in Reinsch's form, which
// keeps its digits where cos is near 1 (Oliver 1977, J. Inst. Maths Applics 20, 379,
// from memory).
func cosines(acc, v, coef []float32, d, inv float32) {
	for t, x := range v {
		y := float32((d - x) * inv)
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
		for m := len(coef) - 1; m > 0; m-- {
			e = float32(e+coef[m]) + float32(q*b)
			b += e
		}
		q = float32(q * 0.5)
		acc[t] += float32(e+coef[0]) + float32(q*b)
	}
}
