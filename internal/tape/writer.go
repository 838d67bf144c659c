package tape

import (
	"encoding/hex"
	"errors"
	"fmt"

	"lapwing/internal/acq"
	"lapwing/internal/tape/boltfile"
)

// writer is the goroutine that turns blocks into segments. All its fields are its own.
type writer struct {
	t    *Tape
	pack *packer

	begun   bool  // a block of this run has come
	next    int64 // sample number expected next
	dropped int64 // of the queue's count, already explained
	owed    int64 // Lost of empty blocks, to be told with the next samples
	cur     segMeta
	counts  [][]int32
	row     *ProcessRow // in force
	key     uint64      // of the next segment
	last    *segMeta    // newest segment of an earlier opening, nil for none
	bad     map[uint64]bool
	packed  []*packed // seconds that are packed and wait for a commit: more than one only when the writer is behind
	thin    [2]uint64 // by stage of thinning: number of the next segment to look at
}

func (t *Tape) newWriter() (*writer, error) {
	p, err := newPacker(true)
	if err != nil {
		return nil, err
	}
	w := &writer{t: t, pack: p, counts: make([][]int32, t.opt.Info.Channels), bad: make(map[uint64]bool)}
	var run uint32
	for _, s := range []*store{t.ring, t.clips} {
		for _, g := range s.segs {
			w.key, run = max(w.key, g.key), max(run, g.run)
		}
	}
	for _, c := range t.clip {
		run = max(run, c.Run)
	}
	w.key++
	t.run.Store(run)
	if n := len(t.ring.segs); n > 0 {
		newest := t.ring.segs[n-1]
		if newest.run == run {
			t.next.Store(newest.end)
		}
		if got, err := t.ring.load(newest); err == nil {
			w.last, _ = decodeMeta(got.meta) // unreadable: a new run begins, nothing else is lost by it
		}
	}
	return w, nil
}

func (w *writer) run() {
	defer close(w.t.done)
	more := true // clips left over from before may be waiting
	for {
		it, ok, closed := w.t.queue.next()
		switch {
		case ok:
			w.handle(it)
		case len(w.packed) > 0:
			w.commitPacked() // a failure is counted and in Stats
		case closed:
			w.cut()
			w.commitPacked()
			for w.fillClips(16) {
			}
			return
		case more:
			more = w.fillClips(1)
		default:
			<-w.t.queue.wake
			more = true
		}
	}
}

func (w *writer) handle(it item) {
	switch {
	case it.block != nil:
		w.add(it.block)
		w.t.queue.recycle(it.block)
	case it.process != nil:
		w.row = it.process
		w.cur.Process = append(w.cur.Process, *it.process)
	case it.mark != nil:
		w.cur.Marks = append(w.cur.Marks, *it.mark)
	case it.flush != nil:
		err := errors.Join(w.cut(), w.commitPacked())
		for w.fillClips(16) {
		}
		it.flush <- err
	}
}

// add puts a block's samples into the open segment and cuts it whenever it is full.
func (w *writer) add(b *acq.Block) {
	if b.N == 0 {
		w.owed += b.Lost
		return
	}
	lost, note := w.gap(b)
	for pos := 0; pos < b.N; {
		off := len(w.counts[0])
		if off == 0 {
			w.cur.Seq0 = b.Seq0 + int64(pos)
		}
		take := min(w.t.opt.segmentSamples()-off, b.N-pos)
		if lost > 0 || b.Clip || note != "" {
			w.event(event{Off: off, N: take, Lost: lost, Clip: b.Clip, Note: note})
			lost = 0
		}
		for c, x := range b.Counts {
			w.counts[c] = append(w.counts[c], x[pos:pos+take]...)
		}
		pos += take
		w.next = b.Seq0 + int64(pos)
		if off+take == w.t.opt.segmentSamples() {
			w.cut() // a failure is counted and in Stats; the samples behind it must not wait
			if !w.behind() {
				w.commitPacked()
			}
		}
	}
}

// gap holds a block's number against the one expected and says what is missing before it, and why.
func (w *writer) gap(b *acq.Block) (lost int64, note string) {
	said := b.Lost + w.owed
	w.owed = 0
	if w.begun && b.Seq0 < w.next { // the source counts anew
		w.cut()
		w.commitPacked()
		w.begun, w.last = false, nil
	}
	if !w.begun {
		w.begun = true
		if !w.continues(b) {
			return said, b.Note
		}
		if lost = b.Seq0 - w.next; lost != said {
			return lost, "tape: not running"
		}
	}
	lost, note = b.Seq0-w.next, b.Note
	if lost == said {
		return lost, note
	}
	w.t.queue.mu.Lock()
	dropped := w.t.queue.samples
	w.t.queue.mu.Unlock()
	why := fmt.Sprintf("tape: sample number jumped by %d where the source said %d", lost, said)
	if dropped > w.dropped {
		why = "tape: queue was full, oldest samples dropped"
		w.dropped = dropped
	}
	if note != "" {
		why = note + "; " + why
	}
	return lost, why
}

// continues decides with the first block whether the source goes on counting where the stored samples end: it does
// when its sample 0 is at the same known time. Otherwise a new run begins.
func (w *writer) continues(b *acq.Block) bool {
	i, m := &w.t.opt.Info, w.last
	if m != nil && !i.Start.IsZero() && m.Start == i.Start.UnixNano() && m.Rate == i.Rate && m.Channels == i.Channels &&
		m.Bits == i.Bits && b.Seq0 >= m.end() && m.Run == w.t.run.Load() {
		w.next = m.end()
		return true
	}
	w.t.next.Store(b.Seq0)
	w.t.run.Add(1)
	return false
}

