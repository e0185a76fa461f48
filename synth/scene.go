package synth

import (
	"context"
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/spatial/r3"

	"offplane/model"
	"offplane/scenarios"
	"offplane/scenarios/units"
	"offplane/synth/camera"
	"offplane/synth/filter"
	"offplane/synth/line"
	"offplane/synth/obs"
	"offplane/synth/wave"
)

// Light is what the synthesis needs to know of the spectral lines.
type Light struct {
	line.Emitter
	Rest [2]float64 // rest wavelengths in vacuum [nm]
	Disc [2]float64 // disc-centre continuum [erg cm^-2 s^-1 sr^-1 A^-1]
	Mass float64    // of the ion [g]
}

// A Scene is a corona in front of a camera, ready to be looked at along any ray. It
// is safe for concurrent use.
type Scene struct {
	Grid   obs.Grid
	Corona *model.Corona
	Driver *wave.Driver

	s       *scenarios.Scenario
	light   Light
	view    model.View
	cell    float64 // [solar radii]
	longest float64 // travel time of any train [s]
	band    bandTable
	filter  float64      // 1/e half-width [km/s], first line; the second scales
	tunings [2][]float64 // Doppler offsets [km/s] per line
	as      Assume
}

// Trains that have travelled so long that damping leaves less than faintest of their
// amplitude at the frequency oldest [Hz], far below the band of the inversion, are left
// out. Without damping a corona is refused whose waves need longer than tooLong [s]:
// the memory for the driver grows with it.
const (
	faintest = 1e-3
	oldest   = 1e-3
	tooLong  = 24 * 3600
)

// kms is one km/s in cgs.
const kms = 1e5

// NewScene builds the corona, traces its field lines and prepares the driver.
func NewScene(ctx context.Context, s *scenarios.Scenario, light Light, workers int) (*Scene, error) {
	return NewSceneAs(ctx, s, light, workers, Assume{})
}

// NewSceneAs is NewScene under assumptions.
func NewSceneAs(ctx context.Context, s *scenarios.Scenario, light Light, workers int, as Assume) (*Scene, error) {
	view := model.NewView(s.Observer.Latitude.Rad(), s.Observer.Longitude.Rad())
	grid := NewGrid(s, light.Rest[0])
	if len(Field(&grid, s)) == 0 {
		return nil, errors.New("image: the centre of no pixel lies in the field of view: a wider wedge or smaller pixels would do")
	}
	corona := as.Corona
	if corona == nil {
		var err error
		if corona, err = NewCorona(ctx, s, light, workers); err != nil {
			return nil, err
		}
	}
	c := &Scene{Grid: grid, Corona: corona, s: s, light: light, view: view, cell: s.Waves.Cell.Rsun(), as: as}
	for l := range 2 {
		toKms := units.LightSpeed / kms / light.Rest[l]
		for _, t := range s.Camera.Tunings {
			c.tunings[l] = append(c.tunings[l], float64(t)*toKms)
		}
	}
	c.filter = filter.EFolding(float64(s.Camera.Filter)) * units.LightSpeed / kms / light.Rest[0]
	// Lines traced between the nodes of the model's table may take a little longer.
	c.longest = 1.02*corona.LongestDelay(s.Waves.FarEnd, s.Waves.Inward > 0) + 60
	if xi := s.Waves.Damping; xi > 0 {
		c.longest = min(c.longest, xi*math.Log(1/faintest)/oldest)
	}
	if as.Delay > 0 {
		c.longest = min(c.longest, as.Delay)
	}
	if c.longest > tooLong {
		return nil, fmt.Errorf("waves need %.3g h along the slowest field line, more than %.3g h: a stronger field, a thinner corona or damped waves (waves.damping) would do", c.longest/3600, tooLong/3600.)
	}
	sp := s.Waves.Spectrum
	var err error
	c.Driver, err = wave.NewDriver(wave.Settings{
		Seed: s.Seed, Cell: c.cell,
		Spectrum: wave.Spectrum{Slope: sp.Slope, Floor: sp.Floor, Bump: sp.Bump, At: sp.BumpAt.Hz(), Width: sp.BumpWidth, Low: sp.Low.Hz(), High: sp.High.Hz()},
		Damping:  s.Waves.Damping,
		Cadence:  float64(s.Camera.Cadence), Frames: Frames(s),
		MaxDelay: max(c.longest, as.Delay), MaxLead: max(camera.Latest(s.Camera), as.Lead),
	})
	if err != nil {
		return nil, err
	}
	c.band = newBandTable(c.Driver, s.Inversion.Filter, c.longest)
	return c, nil
}

