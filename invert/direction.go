package invert

import (
	"math"

	"gonum.org/v1/gonum/blas/gonum"
)

var blas gonum.Implementation

const (
	leastIsland = 6    // pixels, the pixel itself included
	roundIsland = 0.75 // ratio of minor to major rms extent beyond which an island has no axis
	fullIsland  = 0.8  // share of the window's pixels beyond which it is called full
)

// An islander holds one worker's scratch for coherence islands.
type islander struct {
	*field
	*window
	windows map[int]*window
	stack   []int32
	rotated []float32
}

// A window is the disc inscribed in a box: the corners of a square would pull every
// axis toward its diagonals.
type window struct {
	n, half int
	inside  []bool
	state   []uint8
}

func newIslander(f *field) *islander {
	s := &islander{field: f, windows: map[int]*window{}, rotated: make([]float32, f.band.row)}
	s.use(f.opt.Box)
	return s
}

// use makes n the diameter of the window.
func (s *islander) use(n int) {
	w := s.windows[n]
	if w == nil {
		w = &window{n: n, half: n / 2, inside: make([]bool, n*n), state: make([]uint8, n*n)}
		for j := range n {
			for i := range n {
				x, y := float64(i-w.half), float64(j-w.half)
				w.inside[j*n+i] = x*x+y*y <= (float64(w.half)+0.5)*(float64(w.half)+0.5)
			}
		}
		s.windows[n] = w
	}
	s.window = w
}

// largest is the greatest diameter of a window that grows, over the box asked for.
const largest = 3

// adapt finds the island of field pixel p in the box asked for and, if allowed, in larger
// ones as long as it fills its window.
func (s *islander) adapt(p int) island {
	n := s.opt.Box
	for {
		s.use(n)
		r := s.island(p)
		if !s.opt.Adaptive || !r.full() || n >= largest*s.opt.Box {
			return r
		}
		n = min(n*3/2|1, largest*s.opt.Box)
	}
}

// An island is the set of pixels whose coherence with a pixel exceeds the
// threshold, contiguous with it over edges and corners (8-connected), inside the
// window around it.
type island struct {
	count        int     // pixels, the pixel itself included
	available    int     // pixels of the field in the window; counted only if the island may fill it
	coherence    float64 // mean over the adjacent pixels, up to eight; NaN without any
	angle        float64 // of the axis, from +x to +y of the image [rad], -pi/2..pi/2
	err          float64 // [rad]
	minor, major float64 // rms extents about the pixel along and across the axis [pixel]
}

// island finds the island of field pixel p and its axis: the line through the
// pixel that minimises the sum of squared perpendicular distances (McIntosh, De
// Pontieu & Tomczyk 2008, Sol. Phys. 252, 321). Coherence is the modulus of the
// normalised cross-spectrum summed over the band, so a lag does not matter. The
// error is that of a straight line fitted to independent pixels.
func (s *islander) island(p int) island {
	f := s.field
	n, row, nf := s.n, f.band.row, len(f.band.freq)
	x0, y0 := f.at(p)
	a := f.spec[p*row : (p+1)*row]
	copy(s.rotated, a[nf:2*nf])
	for j, r := range a[:nf] {
		s.rotated[nf+j] = -r
	}
	threshold := float32(f.opt.Coherence * f.opt.Coherence)

	clear(s.state)
	s.stack = append(s.stack[:0], int32(s.half*n+s.half))
	s.state[s.half*n+s.half] = 1
	var sxx, sxy, syy, near float64
	count, adjacent := 0, 0
	for len(s.stack) > 0 {
		k := int(s.stack[len(s.stack)-1])
		s.stack = s.stack[:len(s.stack)-1]
		i, j := k%n, k/n
		dx, dy := float64(i-s.half), float64(j-s.half)
		count++
		sxx += dx * dx
		sxy += dx * dy
		syy += dy * dy
		for jj := max(j-1, 0); jj <= min(j+1, n-1); jj++ {
			for ii := max(i-1, 0); ii <= min(i+1, n-1); ii++ {
				kk := jj*n + ii
				if s.state[kk] != 0 || !s.inside[kk] {
					continue
				}
				s.state[kk] = 1
				q := f.find(x0+ii-s.half, y0+jj-s.half)
				if q < 0 || f.norm[q] == 0 {
					continue
				}
				b := f.spec[q*row : (q+1)*row]
				re := blas.Sdot(row, a, 1, b, 1)
				im := blas.Sdot(row, s.rotated, 1, b, 1)
				c2 := float32(re*re) + float32(im*im)
				if count == 1 { // the first to leave the stack is the pixel itself
					near += math.Sqrt(float64(c2))
					adjacent++
				}
				if c2 > threshold {
					s.stack = append(s.stack, int32(kk))
				}
			}
		}
	}
	r := island{count: count, coherence: near / float64(adjacent)}
	if count < leastIsland {
		return r
	}
	r.angle = math.Atan2(2*sxy, sxx-syy) / 2
	d := math.Hypot((sxx-syy)/2, sxy)
	t := (sxx + syy) / 2
	r.major, r.minor = math.Sqrt((t+d)/float64(count)), math.Sqrt(max(t-d, 0)/float64(count))
	r.err = r.minor / (r.major * math.Sqrt(float64(count-1)))
	if float64(count) > fullIsland*float64(s.half*s.half) {
		for j := range n {
			for i := range n {
				if q := f.find(x0+i-s.half, y0+j-s.half); s.inside[j*n+i] && q >= 0 && f.norm[q] > 0 {
					r.available++
				}
			}
		}
	}
	return r
}

// full says whether the island fills its window.
func (r island) full() bool {
	return r.available > 0 && float64(r.count) > fullIsland*float64(r.available)
}

// round says whether the island has no axis.
func (r island) round() bool { return !(r.minor < roundIsland*r.major) }
