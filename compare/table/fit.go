package table

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// design holds the pixels that take part in a fit: the multilinear basis of each, with
// a constant number of nodes a pixel.
type design struct {
	grid    Grid
	width   int       // nodes a pixel: 2^axes
	nodes   []int32   // pixel by pixel
	weights []float64 // of the nodes
	corner  []int32   // lowest corner of the pixel's cell
	member  []int32   // ascending
	height  []float64
	y       []float64 // ln(true/inferred)
	penalty []edge
}

func (d *design) pixels() int { return len(d.y) }

// value returns the multilinear surface theta at pixel i.
func (d *design) value(theta []float64, i int) float64 {
	s := 0.0
	for k := i * d.width; k < (i+1)*d.width; k++ {
		s += float64(d.weights[k] * theta[d.nodes[k]])
	}
	return s
}

// Smoothing of surfaces, in members: how many members with pixels at a node outweigh the
// wish that the surface is straight there, and the same slope beside other nodes. Plane
// surfaces cost nothing: where there is little data a surface goes over into a plane.
const (
	straight  = 4.0
	sameSlope = 4.0
	flat      = 1e-3 // makes nodes without pixels definite
)

// An edge is one squared difference that the penalty sums: node values times factors.
type edge struct {
	nodes  []int
	factor []float64
	weight float64
}

// penalties lists the second differences along each axis and the mixed ones of each pair.
func penalties(g Grid) []edge {
	strides := make([]int, len(g))
	stride := 1
	for k := len(g) - 1; k >= 0; k-- {
		strides[k] = stride
		stride *= len(g[k].Nodes)
	}
	var es []edge
	for node := range g.Size() {
		room := func(k, n int) bool { return node/strides[k]%len(g[k].Nodes)+n < len(g[k].Nodes) }
		for k, a := range strides {
			if room(k, 1) {
				es = append(es, edge{[]int{node, node + a}, []float64{-1, 1}, flat})
			}
			if room(k, 2) {
				es = append(es, edge{[]int{node, node + a, node + 2*a}, []float64{1, -2, 1}, straight})
			}
			for l, b := range strides[:k] {
				if room(k, 1) && room(l, 1) {
					es = append(es, edge{[]int{node, node + a, node + b, node + a + b}, []float64{1, -1, -1, 1}, sameSlope})
				}
			}
		}
	}
	return es
}

// Iterations of the fit and the share of the spread below which an absolute value is
// rounded off. The corner of the absolute value only matters to sums of few pixels.
const (
	iterations = 10
	cornerSize = 0.1
)

// fit returns the node values of the surface that minimises the sum over pixels of
// w |y - surface|, each member's w adding up to its weight, plus the penalty: a median
// surface (Koenker & Bassett 1978, Econometrica 46, 33), by iterated weighted least
// squares (Hunter & Lange 2000, J. Comput. Graph. Stat. 9, 60). Pixels of weight 0 do
// not take part.
func (d *design) fit(y, w []float64) []float64 {
	n := d.grid.Size()
	theta := make([]float64, n)
	m := weightedQuantile(0.5, y, w, 0)
	for i := range theta {
		theta[i] = m
	}
	spread := 0.0
	{
		abs := make([]float64, len(y))
		for i := range y {
			abs[i] = math.Abs(y[i] - m)
		}
		spread = max(weightedQuantile(0.5, abs, w, 0), 1e-6)
	}
	a := make([]float64, n*n)
	b := make([]float64, n)
	for range iterations {
		clear(a)
		clear(b)
		for i := range y {
			if w[i] == 0 {
				continue
			}
			q := w[i] / max(math.Abs(y[i]-d.value(theta, i)), cornerSize*spread)
			d.add(a, b, i, q, y[i])
		}
		for _, e := range d.penalty {
			q := e.weight / spread
			for j, p := range e.nodes {
				for k, r := range e.nodes {
					a[p*n+r] += float64(q * e.factor[j] * e.factor[k])
				}
			}
		}
		var c mat.Cholesky
		if !c.Factorize(mat.NewSymDense(n, a)) {
			panic("table: a surface without pixels")
		}
		var x mat.VecDense
		if err := c.SolveVecTo(&x, mat.NewVecDense(n, b)); err != nil {
			if _, ok := err.(mat.Condition); !ok { // a poor condition is that of nodes without pixels
				panic("table: " + err.Error())
			}
		}
		copy(theta, x.RawVector().Data)
	}
	return theta
}

// add adds the square of pixel i with weight q to the normal equations, upper triangle.
func (d *design) add(a, b []float64, i int, q, y float64) {
	n := len(b)
	from, to := i*d.width, (i+1)*d.width
	for k := from; k < to; k++ {
		node := int(d.nodes[k])
		f := q * d.weights[k]
		b[node] += float64(f * y)
		row := a[node*n : (node+1)*n]
		for l := k; l < to; l++ { // nodes of a pixel ascend
			row[d.nodes[l]] += float64(f * d.weights[l])
		}
	}
}
