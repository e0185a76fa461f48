package obs

import (
	"fmt"
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
		tx, ty := g.Helioprojective(ix, iy)
		if err := rows.WriteRow(int32(ix+1), int32(iy+1), tx, ty, series.Series(i, 0)); err != nil {
			return err
		}
	}
	return w.Close()
}

// A SeriesFile gives the series of a file that WriteSeries wrote, row by row. It is not
// safe for concurrent use.
type SeriesFile struct {
	Len     int     // rows: pixels of the field, their raster indices ascending
	Cadence float64 // card TIMESTEP [s]; 0: none

	file   *fits.File
	rows   *fits.Rows
	nx     int
	column [3]int
}

// OpenSeries opens a file of series.
func OpenSeries(path string) (*SeriesFile, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	s := &SeriesFile{file: f}
	if s.rows, err = f.Rows("SERIES"); err == nil {
		s.Len = s.rows.Len
		err = s.readHeader(path)
	}
	if err != nil {
		f.Close()
		return nil, err
	}
	return s, nil
}

func (s *SeriesFile) readHeader(path string) (err error) {
	var ok bool
	if s.nx, ok = s.rows.Header.Int("NXIMAGE"); !ok || s.nx < 1 {
		return fmt.Errorf("%s[SERIES]: card NXIMAGE is missing", path)
	}
	for i, name := range []string{"x", "y", "series"} {
		if s.column[i], err = s.rows.Column(name); err != nil {
			return err
		}
	}
	s.Cadence, _ = s.rows.Header.Float("TIMESTEP")
	return nil
}

// Close closes the file.
func (s *SeriesFile) Close() error { return s.file.Close() }

// Pixel returns the raster index of the pixel of a row.
func (s *SeriesFile) Pixel(row int) (int32, error) {
	x, err := s.rows.Int(row, s.column[0])
	if err != nil {
		return 0, err
	}
	y, err := s.rows.Int(row, s.column[1])
	return int32((y-1)*int64(s.nx) + x - 1), err
}

// Read returns the series [km/s] of a row in dst, which is grown as needed.
func (s *SeriesFile) Read(row int, dst []float32) ([]float32, error) {
	return s.rows.Float32s(row, s.column[2], dst)
}

// ReadSeries returns the series [km/s] of the pixel with that raster index,
// reading its row only.
func ReadSeries(path string, pixel int32) ([]float32, error) {
	s, err := OpenSeries(path)
	if err != nil {
		return nil, err
	}
	defer s.Close()
	at := func(i int) int32 {
		p, e := s.Pixel(i)
		if err == nil {
			err = e
		}
		return p
	}
	i := sort.Search(s.Len, func(i int) bool { return at(i) >= pixel })
	found := i < s.Len && at(i) == pixel
	if err != nil {
		return nil, err
	}
	if !found {
		return nil, fmt.Errorf("%s[SERIES]: no row for pixel (%d, %d)", path, int(pixel)%s.nx+1, int(pixel)/s.nx+1)
	}
	return s.Read(i, nil)
}
