package panel

import (
	"errors"
	"log/slog"
	"net/http"
	"strconv"

	"lapwing/internal/wire"
)

// ErrNoBaseline says that a baseline of that number does not exist. Learner.Baseline wraps it.
var ErrNoBaseline = errors.New("no such baseline")

// Learner is what a Source may have beside: learning runs and the baselines that came of them.
type Learner interface {
	// Learning tells what is being learnt, what waits, what is in force; nil before anything is known.
	Learning() *wire.Learning
	// Baselines lists what is stored, oldest first.
	Baselines() ([]wire.Baseline, error)
	// Baseline gives one as the file that is exported.
	Baseline(id uint64) ([]byte, error)
}

// learning serves
//
//	GET /api/v1/learning          what is being learnt, what waits, what is in force
//	GET /api/v1/baselines         the stored baselines
//	GET /api/v1/baselines/{id}    one of them as the file that lapwing baseline import and lapwing review take
func learning(mux *http.ServeMux, src Source, log *slog.Logger) {
	l, ok := src.(Learner)
	if !ok {
		return
	}
	mux.HandleFunc("GET /api/v1/learning", func(w http.ResponseWriter, r *http.Request) {
		now := l.Learning()
		if now == nil {
			http.Error(w, "nothing is known yet; try again", http.StatusServiceUnavailable)
			return
		}
		sendJSON(w, now, log)
	})
	mux.HandleFunc("GET /api/v1/baselines", func(w http.ResponseWriter, r *http.Request) {
		all, err := l.Baselines()
		if err != nil && len(all) == 0 {
			log.Error("panel: baselines", "err", err)
			http.Error(w, "the baselines cannot be read; see the log", http.StatusInternalServerError)
			return
		}
		sendJSON(w, list(all), log)
	})
	mux.HandleFunc("GET /api/v1/baselines/{id}", func(w http.ResponseWriter, r *http.Request) {
		id, err := strconv.ParseUint(r.PathValue("id"), 10, 64)
		if err != nil || id == 0 {
			http.Error(w, "a baseline has a number", http.StatusBadRequest)
			return
		}
		raw, err := l.Baseline(id)
		switch {
		case errors.Is(err, ErrNoBaseline):
			http.Error(w, ErrNoBaseline.Error(), http.StatusNotFound)
			return
		case err != nil:
			log.Error("panel: baseline", "id", id, "err", err)
			http.Error(w, "the baseline cannot be read; see the log", http.StatusInternalServerError)
			return
		}
		w.Header().Set("Content-Type", "application/json")
		_, _ = w.Write(raw)
	})
}
