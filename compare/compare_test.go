package compare_test

import (
	"bytes"
	"encoding/json"
	"math"
	"slices"
	"strings"
	"testing"

	"offplane/compare"
	"offplane/compare/comparetest"
	"offplane/compare/stat"
	"offplane/synth/obs"
)

func verdict(t *testing.T, c *comparetest.Case) *compare.Verdict {
	t.Helper()
	v, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, c.Options)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// without returns the maps but one.
func without(ms obs.Maps, name string) obs.Maps {
	return slices.DeleteFunc(slices.Clone(ms), func(m obs.Map) bool { return m.Name == name })
}

// The identity is algebra: only the rounding of six float32 maps may be left,
// each at most 2^-24 = 6e-8 relative.
func TestIdentityCloses(t *testing.T) {
	c := comparetest.Ring(160)
	v := verdict(t, c)
	id := compare.NewIdentity(c.Truth, c.Inferred, c.Options.Mu, c.Options.MuTrue)
	n, worst := 0, 0.0
	for i, ok := range v.Valid {
		if ok {
			n++
			worst = max(worst, math.Abs(id.At(i).Residual()))
		}
	}
	if n < 1000 || worst > 1e-6 {
		t.Errorf("%d pixels, largest residual %g, want below 1e-6", n, worst)
	}
	if got := float64(v.Summary.Identity.ResidualMax); got != worst {
		t.Errorf("residual_max %g, want %g", got, worst)
	}
	// The identity must see a wave model that disagrees with the field: 1 % in
	// SPEED_SKY is ln 1.01.
	for i := range c.Truth.Get("SPEED_SKY").Data {
		c.Truth.Get("SPEED_SKY").Data[i] *= 1.01
	}
	if got := float64(verdict(t, c).Summary.Identity.ResidualMax); math.Abs(got-math.Log(1.01)) > 1e-6 {
		t.Errorf("residual_max %g with a wrong wave model, want ln 1.01 = %g", got, math.Log(1.01))
	}
}

// A tracker that on one plane finds 0.9 of the speed: ln 0.9 is the method's, the
// invented 1.03 of SPEED_WAVE the line of sight's, and pixel by pixel the three parts are
// the speed's.
func TestMethodAgainstSun(t *testing.T) {
	c := comparetest.Ring(160)
	if s := verdict(t, c).Summary; s.Identity.Method != nil || s.Identity.Rest != nil || s.Identity.Sight == nil {
		t.Error("without a one-plane run the method is not known, the line of sight is")
	}
	sky := c.Truth.Get("SPEED_SKY").Data
	c.Options.Plane = make([]float32, len(sky))
	for i, v := range sky {
		c.Options.Plane[i] = 0.9 * v
	}
	v := verdict(t, c)
	for _, id := range []compare.LnParts{v.Summary.Identity, v.Summary.Heights[2].Identity, v.Summary.Structure.Open.Identity} {
		if math.Abs(id.Method.Median-math.Log(0.9)) > 1e-6 || math.Abs(id.Sight.Median-math.Log(1.03)) > 1e-6 {
			t.Errorf("method %.7f, want ln 0.9; line of sight %.7f, want ln 1.03", id.Method.Median, id.Sight.Median)
		}
		if d := id.Rest.Median - (id.Speed.Median - math.Log(0.9*1.03)); math.Abs(d) > 1e-6 {
			t.Errorf("the rest is %g off what is left of the speed", d)
		}
	}
	if m := v.Maps.Get("METHOD_RATIO"); m == nil || math.Abs(stat.Median(floats(m.Data))-0.9) > 1e-6 {
		t.Error("METHOD_RATIO is not 0.9")
	}
	c.Options.Plane = c.Options.Plane[1:]
	if _, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, c.Options); err == nil {
		t.Error("one pixel too few was taken")
	}
}

func floats(x []float32) []float64 {
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = float64(v)
	}
	return y
}