// event notes e, in one with its predecessor where that says the same.
func (w *writer) event(e event) {
	if n := len(w.cur.Events); n > 0 && e.Lost == 0 {
		last := &w.cur.Events[n-1]
		if last.Off+last.N == e.Off && last.Clip == e.Clip && last.Note == e.Note {
			last.N += e.N
			return
		}
	}
	w.cur.Events = append(w.cur.Events, e)
}

// together is how many segments one commit takes at most. Every commit waits for the disk twice: a writer that is behind
// catches up by waiting less often.
const together = 4

// behind tells whether the next segment's samples are waiting already and may share a commit with what is packed. A commit
// must stay small against the ring, as it finds the pages that it frees only with the next one.
func (w *writer) behind() bool {
	n := len(w.packed)
	if n == 0 || n >= together || footprint(w.packed)*(int64(n)+1)/int64(n) > w.t.opt.MaxBytes/32 {
		return false
	}
	q := w.t.queue
	q.mu.Lock()
	defer q.mu.Unlock()
	return q.waiting >= int64(w.t.opt.segmentSamples())
}

// cut packs the open segment and begins the next.
func (w *writer) cut() error {
	n := len(w.counts[0])
	if n == 0 {
		return nil
	}
	p, err := w.packSegment(n)
	if err == nil {
		w.packed = append(w.packed, p)
	} else {
		err = w.lost(err, int64(n))
	}
	w.key++
	w.cur = segMeta{}
	if w.row != nil {
		w.cur.Process = []ProcessRow{*w.row}
	}
	for c := range w.counts {
		w.counts[c] = w.counts[c][:0]
	}
	return err
}

// commitPacked commits what is packed. When the ring is found damaged it is set aside and begun anew with these segments;
// when the disk refuses them together they are tried one by one, and what it refuses then is lost and counted: the next
// one is tried again.
func (w *writer) commitPacked() error {
	ps := w.packed
	if len(ps) == 0 {
		return nil
	}
	w.packed = nil
	err := w.commit(ps)
	if errors.Is(err, boltfile.ErrDamaged) {
		d, renewErr := w.t.ring.renew(err.Error())
		w.t.noteDamage(d)
		if err = renewErr; err == nil {
			err = w.commit(ps)
		}
	}
	switch {
	case err == nil:
		w.t.next.Store(ps[len(ps)-1].info.end)
		return nil
	case len(ps) == 1:
		return w.lost(err, int64(ps[0].info.n))
	}
	var errs []error
	for _, p := range ps {
		w.packed = []*packed{p}
		errs = append(errs, w.commitPacked())
	}
	return errors.Join(errs...)
}

// lost counts what could not be kept.
func (w *writer) lost(err error, samples int64) error {
	err = fmt.Errorf("tape: %w", err)
	w.t.noteError(err)
	w.t.mu.Lock()
	defer w.t.mu.Unlock()
	w.t.health.lostSegments++
	w.t.health.lostSamples += samples
	return err
}

func (w *writer) packSegment(n int) (*packed, error) {
	i, m := &w.t.opt.Info, &w.cur
	m.Run, m.N, m.Rate, m.Bits, m.Channels, m.Source = w.t.run.Load(), n, i.Rate, i.Bits, i.Channels, i.Name
	m.Skid, m.UTC0 = w.t.hash, w.t.opt.utc(m.Seq0)
	if !i.Start.IsZero() {
		m.Start = i.Start.UnixNano()
	}
	meta, err := m.encode()
	if err != nil {
		return nil, fmt.Errorf("segment %d: %w", w.key, err)
	}
	p := &packed{meta: meta, chans: make([][]byte, i.Channels)}
	for c, x := range w.counts {
		p.chans[c] = w.pack.pack(nil, x, m.Seq0)
	}
	p.info = segInfo{key: w.key, run: m.Run, n: uint32(n), seq0: m.Seq0, end: m.end(), utc0: m.UTC0}
	if sum, err := hex.DecodeString(m.Skid); err == nil {
		copy(p.info.skid[:], sum)
	}
	return p, nil
}

func (w *writer) commit(ps []*packed) error {
	newest := ps[len(ps)-1].info
	evict := w.t.ring.room(footprint(ps))
	evict = append(evict, w.tooOld(newest, len(evict))...)
	evict = append(evict, without(evict, w.thinned(newest))...)
	if len(evict) > 0 {
		w.rescue(evict)
	}
	return w.t.ring.put(ps, evict, w.t.opt.Skid, true)
}

// tooOld gives the segments, after the first skip ones, that are older than MaxAge when newest is the newest. Those of
// unknown age stay.
func (w *writer) tooOld(newest segInfo, skip int) (gone []segInfo) {
	if w.t.opt.MaxAge == 0 {
		return nil
	}
	for _, g := range w.t.ring.oldest(skip + 16)[skip:] { // a lowered limit is reached within minutes
		if age, known := w.age(g, newest); !known || age <= w.t.opt.MaxAge.Seconds() {
			return gone
		}
		gone = append(gone, g)
	}
	return gone
}