// NewCorona builds the corona of a scenario and traces its field lines.
func NewCorona(ctx context.Context, s *scenarios.Scenario, light Light, workers int) (*model.Corona, error) {
	outer := math.Hypot(float64(s.Image.Outer), float64(s.Sight.Reach)) + 0.1
	if s.Sight.Plane {
		outer = float64(s.Image.Outer) + 0.1
	}
	view := model.NewView(s.Observer.Latitude.Rad(), s.Observer.Longitude.Rad())
	grid := NewGrid(s, light.Rest[0])
	return model.New(ctx, s.Corona, model.Settings{
		Outer: outer, InwardFrom: float64(s.Waves.InwardFrom), Seed: s.Seed, Workers: workers, Seen: seen(s, view, grid.Step()),
	})
}

// seen returns whether the lines of sight of the field, or of what the point spread
// brings into it, pass within a margin [solar radii] of a point of the solar frame.
func seen(s *scenarios.Scenario, view model.View, step float64) func(p r3.Vec, margin float64) bool {
	m := &s.Image
	beside := float64(camera.Reach(s.Camera, s.Image.Pixel.Rad())+2) * step
	from, width := m.From.Rad(), (m.To - m.From).Rad()
	return func(p r3.Vec, margin float64) bool {
		q := view.ToSky(p)
		reach := float64(s.Sight.Reach)
		if s.Sight.Plane {
			reach = 0
		}
		margin += beside
		if math.Abs(q.X) > reach+margin {
			return false
		}
		r := math.Hypot(q.Y, q.Z)
		if r < float64(m.Inner)-margin || r > float64(m.Outer)+margin {
			return false
		}
		slack := math.Asin(min(1, margin/r))
		pa := math.Atan2(-q.Y, q.Z) - from + slack
		pa -= 2 * math.Pi * math.Floor(pa/(2*math.Pi))
		return pa <= width+2*slack
	}
}

// Frames returns the number of frames of the first line.
func Frames(s *scenarios.Scenario) int {
	return int(math.Floor(float64(s.Camera.Duration)/float64(s.Camera.Cadence) + 1e-9))
}

// NewGrid returns the image grid of a scenario: the smallest that holds the field of
// view and its margins, with the disc centre on a corner of four pixels.
func NewGrid(s *scenarios.Scenario, rest float64) obs.Grid {
	g := obs.Grid{
		Pixel: float64(s.Image.Pixel), Roll: float64(s.Image.Roll),
		Distance: s.Observer.Distance.Rsun(), Latitude: float64(s.Observer.Latitude), Longitude: float64(s.Observer.Longitude),
		Start: s.Observer.Start.Time, Duration: float64(s.Camera.Duration), Exposure: float64(s.Camera.Exposure),
		RestWavelength: rest,
	}
	// Corners of the field in the image frame, pixels from the disc centre: sampled
	// along the rim of the wedge, generously.
	step := g.Step()
	roll := g.Roll * math.Pi / 180
	lo := [2]float64{math.Inf(1), math.Inf(1)}
	hi := [2]float64{math.Inf(-1), math.Inf(-1)}
	from, to := float64(s.Image.From), float64(s.Image.To)
	for i := range 1001 {
		pa := (from + (to-from)*float64(i)/1000) * math.Pi / 180
		for _, r := range []float64{float64(s.Image.Inner), float64(s.Image.Outer)} {
			// West is -PA: y = -r sin PA, z = r cos PA, turned back by the roll.
			y, z := -r*math.Sin(pa), r*math.Cos(pa)
			u := [2]float64{(y*math.Cos(roll) + z*math.Sin(roll)) / step, (-y*math.Sin(roll) + z*math.Cos(roll)) / step}
			for k := range 2 {
				lo[k], hi[k] = min(lo[k], u[k]), max(hi[k], u[k])
			}
		}
	}
	const margin = 3
	x0, y0 := math.Floor(lo[0])-margin, math.Floor(lo[1])-margin
	g.Nx, g.Ny = int(math.Ceil(hi[0])+margin-x0), int(math.Ceil(hi[1])+margin-y0)
	g.CentreX, g.CentreY = 0.5-x0, 0.5-y0
	return g
}

