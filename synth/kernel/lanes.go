package kernel

// Lanes is the number of samples whose frames are made side by side, two of each of
// Rays rays: lane l and lane Rays+l belong to the same ray. (The real and the imaginary
// part of a transform are not quite independent: what shares one must not depend on
// which rays are neighbours.) One point (a frame, or a frequency) of all of them is
// Lanes numbers in a row, one of the light Rays numbers.
const (
	Rays  = 8
	Lanes = 2 * Rays
)

// Carry adds the spectrum of a train, carried on along its line, to dst, or puts it
// there: q^k times the sum over i of coef[i] u[i][k], of complex numbers whose real parts
// are the first half of a slice and whose imaginary parts are the second. Each half has a
// multiple of 8 elements. start holds q^k of the first 8 bins, real parts first; step is
// q^8. Rounding builds up to 1e-6 over 200 bins (tested).
func Carry(dst []float32, u *[8][]float32, coef *[8]float32, start *[16]float32, step [2]float32, add bool) {
	n := len(dst) / 2
	if n%8 != 0 {
		panic("kernel: bins not in eights")
	}
	for _, row := range u {
		_ = row[:2*n] // the vector code does not check
	}
	if n == 0 || carryVector(dst, u, coef, start, step, add) {
		return
	}
	if !add {
		clear(dst)
	}
	q := *start
	sum := func(k int) float32 {
		s := float32(coef[0] * u[0][k])
		for i := 1; i < 8; i++ {
			s += float32(coef[i] * u[i][k])
		}
		return s
	}
	sr, si := step[0], step[1]
	for b := 0; b < n; b += 8 {
		re, im := dst[b:b+8], dst[n+b:n+b+8]
		for l := range 8 {
			qr, qi := q[l], q[8+l]
			ur, ui := sum(b+l), sum(n+b+l)
			re[l] += float32(ur*qr) - float32(ui*qi)
			im[l] += float32(ur*qi) + float32(ui*qr)
			q[l], q[8+l] = float32(qr*sr)-float32(qi*si), float32(qr*si)+float32(qi*sr)
		}
	}
}

// Transpose turns Lanes rows, one after the other in src, into points: dst[i*Lanes+l] is
// element i of row l. Rows have a multiple of 8 elements.
func Transpose(dst, src []float32) {
	n := len(src) / Lanes
	if n%8 != 0 || len(src)%Lanes != 0 {
		panic("kernel: rows not in eights")
	}
	dst = dst[:len(src)]
	if n == 0 || transposeVector(dst, src, n) {
		return
	}
	for l := range Lanes {
		for i, x := range src[l*n : (l+1)*n] {
			dst[i*Lanes+l] = x
		}
	}
}

// Assemble makes the input of a transform from the spectra of real motions, two series
// at a time: the first lane of a ray becomes the real part, the second the imaginary
// part. w holds one point per bin of real parts, and from point bins on one per bin of
// imaginary parts; every bin is first multiplied by the complex turn[2k], turn[2k+1]. It
// goes to point at[2k] of x, that of the negative frequency to point at[2k+1]: added to
// what is there, or instead of it.
func Assemble(x, w []float32, bins int, turn []float32, at []int32, add bool) {
	k := len(at) / 2
	turn = turn[:2*k]
	w = w[:(bins+k)*Lanes]
	if k == 0 || assembleVector(x, w, bins, turn, at, add) {
		return
	}
	for k := range k {
		er, ei := turn[2*k], turn[2*k+1]
		re, im := (*[Lanes]float32)(w[k*Lanes:]), (*[Lanes]float32)(w[(bins+k)*Lanes:])
		pos, neg := (*[Lanes]float32)(x[at[2*k]*Lanes:]), (*[Lanes]float32)(x[at[2*k+1]*Lanes:])
		if !add {
			*pos, *neg = [Lanes]float32{}, [Lanes]float32{}
		}
		for l := range Rays {
			ar := float32(re[l]*er) - float32(im[l]*ei)
			ai := float32(re[l]*ei) + float32(im[l]*er)
			br := float32(re[Rays+l]*er) - float32(im[Rays+l]*ei)
			bi := float32(re[Rays+l]*ei) + float32(im[Rays+l]*er)
			pos[l] += ar - bi
			pos[Rays+l] += ai + br
			neg[l] += ar + bi
			neg[Rays+l] += br - ai
		}
	}
}

// rootLog2e makes powers of two of Gaussians.
const rootLog2e = 1.2011224

// Profile adds the light of Lanes samples through one filter tuning to that of their
// rays: acc += amp * exp(-((d - v) * inv)^2), lane by lane and point by point, with d the
// tuning's offset, v the sample's Doppler velocity and 1/inv its 1/e half-width with the
// filter's, all in one unit. The error of a term is below 3e-7 of amp (tested).
func Profile(acc, v []float32, amp, d, inv *[Lanes]float32) {
	if len(acc)%Rays != 0 {
		panic("kernel: not whole points")
	}
	v = v[:2*len(acc)]
	var scale [Lanes]float32
	for l, x := range inv {
		scale[l] = x * rootLog2e
	}
	if len(acc) == 0 || profileVector(acc, v, amp, d, &scale) {
		return
	}
	for t := 0; t < len(acc); t += Rays {
		a, x := (*[Rays]float32)(acc[t:]), (*[Lanes]float32)(v[2*t:])
		for l := range Lanes {
			y := float32((d[l] - x[l]) * scale[l])
			a[l%Rays] += float32(amp[l] * exp2Neg(float32(y*y)))
		}
	}
}

// Cosines is Profile for a filter whose transmission is a sum of cosines: acc += sum
// over m of coef[m] * cos(2 pi m (d - v) * inv), m from 0. coef holds one point per m.
// The error is below 2e-6 of the sum of a lane's coef (tested).
func Cosines(acc, v, coef []float32, d *[Lanes]float32, inv float32) {
	if len(acc)%Rays != 0 || len(coef)%Lanes != 0 || len(coef) == 0 {
		panic("kernel: not whole points")
	}
	v = v[:2*len(acc)]
	if len(acc) == 0 || cosinesVector(acc, v, coef, d, inv) {
		return
	}
	for t := 0; t < len(acc); t += Rays {
		a, x := (*[Rays]float32)(acc[t:]), (*[Lanes]float32)(v[2*t:])
		for l := range Lanes {
			a[l%Rays] += cosines(float32((d[l]-x[l])*inv), coef[l:])
		}
	}
}
