package panel

import (
	"bufio"
	"encoding/json"
	"net/http"
	"slices"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"lapwing/internal/wire"
)

// moving is a source whose snapshot can be exchanged.
type moving struct {
	still
	present atomic.Pointer[wire.Now]
}

func (m *moving) Now() *wire.Now { return m.present.Load() }

func TestEvents(t *testing.T) {
	src := &moving{}
	src.present.Store(full())
	ended := make(chan struct{})
	s := newStream(src, &newest{}, ended)
	s.every = time.Millisecond
	mux := http.NewServeMux()
	mux.HandleFunc("GET /events", s.serve)
	url := serve(t, mux, func() { close(ended) })
	resp, err := http.Get(url + "/events")
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	lines := bufio.NewScanner(resp.Body)
	next := func() (e event) {
		for lines.Scan() {
			if d, ok := strings.CutPrefix(lines.Text(), "data: "); ok {
				if err := json.Unmarshal([]byte(d), &e); err != nil {
					t.Fatal(err)
				}
				return e
			}
		}
		t.Fatal("the stream ended")
		return e
	}
	e := next()
	if e.Turn != 48211 || e.Class != "danger" || e.Standing != 3 || e.Journal != 33 || !slices.Contains(e.Refresh, "journal") || !slices.Contains(e.Refresh, "channels") {
		t.Errorf("first: %+v", e)
	}
	n := full()
	n.Latest.Turn++
	n.At = n.At.Add(time.Second)
	src.present.Store(n)
	if e := next(); !slices.Equal(e.Refresh, []string{"machine", "cylinder"}) || e.Turn != 48212 {
		t.Errorf("a turn later: %+v", e)
	}
	m := *n
	m.Clips = m.Clips[:1]
	src.present.Store(&m)
	if e := next(); !slices.Equal(e.Refresh, []string{"machine", "tape"}) {
		t.Errorf("a clip less: %+v", e)
	}
	close(ended)
	ended = make(chan struct{}) // for serve, which closes it too
	for lines.Scan() {
		if lines.Text() != "" {
			t.Errorf("after the end: %q", lines.Text())
		}
	}
}

// serve runs a handler on loopback until the test ends.
func serve(t *testing.T, h http.Handler, before func()) string {
	t.Helper()
	srv := newLoopback(t, h)
	t.Cleanup(func() { before(); srv.Close(); http.DefaultClient.CloseIdleConnections() })
	return srv.URL
}

func TestListenersAreFew(t *testing.T) {
	s := newStream(&still{now: full()}, &newest{}, make(chan struct{}))
	for range listeners {
		s.room <- struct{}{}
	}
	srv := newLoopback(t, http.HandlerFunc(s.serve))
	t.Cleanup(func() { srv.Close(); http.DefaultClient.CloseIdleConnections() })
	resp, err := http.Get(srv.URL)
	if err != nil {
		t.Fatal(err)
	}
	resp.Body.Close()
	if resp.StatusCode != 503 || resp.Header.Get("Retry-After") == "" {
		t.Errorf("one too many: %d", resp.StatusCode)
	}
}

// An open page does not hold up the end of the daemon.
func TestCloseEndsTheStream(t *testing.T) {
	p, err := Open("127.0.0.1:0", &still{now: full()}, nil)
	if err != nil {
		t.Fatal(err)
	}
	done := make(chan error)
	go func() { done <- p.Serve() }()
	resp, err := http.Get(p.URL() + "api/v1/events")
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	if err := p.Close(); err != nil {
		t.Errorf("close: %v", err)
	}
	if err := <-done; err != nil {
		t.Error(err)
	}
	http.DefaultClient.CloseIdleConnections()
}
