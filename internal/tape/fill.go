package tape

import (
	"errors"
	"fmt"

	berrors "go.etcd.io/bbolt/errors"
)

// fillClips copies at most limit segments from the ring to the clips that want them, oldest first, and closes clips
// that have all they can get. It tells whether there is more to do.
func (w *writer) fillClips(limit int) (more bool) {
	t := w.t
	t.clipMu.Lock()
	defer t.clipMu.Unlock()
	for _, c := range t.sortedClips() {
		if c.Complete {
			continue
		}
		wanted := t.ring.snapshot(func(g *segInfo) bool { return c.covers(g) && !w.bad[g.key] && !t.clips.has(g.key) })
		for _, g := range wanted {
			if limit == 0 {
				return true
			}
			limit--
			if full := w.copySegment(c, g); full != "" {
				w.finish(c, full)
				break
			}
		}
		if !c.Complete && (t.run.Load() == c.Run && t.next.Load() >= c.To || t.run.Load() > c.Run && w.begun) {
			w.finish(c, "")
		}
	}
	return false
}

// rescue copies segments that are about to roll away and that a clip still wants.
func (w *writer) rescue(evict []segInfo) {
	t := w.t
	t.clipMu.Lock()
	defer t.clipMu.Unlock()
	for _, c := range t.sortedClips() {
		for _, g := range evict {
			if !c.Complete && c.covers(&g) && !w.bad[g.key] && !t.clips.has(g.key) {
				if full := w.copySegment(c, g); full != "" {
					w.finish(c, full)
				}
			}
		}
	}
}

// copySegment puts one segment of the ring among the clips, as it is. It gives a reason when c can take no more.
func (w *writer) copySegment(c *Clip, g segInfo) (full string) {
	t := w.t
	p, err := t.ring.load(g)
	if err != nil {
		w.bad[g.key] = true // told as a gap when the clip is finished
		if !errors.Is(err, errGone) {
			t.noteError(fmt.Errorf("tape: clip %s: %w", c.ID, err))
		}
		return ""
	}
	skid := t.opt.Skid
	if m, err := decodeMeta(p.meta); err == nil && m.Skid != t.hash {
		if skid, err = t.ring.skidFile(m.Skid); err != nil {
			skid = nil
		}
	}
	for {
		if !t.clips.full(p.footprint()) {
			err = t.clips.put([]*packed{p}, nil, skid, false)
			if err == nil {
				return ""
			}
			if !errors.Is(err, berrors.ErrMaxSizeReached) { // giving up other clips would not mend it
				t.noteError(fmt.Errorf("tape: clip %s: %w", c.ID, err))
				return err.Error()
			}
		}
		victim := t.victim(c)
		if victim == nil {
			return "no room among the clips: what is left there is labelled, or this clip alone fills it"
		}
		if err := t.release(victim); err != nil {
			t.noteError(err)
			return err.Error()
		}
		t.mu.Lock()
		t.health.released++
		t.mu.Unlock()
	}
}

// victim is the clip to release for room: the complete one without a label that was asked for first.
func (t *Tape) victim(not *Clip) *Clip {
	var oldest *Clip
	for _, c := range t.sortedClips() {
		if c != not && c.Complete && c.Label == "" && (oldest == nil || c.Asked < oldest.Asked) {
			oldest = c
		}
	}
	return oldest
}

// finish closes a clip and says what it lacks.
func (w *writer) finish(c *Clip, why string) {
	t := w.t
	done := *c
	done.Complete, done.Have = true, 0
	segs := t.clips.snapshot(c.covers)
	for _, g := range segs {
		n, err := t.samplesIn(g, c.From, c.To)
		if err != nil {
			t.noteError(err)
			continue
		}
		done.Have += n
	}
	if done.Have < c.To-c.From {
		switch {
		case why != "":
		case len(segs) == 0:
			why = "none of it was on the tape"
		case segs[0].seq0 > c.From:
			why = fmt.Sprintf("the tape began at sample %d", segs[0].seq0)
		case segs[len(segs)-1].end < c.To:
			why = fmt.Sprintf("the recording ended at sample %d", segs[len(segs)-1].end)
		default:
			why = "samples are missing inside"
		}
		done.Short = fmt.Sprintf("%d of %d samples: %s", done.Have, c.To-c.From, why)
		t.mu.Lock()
		t.health.short++
		t.mu.Unlock()
	}
	*c = done // in memory first: a disk that refuses must not make the writer try for ever
	if err := t.saveClip(c); err != nil {
		t.noteError(err)
	}
}

// samplesIn counts a clip segment's samples with numbers in [from, to).
func (t *Tape) samplesIn(g segInfo, from, to int64) (int64, error) {
	if g.end-g.seq0 == int64(g.n) {
		return min(g.end, to) - max(g.seq0, from), nil
	}
	p, err := t.clips.load(g)
	if err != nil {
		return 0, err
	}
	m, err := decodeMeta(p.meta)
	if err != nil {
		return 0, err
	}
	var n int64
	for _, s := range m.stretches() {
		n += max(0, min(s.seq+int64(s.n), to)-max(s.seq, from))
	}
	return n, nil
}
