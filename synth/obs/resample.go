package obs

import (
	"fmt"
	"math"
	"slices"

	"offplane/synth/fits"
)

// An Image is a map with world coordinates of its own: any helioprojective FITS image
// with square or oblong pixels, turned, mirrored, in TAN, SIN, ARC, ZEA or CAR.
type Image struct {
	Map
	header fits.Header
	plate  *plate
	where  string // file and extension, for messages
}

// ReadImage reads one image by its name without case, or its number in the file; the
// empty name is the first image.
func ReadImage(path, name string) (*Image, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	h, err := f.FindImage(name)
	if err != nil {
		return nil, err
	}
	return readImage(f, h)
}

// ReadImages reads those images of a file whose names wanted accepts; each may have
// world coordinates of its own.
func ReadImages(path string, wanted func(name string) bool) ([]*Image, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	var ims []*Image
	for _, h := range f.HDUs {
		if !h.IsImage() || !wanted(h.Name) {
			continue
		}
		im, err := readImage(f, h)
		if err != nil {
			return nil, err
		}
		ims = append(ims, im)
	}
	return ims, nil
}

func readImage(f *fits.File, h *fits.HDU) (*Image, error) {
	where := f.Name
	if h.Name != "" {
		where += "[" + h.Name + "]"
	}
	p := &plate{}
	if len(h.Axes) >= 2 {
		var err error
		if p, err = readPlate(h.Header, h.Axes[0], h.Axes[1]); err != nil {
			return nil, fmt.Errorf("%s: %w", where, err)
		}
	}
	m, err := readPixels(f, h)
	if err != nil {
		return nil, err
	}
	return &Image{m, h.Header, p, where}, nil
}

// Where names the image's file and extension.
func (m *Image) Where() string { return m.where }

// Pixel returns the side [arcsec] of a square as large as one of the image's pixels.
func (m *Image) Pixel() float64 { return m.plate.size() / Arcsec }

// Grid returns the grid of the image itself if its pixels are square and turned only,
// and otherwise a grid with north up that covers it in pixels as large as its own.
func (m *Image) Grid() (Grid, error) {
	p := m.plate
	if g, err := readGrid(m.header, []int{p.nx, p.ny}); err == nil && g.plate().coincides(p) {
		return g, nil
	}
	// All but the pixels from a header of square ones.
	h := slices.Clone(m.header)
	for _, key := range []string{"CD1_1", "CROTA2", "IMGROLL", "PC1_1", "PC1_2", "PC2_1", "PC2_2"} {
		h = slices.DeleteFunc(h, func(c fits.Card) bool { return c.Key == key })
	}
	for i, kind := range []string{"HPLN-TAN", "HPLT-TAN"} {
		h.Set(fmt.Sprintf("CTYPE%d", i+1), kind, "")
		h.Set(fmt.Sprintf("CUNIT%d", i+1), "arcsec", "")
		h.Set(fmt.Sprintf("CDELT%d", i+1), p.size()/Arcsec, "")
		h.Set(fmt.Sprintf("CRVAL%d", i+1), 0.0, "")
		h.Set(fmt.Sprintf("CRPIX%d", i+1), 0.0, "")
	}
	g, err := readGrid(h, []int{1, 1})
	if err != nil {
		return Grid{}, fmt.Errorf("%s: %w", m.where, err)
	}
	lo, hi := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	rim := g.plate()
	edge := func(x, y float64) {
		q := [2]float64{}
		q[0], q[1] = rim.pixel(p.ray(x, y))
		for k := range q {
			lo[k], hi[k] = min(lo[k], q[k]), max(hi[k], q[k])
		}
	}
	for i := range p.nx {
		edge(float64(i), 0)
		edge(float64(i), float64(p.ny-1))
	}
	for j := range p.ny {
		edge(0, float64(j))
		edge(float64(p.nx-1), float64(j))
	}
	const most = 1 << 13
	w, t := math.Ceil(hi[0]-lo[0])+1, math.Ceil(hi[1]-lo[1])+1
	if !(w <= most && t <= most) {
		return Grid{}, fmt.Errorf("%s: does not fit into %d x %d pixels of %.3g arcsec around the Sun", m.where, most, most, p.size()/Arcsec)
	}
	g.Nx, g.Ny = int(w), int(t)
	// Pixel 0 of the cover is where the rim begins; there the disc centre was at -1.
	g.CentreX, g.CentreY = -lo[0], -lo[1]
	return g, nil
}

