// Package kernel holds the two inner loops of the synthesis, over the frames of
// one line-of-sight sample. Products before sums are rounded by explicit
// conversions, so that no compiler fuses them and every processor gives the same
// bits.
package kernel

import "math"

// Combine sets dst[t] = sum over i of coef[i] * rows[i][t]. Every row has at least
// len(dst) elements. The sum runs over rows in order, four at a time.
func Combine(dst []float32, rows [][]float32, coef []float32) {
	clear(dst)
	n := len(dst)
	i := 0
	for ; i+4 <= len(rows); i += 4 {
		a, b, c, d := rows[i][:n], rows[i+1][:n], rows[i+2][:n], rows[i+3][:n]
		ca, cb, cc, cd := coef[i], coef[i+1], coef[i+2], coef[i+3]
		for t := range dst {
			s := float32(ca*a[t]) + float32(cb*b[t])
			s += float32(cc*c[t]) + float32(cd*d[t])
			dst[t] += s
		}
	}
	for ; i < len(rows); i++ {
		a, ca := rows[i][:n], coef[i]
		for t := range dst {
			dst[t] += float32(ca * a[t])
		}
	}
}

// Profile adds one sample's light through one filter tuning: acc[t] +=
// amp * exp(-((d - v[t]) * invW)^2), with d the tuning's offset, v the sample's
// Doppler velocity and 1/invW its 1/e half-width with the filter's, all in one unit.
// The relative error of a term is below 3e-7 (tested).
func Profile(acc []float64, v []float32, amp float64, d, invW float32) {
	v = v[:len(acc)]
	for t, x := range v {
		y := float32((d - x) * invW)
		acc[t] += float64(amp * float64(expNeg(-float32(y*y))))
	}
}

// expNeg is exp(x) for x <= 0 in single precision: x = n ln 2 + r, |r| <= ln 2 / 2,
// and the polynomial of degree 6 that interpolates exp at the Chebyshev nodes of that
// interval to 2e-8 (derived). Below -87 it is 0, where Gaussians are dark.
func expNeg(x float32) float32 {
	if x < -87 {
		return 0
	}
	const (
		log2e  = 1.44269504
		round  = 12582912.0 // 1.5 * 2^23: adding it rounds to an integer
		ln2Hi  = 0.693359375
		ln2Low = -2.12194440e-4
	)
	n := float32(x*log2e) + round
	k := int32(math.Float32bits(n)) - int32(math.Float32bits(round))
	n -= round
	r := x - float32(n*ln2Hi)
	r -= float32(n * ln2Low)
	const (
		c2 = 0.5
		c3 = 0.166664153
		c4 = 0.0416663513
		c5 = 0.00837513432
		c6 = 0.0013941119
	)
	p := float32(c6*r) + c5
	p = float32(p*r) + c4
	p = float32(p*r) + c3
	p = float32(p*r) + c2
	p = float32(p*r) + 1
	p = float32(p*r) + 1
	return p * math.Float32frombits(uint32(k+127)<<23)
}
