package tape

import (
	"errors"
	"fmt"
	"slices"
	"sort"
	"strings"
	"time"

	bolt "go.etcd.io/bbolt"
)

// Errors of the calls that name a clip.
var (
	ErrNoClip  = errors.New("no such clip")
	ErrBadSpan = errors.New("span is empty or of no run")
)

// Clip is a stretch of samples that the roll does not touch. Protect takes ID, Reason, AlarmID, Run, From, To, Apart and
// State; the rest is filled in by the tape.
type Clip struct {
	ID      string `json:"id"`
	Reason  string `json:"reason"`             // one sentence for people
	AlarmID uint64 `json:"alarm_id,omitempty"` // the transition that asked for it
	Run     uint32 `json:"run"`                // 0 in Protect: the run being written
	From    int64  `json:"from"`               // first sample number
	To      int64  `json:"to"`                 // after the last; may lie in the future

	Apart bool `json:"apart,omitempty"` // never merged with another one: what it shows must not be mixed

	Label    string   `json:"label,omitempty"`     // given by Keep: such a clip is never released for room
	Merged   []string `json:"merged,omitempty"`    // ids of overlapping clips that are in this one; they still find it
	Alarms   []uint64 `json:"alarm_ids,omitempty"` // AlarmID and those of the merged ones
	Complete bool     `json:"complete"`            // nothing more will be added
	Have     int64    `json:"have"`                // samples stored, per channel, when complete
	Short    string   `json:"short,omitempty"`     // why fewer than asked for; empty when whole
	Asked    int64    `json:"asked_ns"`            // UTC ns, when Protect was called

	State []byte `json:"-"` // for Protect only: what the analysis knew at From; see Tape.State
}

// Protect asks for a clip. It returns when the wish is on disk; the samples are copied by the writer, and the clip is
// complete when those up to To have come, after a restart too. A clip that overlaps or touches one of the same run is
// merged into it as long as the two together are no longer than Options.ClipSpan and neither is to stay apart: the clip returned then has the older
// one's ID. Asking again with an ID that exists does no harm.
//
// The clips have their own bound. For room the oldest complete clip without a label is released; when only labelled
// ones are left, the new clip stays short and says so.
func (t *Tape) Protect(c Clip) (Clip, error) {
	if c.Run == 0 {
		c.Run = max(1, t.run.Load()) // a fresh tape's first run is 1
	}
	if c.To <= c.From {
		return Clip{}, fmt.Errorf("tape: protect %d to %d: %w", c.From, c.To, ErrBadSpan)
	}
	select {
	case <-t.done:
		return Clip{}, fmt.Errorf("tape: protect: %w", ErrClosed)
	default:
	}
	t.clipMu.Lock()
	defer t.clipMu.Unlock()
	c.Label, c.Merged, c.Complete, c.Have, c.Short = "", nil, false, 0, ""
	c.Alarms = nil
	if c.AlarmID != 0 {
		c.Alarms = []uint64{c.AlarmID}
	}
	c.Asked = time.Now().UnixNano()
	state, at := c.State, stateAt{c.Run, c.From}
	c.State = nil
	var gone []string
	if old := t.find(c.ID); old != nil {
		if old.Run != c.Run {
			return Clip{}, fmt.Errorf("tape: protect: id %q is taken by a clip of run %d", c.ID, old.Run)
		}
		if c.From >= old.From && c.To <= old.To {
			return *old, nil // asked for again
		}
		gone, c = append(gone, old.ID), united(*old, c)
	}
	for _, old := range t.sortedClips() {
		if c.Apart || old.Apart || slices.Contains(gone, old.ID) || old.Run != c.Run || old.From > c.To || c.From > old.To ||
			max(old.To, c.To)-min(old.From, c.From) > t.opt.samples(t.opt.ClipSpan) {
			continue
		}
		if len(gone) == 0 {
			c = united(*old, c)
		} else {
			c = united(c, *old) // the new one closed the gap between two: the earlier one's name stays
		}
		gone = append(gone, old.ID)
	}
	if c.From != at.from || t.clips.full(stateCost(len(state))) {
		state = nil
	}
	tidied := func() {}
	err := t.clips.update(func(tx *bolt.Tx) error {
		b := tx.Bucket(clipBucket)
		if state != nil {
			if err := putState(tx, at, state); err != nil {
				return err
			}
		}
		var err error
		if tidied, err = t.tidyStates(tx, func(f func(*Clip)) {
			f(&c)
			for id, other := range t.clip {
				if !slices.Contains(gone, id) {
					f(other)
				}
			}
		}); err != nil {
			return err
		}
		if c.ID == "" {
			n, err := b.NextSequence()
			if err != nil {
				return err
			}
			c.ID = fmt.Sprintf("clip-%06d", n)
		}
		for _, id := range gone {
			if err := b.Delete([]byte(id)); err != nil {
				return err
			}
		}
		return putClip(b, &c)
	})
	if err != nil {
		return Clip{}, fmt.Errorf("tape: protect %s: %w", c.ID, err)
	}
	tidied()
	for _, id := range gone {
		delete(t.clip, id)
	}
	t.clip[c.ID] = &c
	t.queue.nudge()
	return c, nil
}

