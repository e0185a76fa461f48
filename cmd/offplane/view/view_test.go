package view

import (
	"bytes"
	"context"
	"encoding/binary"
	"encoding/json"
	"io"
	"io/fs"
	"math"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"offplane/compare"
	"offplane/compare/comparetest"
	"offplane/compare/stat"
	"offplane/synth/obs"
)

const secret = "not of this run"

// folder writes invented maps as a run leaves them, without what explain needs, and a
// secret beside it, to which a link in the folder leads.
func folder(t *testing.T) (string, *comparetest.Case) {
	t.Helper()
	c := comparetest.Wedge(0.02)
	b := *c.Inferred.Get("B")
	b.Name, b.Data = "B_PAIR", slices.Clone(b.Data)
	v := *c.Inferred.Get("SPEED")
	v.Name, v.Data = "SPEED_PAIR", slices.Clone(v.Data)
	for i := range b.Data {
		b.Data[i] *= 2
	}
	c.Inferred = append(c.Inferred, b, v)
	verdict, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, c.Options)
	if err != nil {
		t.Fatal(err)
	}
	var summary bytes.Buffer
	top := t.TempDir()
	dir := filepath.Join(top, "run")
	for _, err := range []error{
		os.Mkdir(dir, 0o777),
		obs.WriteMaps(filepath.Join(dir, "truth.fits"), &c.Grid, c.Truth, nil),
		obs.WriteMaps(filepath.Join(dir, "inferred.fits"), &c.Grid, c.Inferred, nil),
		verdict.Summary.WriteJSON(&summary),
		os.WriteFile(filepath.Join(dir, "summary.json"), summary.Bytes(), 0o666),
		os.WriteFile(filepath.Join(dir, "report.html"), []byte("<script>alert(1)</script>"), 0o666),
		os.WriteFile(filepath.Join(dir, "notes.txt"), []byte(secret), 0o666),
		os.WriteFile(filepath.Join(dir, "run.json"), []byte(`{"files": [{"name": "summary.json"}, {"name": "report.html"}, {"name": "link.json"}, {"name": "../secret"}]}`), 0o666),
		os.WriteFile(filepath.Join(top, "secret"), []byte(secret), 0o666),
		os.Symlink(filepath.Join("..", "secret"), filepath.Join(dir, "link.json")),
	} {
		if err != nil {
			t.Fatal(err)
		}
	}
	return dir, c
}

func listen(t *testing.T, dir string) *Server {
	t.Helper()
	s, err := Listen(t.Context(), dir, "the run", 0, 1)
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan error)
	go func() { done <- s.Serve(ctx) }()
	t.Cleanup(func() {
		cancel()
		if err := <-done; err != nil {
			t.Error(err)
		}
	})
	return s
}

// ask sends a request with its path as it stands, not cleaned as a client would.
func ask(s *Server, method, host, path string) *httptest.ResponseRecorder {
	r := httptest.NewRequest(method, "http://"+host+path, nil)
	w := httptest.NewRecorder()
	s.handler().ServeHTTP(w, r)
	return w
}

func (s *Server) get(t *testing.T, path string) []byte {
	t.Helper()
	w := ask(s, "GET", s.hosts[0], "/"+s.token+"/"+path)
	if w.Code != http.StatusOK {
		t.Fatalf("%s: %d: %s", path, w.Code, w.Body)
	}
	return w.Body.Bytes()
}