// The medians of the invented ratios are known: factors of the formulas.
func TestRatios(t *testing.T) {
	c := comparetest.Ring(160)
	s := verdict(t, c).Summary
	near := func(name string, got *stat.Summary, want, tol float64) {
		t.Helper()
		if got == nil || math.Abs(got.Median-want) > tol {
			t.Errorf("%s: %+v, want median %g +- %g", name, got, want, tol)
		}
	}
	near("density sky", s.Ratios.Density.Sky, 0.74, 0.015)
	near("density emission", s.Ratios.Density.Emission, 0.74/0.8, 0.02)
	near("half ln mu", &stat.Summary{Median: float64(s.Identity.Mu)}, 0.5*math.Log(1.27/1.167), 1e-12)
	if q := s.Ratios.Field.Total.Median * 1.03 / s.Ratios.Field.Sky.Median; math.Abs(q-1) > 1e-6 {
		t.Errorf("total and sky ratios differ by %g, want the invented 1.03", q)
	}
	if q := s.Ratios.Speed.Wave.Median * 1.03 / s.Ratios.Speed.Sky.Median; math.Abs(q-1) > 1e-6 {
		t.Errorf("speed ratios differ by %g, want the invented 1.03", q)
	}
	// |N(0, 6 deg)| has the median 0.6745 sigma; its sample median has the standard
	// error 1/(2 f sqrt(n)), f = 2 phi(0.6745)/sigma (derived). Four of them.
	f := 2 * 0.31778 / 6
	near("angle", s.AngleError, 0.6745*6, 4/(2*f*math.Sqrt(float64(s.Pixels.Valid))))
	near("signed angle", s.AngleSigned, 0, 0.2)
	near("doppler", s.DopplerRMS, 0.12, 0.002)

	// Bins and structures partition the field.
	total, valid := 0, 0
	for _, h := range s.Heights {
		total, valid = total+h.Total, valid+h.Valid
	}
	if total != s.Pixels.Total || valid != s.Pixels.Valid || len(s.Heights) != 6 {
		t.Errorf("%d bins hold %d / %d pixels, field %d / %d", len(s.Heights), valid, total, s.Pixels.Valid, s.Pixels.Total)
	}
	st := s.Structure
	if n := st.Open.Total + st.Closed.Total + st.NearSheet.Total + st.ActiveRegion.Total; n != s.Pixels.Total || st.ActiveRegion.Total != 0 {
		t.Errorf("structures hold %d pixels, field %d", n, s.Pixels.Total)
	}
	if s.Heights[0].From != 1.05 || s.Heights[5].To != 1.35 {
		t.Errorf("bins run from %g to %g", s.Heights[0].From, s.Heights[5].To)
	}
	if n := s.Ratios.Field.Sky.Count; n != s.Pixels.Valid {
		t.Errorf("field ratio of %d pixels, %d are valid", n, s.Pixels.Valid)
	}
}

func TestMapsMatchSummary(t *testing.T) {
	c := comparetest.Wedge(0.02)
	v := verdict(t, c)
	m := v.Maps.Get("B_RATIO")
	x := make([]float64, len(m.Data))
	for i, q := range m.Data {
		x[i] = float64(q)
		if v.Valid[i] == math.IsNaN(x[i]) {
			t.Fatalf("pixel %d: valid %v, ratio %g", i, v.Valid[i], q)
		}
	}
	if a, b := stat.Median(x), v.Summary.Ratios.Field.Sky.Median; math.Abs(a/b-1) > 1e-7 {
		t.Errorf("median of the map %g, of the summary %g", a, b)
	}
	var names []string
	for _, m := range v.Maps {
		names = append(names, m.Name+"["+m.Unit+"]")
	}
	if got := strings.Join(names, " "); got != "B_RATIO[] SPEED_RATIO[] NE_RATIO[] ANGLE_DIFF[deg]" {
		t.Error(got)
	}
}

func TestAngleDiff(t *testing.T) {
	for _, c := range []struct{ inferred, truth, want float64 }{
		{10, 5, 5}, {5, 10, -5}, {1, 179, 2}, {179, 1, -2}, {90, 0, 90}, {0, 90, 90},
		{0, 0, 0}, {180, 0, 0}, {100, 5, -85}, {-10, 350, 0}, {720, 1, -1},
	} {
		if got := compare.AngleDiff(c.inferred, c.truth); got != c.want {
			t.Errorf("AngleDiff(%g, %g) = %g, want %g", c.inferred, c.truth, got, c.want)
		}
	}
	if !math.IsNaN(compare.AngleDiff(math.Inf(1), 0)) || !math.IsNaN(compare.AngleDiff(0, math.NaN())) {
		t.Error("no direction must give NaN")
	}
}

func TestEdges(t *testing.T) {
	for _, c := range []struct {
		lo, hi float64
		want   []float64
	}{
		{1.0512, 1.3488, []float64{1.05, 1.1, 1.15, 1.2, 1.25, 1.3, 1.35}},
		{1.05, 1.35, []float64{1.05, 1.1, 1.15, 1.2, 1.25, 1.3, 1.35}},
		{1.12, 1.12, []float64{1.1, 1.15}},
		{1.1, 1.1, []float64{1.1, 1.15}},
		{1.04, 1.11, []float64{1, 1.05, 1.1, 1.15}},
		{math.Inf(1), math.Inf(-1), nil},
	} {
		if got := compare.Edges(c.lo, c.hi, 20); !slices.Equal(got, c.want) {
			t.Errorf("Edges(%g, %g) = %v, want %v", c.lo, c.hi, got, c.want)
		}
	}
}

