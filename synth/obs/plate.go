package obs

import (
	"fmt"
	"math"
	"strings"

	"offplane/synth/fits"
)

// A plate ties the pixels of an image to directions on the sky, whatever their size,
// shape, orientation and tangent point (Calabretta & Greisen 2002, A&A 395, 1077).
type plate struct {
	nx, ny     int
	m, inverse [2][2]float64 // from pixels to intermediate coordinates [rad], and back
	cx, cy     float64       // reference pixel, FITS
	projection projection
	lon, lat   float64    // of the reference point [rad]
	axes       [3]vector3 // toward the reference point, toward growing longitude, toward north
}

type vector3 [3]float64

func (a vector3) dot(b vector3) float64 { return a[0]*b[0] + a[1]*b[1] + a[2]*b[2] }

// A projection gives the distance from the reference point in the image, in radians at
// the reference point, for an angle on the sky, and back. The one without functions is
// that of longitude and latitude as they are.
type projection struct{ radius, angle func(float64) float64 }

var projections = map[string]projection{
	"TAN": {math.Tan, math.Atan},
	"SIN": {math.Sin, math.Asin},
	"ARC": {same, same},
	"ZEA": {func(c float64) float64 { return 2 * math.Sin(c/2) }, func(r float64) float64 { return 2 * math.Asin(r/2) }},
	"CAR": {},
	"":    {},
}

func same(x float64) float64 { return x }

// skyUnits are those of the axes [rad].
var skyUnits = map[string]float64{
	"arcsec": Arcsec, "arcmin": 60 * Arcsec, "deg": 3600 * Arcsec, "": 3600 * Arcsec, "rad": 1, "mas": Arcsec / 1000,
}

// readPlate reads the world coordinates of any helioprojective image: axes in either
// order, CUNIT as in skyUnits, PC, CROTA2 or CD, pixels of any shape.
func readPlate(h fits.Header, nx, ny int) (*plate, error) {
	p := &plate{nx: nx, ny: ny}
	number := func(missing float64, form string, a ...any) float64 {
		if v, ok := h.Float(fmt.Sprintf(form, a...)); ok {
			return v
		}
		return missing
	}
	var row [2]int // the row of longitude, of latitude
	var codes [2]string
	for i := range 2 {
		kind, _ := h.Text(fmt.Sprintf("CTYPE%d", i+1))
		name, code, _ := strings.Cut(kind, "-")
		switch codes[i] = strings.TrimLeft(code, "-"); name {
		case "HPLN":
			row[0] = i + 1
		case "HPLT":
			row[1] = i + 1
		case "":
			return nil, fmt.Errorf("CTYPE%d is missing: without world coordinates (CTYPE, CUNIT, CRPIX, CRVAL, CDELT) it is not known where on the sky its pixels are", i+1)
		}
	}
	if row[0]*row[1] == 0 {
		one, _ := h.Text("CTYPE1")
		two, _ := h.Text("CTYPE2")
		return nil, fmt.Errorf("CTYPE1 is %q and CTYPE2 %q: must be helioprojective longitude and latitude, HPLN-TAN and HPLT-TAN", one, two)
	}
	var known bool
	if p.projection, known = projections[codes[0]]; !known || codes[0] != codes[1] {
		return nil, fmt.Errorf("the projection is %q and %q: must be one of TAN, SIN, ARC, ZEA, CAR on both axes", codes[0], codes[1])
	}
	if v := number(180, "LONPOLE"); v != 180 && p.projection.radius != nil {
		return nil, fmt.Errorf("LONPOLE is %g: must be 180", v)
	}
	var unit [2]float64
	for i := range 2 {
		text, _ := h.Text(fmt.Sprintf("CUNIT%d", i+1))
		if unit[i], known = skyUnits[strings.ToLower(strings.TrimSpace(text))]; !known {
			return nil, fmt.Errorf("CUNIT%d is %q: must be arcsec, arcmin, deg or rad", i+1, text)
		}
	}
	var rows [2][2]float64
	_, cd := h.Get("CD1_1")
	s, c := math.Sincos(number(0, "CROTA2") * math.Pi / 180)
	step := [2]float64{number(math.NaN(), "CDELT1"), number(math.NaN(), "CDELT2")}
	for i := range 2 {
		if !cd && !(step[i] != 0 && !math.IsInf(step[i], 0)) {
			return nil, fmt.Errorf("CDELT%d is missing or no step: the size of the pixels is not known", i+1)
		}
		for j := range 2 {
			if cd {
				rows[i][j] = unit[i] * number(0, "CD%d_%d", i+1, j+1)
				continue
			}
			// CROTA2 turns steps that are already scaled (Thompson 2006, A&A 449, 791).
			turn := [2][2]float64{{c, -s * step[1] / step[0] * unit[1] / unit[0]}, {s * step[0] / step[1] * unit[0] / unit[1], c}}
			rows[i][j] = unit[i] * step[i] * number(turn[i][j], "PC%d_%d", i+1, j+1)
		}
	}
	p.m = [2][2]float64{rows[row[0]-1], rows[row[1]-1]}
	det := p.m[0][0]*p.m[1][1] - p.m[0][1]*p.m[1][0]
	if det == 0 || math.IsNaN(1/det) || math.IsInf(1/det, 0) {
		return nil, fmt.Errorf("the matrix of the world coordinates, %v rad, has no inverse", p.m)
	}
	p.inverse = [2][2]float64{{p.m[1][1] / det, -p.m[0][1] / det}, {-p.m[1][0] / det, p.m[0][0] / det}}
	p.cx, p.cy = number(0, "CRPIX1"), number(0, "CRPIX2")
	p.point(unit[row[0]-1]*number(0, "CRVAL%d", row[0]), unit[row[1]-1]*number(0, "CRVAL%d", row[1]))
	return p, nil
}