func TestRefuses(t *testing.T) {
	dir, _ := folder(t)
	s := listen(t, dir)
	host, token := s.hosts[0], "/"+s.token+"/"
	for _, q := range []struct {
		method, host, path string
		code               int
	}{
		{"GET", host, token, 200},
		{"GET", s.hosts[1], token, 200},
		{"GET", host, token + "files/summary.json", 200},
		{"HEAD", host, token + "data/run", 200},
		// Another host: a page elsewhere whose name was made to point here.
		{"GET", "example.com", token, 421},
		{"GET", "example.com" + host[strings.Index(host, ":"):], token, 421},
		{"GET", "127.0.0.1", token, 421},
		{"GET", "127.0.0.1:1", token + "data/run", 421},
		{"GET", "[::1]" + host[strings.Index(host, ":"):], token, 421},
		// No token, a wrong one, part of it.
		{"GET", host, "/", 403},
		{"GET", host, "/data/run", 403},
		{"GET", host, "/" + s.token, 403},
		{"GET", host, "/" + s.token[:len(s.token)-1] + "/", 403},
		{"GET", host, "/" + s.token + "A/data/run", 403},
		{"GET", host, "/" + strings.ToLower(s.token) + "/data/run", 403},
		{"GET", host, "/" + strings.Repeat("A", len(s.token)) + "/files/summary.json", 403},
		// Nothing changes anything.
		{"POST", host, token + "data/run", 405},
		{"PUT", host, token + "files/summary.json", 405},
		{"DELETE", host, token + "files/summary.json", 405},
		// Outside the folder, or in it and not of the run.
		{"GET", host, token + "files/notes.txt", 404},
		{"GET", host, token + "files/run.json", 404},
		{"GET", host, token + "files/../secret", 0},
		{"GET", host, token + "files/..%2Fsecret", 0},
		{"GET", host, token + "files/%2e%2e%2fsecret", 0},
		{"GET", host, token + "../secret", 0},
		{"GET", host, token + "files//etc/passwd", 0},
		{"GET", host, token + "files/..%5Csecret", 404},
		{"GET", host, token + "files/link.json", 404},
		{"GET", host, token + "data/map/truth/NONE", 404},
		{"GET", host, token + "data/map/..%2Fsecret/B", 0},
		{"GET", host, token + "view.go", 404},
		{"GET", host, token + "data/region?x0=1&y0=1&x1=5", 400},
		{"GET", host, token + "data/region?x0=1&y0=1&x1=5&y1=NaN", 400},
		{"GET", host, token + "data/region?x0=1&y0=1&x1=5&y1=5&estimator=none", 400},
		{"GET", host, token + "data/pixel?x=one&y=1", 400},
	} {
		w := ask(s, q.method, q.host, q.path)
		if q.code == 0 { // a redirection to a clean path is as good
			if w.Code < 300 {
				t.Errorf("%s %s: %d", q.method, q.path, w.Code)
			}
		} else if w.Code != q.code {
			t.Errorf("%s %s%s: %d, want %d", q.method, q.host, q.path, w.Code, q.code)
		}
		if strings.Contains(w.Body.String(), secret) || strings.Contains(w.Body.String(), "root:") {
			t.Errorf("%s hands out what is not of the run", q.path)
		}
		h := w.Header()
		if p := h.Get("Content-Security-Policy"); !strings.HasPrefix(p, "default-src 'none'") || strings.Contains(p, "unsafe") ||
			h.Get("X-Content-Type-Options") != "nosniff" || h.Get("Cross-Origin-Resource-Policy") != "same-origin" || h.Get("Access-Control-Allow-Origin") != "" {
			t.Errorf("%s: headers %v", q.path, h)
		}
	}
	// Markup of the run is saved, not shown.
	if d := ask(s, "GET", host, token+"files/report.html").Header(); !strings.HasPrefix(d.Get("Content-Disposition"), "attachment") || strings.Contains(d.Get("Content-Type"), "html") {
		t.Errorf("report.html comes with %v", d)
	}
}

// The same over the wire, where the request line and the Host of a client count.
func TestWire(t *testing.T) {
	dir, _ := folder(t)
	s := listen(t, dir)
	addr := s.ln.Addr().(*net.TCPAddr)
	if !addr.IP.Equal(net.IPv4(127, 0, 0, 1)) {
		t.Errorf("listens on %s", addr)
	}
	if other := listen(t, dir); other.token == s.token || len(s.token) < 26 {
		t.Errorf("tokens %q and %q", s.token, other.token)
	}
	for request, want := range map[string]string{
		"GET /" + s.token + "/ HTTP/1.1\r\nHost: " + s.hosts[0]:             "200",
		"GET /" + s.token + "/ HTTP/1.1\r\nHost: evil.example":              "421",
		"GET /" + s.token + "/../../secret HTTP/1.1\r\nHost: " + s.hosts[0]: "307", // to /secret, which has no token
		"GET /x/ HTTP/1.1\r\nHost: " + s.hosts[0]:                           "403",
	} {
		c, err := net.Dial("tcp", addr.String())
		if err != nil {
			t.Fatal(err)
		}
		io.WriteString(c, request+"\r\nConnection: close\r\n\r\n")
		b, err := io.ReadAll(c)
		c.Close()
		if err != nil || !bytes.HasPrefix(b, []byte("HTTP/1.1 "+want)) || bytes.Contains(b, []byte(secret)) {
			t.Errorf("%q: %.60s %v", request, b, err)
		}
	}
}

