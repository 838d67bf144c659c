// Package panel is the local status page and the HTTP API behind it.
//
// needs: the present snapshot and a way to hand out clips and pictures; waits: for requests, on loopback only; emits: the
// pages, the snapshot as JSON, charts, clips as tar. It reads what is there and slows nobody. When nothing is judged, or
// nothing new comes, it says so: silence must not look like health. A network address is refused until the page has a
// login.
//
// # API
//
//	GET  /api/v1/now             everything's present state
//	GET  /api/v1/alarms          every alarm point, also shelved, suppressed and out of service, with its key
//	GET  /api/v1/journal         transitions and people's acts, newest first, in pages; filters: from, to (RFC 3339), subject,
//	                             key, kind, severity (or worse), type (transition, act), verb, by; order=oldest, detail=yes,
//	                             limit (1 to 1000), page (next of the page before); format=csv or jsonl gives all of it
//	GET  /api/v1/why             reasons; subject and turn may be given: hypotheses, evidence and what the next grade takes
//	POST /api/v1/orders          what a person orders, one wire.Order; 200 carried out, 409 refused, both with a receipt
//	GET  /api/v1/clips           protected raw samples; /api/v1/clips/{id} one of them as tar
//	GET  /api/v1/pull            see pulls: by clip, time or turns, resumable
//	GET  /api/v1/learning        see learning; /api/v1/baselines lists and gives baselines, POST takes one
//	GET  /metrics                the daemon's own measures in the Prometheus text format; see station/metrics.go for the list
//	GET  /api/v1/events          server-sent: what has changed, at most once a second
//	GET  /api/v1/throws          see looking: turns over crank angle, charts, and the newest second of a channel
//	GET  /api/v1/openapi.json    all this as OpenAPI 3.1
//	GET  /api/v1/schemas         names of the JSON Schemas of all this; /api/v1/schemas/{name} one of them
//
// An order is carried out between two turns, also while the machine stands, and is in the journal whether it was carried
// out or refused: who, when, why, by which way. It must be application/json, at most wire.MaxOrder bytes, with the header
// Lapwing-Order: page, tool or api, and from no other site's page. 503 says that nothing was done. There is no login:
// who may reach a loopback address of this machine may give orders, in any name.
package panel

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"strings"
	"sync"
	"time"

	"lapwing/internal/wire"
)

// Source is what the page shows; the station implements it.
type Source interface {
	// Now gives the newest snapshot; never nil.
	Now() *wire.Now
	// Export writes a clip and what belongs to it (WAV, skid file, process values, note) into dir.
	Export(ctx context.Context, clip, dir string) error
	// Order carries an order out between two turns, or refuses it; both are in the receipt. An error says that nothing
	// was done.
	Order(ctx context.Context, o wire.Order) (wire.Receipt, error)
	// Journal gives one page of the alarm journal.
	Journal(f wire.JournalFilter) (wire.JournalPage, error)
	// Alarms gives every alarm point, shown or not.
	Alarms() wire.Alarms
	// Why says why a subject (empty: all) was found to be as it is by the block of a turn (0: the newest).
	Why(ctx context.Context, subject string, turn int64) (wire.Why, error)
	// Metrics gives what a scrape is told; it must not make the line wait.
	Metrics() []Family
	Puller
}

// ErrNoClip says that a clip of that name does not exist. Source.Export wraps it.
var ErrNoClip = errors.New("no such clip")

// ErrQuery says that a request asks for something that cannot be; what the source says of it is for the asker.
var ErrQuery = errors.New("not understood")

// Panel serves the page. Open it, then Serve, then Close.
type Panel struct {
	ln    net.Listener
	srv   *http.Server
	pulls *pulls

	ended chan struct{} // closed once: pages stop listening
	once  sync.Once
}

