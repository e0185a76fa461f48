package line

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/scenarios/units"
)

const (
	hc     = units.Planck * units.LightSpeed                   // [erg cm]; energy of 1 cm^-1
	twoHC2 = 2 * hc * units.LightSpeed                         // [erg cm^2 s^-1]
	excite = 8.629e-6                                          // [cm^3 s^-1 K^(1/2)] h^2/((2 pi m)^(3/2) k^(1/2)), to four digits
	theta  = units.Planck * units.LightSpeed / units.Boltzmann // [K cm] hc/k
)

// Levels says how many levels are solved for.
type Levels uint8

const (
	// Ground solves for the levels of the ground configuration; cascades through
	// all others are folded into effective rates.
	Ground Levels = iota
	// All solves for every level of the data, with the rates through levels above
	// them added: slower, and the only one that gives the EUV lines.
	All
)

// Options say what to do with the data. Atom.Options returns the defaults.
type Options struct {
	// Levels to solve for. The default is Ground.
	Levels Levels
	// Helium is He/H by number, 0..1, with hydrogen and helium fully ionised:
	// n_p/n_e = n_H/n_e = 1/(1 + 2 He/H). The default is 0.10.
	Helium float64
	// Iron is A(Fe) = 12 + log10(Fe/H). The default is the first abundance of the data.
	Iron float64
	// Ionisation names a column of ion fractions. The default is the first of the data.
	Ionisation string
	// Photo multiplies the radiation of the disc in the pair. The default is 1.
	Photo float64
	// NoProtons leaves out proton collisions, NoCascades every excitation through
	// levels that are not solved for. They exist to measure what these are worth.
	NoProtons, NoCascades bool
}

// Helium is the default He/H by number. common practice, no source.
const Helium = 0.10

// Options returns the default options for these data.
func (a *Atom) Options() Options {
	return Options{Helium: Helium, Iron: a.abundances[0].value, Ionisation: a.fractions[0].name, Photo: 1}
}

// A Range is where a model or a table answers.
type Range struct {
	Density     [2]float64 // electron density [cm^-3]
	Temperature [2]float64 // [K]
	Height      [2]float64 // heliocentric distance [solar radii]
}

// A RangeError says that a value is outside the range of the data.
type RangeError struct {
	Quantity, Unit   string
	Value, Low, High float64
}

func (e *RangeError) Error() string {
	return fmt.Sprintf("%s %.6g %s is outside %.6g..%.6g %s", e.Quantity, e.Value, e.Unit, e.Low, e.High, e.Unit)
}

// check returns a *RangeError for the first value outside; NaN is outside.
func (g *Range) check(n, t, r float64) error {
	in := func(x float64, b [2]float64) bool { return x >= b[0] && x <= b[1] }
	switch {
	case !in(n, g.Density):
		return &RangeError{"electron density", "cm^-3", n, g.Density[0], g.Density[1]}
	case !in(t, g.Temperature):
		return &RangeError{"temperature", "K", t, g.Temperature[0], g.Temperature[1]}
	case !in(r, g.Height):
		return &RangeError{"heliocentric distance", "solar radii", r, g.Height[0], g.Height[1]}
	}
	return nil
}

func (g *Range) holds(n, t, r float64) bool {
	return n >= g.Density[0] && n <= g.Density[1] &&
		t >= g.Temperature[0] && t <= g.Temperature[1] &&
		r >= g.Height[0] && r <= g.Height[1]
}

// A Model computes populations and emissivities by solving statistical
// equilibrium at every call. It is immutable and safe for concurrent use; with
// Levels Ground its calls do not allocate. For millions of calls see Table.
type Model struct {
	atom  *Atom
	opt   Options
	rng   Range
	n     int       // levels solved for
	decay []float64 // n*n, spontaneous [s^-1], from*n+to

	electrons, protons []collision
	folded             []folded    // rate coefficients that are listed
	up                 []collision // from the ground configuration to levels folded away
	branch             []float64   // for up: share of its decays that end at each ground level
	ions               curve       // ln of the ion fraction
	hydrogen           float64     // n_H/n_e = n_p/n_e

	pair [2]transition // from: upper, to: lower
	lamp [2]lamp
}

// A collision is a pair of levels tied by detailed balance.
type collision struct {
	lower, upper int
	heat         float64 // excitation energy over k [K]
	weight       float64 // g_upper/g_lower
	gUpper       float64
	curve        curve // ln of the effective collision strength, or of the upward rate coefficient
}

type folded struct {
	at    int // from*n+to
	curve curve
}

