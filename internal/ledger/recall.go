package ledger

import (
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/alarm"
)

// Next gives up to max messages with IDs above after, in order of ID, whatever their class. A record that cannot be
// read is left out and named in the error; the others are given all the same.
func (l *Ledger) Next(after uint64, max int) ([]Message, error) {
	var out []Message
	err := l.view(func(tx *bolt.Tx) error {
		var errs []error
		type head struct {
			c    Class
			cur  *bolt.Cursor
			k, v []byte
		}
		var heads []head
		for _, c := range classes {
			cur := outbox(tx, c).Cursor()
			if k, v := cur.Seek(key(after + 1)); k != nil && after+1 != 0 {
				heads = append(heads, head{c, cur, k, v})
			}
		}
		for len(out) < max && len(heads) > 0 {
			first := 0
			for i := range heads {
				if string(heads[i].k) < string(heads[first].k) {
					first = i
				}
			}
			h := &heads[first]
			id := binary.BigEndian.Uint64(h.k)
			if m, err := decodeMessage(id, h.c, h.v); err != nil {
				errs = append(errs, fmt.Errorf("message %d: %w", id, err))
			} else {
				out = append(out, m)
			}
			if h.k, h.v = h.cur.Next(); h.k == nil {
				heads = append(heads[:first], heads[first+1:]...)
			}
		}
		return errors.Join(errs...)
	})
	if err != nil {
		return out, fmt.Errorf("ledger: outbox: %w", err)
	}
	return out, nil
}

// NextOf is Next for one class: it lets alarms overtake a long backlog of features.
func (l *Ledger) NextOf(c Class, after uint64, max int) ([]Message, error) {
	var out []Message
	err := l.view(func(tx *bolt.Tx) error {
		b := outbox(tx, c)
		if b == nil {
			return fmt.Errorf("%v is not a class", c)
		}
		var errs []error
		cur := b.Cursor()
		for k, v := cur.Seek(key(after + 1)); k != nil && len(out) < max; k, v = cur.Next() {
			id := binary.BigEndian.Uint64(k)
			if m, err := decodeMessage(id, c, v); err != nil {
				errs = append(errs, fmt.Errorf("message %d: %w", id, err))
			} else {
				out = append(out, m)
			}
		}
		return errors.Join(errs...)
	})
	if err != nil {
		return out, fmt.Errorf("ledger: outbox: %w", err)
	}
	return out, nil
}

// Ack removes messages that have been delivered. IDs that are not there any more are no error.
func (l *Ledger) Ack(ids []uint64) error {
	if len(ids) == 0 {
		return nil
	}
	return l.Commit(func(t *Tx) error {
		for _, id := range ids {
			k := key(id)
			for _, c := range classes {
				b := outbox(t.tx, c)
				if b.Get(k) == nil {
					continue
				}
				if err := b.Delete(k); err != nil {
					return fmt.Errorf("ack %d: %w", id, err)
				}
				t.stat.Waiting[c]--
			}
		}
		return nil
	})
}

// Journal gives up to max transitions with IDs from fromID on, in order. Detail comes back as json.RawMessage. A record
// that cannot be read is left out and named in the error; the others are given all the same.
func (l *Ledger) Journal(fromID uint64, max int) ([]alarm.Transition, error) {
	var out []alarm.Transition
	err := l.view(func(tx *bolt.Tx) error {
		var errs []error
		cur := tx.Bucket(journalBucket).Cursor()
		for k, v := cur.Seek(key(fromID)); k != nil && len(out) < max; k, v = cur.Next() {
			tr, err := decodeTransition(v)
			if err != nil {
				errs = append(errs, fmt.Errorf("transition %d: %w", binary.BigEndian.Uint64(k), err))
				continue
			}
			out = append(out, tr)
		}
		return errors.Join(errs...)
	})
	if err != nil {
		return out, fmt.Errorf("ledger: journal: %w", err)
	}
	return out, nil
}

