package obs

import (
	"fmt"
	"math"
	"strings"
	"time"

	"offplane/synth/fits"
)

const (
	solarRadius      = 6.957e8        // [m] nominal (IAU 2015 Resolution B3)
	astronomicalUnit = 1.495978707e11 // [m] exact (IAU 2012 Resolution B2)
	mjdUnixEpoch     = 40587          // modified Julian date of 1970-01-01
	farYear          = 9999           // last year that a FITS date can hold
	milliseconds     = "2006-01-02T15:04:05.000"
	nanoseconds      = "2006-01-02T15:04:05.000000000"
)

// axis is a linear axis after the two of the sky.
type axis struct {
	kind, unit string
	step, at   float64 // step; value at the first element
	about      string
}

// header returns the world coordinates and the observer (Thompson 2006, A&A
// 449, 791), with every DATE card beside its MJD twin: readers warn otherwise.
// Distance and roll are repeated in cards of their own, from which they come
// back to the last bit.
func (g *Grid) header(extra ...axis) (fits.Header, error) {
	if !(g.Pixel > 0) || !(g.Distance > 1) || g.Start.Year() < 1 || g.Start.Year() >= farYear {
		return nil, fmt.Errorf("grid: pixel of %g arcsec, distance of %g solar radii, start %v", g.Pixel, g.Distance, g.Start)
	}
	s, c := math.Sincos(g.Roll * math.Pi / 180)
	dsun := g.Distance * solarRadius
	var h fits.Header
	add := func(key string, value any, comment string) {
		h = append(h, fits.Card{Key: key, Value: value, Comment: comment})
	}
	add("WCSAXES", 2+len(extra), "")
	add("WCSNAME", "Helioprojective-cartesian", "")
	add("CTYPE1", "HPLN-TAN", "positive toward solar west")
	add("CTYPE2", "HPLT-TAN", "positive toward solar north")
	for i, a := range extra {
		add(fmt.Sprintf("CTYPE%d", i+3), a.kind, a.about)
	}
	add("CUNIT1", "arcsec", "")
	add("CUNIT2", "arcsec", "")
	for i, a := range extra {
		add(fmt.Sprintf("CUNIT%d", i+3), a.unit, "")
	}
	add("CDELT1", g.Pixel, "")
	add("CDELT2", g.Pixel, "")
	for i, a := range extra {
		add(fmt.Sprintf("CDELT%d", i+3), a.step, "")
	}
	add("CRPIX1", g.CentreX, "disc centre; the first pixel is 1")
	add("CRPIX2", g.CentreY, "disc centre; the first pixel is 1")
	for i := range extra {
		add(fmt.Sprintf("CRPIX%d", i+3), 1.0, "")
	}
	add("CRVAL1", 0.0, "")
	add("CRVAL2", 0.0, "")
	for i, a := range extra {
		add(fmt.Sprintf("CRVAL%d", i+3), a.at, "")
	}
	add("PC1_1", c, "")
	add("PC1_2", 0-s, "") // never -0
	add("PC2_1", s, "")
	add("PC2_2", c, "")
	add("LONPOLE", 180.0, "")
	add("LATPOLE", 0.0, "")
	add("IMGROLL", g.Roll, "[deg] from solar north to +y, counter-clockwise")
	add("RSUN_REF", solarRadius, "[m] solar radius used")
	add("DSUN_OBS", dsun, "[m] observer distance")
	add("RSUNDIST", g.Distance, "observer distance in solar radii")
	add("RSUN_OBS", math.Asin(solarRadius/dsun)/Arcsec, "[arcsec] arcsin(RSUN_REF/DSUN_OBS)")
	add("HGLN_OBS", g.Longitude, "[deg]")
	add("HGLT_OBS", g.Latitude, "[deg]")
	if !g.Start.IsZero() {
		start := g.Start.UTC()
		end := start.Add(time.Duration(g.Duration * 1e9)).Round(time.Millisecond)
		mean := start.Add(time.Duration(g.Duration * 0.5e9)).Round(time.Millisecond)
		dates := []struct {
			key string
			t   time.Time
		}{{"OBS", start}, {"BEG", start}, {"AVG", mean}, {"END", end}}
		add("TIMESYS", "UTC", "")
		for _, d := range dates {
			add("DATE-"+d.key, stamp(d.t), "")
		}
		add("DATEREF", stamp(start), "")
		add("MJDREF", mjd(start), "")
		for _, d := range dates {
			add("MJD-"+d.key, mjd(d.t), "")
		}
	}
	add("TELAPSE", g.Duration, "[s] of the whole observation")
	add("XPOSURE", g.Exposure, "[s] of one exposure")
	add("EXPTIME", g.Exposure, "[s] of one exposure")
	if g.RestWavelength > 0 {
		add("WAVELNTH", g.RestWavelength, "[nm] rest wavelength in vacuum")
		add("WAVEUNIT", "nm", "")
		add("WAVEREF", "vac", "")
	}
	for _, key := range []string{"TELESCOP", "INSTRUME", "DETECTOR", "OBSRVTRY"} {
		add(key, "synthetic", "")
	}
	return h, nil
}

func stamp(t time.Time) string {
	if t.Nanosecond()%1e6 != 0 {
		return t.Format(nanoseconds)
	}
	return t.Format(milliseconds)
}

func mjd(t time.Time) float64 {
	s := t.Unix()
	day := s / 86400
	if s < 0 && s%86400 != 0 {
		day--
	}
	return float64(mjdUnixEpoch+day) + (float64(s-86400*day)+float64(t.Nanosecond())/1e9)/86400
}

