package station

import (
	"math"
	"slices"
	"sync"
	"sync/atomic"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/duty"
	"lapwing/internal/panel"
	"lapwing/internal/wire"
)

// How long one question keeps pictures coming, and how often one is made while questions come. Wall clock: a replay
// faster than time must not make more of them.
const (
	askedFor  = 5 * time.Second
	lookEvery = 500 * time.Millisecond
)

// gallery hands pictures of turns and stretches of raw signals to the page. Pages ask, the compute goroutine makes what was
// asked for of late, and hands it over whole; while nobody looks it costs one load of an atomic a throw and turn.
type gallery struct {
	began  time.Time
	looks  []sitter
	raw    atomic.Int64 // when somebody last asked for a raw signal, ns after began
	heard  atomic.Pointer[stretch]
	recent []acq.Block // compute goroutine: the newest second
	spread time.Time   // compute goroutine: when it was last handed over
	devs   []duty.Deviation

	reference sync.Mutex // one look into a clip at a time
	clip      string     // the clip that kept was taken of
	kept      map[string]*panel.Look
}

// sitter is one throw.
type sitter struct {
	asked atomic.Int64 // ns after began
	shown atomic.Pointer[panel.Look]
	made  time.Time // compute goroutine
}

// stretch is about a second of raw blocks without a gap; they never change.
type stretch struct {
	blocks []acq.Block
	at     time.Time // UTC, of the sample after the last
}

const notAsked = math.MinInt64 / 2

func newGallery(throws int) *gallery {
	g := &gallery{began: time.Now(), looks: make([]sitter, throws), kept: map[string]*panel.Look{}}
	g.raw.Store(notAsked)
	for i := range g.looks {
		g.looks[i].asked.Store(notAsked)
	}
	return g
}

func (g *gallery) ask(a *atomic.Int64) { a.Store(int64(time.Since(g.began))) }

func (g *gallery) wanted(a *atomic.Int64) bool {
	return int64(time.Since(g.began))-a.Load() < int64(askedFor)
}

// portray makes the pictures that somebody has asked for, out of the turn that o brought. Compute goroutine.
func (s *Station) portray(o *Output) {
	if o.Turn == nil || !o.Turn.Valid() {
		return
	}
	g := s.gallery
	for i := range g.looks {
		t := &g.looks[i]
		if !g.wanted(&t.asked) {
			continue
		}
		now := time.Now()
		if now.Sub(t.made) < lookEvery {
			continue
		}
		if l := s.line.lookAt(o, i, &g.devs); l != nil {
			t.made = now
			t.shown.Store(l)
		}
	}
}

// lookAt takes the picture of a throw with its measures out of a turn; nil when there is none.
func (l *Line) lookAt(o *Output, throw int, devs *[]duty.Deviation) *panel.Look {
	c, err := l.Picture(o, throw)
	if err != nil {
		return nil
	}
	p := &panel.Look{Throw: l.sk.Throws[throw].ID, Turn: o.Turn.Number, At: o.At.UTC(), Picture: c, Against: l.notCompared(throw)}
	*devs = (*devs)[:0]
	if l.ref != nil {
		*devs = l.ref.Deviate(*devs, throw, l.points[throw], o.Vector)
	} else {
		for i := range l.layout {
			if v := o.Vector.V[i]; l.layout[i].Throw == throw && !math.IsNaN(v) {
				*devs = append(*devs, duty.Deviation{Feature: i, Value: v, Expected: math.NaN(), Spread: math.NaN(), Z: math.NaN()})
			}
		}
	}
	rec := o.Record.Throws
	if len(rec) == 0 { // not every turn has a whole record
		rec = l.record.Record(o.Turn, o.Windows, o.Vector, o.Points).Throws
	}
	if throw < len(rec) {
		p.Record = &rec[throw]
	}
	for i := range *devs {
		p.Measures = append(p.Measures, wire.FromDeviation(&(*devs)[i], l.layout))
	}
	return p
}

// overhear keeps the newest second of raw samples while somebody looks at a channel. Compute goroutine; b is not touched
// by anybody afterwards.
func (s *Station) overhear(b *acq.Block) {
	g := s.gallery
	if !g.wanted(&g.raw) {
		if g.recent != nil {
			g.recent = nil
			g.heard.Store(nil)
		}
		return
	}
	if n := len(g.recent); n > 0 && (b.Lost > 0 || b.Seq0 != g.recent[n-1].Seq0+int64(g.recent[n-1].N)) {
		g.recent = g.recent[:0:0]
	}
	g.recent = append(g.recent, *b)
	end := b.Seq0 + int64(b.N)
	for len(g.recent) > 1 && end-g.recent[1].Seq0 >= int64(s.info.Rate) {
		g.recent = g.recent[1:]
	}
	if end-g.recent[0].Seq0 < int64(s.info.Rate) {
		return // a second is promised
	}
	if now := time.Now(); now.Sub(g.spread) >= lookEvery {
		g.spread = now
		g.heard.Store(&stretch{blocks: slices.Clone(g.recent), at: s.line.utc(float64(end) / s.info.Rate)})
	}
}