func decodeTransition(v []byte) (alarm.Transition, error) {
	var rec struct {
		alarm.Transition
		Detail json.RawMessage `json:"detail"`
	}
	if err := unsealJSON(v, &rec); err != nil {
		return alarm.Transition{}, err
	}
	if len(rec.Detail) > 0 {
		rec.Transition.Detail = rec.Detail
	}
	return rec.Transition, nil
}

// Doc reads a document into v; false when there is none.
func (l *Ledger) Doc(name string, v any) (bool, error) {
	found := false
	err := l.view(func(tx *bolt.Tx) error {
		rec := tx.Bucket(docBucket).Get([]byte(name))
		if rec == nil {
			return nil
		}
		found = true
		return unsealJSON(rec, v)
	})
	if err != nil {
		return false, fmt.Errorf("ledger: document %s: %w", name, err)
	}
	return found, nil
}

// PutDoc is a Commit of one document.
func (l *Ledger) PutDoc(name string, v any) error {
	return l.Commit(func(t *Tx) error { return t.PutDoc(name, v) })
}

// Docs lists the names of the documents, in order.
func (l *Ledger) Docs() ([]string, error) {
	var out []string
	err := l.view(func(tx *bolt.Tx) error {
		return tx.Bucket(docBucket).ForEach(func(k, _ []byte) error {
			out = append(out, string(k))
			return nil
		})
	})
	if err != nil {
		return nil, fmt.Errorf("ledger: documents: %w", err)
	}
	return out, nil
}

// AlarmSnapshot reads the state of all alarm points into v; false when there is none.
func (l *Ledger) AlarmSnapshot(v any) (bool, error) { return l.Doc(alarmSnapshot, v) }

// BaselineInfo describes a stored baseline.
type BaselineInfo struct {
	Version uint64
	Created time.Time
	Note    string
	Bytes   int
}

// PutBaseline is a Commit of one baseline.
func (l *Ledger) PutBaseline(note string, v any) (version uint64, err error) {
	err = l.Commit(func(t *Tx) error {
		version, err = t.PutBaseline(note, v)
		return err
	})
	return version, err
}

// Baseline reads a version into v, the newest for version 0; false when there is none.
func (l *Ledger) Baseline(version uint64, v any) (BaselineInfo, bool, error) {
	var info BaselineInfo
	found := false
	err := l.view(func(tx *bolt.Tx) error {
		b := tx.Bucket(baselineBucket)
		k := key(version)
		rec := b.Get(k)
		if version == 0 {
			k, rec = b.Cursor().Last()
		}
		if rec == nil {
			return nil
		}
		found = true
		var r baselineRecord
		if err := unsealJSON(rec, &r); err != nil {
			return err
		}
		info = BaselineInfo{Version: binary.BigEndian.Uint64(k), Created: r.Created, Note: r.Note, Bytes: len(r.Body)}
		return json.Unmarshal(r.Body, v)
	})
	if err != nil {
		return BaselineInfo{}, false, fmt.Errorf("ledger: baseline %d: %w", version, err)
	}
	return info, found, nil
}

// Baselines lists what is stored, oldest first.
func (l *Ledger) Baselines() ([]BaselineInfo, error) {
	var out []BaselineInfo
	err := l.view(func(tx *bolt.Tx) error {
		return tx.Bucket(baselineBucket).ForEach(func(k, rec []byte) error {
			var r baselineRecord
			if err := unsealJSON(rec, &r); err != nil {
				return fmt.Errorf("version %d: %w", binary.BigEndian.Uint64(k), err)
			}
			out = append(out, BaselineInfo{Version: binary.BigEndian.Uint64(k), Created: r.Created, Note: r.Note, Bytes: len(r.Body)})
			return nil
		})
	})
	if err != nil {
		return out, fmt.Errorf("ledger: baselines: %w", err)
	}
	return out, nil
}