// A Resampling says how an image came onto a grid; empty if their pixels coincide.
type Resampling string

// The ways onto a grid.
const (
	AreaAverage Resampling = "area average"
	Bilinear    Resampling = "bilinear"
	Nearest     Resampling = "nearest pixel"
)

// On brings the image onto a grid. Pixels that coincide to a twentieth of one stay as
// they are. Of finer pixels the mean is taken, each weighted by the area it shares with
// the grid's pixel, so that means over the sky keep; between coarser ones the
// interpolation is bilinear; integers (codes, flags) are those of the nearest pixel, or 0
// outside. Values that are not finite have no weight, and a grid's pixel of whose area
// or weight less than half has a value is NaN. A map in degrees is one of directions
// of undirected lines, counted from solar north whatever way the image is turned: their
// double angles are averaged as unit vectors.
func (m *Image) On(g *Grid) (Map, Resampling) {
	p, q := m.plate, g.plate()
	out := m.Map
	switch {
	case p.coincides(q):
		return out, ""
	case m.Ints != nil:
		out.Ints = p.nearest(m.Ints, q)
		return out, Nearest
	}
	channels := m.channels()
	how, resample := Bilinear, p.bilinear
	if p.size() < 0.99*q.size() {
		how, resample = AreaAverage, p.average
	}
	sums, weight := resample(channels, q)
	out.Data = make([]float32, q.nx*q.ny)
	for i := range out.Data {
		v := math.NaN()
		if weight[i] >= share {
			v = sums[0][i] / weight[i]
			if len(sums) == 2 {
				v = math.Atan2(sums[1][i], sums[0][i]) * 90 / math.Pi
				if v < 0 {
					v += 180
				}
			}
		}
		out.Data[i] = float32(v)
	}
	return out, how
}

// share is the part of a pixel that must have a value.
const share = 0.5

// channels returns what can be averaged: the values, or the vectors of double angles.
func (m *Image) channels() [][]float64 {
	n := 1
	if m.Unit == "deg" {
		n = 2
	}
	c := make([][]float64, n)
	for k := range c {
		c[k] = make([]float64, len(m.Data))
	}
	for i, v := range m.Data {
		c[0][i] = float64(v)
		if n == 2 {
			c[1][i], c[0][i] = math.Sincos(float64(v) * math.Pi / 90)
		}
	}
	return c
}

func (p *plate) nearest(x []int32, q *plate) []int32 {
	out := make([]int32, q.nx*q.ny)
	for i := range out {
		px, py := p.pixel(q.ray(float64(i%q.nx), float64(i/q.nx)))
		if ix, iy := int(math.Round(px)), int(math.Round(py)); ix >= 0 && iy >= 0 && ix < p.nx && iy < p.ny {
			out[i] = x[iy*p.nx+ix]
		}
	}
	return out
}

// bilinear returns the weighted sums of the channels around each pixel of q, and the
// sums of the weights.
func (p *plate) bilinear(channels [][]float64, q *plate) (sums [][]float64, weight []float64) {
	sums, weight = blanks(len(channels), q.nx*q.ny)
	for i := range weight {
		px, py := p.pixel(q.ray(float64(i%q.nx), float64(i/q.nx)))
		fx, fy := math.Floor(px), math.Floor(py)
		if !(fx >= -1 && fy >= -1 && fx < float64(p.nx) && fy < float64(p.ny)) {
			continue
		}
		u, v := px-fx, py-fy
		for k, w := range [4]float64{(1 - u) * (1 - v), u * (1 - v), (1 - u) * v, u * v} {
			ix, iy := int(fx)+k&1, int(fy)+k>>1
			if ix >= 0 && iy >= 0 && ix < p.nx && iy < p.ny {
				add(channels, iy*p.nx+ix, sums, weight, i, w)
			}
		}
	}
	return sums, weight
}