// Open binds the address, which must be loopback.
func Open(listen string, src Source, log *slog.Logger) (*Panel, error) {
	host, _, err := net.SplitHostPort(listen)
	if err != nil {
		return nil, fmt.Errorf("panel: address %q: %w (write 127.0.0.1:8411)", listen, err)
	}
	far := fmt.Errorf("panel: address %q is not loopback: the page has no login yet and stays on this machine (write 127.0.0.1:8411, and reach it through an SSH tunnel)", listen)
	if !loopback(host) {
		return nil, far
	}
	ln, err := net.Listen("tcp", listen)
	if err != nil {
		return nil, fmt.Errorf("panel: %w", err)
	}
	if a, ok := ln.Addr().(*net.TCPAddr); !ok || !a.IP.IsLoopback() { // a hosts file may say anything of localhost
		return nil, errors.Join(far, ln.Close())
	}
	if log == nil {
		log = slog.New(slog.DiscardHandler)
	}
	pulls := newPulls(src, log)
	ended := make(chan struct{})
	p := &Panel{ln: ln, pulls: pulls, ended: ended, srv: &http.Server{
		Handler:           guard(routesWith(src, pulls, log, ended)),
		ReadHeaderTimeout: 5 * time.Second, ReadTimeout: 10 * time.Second, WriteTimeout: 30 * time.Second, IdleTimeout: time.Minute, MaxHeaderBytes: 16 << 10,
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
	defer p.pulls.close()
	p.once.Do(func() { close(p.ended) })
	if err := p.srv.Shutdown(ctx); err != nil {
		return p.srv.Close()
	}
	return nil
}

// loopback tells whether a host name or address stays on this machine.
func loopback(host string) bool {
	ip := net.ParseIP(strings.Trim(host, "[]"))
	return strings.EqualFold(host, "localhost") || ip != nil && ip.IsLoopback()
}

// contentPolicy lets pages load nothing but what this server has, and run nothing but its own script file.
const contentPolicy = "default-src 'none'; style-src 'self'; script-src 'self'; img-src 'self'; connect-src 'self'; form-action 'self'; frame-ancestors 'none'; base-uri 'none'"

// guard refuses what a browser on this machine could be tricked into: foreign host names, writes, and requests to the
// API that another site's page makes.
func guard(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		h := w.Header()
		h.Set("Content-Security-Policy", contentPolicy)
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("Referrer-Policy", "no-referrer")
		h.Set("Cross-Origin-Resource-Policy", "same-origin")
		h.Set("Cache-Control", "no-store")
		host, _, err := net.SplitHostPort(r.Host)
		if err != nil {
			host = r.Host
		}
		if !loopback(host) {
			http.Error(w, "this page answers to loopback addresses only", http.StatusMisdirectedRequest)
			return
		}
		switch {
		case (r.URL.Path == ordersPath || r.URL.Path == baselinesPath) && r.Method == http.MethodPost:
			if status, why := mayOrder(r); status != 0 {
				http.Error(w, why, status)
				return
			}
		case r.Method != http.MethodGet && r.Method != http.MethodHead:
			h.Set("Allow", "GET, HEAD")
			http.Error(w, "read only", http.StatusMethodNotAllowed)
			return
		}
		if r.Header.Get("Sec-Fetch-Site") == "cross-site" && (strings.HasPrefix(r.URL.Path, "/api/") || r.URL.Path == "/metrics") {
			http.Error(w, "not for other sites' pages", http.StatusForbidden)
			return
		}
		next.ServeHTTP(w, r)
	})
}

func routes(src Source, log *slog.Logger) http.Handler {
	return routesWith(src, newPulls(src, log), log, make(chan struct{}))
}

func routesWith(src Source, pulls *pulls, log *slog.Logger, ended chan struct{}) http.Handler {
	mux := http.NewServeMux()
	routeAll(mux, src, pulls, log, ended)
	return mux
}

// routeAll tells the mux of every page and of the whole API.
func routeAll(mux router, src Source, pulls *pulls, log *slog.Logger, ended chan struct{}) {
	seen := &newest{}
	s := &site{src: src, seen: seen, log: log}
	if l, ok := src.(Looker); ok {
		s.look = &looking{pics: newPictures(l), log: log}
		s.look.routes(mux)
	}
	s.routes(mux)
	mux.HandleFunc("GET /api/v1/events", newStream(src, seen, ended).serve)
	mux.HandleFunc("GET /api/v1/openapi.json", openAPI)
	mux.HandleFunc("GET /api/v1/now", func(w http.ResponseWriter, r *http.Request) {
		n := *src.Now()
		n.Findings, n.Standing, n.Journal, n.Clips = list(n.Findings), list(n.Standing), list(n.Journal), list(n.Clips)
		sendJSON(w, n, log)
	})
	mux.HandleFunc("GET /api/v1/clips", func(w http.ResponseWriter, r *http.Request) {
		sendJSON(w, list(src.Now().Clips), log)
	})
	mux.HandleFunc("GET /api/v1/alarms", func(w http.ResponseWriter, r *http.Request) { sendJSON(w, src.Alarms(), log) })
	mux.HandleFunc("GET /api/v1/schemas", func(w http.ResponseWriter, r *http.Request) { sendJSON(w, wire.SchemaNames(), log) })
	mux.HandleFunc("GET /api/v1/schemas/{name}", func(w http.ResponseWriter, r *http.Request) {
		b, err := wire.Schema(r.PathValue("name"))
		if err != nil {
			http.Error(w, "no such schema", http.StatusNotFound)
			return
		}
		w.Header().Set("Content-Type", "application/schema+json")
		_, _ = w.Write(b)
	})
	mux.HandleFunc("GET /metrics", scrape(src, log))
	mux.HandleFunc("GET /api/v1/why", why(src, log))
	mux.HandleFunc("GET /api/v1/journal", journal(src, log))
	mux.HandleFunc("POST "+ordersPath, order(src, log))
	learning(mux, src, log)
	pulls.routes(mux)
	c := clipper{src: src, log: log, busy: make(chan struct{}, exports)}
	mux.HandleFunc("GET /api/v1/clips/{id}", c.send)
}

// newest remembers since when a snapshot has been the newest one, as far as the page was asked for: a line that stands
// still must not go on looking healthy.
type newest struct {
	mu    sync.Mutex
	last  *wire.Now
	since time.Time
}

func (s *newest) age(n *wire.Now, now time.Time) time.Duration {
	s.mu.Lock()
	defer s.mu.Unlock()
	if n != s.last {
		s.last, s.since = n, now
	}
	return now.Sub(s.since)
}

// list makes an empty list out of none: in JSON nothing is [], not null.
func list[T any](s []T) []T {
	if s == nil {
		return []T{}
	}
	return s
}

func sendJSON(w http.ResponseWriter, v any, log *slog.Logger) {
	b, err := json.Marshal(v)
	if err != nil {
		log.Error("panel: API", "err", err)
		http.Error(w, "the answer could not be written; see the log", http.StatusInternalServerError)
		return
	}
	w.Header().Set("Content-Type", "application/json")
	_, _ = w.Write(append(b, '\n'))
}