// A lamp is the disc's light in one line.
type lamp struct {
	law        law
	down, up   float64 // [s^-1] stimulated emission and absorption at J = I0
	wavelength float64 // in vacuum [cm]
	decay      float64 // A [s^-1]
	photon     float64 // A h nu / 4 pi [erg s^-1 sr^-1]
}

// New prepares a model.
func New(a *Atom, opt Options) (*Model, error) {
	bad := func(name string, x, lo, hi float64) error {
		if !(x >= lo && x <= hi) {
			return fmt.Errorf("%s is %v; it lies in %v..%v", name, x, lo, hi)
		}
		return nil
	}
	for _, err := range []error{
		bad("He/H", opt.Helium, 0, 1),
		bad("A(Fe)", opt.Iron, 0, 12),
		bad("factor on the disc's radiation", opt.Photo, 0, 1e6),
	} {
		if err != nil {
			return nil, err
		}
	}
	column := slices.IndexFunc(a.fractions, func(f fraction) bool { return f.name == opt.Ionisation })
	if column < 0 {
		return nil, fmt.Errorf("ionisation %q is none of %s", opt.Ionisation, strings.Join(a.Ionisations(), ", "))
	}
	if opt.Levels > All {
		panic("line: unknown Levels")
	}
	m := &Model{atom: a, opt: opt, n: a.ground, pair: a.pair, hydrogen: 1 / (1 + 2*opt.Helium)}
	if opt.Levels == All {
		m.n = len(a.levels)
	}
	// Densities: below 1e4 nothing new happens; the folded set holds to 1e10, and
	// a level without an E1 decay needs the lines it lacks above 1e11.
	m.rng = Range{Density: [2]float64{1e4, 1e10}, Temperature: [2]float64{0, math.Inf(1)}, Height: [2]float64{1, math.Inf(1)}}
	if opt.Levels == All {
		m.rng.Density[1] = 1e11
	}
	if err := m.gather(column); err != nil {
		return nil, err
	}
	m.light()
	t := m.rng.Temperature
	if !(t[0] < t[1]) {
		return nil, fmt.Errorf("the temperature grids of the data have no range in common")
	}
	if i := m.stuck(math.Sqrt(t[0]) * math.Sqrt(t[1])); i >= 0 {
		return nil, fmt.Errorf("level %d (%s) has no way down: there is no equilibrium", i+1, a.levels[i].name)
	}
	return m, nil
}

// stuck returns the first level that cannot reach the ground level at temperature
// t by any chain of decays and collisions, or -1.
func (m *Model) stuck(t float64) int {
	c := make([]float64, m.n*m.n)
	m.coefficients(t, c)
	reaches := make([]bool, m.n)
	reaches[0] = true
	for again := true; again; {
		again = false
		for i := range m.n {
			for j := range m.n {
				if !reaches[i] && reaches[j] && c[i*m.n+j]+m.decay[i*m.n+j] > 0 {
					reaches[i], again = true, true
				}
			}
		}
	}
	return slices.Index(reaches, false)
}

// gather turns tables into curves of what is solved for.
func (m *Model) gather(column int) error {
	a, n := m.atom, m.n
	use := func(t table, ys []float64) curve {
		m.rng.Temperature[0] = max(m.rng.Temperature[0], t.grid.low())
		m.rng.Temperature[1] = min(m.rng.Temperature[1], t.grid.high())
		return newCurve(t.grid, ys)
	}
	between := func(tr transition, t table) collision {
		l, u := a.levels[tr.from], a.levels[tr.to]
		return collision{tr.from, tr.to, theta * (u.energy - l.energy), u.g / l.g, u.g, use(t, logs(t.values))}
	}
	m.decay = make([]float64, n*n)
	for _, tr := range sorted(a.decays) {
		if tr.from < n && tr.to < n {
			m.decay[tr.from*n+tr.to] = a.decays[tr]
		}
	}
	cascades := m.opt.Levels == Ground && !m.opt.NoCascades
	fold := cascades && a.cascades == nil
	for _, tr := range sorted(a.strengths) {
		switch {
		case tr.from < n && tr.to < n:
			m.electrons = append(m.electrons, between(tr, a.strengths[tr]))
		case fold && tr.from < n:
			m.up = append(m.up, between(tr, a.strengths[tr]))
		}
	}
	if !m.opt.NoProtons {
		for _, tr := range sorted(a.protons) {
			m.protons = append(m.protons, between(tr, a.protons[tr]))
		}
	}
	listed := a.cascades
	if m.opt.Levels == All || fold {
		listed = a.higher
	}
	if !m.opt.NoCascades {
		for _, tr := range sorted(listed) {
			t := listed[tr]
			m.folded = append(m.folded, folded{tr.from*n + tr.to, use(t, logs(t.values))})
		}
	}
	if fold {
		if err := m.fold(); err != nil {
			return err
		}
	}
	f := a.fractions[column]
	ln := make([]float64, len(f.values))
	for i, x := range f.values {
		ln[i] = x * math.Ln10
	}
	m.ions = use(f.table, ln)
	return nil
}

