//go:build amd64 && !purego

package kernel

import "golang.org/x/sys/cpu"

// useVector is a variable so that the tests can compare both paths.
var useVector = cpu.X86.HasAVX2

// combineVector does the leading elements of Combine that fill whole vectors, and
// returns how many it did.
func combineVector(dst []float32, rows [][]float32, coef []float32) int {
	n := len(dst) &^ 7
	if !useVector || n == 0 || len(rows) == 0 {
		return 0
	}
	combineAVX2(&dst[0], n, &rows[0], &coef[0], len(rows))
	return n
}

// profileVector does the same for Profile.
func profileVector(acc, v []float32, amp, d, invW float32) int {
	n := len(acc) &^ 7
	if !useVector || n == 0 {
		return 0
	}
	profileAVX2(&acc[0], &v[0], n, amp, d, invW)
	return n
}

// cosinesVector does the same for Cosines.
func cosinesVector(acc, v, coef []float32, d, inv float32) int {
	n := len(acc) &^ 7
	if !useVector || n == 0 {
		return 0
	}
	cosinesAVX2(&acc[0], &v[0], n, &coef[0], len(coef)-1, d, inv)
	return n
}

//go:noescape
func combineAVX2(dst *float32, n int, rows *[]float32, coef *float32, nrows int)

//go:noescape
func profileAVX2(acc, v *float32, n int, amp, d, invW float32)

//go:noescape
func cosinesAVX2(acc, v *float32, n int, coef *float32, m int, d, inv float32)
