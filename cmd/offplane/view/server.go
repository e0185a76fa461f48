// Package view shows a finished run in a page on this machine: maps with a common cursor,
// what explain tells of a pixel, statistics of a region.
//
// The server listens on 127.0.0.1 alone. It answers GET under a random token, and only if
// the request names it as host, so that neither another user of the machine nor a page in
// the same browser can read the run. It writes nothing and hands out nothing but its own
// page and what the run's record lists.
package view

import (
	"context"
	"crypto/rand"
	"crypto/subtle"
	"embed"
	"encoding/json"
	"errors"
	"io/fs"
	"net"
	"net/http"
	"strings"
	"time"
)

//go:embed assets
var assets embed.FS

// policy lets the page load its own scripts, styles and data and nothing else. What the
// script puts into element.style is not an inline style.
const policy = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; connect-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'"

// A Server shows one run.
type Server struct {
	run   *run
	token string
	hosts []string // that a request may name
	ln    net.Listener
}

// Listen opens a run folder and a port on 127.0.0.1, any free one for 0. name is the
// folder as the user calls it, for the commands that the page shows. The maps are there at
// once, what explain tells when its corona is built. Workers < 1: every core.
func Listen(ctx context.Context, dir, name string, port, workers int) (*Server, error) {
	r, err := openRun(ctx, dir, name, workers)
	if err != nil {
		return nil, err
	}
	ln, err := net.ListenTCP("tcp4", &net.TCPAddr{IP: net.IPv4(127, 0, 0, 1), Port: port})
	if err != nil {
		r.close()
		return nil, err
	}
	_, at, _ := net.SplitHostPort(ln.Addr().String())
	return &Server{run: r, token: rand.Text(), hosts: []string{"127.0.0.1:" + at, "localhost:" + at}, ln: ln}, nil
}

// URL is where the page is.
func (s *Server) URL() string { return "http://" + s.hosts[0] + "/" + s.token + "/" }

// Serve answers until ctx ends.
func (s *Server) Serve(ctx context.Context) error {
	h := &http.Server{Handler: s.handler(), ReadHeaderTimeout: 10 * time.Second}
	stop := context.AfterFunc(ctx, func() { h.Close() })
	defer stop()
	err := h.Serve(s.ln)
	s.run.close()
	if errors.Is(err, http.ErrServerClosed) {
		return nil
	}
	return err
}

// handler is the whole server.
func (s *Server) handler() http.Handler {
	page, err := fs.Sub(assets, "assets")
	if err != nil {
		panic("view: " + err.Error())
	}
	mux := http.NewServeMux()
	mux.Handle("GET /", http.FileServerFS(page))
	mux.HandleFunc("GET /data/run", s.run.about)
	mux.HandleFunc("GET /data/colours", s.run.colours)
	mux.HandleFunc("GET /data/map/{file}/{name}", s.run.pixels)
	mux.HandleFunc("GET /data/pixel", s.run.pixel)
	mux.HandleFunc("GET /data/region", s.run.region)
	mux.HandleFunc("GET /files/{name}", s.run.file)
	return s.guard(mux)
}

// guard refuses what does not come from the page itself and tells the browser to keep the
// page to itself.
func (s *Server) guard(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		h := w.Header()
		h.Set("Content-Security-Policy", policy)
		h.Set("Cross-Origin-Resource-Policy", "same-origin")
		h.Set("Cross-Origin-Opener-Policy", "same-origin")
		h.Set("Referrer-Policy", "no-referrer")
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("Cache-Control", "no-store")
		if r.Host != s.hosts[0] && r.Host != s.hosts[1] {
			http.Error(w, "wrong host", http.StatusMisdirectedRequest)
			return
		}
		token, rest, ok := strings.Cut(strings.TrimPrefix(r.URL.Path, "/"), "/")
		if !ok || subtle.ConstantTimeCompare([]byte(token), []byte(s.token)) != 1 {
			http.Error(w, "wrong token: open the address that offplane view printed", http.StatusForbidden)
			return
		}
		if r.Method != http.MethodGet && r.Method != http.MethodHead {
			http.Error(w, "only GET", http.StatusMethodNotAllowed)
			return
		}
		inner := r.Clone(r.Context())
		inner.URL.Path, inner.URL.RawPath = "/"+rest, ""
		next.ServeHTTP(w, inner)
	})
}

// reply writes a JSON document.
func reply(w http.ResponseWriter, v any) {
	text, err := json.Marshal(v)
	if err != nil {
		http.Error(w, err.Error(), http.StatusInternalServerError)
		return
	}
	w.Header().Set("Content-Type", "application/json")
	w.Write(text)
}