// keys returns the key paths of a JSON text in the order they stand.
func keys(t *testing.T, text []byte) string {
	t.Helper()
	d := json.NewDecoder(bytes.NewReader(text))
	var out strings.Builder
	var value func()
	value = func() {
		tok, err := d.Token()
		if err != nil {
			t.Fatal(err)
		}
		switch tok {
		case json.Delim('{'):
			out.WriteString("{")
			for d.More() {
				k, _ := d.Token()
				out.WriteString(k.(string) + " ")
				value()
			}
			d.Token()
			out.WriteString("}")
		case json.Delim('['):
			out.WriteString("[")
			for d.More() {
				value()
			}
			d.Token()
			out.WriteString("]")
		}
	}
	value()
	return out.String()
}

// The keys of summary.json are a contract with its readers.
func TestSummaryKeys(t *testing.T) {
	c := comparetest.Wedge(0.02)
	c.Options.Edges = []float64{1.05, 1.35}
	c.Options.Plane = c.Truth.Get("SPEED_SKY").Data
	v := verdict(t, c)
	var b bytes.Buffer
	if err := v.Summary.WriteJSON(&b); err != nil {
		t.Fatal(err)
	}
	const (
		s      = "{median p2_5 p16 p84 p97_5 count median_low median_high blocks }"
		ratios = "ratios {field {sky " + s + "emission " + s + "wave " + s + "total " + s + "}speed {sky " + s + "wave " + s + "}density {sky " + s + "emission " + s + "}}"
		parts  = "identity {ln_field " + s + "ln_speed " + s + "half_ln_density " + s + "half_ln_mu minus_half_ln_kink " + s + "residual_max ln_speed_method " + s + "ln_speed_sight " + s + "ln_speed_rest " + s + "}"
		region = "{valid_fraction " + ratios + "pixels valid " + parts + "}"
	)
	want := "{schema scenario seed version scenario_sha256 estimator pixels {total valid valid_fraction }" + ratios +
		"angle_error_deg " + s + "angle_signed_deg " + s +
		"heights [{from_rsun to_rsun valid_fraction " + ratios + "pixels valid angle_error_deg " + s + parts + "}]" +
		"structure {open " + region + "closed " + region + "near_sheet " + region + "active_region " + region + "}" +
		"doppler_rms_reduction " + s + parts + "}"
	if got := keys(t, b.Bytes()); got != want {
		t.Errorf("keys\n%s\nwant\n%s", got, want)
	}
	var back compare.Summary
	if err := json.Unmarshal(b.Bytes(), &back); err != nil {
		t.Fatal(err)
	}
	var again bytes.Buffer
	back.WriteJSON(&again)
	if again.String() != b.String() {
		t.Error("the summary does not survive reading and writing")
	}
}

func TestNothingInferred(t *testing.T) {
	c := comparetest.Wedge(0.02)
	for _, m := range c.Inferred {
		for i := range m.Data {
			m.Data[i] = float32(math.NaN())
		}
	}
	s := verdict(t, c).Summary
	if s.Pixels.Valid != 0 || s.Pixels.ValidFraction != 0 || s.Pixels.Total == 0 {
		t.Errorf("pixels %+v", s.Pixels)
	}
	if f := s.Ratios.Field.Sky; f == nil || f.Count != 0 || !math.IsNaN(f.Median) {
		t.Errorf("field %+v, want an empty sample", f)
	}
	var b bytes.Buffer
	if err := s.WriteJSON(&b); err != nil || !strings.Contains(b.String(), `"median": null`) || strings.Contains(b.String(), "NaN") {
		t.Errorf("%v\n%s", err, b.String())
	}
}

func TestOnePixel(t *testing.T) {
	c := comparetest.Wedge(0.02)
	b, keep := c.Inferred.Get("B").Data, -1
	for i := range b {
		if b[i] > 0 && keep < 0 {
			keep = i
		} else {
			b[i] = 0 // not positive: not valid
		}
	}
	v := verdict(t, c)
	want := float64(b[keep]) / float64(c.Truth.Get("B_SKY").Data[keep])
	if f := v.Summary.Ratios.Field.Sky; f.Count != 1 || f.Median != want || f.P2_5 != want || f.P97_5 != want {
		t.Errorf("%+v, want %g once", f, want)
	}
	if v.Summary.Pixels.Valid != 1 || !v.Valid[keep] {
		t.Error("the one pixel is not valid")
	}
}

