package main

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"offplane/compare"
	"offplane/compare/ensemble"
	"offplane/compare/table"
	"offplane/scenarios/units"
	"offplane/synth/fits"
	"offplane/synth/obs"
)

// A published map is an image by anyone, with its place on the sky.
type published struct {
	*obs.Image
	path   string
	values []float64 // in G, km/s, cm-3, deg
	unit   string    // to be written
	scale  float64   // from unit to that of values
}

// standardNames are the maps whose units are understood; a feature without one is a pure
// number.
var standardNames = map[table.Feature]string{table.Field: "B", table.Speed: "SPEED", table.Density: "NE", table.Angle: "ANGLE"}

// readPublished reads a map; its unit must be one of a feature among wanted, which is
// returned.
func readPublished(name string, wanted ...table.Feature) (*published, table.Feature, error) {
	path, ext := splitExtension(name)
	im, err := obs.ReadImage(path, ext)
	if err != nil {
		return nil, 0, err
	}
	m := &published{Image: im, path: path}
	var want []string
	for _, f := range wanted {
		if m.take(f) {
			return m, f, nil
		}
		want = append(want, fmt.Sprintf("%s in %s", f, unitsOf(f)))
	}
	return nil, 0, fmt.Errorf("%s: BUNIT is %q: want a map of the %s", name, im.Unit, strings.Join(want, ", or of the "))
}

// take reads the values as those of a feature, if the unit is one of it.
func (m *published) take(f table.Feature) bool {
	raw := m.Floats()
	data := obs.Map{Unit: m.Unit, Data: raw}
	m.unit, m.scale = strings.TrimSpace(m.Unit), 1
	if name, ok := standardNames[f]; ok {
		// What becomes of one and two tells the factor, and whether there is but a factor.
		probe := obs.Map{Unit: m.Unit, Data: []float32{1, 2}}
		if compare.Standardise(name, &data) != nil || compare.Standardise(name, &probe) != nil {
			return false
		}
		if m.scale = float64(probe.Data[0]); probe.Data[1] != 2*probe.Data[0] { // a logarithm
			m.unit, m.scale = data.Unit, 1
		}
	} else if m.unit != "" {
		return false
	}
	m.values = make([]float64, len(raw))
	for i := range m.values {
		m.values[i] = m.scale * float64(raw[i])
		if m.unit == data.Unit {
			m.values[i] = float64(data.Data[i])
		}
	}
	return true
}

func unitsOf(f table.Feature) string {
	switch f {
	case table.Field:
		return "G, T, mT"
	case table.Density:
		return "cm-3, m-3"
	case table.Speed:
		return "km/s, m/s"
	case table.Angle:
		return "deg, rad"
	}
	return "no unit"
}

// on returns the values of the map at the pixels of another image: those of the nearest
// pixel, so that values which do not average, such as angles, may be used; NaN beyond.
func (m *published) on(other *published) []float64 {
	near := m.Nearest(other.Image)
	out := make([]float64, len(near))
	for i, k := range near {
		out[i] = math.NaN()
		if k >= 0 {
			out[i] = m.values[k]
		}
	}
	return out
}

// recipe returns what the file says of how the map was made: the inversion that maps of
// this program carry, and the pixel.
func (m *published) recipe() (table.Recipe, error) {
	pixel := fmt.Sprintf("pixel=%.6g", m.Pixel())
	v, ok, err := readInversion(m.path)
	if err != nil {
		return nil, err
	}
	if !ok || len(v.Estimators) == 0 {
		return table.Recipe(nil).With(pixel)
	}
	r := ensemble.Recipe{Inversion: v, Pixel: units.SkyAngle(m.Pixel())}
	if k := slices.IndexFunc(v.Estimators, func(e string) bool { return strings.HasSuffix(m.Name, "_"+strings.ToUpper(e)) }); k > 0 {
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
	for _, c := range m.Header() {
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
