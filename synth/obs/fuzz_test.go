package obs

import (
	"os"
	"path/filepath"
	"testing"

	"offplane/synth/fits"
	"offplane/synth/fits/fitstest"
)

const sky = "CTYPE1  = 'HPLN-TAN'\nCTYPE2  = 'HPLT-TAN'\nCUNIT1  = 'arcsec'\nCUNIT2  = 'arcsec'\nCDELT1  = 4.35\nCDELT2  = 4.35\n" +
	"CRPIX1  = 1.0\nCRPIX2  = 1.0\nCRVAL1  = 1010.0\nDSUN_OBS= 1.496E+11\n"

// FuzzFiles: whatever a file holds, every way of reading it ends in an error or in
// something of use, never in a panic or in memory that a header alone asks for.
func FuzzFiles(f *testing.F) {
	f.Add(fitstest.File("SIMPLE  = T\nBITPIX  = -32\nNAXIS   = 3\nNAXIS1  = 4\nNAXIS2  = 4\nNAXIS3  = 8\n" + sky + "CTYPE3  = 'UTC'\nCDELT3  = 30.0\nBUNIT   = 'km/s'\n\n@512\n"))
	f.Add(fitstest.File("SIMPLE  = T\nBITPIX  = 8\nNAXIS   = 4\nNAXIS1  = 4\nNAXIS2  = 4\nNAXIS3  = 3\nNAXIS4  = 8\n" + sky +
		"CTYPE3  = 'WAVE'\nCUNIT3  = 'nm'\nCDELT3  = 0.12\nCRVAL3  = 1074.98\nCRPIX3  = 2\nCTYPE4  = 'UTC'\nCDELT4  = 30.0\nBZERO   = 1\n\n@384\n"))
	f.Add(fitstest.File("SIMPLE  = T\nBITPIX  = 16\nNAXIS   = 2\nNAXIS1  = 4\nNAXIS2  = 4\n" + sky + "PC1_1   = 0.7\nPC1_2   = -0.7\nBUNIT   = 'G'\nEXTNAME = 'B'\n\n@32\n"))
	table := func(name string, columns string) string {
		return "XTENSION= 'BINTABLE'\nBITPIX  = 8\nNAXIS   = 2\nNAXIS1  = 40\nNAXIS2  = 3\nPCOUNT  = 0\nGCOUNT  = 1\nTFIELDS = 5\n" + columns + "EXTNAME = '" + name + "'\n\n@120\n"
	}
	f.Add(fitstest.File("SIMPLE  = T\nBITPIX  = 8\nNAXIS   = 0\n\n" +
		table("TUNINGS", "TTYPE1  = 'line'\nTFORM1  = 'D'\nTTYPE2  = 'index'\nTFORM2  = 'D'\nTTYPE3  = 'wavelength_nm'\nTFORM3  = 'D'\nTTYPE4  = 'delay_s'\nTFORM4  = 'D'\nTTYPE5  = 'offset_nm'\nTFORM5  = 'D'\n") +
		table("EXPOSURES", "TTYPE1  = 'line'\nTFORM1  = 'D'\nTTYPE2  = 'frame'\nTFORM2  = 'D'\nTTYPE3  = 'time_s'\nTFORM3  = 'D'\nTTYPE4  = 'exposure_s'\nTFORM4  = 'D'\nTTYPE5  = 'electrons'\nTFORM5  = 'D'\n")))
	f.Fuzz(func(t *testing.T, raw []byte) {
		path := filepath.Join(t.TempDir(), "f.fits")
		if err := os.WriteFile(path, raw, 0o666); err != nil {
			t.Fatal(err)
		}
		IsObservation(path)
		ReadObservation(path)
		ReadMaps(path)
		ReadUserData(UserData{First: path, Density: path, Second: path, Rest: [2]float64{1074.98, 1080.08}, Cadence: 30})
		ReadUserData(UserData{First: path, Ratio: path, Unit: "m/s", Rest: [2]float64{1074.98, 1080.08}})
		if s, err := OpenSeries(path); err == nil {
			s.Close()
		}
		ims, err := ReadImages(path, func(string) bool { return true })
		if err != nil {
			return
		}
		for _, im := range ims {
			if g, err := im.Grid(); err == nil && g.Nx*g.Ny < 1<<20 {
				im.On(&g)
			}
		}
	})
}

// An image of thin pixels does not make a grid of as many as fit into its length.
func TestGridOfThinPixels(t *testing.T) {
	h := fits.Header{}
	for _, c := range []fits.Card{{Key: "CTYPE1", Value: "HPLN-TAN"}, {Key: "CTYPE2", Value: "HPLT-TAN"}, {Key: "CUNIT1", Value: "arcsec"}, {Key: "CUNIT2", Value: "arcsec"},
		{Key: "CD1_1", Value: 400.0}, {Key: "CD1_2", Value: 400.0}, {Key: "CD2_1", Value: -400.0}, {Key: "CD2_2", Value: -399.9999}, {Key: "DSUN_OBS", Value: 1.496e11}} {
		h.Set(c.Key, c.Value, "")
	}
	p, err := readPlate(h, 8, 8)
	if err != nil {
		t.Fatal(err)
	}
	im := &Image{Map: Map{Name: "B"}, header: h, plate: p, where: "thin.fits"}
	if g, err := im.Grid(); err == nil {
		t.Errorf("a grid of %d x %d pixels for an image of 8 x 8", g.Nx, g.Ny)
	}
}