// point sets the reference point.
func (p *plate) point(lon, lat float64) {
	p.lon, p.lat = lon, lat
	sl, cl := math.Sincos(lon)
	sb, cb := math.Sincos(lat)
	p.axes = [3]vector3{{cb * cl, cb * sl, sb}, {-sl, cl, 0}, {-sb * cl, -sb * sl, cb}}
}

// plate returns the grid's own.
func (g *Grid) plate() *plate {
	s, c := math.Sincos(g.Roll * math.Pi / 180)
	k := g.Pixel * Arcsec
	p := &plate{nx: g.Nx, ny: g.Ny, cx: g.CentreX, cy: g.CentreY, projection: projections["TAN"],
		m:       [2][2]float64{{k * c, -k * s}, {k * s, k * c}},
		inverse: [2][2]float64{{c / k, s / k}, {-s / k, c / k}},
	}
	p.point(0, 0)
	return p
}

// ray returns the direction of a point of the image in zero-based pixels: x toward the
// disc centre, y toward west, z toward north. NaN off the sky.
func (p *plate) ray(px, py float64) vector3 {
	dx, dy := px+1-p.cx, py+1-p.cy
	u, v := p.m[0][0]*dx+p.m[0][1]*dy, p.m[1][0]*dx+p.m[1][1]*dy
	if p.projection.angle == nil {
		sl, cl := math.Sincos(p.lon + u)
		sb, cb := math.Sincos(p.lat + v)
		return vector3{cb * cl, cb * sl, sb}
	}
	r := math.Hypot(u, v)
	if r == 0 {
		return p.axes[0]
	}
	s, c := math.Sincos(p.projection.angle(r))
	var d vector3
	for i := range d {
		d[i] = c*p.axes[0][i] + s*(u/r*p.axes[1][i]+v/r*p.axes[2][i])
	}
	return d
}

// pixel is the inverse of ray; NaN for directions more than a right angle off.
func (p *plate) pixel(d vector3) (px, py float64) {
	var u, v float64
	if p.projection.radius == nil {
		u = math.Remainder(math.Atan2(d[1], d[0])-p.lon, 2*math.Pi)
		v = math.Atan2(d[2], math.Hypot(d[0], d[1])) - p.lat
	} else {
		x, y, z := d.dot(p.axes[0]), d.dot(p.axes[1]), d.dot(p.axes[2])
		r := math.Hypot(y, z)
		if !(x > 0) {
			return math.NaN(), math.NaN()
		}
		if r > 0 {
			k := p.projection.radius(math.Atan2(r, x)) / r
			u, v = k*y, k*z
		}
	}
	return p.inverse[0][0]*u + p.inverse[0][1]*v + p.cx - 1, p.inverse[1][0]*u + p.inverse[1][1]*v + p.cy - 1
}

// size returns the side of a square as large as a pixel [rad].
func (p *plate) size() float64 {
	return math.Sqrt(math.Abs(p.m[0][0]*p.m[1][1] - p.m[0][1]*p.m[1][0]))
}

// coincides reports whether the pixels of two plates lie on each other to a twentieth
// of a pixel: headers written elsewhere round.
func (p *plate) coincides(q *plate) bool {
	if p.nx != q.nx || p.ny != q.ny {
		return false
	}
	for _, c := range [][2]int{{0, 0}, {p.nx - 1, 0}, {0, p.ny - 1}, {p.nx - 1, p.ny - 1}} {
		x, y := float64(c[0]), float64(c[1])
		px, py := p.pixel(q.ray(x, y))
		if !(math.Hypot(px-x, py-y) < 0.05) {
			return false
		}
	}
	return true
}
