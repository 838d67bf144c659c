package panel

import (
	"context"
	"encoding/json"
	"errors"
	"io"
	"log/slog"
	"mime"
	"net/http"
	"net/url"
	"time"

	"lapwing/internal/wire"
)

// Why an order could not even be refused: it was not carried out, and asking again may help. Source.Order wraps them.
var (
	ErrBusy       = errors.New("too much is waiting; try again")
	ErrNotRunning = errors.New("the monitor has ended")
)

const (
	// OrderHeader must come with every order and says by which way it comes: page, tool or api. No other site's page can
	// make a browser send it without being asked first, and the answer to that question is no.
	OrderHeader = "Lapwing-Order"
	ordersPath  = "/api/v1/orders"
	orderWait   = 10 * time.Second
)

var orderWays = map[string]bool{"page": true, "tool": true, "api": true}

// order takes one order in.
func order(src Source, log *slog.Logger) http.HandlerFunc {
	return func(w http.ResponseWriter, r *http.Request) {
		raw, err := io.ReadAll(http.MaxBytesReader(w, r.Body, wire.MaxOrder))
		if err != nil {
			var big *http.MaxBytesError
			if errors.As(err, &big) {
				http.Error(w, "an order is never that long", http.StatusRequestEntityTooLarge)
				return
			}
			http.Error(w, "the order did not arrive whole", http.StatusBadRequest)
			return
		}
		o, err := wire.ParseOrder(raw)
		if err != nil {
			http.Error(w, err.Error(), http.StatusBadRequest)
			return
		}
		o.Via = r.Header.Get(OrderHeader)
		ctx, cancel := context.WithTimeout(r.Context(), orderWait)
		defer cancel()
		receipt, err := src.Order(ctx, o)
		answer(w, receipt, err, log)
	}
}

// answer tells what became of an order.
func answer(w http.ResponseWriter, receipt wire.Receipt, err error, log *slog.Logger) {
	switch {
	case errors.Is(err, ErrBusy):
		w.Header().Set("Retry-After", "2")
		http.Error(w, "not carried out: "+ErrBusy.Error(), http.StatusServiceUnavailable)
		return
	case errors.Is(err, ErrNotRunning):
		http.Error(w, "not carried out: "+ErrNotRunning.Error(), http.StatusServiceUnavailable)
		return
	case err != nil:
		log.Error("panel: order", "err", err)
		http.Error(w, "the order was not carried out; see the log", http.StatusInternalServerError)
		return
	}
	b, err := json.Marshal(receipt)
	if err != nil {
		log.Error("panel: order", "err", err)
		http.Error(w, "the answer could not be written; see the log and the journal", http.StatusInternalServerError)
		return
	}
	w.Header().Set("Content-Type", "application/json")
	if !receipt.Accepted {
		w.WriteHeader(http.StatusConflict)
	}
	_, _ = w.Write(append(b, '\n'))
}

// mayOrder refuses an order that a person at this machine did not mean: one that a page of another site sends through
// the browser. It gives the status and the reason; 0 when the request may pass.
func mayOrder(r *http.Request) (status int, why string) {
	switch kind, _, err := mime.ParseMediaType(r.Header.Get("Content-Type")); {
	case !orderWays[r.Header.Get(OrderHeader)]:
		return http.StatusForbidden, "an order needs the header " + OrderHeader + " with page, tool or api"
	case err != nil || kind != "application/json":
		return http.StatusUnsupportedMediaType, "an order is application/json"
	}
	if s := r.Header.Get("Sec-Fetch-Site"); s != "" && s != "same-origin" && s != "none" {
		return http.StatusForbidden, "not for other sites' pages"
	}
	if origin := r.Header.Get("Origin"); origin != "" {
		u, err := url.Parse(origin)
		if err != nil || u.Scheme != "http" || u.Host != r.Host {
			return http.StatusForbidden, "not for other sites' pages"
		}
	}
	return 0, ""
}
