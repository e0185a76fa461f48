package model

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/synth/fits"
)

// A Grid is a corona given by numbers at the nodes of a spherical grid: the user's own.
//
// Its FITS file holds five image extensions of three axes, in FITS order longitude,
// colatitude, distance (an array of shape [r, theta, phi] in languages that write the
// last index fastest), float32 or float64:
//
//	NE      electron density [cm-3], positive
//	T       temperature [K], positive
//	BR      field along growing distance [G]
//	BTHETA  field along growing colatitude (southward) [G]
//	BPHI    field along growing longitude [G]
//
// and three tables of one column, named like the table, whose rows are the nodes in
// ascending order:
//
//	R       distance from the Sun's centre [solRad], from 1 (the surface)
//	THETA   colatitude [deg], from the north pole; the poles may be half a cell away
//	PHI     longitude [deg], once around the Sun, the last node before the first + 360
//
// The spacing is free and need not be even. BUNIT and TUNIT, where given, must be those
// units. No value may be missing (NaN).
//
// Between nodes ln NE, T, and r^2 times the field are linear in r, theta and phi: the
// error falls as the square of the spacing. Beyond the last node everything but T falls
// as r^-2.
type Grid struct {
	r, theta, phi []float64 // [solar radii, rad, rad]
	node          [][gridValues]float32
	cold, hot     float64 // least and greatest temperature [K]
}

// The values of a node: ln NE, T, r^2 B.
const gridValues = 5

var gridImages = [gridValues]struct{ name, unit string }{{"NE", "cm-3"}, {"T", "K"}, {"BR", "G"}, {"BTHETA", "G"}, {"BPHI", "G"}}

// ReadGrid reads the file of a grid.
func ReadGrid(path string) (*Grid, error) {
	f, err := fits.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	g := &Grid{}
	for _, a := range []struct {
		name, unit string
		scale      float64
		into       *[]float64
	}{{"R", "solRad", 1, &g.r}, {"THETA", "deg", math.Pi / 180, &g.theta}, {"PHI", "deg", math.Pi / 180, &g.phi}} {
		t, err := f.Table(a.name)
		if err != nil {
			return nil, fmt.Errorf("%w; the grid needs tables R, THETA and PHI with its nodes", err)
		}
		v, err := t.Floats(a.name)
		if err != nil {
			return nil, fmt.Errorf("%s: table %s: %w", path, a.name, err)
		}
		for _, c := range t.Columns {
			if c.Name == a.name && c.Unit != "" && c.Unit != a.unit {
				return nil, fmt.Errorf("%s: %s is in %s; write it in %s", path, a.name, c.Unit, a.unit)
			}
		}
		if len(v) < 3 {
			return nil, fmt.Errorf("%s: %s has %d nodes; at least 3 are needed", path, a.name, len(v))
		}
		for i, x := range v {
			if math.IsNaN(x) || math.IsInf(x, 0) {
				return nil, fmt.Errorf("%s: %s: node %d is %g", path, a.name, i+1, x)
			}
			if i > 0 && !(x > v[i-1]) {
				return nil, fmt.Errorf("%s: %s must ascend, but node %d is %g after %g", path, a.name, i+1, x, v[i-1])
			}
		}
		for _, x := range v {
			*a.into = append(*a.into, x*a.scale)
		}
	}
	if g.r[0] > 1+1e-6 || g.r[len(g.r)-1] < 1.1 {
		return nil, fmt.Errorf("%s: R runs from %g to %g solar radii; it must start at the surface, 1, or below", path, g.r[0], g.r[len(g.r)-1])
	}
	const deg = 180 / math.Pi
	nt, np := len(g.theta), len(g.phi)
	if g.theta[0] < -1e-9 || g.theta[nt-1] > math.Pi+1e-9 ||
		g.theta[0] > g.theta[1]-g.theta[0]+1e-9 || math.Pi-g.theta[nt-1] > g.theta[nt-1]-g.theta[nt-2]+1e-9 {
		return nil, fmt.Errorf("%s: THETA runs from %g to %g deg; it is the colatitude and must cover 0 (the north pole) to 180, but for a part of a cell", path, g.theta[0]*deg, g.theta[nt-1]*deg)
	}
	widest := 0.0
	for k := 1; k < np; k++ {
		widest = max(widest, g.phi[k]-g.phi[k-1])
	}
	gap := g.phi[0] + 2*math.Pi - g.phi[np-1]
	if gap < 1e-9 || gap > 1.5*widest {
		return nil, fmt.Errorf("%s: PHI runs from %g to %g deg; it must go once around the Sun, without the first longitude again at the end", path, g.phi[0]*deg, g.phi[np-1]*deg)
	}
	if err := g.readImages(f, path); err != nil {
		return nil, err
	}
	g.cold, g.hot = math.Inf(1), 0
	for i := range g.node {
		t := float64(g.node[i][1])
		g.cold, g.hot = min(g.cold, t), max(g.hot, t)
	}
	return g, nil
}

