// Package random gives addressed random numbers: every number is a pure function
// of where it is used (seed, surface cell, polarisation, pixel, frame, ...), so
// tiles, workers and shards cannot change it. It is the only importer of
// golang.org/x/exp/rand.
package random

import (
	"math"

	//lint:ignore SA1019 the version is pinned in go.mod, so its streams cannot change under us; math/rand/v2 does not promise that
	"golang.org/x/exp/rand"
)

// mix is the finaliser of splitmix64 (Steele, Lea & Flood 2014, OOPSLA, 453):
// consecutive addresses give unrelated seeds.
func mix(z uint64) uint64 {
	z += 0x9e3779b97f4a7c15
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

// Hash maps an address to 64 random bits.
func Hash(address ...uint64) uint64 {
	h := uint64(0x243f6a8885a308d3)
	for _, a := range address {
		h = mix(h ^ mix(a))
	}
	return h
}

// A Stream is the sequence of random numbers that belongs to one address. It is
// not safe for concurrent use.
type Stream struct{ r *rand.Rand }

// At returns the stream of an address.
func At(address ...uint64) Stream {
	var src rand.PCGSource
	src.Seed(Hash(address...))
	return Stream{rand.New(&src)}
}

// Normal returns the next standard normal number.
func (s Stream) Normal() float64 { return s.r.NormFloat64() }

// Uniform returns the next number in [0, 1).
func (s Stream) Uniform() float64 { return s.r.Float64() }

// Key is the hash of the leading part of an address, for loops over its last part.
type Key uint64

// NewKey returns the key of the leading part of an address.
func NewKey(address ...uint64) Key { return Key(Hash(address...)) }

// Normal returns the standard normal number at the address (key, i), by the
// inverse of the normal distribution function: no state, no order. Within two standard
// deviations that is read from a table by Hermite's cubics, good to 2e-8 (tested).
func (k Key) Normal(i uint64) float64 {
	u := k.Uniform(i)
	x := u * cells
	j := int(x)
	if j < inner || j >= cells-inner {
		return quantile(u)
	}
	t := x - float64(j)
	a, b := &inverse[j], &inverse[j+1]
	d := b[0] - a[0]
	return a[0] + t*(a[1]+t*(3*d-2*a[1]-b[1]+t*(a[1]+b[1]-2*d)))
}

// quantile is the inverse of the normal distribution function.
func quantile(u float64) float64 { return math.Sqrt2 * math.Erfinv(2*u-1) }

const (
	cells = 1024
	inner = 24 // the first cell of the table: two standard deviations
)

// inverse holds quantile and its slope times a cell at the nodes.
var inverse = func() (t [cells + 1][2]float64) {
	for j := inner; j <= cells-inner; j++ {
		z := quantile(float64(j) / cells)
		t[j] = [2]float64{z, math.Sqrt(2*math.Pi) * math.Exp(z*z/2) / cells}
	}
	return t
}()

// Uniform returns the number in (0, 1) at the address (key, i).
func (k Key) Uniform(i uint64) float64 {
	return (float64(mix(uint64(k)^mix(i))>>11) + 0.5) * 0x1p-53
}

// Poisson returns the Poisson number of the given mean at the address (key, i), by the
// inverse of the distribution function: exact below a mean of 50; above by its
// expansion about the normal one (Cornish & Fisher 1938, Rev. Inst. Int. Stat. 5, 307,
// from memory), mean and variance exact to 1e-3 (tested).
func (k Key) Poisson(i uint64, mean float64) float64 {
	switch {
	case !(mean > 0):
		return 0
	case mean < 50:
		u := k.Uniform(i)
		p := math.Exp(-mean)
		n := 0.0
		for sum := p; u > sum && p > 0; sum += p {
			n++
			p *= mean / n
		}
		return n
	}
	z, s := k.Normal(i), math.Sqrt(mean-1.0/12) // rounding adds 1/12 to the variance
	return math.Max(0, math.Round(mean+s*z+(z*z-1)/6+(z-z*z*z)/(72*s)))
}