// Field returns the raster indices of the pixels whose centres lie in the field of
// view, ascending.
func Field(g *obs.Grid, s *scenarios.Scenario) []int32 {
	from, to := float64(s.Image.From), float64(s.Image.To)
	var ps []int32
	for iy := range g.Ny {
		for ix := range g.Nx {
			r, pa := g.Polar(ix, iy)
			if r < float64(s.Image.Inner) || r > float64(s.Image.Outer) {
				continue
			}
			if math.Mod(math.Mod(pa-from, 360)+360, 360) <= to-from {
				ps = append(ps, int32(iy*g.Nx+ix))
			}
		}
	}
	return ps
}

// A bandTable holds the variance of a train within the inversion's band, over its
// undamped variance, against its travel time.
type bandTable struct {
	step float64
	v    []float64
}

func newBandTable(d *wave.Driver, b scenarios.Band, longest float64) bandTable {
	w := b.Width.Hz()
	if b.Means == "sigma" {
		w *= math.Sqrt2 // to the 1/e half-width
	}
	h := func(f float64) float64 { x := (f - b.Centre.Hz()) / w; return math.Exp(-x * x) }
	t := bandTable{step: 10}
	for i := range int(longest/t.step) + 3 {
		t.v = append(t.v, d.BandVariance(float64(i)*t.step, h))
	}
	return t
}

func (t *bandTable) at(tau float64) float64 {
	u := tau / t.step
	i := min(max(int(u), 0), len(t.v)-2)
	return t.v[i] + (u-float64(i))*(t.v[i+1]-t.v[i])
}

// A train is one train of waves passing a sample.
type train struct {
	colatitude, azimuth float64 // of the footpoint that addresses it [rad]
	tau                 float64 // travel time [s]
	dir                 int     // wave.Outward or wave.Inward
	factor              float64 // amplitude over the outward train's, before damping
	end                 int     // of the line: which foot it is
}

// trains lists the trains that pass the point. A train that took longer than any on
// the model's table came past a null of the field, where waves do not pass: left out.
func (c *Scene) trains(p *model.Point, dst []train) []train {
	dst = dst[:0]
	l := &p.Line
	if l.Ends == 0 {
		return dst
	}
	add := func(end, dir int, tau, factor float64) {
		if tau <= c.longest {
			f := l.Foot[end]
			dst = append(dst, train{f.Colatitude, f.Azimuth, tau, dir, factor, end})
		}
	}
	if l.Closed && !c.s.Waves.FarEnd { // one train a line: that of the nearer end
		end := 0
		if l.Tau[1] < l.Tau[0] {
			end = 1
		}
		add(end, wave.Outward, l.Tau[end], 1)
		return dst
	}
	add(0, wave.Outward, l.Tau[0], 1)
	switch {
	case l.Closed:
		add(1, wave.Outward, l.Tau[1], 1)
	case c.s.Waves.Inward > 0 && l.TauTop >= 0:
		add(0, wave.Inward, l.TauTop, math.Sqrt(c.s.Waves.Inward))
	}
	return dst
}

