package obs

import (
	"fmt"
	"math/bits"
	"strings"

	"offplane/synth/fits"
)

// WriteMaps writes maps on one grid as image extensions with full headers, and
// tables after them. primary holds the cards of the primary HDU.
//
// The meaning of an integer map goes to cards 'name: about'. In a map whose
// name begins with FLAG a Code is a bit, its Value the mask, and FLAG00 tells
// bit 0 (mask 1); in any other map Value is a pixel's value, and STRUC02 tells
// the value 2 of STRUCTURE.
func WriteMaps(path string, g *Grid, maps Maps, primary fits.Header, tables ...fits.Table) error {
	block, err := g.header()
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	w, err := fits.Create(path, primary)
	if err != nil {
		return err
	}
	defer w.Abort()
	for i := range maps {
		m := &maps[i]
		var h fits.Header
		if m.Unit != "" {
			h.Set("BUNIT", m.Unit, "")
		}
		if m.About != "" {
			h.Set("BTYPE", m.About, "")
		}
		h = append(h, block...)
		for _, c := range m.Codes {
			key, err := codeKey(m.Name, c.Value)
			if err != nil {
				return fmt.Errorf("%s: %w", path, err)
			}
			text := c.Name
			if c.About != "" {
				text += ": " + c.About
			}
			h.Set(key, text, "")
		}
		axes := [2]int{g.Nx, g.Ny}
		if m.Ints != nil {
			err = fits.AddImage(w, m.Name, h, axes, m.Ints)
		} else {
			err = fits.AddImage(w, m.Name, h, axes, m.Data)
		}
		if err != nil {
			return err
		}
	}
	for _, t := range tables {
		if err := w.AddTable(t); err != nil {
			return err
		}
	}
	return w.Close()
}

func codePrefix(name string) string { return name[:min(5, len(name))] }

func isFlags(name string) bool { return strings.HasPrefix(name, "FLAG") }

func codeKey(name string, value int32) (string, error) {
	if isFlags(name) {
		if bits.OnesCount32(uint32(value)) != 1 {
			return "", fmt.Errorf("%s: code %d is not one bit", name, value)
		}
		return fmt.Sprintf("FLAG%02d", bits.TrailingZeros32(uint32(value))), nil
	}
	if value < 0 || value > 99 {
		return "", fmt.Errorf("%s: code %d does not fit two digits", name, value)
	}
	return fmt.Sprintf("%s%02d", codePrefix(name), value), nil
}

// ReadMaps reads every image of a file; all must be two-dimensional and share
// one grid.
func ReadMaps(path string) (Grid, Maps, error) {
	f, err := fits.Open(path)
	if err != nil {
		return Grid{}, nil, err
	}
	defer f.Close()
	var grid Grid
	var maps Maps
	for _, h := range f.HDUs {
		if !h.IsImage() {
			continue
		}
		g, m, err := readMap(f, h)
		if err != nil {
			return Grid{}, nil, err
		}
		if len(maps) == 0 {
			grid = g
		} else if !g.sameFrame(&grid) {
			return Grid{}, nil, fmt.Errorf("%s: the images %s and %s are on different grids", path, maps[0].Name, m.Name)
		}
		maps = append(maps, m)
	}
	if len(maps) == 0 {
		return Grid{}, nil, fmt.Errorf("%s: has no image", path)
	}
	return grid, maps, nil
}

// ReadMap reads one image by its name without case, or its number in the file;
// the empty name is the first image.
func ReadMap(path, name string) (Grid, Map, error) {
	f, err := fits.Open(path)
	if err != nil {
		return Grid{}, Map{}, err
	}
	defer f.Close()
	h, err := f.FindImage(name)
	if err != nil {
		return Grid{}, Map{}, err
	}
	return readMap(f, h)
}

func readMap(f *fits.File, h *fits.HDU) (Grid, Map, error) {
	m, err := readPixels(f, h)
	if err != nil {
		return Grid{}, Map{}, err
	}
	g, err := readGrid(h.Header, h.Axes)
	if err != nil {
		return Grid{}, Map{}, fmt.Errorf("%s[%s]: %w", f.Name, h.Name, err)
	}
	return g, m, nil
}

func readPixels(f *fits.File, h *fits.HDU) (Map, error) {
	img, err := f.ReadImage(h)
	if err != nil {
		return Map{}, err
	}
	m := Map{Name: h.Name, Data: img.Data}
	m.Unit, _ = h.Header.Text("BUNIT")
	m.About, _ = h.Header.Text("BTYPE")
	if img.Ints != nil {
		m.Ints, m.Data = img.Ints, nil
		m.Codes = readCodes(m.Name, h.Header)
	}
	return m, nil
}

func readCodes(name string, h fits.Header) []Code {
	var codes []Code
	for v := range int32(100) {
		if isFlags(name) && v > 31 {
			break
		}
		value := v
		if isFlags(name) {
			value = 1 << v
		}
		key, err := codeKey(name, value)
		if err != nil {
			continue
		}
		if text, ok := h.Text(key); ok && name != "" {
			word, about, _ := strings.Cut(text, ": ")
			codes = append(codes, Code{value, word, about})
		}
	}
	return codes
}

// Floats returns the numbers of a map, those of an integer map converted.
func (m *Map) Floats() []float32 {
	if m.Ints == nil {
		return m.Data
	}
	out := make([]float32, len(m.Ints))
	for i, v := range m.Ints {
		out[i] = float32(v)
	}
	return out
}
