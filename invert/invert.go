package invert

import (
	"context"
	"errors"
	"fmt"
	"math"
	"sync"

	"offplane/scenarios/units"
	"offplane/synth/line"
	"offplane/synth/obs"
	"offplane/synth/parallel"
)

// KZero says what the separation does with waves of zero wavenumber, which belong
// to neither direction. On short tracks it decides the sign of the speed's bias.
type KZero int

// Weights 1, 1/2 and 0 in each direction.
const (
	Kept KZero = iota
	Halved
	Dropped
)

func (k KZero) weight() float64 { return [...]float64{Kept: 1, Halved: 0.5, Dropped: 0}[k] }

// Options is the observer's recipe. Default returns the defaults.
type Options struct {
	Centre       float64 // of the Gaussian band-pass [Hz]. The default is 3.5e-3.
	Width        float64 // of the band-pass amplitude [Hz]. The default is 1.5e-3.
	WidthIsSigma bool    // Width is the standard deviation; otherwise the 1/e half-width. The default is false.
	Background   bool    // fit profiles by least squares with a constant background, which needs four tunings. The default is false.
	Taper        float64 // share of the series under the cosine bell at each end, 0 to 0.5. The default is 0.1.
	Box          int     // diameter of the round window of the coherence island [pixels], odd, 5 or more. The default is 21.
	Adaptive     bool    // an island that fills its window gets larger ones, up to 3 boxes. The default is false.
	Coherence    float64 // threshold of the island, between 0 and 1. The default is 0.5.
	Track        int     // most points of a track, one pixel apart, odd, 5 or more. The default is 31.
	Separation   bool    // the estimator lag splits outward and inward waves first. The default is true.
	KZero        KZero   // weight of zero wavenumber in the separation. The default is Halved.
	Padding      int     // length of the separation's transform over the track's, 1 or more. The default is 1.
	Temperature  float64 // assumed in the density [K]. The default is 1.6e6.
	Mu           float64 // rho / (m_p n_e) assumed in the field. The default is 1.167, for He/H = 0.1.

	// Estimators of the phase speed, all on the same tracks: Lag, Unsplit, Pair. The
	// first fills SPEED, SPEED_ERR, B, B_ERR; the others fill maps of the same names with
	// their own at the end, such as SPEED_PAIR. The default, and what none stands for, is
	// Lag alone.
	Estimators []string

	// Directions, if not nil, are taken in place of the islands' [deg, like ANGLE], one a
	// pixel of the grid, NaN for none: other data on the tracks of these, and errors for tracks that are known. The default is nil.
	Directions []float32
}

// Default returns the customary recipe (common practice; see the fields).
func Default() Options {
	return Options{
		Centre: 3.5e-3, Width: 1.5e-3, Taper: 0.1,
		Box: 21, Coherence: 0.5, Track: 31,
		Separation: true, KZero: Halved, Padding: 1,
		Temperature: 1.6e6, Mu: 1.167,
		Estimators: []string{Lag},
	}
}

func (o *Options) check() error {
	bad := func(name, want string, got any) error {
		return fmt.Errorf("inversion: %s is %v: want %s", name, got, want)
	}
	switch {
	case !(o.Centre > 0):
		return bad("centre", "more than 0 Hz", o.Centre)
	case !(o.Width > 0):
		return bad("width", "more than 0 Hz", o.Width)
	case !(o.Taper >= 0 && o.Taper <= 0.5):
		return bad("taper", "a number from 0 to 0.5", o.Taper)
	case o.Box < 5 || o.Box%2 == 0:
		return bad("box", "an odd number, 5 or more", o.Box)
	case !(o.Coherence > 0 && o.Coherence < 1):
		return bad("coherence", "a number between 0 and 1", o.Coherence)
	case o.Track < leastLags || o.Track%2 == 0:
		return bad("track", "an odd number, 5 or more", o.Track)
	case o.KZero < Kept || o.KZero > Dropped:
		return bad("k_zero", "kept, halved or dropped", int(o.KZero))
	case o.Padding < 1:
		return bad("padding", "1 or more", o.Padding)
	case !(o.Temperature > 0):
		return bad("temperature", "more than 0 K", o.Temperature)
	case !(o.Mu > 0):
		return bad("mu", "more than 0", o.Mu)
	}
	return o.checkEstimators()
}