// fold works out where the decays of each level above the ground configuration
// end. Collisions of those levels are left out: their decays are faster by ten
// orders of magnitude.
func (m *Model) fold() error {
	a, g := m.atom, m.n
	all := len(a.levels)
	share := make([]float64, all*g)
	done := make([]bool, all)
	for i := range g {
		share[i*g+i], done[i] = 1, true
	}
	// From low to high energy, so that every decay ends at a level already done.
	order := make([]int, 0, all)
	for i := g; i < all; i++ {
		order = append(order, i)
	}
	slices.SortStableFunc(order, func(i, j int) int {
		if a.levels[i].energy < a.levels[j].energy {
			return -1
		}
		return 1
	})
	decays := sorted(a.decays)
	for _, u := range order {
		total := 0.0
		for _, tr := range decays {
			if tr.from == u && done[tr.to] {
				total += a.decays[tr]
				for j := range g {
					share[u*g+j] += a.decays[tr] * share[tr.to*g+j]
				}
			}
		}
		if total == 0 {
			return fmt.Errorf("level %d (%s) does not decay: its cascades cannot be folded", u+1, a.levels[u].name)
		}
		for j := range g {
			share[u*g+j] /= total
		}
		done[u] = true
	}
	for _, c := range m.up {
		m.branch = append(m.branch, share[c.upper*g:c.upper*g+g]...)
	}
	return nil
}

// light prepares the pair. Only the pair is pumped by the disc: the other lines
// within the ground configuration lie in the visible and ultraviolet, where the
// photosphere has far fewer photons per mode (0.01 at 5388 A) or the levels
// hardly any population.
func (m *Model) light() {
	a := m.atom
	for i, tr := range m.pair {
		u, l := a.levels[tr.from], a.levels[tr.to]
		λ := 1 / (u.energy - l.energy)
		A := a.decays[tr]
		// Einstein's relations for an isotropic mean intensity, whatever the multipole.
		modes := m.opt.Photo * occupation(a.discCentre[tr], λ)
		m.lamp[i] = lamp{
			law:        a.darkening(Air(λ * 1e7)),
			down:       A * modes,
			up:         A * modes * u.g / l.g,
			wavelength: λ,
			decay:      A,
			photon:     A * hc / λ / (4 * math.Pi),
		}
	}
}

// coefficients fills c (n*n) with the rate coefficients at temperature t per
// electron [cm^3 s^-1], protons included.
func (m *Model) coefficients(t float64, c []float64) {
	n := m.n
	clear(c)
	at := cursor{x: math.Log10(t)}
	root := excite / math.Sqrt(t)
	for i := range m.electrons {
		e := &m.electrons[i]
		down := root * math.Exp(at.at(&e.curve)) / e.gUpper
		c[e.upper*n+e.lower] += down
		c[e.lower*n+e.upper] += down * e.weight * math.Exp(-e.heat/t)
	}
	for i := range m.protons {
		p := &m.protons[i]
		up := m.hydrogen * math.Exp(at.at(&p.curve))
		c[p.lower*n+p.upper] += up
		c[p.upper*n+p.lower] += up / p.weight * math.Exp(p.heat/t)
	}
	for i := range m.folded {
		c[m.folded[i].at] += math.Exp(at.at(&m.folded[i].curve))
	}
	for i := range m.up {
		e := &m.up[i]
		up := root * math.Exp(at.at(&e.curve)-e.heat/t) * e.weight / e.gUpper
		row := c[e.lower*n : e.lower*n+n]
		for j, b := range m.branch[i*n : i*n+n] {
			row[j] += up * b
		}
	}
}

// solve returns the populations for the rate coefficients c at density n and mean
// intensity J/I0 of the pair; work is n*n.
func (m *Model) solve(n float64, c []float64, j [2]float64, work, p []float64) {
	for i, a := range m.decay {
		work[i] = n*c[i] + a
	}
	for i := range m.pair {
		tr, l := m.pair[i], &m.lamp[i]
		work[tr.from*m.n+tr.to] += l.down * j[i]
		work[tr.to*m.n+tr.from] += l.up * j[i]
	}
	equilibrium(m.n, work, p)
}

