package explain

import (
	"cmp"
	"slices"

	"offplane/synth"
)

// sightOf sums up a line of sight.
func sightOf(v *synth.Sight) Sight {
	t := func(name string) Number { return Number(v.Truth[name]) }
	s := Sight{
		Depth50: t("DEPTH50"), Depth90: t("DEPTH90"), NearSky: t("NEAR_SKY"),
		WaveDepth50: Number(v.WaveDepth[0]), WaveDepth90: Number(v.WaveDepth[1]), WaveNear: Number(v.WaveNear),
		Tilt: Number(v.Samples[v.Sky].Tilt), Inward: Number(v.Inward),
		Structures: structures(v), Regions: regions(v),
	}
	for i := range v.Samples {
		q := &v.Samples[i]
		s.Centre += Number(q.Emission * q.X)
		s.WaveCentre += Number(q.Wave * q.X)
		s.WaveTilt += Number(q.Wave * q.Tilt)
		if q.Point.Beta > 1 {
			s.HighBeta += Number(q.Emission)
		}
	}
	return s
}

const (
	// saddle is how deep the emission has to fall between two peaks, over the lesser of
	// them, for these to count as two structures.
	saddle = 0.9
	// leastStructure is the share of emission or wave power that makes a structure worth
	// telling of.
	leastStructure = 0.02
)

// structures finds the separate peaks of the emissivity of the 1074.7 nm line without
// strands, and what belongs to each up to the valleys around it.
func structures(v *synth.Sight) []Structure {
	n := len(v.Samples)
	j := func(i int) float64 { return v.Samples[i].Smooth[0] }
	type peak struct{ at, from, to int } // samples from..to-1
	var ps []peak
	for i := range n {
		if (i == 0 || j(i) > j(i-1)) && (i == n-1 || j(i) >= j(i+1)) {
			ps = append(ps, peak{at: i})
		}
	}
	valley := func(a, b int) int {
		low := a
		for i := a; i <= b; i++ {
			if j(i) < j(low) {
				low = i
			}
		}
		return low
	}
	for { // merge the two that are least apart, as long as they are no two
		worst, which := saddle, -1
		for k := range len(ps) - 1 {
			if d := j(valley(ps[k].at, ps[k+1].at)) / min(j(ps[k].at), j(ps[k+1].at)); d > worst {
				worst, which = d, k
			}
		}
		if which < 0 {
			break
		}
		if j(ps[which+1].at) > j(ps[which].at) {
			ps[which].at = ps[which+1].at
		}
		ps = slices.Delete(ps, which+1, which+2)
	}
	for k := range ps {
		if ps[k].to = n; k+1 < len(ps) {
			ps[k].to = valley(ps[k].at, ps[k+1].at)
			ps[k+1].from = ps[k].to
		}
	}
	var out []Structure
	for _, p := range ps {
		q := &v.Samples[p.at]
		s := Structure{
			X: Number(q.X), From: Number(v.Samples[p.from].X), To: Number(v.Samples[min(p.to, n-1)].X),
			Ne: Number(q.Point.Mean), Height: Number(q.Point.R), Class: classes[q.Point.Structure()],
			Main: p.from <= v.Sky && v.Sky < p.to,
		}
		for i := p.from; i < p.to; i++ {
			s.Emission += Number(v.Samples[i].Emission)
			s.Wave += Number(v.Samples[i].Wave)
		}
		if s.Main || s.Emission >= leastStructure || s.Wave >= leastStructure {
			out = append(out, s)
		}
	}
	slices.SortStableFunc(out, func(a, b Structure) int { return cmp.Compare(b.Emission, a.Emission) })
	return out
}

// regions splits the line of sight by the class of its field lines.
func regions(v *synth.Sight) []Region {
	var out []Region
	last := int32(-1)
	for i := range v.Samples {
		q := &v.Samples[i]
		if c := q.Point.Structure(); c != last {
			if n := len(out); n > 0 {
				out[n-1].To = Number((v.Samples[i-1].X + q.X) / 2)
			}
			out = append(out, Region{Class: classes[c], From: Number((v.Samples[max(i-1, 0)].X + q.X) / 2)})
			last = c
		}
		r := &out[len(out)-1]
		r.Emission += Number(q.Emission)
		r.Wave += Number(q.Wave)
		r.To = Number(q.X)
	}
	return out
}

func sightCurves(v *synth.Sight) SightCurves {
	n := len(v.Samples)
	at := func(of func(q *synth.SightSample) float64) []Number {
		x := make([]float64, n)
		for i := range x {
			x[i] = of(&v.Samples[i])
		}
		return curve(x)
	}
	second := 0.0
	for i := range v.Samples {
		second += v.Samples[i].Emissivity[1] * v.Samples[i].Length
	}
	return SightCurves{
		X:         at(func(q *synth.SightSample) float64 { return q.X }),
		Emission:  at(func(q *synth.SightSample) float64 { return q.Emission / q.Length }),
		Emission2: at(func(q *synth.SightSample) float64 { return q.Emissivity[1] / second }),
		Wave:      at(func(q *synth.SightSample) float64 { return q.Wave / q.Length }),
		Ne:        at(func(q *synth.SightSample) float64 { return q.Point.N }),
		Field:     at(func(q *synth.SightSample) float64 { return q.Field }),
		Tilt:      at(func(q *synth.SightSample) float64 { return q.Tilt }),
		Speed:     at(func(q *synth.SightSample) float64 { return q.Speed }),
		T:         at(func(q *synth.SightSample) float64 { return q.Point.T }),
	}
}

// densityOf tells what the line ratio sees, without noise, at projected distance r.
func (s *Session) densityOf(v *synth.Sight, r float64) Density {
	var light, smooth, weighted [2]float64
	for i := range v.Samples {
		q := &v.Samples[i]
		for l := range 2 {
			light[l] += q.Emissivity[l] * q.Length
			smooth[l] += q.Smooth[l] * q.Length
			weighted[l] += q.Emissivity[l] * q.Length * q.Point.N
		}
	}
	from := func(j [2]float64) Number {
		n, _, _ := s.inverter.Density(j[1]/j[0], r) // NaN if out of range
		return Number(n)
	}
	sky := &v.Samples[v.Sky]
	return Density{
		Line1: Number(weighted[0] / light[0]), Line2: Number(weighted[1] / light[1]),
		Sight: from(light), Smooth: from(smooth), Local: from(sky.Smooth), Mean: Number(sky.Point.Mean),
	}
}