// A Result is what the inversion makes of an observation.
type Result struct {
	// Maps are on the observation's grid, NaN where there is no value: PEAK [unit of
	// the frames], WIDTH, DOPPLER_RMS [km/s], RATIO, NE, NE_ERR [cm^-3], ANGLE,
	// ANGLE_ERR [deg], COHERENCE, SPEED, SPEED_ERR, SPEED_IN [km/s], TRACK, B, B_ERR
	// [G] and FLAG, whose bits FlagCodes explains. NE_ERR and with it B_ERR need
	// the log to know the electrons per radiance of both lines. After them come the
	// maps ISLAND and ELONGATION, those of further estimators, and INWARD of the pair fit.
	Maps obs.Maps
	// Series holds the band-passed Doppler series [km/s] that the tracker used, one
	// per pixel of the field, one "tuning". NaN where the series was bad.
	Series *obs.Cube
	// Cadence is the time between the values of a series [s]. Frames that are not evenly
	// spaced are put on even times, so that a series may have more values than the
	// observation has frames.
	Cadence float64
}

// The maps of a result, in file order, and their indices.
const (
	mapPeak = iota
	mapWidth
	mapDopplerRMS
	mapRatio
	mapDensity
	mapDensityErr
	mapAngle
	mapAngleErr
	mapCoherence
	mapSpeed
	mapSpeedErr
	mapSpeedIn
	mapTrack
	mapField
	mapFieldErr
	mapFlag
	mapIsland
	mapElongation
)

func mapsOf(g *obs.Grid, unit string, estimators []string) (obs.Maps, []estimatorMaps) {
	ms := obs.Maps{
		mapPeak:       {Name: "PEAK", Unit: unit, About: "peak intensity of the first line through the filter"},
		mapWidth:      {Name: "WIDTH", Unit: "km/s", About: "1/e half-width of the first line, filter removed"},
		mapDopplerRMS: {Name: "DOPPLER_RMS", Unit: "km/s", About: "rms of the band-passed Doppler shift, noise variance removed"},
		mapRatio:      {Name: "RATIO", About: "line energy, second line over first"},
		mapDensity:    {Name: "NE", Unit: "cm-3", About: "electron density from the line ratio"},
		mapDensityErr: {Name: "NE_ERR", Unit: "cm-3", About: "photon-noise error of NE"},
		mapAngle:      {Name: "ANGLE", Unit: "deg", About: "wave direction, counter-clockwise from north, 0 to 180"},
		mapAngleErr:   {Name: "ANGLE_ERR", Unit: "deg", About: "error of ANGLE"},
		mapCoherence:  {Name: "COHERENCE", About: "mean in-band coherence with the adjacent pixels"},
		mapSpeed:      {Name: "SPEED", Unit: "km/s", About: "phase speed on the sky, outward"},
		mapSpeedErr:   {Name: "SPEED_ERR", Unit: "km/s", About: "error of SPEED, without the method's bias"},
		mapSpeedIn:    {Name: "SPEED_IN", Unit: "km/s", About: "phase speed on the sky of the inward waves"},
		mapTrack:      {Name: "TRACK", About: "track length over the wavelength at the band centre"},
		mapField:      {Name: "B", Unit: "G", About: "magnetic field on the sky, speed sqrt(4 pi rho)"},
		mapFieldErr:   {Name: "B_ERR", Unit: "G", About: "error of B, without the method's bias"},
		mapFlag:       {Name: "FLAG", About: "why a pixel has no field, and cautions", Codes: FlagCodes()},
		mapIsland:     {Name: "ISLAND", About: "pixels of the coherence island"},
		mapElongation: {Name: "ELONGATION", About: "extent of the island along its axis over that across"},
	}
	es := addEstimators(&ms, estimators)
	n := g.Nx * g.Ny
	for i := range ms {
		if i == mapFlag {
			ms[i].Ints = make([]int32, n)
			for j := range ms[i].Ints {
				ms[i].Ints[j] = FlagOutside
			}
			continue
		}
		ms[i].Data = make([]float32, n)
		for j := range ms[i].Data {
			ms[i].Data[j] = float32(math.NaN())
		}
	}
	return ms, es
}

