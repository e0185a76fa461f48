package view

import (
	"fmt"
	"math"
	"net/http"
	"net/url"
	"slices"
	"strconv"

	"offplane/compare"
	"offplane/compare/stat"
	"offplane/synth/obs"
)

// A region is a part of the field: a box of pixels, counted from 1, both ends in, or a
// sector of height [solar radii] and position angle [deg], its upper ends out. From a
// position angle to a smaller one it runs through north.
type region struct {
	sector         bool
	x0, y0, x1, y1 float64
	r0, r1         float64
	pa0, pa1       float64
}

// parseRegion reads x0, y0, x1, y1 or r0, r1, pa0, pa1.
func parseRegion(q url.Values) (region, error) {
	r := region{sector: q.Has("r0")}
	want := map[string]*float64{"x0": &r.x0, "y0": &r.y0, "x1": &r.x1, "y1": &r.y1}
	if r.sector {
		want = map[string]*float64{"r0": &r.r0, "r1": &r.r1, "pa0": &r.pa0, "pa1": &r.pa1}
	}
	for key, at := range want {
		v, err := strconv.ParseFloat(q.Get(key), 64)
		if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
			return r, fmt.Errorf("%s %q is no number", key, q.Get(key))
		}
		*at = v
	}
	return r, nil
}

// holds reports whether a zero-based pixel is in the region.
func (r *region) holds(g *obs.Grid, ix, iy int) bool {
	if !r.sector {
		x, y := float64(ix+1), float64(iy+1)
		return x >= r.x0 && x <= r.x1 && y >= r.y0 && y <= r.y1
	}
	d, pa := g.Polar(ix, iy)
	if d < r.r0 || d >= r.r1 {
		return false
	}
	if r.pa1 >= r.pa0+360 {
		return true
	}
	turn := func(a float64) float64 { return a - 360*math.Floor(a/360) }
	return turn(pa-r.pa0) < turn(r.pa1-r.pa0)
}

// region answers the statistics of a region: those that compare makes of a field that is
// no larger.
func (r *run) region(w http.ResponseWriter, q *http.Request) {
	part, err := parseRegion(q.URL.Query())
	if err != nil {
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	}
	inferred, ok := r.inferredBy(q.FormValue("estimator"))
	if !ok {
		http.Error(w, "the run has no such estimator", http.StatusBadRequest)
		return
	}
	truth := slices.Clone(r.maps["truth"])
	m := truth.Get("STRUCTURE")
	m.Ints = slices.Clone(m.Ints)
	for i := range m.Ints {
		if m.Ints[i] != 0 && !part.holds(&r.grid, i%r.grid.Nx, i/r.grid.Nx) {
			m.Ints[i] = 0
		}
	}
	v, err := compare.Compare(&r.grid, truth, inferred, compare.Options{})
	if err != nil {
		http.Error(w, err.Error(), http.StatusInternalServerError)
		return
	}
	reply(w, struct {
		Pixels     compare.Pixels `json:"pixels"`
		Ratios     compare.Ratios `json:"ratios"`
		AngleError *stat.Summary  `json:"angle_error_deg"`
		DopplerRMS *stat.Summary  `json:"doppler_rms_reduction"`
	}{v.Summary.Pixels, v.Summary.Ratios, v.Summary.AngleError, v.Summary.DopplerRMS})
}
