package view

import (
	"context"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"net/http"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"offplane/compare"
	"offplane/compare/explain"
	"offplane/compare/report"
	"offplane/invert"
	"offplane/synth/obs"
)

// A run is an opened folder.
type run struct {
	dir, name string
	root      *os.Root // keeps downloads inside the folder
	files     []string // that run.json lists
	summary   compare.Summary
	grid      obs.Grid
	maps      map[string]obs.Maps // by file: truth, inferred

	cancel  context.CancelFunc
	ready   chan struct{} // closed when session or failure is set
	session *explain.Session
	failure error
}

// openRun reads summary and maps and begins to build the corona.
func openRun(ctx context.Context, dir, name string, workers int) (*run, error) {
	r := &run{dir: dir, name: name, maps: map[string]obs.Maps{}, ready: make(chan struct{})}
	var record struct {
		Files []struct {
			Name string `json:"name"`
		} `json:"files"`
	}
	for file, v := range map[string]any{"run.json": &record, "summary.json": &r.summary} {
		text, err := os.ReadFile(filepath.Join(dir, file))
		if err != nil {
			return nil, fmt.Errorf("%w: view takes the folder that offplane run left", err)
		}
		if err := json.Unmarshal(text, v); err != nil {
			return nil, fmt.Errorf("%s: %w", filepath.Join(dir, file), err)
		}
	}
	for _, f := range record.Files {
		r.files = append(r.files, f.Name)
	}
	for _, side := range []string{"truth", "inferred"} {
		path := filepath.Join(dir, side+".fits")
		g, maps, err := obs.ReadMaps(path)
		if err != nil {
			return nil, err
		}
		if side == "truth" {
			r.grid = g
		} else if g.Nx != r.grid.Nx || g.Ny != r.grid.Ny {
			return nil, fmt.Errorf("%s: %d x %d pixels; truth.fits has %d x %d: the files are not of one run", path, g.Nx, g.Ny, r.grid.Nx, r.grid.Ny)
		}
		r.maps[side] = maps
	}
	if s := r.maps["truth"].Get("STRUCTURE"); s == nil || s.Ints == nil {
		return nil, fmt.Errorf("%s: no map STRUCTURE: it is not of offplane run", filepath.Join(dir, "truth.fits"))
	}
	var err error
	if r.root, err = os.OpenRoot(dir); err != nil {
		return nil, err
	}
	ctx, r.cancel = context.WithCancel(ctx)
	go func() {
		r.session, r.failure = explain.Open(ctx, dir, workers)
		close(r.ready)
	}()
	return r, nil
}

func (r *run) close() {
	r.cancel()
	<-r.ready
	if r.session != nil {
		r.session.Close()
	}
	r.root.Close()
}

// A mapAbout describes one map to the page.
type mapAbout struct {
	File  string     `json:"file"`
	Name  string     `json:"name"`
	Unit  string     `json:"unit"`
	About string     `json:"about"`
	Ints  bool       `json:"ints"`
	Codes []obs.Code `json:"codes,omitempty"`
}

// about answers what the page needs to begin.
func (r *run) about(w http.ResponseWriter, _ *http.Request) {
	g := &r.grid
	v := struct {
		Scenario   string       `json:"scenario"`
		Folder     string       `json:"folder"`
		Estimators []string     `json:"estimators"`
		Sentences  []string     `json:"sentences"`
		Heights    [][2]float64 `json:"heights"`
		Files      []string     `json:"files"`
		Grid       gridAbout    `json:"grid"`
		Maps       []mapAbout   `json:"maps"`
	}{
		Scenario: r.summary.Scenario, Folder: r.name, Estimators: r.estimators(), Sentences: r.summary.Sentences(), Files: r.files,
		Grid: gridAbout{g.Nx, g.Ny, g.Pixel, g.Step(), g.CentreX, g.CentreY, g.Roll, g.Distance},
	}
	for _, h := range r.summary.Heights {
		v.Heights = append(v.Heights, [2]float64{float64(h.From), float64(h.To)})
	}
	for _, side := range []string{"truth", "inferred"} {
		for _, m := range r.maps[side] {
			v.Maps = append(v.Maps, mapAbout{side, m.Name, m.Unit, m.About, m.Ints != nil, m.Codes})
		}
	}
	reply(w, v)
}

