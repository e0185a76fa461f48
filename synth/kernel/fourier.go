package kernel

import "math"

// A Fourier transforms Lanes/2 complex series at a time, in place: x[t] becomes the sum
// over k of x[k] exp(+2 pi i k t / Size), not scaled. A point of x is eight real parts
// and eight imaginary parts. The input stands in the order of Place, the output in that
// of time. It is safe for concurrent use.
//
// The stages are those of Cooley & Tukey 1965, Math. Comput. 19, 297: at first one of
// eight, or of three and of two, if the size asks for it, then of four.
type Fourier struct {
	Size   int
	Place  []int32 // where element k of the input belongs
	stages []stage
}

type stage struct {
	radix, inner int       // inner: size of the transforms that it joins
	turn         []float32 // (radix-1) complex factors for each inner element
}

// NewFourier prepares transforms of at least n points: the least 2^a or 3*2^a.
func NewFourier(n int) *Fourier {
	f := &Fourier{}
	for _, odd := range []int{1, 3} {
		m := odd
		for m < n || m < 4 {
			m *= 2
		}
		if f.Size == 0 || m < f.Size {
			f.Size = m
		}
	}
	inner := 1
	add := func(radix int) {
		s := stage{radix: radix, inner: inner}
		for i := range inner {
			for j := 1; j < radix; j++ {
				im, re := math.Sincos(2 * math.Pi * float64(i*j) / float64(radix*inner))
				s.turn = append(s.turn, float32(re), float32(im))
			}
		}
		f.stages = append(f.stages, s)
		inner *= radix
	}
	if f.Size%3 == 0 {
		add(3)
	}
	twos := 0
	for m := f.Size / inner; m > 1; m /= 2 {
		twos++
	}
	switch {
	case twos%2 == 0:
	case twos >= 3 && inner == 1:
		add(8)
	default:
		add(2)
	}
	for inner < f.Size {
		add(4)
	}
	f.Place = make([]int32, f.Size)
	for k := range f.Size {
		at, rest := 0, k
		for i := len(f.stages) - 1; i >= 0; i-- {
			s := &f.stages[i]
			at += rest % s.radix * s.inner
			rest /= s.radix
		}
		f.Place[k] = int32(at)
	}
	return f
}

// near is the number of points that stay in the nearest cache while several stages pass.
const near = 128

// Transform transforms x, of Size points. The first stages finish one part of x after
// the other.
func (f *Fourier) Transform(x []float32) {
	x = x[:f.Size*Lanes]
	first, part := 0, 1
	for first < len(f.stages) && part*f.stages[first].radix <= near {
		part *= f.stages[first].radix
		first++
	}
	for at := 0; at < len(x); at += part * Lanes {
		for i := range first {
			f.stages[i].pass(x[at : at+part*Lanes])
		}
	}
	for i := first; i < len(f.stages); i++ {
		f.stages[i].pass(x)
	}
}

// pass joins transforms of inner points, radix at a time, over the whole of x.
func (s *stage) pass(x []float32) {
	blocks := len(x) / (Lanes * s.radix * s.inner)
	if passVector(x, s, blocks) {
		return
	}
	for b := range blocks {
		block := x[b*s.radix*s.inner*Lanes:]
		for i := range s.inner {
			turn := s.turn[2*i*(s.radix-1):]
			at := func(j int) *[Lanes]float32 { return (*[Lanes]float32)(block[(j*s.inner+i)*Lanes:]) }
			switch s.radix {
			case 2:
				join2(at(0), at(1), turn)
			case 3:
				join3(at(0), at(1), at(2))
			case 4:
				join4(at(0), at(1), at(2), at(3), turn)
			case 8:
				join8(at)
			}
		}
	}
}

func join2(p, q *[Lanes]float32, turn []float32) {
	for l := range 8 {
		br, bi := times(q[l], q[8+l], turn[0], turn[1])
		p[l], p[8+l], q[l], q[8+l] = p[l]+br, p[8+l]+bi, p[l]-br, p[8+l]-bi
	}
}

const sin60 = 0.866025403784

// join3 has no turns: it is only ever the first stage.
func join3(p, q, r *[Lanes]float32) {
	for l := range 8 {
		sr, si := q[l]+r[l], q[8+l]+r[8+l]
		dr, di := float32(sin60*(q[l]-r[l])), float32(sin60*(q[8+l]-r[8+l]))
		mr, mi := p[l]-float32(0.5*sr), p[8+l]-float32(0.5*si)
		p[l], p[8+l] = p[l]+sr, p[8+l]+si
		q[l], q[8+l] = mr-di, mi+dr
		r[l], r[8+l] = mr+di, mi-dr
	}
}

func join4(p, q, r, s *[Lanes]float32, turn []float32) {
	for l := range 8 {
		br, bi := times(q[l], q[8+l], turn[0], turn[1])
		cr, ci := times(r[l], r[8+l], turn[2], turn[3])
		dr, di := times(s[l], s[8+l], turn[4], turn[5])
		sumR, sumI, difR, difI := p[l]+cr, p[8+l]+ci, p[l]-cr, p[8+l]-ci
		oddR, oddI, ofR, ofI := br+dr, bi+di, br-dr, bi-di
		p[l], p[8+l] = sumR+oddR, sumI+oddI
		r[l], r[8+l] = sumR-oddR, sumI-oddI
		q[l], q[8+l] = difR-ofI, difI+ofR
		s[l], s[8+l] = difR+ofI, difI-ofR
	}
}

const rootHalf = 0.70710678118654752

// join8 has no turns either.
func join8(at func(j int) *[Lanes]float32) {
	var x [8]*[Lanes]float32
	for j := range x {
		x[j] = at(j)
	}
	for l := range 8 {
		four := func(p, q, r, s *[Lanes]float32) (re, im [4]float32) {
			sumR, sumI, difR, difI := p[l]+r[l], p[8+l]+r[8+l], p[l]-r[l], p[8+l]-r[8+l]
			oddR, oddI, ofR, ofI := q[l]+s[l], q[8+l]+s[8+l], q[l]-s[l], q[8+l]-s[8+l]
			return [4]float32{sumR + oddR, difR - ofI, sumR - oddR, difR + ofI},
				[4]float32{sumI + oddI, difI + ofR, sumI - oddI, difI - ofR}
		}
		er, ei := four(x[0], x[2], x[4], x[6])
		or, oi := four(x[1], x[3], x[5], x[7])
		or[1], oi[1] = float32(rootHalf*(or[1]-oi[1])), float32(rootHalf*(or[1]+oi[1]))
		or[2], oi[2] = -oi[2], or[2]
		or[3], oi[3] = -float32(rootHalf*(or[3]+oi[3])), float32(rootHalf*(or[3]-oi[3]))
		for k := range 4 {
			x[k][l], x[k][8+l] = er[k]+or[k], ei[k]+oi[k]
			x[4+k][l], x[4+k][8+l] = er[k]-or[k], ei[k]-oi[k]
		}
	}
}

func times(ar, ai, br, bi float32) (re, im float32) {
	return float32(ar*br) - float32(ai*bi), float32(ar*bi) + float32(ai*br)
}