func (g *Grid) readImages(f *fits.File, path string) error {
	np, nt, nr := len(g.phi), len(g.theta), len(g.r)
	var plane []float32
	for v, want := range gridImages {
		c, err := f.Cube(want.name)
		if err != nil {
			return fmt.Errorf("%w; the grid needs images NE, T, BR, BTHETA and BPHI", err)
		}
		if len(c.Axes) != 3 || c.Axes[0] != np || c.Axes[1] != nt || c.Axes[2] != nr {
			return fmt.Errorf("%s: %s has the axes %v, but PHI, THETA and R have %d, %d and %d nodes", path, want.name, c.Axes, np, nt, nr)
		}
		if v == 0 { // not before the file is known to hold as many pixels
			g.node, plane = make([][gridValues]float32, nr*nt*np), make([]float32, nt*np)
		}
		if u, ok := c.Header.Text("BUNIT"); ok && u != want.unit {
			return fmt.Errorf("%s: %s is in %s; write it in %s", path, want.name, u, want.unit)
		}
		for i := range nr {
			if err := c.ReadPlane(i, plane); err != nil {
				return fmt.Errorf("%s: %s: %w", path, want.name, err)
			}
			for n, x := range plane {
				y := float64(x)
				if wrong := math.IsNaN(y) || math.IsInf(y, 0); wrong || v < 2 && y <= 0 {
					what := "is not positive"
					if wrong {
						what = "is missing or not finite; fill the holes of the grid first"
					}
					return fmt.Errorf("%s: %s = %g at r = %.4g solRad, theta = %.4g deg, phi = %.4g deg %s", path, want.name, y,
						g.r[i], g.theta[n/np]*180/math.Pi, g.phi[n%np]*180/math.Pi, what)
				}
				switch {
				case v == 0:
					y = math.Log(y)
				case v > 1:
					y *= g.r[i] * g.r[i]
				}
				g.node[i*nt*np+n][v] = float32(y)
			}
		}
	}
	return nil
}

// Reaches returns an error unless the grid reaches the distance outer [solar radii].
func (g *Grid) Reaches(outer float64) error {
	if last := g.r[len(g.r)-1]; last < outer {
		return fmt.Errorf("the grid ends at r = %.4g solar radii, but lines of sight reach %.4g; write a smaller sight.reach or a larger grid", last, outer)
	}
	return nil
}

// cell returns the index of the cell of x among ascending nodes, the first or last one
// outside, and where x lies in it; outside that is below 0 or above 1.
func cell(nodes []float64, x float64) (int, float64) {
	i, _ := slices.BinarySearch(nodes, x)
	i = min(max(i-1, 0), len(nodes)-2)
	return i, (x - nodes[i]) / (nodes[i+1] - nodes[i])
}

