package panel

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"os"
	"path/filepath"
	"sync"
	"time"

	"lapwing/internal/wire"
)

// Puller hands out raw samples; the station implements it.
type Puller interface {
	// Pull writes what is asked for into dir: recording, skid file, process values, note. ErrNoClip when there is
	// nothing of it; an error that wraps ErrQuery when the question is at fault.
	Pull(ctx context.Context, q wire.PullQuery, dir string) error
}

const (
	pullKeep  = 15 * time.Minute // how long the files of one pull stay after they were last touched
	pullsKept = 3
)

// pulls keeps exported files in scratch folders while they are fetched, so that a broken transfer goes on where it was.
type pulls struct {
	src Puller
	log *slog.Logger
	now func() time.Time

	mu   sync.Mutex
	held map[string]*heldPull
	busy bool
}

type heldPull struct {
	dir  string
	what string
	list wire.Pulled
	used time.Time
}

func newPulls(src Puller, log *slog.Logger) *pulls {
	return &pulls{src: src, log: log, now: time.Now, held: map[string]*heldPull{}}
}

func (p *pulls) routes(mux router) {
	mux.HandleFunc("GET /api/v1/pull", p.ask)
	mux.HandleFunc("GET /api/v1/pull/{key}/{file}", p.file)
}

// ask exports, or finds the same export again, and lists its files with their checksums.
func (p *pulls) ask(w http.ResponseWriter, r *http.Request) {
	q, err := wire.ParsePullQuery(r.URL.Query())
	if err != nil {
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	}
	what := q.Values().Encode()
	p.mu.Lock()
	p.sweep()
	for _, h := range p.held {
		if h.what == what && q.Clip == "" { // a clip may have grown since
			h.used = p.now()
			list := h.list
			p.mu.Unlock()
			sendJSON(w, list, p.log)
			return
		}
	}
	if p.busy {
		p.mu.Unlock()
		w.Header().Set("Retry-After", "5")
		http.Error(w, "another pull is being written; try again", http.StatusServiceUnavailable)
		return
	}
	p.busy = true
	p.mu.Unlock()
	_ = http.NewResponseController(w).SetWriteDeadline(p.now().Add(clipWrite)) // a recorder in a test has none
	h, err := p.export(r.Context(), q)
	p.mu.Lock()
	p.busy = false
	if err == nil {
		h.what = what
		for _, old := range p.held { // the same clip, exported anew with nothing changed, keeps its key: a transfer goes on
			if old.what == what {
				if same(old.list.Files, h.list.Files) {
					_ = os.RemoveAll(h.dir)
					old.used = p.now()
					h = old
				}
			}
		}
		p.held[h.list.Key] = h
		p.makeRoom()
	}
	p.mu.Unlock()
	switch {
	case errors.Is(err, ErrNoClip):
		http.Error(w, ErrNoClip.Error(), http.StatusNotFound)
	case errors.Is(err, ErrQuery):
		http.Error(w, err.Error(), http.StatusBadRequest)
	case err != nil:
		p.log.Error("panel: pull", "what", what, "err", err)
		http.Error(w, "it could not be exported; see the log", http.StatusInternalServerError)
	default:
		sendJSON(w, h.list, p.log)
	}
}

func same(a, b []wire.PullFile) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

func (p *pulls) export(ctx context.Context, q wire.PullQuery) (h *heldPull, err error) {
	dir, err := os.MkdirTemp("", "lapwing-pull-")
	if err != nil {
		return nil, err
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.RemoveAll(dir))
		}
	}()
	if err := p.src.Pull(ctx, q, dir); err != nil {
		return nil, err
	}
	h = &heldPull{dir: dir, used: p.now(), list: wire.Pulled{Key: rand.Text(), Files: []wire.PullFile{}}}
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, err
	}
	for _, e := range entries {
		f, err := checksum(filepath.Join(dir, e.Name()))
		if err != nil {
			return nil, err
		}
		h.list.Files = append(h.list.Files, f)
	}
	return h, nil
}

func checksum(path string) (wire.PullFile, error) {
	f, err := os.Open(path)
	if err != nil {
		return wire.PullFile{}, err
	}
	defer f.Close()
	sum := sha256.New()
	n, err := io.Copy(sum, f)
	if err != nil {
		return wire.PullFile{}, fmt.Errorf("%s: %w", path, err)
	}
	return wire.PullFile{Name: filepath.Base(path), Bytes: n, SHA256: hex.EncodeToString(sum.Sum(nil))}, nil
}

// file sends one file of a pull; ranges are served, so that a broken transfer goes on where it stopped.
func (p *pulls) file(w http.ResponseWriter, r *http.Request) {
	p.mu.Lock()
	p.sweep()
	h := p.held[r.PathValue("key")]
	var path string
	if h != nil {
		h.used = p.now()
		for _, f := range h.list.Files {
			if f.Name == r.PathValue("file") {
				path = filepath.Join(h.dir, f.Name)
				w.Header().Set("ETag", `"`+f.SHA256+`"`)
			}
		}
	}
	p.mu.Unlock()
	if path == "" {
		http.Error(w, "not here any more: ask for it again", http.StatusNotFound)
		return
	}
	f, err := os.Open(path)
	if err != nil {
		p.log.Error("panel: pull", "err", err)
		http.Error(w, "not here any more: ask for it again", http.StatusNotFound)
		return
	}
	defer f.Close()
	_ = http.NewResponseController(w).SetWriteDeadline(p.now().Add(clipWrite))
	w.Header().Set("Content-Type", "application/octet-stream")
	http.ServeContent(w, r, "", time.Time{}, f)
}

// sweep forgets pulls that nobody has touched for long. The lock is held.
func (p *pulls) sweep() {
	for k, h := range p.held {
		if p.now().Sub(h.used) > pullKeep {
			p.drop(k)
		}
	}
}

// makeRoom forgets those touched longest ago. The lock is held.
func (p *pulls) makeRoom() {
	for len(p.held) > pullsKept {
		oldest := ""
		for k, h := range p.held {
			if oldest == "" || h.used.Before(p.held[oldest].used) {
				oldest = k
			}
		}
		p.drop(oldest)
	}
}

func (p *pulls) drop(key string) {
	if err := os.RemoveAll(p.held[key].dir); err != nil {
		p.log.Warn("panel: a scratch folder stays", "err", err)
	}
	delete(p.held, key)
}

// close removes all scratch folders.
func (p *pulls) close() {
	p.mu.Lock()
	defer p.mu.Unlock()
	for k := range p.held {
		p.drop(k)
	}
}
