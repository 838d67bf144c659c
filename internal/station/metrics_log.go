package station

import (
	"context"
	"fmt"
	"log/slog"
	"strings"
	"sync"
	"time"
	"unicode"
)

// thinned is a log that says a warning or an error that comes again and again only now and then, with how often it came
// meanwhile: a broker that is away for a day must not push a day of other lines out of the log. Lines of lower level pass;
// every alarm transition is one of them. It also counts, for the metrics.
type thinned struct {
	next slog.Handler
	with string // attributes and groups given with the logger
	log  *logged
}

// logged is what all loggers made from one share.
type logged struct {
	mu    sync.Mutex
	said  map[string]*repeated
	now   func() time.Time
	lines map[slog.Level]int64 // written
	held  int64                // not written
}

type repeated struct {
	at    time.Time // when it was last written
	held  int       // since
	pause time.Duration
}

const (
	firstPause  = time.Minute // after a line was written, before the same may be again; doubled up to:
	longPause   = time.Hour
	mostSayings = 500
)

func thin(next slog.Handler, now func() time.Time) (*slog.Logger, *logged) {
	l := &logged{said: map[string]*repeated{}, now: now, lines: map[slog.Level]int64{}}
	return slog.New(&thinned{next: next, log: l}), l
}

func (t *thinned) Enabled(ctx context.Context, l slog.Level) bool { return t.next.Enabled(ctx, l) }

func (t *thinned) WithAttrs(a []slog.Attr) slog.Handler {
	return &thinned{t.next.WithAttrs(a), t.with + fmt.Sprint(a), t.log}
}

func (t *thinned) WithGroup(name string) slog.Handler {
	return &thinned{t.next.WithGroup(name), t.with + name + ".", t.log}
}

func (t *thinned) Handle(ctx context.Context, r slog.Record) error {
	held, say := t.log.take(&r, t.with)
	if !say {
		return nil
	}
	if held > 0 {
		r = r.Clone()
		r.AddAttrs(slog.Int("times_before", held))
	}
	return t.next.Handle(ctx, r)
}

// take books a line, and tells whether it is to be written and how many like it were not.
func (l *logged) take(r *slog.Record, with string) (held int, say bool) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if r.Level < slog.LevelWarn {
		l.lines[r.Level]++
		return 0, true
	}
	now, key := l.now(), sameSaying(r, with)
	p := l.said[key]
	switch {
	case p == nil:
		if len(l.said) >= mostSayings {
			clear(l.said) // rather say something twice than grow
		}
		l.said[key] = &repeated{at: now, pause: firstPause}
	case now.Sub(p.at) < p.pause:
		p.held++
		l.held++
		return 0, false
	default:
		if now.Sub(p.at) < 2*p.pause { // it goes on
			p.pause = min(2*p.pause, longPause)
		} else {
			p.pause = firstPause
		}
		held, p.held, p.at = p.held, 0, now
	}
	l.lines[r.Level]++
	return held, true
}

// sameSaying is a line without what changes from one time to the next: numbers, durations, and the digits within an error, where
// ports and times stand. Names stay: two devices are two troubles.
func sameSaying(r *slog.Record, with string) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s %s %s", r.Level, with, r.Message)
	r.Attrs(func(a slog.Attr) bool {
		b.WriteString(" " + a.Key)
		switch v := a.Value.Resolve(); v.Kind() {
		case slog.KindString:
			b.WriteString("=" + v.String())
		case slog.KindAny:
			b.WriteString("=" + strings.Map(noDigit, fmt.Sprint(v.Any())))
		}
		return true
	})
	return b.String()
}

func noDigit(c rune) rune {
	if unicode.IsDigit(c) {
		return -1
	}
	return c
}

func (c *scrape) log(s *Station) {
	if s.logged == nil {
		return
	}
	l := s.logged
	l.mu.Lock()
	defer l.mu.Unlock()
	c.counter("log_lines_total", "Lines written to the log, by level.", count(l.lines[slog.LevelInfo], "level", "info"),
		count(l.lines[slog.LevelWarn], "level", "warn"), count(l.lines[slog.LevelError], "level", "error"))
	c.counter("log_repeats_total", "Warnings and errors not written because the same had just been said.", count(l.held))
}
