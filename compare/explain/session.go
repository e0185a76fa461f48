package explain

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"sync"

	"offplane/compare"
	"offplane/compare/trial"
	"offplane/invert"
	"offplane/model"
	"offplane/scenarios"
	"offplane/synth"
	"offplane/synth/line"
	"offplane/synth/obs"
)

// A Session is a run folder that is ready to be asked. It is safe for concurrent use.
type Session struct {
	Scenario *scenarios.Loaded
	Grid     obs.Grid
	Truth    obs.Maps // of truth.fits
	Inferred obs.Maps // of inferred.fits

	scene    *synth.Scene
	identity *compare.Identity
	options  invert.Options
	inverter *line.Inverter
	mu       [2]float64 // of the inversion, of the corona
	rows     []int32    // of series.fits by raster index; -1: none
	pixels   []int32    // raster indices of the rows
	onePlane []float32  // METHOD_RATIO; nil: the run did not measure it

	lock    sync.Mutex
	series  rows
	cadence float64 // of the series [s]
	close   func() error
}

// rows gives the series of the field's pixels, those of series.fits or the same in memory.
type rows interface {
	Read(row int, dst []float32) ([]float32, error)
}

// files of a run that a session reads.
var files = []string{"run.json", "summary.json", "truth.fits", "inferred.fits", "bias.fits", "series.fits"}

// Open reads a folder that `run` finished and builds its corona: seconds, against the
// fraction of one that At takes. Workers < 1: every core.
func Open(ctx context.Context, dir string, workers int) (*Session, error) {
	if err := finished(dir); err != nil {
		return nil, err
	}
	l, named, err := readScenario(filepath.Join(dir, "summary.json"))
	if err != nil {
		return nil, err
	}
	s := &Session{Scenario: l}
	path := filepath.Join(dir, "truth.fits")
	if s.Grid, s.Truth, err = obs.ReadMaps(path); err != nil {
		return nil, err
	}
	if err := has(path, s.Truth, "B_SKY", "SPEED_SKY", "SPEED_WAVE", "NE_SKY", "NE_KINK", "ANGLE_SKY"); err != nil {
		return nil, err
	}
	path = filepath.Join(dir, "inferred.fits")
	g, maps, err := obs.ReadMaps(path)
	if err != nil {
		return nil, err
	}
	s.Inferred = maps
	if err := has(path, maps, "B", "SPEED", "NE", "ANGLE", "FLAG"); err != nil {
		return nil, err
	}
	if g.Nx != s.Grid.Nx || g.Ny != s.Grid.Ny {
		return nil, fmt.Errorf("%s: %d x %d pixels; truth.fits has %d x %d: the files are not of one run", path, g.Nx, g.Ny, s.Grid.Nx, s.Grid.Ny)
	}
	path = filepath.Join(dir, "bias.fits")
	_, maps, err = obs.ReadMaps(path)
	if err != nil {
		return nil, err
	}
	if m := maps.Get("METHOD_RATIO"); m != nil && len(m.Data) == s.Grid.Nx*s.Grid.Ny {
		s.onePlane = m.Data
	}
	if err := s.openSeries(filepath.Join(dir, "series.fits")); err != nil {
		return nil, err
	}
	if err := s.build(ctx, named, workers); err != nil {
		s.Close()
		return nil, err
	}
	return s, nil
}

// Close closes the files.
func (s *Session) Close() error { return s.close() }

// finished returns an error unless a run left its files in the folder.
func finished(dir string) error {
	if i, err := os.Stat(dir); errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("%s: there is no such folder of a run; offplane run SCENARIO -o DIR leaves one", dir)
	} else if err != nil {
		return err
	} else if !i.IsDir() {
		return fmt.Errorf("%s is no folder: explain takes the folder that offplane run left", dir)
	}
	for _, name := range files {
		_, err := os.Stat(filepath.Join(dir, name))
		if !errors.Is(err, fs.ErrNotExist) {
			if err != nil {
				return err
			}
			continue
		}
		if name == files[0] {
			return fmt.Errorf("%s holds no %s: no finished run; offplane run SCENARIO -o DIR leaves one", dir, name)
		}
		return fmt.Errorf("%s holds no %s: explain needs all that offplane run leaves, not synth, invert or compare alone", dir, name)
	}
	return nil
}