// amplitude returns the rms speed [km/s] of one polarisation of an undamped outward
// train where it feels the density n: WKB waves keep their energy flux, v ~ n^(-1/4) (observed:
// Doyle, Banerjee & Perez 1998, Sol. Phys. 181, 91). The reference density is one
// for all lines.
func (c *Scene) amplitude(n float64) float64 {
	a := float64(c.s.Waves.Amplitude)
	if c.s.Waves.Growth == "none" {
		return a
	}
	return a / math.Sqrt(math.Sqrt(n/float64(c.s.Waves.AtDensity)))
}

// width returns the 1/e half-width of a line [km/s] without the filter's: thermal
// motion and unresolved motions, which scale like the waves.
func (c *Scene) width(p *model.Point) float64 {
	xi := float64(c.s.Corona.Nonthermal) * kms / math.Sqrt(math.Sqrt(p.Kink/float64(c.s.Waves.AtDensity)))
	return line.Width(c.light.Mass, p.T, xi) / kms
}

// A sample is one point of a ray.
type sample struct {
	x      float64 // toward the observer [solar radii]
	dx     float64 // its share of the ray [cm]
	point  model.Point
	sky    float64    // plane-of-sky component of the unit vector along B
	bSky   float64    // plane-of-sky component of B [G]
	j      [2]float64 // emissivities [erg cm^-3 s^-1 sr^-1]
	width  float64    // of the lines [km/s]
	los    [2]float64 // Doppler velocity [km/s] of unit motion in each polarisation
	flow   float64    // steady Doppler velocity [km/s]
	smooth [2]float64 // emissivities without strands
}

// sampleAt evaluates the corona at (x, y, z) of the observer's frame.
func (c *Scene) sampleAt(s *sample, x, dx, y, z float64) {
	s.x, s.dx = x, dx
	p := &s.point
	*p = c.Corona.At(c.view.ToSun(r3.Vec{X: x, Y: y, Z: z}))
	if c.as.Projected {
		p.R = math.Hypot(y, z)
	}
	b := c.view.ToSky(p.B)
	bSky := math.Sqrt(b.Y*b.Y + b.Z*b.Z)
	s.bSky = bSky
	s.sky = bSky / math.Sqrt(b.X*b.X+b.Y*b.Y+b.Z*b.Z)
	s.j = c.emissivities(p, 1)
	s.smooth = s.j
	if p.N != p.Mean {
		s.smooth = c.emissivities(p, p.Mean/p.N)
	}
	s.width = c.width(p)
	e1, e2 := p.Frame()
	a := c.amplitude(p.Kink)
	// Doppler velocity is positive away from the observer.
	s.los = [2]float64{-a * c.view.ToSky(e1).X, -a * c.view.ToSky(e2).X}
	s.flow = -c.view.ToSky(p.Flow).X / kms
}

// angle returns the direction of the field on the sky [deg], counter-clockwise from north,
// 0..180.
func (c *Scene) angle(s *sample) float64 {
	b := c.view.ToSky(s.point.B)
	return math.Mod(math.Atan2(-b.Y, b.Z)*180/math.Pi+360, 180)
}

// emissivities returns the mean emissivities of a point's dense and thin plasma, with
// its density times a factor.
func (c *Scene) emissivities(p *model.Point, factor float64) (j [2]float64) {
	for _, part := range p.Parts {
		if part.Share > 0 {
			j1, j2 := c.light.Emissivities(part.N*factor, p.T, p.R)
			j[0] += part.Share * j1
			j[1] += part.Share * j2
		}
	}
	return j
}

// inBand returns the variance [km^2/s^2] of the Doppler velocity of one train within
// the inversion's band.
func (c *Scene) inBand(s *sample, t *train) float64 {
	a := s.los[0]*s.los[0] + s.los[1]*s.los[1]
	return a * t.factor * t.factor * c.band.at(t.tau)
}

// A darkError says that the atomic data end before the ray may.
type darkError struct {
	n, t, r float64
}

func (e *darkError) Error() string {
	return fmt.Sprintf("the line data give no emissivity at n_e = %.3g cm^-3, T = %.3g K, r = %.3g solar radii, where light still counts: change corona or sight.reach", e.n, e.t, e.r)
}
