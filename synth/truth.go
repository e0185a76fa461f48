package synth

import (
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/model"
	"offplane/synth/obs"
)

// Truth is what the corona really was, as maps on the image grid.
type Truth struct {
	Grid obs.Grid
	Maps obs.Maps
}

// truthMaps lists the maps in file order.
var truthMaps = []obs.Map{
	{Name: "B_SKY", Unit: "G", About: "field component in the plane of the sky, at x = 0"},
	{Name: "B_EMIS", Unit: "G", About: "field component in the plane of the sky, mean weighted by emission"},
	{Name: "B_WAVE", Unit: "G", About: "field component in the plane of the sky, mean weighted by wave power"},
	{Name: "BTOT_SKY", Unit: "G", About: "field strength at x = 0"},
	{Name: "NE_SKY", Unit: "cm-3", About: "electron density at x = 0"},
	{Name: "NE_EMIS", Unit: "cm-3", About: "electron density, mean weighted by emission"},
	{Name: "NE_KINK", Unit: "cm-3", About: "electron density that the wave feels at x = 0"},
	{Name: "SPEED_SKY", Unit: "km/s", About: "kink speed at x = 0 projected on the sky, no flow"},
	{Name: "SPEED_WAVE", Unit: "km/s", About: "1/mean(1/projected kink speed), weighted by wave power"},
	{Name: "ANGLE_SKY", Unit: "deg", About: "direction of the field on the sky at x = 0, from north"},
	{Name: "DEPTH50", Unit: "solRad", About: "half-depth that holds 50 % of the emission"},
	{Name: "DEPTH90", Unit: "solRad", About: "half-depth that holds 90 % of the emission"},
	{Name: "NEAR_SKY", About: "share of the emission within 0.1 solar radii of x = 0"},
	{Name: "DOPPLER_LOCAL", Unit: "km/s", About: "rms in-band line-of-sight wave speed at x = 0"},
	{Name: "STRUCTURE", About: "class of the field line at x = 0", Codes: []obs.Code{
		{Value: model.Closed, Name: "closed", About: "both ends on the surface"},
		{Value: model.Open, Name: "open", About: "open field line"},
		{Value: model.Sheet, Name: "sheet", About: "open, in the streamer around the current sheet"},
		{Value: model.ActiveRegion, Name: "active", About: "active region"},
	}},
}

// newTruth returns empty truth maps.
func newTruth(g obs.Grid) *Truth {
	t := &Truth{Grid: g, Maps: make(obs.Maps, len(truthMaps))}
	copy(t.Maps, truthMaps)
	for i := range t.Maps {
		m := &t.Maps[i]
		if m.Name == "STRUCTURE" {
			m.Ints = make([]int32, g.Nx*g.Ny)
			continue
		}
		m.Data = make([]float32, g.Nx*g.Ny)
		for p := range m.Data {
			m.Data[p] = float32(math.NaN())
		}
	}
	return t
}

// set fills the truth of one pixel from its ray; values in the order of truthMaps.
func (t *Truth) set(pixel int32, v []float64, structure int32) {
	for i := range v {
		t.Maps[i].Data[pixel] = float32(v[i])
	}
	t.Maps[len(v)].Ints[pixel] = structure
}

// nearPlane is the half-depth of NEAR_SKY [solar radii].
const nearPlane = 0.1

// Weights are the shares of the samples of a ray in the means: each sums to one.
type Weights struct {
	Emission []float64 // radiance of the 1074.7 nm line
	Wave     []float64 // wave power, see waveWeights
}

func (c *Scene) weights(ray []sample) Weights {
	e := make([]float64, len(ray))
	for i := range ray {
		e[i] = ray[i].j[0] * ray[i].dx
	}
	w := c.waveWeights(ray)
	normalise(e)
	normalise(w)
	return Weights{e, w}
}

func normalise(w []float64) {
	sum := 0.0
	for _, x := range w {
		sum += x
	}
	if sum == 0 {
		return
	}
	for i := range w {
		w[i] /= sum
	}
}

// waveWeights returns the weight of each sample in the wave that a pixel shows: for
// many independent cells along the ray, powers add, so that the weight per length is
// emissivity^2 times the in-band power of the line-of-sight velocity times the length
// over which the wave is coherent along the ray (derived; for a sphere of widening
// cells it gives W(Q)/W(Q+k) with Q = 2 p a - 2). That length is one cell over the
// distance that the footpoint moves per length along the ray.
func (c *Scene) waveWeights(ray []sample) []float64 {
	w := make([]float64, len(ray))
	if len(ray) == 1 {
		w[0] = 1
		return w
	}
	feet := make([][2]r3.Vec, len(ray))
	for i := range ray {
		l := &ray[i].point.Line
		for end := range l.Ends {
			feet[i][end] = l.Foot[end].Vector()
		}
	}
	var ts []train
	for i := range ray {
		s := &ray[i]
		a, b := max(i-1, 0), min(i+1, len(ray)-1)
		ends := min(ray[a].point.Line.Ends, ray[b].point.Line.Ends)
		ts = c.trains(&s.point, ts)
		power := 0.0
		for k := range ts {
			end := ts[k].end
			if end >= ends { // the class changes here
				end = 0
			}
			power += c.inBand(s, &ts[k]) * c.coherent(ray[b].x-ray[a].x, feet[a][end], feet[b][end])
		}
		w[i] = s.j[0] * s.j[0] * s.dx * power
	}
	return w
}

