package wave

import (
	"math"

	"offplane/synth/kernel"
)

// A Bundle makes the frames of kernel.Lanes samples side by side. It belongs to one
// worker. Clear it, Add the trains of every lane, then take the Velocity at each lead.
type Bundle struct {
	d     *Driver
	at    []int32     // where each bin and its negative belong in the transform
	alone int         // so many bins have their places for themselves
	blank []int32     // places without a bin
	turns [][]float32 // by lead: half the phase of each bin

	spectra []float32 // one a lane
	moving  [kernel.Lanes]bool
	points  []float32 // the same, point by point, if ready
	ready   bool
	x       []float32

	// The next sample's footpoints are often between the same sites as the last one's.
	last [2]surroundings

	// memo remembers the spectra that were used last, to spare the shared cache.
	memo [1 << memoBits]struct {
		key uint64 // plus one
		u   []float32
	}
}

const memoBits = 14

// surroundings are the sites around a footpoint and their spectra, both polarisations of
// each.
type surroundings struct {
	sites   [4]uint64
	dir     int
	spectra [8][]float32
}

// NewBundle returns a bundle for the moments lead [s] after the start of each frame.
func (d *Driver) NewBundle(leads []float64) *Bundle {
	b := &Bundle{d: d, spectra: make([]float32, kernel.Lanes*2*d.padded)}
	b.points = make([]float32, len(b.spectra))
	size := d.fourier.Size
	b.x = make([]float32, size*kernel.Lanes)
	taken := make([]bool, size)
	for i := range d.amp {
		k := (d.first + i) % size // frequencies beyond the Nyquist frequency fold
		b.at = append(b.at, d.fourier.Place[k], d.fourier.Place[(size-k)%size])
		if d.first+i < (size+1)/2 {
			b.alone = i + 1
			taken[b.at[2*i]], taken[b.at[2*i+1]] = true, true
		}
	}
	for p, is := range taken {
		if !is {
			b.blank = append(b.blank, int32(p))
		}
	}
	for _, lead := range leads {
		turn := make([]float32, 0, len(b.at))
		for i := range d.amp {
			s, c := math.Sincos(2 * math.Pi * float64(d.first+i) * d.step * lead)
			turn = append(turn, float32(c/2), float32(s/2))
		}
		b.turns = append(b.turns, turn)
	}
	return b
}

// Clear makes all lanes still.
func (b *Bundle) Clear() {
	b.moving = [kernel.Lanes]bool{}
	b.ready = false
}

// Add adds to a lane one of the (two, numbered) trains that has travelled tau [s] from a
// footpoint, or towards it, with the amplitude of each polarisation [km/s].
func (b *Bundle) Add(lane, number int, colatitude, azimuth float64, dir int, tau float64, amplitude [2]float64) {
	d := b.d
	n := 2 * d.padded
	around := &b.last[number]
	var coef [8]float32
	for i, s := range d.Footpoint(colatitude, azimuth) {
		if s.ID != around.sites[i] || dir != around.dir || around.spectra[2*i] == nil {
			both := b.siteSpectra(s.ID, dir)
			around.sites[i], around.spectra[2*i], around.spectra[2*i+1] = s.ID, both[:n], both[n:]
		}
		coef[2*i], coef[2*i+1] = float32(amplitude[0]*s.Weight), float32(amplitude[1]*s.Weight)
	}
	around.dir = dir
	start, step := d.carrier(tau)
	kernel.Carry(b.spectra[lane*n:(lane+1)*n], &around.spectra, &coef, &start, step, b.moving[lane])
	b.moving[lane] = true
}

func (b *Bundle) siteSpectra(site uint64, dir int) []float32 {
	key := site<<1 | uint64(dir)
	m := &b.memo[key*0x9e3779b97f4a7c15>>(64-memoBits)]
	if m.key != key+1 {
		m.key, m.u = key+1, b.d.spectra(site, dir)
	}
	return m.u
}

// carrier returns the filter of travel time tau at the first eight bins, and the ratio
// from each bin to the eighth after it.
func (d *Driver) carrier(tau float64) (start [16]float32, step [2]float32) {
	q := d.filter(d.step, tau)
	z := complex(1, 0)
	for n, square := d.first, q; n > 0; n, square = n>>1, square*square {
		if n&1 == 1 {
			z *= square
		}
	}
	for l := range 8 {
		start[l], start[8+l] = float32(real(z)), float32(imag(z))
		z *= q
	}
	q *= q
	q *= q
	q *= q
	return start, [2]float32{float32(real(q)), float32(imag(q))}
}

// filter is delay and damping at one frequency.
func (d *Driver) filter(f, tau float64) complex128 {
	return complex(d.damping(f, tau), 0) * turn(-f*tau)
}

// Velocity returns the Doppler velocities [km/s] at every frame plus a lead, point by
// point. They are good until the next call.
func (b *Bundle) Velocity(lead int) []float32 {
	if !b.ready {
		n := 2 * b.d.padded
		for lane, moving := range b.moving {
			if !moving {
				clear(b.spectra[lane*n : (lane+1)*n])
			}
		}
		kernel.Transpose(b.points, b.spectra)
		b.ready = true
	}
	for _, p := range b.blank {
		*(*[kernel.Lanes]float32)(b.x[p*kernel.Lanes:]) = [kernel.Lanes]float32{}
	}
	turn, bins := b.turns[lead], b.d.padded
	kernel.Assemble(b.x, b.points, bins, turn[:2*b.alone], b.at[:2*b.alone], false)
	kernel.Assemble(b.x, b.points[b.alone*kernel.Lanes:], bins, turn[2*b.alone:], b.at[2*b.alone:], true)
	b.d.fourier.Transform(b.x)
	return b.x[:b.d.s.Frames*kernel.Lanes]
}