// few is the largest number of levels solved for without allocation.
const few = 6

func (m *Model) populations(n, t, r float64, p []float64) {
	j := m.MeanIntensity(r)
	if m.n <= few {
		var c, w [few * few]float64
		m.coefficients(t, c[:m.n*m.n])
		m.solve(n, c[:m.n*m.n], j, w[:m.n*m.n], p)
		return
	}
	c := make([]float64, 2*m.n*m.n)
	m.coefficients(t, c[:m.n*m.n])
	m.solve(n, c[:m.n*m.n], j, c[m.n*m.n:], p)
}

// Populations returns the share of the ions in each level, in the order of the
// data file, at electron density n [cm^-3], temperature t [K] and heliocentric
// distance r [solar radii]. The error is a *RangeError.
func (m *Model) Populations(n, t, r float64) ([]float64, error) {
	if err := m.rng.check(n, t, r); err != nil {
		return nil, err
	}
	p := make([]float64, m.n)
	m.populations(n, t, r, p)
	return p, nil
}

// Emissivities implements Emitter: j = n_H A(Fe) f N_u A_ul h nu / 4 pi.
func (m *Model) Emissivities(n, t, r float64) (j1, j2 float64) {
	if !m.rng.holds(n, t, r) {
		return math.NaN(), math.NaN()
	}
	var few [few]float64
	p := few[:]
	if m.n > len(few) {
		p = make([]float64, m.n)
	}
	p = p[:m.n]
	m.populations(n, t, r, p)
	ions := n * m.ionsPerElectron(t)
	return ions * m.PerIon(0, p), ions * m.PerIon(1, p)
}

// PerIon returns the power of line k (0: 1074.7 nm, 1: 1079.8 nm) per ion and
// steradian [erg s^-1 sr^-1] for populations p.
func (m *Model) PerIon(k int, p []float64) float64 {
	return p[m.pair[k].from] * m.lamp[k].photon
}

// ionsPerElectron is n_ion/n_e.
func (m *Model) ionsPerElectron(t float64) float64 {
	return m.hydrogen * math.Pow(10, m.opt.Iron-12) * m.IonFraction(t)
}

// IonFraction returns the share of iron in this ion at temperature t [K], NaN
// outside the data.
func (m *Model) IonFraction(t float64) float64 {
	if !(t >= m.rng.Temperature[0] && t <= m.rng.Temperature[1]) {
		return math.NaN()
	}
	at := cursor{x: math.Log10(t)}
	return math.Exp(at.at(&m.ions))
}

// Ratio returns the ratio of energies j(1079.8)/j(1074.7). The error is a *RangeError.
func (m *Model) Ratio(n, t, r float64) (float64, error) {
	if err := m.rng.check(n, t, r); err != nil {
		return math.NaN(), err
	}
	j1, j2 := m.Emissivities(n, t, r)
	return j2 / j1, nil
}

// Range returns where the model answers.
func (m *Model) Range() Range { return m.rng }

// Atom returns the data of the model.
func (m *Model) Atom() *Atom { return m.atom }

// Options returns the options of the model.
func (m *Model) Options() Options { return m.opt }

// Mass returns the mass of the ion [g].
func (m *Model) Mass() float64 { return m.atom.mass * units.AtomicMass }

// RestWavelengths returns the vacuum wavelengths [nm] of the two lines.
func (m *Model) RestWavelengths() [2]float64 {
	return [2]float64{m.lamp[0].wavelength * 1e7, m.lamp[1].wavelength * 1e7}
}

// AirWavelengths returns the wavelengths in standard air [nm] of the two lines.
func (m *Model) AirWavelengths() [2]float64 {
	v := m.RestWavelengths()
	return [2]float64{Air(v[0]), Air(v[1])}
}

// DiscCentre returns the radiance of the continuum at disc centre
// [erg cm^-2 s^-1 sr^-1 A^-1] at the two lines, without the factor Photo.
func (m *Model) DiscCentre() [2]float64 {
	return [2]float64{m.atom.discCentre[m.pair[0]], m.atom.discCentre[m.pair[1]]}
}

// MeanIntensity returns J/I0 of the two lines at r [solar radii]: the mean
// intensity of the limb-darkened disc over the intensity at its centre. It is NaN
// for r < 1.
func (m *Model) MeanIntensity(r float64) [2]float64 {
	return [2]float64{m.lamp[0].law.meanIntensity(r), m.lamp[1].law.meanIntensity(r)}
}