// coherent returns the length [solar radii] along the ray over which footpoints stay
// within one cell, if they move from a to b over dx.
func (c *Scene) coherent(dx float64, a, b r3.Vec) float64 {
	moved := angleBetween(a, b)
	if !(moved > 0) {
		return float64(c.s.Sight.Reach)
	}
	return min(c.cell*dx/moved, float64(c.s.Sight.Reach))
}

// angleBetween returns the angle [rad] between two unit vectors.
func angleBetween(a, b r3.Vec) float64 {
	d := r3.Sub(a, b)
	chord := math.Sqrt(r3.Dot(d, d))
	if chord < 0.05 {
		return chord * (1 + chord*chord/24) // to 5e-8
	}
	return 2 * math.Asin(min(chord/2, 1))
}

// truthOf returns the truth of one pixel, in the order of truthMaps, and its class.
func (c *Scene) truthOf(ray []sample) ([]float64, int32) {
	w := c.weights(ray)
	var sky *sample
	for i := range ray {
		if ray[i].x == 0 {
			sky = &ray[i]
		}
	}
	var bEmis, bWave, nEmis, slow float64
	for i := range ray {
		s := &ray[i]
		bEmis += w.Emission[i] * s.bSky
		nEmis += w.Emission[i] * s.point.N
		bWave += w.Wave[i] * s.bSky
		slow += w.Wave[i] / (s.point.Speed * s.sky)
	}
	if slow == 0 { // no wave anywhere on the ray: a mean without weights
		bWave, slow = math.NaN(), math.NaN()
	}
	depth := depths(ray, w.Emission, 0.5, 0.9)
	angle := c.angle(sky)
	p := &sky.point
	var ts []train
	local := 0.0
	for _, t := range c.trains(p, ts) {
		local += c.inBand(sky, &t)
	}
	return []float64{
		sky.bSky, bEmis, bWave, r3.Norm(p.B),
		p.N, nEmis, p.Kink,
		p.Speed * sky.sky / kms, 1 / slow / kms,
		angle,
		depth[0], depth[1], shareWithin(ray, w.Emission, nearPlane),
		math.Sqrt(local),
	}, p.Structure()
}

// shareWithin returns the share of the emission at |x| < depth; each sample stands for
// the stretch half-way to its neighbours.
func shareWithin(ray []sample, e []float64, depth float64) float64 {
	if len(ray) == 1 {
		return 1
	}
	sum := 0.0
	for i := range ray {
		lo, hi := stretch(ray, i)
		in := math.Min(hi, depth) - math.Max(lo, -depth)
		if in > 0 {
			sum += e[i] * in / (hi - lo)
		}
	}
	return sum
}

func stretch(ray []sample, i int) (lo, hi float64) {
	a, b := max(i-1, 0), min(i+1, len(ray)-1)
	lo, hi = (ray[a].x+ray[i].x)/2, (ray[i].x+ray[b].x)/2
	if a == i {
		lo = 2*ray[i].x - hi
	}
	if b == i {
		hi = 2*ray[i].x - lo
	}
	return lo, hi
}

// depths returns the half-depths [solar radii] that hold the given shares of the
// emission, in ascending order.
func depths(ray []sample, e []float64, shares ...float64) []float64 {
	out := make([]float64, len(shares))
	if len(ray) == 1 {
		return out
	}
	sky := 0
	for ray[sky].x != 0 {
		sky++
	}
	// Each sample is spread over its stretch, so that the emission within a depth grows
	// in straight pieces: walk away from the plane on both sides at once.
	type side struct {
		i, step    int
		end, slope float64
	}
	var sides [2]side
	at := func(d *side) {
		if d.i < 0 || d.i == len(ray) {
			d.end, d.slope = math.Inf(1), 0
			return
		}
		lo, hi := stretch(ray, d.i)
		d.end, d.slope = hi, e[d.i]/(hi-lo)
		if d.step < 0 {
			d.end = -lo
		}
	}
	for n, step := range [2]int{-1, 1} {
		sides[n] = side{i: sky, step: step}
		at(&sides[n])
	}
	k, within, depth := 0, 0.0, 0.0
	for k < len(shares) {
		near := &sides[0]
		if sides[1].end < near.end {
			near = &sides[1]
		}
		if math.IsInf(near.end, 1) {
			break
		}
		slope := sides[0].slope + sides[1].slope
		next := within + slope*(near.end-depth)
		for k < len(shares) && next >= shares[k] {
			out[k] = depth + (shares[k]-within)/slope
			k++
		}
		within, depth = next, near.end
		near.i += near.step
		at(near)
	}
	for ; k < len(shares); k++ { // rounding
		out[k] = depth
	}
	return out
}
