package camera

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"

	"offplane/scenarios"
)

// A Kernel is the compact point spread: the share of the light of a pixel's centre
// that falls into each pixel around, (2 Half + 1)^2 of them, row by row. It is
// symmetric and adds up to one.
type Kernel struct {
	Half   int
	Weight []float64
}

// Limits of the compact kernel: what falls beyond leastLight is put back in
// proportion; most is the largest half-width. The wings of diffraction fall off slowly
// (2/pi^2 of lambda/D over the angle, derived), further ones are the scatter's matter.
const (
	leastLight = 0.99
	most       = 8
)

// newKernel returns the point spread at a wavelength [nm] over pixels of the given
// pitch [rad].
func newKernel(c scenarios.Camera, pixel, wavelength float64) Kernel {
	if !c.Diffraction && c.Seeing == 0 {
		w := gaussianSpread(c.PointSpread.Rad(), pixel)
		k := Kernel{Half: len(w) / 2}
		for _, y := range w {
			for _, x := range w {
				k.Weight = append(k.Weight, x*y)
			}
		}
		return k
	}
	// The optical transfer function against spatial frequency [cycles per pixel].
	cutoff := math.Inf(1)
	if c.Diffraction {
		cutoff = float64(c.Aperture) / (wavelength * 1e-7) * pixel
	}
	gauss := c.PointSpread.Rad() / pixel
	seeing := c.Seeing.Rad() / pixel
	otf := func(f float64) float64 {
		t := 1.0
		if c.Diffraction {
			r := f / cutoff
			if r >= 1 {
				return 0
			}
			t = 2 / math.Pi * (math.Acos(r) - r*math.Sqrt(1-r*r))
		}
		if seeing > 0 {
			// Long exposure through Kolmogorov turbulence, exp(-3.44 (lambda f/r0)^(5/3)),
			// full width at half maximum 0.976 lambda/r0 (Fried 1966, JOSA 56, 1372, from
			// memory).
			t *= math.Exp(-3.44 * math.Pow(f*seeing/0.976, 5.0/3))
		}
		return t * math.Exp(-math.Pow(math.Pi*f*gauss, 2)/(4*math.Ln2))
	}
	top := min(cutoff, 1e4)
	for otf(top/2) < 1e-7 {
		top /= 2
	}
	// The share of pixel (i, j) is the integral of the transfer function times those of
	// the pixel over all frequencies, as a product of matrices.
	n := min(200+int(100*top), 2000)
	at, w := make([]float64, n), make([]float64, n)
	quad.Legendre{}.FixedLocations(at, w, 0, top)
	basis := make([][]float64, most+1)
	for i := range basis {
		basis[i] = make([]float64, n)
		for a, f := range at {
			box := 1.0
			if f > 0 {
				box = math.Sin(math.Pi*f) / (math.Pi * f)
			}
			basis[i][a] = 2 * w[a] * box * math.Cos(2*math.Pi*f*float64(i))
		}
	}
	var share [most + 1][most + 1]float64
	row := make([]float64, n)
	for a, fa := range at {
		for b, fb := range at {
			row[b] = otf(math.Hypot(fa, fb))
		}
		for j := range basis {
			sum := 0.0
			for b, x := range row {
				sum += x * basis[j][b]
			}
			for i := range basis {
				share[i][j] += basis[i][a] * sum
			}
		}
	}
	k := Kernel{}
	for ; ; k.Half++ {
		k.Weight = k.Weight[:0]
		sum := 0.0
		for y := -k.Half; y <= k.Half; y++ {
			for x := -k.Half; x <= k.Half; x++ {
				s := max(share[abs(x)][abs(y)], 0)
				k.Weight = append(k.Weight, s)
				sum += s
			}
		}
		if sum >= leastLight || k.Half == most {
			for i := range k.Weight {
				k.Weight[i] /= sum
			}
			return k
		}
	}
}

func abs(i int) int { return max(i, -i) }

// gaussianSpread returns the share of a Gaussian of the given full width at half
// maximum [rad] that falls into each pixel of a row, cut where less than 1e-4 lies
// beyond and scaled to conserve light.
func gaussianSpread(fwhm, pixel float64) []float64 {
	if fwhm == 0 {
		return []float64{1}
	}
	s := fwhm / (2 * math.Sqrt(2*math.Ln2)) * math.Sqrt2 / pixel
	within := func(i float64) float64 { return (math.Erf((i+0.5)/s) - math.Erf((i-0.5)/s)) / 2 }
	half := 0
	for math.Erfc((float64(half)+0.5)/s) > 1e-4 {
		half++
	}
	w := make([]float64, 2*half+1)
	sum := 0.0
	for i := range w {
		w[i] = within(float64(i - half))
		sum += w[i]
	}
	for i := range w {
		w[i] /= sum
	}
	return w
}