// A field is the state that the steps share. Each step writes only the entries of
// its own pixels.
type field struct {
	opt    *Options
	grid   *obs.Grid
	pixels []int32
	index  []int32 // raster to pixels; -1 outside
	band   *band
	spec   []float32    // band-passed spectra, band.row numbers a pixel, of unit norm
	norm   []float32    // their norms; 0: no series
	rest   []float32    // power of the spectra without each of angleParts
	axis   [][2]float32 // cos and sin of twice the axis' angle in the image; zeros: none
	flag   []int32
}

func (f *field) at(p int) (ix, iy int) {
	i := int(f.pixels[p])
	return i % f.grid.Nx, i / f.grid.Nx
}

// find returns the field pixel at (ix, iy), or -1.
func (f *field) find(ix, iy int) int {
	if ix < 0 || iy < 0 || ix >= f.grid.Nx || iy >= f.grid.Ny {
		return -1
	}
	return int(f.index[iy*f.grid.Nx+ix])
}

// chunk is the number of pixels a worker takes at a time.
const chunk = 64

// Invert turns an observation into maps, with emitter e for the density. It
// needs the frames of the first line; without a mean profile of the second, or a
// user's own map of density or ratio, there is no density and no field. Frames with a single "tuning" are taken for a
// Doppler cube [km/s]. Workers < 1 means every core; the result does not depend
// on their number. Progress, if not nil, is called now and then, one call at a
// time.
//
// The density is that of the ratio of line energies, because it is exact whatever
// the widths of the lines are (line-centre intensities suffer less from scattered
// light but need equal widths); it is taken at the pixel's projected distance
// from the Sun.
//
// With separation SPEED of Lag is the speed of the outward waves and SPEED_IN that of
// the inward ones, where they have twice the power that outward waves leak into them,
// noise taken off both; without it SPEED is the speed of whatever waves dominate the lags
// and SPEED_IN is empty. A track that gains less than a fifth of its length in
// distance from the Sun has no outward side: SPEED is then that of the stronger
// waves. Pair has one speed for both.
func Invert(ctx context.Context, o *obs.Observation, e line.Emitter, opt Options, workers int, progress func(done, total int)) (*Result, error) {
	v, err := Begin(o, e, opt)
	if err != nil {
		return nil, err
	}
	if progress == nil {
		progress = func(int, int) {}
	}
	n := len(o.Pixels)
	if err := v.take(ctx, o, workers, func(done, total int) { progress(done, total+stepsLeft*n) }); err != nil {
		return nil, err
	}
	return v.Finish(ctx, workers, func(done, total int) { progress(n+done, n+total) })
}

