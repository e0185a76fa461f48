package obs

import (
	"math"

	"offplane/synth/fits"
)

// Header returns the header of the image as it was read. It is the image's own.
func (m *Image) Header() fits.Header { return m.header }

// Size returns the number of pixels along both axes.
func (m *Image) Size() (nx, ny int) { return m.plate.nx, m.plate.ny }

// Polar returns the projected distance from the disc centre [solar radii] and the position
// angle [deg, 0..360) of every pixel, in raster order; NaN off the sky.
func (m *Image) Polar() (r, pa []float64, err error) {
	g, err := m.Grid() // for the distance of the observer
	if err != nil {
		return nil, nil, err
	}
	p := m.plate
	r, pa = make([]float64, p.nx*p.ny), make([]float64, p.nx*p.ny)
	for i := range r {
		d := p.ray(float64(i%p.nx), float64(i/p.nx))
		r[i] = g.Distance * math.Hypot(d[1], d[2]) / d[0]
		pa[i] = math.Mod(math.Atan2(-d[1], d[2])*180/math.Pi+360, 360)
	}
	return r, pa, nil
}

// Nearest returns, for every pixel of an image, the raster index of the pixel of m that is
// nearest on the sky; -1 beyond m.
func (m *Image) Nearest(of *Image) []int {
	p, q := m.plate, of.plate
	out := make([]int, q.nx*q.ny)
	for i := range out {
		out[i] = -1
		px, py := p.pixel(q.ray(float64(i%q.nx), float64(i/q.nx)))
		if x, y := math.Round(px), math.Round(py); x >= 0 && y >= 0 && x < float64(p.nx) && y < float64(p.ny) {
			out[i] = int(y)*p.nx + int(x)
		}
	}
	return out
}