// Looking changes nothing in the folder.
func TestWritesNothing(t *testing.T) {
	dir, _ := folder(t)
	state := func() (all []string) {
		filepath.WalkDir(dir, func(path string, d fs.DirEntry, _ error) error {
			i, err := d.Info()
			if err != nil {
				t.Fatal(err)
			}
			all = append(all, path+i.ModTime().String()+i.Mode().String())
			return nil
		})
		return all
	}
	before := state()
	s := listen(t, dir)
	for _, path := range []string{"", "page.js", "data/run", "data/colours", "data/map/truth/B_SKY", "data/region?x0=1&y0=1&x1=50&y1=50", "files/summary.json"} {
		s.get(t, path)
	}
	if after := state(); !slices.Equal(before, after) {
		t.Errorf("the folder was %v and is %v", before, after)
	}
}

// The page asks for nothing elsewhere and runs nothing that stands in its markup.
func TestAssets(t *testing.T) {
	elsewhere := regexp.MustCompile(`(https?:)?//[a-z0-9-]+\.[a-z]|\beval\(|new Function|innerHTML|insertAdjacentHTML|document\.write`)
	inline := regexp.MustCompile(`(?i)<script>|<style|style=|\son[a-z]+=|javascript:`)
	err := fs.WalkDir(assets, "assets", func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		b, err := assets.ReadFile(path)
		if err != nil {
			return err
		}
		text := string(b)
		if strings.HasSuffix(path, "uplot.js") { // its first line says where it comes from
			_, text, _ = strings.Cut(text, "*/")
			text = strings.ReplaceAll(text, "innerHTML=", "") // of labels, which are ours
		}
		if m := elsewhere.FindString(text); m != "" && !strings.HasSuffix(path, "LICENSE") {
			t.Errorf("%s has %q", path, m)
		}
		if m := inline.FindString(text); m != "" && strings.HasSuffix(path, ".html") {
			t.Errorf("%s has %q", path, m)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if b, err := assets.ReadFile("assets/uplot.LICENSE"); err != nil || !bytes.Contains(b, []byte("MIT License")) {
		t.Errorf("the licence of the curves' library: %v", err)
	}
}

func TestMap(t *testing.T) {
	dir, c := folder(t)
	s := listen(t, dir)
	b := s.get(t, "data/map/truth/B_SKY")
	want := c.Truth.Get("B_SKY").Data
	got := make([]float32, len(b)/4)
	if err := binary.Read(bytes.NewReader(b), binary.LittleEndian, got); err != nil || len(got) != len(want) {
		t.Fatalf("%d numbers, want %d: %v", len(got), len(want), err)
	}
	for i := range got {
		if math.Float32bits(got[i]) != math.Float32bits(want[i]) && got[i] == got[i] {
			t.Fatalf("pixel %d: %g, want %g", i, got[i], want[i])
		}
	}
	ints := make([]int32, len(want))
	if err := binary.Read(bytes.NewReader(s.get(t, "data/map/inferred/FLAG")), binary.LittleEndian, ints); err != nil || !slices.Equal(ints, c.Inferred.Get("FLAG").Ints) {
		t.Errorf("FLAG differs: %v", err)
	}
	if n := len(s.get(t, "data/colours")); n != 3*3*256 {
		t.Errorf("%d bytes of colours", n)
	}
	// Without the corona the maps are there and a pixel says why it has no answer.
	w := ask(s, "GET", s.hosts[0], "/"+s.token+"/data/pixel?x=10&y=10")
	if w.Code != http.StatusServiceUnavailable || !strings.Contains(w.Body.String(), "bias.fits") {
		t.Errorf("pixel: %d %s", w.Code, w.Body)
	}
}

// A region's numbers are compare's over the same pixels.
func TestRegion(t *testing.T) {
	dir, c := folder(t)
	s := listen(t, dir)
	type answer struct {
		Pixels compare.Pixels
		Ratios compare.Ratios
		Angle  *stat.Summary `json:"angle_error_deg"`
	}
	same := func(a, b *stat.Summary) bool { // but for the interval, which depends on edges
		return a.Median == b.Median && a.P16 == b.P16 && a.P97_5 == b.P97_5 && a.Count == b.Count
	}
	region := func(query string) (a answer) {
		t.Helper()
		if err := json.Unmarshal(s.get(t, "data/region?"+query), &a); err != nil {
			t.Fatal(err)
		}
		return a
	}
	v, err := compare.Compare(&c.Grid, c.Truth, c.Inferred, compare.Options{Edges: []float64{1.1, 1.17, 1.25, 1.4}})
	if err != nil {
		t.Fatal(err)
	}
	all := region("r0=1&r1=2&pa0=0&pa1=360")
	if all.Pixels != v.Summary.Pixels || !same(all.Ratios.Field.Wave, v.Summary.Ratios.Field.Wave) || !same(all.Angle, v.Summary.AngleError) {
		t.Errorf("the whole field: %+v %+v, want %+v", all.Pixels, all.Ratios.Field.Wave, v.Summary.Ratios.Field.Wave)
	}
	h := v.Summary.Heights[1]
	bin := region("r0=1.17&r1=1.25&pa0=0&pa1=360")
	if bin.Pixels.Total != h.Total || !same(bin.Ratios.Field.Sky, h.Ratios.Field.Sky) || !same(bin.Ratios.Density.Emission, h.Ratios.Density.Emission) {
		t.Errorf("a height bin: %+v %+v, want %+v", bin.Pixels, bin.Ratios.Field.Sky, h.Ratios.Field.Sky)
	}
	// A sector through north holds what is left of the field beside its complement.
	in, out := region("r0=1&r1=2&pa0=300&pa1=75"), region("r0=1&r1=2&pa0=75&pa1=300")
	if in.Pixels.Total == 0 || out.Pixels.Total == 0 || in.Pixels.Total+out.Pixels.Total != all.Pixels.Total {
		t.Errorf("%d and %d pixels of %d", in.Pixels.Total, out.Pixels.Total, all.Pixels.Total)
	}
	// A box, by hand.
	var x []float64
	total := 0
	for i := range v.Field {
		if ix, iy := i%c.Grid.Nx+1, i/c.Grid.Nx+1; v.Field[i] && ix >= 5 && ix <= 20 && iy >= 8 && iy <= 31 {
			total++
			if v.Valid[i] {
				x = append(x, float64(c.Inferred.Get("B").Data[i])/float64(c.Truth.Get("B_SKY").Data[i]))
			}
		}
	}
	box := region("x0=5&y0=8&x1=20&y1=31")
	if box.Pixels.Total != total || total == 0 || box.Pixels.Valid != len(x) || box.Ratios.Field.Sky.Median != stat.Median(x) {
		t.Errorf("a box: %+v, want %d pixels, %d valid, median %g", box, total, len(x), stat.Median(x))
	}
	// The other estimator's field is twice as large here.
	if pair := region("x0=5&y0=8&x1=20&y1=31&estimator=pair"); pair.Ratios.Field.Sky.Median != 2*box.Ratios.Field.Sky.Median {
		t.Errorf("estimator pair: median %g, lag %g", pair.Ratios.Field.Sky.Median, box.Ratios.Field.Sky.Median)
	}
}

func TestFolders(t *testing.T) {
	empty := t.TempDir()
	if _, err := Listen(t.Context(), empty, empty, 0, 1); err == nil || !strings.Contains(err.Error(), "offplane run") {
		t.Errorf("an empty folder: %v", err)
	}
	dir, c := folder(t)
	c.Grid.Nx--
	for i := range c.Truth {
		m := &c.Truth[i]
		if n := c.Grid.Nx * c.Grid.Ny; m.Ints != nil {
			m.Ints = m.Ints[:n]
		} else {
			m.Data = m.Data[:n]
		}
	}
	if err := obs.WriteMaps(filepath.Join(dir, "truth.fits"), &c.Grid, c.Truth, nil); err != nil {
		t.Fatal(err)
	}
	if _, err := Listen(t.Context(), dir, dir, 0, 1); err == nil || !strings.Contains(err.Error(), "not of one run") {
		t.Errorf("maps of two runs: %v", err)
	}
}