// at interpolates.
func (g *Grid) at(p r3.Vec) (v [gridValues]float64, r, fall float64) {
	r = norm(p)
	i, u := cell(g.r, r)
	fall = 1
	if u > 1 {
		fall = g.r[len(g.r)-1] / r
		fall *= fall
		u = 1
	}
	j, w := cell(g.theta, math.Acos(max(-1, min(1, p.Z/r))))
	phi := math.Atan2(p.Y, p.X)
	np := len(g.phi)
	phi -= 2 * math.Pi * math.Floor((phi-g.phi[0])/(2*math.Pi))
	var k, k1 int
	var z float64
	if phi >= g.phi[np-1] { // between the last node and the first
		k, k1 = np-1, 0
		z = (phi - g.phi[np-1]) / (g.phi[0] + 2*math.Pi - g.phi[np-1])
	} else {
		k, z = cell(g.phi, phi)
		k1 = k + 1
	}
	nt := len(g.theta)
	for a, wa := range [2]float64{1 - u, u} {
		for b, wb := range [2]float64{1 - w, w} {
			row := ((i+a)*nt + j + b) * np
			for c, wc := range [2]float64{1 - z, z} {
				n := &g.node[row+k]
				if c == 1 {
					n = &g.node[row+k1]
				}
				for m := range v {
					v[m] += wa * wb * wc * float64(n[m])
				}
			}
		}
	}
	return v, r, fall
}

// B implements Field.
func (g *Grid) B(p r3.Vec) r3.Vec {
	v, r, _ := g.at(p)
	k := 1 / (r * r)
	br, bt, bp := k*v[2], k*v[3], k*v[4]
	rho := fromAxis(p)
	st, ct := rho/r, p.Z/r
	sp, cp := 0.0, 1.0
	if rho > 0 {
		sp, cp = p.Y/rho, p.X/rho
	}
	bRho := br*st + bt*ct
	return r3.Vec{X: bRho*cp - bp*sp, Y: bRho*sp + bp*cp, Z: br*ct - bt*st}
}

// plasma returns n_e [cm^-3] and the temperature [K].
func (g *Grid) plasma(p r3.Vec) (n, t float64) {
	v, _, fall := g.at(p)
	// Neither rounding nor the half cell beyond a last node leads out of the range of
	// the table of the light.
	return math.Exp(v[0]) * fall, max(g.cold, min(g.hot, v[1]))
}

// WriteGrid writes field, mean density and temperature of a corona on a grid that
// ReadGrid reads: distances [solar radii], colatitudes and longitudes [deg].
func (c *Corona) WriteGrid(path string, r, theta, phi []float64) error {
	w, err := fits.Create(path, nil)
	if err != nil {
		return err
	}
	defer w.Abort()
	for _, a := range []fits.Column{
		{Name: "R", Unit: "solRad", About: "distance from the Sun's centre", Data: r},
		{Name: "THETA", Unit: "deg", About: "colatitude", Data: theta},
		{Name: "PHI", Unit: "deg", About: "longitude", Data: phi},
	} {
		if err := w.AddTable(fits.Table{Name: a.Name, Columns: []fits.Column{a}}); err != nil {
			return err
		}
	}
	nt, np := len(theta), len(phi)
	values := make([][gridValues]float64, len(r)*nt*np)
	const deg = math.Pi / 180
	for i := range r {
		for j := range nt {
			for k := range np {
				up := spherical(theta[j]*deg, phi[k]*deg)
				p := r3.Scale(r[i], up)
				var q Point
				if c.flat == nil && c.depths == nil && len(c.active) == 0 { // no line need be followed
					q.B = c.field.B(p)
					q.Mean, q.T, _ = c.plasma(p, &mixture{share: 1})
				} else {
					q = c.At(p)
				}
				west := r3.Vec{X: -math.Sin(phi[k] * deg), Y: math.Cos(phi[k] * deg)}
				south := r3.Cross(west, up)
				values[(i*nt+j)*np+k] = [gridValues]float64{q.Mean, q.T, r3.Dot(q.B, up), r3.Dot(q.B, south), r3.Dot(q.B, west)}
			}
		}
	}
	plane := make([]float32, nt*np)
	for v, want := range gridImages {
		cube, err := w.Cube(want.name, fits.Header{{Key: "BUNIT", Value: want.unit}}, np, nt, len(r))
		if err != nil {
			return err
		}
		for i := range r {
			for n := range plane {
				plane[n] = float32(values[i*nt*np+n][v])
			}
			if err := cube.WritePlane(plane); err != nil {
				return err
			}
		}
	}
	return w.Close()
}
