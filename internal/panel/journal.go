package panel

import (
	"encoding/csv"
	"errors"
	"log/slog"
	"net/http"
	"time"

	"lapwing/internal/wire"
)

const exportWrite = 5 * time.Minute // for the slowest reader of a whole journal

// journal answers with one page as JSON, or with everything that the filter keeps as CSV or JSON lines.
func journal(src Source, log *slog.Logger) http.HandlerFunc {
	return func(w http.ResponseWriter, r *http.Request) {
		q := r.URL.Query()
		f, err := wire.ParseJournalFilter(q)
		if err != nil {
			http.Error(w, err.Error(), http.StatusBadRequest)
			return
		}
		whole := q.Get("format") == "csv" || q.Get("format") == "jsonl"
		if whole && !q.Has("limit") {
			f.Limit = wire.MaxPage
		}
		p, err := src.Journal(f)
		switch {
		case errors.Is(err, ErrQuery):
			http.Error(w, err.Error(), http.StatusBadRequest)
			return
		case err != nil:
			log.Error("panel: journal", "err", err)
			http.Error(w, "the journal could not be read; see the log", http.StatusInternalServerError)
			return
		case !whole:
			p.Entries = list(p.Entries)
			sendJSON(w, p, log)
			return
		}
		_ = http.NewResponseController(w).SetWriteDeadline(time.Now().Add(exportWrite)) // a recorder in a test has none
		if err := exportJournal(w, src, f, p, q.Get("format")); err != nil {
			log.Warn("panel: journal not sent whole", "err", err)
			panic(http.ErrAbortHandler) // the connection is cut, so that half a journal does not look whole
		}
	}
}

// exportJournal writes page after page, the first of which is here already.
func exportJournal(w http.ResponseWriter, src Source, f wire.JournalFilter, p wire.JournalPage, format string) (err error) {
	write := func(es []wire.Entry) error { return wire.WriteLines(w, es) }
	w.Header().Set("Content-Type", "application/jsonl")
	w.Header().Set("Content-Disposition", `attachment; filename="lapwing-journal.`+format+`"`)
	if format == "csv" {
		w.Header().Set("Content-Type", "text/csv; charset=utf-8")
		c := csv.NewWriter(w)
		if err := c.Write(wire.JournalColumns); err != nil {
			return err
		}
		write = func(es []wire.Entry) error {
			if err := wire.WriteCSV(c, es); err != nil {
				return err
			}
			c.Flush()
			return c.Error()
		}
	}
	for {
		if err := write(p.Entries); err != nil {
			return err
		}
		if p.Next == "" {
			return nil
		}
		f.Page = p.Next
		if p, err = src.Journal(f); err != nil {
			return err
		}
	}
}
