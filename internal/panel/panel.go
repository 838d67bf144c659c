// Package panel is the local status page and the HTTP API behind it.
//
// needs: the present snapshot and a way to hand out clips; waits: for requests, on loopback only; emits: one page,
// the snapshot as JSON, clips as tar. It reads what is there and slows nobody. A network address is refused until
// the page has a login.
package panel

import (
	"archive/tar"
	"context"
	_ "embed"
	"encoding/json"
	"errors"
	"fmt"
	"html/template"
	"io"
	"io/fs"
	"log/slog"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"time"

	"lapwing/internal/wire"
)

// Source is what the page shows; the station implements it.
type Source interface {
	// Now gives the newest snapshot; never nil.
	Now() *wire.Now
	// Export writes a clip and what belongs to it (WAV, skid file, process values, note) into dir.
	Export(ctx context.Context, clip, dir string) error
}

// ErrNoClip says that a clip of that name does not exist. Source.Export wraps it.
var ErrNoClip = errors.New("no such clip")

//go:embed page.html
var pageHTML string

var page = template.Must(template.New("page").Funcs(template.FuncMap{
	"clock": func(t time.Time) string {
		if t.IsZero() {
			return "–"
		}
		return t.UTC().Format("2006-01-02 15:04:05Z")
	},
	"num": func(p *float64) string {
		if p == nil {
			return "–"
		}
		return fmt.Sprintf("%.1f", *p)
	},
	"mib": func(b int64) string { return fmt.Sprintf("%.1f MiB", float64(b)/(1<<20)) },
	"val": func(m map[string]float64, name, format string) string {
		if x, ok := m[name]; ok {
			return fmt.Sprintf(format, x)
		}
		return "–"
	},
}).Parse(pageHTML))

// Panel serves the page. Open it, then Serve, then Close.
type Panel struct {
	ln  net.Listener
	srv *http.Server
}

// Open binds the address, which must be loopback.
func Open(listen string, src Source, log *slog.Logger) (*Panel, error) {
	host, _, err := net.SplitHostPort(listen)
	if err != nil {
		return nil, fmt.Errorf("panel: address %q: %w (write 127.0.0.1:8411)", listen, err)
	}
	if ip := net.ParseIP(host); host != "localhost" && (ip == nil || !ip.IsLoopback()) {
		return nil, fmt.Errorf("panel: address %q is not loopback: the page has no login yet and stays on this machine (write 127.0.0.1:8411, and reach it through an SSH tunnel)", listen)
	}
	ln, err := net.Listen("tcp", listen)
	if err != nil {
		return nil, fmt.Errorf("panel: %w", err)
	}
	p := &Panel{ln: ln, srv: &http.Server{
		Handler:           guard(routes(src, log)),
		ReadHeaderTimeout: 5 * time.Second, IdleTimeout: time.Minute, MaxHeaderBytes: 16 << 10,
		ErrorLog: slog.NewLogLogger(log.Handler(), slog.LevelDebug),
	}}
	return p, nil
}

// URL is where the page is.
func (p *Panel) URL() string { return "http://" + p.ln.Addr().String() + "/" }

// Serve answers requests until Close.
func (p *Panel) Serve() error {
	if err := p.srv.Serve(p.ln); !errors.Is(err, http.ErrServerClosed) {
		return fmt.Errorf("panel: %w", err)
	}
	return nil
}

// Close stops the page; requests under way get a moment.
func (p *Panel) Close() error {
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Second)
	defer cancel()
	if err := p.srv.Shutdown(ctx); err != nil {
		return p.srv.Close()
	}
	return nil
}

// guard refuses what a browser on this machine could be tricked into: foreign host names and writes.
func guard(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		h := w.Header()
		h.Set("Content-Security-Policy", "default-src 'none'; style-src 'sha256-"+styleHash+"'; frame-ancestors 'none'; base-uri 'none'; form-action 'none'")
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("Referrer-Policy", "no-referrer")
		h.Set("Cache-Control", "no-store")
		host, _, err := net.SplitHostPort(r.Host)
		if err != nil {
			host = r.Host
		}
		if ip := net.ParseIP(strings.Trim(host, "[]")); host != "localhost" && (ip == nil || !ip.IsLoopback()) {
			http.Error(w, "this page answers to loopback addresses only", http.StatusMisdirectedRequest)
			return
		}
		if r.Method != http.MethodGet && r.Method != http.MethodHead {
			http.Error(w, "read only", http.StatusMethodNotAllowed)
			return
		}
		next.ServeHTTP(w, r)
	})
}

func routes(src Source, log *slog.Logger) http.Handler {
	mux := http.NewServeMux()
	mux.HandleFunc("GET /{$}", func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		var b strings.Builder
		if err := page.Execute(&b, src.Now()); err != nil {
			log.Error("panel: page", "err", err)
			http.Error(w, "the page could not be drawn; see the log", http.StatusInternalServerError)
			return
		}
		_, _ = io.WriteString(w, b.String())
	})
	mux.HandleFunc("GET /api/v1/now", func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Content-Type", "application/json")
		_ = json.NewEncoder(w).Encode(src.Now())
	})
	mux.HandleFunc("GET /api/v1/clips", func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Content-Type", "application/json")
		_ = json.NewEncoder(w).Encode(src.Now().Clips)
	})
	mux.HandleFunc("GET /api/v1/clips/{id}", func(w http.ResponseWriter, r *http.Request) {
		sendClip(w, r, src, log)
	})
	return mux
}

// sendClip exports into a scratch folder first: no transaction stays open while a slow client reads.
func sendClip(w http.ResponseWriter, r *http.Request, src Source, log *slog.Logger) {
	dir, err := os.MkdirTemp("", "lapwing-clip-")
	if err != nil {
		http.Error(w, "no room for the export: "+err.Error(), http.StatusInsufficientStorage)
		return
	}
	defer os.RemoveAll(dir)
	switch err := src.Export(r.Context(), r.PathValue("id"), dir); {
	case errors.Is(err, ErrNoClip):
		http.Error(w, err.Error(), http.StatusNotFound)
		return
	case err != nil:
		log.Error("panel: export", "clip", r.PathValue("id"), "err", err)
		http.Error(w, err.Error(), http.StatusInternalServerError)
		return
	}
	w.Header().Set("Content-Type", "application/x-tar")
	if err := tarDir(w, dir); err != nil {
		log.Warn("panel: clip not sent whole", "clip", r.PathValue("id"), "err", err)
	}
}

func tarDir(w io.Writer, dir string) error {
	tw := tar.NewWriter(w)
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		st, err := d.Info()
		if err != nil {
			return err
		}
		if err := tw.WriteHeader(&tar.Header{Name: d.Name(), Mode: 0o644, Size: st.Size(), ModTime: st.ModTime(), Format: tar.FormatPAX}); err != nil {
			return err
		}
		f, err := os.Open(path)
		if err != nil {
			return err
		}
		defer f.Close()
		_, err = io.Copy(tw, f)
		return err
	})
	return errors.Join(err, tw.Close())
}
