package ledger

import (
	"encoding/binary"
	"errors"
	"fmt"
	"sync"
	"time"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/tape/boltfile"
)

// ErrOrder: a transition whose ID does not come after those in the journal.
var ErrOrder = errors.New("transition out of order")

var (
	journalBucket  = []byte("journal")
	actBucket      = []byte("act")
	outboxBucket   = []byte("outbox")
	docBucket      = []byte("doc")
	baselineBucket = []byte("baseline")
	countBucket    = []byte("count")
	badBucket      = []byte("bad")
)

const layoutVersion = 1

// Options of a ledger; the zero value of a field means its default.
type Options struct {
	OutboxMax  int              // messages that may wait; default 100 000
	JournalMax int              // transitions kept, and as many acts; default 1 000 000, then the oldest are let go and counted
	Now        func() time.Time // default time.Now
	LockWait   time.Duration    // for another process that holds the file; default 2 s
	Room       int64            // bytes to grow by that are taken on the disk with every opening: others may fill it later

	// Fault is for tests: it is asked before every step of a commit, and an error makes the step fail as a bad disk
	// would. The steps are begin, journal, act, enqueue, document, baseline, count, flush, and done: the disk has it
	// and does not say so.
	Fault func(step string) error

	noSync bool // for tests of what is kept, not of whether it is kept: no waiting for the disk
}

// Ledger is an open state file. Its methods may be called from any goroutine.
type Ledger struct {
	opt  Options
	path string
	db   *bolt.DB

	commit sync.Mutex // one Commit at a time, its numbers included; taken before mu

	mu   sync.Mutex // guards stat
	stat Stats
}

// Stats is the ledger's health.
type Stats struct {
	Waiting      map[Class]int    // messages in the outbox
	Dropped      map[Class]uint64 // messages that gave way since the file was made
	OldestWait   time.Time        // created, of the oldest message that waits; zero for none
	LastMessage  uint64
	Transitions  int // in the journal
	LastJournal  uint64
	Acts         int // of people, in the journal
	LastAct      uint64
	ActsGone     uint64
	JournalGone  uint64 // let go since the file was made
	Commits      uint64 // since Open
	WorstCommit  time.Duration
	Damage       *boltfile.Damage // the file was unusable at Open: tell everybody
	BadRecords   []string         // records set apart at Open
	FailedCommit uint64
	LastError    error
}

// Open opens or makes the state file. A file that cannot be used is renamed and kept for ever, and Stats().Damage says
// so: alarms, acknowledgements and baselines are then gone from view, which people must be told. Single records whose
// checksum fails are set apart, and the rest goes on.
func Open(path string, opt Options) (*Ledger, error) {
	if opt.OutboxMax <= 0 {
		opt.OutboxMax = 100_000
	}
	if opt.JournalMax <= 0 {
		opt.JournalMax = 1_000_000
	}
	if opt.Now == nil {
		opt.Now = time.Now
	}
	db, damage, err := boltfile.Open(path, boltfile.Options{
		Kind: "ledger", Version: layoutVersion, Timeout: opt.LockWait, Walk: touchAll, Room: opt.Room,
	})
	if err != nil {
		return nil, fmt.Errorf("ledger: %w", err)
	}
	db.NoSync = opt.noSync
	l := &Ledger{opt: opt, path: path, db: db}
	l.stat = Stats{Waiting: map[Class]int{}, Dropped: map[Class]uint64{}, Damage: damage}
	if err := l.update(l.prepare); err != nil {
		return nil, errors.Join(fmt.Errorf("ledger: prepare %s: %w", path, err), l.Close())
	}
	return l, nil
}

// Close closes the file. All that was committed is on disk already.
func (l *Ledger) Close() error {
	if err := boltfile.Guard(l.db.Close); err != nil {
		return fmt.Errorf("ledger: close: %w", err)
	}
	return nil
}

// Stats gives a picture of now.
func (l *Ledger) Stats() Stats {
	l.mu.Lock()
	s := l.stat
	s.Waiting, s.Dropped = copyMap(s.Waiting), copyMap(s.Dropped)
	s.BadRecords = append([]string(nil), s.BadRecords...)
	l.mu.Unlock()
	if m, err := l.Next(0, 1); err == nil && len(m) == 1 {
		s.OldestWait = m[0].Created
	}
	return s
}

func copyMap[V any](m map[Class]V) map[Class]V {
	out := make(map[Class]V, len(m))
	for k, v := range m {
		out[k] = v
	}
	return out
}

// update is one flushed transaction with panics and faults of a damaged file made into errors.
func (l *Ledger) update(f func(*bolt.Tx) error) error {
	t0 := time.Now()
	err := boltfile.Guard(func() error { return l.db.Update(f) })
	took := time.Since(t0)
	l.mu.Lock()
	defer l.mu.Unlock()
	if err != nil {
		l.stat.FailedCommit++
		l.stat.LastError = err
		return err
	}
	l.stat.Commits++
	l.stat.WorstCommit = max(l.stat.WorstCommit, took)
	return nil
}

