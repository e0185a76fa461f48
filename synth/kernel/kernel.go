// Package kernel holds the two inner loops of the synthesis, over the frames of one
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
