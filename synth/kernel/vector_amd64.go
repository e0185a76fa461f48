//go:build amd64 && !purego

package kernel

import "golang.org/x/sys/cpu"

// useVector is a variable so that the tests can compare both paths.
var useVector = cpu.X86.HasAVX2

// combineVector does the leading elements of Combine that fill whole vectors, and
// returns how many it did. The others do all of their work, or nothing.
func combineVector(dst []float32, rows [][]float32, coef []float32) int {
	n := len(dst) &^ 7
	if !useVector || n == 0 || len(rows) == 0 {
		return 0
	}
	combineAVX2(&dst[0], n, &rows[0], &coef[0], len(rows))
	return n
}

func carryVector(dst []float32, u *[8][]float32, coef *[8]float32, start *[16]float32, step [2]float32, add bool) bool {
	if useVector {
		carryAVX2(&dst[0], u, coef, len(dst)/2, start, step[0], step[1], mask(add))
	}
	return useVector
}

func transposeVector(dst, src []float32, n int) bool {
	if useVector {
		transposeAVX2(&dst[0], &src[0], n)
	}
	return useVector
}

func assembleVector(x, w []float32, bins int, turn []float32, at []int32, add bool) bool {
	if useVector {
		assembleAVX2(&x[0], &w[0], &w[bins*Lanes], &turn[0], &at[0], len(at)/2, mask(add))
	}
	return useVector
}

// mask lets through what is already there, or nothing.
func mask(add bool) uint32 {
	if add {
		return ^uint32(0)
	}
	return 0
}

func passVector(x []float32, s *stage, blocks int) bool {
	if !useVector || blocks == 0 {
		return useVector
	}
	switch s.radix {
	case 2:
		join2AVX2(&x[0], &s.turn[0], s.inner, blocks)
	case 3:
		join3AVX2(&x[0], blocks)
	case 4:
		join4AVX2(&x[0], &s.turn[0], s.inner, blocks)
	case 8:
		join8AVX2(&x[0], blocks)
	}
	return true
}

func profileVector(acc, v []float32, amp, d, inv *[Lanes]float32) bool {
	if useVector {
		profileAVX2(&acc[0], &v[0], len(acc)/Rays, amp, d, inv)
	}
	return useVector
}

func cosinesVector(acc, v, coef []float32, d *[Lanes]float32, inv float32) bool {
	if useVector {
		cosinesAVX2(&acc[0], &v[0], len(acc)/Rays, &coef[0], len(coef)/Lanes-1, d, inv)
	}
	return useVector
}

//go:noescape
func combineAVX2(dst *float32, n int, rows *[]float32, coef *float32, nrows int)

//go:noescape
func carryAVX2(dst *float32, u *[8][]float32, coef *[8]float32, n int, start *[16]float32, re, im float32, mask uint32)

//go:noescape
func transposeAVX2(dst, src *float32, n int)

//go:noescape
func assembleAVX2(x, re, im, turn *float32, at *int32, bins int, mask uint32)

//go:noescape
func join2AVX2(x, turn *float32, inner, blocks int)

//go:noescape
func join3AVX2(x *float32, blocks int)

//go:noescape
func join8AVX2(x *float32, blocks int)

//go:noescape
func join4AVX2(x, turn *float32, inner, blocks int)

//go:noescape
func profileAVX2(acc, v *float32, points int, amp, d, inv *[Lanes]float32)

//go:noescape
func cosinesAVX2(acc, v *float32, points int, coef *float32, m int, d *[Lanes]float32, inv float32)
