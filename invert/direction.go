package invert

import (
	"math"

	blasapi "gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/gonum"
)

var blas gonum.Implementation

const (
	none       = blasapi.NoTrans
	transposed = blasapi.Trans
)

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
	own     []float32
	rotated []float32
}

// A window is the disc inscribed in a box: the corners of a square would pull every
// axis toward its diagonals. A frame one pixel wide around it spares the neighbours'
// bounds.
type window struct {
	n, half, side int
	outside       []uint8 // 1: not in the disc
	state         []uint8 // 1: looked at, or outside
	around        [8]int  // neighbours in state
	raster        []int32 // of a pixel of the window from the middle's, in the image
	dx, dy        []int16 // of a pixel of the window from the middle
}

func newIslander(f *field) *islander {
	s := &islander{field: f, windows: map[int]*window{}, own: make([]float32, f.band.row), rotated: make([]float32, f.band.row)}
	s.use(f.opt.Box)
	return s
}

// use makes n the diameter of the window.
func (s *islander) use(n int) {
	w := s.windows[n]
	if w == nil {
		w = newWindow(n, s.grid.Nx)
		s.windows[n] = w
	}
	s.window = w
}

func newWindow(n, nx int) *window {
	w := &window{n: n, half: n / 2, side: n + 2}
	for j := range w.side {
		for i := range w.side {
			x, y := i-1-w.half, j-1-w.half
			out := uint8(0)
			if r := float64(w.half) + 0.5; float64(x*x+y*y) > r*r {
				out = 1
			}
			w.outside = append(w.outside, out)
			w.raster = append(w.raster, int32(y*nx+x))
			w.dx, w.dy = append(w.dx, int16(x)), append(w.dy, int16(y))
		}
	}
	w.state = make([]uint8, len(w.outside))
	w.around = [8]int{-w.side - 1, -w.side, -w.side + 1, -1, 1, w.side - 1, w.side, w.side + 1}
	return w
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
	err          float64 // formal [rad]
	minor, major float64 // rms extents about the pixel along and across the axis [pixel]
}

// island finds the island of field pixel p and its axis: the line through the
// pixel that minimises the sum of squared perpendicular distances (McIntosh, De
// Pontieu & Tomczyk 2008, Sol. Phys. 252, 321). Coherence is the modulus of the
// normalised cross-spectrum summed over the band, so a lag does not matter. The
// error is that of a straight line fitted to independent pixels.
func (s *islander) island(p int) island { return s.without(p, nothing) }

// without is island from a spectrum without part g of angleParts.
func (s *islander) without(p, g int) island {
	f := s.field
	row, nf := f.band.row, len(f.band.freq)
	x0, y0 := f.at(p)
	a := s.own
	copy(a, f.spec[p*row:(p+1)*row])
	if g != nothing {
		for j := range nf {
			if part(j) == g {
				a[j], a[nf+j] = 0, 0
			}
		}
	}
	copy(s.rotated, a[nf:2*nf])
	for j, r := range a[:nf] {
		s.rotated[nf+j] = -r
	}
	c2 := f.opt.Coherence * f.opt.Coherence
	threshold := float32(c2)
	if g != nothing {
		more := (1 - c2) * (1 - c2) * (angleParts - 1) / f.band.samples // of angleParts/samples
		threshold = float32(c2+more) * f.rest[p*angleParts+g]
	}
	within := x0 >= s.half && y0 >= s.half && x0+s.half < f.grid.Nx && y0+s.half < f.grid.Ny

	state := s.state
	copy(state, s.outside)
	middle := (s.half+1)*s.side + s.half + 1
	s.stack = append(s.stack[:0], int32(middle))
	state[middle] = 1
	var sxx, sxy, syy int
	near := 0.0
	count, adjacent := 0, 0
	for len(s.stack) > 0 {
		k := int(s.stack[len(s.stack)-1])
		s.stack = s.stack[:len(s.stack)-1]
		dx, dy := int(s.dx[k]), int(s.dy[k])
		count++
		sxx += dx * dx
		sxy += dx * dy
		syy += dy * dy
		for _, step := range s.around {
			kk := k + step
			if state[kk] != 0 {
				continue
			}
			state[kk] = 1
			q := s.pixel(x0, y0, kk, within)
			if q < 0 || f.norm[q] == 0 {
				continue
			}
			b := f.spec[q*row : (q+1)*row]
			limit := threshold
			if g != nothing {
				limit *= f.rest[q*angleParts+g]
			}
			re := blas.Sdot(row, a, 1, b, 1)
			c2 := float32(re * re)
			if count == 1 || !(c2 > limit) { // else the rest does not matter
				im := blas.Sdot(row, s.rotated, 1, b, 1)
				c2 += float32(im * im)
			}
			if count == 1 { // the first to leave the stack is the pixel itself
				near += math.Sqrt(float64(c2))
				adjacent++
			}
			if c2 > limit {
				s.stack = append(s.stack, int32(kk))
			}
		}
	}
	r := island{count: count, coherence: near / float64(adjacent)}
	if count < leastIsland {
		return r
	}
	r.angle = math.Atan2(2*float64(sxy), float64(sxx-syy)) / 2
	d := math.Hypot(float64(sxx-syy)/2, float64(sxy))
	t := float64(sxx+syy) / 2
	r.major, r.minor = math.Sqrt((t+d)/float64(count)), math.Sqrt(max(t-d, 0)/float64(count))
	r.err = r.minor / (r.major * math.Sqrt(float64(count-1)))
	if float64(count) > fullIsland*float64(s.half*s.half) {
		for k, out := range s.outside {
			if out != 0 {
				continue
			}
			if q := s.pixel(x0, y0, k, within); q >= 0 && f.norm[q] > 0 {
				r.available++
			}
		}
	}
	return r
}

