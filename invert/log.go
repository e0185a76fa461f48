package invert

import "math"

// A Doppler series takes two logarithms a frame, a quarter of the time of an inversion
// with those of the library.

const logBits = 7 // of the mantissa, that index the tables

// logInverse and logStart hold 1/c and ln c for the middles c of equal parts of 1..2.
var logInverse, logStart = func() (inverse, start [1 << logBits]float64) {
	for i := range inverse {
		c := 1 + (float64(i)+0.5)/(1<<logBits)
		inverse[i] = 1 / c
		start[i] = -math.Log(inverse[i])
	}
	return
}()

// ln returns the natural logarithm of a positive, normal, finite number to 6e-11, a
// thousandth of the rounding of intensities in single precision: with x = 2^e c (1 + r),
// |r| <= 2^-8, the series of ln(1 + r) to the third power leaves r^4/4.
func ln(x float64) float64 {
	b := math.Float64bits(x)
	i := b >> (52 - logBits) & (1<<logBits - 1)
	r := float64(math.Float64frombits(b&(1<<52-1)|1023<<52)*logInverse[i]) - 1
	p := float64(r * (1 - float64(r*(0.5-float64(r*(1./3))))))
	return float64(float64(int(b>>52)-1023)*math.Ln2) + logStart[i] + p
}
