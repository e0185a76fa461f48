package main

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/compare/ensemble"
	"offplane/compare/table"
	"offplane/scenarios/units"
	"offplane/synth/fits"
	"offplane/synth/obs"
)

// A published map is an image by anyone, with its place on the sky.
type published struct {
	path, ext string
	grid      obs.Grid
	values    []float64 // in the unit of scale 1
	unit      string    // as in the file
	scale     float64   // from the file's unit
	header    fits.Header
}

// unitScales are the units of maps that are understood, and their factors.
var unitScales = map[table.Feature]map[string]float64{
	table.Field:   {"G": 1, "Gauss": 1, "gauss": 1, "mG": 1e-3, "T": 1e4, "mT": 10, "uT": 1e-2, "nT": 1e-5},
	table.Density: {"cm-3": 1, "cm**-3": 1, "cm^-3": 1, "cm^(-3)": 1, "1/cm3": 1, "1/cm**3": 1, "m-3": 1e-6, "m**-3": 1e-6, "m^-3": 1e-6, "1/m3": 1e-6},
	table.Speed:   {"km/s": 1, "kms-1": 1, "kms**-1": 1, "m/s": 1e-3, "ms-1": 1e-3, "ms**-1": 1e-3, "Mm/s": 1e3, "cm/s": 1e-5},
	table.Angle:   {"deg": 1, "rad": 180 / math.Pi},
}

// splitExtension splits FILE[EXT].
func splitExtension(s string) (file, ext string) {
	if i := strings.LastIndexByte(s, '['); i > 0 && strings.HasSuffix(s, "]") {
		return s[:i], s[i+1 : len(s)-1]
	}
	return s, ""
}

// readPublished reads a map; its unit must be one of a feature among wanted, which is
// returned. A feature that is a pure number takes any map without a unit.
func readPublished(name string, wanted ...table.Feature) (*published, table.Feature, error) {
	m := &published{}
	m.path, m.ext = splitExtension(name)
	f, err := fits.Open(m.path)
	if err != nil {
		return nil, 0, err
	}
	defer f.Close()
	h, err := f.FindImage(m.ext)
	if err != nil {
		return nil, 0, err
	}
	m.header, m.ext = h.Header, h.Name
	g, image, err := obs.ReadMap(m.path, h.Name)
	if err != nil {
		return nil, 0, fmt.Errorf("%w; the place of the pixels on the sky is not known", err)
	}
	m.grid, m.unit = g, strings.TrimSpace(image.Unit)
	key := strings.ReplaceAll(m.unit, " ", "")
	for _, f := range wanted {
		scale, ok := unitScales[f][key]
		if unitScales[f] == nil && key == "" {
			scale, ok = 1, true
		}
		if !ok {
			continue
		}
		m.scale = scale
		for _, v := range image.Floats() {
			m.values = append(m.values, scale*float64(v))
		}
		return m, f, nil
	}
	var want []string
	for _, f := range wanted {
		want = append(want, fmt.Sprintf("%s in %s", f, unitsOf(f)))
	}
	return nil, 0, fmt.Errorf("%s: BUNIT is %q: want a map of the %s", name, m.unit, strings.Join(want, ", or of the "))
}

func unitsOf(f table.Feature) string {
	switch f {
	case table.Field:
		return "G, mG, T, mT, uT or nT"
	case table.Density:
		return "cm-3 or m-3"
	case table.Speed:
		return "km/s, m/s or Mm/s"
	case table.Angle:
		return "deg or rad"
	}
	return "no unit"
}

// heights returns the projected distances of the pixels [solar radii] and their position
// angles [deg].
func (m *published) heights() (r, pa []float64) {
	n := m.grid.Nx * m.grid.Ny
	r, pa = make([]float64, n), make([]float64, n)
	for i := range r {
		r[i], pa[i] = m.grid.Polar(i%m.grid.Nx, i/m.grid.Nx)
	}
	return r, pa
}

// on returns the values of the map at the pixels of another grid: those of the nearest
// pixel, so that values which do not average, such as angles, may be used; NaN beyond.
func (m *published) on(g *obs.Grid) []float64 {
	out := make([]float64, g.Nx*g.Ny)
	h := *g
	h.Distance = m.grid.Distance // maps agree in angle, whatever distance a header says
	for i := range out {
		px, py := m.grid.PixelAt(h.Sky(i%g.Nx, i/g.Nx))
		x, y := int(math.Round(px)), int(math.Round(py))
		out[i] = math.NaN()
		if x >= 0 && x < m.grid.Nx && y >= 0 && y < m.grid.Ny {
			out[i] = m.values[y*m.grid.Nx+x]
		}
	}
	return out
}

// recipe returns what the file says of how the map was made: the inversion that maps of
// this program carry, and the pixel.
func (m *published) recipe() (table.Recipe, error) {
	pixel := fmt.Sprintf("pixel=%.6g", m.grid.Pixel)
	v, ok, err := readInversion(m.path)
	if err != nil {
		return nil, err
	}
	if !ok || len(v.Estimators) == 0 {
		return table.Recipe(nil).With(pixel)
	}
	r := ensemble.Recipe{Inversion: v, Pixel: units.SkyAngle(m.grid.Pixel)}
	if k := slices.IndexFunc(v.Estimators, func(e string) bool { return strings.HasSuffix(m.ext, "_"+strings.ToUpper(e)) }); k > 0 {
		r.Inversion.Estimators = v.Estimators[k:]
	}
	f, err := fits.Open(m.path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	_, h, err := readYAML(f, inversionTable)
	if err != nil {
		return nil, err
	}
	for _, file := range filesOf(h) {
		r.Atoms = file.SHA256
	}
	return table.NewRecipe(r), nil
}

// skyCards are the cards of a map that go over into the maps made of it.
var skyCards = []string{"WCSNAME", "LONPOLE", "LATPOLE", "CROTA2", "RADESYS", "IMGROLL", "TIMESYS", "TELAPSE", "XPOSURE", "EXPTIME",
	"WAVELNTH", "WAVEUNIT", "WAVEREF", "TELESCOP", "INSTRUME", "DETECTOR", "OBSRVTRY", "RSUNDIST"}

// sky returns the world coordinates, the observer and the dates of a map's header.
func (m *published) sky() fits.Header {
	var out fits.Header
	out.Set("WCSAXES", 2, "")
	for _, c := range m.header {
		axis := false
		for _, stem := range []string{"CTYPE", "CUNIT", "CRVAL", "CDELT", "CRPIX"} {
			axis = axis || c.Key == stem+"1" || c.Key == stem+"2"
		}
		for _, stem := range []string{"PC", "CD"} {
			for _, ij := range []string{"1_1", "1_2", "2_1", "2_2"} {
				axis = axis || c.Key == stem+ij
			}
		}
		for _, stem := range []string{"RSUN_", "DSUN_", "HGLN_", "HGLT_", "CRLN_", "CRLT_", "DATE-", "DATEREF", "MJD"} {
			axis = axis || strings.HasPrefix(c.Key, stem)
		}
		if axis || slices.Contains(skyCards, c.Key) {
			out.Set(c.Key, c.Value, c.Comment)
		}
	}
	return out
}
