package obs

import (
	"path/filepath"
	"testing"
)

// BenchmarkFrames writes and reads 1e5 pixels of a 400 x 400 image, 5 tunings,
// 64 frames: 128 MB in the cube, 205 MB in the file.
func BenchmarkFrames(b *testing.B) {
	o := &Observation{Grid: testGrid()}
	o.Grid.Nx, o.Grid.Ny = 400, 400
	for p := range int32(100000) {
		o.Pixels = append(o.Pixels, p+p/2)
	}
	o.Mean[0] = make([][]float32, 5)
	for k := range 5 {
		o.Tunings = append(o.Tunings, Tuning{Line: 1, Index: k, Wavelength: 1074.5 + 0.1*float64(k)})
		o.Mean[0][k] = make([]float32, len(o.Pixels))
	}
	for f := range 64 {
		o.Exposures = append(o.Exposures, Exposure{Line: 1, Frame: f, Time: float64(f)})
	}
	o.Frames[0] = NewCube(len(o.Pixels), 5, 64)
	path := filepath.Join(b.TempDir(), "o.fits")
	b.Run("write", func(b *testing.B) {
		b.SetBytes(205e6)
		for b.Loop() {
			if err := WriteObservation(path, o, nil, true); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("read", func(b *testing.B) {
		b.SetBytes(205e6)
		for b.Loop() {
			if _, err := ReadObservation(path); err != nil {
				b.Fatal(err)
			}
		}
	})
}
