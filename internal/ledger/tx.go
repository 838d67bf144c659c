package ledger

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"time"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/alarm"
)

// Tx is one commit in the making. It is valid inside the function given to Commit only.
type Tx struct {
	tx      *bolt.Tx
	opt     *Options
	now     time.Time
	stat    Stats // what it will be when the commit succeeds
	changed bool  // the message counter
}

// Commit runs f and puts everything it did on disk, or nothing: nothing when f or the disk gives an error. One
// evaluation of the alarms is one Commit.
func (l *Ledger) Commit(f func(*Tx) error) error {
	l.commit.Lock()
	defer l.commit.Unlock()
	var after Stats
	if err := l.opt.fault("begin"); err != nil {
		return fmt.Errorf("ledger: commit: %w", l.failed(err))
	}
	err := l.update(func(btx *bolt.Tx) error {
		l.mu.Lock()
		tx := &Tx{tx: btx, opt: &l.opt, now: l.opt.Now(), stat: l.stat}
		tx.stat.Waiting, tx.stat.Dropped = copyMap(l.stat.Waiting), copyMap(l.stat.Dropped)
		l.mu.Unlock()
		if err := f(tx); err != nil {
			return err
		}
		if err := tx.opt.fault("count"); err != nil {
			return err
		}
		if tx.changed {
			if err := setCounter(btx, "message", tx.stat.LastMessage); err != nil {
				return err
			}
		}
		after = tx.stat
		return tx.opt.fault("flush")
	})
	if err == nil {
		if err = l.opt.fault("done"); err != nil {
			err = l.failed(err)
		}
	}
	if err != nil {
		return fmt.Errorf("ledger: commit: %w", err)
	}
	l.adopt(&after)
	return nil
}

func (o *Options) fault(step string) error {
	if o.Fault == nil {
		return nil
	}
	return o.Fault(step)
}

// failed counts a commit that failed outside the transaction.
func (l *Ledger) failed(err error) error {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.stat.FailedCommit++
	l.stat.LastError = err
	return err
}

func (l *Ledger) adopt(after *Stats) {
	l.mu.Lock()
	defer l.mu.Unlock()
	s := &l.stat
	s.Waiting, s.Dropped, s.LastMessage = after.Waiting, after.Dropped, after.LastMessage
	s.Transitions, s.LastJournal, s.JournalGone = after.Transitions, after.LastJournal, after.JournalGone
	s.Acts, s.LastAct, s.ActsGone = after.Acts, after.LastAct, after.ActsGone
}

// Journal appends a transition. Its ID must be above all before it: the same one twice is ErrOrder.
func (t *Tx) Journal(tr alarm.Transition) error {
	if tr.ID <= t.stat.LastJournal {
		return fmt.Errorf("journal %d after %d: %w", tr.ID, t.stat.LastJournal, ErrOrder)
	}
	rec, err := sealJSON(tr)
	if err != nil {
		return fmt.Errorf("journal %d: %w", tr.ID, err)
	}
	if err := t.opt.fault("journal"); err != nil {
		return fmt.Errorf("journal %d: %w", tr.ID, err)
	}
	if err := t.append(journalBucket, tr.ID, rec, &t.stat.Transitions, &t.stat.JournalGone, "journal gone"); err != nil {
		return fmt.Errorf("journal %d: %w", tr.ID, err)
	}
	t.stat.LastJournal = tr.ID
	return nil
}

// Act appends what a person ordered. Its ID must be above all before it: the same one twice is ErrOrder.
func (t *Tx) Act(a alarm.Act) error {
	if a.ID <= t.stat.LastAct {
		return fmt.Errorf("act %d after %d: %w", a.ID, t.stat.LastAct, ErrOrder)
	}
	rec, err := sealJSON(a)
	if err != nil {
		return fmt.Errorf("act %d: %w", a.ID, err)
	}
	if err := t.opt.fault("act"); err != nil {
		return fmt.Errorf("act %d: %w", a.ID, err)
	}
	if err := t.append(actBucket, a.ID, rec, &t.stat.Acts, &t.stat.ActsGone, "acts gone"); err != nil {
		return fmt.Errorf("act %d: %w", a.ID, err)
	}
	t.stat.LastAct = a.ID
	return setCounter(t.tx, "act", a.ID)
}