// newRun checks an observation and a recipe and prepares their inversion.
func newRun(o *obs.Observation, e line.Emitter, opt Options) (*run, error) {
	if err := opt.check(); err != nil {
		return nil, err
	}
	cube := o.Frames[0]
	if cube == nil {
		return nil, errors.New("observation has no frames of line 1: it has to be made with frames")
	}
	np := len(o.Pixels)
	if cube.Pixels != np {
		return nil, fmt.Errorf("frames of line 1 hold %d pixels, the field has %d", cube.Pixels, np)
	}
	es := o.LineExposures(1)
	if len(es) != cube.Frames {
		return nil, fmt.Errorf("log of line 1 has %d exposures for %d frames", len(es), cube.Frames)
	}
	when, err := newTiming(es)
	if err != nil {
		return nil, err
	}
	b, err := newBand(&opt, when.frames, when.cadence)
	if err != nil {
		return nil, err
	}
	if d := opt.Directions; d != nil && len(d) != o.Grid.Nx*o.Grid.Ny {
		return nil, fmt.Errorf("inversion: %d directions for a grid of %d x %d", len(d), o.Grid.Nx, o.Grid.Ny)
	}
	var means [2]*means
	for i := range means {
		if means[i], err = newMeans(o, i, np, opt.Background); err != nil {
			return nil, err
		}
	}
	if means[0] == nil && cube.Tunings != 1 {
		return nil, errors.New("observation has no mean profile of line 1")
	}
	if means[0] != nil && cube.Tunings != 1 && cube.Tunings != len(means[0].x) {
		return nil, fmt.Errorf("frames of line 1 have %d tunings, the table %d", cube.Tunings, len(means[0].x))
	}

	f := &field{
		opt: &opt, grid: &o.Grid, pixels: o.Pixels, index: make([]int32, o.Grid.Nx*o.Grid.Ny), band: b,
		spec: make([]float32, np*b.row), norm: make([]float32, np), axis: make([][2]float32, np), flag: make([]int32, np),
		rest: make([]float32, np*angleParts),
	}
	for i := range f.index {
		f.index[i] = -1
	}
	for p, i := range o.Pixels {
		if int(i) >= len(f.index) || i < 0 || (p > 0 && i <= o.Pixels[p-1]) {
			return nil, fmt.Errorf("field pixel %d has raster index %d: indices have to ascend within %d x %d", p, i, o.Grid.Nx, o.Grid.Ny)
		}
		f.index[i] = int32(p)
	}
	if len(opt.Estimators) == 0 {
		opt.Estimators = []string{Lag}
	}
	maps, estimators := mapsOf(&o.Grid, o.Unit, opt.Estimators)
	r := &Result{Maps: maps, Series: obs.NewCube(np, 1, when.frames), Cadence: when.cadence}
	run := &run{estimatorMaps: estimators, field: f, cube: cube, timing: when, means: means, result: r, variance: make([]float64, np), ratio: make([][2]float64, np), spread: make([][2]float32, np), dft: newDFT(b)}
	run.turns = make([][2]float32, np)
	run.swung = [2][][2]float32{make([][2]float32, np), make([][2]float32, np)}
	run.moved = make([]float32, np*len(estimators))

	for i, m := range [2][]float32{o.Density, o.Ratio} {
		if m != nil && len(m) != np {
			return nil, fmt.Errorf("%s map holds %d pixels, the field has %d", [2]string{"density", "ratio"}[i], len(m), np)
		}
	}
	run.own.density, run.own.ratio = o.Density, o.Ratio
	if means[1] != nil || o.Ratio != nil {
		if run.inverter, err = newInverter(e, opt.Temperature, f); err != nil {
			return nil, err
		}
	}

	return run, nil
}

