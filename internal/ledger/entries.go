package ledger

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/alarm"
)

// Acts gives up to max orders of people with IDs from fromID on, in order. A record that cannot be read is left out and
// named in the error; the others are given all the same.
func (l *Ledger) Acts(fromID uint64, max int) ([]alarm.Act, error) {
	var out []alarm.Act
	err := l.view(func(tx *bolt.Tx) error {
		var errs []error
		cur := tx.Bucket(actBucket).Cursor()
		for k, v := cur.Seek(key(fromID)); k != nil && len(out) < max; k, v = cur.Next() {
			var a alarm.Act
			if err := unsealJSON(v, &a); err != nil {
				errs = append(errs, fmt.Errorf("act %d: %w", binary.BigEndian.Uint64(k), err))
				continue
			}
			out = append(out, a)
		}
		return errors.Join(errs...)
	})
	if err != nil {
		return out, fmt.Errorf("ledger: acts: %w", err)
	}
	return out, nil
}

// Entry is one record of the journal: a transition or an act, the other nil.
type Entry struct {
	Transition *alarm.Transition
	Act        *alarm.Act
}

// Place is a place between two entries of the journal. An act stands behind the transition that was the newest when it
// was done, and before those that it made itself.
type Place struct {
	Transition uint64 // id of the newest transition before the place
	Act        uint64 // id of the newest act before it
}

// End is the place behind everything.
var End = Place{math.MaxUint64, math.MaxUint64}

// scanAtMost bounds one call of Entries, so that no reader holds a transaction for long.
const scanAtMost = 20_000

// Entries gives up to max entries that keep lets through, from a place on: those after it in order, or with back those
// before it, newest first. next is the place to go on from; more tells whether anything may be left there. One call looks
// at scanAtMost entries at most, so it may give few and more. A record that cannot be read is passed over and named in
// the error; the others are given all the same.
func (l *Ledger) Entries(from Place, back bool, max int, keep func(*Entry) bool) (out []Entry, next Place, more bool, err error) {
	next = from
	err = l.view(func(tx *bolt.Tx) error {
		var errs []error
		w := walk{trs: tx.Bucket(journalBucket).Cursor(), acts: tx.Bucket(actBucket).Cursor(), back: back, errs: &errs}
		w.start(from)
		for n := 0; w.tr != nil || w.act != nil; n++ {
			if len(out) >= max || n >= scanAtMost {
				more = true
				break
			}
			e := w.take(&next)
			if keep == nil || keep(&e) {
				out = append(out, e)
			}
		}
		return errors.Join(errs...)
	})
	if err != nil {
		return out, next, more, fmt.Errorf("ledger: journal: %w", err)
	}
	return out, next, more, nil
}

// walk merges the two lists of the journal.
type walk struct {
	trs, acts *bolt.Cursor
	back      bool
	tr        *alarm.Transition // next of each; nil: none left
	act       *alarm.Act
	errs      *[]error
}

func (w *walk) start(from Place) {
	begin := func(c *bolt.Cursor, id uint64) (k, v []byte) {
		if !w.back {
			if id == math.MaxUint64 {
				return nil, nil
			}
			return c.Seek(key(id + 1))
		}
		if k, v = c.Seek(key(id)); k == nil {
			return c.Last()
		}
		if binary.BigEndian.Uint64(k) > id {
			return c.Prev()
		}
		return k, v
	}
	w.readTransition(begin(w.trs, from.Transition))
	w.readAct(begin(w.acts, from.Act))
}

func (w *walk) step(c *bolt.Cursor) (k, v []byte) {
	if w.back {
		return c.Prev()
	}
	return c.Next()
}

func (w *walk) readTransition(k, v []byte) {
	for w.tr = nil; k != nil; k, v = w.step(w.trs) {
		tr, err := decodeTransition(v)
		if err == nil {
			w.tr = &tr
			return
		}
		*w.errs = append(*w.errs, fmt.Errorf("transition %d: %w", binary.BigEndian.Uint64(k), err))
	}
}

func (w *walk) readAct(k, v []byte) {
	for w.act = nil; k != nil; k, v = w.step(w.acts) {
		var a alarm.Act
		err := unsealJSON(v, &a)
		if err == nil {
			w.act = &a
			return
		}
		*w.errs = append(*w.errs, fmt.Errorf("act %d: %w", binary.BigEndian.Uint64(k), err))
	}
}

// take gives the entry that is next in order and moves the place past it.
func (w *walk) take(at *Place) (e Entry) {
	first := w.act == nil || w.tr != nil && w.tr.ID <= w.act.After // the transition stands first in order
	if w.back {
		first = w.act == nil || w.tr != nil && w.tr.ID > w.act.After // and comes first going back when it stands behind
	}
	if first {
		e.Transition = w.tr
		if at.Transition = w.tr.ID; w.back {
			at.Transition--
		}
		w.readTransition(w.step(w.trs))
		return e
	}
	e.Act = w.act
	if at.Act = w.act.ID; w.back {
		at.Act--
	}
	w.readAct(w.step(w.acts))
	return e
}