// average returns the sums of the channels over each pixel of q, weighted by shared
// area, and the sums of these areas, in pixels of q.
func (p *plate) average(channels [][]float64, q *plate) (sums [][]float64, weight []float64) {
	sums, weight = blanks(len(channels), q.nx*q.ny)
	corner := func(dst []point2, iy int) {
		for i := range dst {
			dst[i][0], dst[i][1] = q.pixel(p.ray(float64(i)-0.5, float64(iy)-0.5))
		}
	}
	below, above := make([]point2, p.nx+1), make([]point2, p.nx+1)
	corner(above, 0)
	var a, b [8]point2
	for iy := range p.ny {
		below, above = above, below
		corner(above, iy+1)
		for ix := range p.nx {
			quad := [4]point2{below[ix], below[ix+1], above[ix+1], above[ix]}
			from, to, whole := span(quad, q)
			shared := 0.0
			if whole {
				shared = area(quad[:])
			}
			for y := from[1]; y <= to[1]; y++ {
				for x := from[0]; x <= to[0]; x++ {
					if !whole {
						shared = overlap(quad[:], x, y, a[:0], b[:0])
					}
					add(channels, iy*p.nx+ix, sums, weight, y*q.nx+x, shared)
				}
			}
		}
	}
	return sums, weight
}

type point2 [2]float64

// span returns the first and last pixel of q that a quadrilateral may touch, the last
// before the first if there are none, and whether all of it lies in one pixel.
func span(quad [4]point2, q *plate) (from, to [2]int, whole bool) {
	whole = true
	for k, n := range [2]int{q.nx, q.ny} {
		lo := math.Floor(min(quad[0][k], quad[1][k], quad[2][k], quad[3][k]) + 0.5)
		hi := math.Floor(max(quad[0][k], quad[1][k], quad[2][k], quad[3][k]) + 0.5)
		if !(hi >= 0 && lo < float64(n)) { // beside q, or off the sky
			return [2]int{}, [2]int{-1, -1}, false
		}
		from[k], to[k] = int(max(lo, 0)), int(min(hi, float64(n-1)))
		whole = whole && lo == hi
	}
	return from, to, whole
}

// overlap returns the area that a convex polygon shares with pixel (x, y): its corners
// are clipped at one side after the other (Sutherland & Hodgman 1974, Commun. ACM 17, 32).
// a and b are scratch for eight corners.
func overlap(polygon []point2, x, y int, a, b []point2) float64 {
	a = append(a, polygon...)
	centre := point2{float64(x), float64(y)}
	for k := range 2 {
		for _, sign := range [2]float64{-1, 1} {
			b = b[:0]
			for i, end := range a {
				start := a[(i+len(a)-1)%len(a)]
				// Distances inward of the side.
				s, e := 0.5-sign*(start[k]-centre[k]), 0.5-sign*(end[k]-centre[k])
				if (s > 0) != (e > 0) {
					t := s / (s - e)
					b = append(b, point2{start[0] + t*(end[0]-start[0]), start[1] + t*(end[1]-start[1])})
				}
				if e > 0 {
					b = append(b, end)
				}
			}
			a, b = b, a
		}
	}
	return area(a)
}

// area returns the area of a polygon, whichever way its corners run.
func area(polygon []point2) float64 {
	sum := 0.0
	for i, p := range polygon {
		q := polygon[(i+1)%len(polygon)]
		sum += p[0]*q[1] - q[0]*p[1]
	}
	return math.Abs(sum) / 2
}

func blanks(channels, n int) (sums [][]float64, weight []float64) {
	sums = make([][]float64, channels)
	for k := range sums {
		sums[k] = make([]float64, n)
	}
	return sums, make([]float64, n)
}

// add adds pixel j of the channels to pixel i of the sums, unless it has no value.
func add(channels [][]float64, j int, sums [][]float64, weight []float64, i int, w float64) {
	if v := channels[0][j]; w == 0 || v-v != 0 { // x - x is 0 for finite x only
		return
	}
	weight[i] += w
	for k := range sums {
		sums[k][i] += w * channels[k][j]
	}
}