// readScenario returns the resolved scenario that a summary carries and the files it named.
func readScenario(path string) (*scenarios.Loaded, []compare.File, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, nil, err
	}
	var v struct {
		Scenario string         `json:"scenario"`
		Version  string         `json:"version"`
		SHA256   string         `json:"scenario_sha256"`
		Text     string         `json:"scenario_text"`
		Files    []compare.File `json:"files"`
	}
	if err := json.Unmarshal(data, &v); err != nil {
		return nil, nil, fmt.Errorf("%s: %w", path, err)
	}
	if v.Text == "" {
		return nil, nil, fmt.Errorf("%s: carries no scenario: it is not of offplane run", path)
	}
	l, err := scenarios.Restore(path, []byte(v.Text), v.SHA256, "offplane "+v.Version)
	if err != nil {
		return nil, nil, err
	}
	l.Name = v.Scenario
	return l, v.Files, nil
}

func has(path string, maps obs.Maps, names ...string) error {
	for _, name := range names {
		if maps.Get(name) == nil {
			return fmt.Errorf("%s: no map %s: it is not of offplane run", path, name)
		}
	}
	return nil
}

// listRows lists the rows of the field's pixels: those that FLAG does not call outside.
func (s *Session) listRows() {
	flag := s.Inferred.Get("FLAG").Ints
	s.rows = make([]int32, len(flag))
	for i, f := range flag {
		s.rows[i] = -1
		if f&invert.FlagOutside == 0 {
			s.rows[i] = int32(len(s.pixels))
			s.pixels = append(s.pixels, int32(i))
		}
	}
}

// openSeries opens the series and checks that its rows are those of the field's pixels.
func (s *Session) openSeries(path string) error {
	f, err := obs.OpenSeries(path)
	if err != nil {
		return err
	}
	s.series, s.cadence, s.close = f, f.Cadence, f.Close
	s.listRows()
	if f.Len == len(s.pixels) && f.Cadence > 0 {
		ok := true
		for _, row := range []int{0, f.Len / 2, f.Len - 1} {
			if row >= 0 && row < f.Len {
				p, err := f.Pixel(row)
				ok = ok && err == nil && p == s.pixels[row]
			}
		}
		if ok {
			return nil
		}
	}
	f.Close()
	return fmt.Errorf("%s: its %d rows are not those of the pixels of inferred.fits: the files are not of one run", path, f.Len)
}

// build makes the corona again and the inversion's side.
func (s *Session) build(ctx context.Context, named []compare.File, workers int) error {
	c := &s.Scenario.Scenario
	light, used, err := trial.Light(c)
	if err != nil {
		return err
	}
	for _, f := range used {
		if i := slices.IndexFunc(named, func(n compare.File) bool { return n.Name == f.Name }); i < 0 || named[i].SHA256 != f.SHA256 {
			return fmt.Errorf("%s: not the file that the run used (SHA-256 %s)", f.Path, f.SHA256)
		}
	}
	if s.scene, err = synth.NewScene(ctx, c, light, workers); err != nil {
		return err
	}
	return s.invertSide()
}

// invertSide builds what the inversion knew.
func (s *Session) invertSide() error {
	c := &s.Scenario.Scenario
	v := c.Inversion
	emitter, _, err := trial.Model("inversion.line", v.Line, v.Helium)
	if err != nil {
		return err
	}
	s.options = trial.Options(v)
	half := s.Grid.Step()
	if s.inverter, err = line.NewInverter(emitter, s.options.Temperature, max(1, float64(c.Image.Inner)-half), float64(c.Image.Outer)+half); err != nil {
		return err
	}
	s.mu = [2]float64{v.Mu, model.Mu(c.Corona.Helium)}
	s.identity = compare.NewIdentity(s.Truth, s.Inferred, s.mu[0], s.mu[1])
	return nil
}