// The error of an axis is found by drawing islands anew from either half of the spectrum:
// each of pairs of neighbouring frequencies from all over the band, so that the halves see
// waves of the same lengths. They stand for two series of half the length (see resampled).
// One pixel in angleLattice both ways does so; what it tells about the formal errors holds
// for all within angleReach pixels.
//
// Half a spectrum is more coherent by chance: a squared coherence c from n samples is too
// large by (1-c)^2/n in the mean (Carter 1987, Proc. IEEE 75, 236, from memory), which the
// threshold of the halves allows for. Beyond that islands grow by jumps, and the variance of
// an axis falls with n as a/n + b/n^2: half the variance between halves is too large by
// b/n^2, a third of that between thirds by 2 b/n^2. So the one against the other tells the
// truth: that asks for a factor of 0.90 on patches of plane waves and of 0.75 on quick (own
// simulations, 6 and 3 realisations), and angleScale is the mean of both.
const (
	angleParts   = 2
	angleScale   = 0.825
	angleLattice = 3
	angleReach   = 5
	nothing      = -1
)

// part is the part that frequency j belongs to.
func part(j int) int { return j / errorBins % angleParts }

// leave puts the power of a spectrum of unit norm without each part into rest.
func leave(rest, row []float32, nf int) {
	for g := range rest {
		rest[g] = 0
	}
	for j := range nf {
		x := row[j]*row[j] + row[nf+j]*row[nf+j]
		for g := range rest {
			if g != part(j) {
				rest[g] += x
			}
		}
	}
}

// halves returns the error of the axis of pixel p as the halves of the spectrum tell
// it [rad], of either sign; false if one of them has no island.
func (s *islander) halves(p int) (err float64, ok bool) {
	a, b := s.without(p, 0), s.without(p, 1)
	if min(a.count, b.count) < leastIsland {
		return 0, false
	}
	return angleScale * math.Remainder(a.angle-b.angle, math.Pi) / 2, true
}

// pixel returns the field pixel at place k of the window around (x0, y0), or -1; within
// says that all of the window lies in the image.
func (s *islander) pixel(x0, y0, k int, within bool) int {
	if within {
		return int(s.index[y0*s.grid.Nx+x0+int(s.raster[k])])
	}
	return s.find(x0+int(s.dx[k]), y0+int(s.dy[k]))
}

// full says whether the island fills its window.
func (r island) full() bool {
	return r.available > 0 && float64(r.count) > fullIsland*float64(r.available)
}

// round says whether the island has no axis.
func (r island) round() bool { return !(r.minor < roundIsland*r.major) }
