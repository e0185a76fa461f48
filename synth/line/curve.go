package line

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/interp"
)

// A grid is an ascending list of log10 T shared by the curves of one table.
type grid []float64

// at returns the interval i that holds x and the weights of a cubic Hermite
// interpolant in it: value = w[0] y[i] + w[1] y[i+1] + w[2] d[i] + w[3] d[i+1].
// The caller has checked that x lies on the grid.
func (g grid) at(x float64) (i int, w [4]float64) {
	i, _ = slices.BinarySearch(g, x)
	i = min(max(i-1, 0), len(g)-2)
	h := g[i+1] - g[i]
	u := (x - g[i]) / h
	v := 1 - u
	return i, [4]float64{v * v * (1 + 2*u), u * u * (1 + 2*v), u * v * v * h, -u * u * v * h}
}

// low and high are the ends of the grid as temperatures [K].
func (g grid) low() float64  { return math.Pow(10, g[0]) }
func (g grid) high() float64 { return math.Pow(10, g[len(g)-1]) }

// A curve is a cubic spline through y(log10 T), not-a-knot from four points on,
// natural below. It passes through its points and has two continuous derivatives,
// so a density read from a ratio is a smooth function of the temperature.
type curve struct {
	grid *grid
	y, d []float64 // values and derivatives at the points
}

// newCurve wants at least two ascending points.
func newCurve(g *grid, y []float64) curve {
	c := curve{g, y, make([]float64, len(y))}
	var s interface {
		Fit(xs, ys []float64) error
		PredictDerivative(x float64) float64
	} = new(interp.NotAKnotCubic)
	if len(y) < 4 {
		s = new(interp.NaturalCubic)
	}
	if err := s.Fit(*g, y); err != nil {
		panic("line: spline: " + err.Error()) // a tridiagonal system that is diagonally dominant
	}
	for i, x := range *g {
		c.d[i] = s.PredictDerivative(x)
	}
	return c
}

func logs(ys []float64) []float64 {
	ls := make([]float64, len(ys))
	for i, y := range ys {
		ls[i] = math.Log(y)
	}
	return ls
}

// A cursor evaluates many curves at one temperature: the interval is looked up
// once per grid, not once per curve.
type cursor struct {
	x    float64 // log10 T
	grid *grid
	i    int
	w    [4]float64
}

func (u *cursor) at(c *curve) float64 {
	if u.grid != c.grid {
		u.grid = c.grid
		u.i, u.w = c.grid.at(u.x)
	}
	y, d := c.y[u.i:u.i+2], c.d[u.i:u.i+2]
	return u.w[0]*y[0] + u.w[1]*y[1] + u.w[2]*d[0] + u.w[3]*d[1]
}