// Find returns the zero-based pixel at helioprojective (tx, ty) [arcsec].
func (s *Session) Find(tx, ty float64) (ix, iy int) { return s.Grid.Nearest(tx, ty) }

// FindPolar returns the zero-based pixel at a position angle [deg] and projected distance
// from the Sun's centre [solar radii].
func (s *Session) FindPolar(pa, r float64) (ix, iy int) {
	sin, cos := math.Sincos(pa * math.Pi / 180)
	x, y := s.Grid.PixelAt(-r*sin, r*cos)
	return int(math.Round(x)), int(math.Round(y))
}

// An OutsideError says that a pixel is not in the field of view.
type OutsideError struct {
	Height, PA float64 // of the pixel [solar radii, deg]
	Field      string  // what the field is
}

func (e *OutsideError) Error() string {
	return fmt.Sprintf("the pixel at %.3f solar radii and position angle %.1f deg is outside the field of view, which runs %s", e.Height, e.PA, e.Field)
}

// in returns an error unless the pixel is in the field of view.
func (s *Session) in(ix, iy int) error {
	m := s.Truth.Get("B_SKY")
	if ix >= 0 && iy >= 0 && ix < s.Grid.Nx && iy < s.Grid.Ny {
		if b := m.Data[iy*s.Grid.Nx+ix]; b == b {
			return nil
		}
	}
	i := &s.Scenario.Scenario.Image
	e := &OutsideError{Field: fmt.Sprintf("from %s to %s", i.Inner, i.Outer)}
	if float64(i.To-i.From) < 360-1e-9 {
		e.Field += fmt.Sprintf(" and from position angle %s to %s", i.From, i.To)
	}
	e.Height, e.PA = s.Grid.Polar(ix, iy)
	return e
}

// At answers for the zero-based pixel (ix, iy). A pixel without an inferred field has an
// answer too; one outside the field of view is an *OutsideError.
func (s *Session) At(ix, iy int) (*Pixel, error) {
	if err := s.in(ix, iy); err != nil {
		return nil, err
	}
	sight, err := s.scene.Sight(ix, iy)
	if err != nil {
		return nil, err
	}
	d, err := s.diagnose(ix, iy)
	if err != nil {
		return nil, err
	}
	return s.answer(ix, iy, sight, d)
}

// diagnose goes the tracker's way again; nil for a pixel without series.
func (s *Session) diagnose(ix, iy int) (*invert.Diagnosis, error) {
	nx, reach := s.Grid.Nx, s.options.Reach()
	pixel := iy*nx + ix
	if s.rows[pixel] < 0 {
		return nil, nil
	}
	var near []int32
	for y := max(iy-reach, 0); y <= min(iy+reach, s.Grid.Ny-1); y++ {
		for x := max(ix-reach, 0); x <= min(ix+reach, nx-1); x++ {
			if s.rows[y*nx+x] >= 0 {
				near = append(near, int32(y*nx+x))
			}
		}
	}
	cube, err := s.read(near)
	if err != nil {
		return nil, err
	}
	return invert.DiagnoseSeries(&s.Grid, near, cube, s.cadence, s.options, pixel)
}

func (s *Session) read(pixels []int32) (*obs.Cube, error) {
	s.lock.Lock()
	defer s.lock.Unlock()
	var cube *obs.Cube
	var row []float32
	for i, p := range pixels {
		var err error
		if row, err = s.series.Read(int(s.rows[p]), row); err != nil {
			return nil, err
		}
		if cube == nil {
			cube = obs.NewCube(len(pixels), 1, len(row))
		}
		copy(cube.Series(i, 0), row)
	}
	return cube, nil
}