type gridAbout struct {
	Nx       int     `json:"nx"`
	Ny       int     `json:"ny"`
	Pixel    float64 `json:"pixel_arcsec"`
	Step     float64 `json:"step_rsun"`
	CentreX  float64 `json:"centre_x"`
	CentreY  float64 `json:"centre_y"`
	Roll     float64 `json:"roll_deg"`
	Distance float64 `json:"distance_rsun"`
}

// estimators lists the phase-speed estimators of the run, that of SPEED and B first.
func (r *run) estimators() []string {
	list := []string{r.summary.Estimator}
	for _, e := range invert.Estimators() {
		if r.maps["inferred"].Get("B"+suffix(e)) != nil && e != list[0] {
			list = append(list, e)
		}
	}
	return list
}

// suffix is that of the maps of an estimator that is not the first.
func suffix(estimator string) string { return "_" + strings.ToUpper(estimator) }

// inferredBy returns the inferred maps with the speed and field of an estimator.
func (r *run) inferredBy(estimator string) (obs.Maps, bool) {
	maps := slices.Clone(r.maps["inferred"])
	if estimator == "" || estimator == r.summary.Estimator {
		return maps, true
	}
	for _, name := range []string{"B", "SPEED"} {
		other := maps.Get(name + suffix(estimator))
		if other == nil {
			return nil, false
		}
		m := *other
		m.Name = name
		*maps.Get(name) = m
	}
	return maps, true
}

// colours answers the tables of 256 colours, red, green, blue: for quantities, for
// departures from a middle, for angles.
func (r *run) colours(w http.ResponseWriter, _ *http.Request) {
	w.Header().Set("Content-Type", "application/octet-stream")
	for _, kind := range []report.Colours{report.Sequential, report.Diverging, report.Cyclic} {
		w.Write(report.ColourTable(kind))
	}
}

// pixels answers a map: float32, or int32 for codes, little-endian, in raster order.
func (r *run) pixels(w http.ResponseWriter, q *http.Request) {
	m := r.maps[q.PathValue("file")].Get(q.PathValue("name"))
	if m == nil {
		http.Error(w, "no such map", http.StatusNotFound)
		return
	}
	out := make([]byte, 4*(len(m.Data)+len(m.Ints)))
	for i, v := range m.Data {
		binary.LittleEndian.PutUint32(out[4*i:], math.Float32bits(v))
	}
	for i, v := range m.Ints {
		binary.LittleEndian.PutUint32(out[4*i:], uint32(v))
	}
	w.Header().Set("Content-Type", "application/octet-stream")
	w.Write(out)
}

// pixel answers what explain tells of the pixel (x, y), counted from 1.
func (r *run) pixel(w http.ResponseWriter, q *http.Request) {
	x, errX := strconv.Atoi(q.FormValue("x"))
	y, errY := strconv.Atoi(q.FormValue("y"))
	if err := errors.Join(errX, errY); err != nil {
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	}
	select {
	case <-r.ready:
	case <-q.Context().Done():
		return
	}
	if r.failure != nil {
		http.Error(w, r.failure.Error(), http.StatusServiceUnavailable)
		return
	}
	p, err := r.session.At(x-1, y-1)
	if outside := (*explain.OutsideError)(nil); errors.As(err, &outside) {
		http.Error(w, err.Error(), http.StatusNotFound)
		return
	} else if err != nil {
		http.Error(w, err.Error(), http.StatusInternalServerError)
		return
	}
	reply(w, p)
}

// file hands out a file of the run, to be saved and not shown: it may hold markup.
func (r *run) file(w http.ResponseWriter, q *http.Request) {
	name := q.PathValue("name")
	if !slices.Contains(r.files, name) {
		http.Error(w, "the run has no such file", http.StatusNotFound)
		return
	}
	f, err := r.root.Open(name)
	if err != nil {
		http.Error(w, err.Error(), http.StatusNotFound)
		return
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil || !info.Mode().IsRegular() {
		http.Error(w, "no file", http.StatusNotFound)
		return
	}
	w.Header().Set("Content-Type", "application/octet-stream")
	w.Header().Set("Content-Disposition", "attachment; filename="+strconv.Quote(name))
	http.ServeContent(w, q, "", info.ModTime(), f)
}