// steps runs steps one after the other over the field: spectrum, then, when the trend is
// removed, normalise and the others.
func (r *run) steps(ctx context.Context, workers int, progress func(done, total int), steps ...func(w *worker, p int)) error {
	np := len(r.pixels)
	workers = r.hire(workers)
	var mu sync.Mutex
	done, total := 0, len(steps)*np
	for _, step := range steps {
		err := parallel.For(ctx, (np+chunk-1)/chunk, workers, func(w, c int) error {
			from, to := c*chunk, min((c+1)*chunk, np)
			for p := from; p < to; p++ {
				step(r.scratch[w], p)
			}
			if progress != nil {
				mu.Lock()
				done += to - from
				progress(done, total)
				mu.Unlock()
			}
			return nil
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// hire makes sure that each worker has its scratch, and returns their number.
func (r *run) hire(workers int) int {
	workers = parallel.Workers(workers)
	for len(r.scratch) < workers {
		r.scratch = append(r.scratch, r.newWorker())
	}
	return workers
}

// finish copies the flags into their map.
func (r *run) finish() {
	flags := r.result.Maps[mapFlag].Ints
	for p, i := range r.pixels {
		flags[i] = r.flag[p]
	}
}

// means is one line's mean profiles and their noise.
type means struct {
	*gaussian
	fitter *fitter // nil without background
	noise  photonNoise
	data   [][]float32
}

// newMeans returns nil if the observation has no mean profile of line i+1.
func newMeans(o *obs.Observation, i, pixels int, background bool) (*means, error) {
	data := o.Mean[i]
	if len(data) == 0 {
		return nil, nil
	}
	ts := o.LineTunings(i + 1)
	if len(data) != len(ts) {
		return nil, fmt.Errorf("mean of line %d has %d tunings, the table %d", i+1, len(data), len(ts))
	}
	for k := range data {
		if len(data[k]) != pixels {
			return nil, fmt.Errorf("mean of line %d holds %d pixels, the field has %d", i+1, len(data[k]), pixels)
		}
	}
	g, err := newGaussian(ts)
	if err != nil {
		return nil, err
	}
	m := &means{gaussian: g, noise: newPhotonNoise(o.LineExposures(i + 1)), data: data}
	if background {
		m.fitter, err = newFitter(g, ts)
	}
	return m, err
}

// A run is one inversion under way.
type run struct {
	*field
	cube          *obs.Cube
	timing        timing
	own           struct{ density, ratio []float32 }
	means         [2]*means
	inverter      *line.Inverter // nil without a second line
	result        *Result
	dft           *dft            // nil for long series
	spread        [][2]float32    // variance of the axis, resampled and formal [rad^2]; zeros: not known
	turns         [][2]float32    // cos and sin of twice the error of the axis; zeros: not known
	swung         [2][][2]float32 // axes turned by that error, both ways
	moved         []float32       // squared relative error of each estimator's speed that the track's makes, on a lattice; NaN: not known
	variance      []float64       // white-noise variance of the Doppler series [(km/s)^2]; NaN: not known
	ratio         [][2]float64    // of the lines and its variance in the logarithm; NaN: not known
	estimatorMaps []estimatorMaps
	scratch       []*worker
}

// A worker is one goroutine's scratch.
type worker struct {
	transform  *transformer
	islands    *islander
	track      tracker
	lags       *lagger
	pairs      *pairer // nil if nobody asks for it
	estimators []estimator
	noise      float64 // share in the band-passed power of the pixel being measured
	I, s2      [2][]float64
	fitters    [2]*fitter // nil without background
	fitted     [2]fitted
	weight     [2][]float64
	usable     []float64
	frame      []float64
	swayed     [3][]swayed // on tracks turned either way and the track itself, by estimators
	v          []float64   // a series of frames that are not evenly spaced
	bad        []bool
}

func (r *run) newWorker() *worker {
	step := r.grid.Step() * units.SolarRadius / 1e5
	w := &worker{
		transform: newTransformer(r.band, r.dft),
		islands:   newIslander(r.field),
		track:     tracker{field: r.field},
		lags:      newLagger(r.band, r.opt, r.opt.Track, step, 1/(lagSteps*r.opt.Centre)),
		frame:     make([]float64, r.cube.Tunings),
		usable:    make([]float64, r.cube.Tunings),
	}
	if r.timing.from != nil {
		w.v, w.bad = make([]float64, r.cube.Frames), make([]bool, r.cube.Frames)
	}
	for k := range w.swayed {
		w.swayed[k] = make([]swayed, len(r.opt.Estimators))
	}
	for _, name := range r.opt.Estimators {
		w.estimators = append(w.estimators, newEstimator(name, r.opt))
		if name == Pair {
			w.pairs = newPairer(r.band, r.opt.Track, step)
		}
	}
	for i, m := range r.means {
		if m != nil {
			w.I[i], w.s2[i], w.weight[i] = make([]float64, len(m.x)), make([]float64, len(m.x)), make([]float64, len(m.x))
			if m.fitter != nil {
				f := *m.fitter // holds scratch
				w.fitters[i] = &f
			}
		}
	}
	return w
}

func (r *run) set(m, p int, v float64) { r.result.Maps[m].Data[r.pixels[p]] = float32(v) }

// profile reads the mean profile of line i+1 of a pixel and leaves intensities and
// the variances of one frame in the worker, and of a fit with background its result.
func (r *run) profile(w *worker, i, p int) reading {
	m := r.means[i]
	if m == nil {
		return reading{}
	}
	for k := range w.I[i] {
		w.I[i][k] = float64(m.data[k][p])
	}
	m.noise.variances(w.I[i], w.s2[i])
	f := w.fitters[i]
	if f == nil {
		return m.reading(m.fit(w.I[i]), w.I[i], w.s2[i])
	}
	for k, s2 := range w.s2[i] {
		w.weight[i][k] = 1
		if s2 > 0 && m.noise.known {
			w.weight[i][k] = 1 / s2
		}
	}
	w.fitted[i] = f.fit(f.start(w.I[i]), w.I[i], w.weight[i])
	return f.reading(w.fitted[i])
}

// spectrum: mean profiles, Doppler series, band-passed spectrum.
func (r *run) spectrum(w *worker, p int) {
	first, second := r.profile(w, 0, p), r.profile(w, 1, p)
	r.variance[p] = math.NaN()
	if first.ok {
		r.set(mapPeak, p, first.peak)
		if first.narrow {
			r.flag[p] |= FlagNarrow
		} else {
			r.set(mapWidth, p, first.width)
		}
		if r.means[0].noise.known {
			r.variance[p] = first.shiftVar
		}
	} else if r.means[0] != nil { // a Doppler cube has no profile
		r.flag[p] |= FlagNoLine
	}
	r.divide(p, first, second)

	t := w.transform
	bad := r.series(w, p)
	if 4*bad > t.frames {
		r.flag[p] |= FlagBadSeries
		return
	}
	if bad > 0 {
		r.flag[p] |= FlagRepaired
	}
	row := r.spec[p*r.band.row : (p+1)*r.band.row]
	noise := t.forward(row, math.IsNaN(r.variance[p]))
	if !math.IsNaN(noise) {
		r.variance[p] = noise
	}
	r.norm[p] = norm(row)
}

// divide: ratio of the lines of a pixel, a user's own maps before the profiles.
func (r *run) divide(p int, first, second reading) {
	ratio, variance := math.NaN(), math.NaN()
	r.ratio[p] = [2]float64{ratio, variance}
	switch {
	case r.own.density != nil:
		if n := float64(r.own.density[p]); n > 0 && !math.IsInf(n, 1) {
			r.set(mapDensity, p, n)
		} else {
			r.flag[p] |= FlagDensity
		}
		return
	case r.own.ratio != nil:
		ratio = float64(r.own.ratio[p])
	case first.ok && second.ok:
		ratio = second.energy / first.energy
		if r.means[0].noise.known && r.means[1].noise.known {
			variance = first.energyVar/float64(r.present(p)) + second.energyVar/float64(r.means[1].noise.frames)
		}
	}
	if math.IsNaN(ratio) {
		r.flag[p] |= FlagNoRatio
		return
	}
	r.set(mapRatio, p, ratio)
	r.ratio[p] = [2]float64{ratio, variance}
}

// density: electron density of a pixel from its ratio.
func (r *run) density(p int) {
	ratio, variance := r.ratio[p][0], r.ratio[p][1]
	if math.IsNaN(ratio) {
		return
	}
	ix, iy := r.at(p)
	dist, _ := r.grid.Polar(ix, iy)
	n, slope, why := r.inverter.Density(ratio, dist)
	if why != line.Found {
		r.flag[p] |= FlagDensity
		return
	}
	r.set(mapDensity, p, n)
	if !math.IsNaN(variance) {
		r.set(mapDensityErr, p, n*math.Abs(slope)*math.Sqrt(variance))
	}
}

// present returns the number of frames of the first line in which a pixel has a value.
func (r *run) present(p int) (n int) {
	for _, x := range r.cube.Series(p, 0) {
		if x == x {
			n++
		}
	}
	return max(n, 1)
}

// series puts the repaired Doppler series of a pixel into the transformer and
// returns the number of bad frames.
func (r *run) series(w *worker, p int) (bad int) {
	t := w.transform
	v, broken := t.v, t.bad
	if w.v != nil {
		v, broken = w.v, w.bad
	}
	switch r.cube.Tunings {
	case 1:
		for i, x := range r.cube.Series(p, 0) {
			v[i], broken[i] = float64(x), math.IsNaN(float64(x)) || math.IsInf(float64(x), 0)
		}
	case 3: // never with a background
		r.means[0].doppler(r.cube.Series(p, 0), r.cube.Series(p, 1), r.cube.Series(p, 2), v, broken)
	default:
		g := r.means[0].gaussian
		for i := range v {
			for k := range w.frame {
				w.frame[k] = float64(r.cube.Series(p, k)[i])
			}
			if f := w.fitters[0]; f != nil {
				fit := f.frame(&w.fitted[0], w.frame, w.weight[0], w.usable)
				v[i], broken[i] = fit.shape[1], !fit.ok
				continue
			}
			fit := g.fit(w.frame)
			v[i], broken[i] = fit.v, !fit.ok
		}
	}
	if w.v != nil {
		r.timing.spread(v, broken, t.v, t.bad)
	}
	return repair(t.v, t.bad)
}

func norm(row []float32) float32 {
	sum := 0.0
	for _, x := range row {
		sum += float64(x) * float64(x)
	}
	return float32(math.Sqrt(sum))
}

// normalise: density, rms, series for the caller, unit norm.
func (r *run) normalise(w *worker, p int) {
	r.density(p)
	row := r.spec[p*r.band.row : (p+1)*r.band.row]
	var series []float32
	if s := r.result.Series; s != nil {
		series = s.Series(p, 0)
	}
	n := norm(row)
	r.norm[p] = n
	if n == 0 {
		r.flag[p] |= FlagBadSeries // a constant is no series
		for i := range series {
			series[i] = float32(math.NaN())
		}
		return
	}
	if series != nil {
		w.transform.backward(row, series)
	}
	if waves := r.power(p) * (1 - r.noise(p)); waves > 0 {
		r.set(mapDopplerRMS, p, math.Sqrt(waves))
	} else {
		r.flag[p] |= FlagBelowNoise
	}
	for j := range row {
		row[j] /= n
	}
	leave(r.rest[p*angleParts:(p+1)*angleParts], row, len(r.band.freq))
}

// power returns the band-passed power of a pixel [(km/s)^2].
func (r *run) power(p int) float64 {
	n, frames := float64(r.norm[p]), float64(r.band.frames)
	return 2 * n * n / (frames * frames * r.band.kept)
}

// noise returns the share of noise in it, 0 if not known.
func (r *run) noise(p int) float64 {
	if math.IsNaN(r.variance[p]) {
		return 0
	}
	return min(r.variance[p]*r.band.passes/r.power(p), 1)
}

// direct: coherence island and axis.
func (r *run) direct(w *worker, p int) {
	if r.norm[p] == 0 {
		return
	}
	if r.opt.Directions != nil {
		r.follow(p)
		return
	}
	s := w.islands.adapt(p)
	r.set(mapIsland, p, float64(s.count))
	r.set(mapCoherence, p, s.coherence)
	switch {
	case s.count < leastIsland:
		r.flag[p] |= FlagIslandSmall
		return
	case s.full():
		r.flag[p] |= FlagIslandFills
	}
	if s.minor > 0 {
		r.set(mapElongation, p, s.major/s.minor)
	}
	if s.round() {
		r.flag[p] |= FlagIslandRound
		return
	}
	r.turn(p, s.angle)
	if r.on(angleLattice, p) {
		if d, ok := w.islands.halves(p); ok {
			r.spread[p] = [2]float32{float32(d * d), float32(s.err * s.err)}
			sin, cos := math.Sincos(2 * d)
			r.turns[p] = [2]float32{float32(cos), float32(sin)}
		}
	}
	// PA = atan2(-y, z) of a vector at angle a + roll from west toward north.
	pa := math.Mod(s.angle*180/math.Pi+r.grid.Roll-90, 180)
	if pa < 0 {
		pa += 180
	}
	if float32(pa) >= 180 {
		pa = 0
	}
	r.set(mapAngle, p, pa)
	r.set(mapAngleErr, p, s.err*180/math.Pi) // formal until all directions are known
}

// calibrate makes the formal error of a pixel's angle a true one.
func (r *run) calibrate(p int) {
	var found, formal float64
	r.lattice(angleLattice, angleReach, p, func(q int) {
		found += float64(r.spread[q][0])
		formal += float64(r.spread[q][1])
	})
	if i := r.pixels[p]; formal > 0 {
		r.result.Maps[mapAngleErr].Data[i] *= float32(math.Sqrt(found / formal))
	}
}

// turn sets the axis of a pixel at an angle of the image [rad].
func (r *run) turn(p int, angle float64) {
	sin, cos := math.Sincos(2 * angle)
	r.axis[p] = [2]float32{float32(cos), float32(sin)}
}

// follow takes the direction of a pixel from outside.
func (r *run) follow(p int) {
	pa := r.opt.Directions[r.pixels[p]]
	if pa != pa {
		r.flag[p] |= FlagIslandRound
		return
	}
	r.turn(p, (float64(pa)-r.grid.Roll+90)*math.Pi/180)
	r.set(mapAngle, p, float64(pa))
}

// leastRise is the gain in distance from the Sun over a track's length below which
// a track has no outward side.
const leastRise = 0.2

// leastTrack is the number of points that a track has to have.
func (r *run) leastTrack() int { return max(leastLags, r.opt.Track/3) }

// measure: track, speed, field.
func (r *run) measure(w *worker, p int) {
	if r.axis[p] == ([2]float32{}) {
		return
	}
	r.calibrate(p)
	t := &w.track
	centre, rise := t.trace(p, r.opt.Track/2)
	n := len(t.points)
	if n < r.leastTrack() {
		r.flag[p] |= FlagTrackShort
		return
	}
	if a, b := centre, n-1-centre; 2*min(a, b) < max(a, b) {
		r.flag[p] |= FlagOneSided
	}
	if rise < leastRise {
		r.flag[p] |= FlagUndirected
	}
	rows := t.sample()
	w.noise = r.noise(p)
	for i, e := range w.estimators {
		m := e.measure(w, rows, n, centre, rise >= leastRise)
		m.err = r.withTrack(p, i, m.v, m.err)
		m.ok = m.ok && m.err < m.v
		r.note(p, i, m, n, w.lags.step)
		if i == 0 && m.against && rise >= leastRise {
			r.flag[p] |= FlagInward
		}
	}
}

// note writes the maps of estimator i of a pixel with a track of n points.
func (r *run) note(p, i int, m estimate, n int, step float64) {
	maps := &r.estimatorMaps[i]
	if maps.in != 0 && m.in > 0 {
		r.set(maps.in, p, m.in)
	}
	if !m.ok || !(m.v > 0) {
		if i == 0 {
			r.flag[p] |= FlagNoSpeed
		} else {
			r.flag[p] |= FlagNoOther
		}
		return
	}
	r.set(maps.speed, p, m.v)
	r.set(maps.err, p, m.err)
	if maps.inward != 0 {
		r.set(maps.inward, p, m.inward)
	}
	if i == 0 {
		r.set(mapTrack, p, float64(n-1)*step*r.opt.Centre/m.v)
	}
	if r.flag[p]&Blocking&^FlagNoSpeed != 0 {
		return
	}
	raster := r.pixels[p]
	b, err := fieldStrength(m.v, m.err, float64(r.result.Maps[mapDensity].Data[raster]), float64(r.result.Maps[mapDensityErr].Data[raster]), r.opt.Mu)
	r.set(maps.field, p, b)
	r.set(maps.fieldErr, p, err)
}
