package panel

import (
	"encoding/json"
	"fmt"
	"net/http"
	"slices"
	"time"

	"lapwing/internal/wire"
)

// Bounds of the live channel: each open page costs one comparison of two pointers a tick.
const (
	listeners  = 24              // pages that hear of changes at once
	eventEvery = 1 * time.Second // a page hears of the present at most so often
	eventWrite = 3 * time.Second // a page that takes longer to read is dropped; browsers come back by themselves
	eventQuiet = 15 * time.Second
)

// event tells a page what has changed since the one before. It is small: the page asks for what it shows.
type event struct {
	At       time.Time `json:"at,omitzero"`
	Turn     int64     `json:"turn,omitempty"`
	State    string    `json:"state"`
	Class    string    `json:"class"` // of the banner: danger, alert, advisory, mute, good
	Text     string    `json:"text"`  // of the banner
	Standing int       `json:"standing"`
	Journal  uint64    `json:"journal"` // id of the newest entry
	Refresh  []string  `json:"refresh"` // pages that show something else now
}

// stream serves GET /api/v1/events.
type stream struct {
	src   Source
	seen  *newest
	every time.Duration
	room  chan struct{}
	ended chan struct{} // closed when the page closes
}

func newStream(src Source, seen *newest, ended chan struct{}) *stream {
	return &stream{src: src, seen: seen, every: eventEvery, room: make(chan struct{}, listeners), ended: ended}
}

func (s *stream) serve(w http.ResponseWriter, r *http.Request) {
	select {
	case s.room <- struct{}{}:
		defer func() { <-s.room }()
	default:
		w.Header().Set("Retry-After", "10")
		http.Error(w, "too many pages listen already", http.StatusServiceUnavailable)
		return
	}
	rc := http.NewResponseController(w)
	_ = rc.SetReadDeadline(time.Time{}) // the request is long read; its deadline would end the stream
	w.Header().Set("Content-Type", "text/event-stream")
	tick := time.NewTicker(s.every)
	defer tick.Stop()
	var last *wire.Now
	said := time.Time{}
	for {
		n := s.src.Now()
		var text []byte
		b := headline(n, s.seen.age(n, time.Now()))
		switch changed := refresh(last, n); {
		case len(changed) > 0:
			e := event{At: n.At, State: n.Health.State, Class: b.Class, Text: b.Text, Standing: len(n.Standing), Refresh: changed}
			if n.Latest != nil {
				e.Turn = n.Latest.Turn
			}
			if len(n.Journal) > 0 {
				e.Journal = n.Journal[0].ID
			}
			j, err := json.Marshal(e)
			if err != nil {
				return
			}
			text = fmt.Appendf(nil, "event: now\ndata: %s\n\n", j)
		case time.Since(said) > eventQuiet:
			text = []byte(": still here\n\n")
		}
		if len(text) > 0 {
			_ = rc.SetWriteDeadline(time.Now().Add(eventWrite))
			if _, err := w.Write(text); err != nil {
				return
			}
			if err := rc.Flush(); err != nil {
				return
			}
			last, said = n, time.Now()
		}
		select {
		case <-r.Context().Done():
			return
		case <-s.ended:
			return
		case <-tick.C:
		}
	}
}

// refresh lists the pages on which two snapshots differ.
func refresh(a, b *wire.Now) []string {
	if a == b {
		return nil
	}
	if a == nil {
		a = &wire.Now{}
	}
	out := []string{"machine"}
	if turnNumber(a) != turnNumber(b) {
		out = append(out, "cylinder")
	}
	if !slices.EqualFunc(a.Findings, b.Findings, func(x, y wire.Finding) bool {
		return x.Sentence == y.Sentence && x.Grade == y.Grade && x.Turn == y.Turn
	}) {
		out = append(out, "findings")
	}
	if !slices.EqualFunc(a.Journal, b.Journal, func(x, y wire.Alarm) bool { return x.ID == y.ID }) || len(a.Standing) != len(b.Standing) {
		out = append(out, "journal")
	}
	if !slices.EqualFunc(a.Clips, b.Clips, func(x, y wire.Clip) bool { return x.ID == y.ID && x.Complete == y.Complete && x.Bytes == y.Bytes }) || b.At.Sub(a.At) > 10*time.Second {
		out = append(out, "tape")
	}
	if !slices.Equal(a.Health.Channels, b.Health.Channels) {
		out = append(out, "channels")
	}
	return out
}

func turnNumber(n *wire.Now) int64 {
	if n.Latest == nil {
		return 0
	}
	return n.Latest.Turn
}
