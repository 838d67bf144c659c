package panel

import (
	"context"
	"errors"
	"io"
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
	// Import checks a baseline file and lets it wait for a person's word, as what a learning run gave. A file that is
	// refused is no error: the receipt says so. anySkid lets another version of the skid file pass.
	Import(ctx context.Context, raw []byte, anySkid bool, o wire.Order) (wire.Receipt, error)
}

const (
	baselinesPath = "/api/v1/baselines"
	baselineMost  = 64 << 20 // bytes of a baseline file
)

// learning serves
//
//	GET /api/v1/learning          what is being learnt, what waits, what is in force
//	GET /api/v1/baselines         the stored baselines
//	GET /api/v1/baselines/{id}    one of them as the file that lapwing baseline import and lapwing review take
//	POST /api/v1/baselines        such a file, to wait for a person's word; by, reason and other_skid=yes in the query;
//	                              guarded and answered as an order
func learning(mux router, src Source, log *slog.Logger) {
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
	mux.HandleFunc("POST "+baselinesPath, func(w http.ResponseWriter, r *http.Request) {
		raw, err := io.ReadAll(http.MaxBytesReader(w, r.Body, baselineMost))
		if err != nil {
			http.Error(w, "the file did not arrive whole, or is too long", http.StatusBadRequest)
			return
		}
		q := r.URL.Query()
		o := wire.Order{Verb: wire.VerbImport, By: q.Get("by"), Reason: q.Get("reason"), Via: r.Header.Get(OrderHeader)}
		ctx, cancel := context.WithTimeout(r.Context(), orderWait)
		defer cancel()
		receipt, err := l.Import(ctx, raw, q.Get("other_skid") == "yes", o)
		answer(w, receipt, err, log)
	})
	mux.HandleFunc("GET "+baselinesPath, func(w http.ResponseWriter, r *http.Request) {
		all, err := l.Baselines()
		if err != nil && len(all) == 0 {
			log.Error("panel: baselines", "err", err)
			http.Error(w, "the baselines cannot be read; see the log", http.StatusInternalServerError)
			return
		}
		sendJSON(w, list(all), log)
	})
	mux.HandleFunc("GET "+baselinesPath+"/{id}", func(w http.ResponseWriter, r *http.Request) {
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
