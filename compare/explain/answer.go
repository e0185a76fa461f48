package explain

import (
	"math"
	"strconv"

	"offplane/invert"
	"offplane/model"
	"offplane/scenarios"
	"offplane/synth"
)

var nan = math.NaN()

// classes names the codes of STRUCTURE.
var classes = map[int32]string{model.Closed: "closed", model.Open: "open", model.Sheet: "sheet", model.ActiveRegion: "active"}

// answer puts the parts together.
func (s *Session) answer(ix, iy int, sight *synth.Sight, d *invert.Diagnosis) (*Pixel, error) {
	i := iy*s.Grid.Nx + ix
	p := &Pixel{
		Schema: 1, Scenario: s.Scenario.Name, ScenarioSHA256: s.Scenario.SHA256,
		Flags: []Flag{}, Cautions: []string{}, Causes: []Cause{}, Estimators: []Estimator{},
	}
	tx, ty := s.Grid.Helioprojective(ix, iy)
	r, pa := s.Grid.Polar(ix, iy)
	p.Place = Place{ix + 1, iy + 1, Number(tx), Number(ty), Number(r), Number(pa), classes[sight.Class]}
	p.Truth = truthOf(sight)
	p.Inferred = s.inferredOf(i)
	p.Valid = finite(p.Inferred.Field)
	p.Ratios = ratiosOf(p)
	q := s.identity.At(i)
	p.Identity = Identity{Number(q.Field), Number(q.Speed), Number(q.Density), Number(q.Mu), Number(q.Kink), Number(q.Residual())}
	p.Sight = sightOf(sight)
	p.Curves.Sight = sightCurves(sight)
	p.Density = s.densityOf(sight, r)
	if err := s.follow(p, sight, d, i); err != nil {
		return nil, err
	}
	p.Noise = noiseOf(p, d, i, &s.Scenario.Scenario.Camera)
	p.Causes = s.causesOf(p, sight)
	p.Flags = s.flagsOf(p, i)
	s.caution(p, sight, i)
	p.Verdict = verdict(p)
	return p, nil
}

func truthOf(v *synth.Sight) Truth {
	t := func(name string) Number { return Number(v.Truth[name]) }
	return Truth{
		FieldSky: t("B_SKY"), FieldEmission: t("B_EMIS"), FieldWave: t("B_WAVE"), FieldTotal: t("BTOT_SKY"),
		NeSky: t("NE_SKY"), NeEmission: t("NE_EMIS"), NeKink: t("NE_KINK"),
		SpeedSky: t("SPEED_SKY"), SpeedWave: t("SPEED_WAVE"), AngleSky: t("ANGLE_SKY"), DopplerLocal: t("DOPPLER_LOCAL"),
	}
}

func (s *Session) inferredOf(i int) Inferred {
	m := func(name string) Number {
		if q := s.Inferred.Get(name); q != nil && q.Data != nil {
			return single(q.Data[i])
		}
		return Number(nan)
	}
	return Inferred{
		Field: m("B"), FieldErr: m("B_ERR"), Ne: m("NE"), NeErr: m("NE_ERR"), Ratio: m("RATIO"),
		Speed: m("SPEED"), SpeedErr: m("SPEED_ERR"), SpeedIn: m("SPEED_IN"), Angle: m("ANGLE"), AngleErr: m("ANGLE_ERR"),
		Coherence: m("COHERENCE"), DopplerRMS: m("DOPPLER_RMS"), Width: m("WIDTH"),
	}
}

func ratiosOf(p *Pixel) Ratios {
	t, v := &p.Truth, &p.Inferred
	diff := Number(nan)
	if a := float64(v.Angle - t.AngleSky); !math.IsNaN(a) {
		diff = Number(fold(a))
	}
	return Ratios{
		FieldSky: v.Field / t.FieldSky, FieldEmission: v.Field / t.FieldEmission, FieldWave: v.Field / t.FieldWave, FieldTotal: v.Field / t.FieldTotal,
		SpeedSky: v.Speed / t.SpeedSky, SpeedWave: v.Speed / t.SpeedWave,
		DensitySky: v.Ne / t.NeSky, DensityEmission: v.Ne / t.NeEmission, AngleDiff: diff,
	}
}

// fold brings the difference of two axes [deg] to -90..90.
func fold(a float64) float64 { return a - 180*math.Round(a/180) }

// hourScatter is the scatter of the speed between realisations of an hour, a fraction; it
// falls as one over the root of the duration. Derived: own simulations.
const hourScatter = 0.05

func noiseOf(p *Pixel, d *invert.Diagnosis, i int, c *scenarios.Camera) Noise {
	noisy := c.Noise
	v := &p.Inferred
	n := Noise{
		Doppler: v.DopplerRMS, InBand: Number(nan), SignalNoise: Number(nan), Reduction: v.DopplerRMS / p.Truth.DopplerLocal,
		SpeedErr: v.SpeedErr / v.Speed, SpeedScatter: Number(hourScatter * math.Sqrt(3600/float64(c.Duration))), NeErr: v.NeErr / v.Ne, FieldErr: v.FieldErr / v.Field, NoiselessRun: !noisy,
	}
	if d == nil || !noisy {
		return n
	}
	// The rms of the series holds waves and noise; DOPPLER_RMS the waves alone.
	total := float64(d.Maps.Get("DOPPLER_RMS").Data[i])
	waves := float64(v.DopplerRMS)
	if math.IsNaN(waves) {
		waves = 0 // the noise is at least all there is
	}
	n.InBand = Number(math.Sqrt(max(total*total-waves*waves, 0)))
	n.SignalNoise = Number(waves) / n.InBand
	return n
}

func finite(x Number) bool { return !math.IsNaN(float64(x)) && !math.IsInf(float64(x), 0) }

// single returns a float32 as the decimal that it stands for.
func single(x float32) Number {
	v, _ := strconv.ParseFloat(strconv.FormatFloat(float64(x), 'g', -1, 32), 64)
	return Number(v)
}

// curve rounds numbers that are only to be drawn to five digits.
func curve[T float32 | float64](xs []T) []Number {
	out := make([]Number, len(xs))
	for i, x := range xs {
		v, _ := strconv.ParseFloat(strconv.FormatFloat(float64(x), 'g', 5, 64), 64)
		out[i] = Number(v)
	}
	return out
}