// united is old widened by c, under old's name.
func united(old, c Clip) Clip {
	old.Merged, old.Alarms = slices.Clone(old.Merged), slices.Clone(old.Alarms)
	for _, id := range append([]string{c.ID}, c.Merged...) {
		if id != "" && id != old.ID && !slices.Contains(old.Merged, id) {
			old.Merged = append(old.Merged, id)
		}
	}
	for _, id := range c.Alarms {
		if !slices.Contains(old.Alarms, id) {
			old.Alarms = append(old.Alarms, id)
		}
	}
	if c.Reason != "" && !slices.Contains(strings.Split(old.Reason, "; "), c.Reason) {
		old.Reason = strings.TrimPrefix(old.Reason+"; "+c.Reason, "; ")
	}
	if old.Label == "" {
		old.Label = c.Label
	}
	if c.From < old.From || c.To > old.To {
		old.From, old.To = min(old.From, c.From), max(old.To, c.To)
		old.Complete, old.Have, old.Short = false, 0, ""
	}
	return old
}

// Keep gives a clip a label and so keeps it from being released for room; an empty label takes that back.
func (t *Tape) Keep(id, label string) error {
	t.clipMu.Lock()
	defer t.clipMu.Unlock()
	c := t.find(id)
	if c == nil {
		return fmt.Errorf("tape: keep %q: %w", id, ErrNoClip)
	}
	kept := *c
	kept.Label = label
	return t.saveClip(&kept)
}

// Release deletes a clip, labelled or not. Segments it shares with another clip stay.
func (t *Tape) Release(id string) error {
	t.clipMu.Lock()
	defer t.clipMu.Unlock()
	c := t.find(id)
	if c == nil {
		return fmt.Errorf("tape: release %q: %w", id, ErrNoClip)
	}
	return t.release(c)
}

func (t *Tape) release(c *Clip) error {
	gone := t.clips.snapshot(func(g *segInfo) bool {
		if !c.covers(g) {
			return false
		}
		for _, other := range t.clip {
			if other != c && other.covers(g) {
				return false
			}
		}
		return true
	})
	tidied := func() {}
	err := t.clips.update(func(tx *bolt.Tx) error {
		err := remove(tx, gone)
		if err != nil {
			return err
		}
		if tidied, err = t.tidyStates(tx, func(f func(*Clip)) {
			for _, other := range t.clip {
				if other != c {
					f(other)
				}
			}
		}); err != nil {
			return err
		}
		return tx.Bucket(clipBucket).Delete([]byte(c.ID))
	})
	if err != nil {
		return fmt.Errorf("tape: release %s: %w", c.ID, err)
	}
	t.clips.account(nil, gone)
	tidied()
	delete(t.clip, c.ID)
	return nil
}

// Clips lists the clips by run and first sample.
func (t *Tape) Clips() []Clip {
	t.clipMu.Lock()
	defer t.clipMu.Unlock()
	var out []Clip
	for _, c := range t.sortedClips() {
		out = append(out, *c)
	}
	return out
}

// Clip finds a clip by its ID or that of one merged into it.
func (t *Tape) Clip(id string) (Clip, error) {
	t.clipMu.Lock()
	defer t.clipMu.Unlock()
	if c := t.find(id); c != nil {
		return *c, nil
	}
	return Clip{}, fmt.Errorf("tape: clip %q: %w", id, ErrNoClip)
}

func (t *Tape) find(id string) *Clip {
	if c := t.clip[id]; c != nil {
		return c
	}
	for _, c := range t.sortedClips() {
		if slices.Contains(c.Merged, id) {
			return c
		}
	}
	return nil
}

func (t *Tape) sortedClips() []*Clip {
	out := make([]*Clip, 0, len(t.clip))
	for _, c := range t.clip {
		out = append(out, c)
	}
	sort.Slice(out, func(i, j int) bool {
		a, b := out[i], out[j]
		if a.Run != b.Run {
			return a.Run < b.Run
		}
		if a.From != b.From {
			return a.From < b.From
		}
		return a.ID < b.ID
	})
	return out
}

func (c *Clip) covers(g *segInfo) bool { return g.run == c.Run && g.end > c.From && g.seq0 < c.To }

func putClip(b *bolt.Bucket, c *Clip) error {
	rec, err := sealed(c)
	if err != nil {
		return err
	}
	return b.Put([]byte(c.ID), rec)
}

func (t *Tape) saveClip(c *Clip) error {
	if err := t.clips.update(func(tx *bolt.Tx) error { return putClip(tx.Bucket(clipBucket), c) }); err != nil {
		return fmt.Errorf("tape: clip %s: %w", c.ID, err)
	}
	t.clip[c.ID] = c
	return nil
}

// readClips is the first walk over the clip records.
func (t *Tape) readClips(tx *bolt.Tx) error {
	b := tx.Bucket(clipBucket)
	if b == nil {
		return nil
	}
	return b.ForEach(func(k, v []byte) error {
		c := new(Clip)
		if err := unseal(v, c); err != nil {
			return fmt.Errorf("clip record %q: %w", k, err)
		}
		t.clip[c.ID] = c
		return nil
	})
}
