package obs

import (
	"fmt"
	"math"
	"sort"
	"strconv"

	"offplane/synth/fits"
)

// WriteSeries writes one table SERIES with a row for each pixel of the field:
// x, y (FITS pixel), tx, ty [arcsec] and the vector series [km/s]. The cube has
// one tuning. primary holds the cards of the primary HDU, header further cards
// of the table, such as the time step.
func WriteSeries(path string, g *Grid, pixels []int32, series *Cube, primary, header fits.Header) error {
	if series.Tunings != 1 || series.Pixels != len(pixels) || series.Frames < 1 {
		return fmt.Errorf("%s: %d x %d series of %d frames for %d pixels", path, series.Pixels, series.Tunings, series.Frames, len(pixels))
	}
	w, err := fits.Create(path, primary)
	if err != nil {
		return err
	}
	defer w.Abort()
	h := fits.Header{
		{Key: "NXIMAGE", Value: g.Nx, Comment: "columns of the image that x counts"},
		{Key: "NYIMAGE", Value: g.Ny, Comment: "rows of the image that y counts"},
	}
	rows, err := w.Rows("SERIES", append(h, header...), len(pixels),
		fits.Column{Name: "x", Form: "J", About: "pixel of the image, from 1"},
		fits.Column{Name: "y", Form: "J", About: "pixel of the image, from 1"},
		fits.Column{Name: "tx", Form: "D", Unit: "arcsec", About: "helioprojective, toward west"},
		fits.Column{Name: "ty", Form: "D", Unit: "arcsec", About: "helioprojective, toward north"},
		fits.Column{Name: "series", Form: strconv.Itoa(series.Frames) + "E", Unit: "km/s", About: "positive away from the observer"})
	if err != nil {
		return err
	}
	for i, p := range pixels {
		if p < 0 || int(p) >= g.Nx*g.Ny || i > 0 && p <= pixels[i-1] {
			return fmt.Errorf("%s: pixel %d: raster indices must ascend within the %d x %d image", path, p, g.Nx, g.Ny)
		}
		ix, iy := int(p)%g.Nx, int(p)/g.Nx
		tx, ty := g.helioprojective(ix, iy)
		if err := rows.WriteRow(int32(ix+1), int32(iy+1), tx, ty, series.Series(i, 0)); err != nil {
			return err
		}
	}
	return w.Close()
}

// helioprojective returns longitude and latitude [arcsec] of pixel (ix, iy):
// the inverse of the gnomonic projection about the disc centre (Thompson 2006).
func (g *Grid) helioprojective(ix, iy int) (tx, ty float64) {
	y, z := g.Sky(ix, iy)
	y, z = y/g.Distance, z/g.Distance
	return math.Atan(y) / Arcsec, math.Atan2(z, math.Hypot(1, y)) / Arcsec
}

// ReadSeries returns the series [km/s] of the pixel with that raster index,
// reading its row only.
func ReadSeries(path string, pixel int32) ([]float32, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	rows, err := f.Rows("SERIES")
	if err != nil {
		return nil, err
	}
	nx, ok := rows.Header.Int("NXIMAGE")
	if !ok || nx < 1 {
		return nil, fmt.Errorf("%s[SERIES]: card NXIMAGE is missing", path)
	}
	var column [3]int
	for i, name := range []string{"x", "y", "series"} {
		if column[i], err = rows.Column(name); err != nil {
			return nil, err
		}
	}
	// Rows ascend with the raster index.
	at := func(i int) int64 {
		x, e1 := rows.Int(i, column[0])
		y, e2 := rows.Int(i, column[1])
		if err == nil && e1 != nil {
			err = e1
		}
		if err == nil && e2 != nil {
			err = e2
		}
		return (y-1)*int64(nx) + x - 1
	}
	i := sort.Search(rows.Len, func(i int) bool { return at(i) >= int64(pixel) })
	found := i < rows.Len && at(i) == int64(pixel)
	if err != nil {
		return nil, err
	}
	if !found {
		return nil, fmt.Errorf("%s[SERIES]: no row for pixel (%d, %d)", path, int(pixel)%nx+1, int(pixel)/nx+1)
	}
	return rows.Float32s(i, column[2], nil)
}
