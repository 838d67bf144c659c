package tape

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"time"

	"lapwing/internal/acq"
)

// Span is a stretch of samples of one run, [From, To).
type Span struct {
	Run      uint32
	From, To int64
}

// Extent is what is stored of one run.
type Extent struct {
	Span
	FromUTC, ToUTC time.Time // zero when the clock was not tied to UTC
}

// DamageError tells which segments could not be read; everything else was delivered.
type DamageError struct {
	Segments []SegmentDamage
}

// SegmentDamage is one segment that could not be read.
type SegmentDamage struct {
	Segment  uint64
	From, To int64 // its sample numbers, by the index
	Err      error
}

func (e *DamageError) Error() string {
	var b strings.Builder
	fmt.Fprintf(&b, "tape: %d segments unreadable:", len(e.Segments))
	for i, s := range e.Segments {
		if i == 4 {
			fmt.Fprintf(&b, " …")
			break
		}
		fmt.Fprintf(&b, " samples %d to %d (%v)", s.From, s.To, s.Err)
	}
	return b.String()
}

// Read gives the stored samples with numbers in [from, to) of the run being written to fn, in order, in blocks of at
// most one segment. Lost, Clip and Note are as the source gave them; samples that are not there any more, or not
// readable, are Lost in the block after them. The block is fn's during the call only. It stops at fn's first error and
// gives that; otherwise a *DamageError when segments were unreadable. What has not been committed yet is not read; see
// Flush.
func (t *Tape) Read(from, to int64, fn func(*acq.Block) error) error {
	return t.ReadSpan(Span{t.run.Load(), from, to}, fn)
}

// ReadSpan is Read for any run.
func (t *Tape) ReadSpan(s Span, fn func(*acq.Block) error) error {
	return t.ring.read(s, nil, fn)
}

// ReadClip is Read for what is stored of a clip.
func (t *Tape) ReadClip(id string, fn func(*acq.Block) error) error {
	c, err := t.Clip(id)
	if err != nil {
		return err
	}
	return t.clips.read(Span{c.Run, c.From, c.To}, nil, fn)
}

// Extents lists what the ring holds, oldest run first.
func (t *Tape) Extents() []Extent {
	var out []Extent
	for _, g := range t.ring.snapshot(func(*segInfo) bool { return true }) {
		if n := len(out); n == 0 || out[n-1].Run != g.run {
			out = append(out, Extent{Span: Span{Run: g.run, From: g.seq0}})
			if g.utc0 != 0 {
				out[n].FromUTC = time.Unix(0, g.utc0).UTC()
			}
		}
		e := &out[len(out)-1]
		e.To = g.end
		if g.utc0 != 0 {
			// Within a run the rate does not change: the time of its end follows from the newest segment's start.
			e.ToUTC = time.Unix(0, g.utc0).UTC().Add(time.Duration(float64(g.end-g.seq0) / t.opt.Info.Rate * 1e9))
		}
	}
	return out
}

// SeqAt gives the run and sample number stored for a moment; false when the ring holds nothing of it.
func (t *Tape) SeqAt(at time.Time) (run uint32, seq int64, ok bool) {
	for _, g := range t.ring.snapshot(func(g *segInfo) bool { return g.utc0 != 0 && g.utc0 <= at.UnixNano() }) {
		s := g.seq0 + int64(math.Round(float64(at.UnixNano()-g.utc0)/1e9*t.opt.Info.Rate))
		if s < g.end || g.end == t.next.Load() && g.run == t.run.Load() {
			run, seq, ok = g.run, s, true
		}
	}
	return run, seq, ok
}

// stretch is a part of a segment without anything happening inside: between events, or one event.
type stretch struct {
	off, n int
	seq    int64 // number of its first sample
	event  *event
}

