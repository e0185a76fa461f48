package camera

import (
	"context"
	"math"
	"slices"

	"offplane/scenarios"
	"offplane/synth/kernel"
	"offplane/synth/parallel"
)

// A Scatter spreads a share of the light far, on a grid of square bins of pixels: what
// is scattered varies little over a bin, and a bin's light seen from another does not
// depend on where in the bin it is.
type Scatter struct {
	share   float64
	size    int         // side of a bin [pixels]
	bins    [][2]int    // the bins that hold light or want it, by their place
	members [][]int32   // pixels of a bin, as numbers in the list
	source  []int       // bins that hold light
	law     [][]float32 // light by the distance of two bins in x and y
	corner  [][4]int32
	weight  [][4]float32
}

// mostBins bounds the bins that hold light: the convolution costs their square.
const mostBins = 5000

// NewScatter prepares the scattering over the listed pixels of a raster of nx columns;
// pixel is their pitch [rad]. Nil if there is none.
func NewScatter(c scenarios.Camera, pixel float64, nx int, pixels []int32) *Scatter {
	if c.Scatter == nil {
		return nil
	}
	s := &Scatter{share: c.Scatter.Share}
	core := c.Scatter.Core.Rad() / pixel
	s.size = max(1, int(core/4))
	place := func(p int32) [2]int { return [2]int{int(p) % nx / s.size, int(p) / nx / s.size} }
	for ; ; s.size++ {
		n := map[[2]int]bool{}
		for _, p := range pixels {
			n[place(p)] = true
		}
		if len(n) <= mostBins {
			break
		}
	}
	// Each pixel takes from the four bins around it.
	number := map[[2]int]int{}
	bin := func(b [2]int) int {
		i, ok := number[b]
		if !ok {
			i = len(s.bins)
			number[b] = i
			s.bins = append(s.bins, b)
			s.members = append(s.members, nil)
		}
		return i
	}
	for i, p := range pixels {
		b := bin(place(p))
		s.members[b] = append(s.members[b], int32(i))
	}
	for b, m := range s.members {
		if len(m) > 0 {
			s.source = append(s.source, b)
		}
	}
	for _, p := range pixels {
		u := (float64(int(p)%nx)+0.5)/float64(s.size) - 0.5
		v := (float64(int(p)/nx)+0.5)/float64(s.size) - 0.5
		x, y := math.Floor(u), math.Floor(v)
		u, v = u-x, v-y
		ix, iy := int(x), int(y)
		s.corner = append(s.corner, [4]int32{int32(bin([2]int{ix, iy})), int32(bin([2]int{ix + 1, iy})), int32(bin([2]int{ix, iy + 1})), int32(bin([2]int{ix + 1, iy + 1}))})
		s.weight = append(s.weight, [4]float32{float32((1 - u) * (1 - v)), float32(u * (1 - v)), float32((1 - u) * v), float32(u * v)})
	}
	var span [2]int
	by := func(i int) func(a, b [2]int) int { return func(a, b [2]int) int { return a[i] - b[i] } }
	// Light per pixel at a bin's centre from one pixel's light spread over another bin.
	e, size := c.Scatter.Exponent, float64(s.size)
	law := func(x, y float64) float64 {
		return (e - 2) / (2 * math.Pi * core * core) * math.Pow(1+(x*x+y*y)/(core*core), -e/2)
	}
	for i := range 2 {
		low, high := slices.MinFunc(s.bins, by(i))[i], slices.MaxFunc(s.bins, by(i))[i]
		span[i] = high - low + 1
	}
	s.law = make([][]float32, span[0])
	for dx := range s.law {
		s.law[dx] = make([]float32, span[1])
		for dy := range s.law[dx] {
			n := 3
			if max(dx, dy) < 3 {
				n = 8 * (1 + s.size/max(1, int(core))) // the core is resolved
			}
			sum := 0.0
			for i := range n {
				for j := range n {
					x, y := (float64(i)+0.5)/float64(n)-0.5, (float64(j)+0.5)/float64(n)-0.5
					sum += law(size*(float64(dx)+x), size*(float64(dy)+y))
				}
			}
			s.law[dx][dy] = float32(sum / float64(n*n))
		}
	}
	return s
}

// Apply scatters frames in place; series returns the frames of a pixel of the list.
// The whole is the same for any number of workers.
func (s *Scatter) Apply(ctx context.Context, series func(i int) []float32, workers int) error {
	frames := len(series(0))
	light := make([][]float32, len(s.source))
	err := parallel.For(ctx, len(s.source), workers, func(_, q int) error {
		light[q] = make([]float32, frames)
		for _, p := range s.members[s.source[q]] {
			for t, x := range series(int(p)) {
				light[q][t] += x
			}
		}
		return nil
	})
	if err != nil {
		return err
	}
	glow := make([][]float32, len(s.bins))
	workers = parallel.Workers(workers)
	coef := make([][]float32, workers)
	err = parallel.For(ctx, len(s.bins), workers, func(w, b int) error {
		coef[w] = coef[w][:0]
		for _, q := range s.source {
			coef[w] = append(coef[w], s.law[abs(s.bins[b][0]-s.bins[q][0])][abs(s.bins[b][1]-s.bins[q][1])])
		}
		glow[b] = make([]float32, frames)
		kernel.Combine(glow[b], light, coef[w])
		return nil
	})
	if err != nil {
		return err
	}
	keep, share := float32(1-s.share), float32(s.share)
	const chunk = 64
	return parallel.For(ctx, (len(s.corner)+chunk-1)/chunk, workers, func(_, i int) error {
		for p := i * chunk; p < min((i+1)*chunk, len(s.corner)); p++ {
			c, w := &s.corner[p], &s.weight[p]
			a, b, d, e := glow[c[0]], glow[c[1]], glow[c[2]], glow[c[3]]
			dst := series(p)
			for t, x := range dst {
				g := float32(w[0]*a[t]) + float32(w[1]*b[t])
				g += float32(w[2] * d[t])
				g += float32(w[3] * e[t])
				dst[t] = float32(keep*x) + float32(share*g)
			}
		}
		return nil
	})
}
