package panel

import (
	"context"
	"errors"
	"log/slog"
	"net/http"
	"strconv"
	"unicode/utf8"
)

// why answers why something was found, or why nothing was.
func why(src Source, log *slog.Logger) http.HandlerFunc {
	return func(w http.ResponseWriter, r *http.Request) {
		q := r.URL.Query()
		for name, vals := range q {
			if name != "subject" && name != "turn" || len(vals) != 1 {
				http.Error(w, "write ?subject=t1.he.suction&turn=4711, both may be left out", http.StatusBadRequest)
				return
			}
		}
		subject := q.Get("subject")
		var turn int64
		if s := q.Get("turn"); s != "" {
			n, err := strconv.ParseInt(s, 10, 64)
			if err != nil || n < 1 {
				http.Error(w, "turn: a whole number above 0", http.StatusBadRequest)
				return
			}
			turn = n
		}
		if len(subject) > 200 || !utf8.ValidString(subject) {
			http.Error(w, "subject: a name like t1.he.suction", http.StatusBadRequest)
			return
		}
		ctx, cancel := context.WithTimeout(r.Context(), orderWait)
		defer cancel()
		a, err := src.Why(ctx, subject, turn)
		switch {
		case errors.Is(err, ErrBusy), errors.Is(err, ErrNotRunning):
			w.Header().Set("Retry-After", "2")
			http.Error(w, "the line is busy or has ended", http.StatusServiceUnavailable)
			return
		case err != nil:
			log.Error("panel: why", "err", err)
			http.Error(w, "no answer; see the log", http.StatusInternalServerError)
			return
		}
		a.Said, a.Blocks, a.Turns, a.Points = list(a.Said), list(a.Blocks), list(a.Turns), list(a.Points)
		sendJSON(w, a, log)
	}
}