func (m *segMeta) stretches() []stretch {
	var out []stretch
	at, seq := 0, m.Seq0
	add := func(n int, e *event) {
		if n > 0 {
			out = append(out, stretch{off: at, n: n, seq: seq, event: e})
			at, seq = at+n, seq+int64(n)
		}
	}
	for i := range m.Events {
		e := &m.Events[i]
		add(e.Off-at, nil)
		if e.Off > 0 {
			seq += e.Lost
		}
		add(e.N, e)
	}
	add(m.N-at, nil)
	return out
}

// read delivers a span of one store. meta, when given, sees each segment's description before its blocks.
func (s *store) read(span Span, meta func(*segMeta), fn func(*acq.Block) error) error {
	pack, err := newPacker(false)
	if err != nil {
		return err
	}
	defer pack.dec.Close()
	r := reader{span: span, fn: fn, next: math.MinInt64}
	var damage DamageError
	for _, g := range s.snapshot(func(g *segInfo) bool { return g.run == span.Run && g.end > span.From && g.seq0 < span.To }) {
		m, err := r.unpack(s, pack, g)
		if errors.Is(err, errGone) {
			r.missing = "tape: rolled away while reading"
			continue
		}
		if err != nil {
			damage.Segments = append(damage.Segments, SegmentDamage{Segment: g.key, From: g.seq0, To: g.end, Err: err})
			r.missing = "tape: unreadable: " + err.Error()
			continue
		}
		if meta != nil {
			meta(m)
		}
		for _, st := range m.stretches() {
			if err := r.give(st); err != nil {
				return err
			}
		}
	}
	if len(damage.Segments) > 0 {
		return &damage
	}
	return nil
}

// reader carries one reading from segment to segment.
type reader struct {
	span    Span
	fn      func(*acq.Block) error
	next    int64 // number after the last sample given; MinInt64 before the first
	missing string
	counts  [][]int32
	block   acq.Block
}

func (r *reader) unpack(s *store, pack *packer, g segInfo) (*segMeta, error) {
	p, err := s.load(g)
	if err != nil {
		return nil, err
	}
	m, err := decodeMeta(p.meta)
	if err != nil {
		return nil, fmt.Errorf("segment %d: %w", g.key, err)
	}
	if len(p.chans) != m.Channels || m.Seq0 != g.seq0 || m.N != int(g.n) || m.end() != g.end {
		return nil, fmt.Errorf("segment %d: description and contents disagree", g.key)
	}
	r.counts = grown(r.counts, m.Channels)
	for c, rec := range p.chans {
		x, seq0, err := pack.unpack(r.counts[c], rec)
		if err == nil && (len(x) != m.N || seq0 != m.Seq0) {
			err = fmt.Errorf("%w: %d samples from %d where %d from %d belong", errRecord, len(x), seq0, m.N, m.Seq0)
		}
		if err != nil {
			return nil, fmt.Errorf("segment %d channel %d: %w", g.key, c, err)
		}
		r.counts[c] = x
	}
	return m, nil
}

// give hands on the part of a stretch that lies in the span.
func (r *reader) give(s stretch) error {
	lo, hi := max(s.seq, r.span.From), min(s.seq+int64(s.n), r.span.To)
	if lo >= hi {
		return nil
	}
	b := &r.block
	counts := grown(b.Counts, len(r.counts))
	*b = acq.Block{Seq0: lo, N: int(hi - lo), Counts: counts}
	off := s.off + int(lo-s.seq)
	for c, x := range r.counts {
		counts[c] = x[off : off+b.N]
	}
	var note []string
	if e := s.event; e != nil {
		b.Clip = e.Clip
		if lo == s.seq {
			b.Lost = min(e.Lost, lo-r.span.From)
		}
		if e.Note != "" {
			note = append(note, e.Note)
		}
	}
	switch {
	case r.next != math.MinInt64:
		b.Lost = lo - r.next
	case r.missing != "":
		b.Lost = lo - r.span.From
	}
	switch {
	case r.missing != "":
		note = append(note, r.missing)
	case b.Lost > 0 && (s.event == nil || s.event.Lost == 0):
		note = append(note, "tape: not kept")
	}
	b.Note = strings.Join(note, "; ")
	r.next, r.missing = hi, ""
	return r.fn(b)
}