// readGrid is the inverse of header. It also takes headers written by others:
// CUNIT in deg or arcsec, CROTA2 or a CD matrix instead of PC, a reference
// point away from the disc centre. Without DSUN_OBS the distance is 1 au,
// without HGLN_OBS and HGLT_OBS the observer stands at latitude and longitude 0.
func readGrid(h fits.Header, axes []int) (Grid, error) {
	g := Grid{Nx: axes[0], Ny: axes[1]}
	var unit [2]float64
	for i, want := range []string{"HPLN-TAN", "HPLT-TAN"} {
		kind, _ := h.Text(fmt.Sprintf("CTYPE%d", i+1))
		if kind != want {
			return g, fmt.Errorf("CTYPE%d is %q: must be %q, a helioprojective map", i+1, kind, want)
		}
		switch u, _ := h.Text(fmt.Sprintf("CUNIT%d", i+1)); strings.ToLower(u) {
		case "arcsec":
			unit[i] = 1
		case "deg", "": // degrees are the default of the standard
			unit[i] = 3600
		default:
			return g, fmt.Errorf("CUNIT%d is %q: must be arcsec or deg", i+1, u)
		}
	}
	number := func(key string, missing float64) float64 {
		if v, ok := h.Float(key); ok {
			return v
		}
		return missing
	}
	// m maps pixels to intermediate coordinates [arcsec].
	var m [2][2]float64
	if _, ok := h.Get("CD1_1"); ok {
		for i := range 2 {
			for j := range 2 {
				m[i][j] = unit[i] * number(fmt.Sprintf("CD%d_%d", i+1, j+1), 0)
			}
		}
	} else {
		s, c := math.Sincos(number("CROTA2", 0) * math.Pi / 180)
		pc := [2][2]float64{{c, -s}, {s, c}}
		for i := range 2 {
			step, ok := h.Float(fmt.Sprintf("CDELT%d", i+1))
			if !ok {
				return g, fmt.Errorf("CDELT%d is missing: the pixel size is not known", i+1)
			}
			for j := range 2 {
				m[i][j] = unit[i] * step * number(fmt.Sprintf("PC%d_%d", i+1, j+1), pc[i][j])
			}
		}
	}
	g.Pixel = math.Hypot(m[0][0], m[1][0])
	g.Roll = math.Atan2(m[1][0], m[0][0]) * 180 / math.Pi
	if !(g.Pixel > 0) || math.IsInf(g.Pixel, 0) || math.Abs(m[0][0]-m[1][1]) > 1e-6*g.Pixel || math.Abs(m[0][1]+m[1][0]) > 1e-6*g.Pixel {
		return g, fmt.Errorf("pixels must be square, x toward west and y toward north before the roll; the matrix is %v arcsec", m)
	}
	// The matrix of square pixels keeps CDELT exactly where there is one.
	if step, ok := h.Float("CDELT1"); ok && math.Abs(step*unit[0]-g.Pixel) <= 1e-12*g.Pixel {
		g.Pixel = step * unit[0]
	}
	if roll, ok := h.Float("IMGROLL"); ok && math.Abs(math.Remainder(roll-g.Roll, 360)) < 1e-9 {
		g.Roll = roll
	}
	g.CentreX, g.CentreY = number("CRPIX1", 0), number("CRPIX2", 0)
	if x, y := unit[0]*number("CRVAL1", 0), unit[1]*number("CRVAL2", 0); x != 0 || y != 0 {
		// The tangent point moves to the disc centre; over 1 deg the two
		// projections differ by less than 1 arcsec in 3 solar radii.
		s, c := math.Sincos(g.Roll * math.Pi / 180)
		g.CentreX -= (c*x + s*y) / g.Pixel
		g.CentreY -= (-s*x + c*y) / g.Pixel
	}
	g.Distance = number("DSUN_OBS", astronomicalUnit) / number("RSUN_REF", solarRadius)
	if d, ok := h.Float("RSUNDIST"); ok && math.Abs(d-g.Distance) < 1e-12*g.Distance {
		g.Distance = d
	}
	if !(g.Distance > 1) {
		return g, fmt.Errorf("DSUN_OBS puts the observer at %g solar radii", g.Distance)
	}
	g.Latitude, g.Longitude = number("HGLT_OBS", 0), number("HGLN_OBS", 0)
	for _, key := range []string{"DATE-BEG", "DATE-OBS"} {
		text, ok := h.Text(key)
		if !ok {
			continue
		}
		t, err := time.Parse("2006-01-02T15:04:05", strings.TrimSuffix(text, "Z"))
		if err != nil {
			if t, err = time.Parse("2006-01-02", text); err != nil {
				return g, fmt.Errorf("%s is %q: must be a date like 2025-01-01T00:00:00", key, text)
			}
		}
		g.Start = t
		break
	}
	g.Duration = number("TELAPSE", 0)
	g.Exposure = number("XPOSURE", number("EXPTIME", 0))
	if w, ok := h.Float("WAVELNTH"); ok {
		switch u, _ := h.Text("WAVEUNIT"); strings.ToLower(u) {
		case "nm", "":
			g.RestWavelength = w
		case "angstrom":
			g.RestWavelength = w / 10
		}
	}
	return g, nil
}

// sameFrame reports whether two grids have the same pixels on the same sky, to some
// thousandths of a pixel: units and programs round differently.
func (g *Grid) sameFrame(o *Grid) bool {
	near := func(a, b, tolerance float64) bool { return math.Abs(a-b) <= tolerance }
	return g.Nx == o.Nx && g.Ny == o.Ny && near(g.Pixel, o.Pixel, 1e-6*g.Pixel) && near(g.Distance, o.Distance, 1e-6*g.Distance) &&
		near(g.CentreX, o.CentreX, 1e-3) && near(g.CentreY, o.CentreY, 1e-3) && near(g.Roll, o.Roll, 1e-4)
}