func (l *Ledger) view(f func(*bolt.Tx) error) error {
	return boltfile.Guard(func() error { return l.db.View(f) })
}

// touchAll reads every page of the file, so that one that cannot be followed is found at Open.
func touchAll(tx *bolt.Tx) error {
	var walk func(b *bolt.Bucket) error
	walk = func(b *bolt.Bucket) error {
		return b.ForEach(func(k, v []byte) error {
			if v == nil {
				return walk(b.Bucket(k))
			}
			return nil
		})
	}
	return tx.ForEach(func(_ []byte, b *bolt.Bucket) error { return walk(b) })
}

// prepare makes the buckets, sets bad records apart and counts what is there.
func (l *Ledger) prepare(tx *bolt.Tx) error {
	for _, name := range [][]byte{journalBucket, actBucket, outboxBucket, docBucket, baselineBucket, countBucket, badBucket} {
		if _, err := tx.CreateBucketIfNotExists(name); err != nil {
			return err
		}
	}
	for _, c := range classes {
		if _, err := tx.Bucket(outboxBucket).CreateBucketIfNotExists([]byte(c.String())); err != nil {
			return err
		}
	}
	bad, err := l.setApart(tx)
	if err != nil {
		return err
	}
	s := &l.stat
	s.BadRecords = bad
	for _, c := range classes {
		b := outbox(tx, c)
		s.Waiting[c] = b.Stats().KeyN
		s.Dropped[c] = counter(tx, "dropped/"+c.String())
		if last, _ := b.Cursor().Last(); last != nil {
			// The counter itself may have been among the bad records: an id must never be given twice.
			s.LastMessage = max(s.LastMessage, binary.BigEndian.Uint64(last))
		}
	}
	s.LastMessage = max(s.LastMessage, counter(tx, "message"))
	s.JournalGone = counter(tx, "journal gone")
	j := tx.Bucket(journalBucket)
	s.Transitions = j.Stats().KeyN
	if last, _ := j.Cursor().Last(); last != nil {
		s.LastJournal = binary.BigEndian.Uint64(last)
	}
	s.ActsGone = counter(tx, "acts gone")
	acts := tx.Bucket(actBucket)
	s.Acts, s.LastAct = acts.Stats().KeyN, counter(tx, "act")
	if last, _ := acts.Cursor().Last(); last != nil {
		s.LastAct = max(s.LastAct, binary.BigEndian.Uint64(last))
	}
	return nil
}

// setApart moves records with a wrong checksum to their own bucket and names them.
func (l *Ledger) setApart(tx *bolt.Tx) (bad []string, err error) {
	apart := tx.Bucket(badBucket)
	sift := func(name string, b *bolt.Bucket, numbered bool) error {
		var gone [][]byte
		err := b.ForEach(func(k, v []byte) error {
			if v == nil {
				return nil
			}
			_, err := unseal(v)
			if err == nil && (!numbered || len(k) == 8) {
				return nil
			}
			gone = append(gone, append([]byte{}, k...))
			full := fmt.Sprintf("%s/%q", name, k)
			if numbered && len(k) == 8 {
				full = fmt.Sprintf("%s/%d", name, binary.BigEndian.Uint64(k))
			}
			bad = append(bad, full)
			return apart.Put([]byte(full), append([]byte{}, v...))
		})
		for _, k := range gone {
			err = errors.Join(err, b.Delete(k))
		}
		return err
	}
	err = errors.Join(sift("journal", tx.Bucket(journalBucket), true), sift("act", tx.Bucket(actBucket), true), sift("doc", tx.Bucket(docBucket), false),
		sift("baseline", tx.Bucket(baselineBucket), true), sift("count", tx.Bucket(countBucket), false))
	for _, c := range classes {
		err = errors.Join(err, sift("outbox/"+c.String(), outbox(tx, c), true))
	}
	return bad, err
}

func outbox(tx *bolt.Tx, c Class) *bolt.Bucket {
	return tx.Bucket(outboxBucket).Bucket([]byte(c.String()))
}

// counter reads a number that only rises; one that is not there is 0.
func counter(tx *bolt.Tx, name string) (n uint64) {
	if rec := tx.Bucket(countBucket).Get([]byte(name)); rec == nil || unsealJSON(rec, &n) != nil {
		return 0
	}
	return n
}

func setCounter(tx *bolt.Tx, name string, n uint64) error {
	rec, err := sealJSON(n)
	if err != nil {
		return err
	}
	return tx.Bucket(countBucket).Put([]byte(name), rec)
}