// append puts a record at the end of a list of bounded length; the oldest are let go and counted.
func (t *Tx) append(bucket []byte, id uint64, rec []byte, n *int, gone *uint64, counted string) error {
	b := t.tx.Bucket(bucket)
	if err := b.Put(key(id), rec); err != nil {
		return err
	}
	for *n++; *n > t.opt.JournalMax; *n-- {
		k, _ := b.Cursor().First()
		if err := b.Delete(append([]byte{}, k...)); err != nil {
			return fmt.Errorf("let go: %w", err)
		}
		*gone++
		if err := setCounter(t.tx, counted, *gone); err != nil {
			return fmt.Errorf("let go: %w", err)
		}
	}
	return nil
}

// Enqueue puts a message into the outbox and gives its ID. When the outbox is full the oldest message of the least
// important class that waits gives way, this one included: features before states before alarms. The drop is counted.
func (t *Tx) Enqueue(c Class, topic string, payload []byte, retain bool) (uint64, error) {
	if c < Alarm || c > Feature {
		return 0, fmt.Errorf("enqueue: %v is not a class", c)
	}
	if topic == "" || len(topic) > math.MaxUint16 {
		return 0, fmt.Errorf("enqueue: topic of %d bytes", len(topic))
	}
	if err := t.opt.fault("enqueue"); err != nil {
		return 0, fmt.Errorf("enqueue %s: %w", topic, err)
	}
	m := Message{ID: t.stat.LastMessage + 1, Class: c, Topic: topic, Payload: payload, Retain: retain, Created: t.now}
	if err := outbox(t.tx, c).Put(key(m.ID), m.encode()); err != nil {
		return 0, fmt.Errorf("enqueue %s: %w", topic, err)
	}
	t.stat.LastMessage, t.changed = m.ID, true
	t.stat.Waiting[c]++
	for t.waiting() > t.opt.OutboxMax {
		if err := t.giveWay(); err != nil {
			return 0, fmt.Errorf("enqueue %s: %w", topic, err)
		}
	}
	return m.ID, nil
}

func (t *Tx) waiting() (n int) {
	for _, c := range classes {
		n += t.stat.Waiting[c]
	}
	return n
}

func (t *Tx) giveWay() error {
	for i := len(classes) - 1; i >= 0; i-- {
		c := classes[i]
		b := outbox(t.tx, c)
		k, _ := b.Cursor().First()
		if k == nil {
			continue
		}
		if err := b.Delete(append([]byte{}, k...)); err != nil {
			return err
		}
		t.stat.Waiting[c]--
		t.stat.Dropped[c]++
		return setCounter(t.tx, "dropped/"+c.String(), t.stat.Dropped[c])
	}
	return errors.New("outbox is counted as full and is empty")
}

// PutDoc stores v as JSON under a name, in place of what was there.
func (t *Tx) PutDoc(name string, v any) error {
	if err := t.opt.fault("document"); err != nil {
		return fmt.Errorf("document %s: %w", name, err)
	}
	rec, err := sealJSON(v)
	if err != nil {
		return fmt.Errorf("document %s: %w", name, err)
	}
	if err := t.tx.Bucket(docBucket).Put([]byte(name), rec); err != nil {
		return fmt.Errorf("document %s: %w", name, err)
	}
	return nil
}

// DeleteDoc removes a document; one that is not there is no error.
func (t *Tx) DeleteDoc(name string) error {
	if err := t.tx.Bucket(docBucket).Delete([]byte(name)); err != nil {
		return fmt.Errorf("document %s: %w", name, err)
	}
	return nil
}

const alarmSnapshot = "alarm/snapshot"

// AlarmSnapshot stores the state of all alarm points.
func (t *Tx) AlarmSnapshot(v any) error { return t.PutDoc(alarmSnapshot, v) }

// PutBaseline appends a baseline and gives its version, from 1 up. Earlier ones stay.
func (t *Tx) PutBaseline(note string, v any) (version uint64, err error) {
	if err := t.opt.fault("baseline"); err != nil {
		return 0, fmt.Errorf("baseline: %w", err)
	}
	body, err := json.Marshal(v)
	if err != nil {
		return 0, fmt.Errorf("baseline: %w", err)
	}
	b := t.tx.Bucket(baselineBucket)
	if version, err = b.NextSequence(); err == nil {
		var rec []byte
		if rec, err = sealJSON(baselineRecord{Created: t.now.UTC(), Note: note, Body: body}); err == nil {
			err = b.Put(key(version), rec)
		}
	}
	if err != nil {
		return 0, fmt.Errorf("baseline %d: %w", version, err)
	}
	return version, nil
}

type baselineRecord struct {
	Created time.Time       `json:"created"`
	Note    string          `json:"note,omitempty"`
	Body    json.RawMessage `json:"baseline"`
}