func TestMissingMaps(t *testing.T) {
	c := comparetest.Wedge(0.02)
	all := *c
	// Somebody's density map alone: no B, so no valid fraction, but a density ratio.
	c.Inferred = obs.Maps{*all.Inferred.Get("NE")}
	v := verdict(t, c)
	s := v.Summary
	if s.Ratios.Field.Sky != nil || s.Ratios.Speed.Sky != nil || s.AngleError != nil || s.DopplerRMS != nil || s.Identity.Field != nil {
		t.Error("ratios of missing maps must be null")
	}
	if d := s.Ratios.Density.Sky; d == nil || d.Count != s.Pixels.Total || !math.IsNaN(float64(s.Pixels.ValidFraction)) {
		t.Errorf("density %+v of %+v", d, s.Pixels)
	}
	var b bytes.Buffer
	s.WriteJSON(&b)
	if !strings.Contains(b.String(), `"valid_fraction": null`) || !strings.Contains(b.String(), `"sky": null`) {
		t.Error(b.String())
	}
	// Every single map may be missing, on either side.
	for _, m := range all.Truth {
		c := all
		c.Truth = without(all.Truth, m.Name)
		s := verdict(t, &c).Summary
		if m.Name == "STRUCTURE" && (s.Structure.Open != nil || s.Pixels != verdict(t, &all).Summary.Pixels) {
			t.Errorf("without STRUCTURE: %+v, %+v", s.Structure, s.Pixels)
		}
	}
	for _, m := range all.Inferred {
		c := all
		c.Inferred = without(all.Inferred, m.Name)
		verdict(t, &c)
	}
}

func TestErrors(t *testing.T) {
	for _, e := range []struct {
		name  string
		spoil func(c *comparetest.Case)
		want  string
	}{
		{"size", func(c *comparetest.Case) { m := c.Inferred.Get("B"); m.Data = m.Data[1:] }, "inferred map B has"},
		{"unit", func(c *comparetest.Case) { c.Inferred.Get("SPEED").Unit = "m/s" }, `inferred map SPEED is in "m/s"; it must be in km/s`},
		{"no unit", func(c *comparetest.Case) { c.Truth.Get("NE_SKY").Unit = "" }, "truth map NE_SKY has no unit (BUNIT); it must be in cm-3"},
		{"no truth", func(c *comparetest.Case) { c.Truth = nil }, "nothing to compare with"},
		{"edges", func(c *comparetest.Case) { c.Options.Edges = []float64{1.2, 1.1} }, "must ascend"},
	} {
		c := comparetest.Wedge(0.05)
		e.spoil(c)
		if _, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, c.Options); err == nil || !strings.Contains(err.Error(), e.want) {
			t.Errorf("%s: error %v, want %q", e.name, err, e.want)
		}
	}
}

func TestTable(t *testing.T) {
	c := comparetest.Wedge(0.02)
	v := verdict(t, c)
	var b bytes.Buffer
	if err := v.Heights.Write(&b); err != nil {
		t.Fatal(err) // also checks that columns are equally long and names unique
	}
	ratio, err := v.Heights.Floats("ratio_field_sky")
	if err != nil || len(ratio) != len(v.Summary.Heights) || ratio[1] != v.Summary.Heights[1].Ratios.Field.Sky.Median {
		t.Errorf("ratio_field_sky %v, %v: not the medians of summary.json", ratio, err)
	}
	sky, err := v.Heights.Floats("b_sky")
	if err != nil || v.Heights.Column("b_sky").Unit != "G" || !(sky[0] > sky[len(sky)-1]) {
		t.Errorf("b_sky %v, %v: must fall with height, in G", sky, err)
	}
	if v.Heights.Column("ratio_density_emission_p97_5") == nil || v.Heights.Column("angle_error").Unit != "deg" || v.Heights.Column("height_from").Unit != "solRad" {
		t.Error("columns or units are missing")
	}
}

func TestFlags(t *testing.T) {
	c := comparetest.Ring(120)
	v := verdict(t, c)
	if len(v.Flags) != 2 || v.Flags[0].Name != "incoherent" || v.Flags[0].Invalid != v.Flags[0].Pixels || v.Flags[1].Invalid != 0 {
		t.Errorf("%+v", v.Flags)
	}
	if n := v.Flags[0].Pixels + v.Summary.Pixels.Valid; n != v.Summary.Pixels.Total {
		t.Errorf("invalid and valid pixels add up to %d of %d", n, v.Summary.Pixels.Total)
	}
}
