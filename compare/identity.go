package compare

import (
	"math"

	"offplane/synth/obs"
)

// Parts are the terms of ln(B/B_SKY) of one pixel. With B = v sqrt(4 pi mu m_p n)
// on the inferred side, and on the true side B_SKY = SPEED_SKY
// sqrt(4 pi mu_true m_p NE_KINK) because the kink wave runs at the speed of the
// density it feels, the first is the sum of the others:
//
//	ln(B/B_SKY) = ln(v/SPEED_SKY) + 1/2 ln(n/NE_SKY) + 1/2 ln(mu/mu_true) - 1/2 ln(NE_KINK/NE_SKY)
//
// The speed's part is split once more. SPEED_PLANE is what the same tracker finds on the
// same tracks where only the plane of the sky emits and no camera disturbs (see
// trial.Plane), SPEED_WAVE the kink speed along the line of sight as the wave power
// weighs it; what is left over is the camera, and that method and line of sight act
// on each other:
//
//	ln(v/SPEED_SKY) = ln(SPEED_PLANE/SPEED_SKY) + ln(SPEED_WAVE/SPEED_SKY) + rest
//
// A part is NaN where one of its maps has no positive value.
type Parts struct {
	Field   float64 // ln(B/B_SKY)
	Speed   float64 // ln(v/SPEED_SKY)
	Density float64 // 1/2 ln(n/NE_SKY)
	Mu      float64 // 1/2 ln(mu/mu_true)
	Kink    float64 // -1/2 ln(NE_KINK/NE_SKY)

	// The parts of Speed.
	Method float64 // ln(SPEED_PLANE/SPEED_SKY): the tracker's own bias
	Sight  float64 // ln(SPEED_WAVE/SPEED_SKY): the line of sight
	Rest   float64 // Speed - Method - Sight
}

// Residual returns what the identity leaves over: rounding of the maps to
// float32, a few 1e-7, if field and wave model agree.
func (p Parts) Residual() float64 { return p.Field - (p.Speed + p.Density + p.Mu + p.Kink) }

// An Identity splits the bias of B pixel by pixel.
type Identity struct {
	Plane []float32 // SPEED_PLANE [km/s]; nil: not known, and Method and Rest are NaN

	b, bSky, v, vSky, vWave, n, nSky, kink []float32
	mu                                     float64
}

// NewIdentity takes the maps B, SPEED, NE and B_SKY, SPEED_SKY, NE_SKY, NE_KINK;
// parts that lack one are NaN. mu and muTrue are rho/(m_p n_e) of the inversion
// and of the corona.
func NewIdentity(truth, inferred obs.Maps, mu, muTrue float64) *Identity {
	data := func(ms obs.Maps, name string) []float32 {
		if m := ms.Get(name); m != nil {
			return m.Data
		}
		return nil
	}
	id := &Identity{
		b: data(inferred, "B"), bSky: data(truth, "B_SKY"),
		v: data(inferred, "SPEED"), vSky: data(truth, "SPEED_SKY"), vWave: data(truth, "SPEED_WAVE"),
		n: data(inferred, "NE"), nSky: data(truth, "NE_SKY"), kink: data(truth, "NE_KINK"),
		mu: math.NaN(),
	}
	if mu > 0 && muTrue > 0 {
		id.mu = 0.5 * math.Log(mu/muTrue)
	}
	return id
}

// At returns the parts of the pixel with raster index i.
func (id *Identity) At(i int) Parts {
	ln := func(a, b []float32) float64 {
		if a == nil || b == nil {
			return math.NaN()
		}
		return math.Log(ratio(a[i], b[i]))
	}
	p := Parts{
		Field:   ln(id.b, id.bSky),
		Speed:   ln(id.v, id.vSky),
		Density: 0.5 * ln(id.n, id.nSky),
		Mu:      id.mu,
		Kink:    -0.5 * ln(id.kink, id.nSky),
		Method:  ln(id.Plane, id.vSky),
		Sight:   ln(id.vWave, id.vSky),
	}
	p.Rest = p.Speed - p.Method - p.Sight
	return p
}
