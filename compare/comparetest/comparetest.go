// Package comparetest makes pairs of truth and inferred maps for tests of the
// verdict and of the report. The data are INVENTED: smooth formulas and random
// numbers, no corona was seen and no inversion was run. Only the relation between
// field, speed and density is real, so that the identity must hold.
package comparetest

import (
	"math"
	"math/rand/v2"

	"offplane/compare"
	"offplane/model"
	"offplane/scenarios/units"
	"offplane/synth/obs"
)

// A Case is one invented comparison.
type Case struct {
	Grid            obs.Grid
	Truth, Inferred obs.Maps
	Options         compare.Options
}

// Ring returns an n x n pixel image whose full ring 1.05..1.35 solar radii nearly
// fills it.
func Ring(n int) *Case { return build(n, n, 2.72/float64(n), 0, 0, 0, 360) }

// Wedge returns a small field: position angles 60..100 deg, east limb, with step
// solar radii a pixel.
func Wedge(step float64) *Case {
	nx, ny := int(0.70/step), int(1.0/step)
	return build(nx, ny, step, 1.0, 0.2, 60, 100)
}

// build invents a case; the image's centre is east solar radii east and north
// solar radii north of disc centre.
func build(nx, ny int, step, east, north, pa0, pa1 float64) *Case {
	const distance = units.AU / units.SolarRadius
	c := &Case{
		Grid: obs.Grid{
			Nx: nx, Ny: ny, Pixel: step / distance / obs.Arcsec, Distance: distance,
			CentreX: float64(nx+1)/2 + east/step, CentreY: float64(ny+1)/2 - north/step,
		},
		Options: compare.Options{
			Scenario: "invented", Seed: 7, Version: "0.0.0", SHA256: "0000000000000000000000000000000000000000000000000000000000000000",
			Estimator: "lag", Mu: 1.27, MuTrue: 1.167,
		},
	}
	size := nx * ny
	add := func(ms *obs.Maps, name, unit string) []float32 {
		m := obs.Map{Name: name, Unit: unit, About: "invented", Data: make([]float32, size)}
		for i := range m.Data {
			m.Data[i] = float32(math.NaN())
		}
		*ms = append(*ms, m)
		return m.Data
	}
	t := &c.Truth
	bSky, bEmis, bWave, bTot := add(t, "B_SKY", "G"), add(t, "B_EMIS", "G"), add(t, "B_WAVE", "G"), add(t, "BTOT_SKY", "G")
	nSky, nEmis, nKink := add(t, "NE_SKY", "cm-3"), add(t, "NE_EMIS", "cm-3"), add(t, "NE_KINK", "cm-3")
	vSky, vWave, angSky, local := add(t, "SPEED_SKY", "km/s"), add(t, "SPEED_WAVE", "km/s"), add(t, "ANGLE_SKY", "deg"), add(t, "DOPPLER_LOCAL", "km/s")
	structure := make([]int32, size)
	*t = append(*t, obs.Map{Name: "STRUCTURE", Ints: structure, Codes: []obs.Code{
		{Value: model.Closed, Name: "closed"}, {Value: model.Open, Name: "open"}, {Value: model.Sheet, Name: "near the sheet"}, {Value: model.ActiveRegion, Name: "active region"}}})
	m := &c.Inferred
	b, ne, v, ang, rms, coherence := add(m, "B", "G"), add(m, "NE", "cm-3"), add(m, "SPEED", "km/s"), add(m, "ANGLE", "deg"), add(m, "DOPPLER_RMS", "km/s"), add(m, "COHERENCE", "")
	flag := make([]int32, size)
	*m = append(*m, obs.Map{Name: "FLAG", Ints: flag, Codes: []obs.Code{
		{Value: 1, Name: "incoherent", About: "coherence below the threshold"}, {Value: 2, Name: "short", About: "track ends at the rim of the field"}}})

	rnd := rand.New(rand.NewPCG(1, 2))
	// Alfven speed [km/s] of field bb [G] at density n: B = v sqrt(4 pi mu m_p n).
	alfven := func(bb, mu, n float64) float64 { return bb / math.Sqrt(4*math.Pi*mu*units.ProtonMass*n) / 1e5 }
	for i := range size {
		r, pa := c.Grid.Polar(i%nx, i/nx)
		g1, g2, g3 := rnd.NormFloat64(), rnd.NormFloat64(), rnd.NormFloat64()
		if r < 1.05 || r > 1.35 || pa < pa0 || pa > pa1 {
			continue
		}
		lat := (90 - pa) * math.Pi / 180
		belt := math.Exp(-2 * math.Pow(math.Sin(lat), 2))
		field := 4.2 * math.Pow(r, -3) * (1 + 0.4*math.Sin(lat)*math.Sin(lat))
		n := 1e8 * (2.99*math.Pow(r, -16) + 1.55*math.Pow(r, -6)) * (0.25 + 0.75*belt)
		bSky[i], bTot[i] = float32(field), float32(field*1.03)
		bEmis[i], bWave[i] = float32(field*0.93), float32(field*0.97)
		nSky[i], nEmis[i], nKink[i] = float32(n), float32(n*0.8), float32(n*(0.9+0.2*(r-1.05)))
		speed := alfven(field, c.Options.MuTrue, float64(nKink[i]))
		vSky[i], vWave[i] = float32(speed), float32(speed*1.03)
		angSky[i] = float32(math.Mod(pa+20*math.Sin(4*lat)+360, 180))
		local[i] = float32(28 * math.Pow(n/1e8, -0.25))
		switch {
		case belt > 0.75:
			structure[i] = model.Closed
		case belt > 0.65:
			structure[i] = model.Sheet
		default:
			structure[i] = model.Open
		}
		coherence[i] = float32(math.Max(0.1, 0.95-1.2*(r-1.05)-0.25*math.Abs(math.Sin(3*lat))+0.04*g3))
		rms[i] = local[i] * float32(0.12*math.Exp(0.1*g1))
		ang[i] = float32(math.Mod(float64(angSky[i])+6*g2+180, 180))
		n2 := n * 0.74 * math.Exp(0.08*g2+0.05*math.Sin(5*lat))
		ne[i] = float32(n2)
		if coherence[i] < 0.5 {
			flag[i] = 1
			continue
		}
		if r > 1.32 {
			flag[i] |= 2
		}
		speed *= (1.05 + 0.3*(r-1.05)) * math.Exp(0.1*g1+0.06*math.Cos(7*lat))
		v[i] = float32(speed)
		b[i] = float32(speed * 1e5 * math.Sqrt(4*math.Pi*c.Options.Mu*units.ProtonMass*n2))
	}
	return c
}
