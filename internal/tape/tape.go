package tape

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"sync/atomic"
	"time"

	bolt "go.etcd.io/bbolt"

	"lapwing/internal/acq"
	"lapwing/internal/skid"
	"lapwing/internal/tape/boltfile"
)

// ErrClosed is given by calls after Close.
var ErrClosed = errors.New("tape is closed")

// Tape is an open tape. Its methods may be called from any goroutine; one goroutine of its own does the writing.
type Tape struct {
	opt   Options
	hash  string // of opt.Skid
	ring  *store
	clips *store
	queue *queue
	done  chan struct{} // closed when the writer has ended

	run  atomic.Uint32 // run being written, or the last one there is
	next atomic.Int64  // sample number after the newest committed of that run

	clipMu sync.Mutex // serialises all changes of clips; taken before any store lock
	clip   map[string]*Clip

	mu     sync.Mutex
	health health

	closeOnce sync.Once
	closeErr  error
}

type health struct {
	damage       []boltfile.Damage
	lostSegments uint64
	lostSamples  int64
	refused      uint64
	released     uint64
	short        uint64
	lastErr      error
	down         error // why there is no tape
}

// Open opens or makes the ring at path and the clips beside it, and starts the writer. A file that is damaged has been
// set aside under another name, which Stats tells. The error says when another process holds a file, when the disk
// refuses, or when Options are impossible.
func Open(path string, opt Options) (*Tape, error) {
	opt, err := opt.withDefaults(path)
	if err != nil {
		return nil, err
	}
	t := &Tape{
		opt: opt, hash: SkidHash(opt.Skid), done: make(chan struct{}),
		queue: newQueue(max(opt.samples(opt.Queue), 1)), clip: make(map[string]*Clip),
	}
	ring, damage, err := openStore(path, boltfile.Options{
		Kind: "tape", Version: layoutVersion, MaxBytes: opt.MaxBytes, Timeout: opt.LockWait, Disposable: true, Reserve: opt.Reserve, NoSync: opt.noSync,
	}, opt.disk)
	if err != nil {
		return nil, fmt.Errorf("tape: ring: %w", err)
	}
	t.ring = ring
	t.noteDamage(damage)
	t.clips, damage, err = openStore(opt.ClipsPath, boltfile.Options{
		Kind: "clips", Version: layoutVersion, MaxBytes: opt.ClipBytes, Timeout: opt.LockWait, Walk: t.readClips, NoSync: opt.noSync,
	}, opt.disk)
	if err != nil {
		return nil, errors.Join(fmt.Errorf("tape: clips: %w", err), ring.close())
	}
	t.noteDamage(damage)
	w, err := t.newWriter()
	if err == nil {
		err = t.tidySkids()
	}
	if err == nil {
		err = t.countStates()
	}
	if err != nil {
		return nil, errors.Join(err, ring.close(), t.clips.close())
	}
	go w.run()
	return t, nil
}

// Append takes a copy of a block for the tape. It never waits for the disk. A block with other inputs than the source
// was said to have is refused and counted.
func (t *Tape) Append(b *acq.Block) {
	ok := len(b.Counts) == t.opt.Info.Channels && b.N >= 0 && b.Lost >= 0
	for _, x := range b.Counts {
		ok = ok && len(x) == b.N
	}
	if !ok || !t.queue.push(b) {
		t.mu.Lock()
		t.health.refused++
		t.mu.Unlock()
	}
}

// Process notes the process values in force from sample seq on. Values that are not known leave no trace.
func (t *Tape) Process(seq int64, p skid.Process) {
	if row, ok := processRow(seq, p); ok {
		t.queue.put(item{process: &row})
	}
}

// Mark is the phase mark that opens a turn.
type Mark struct {
	Turn int64   `json:"turn"`
	At   float64 `json:"at"` // sample number, with fraction
}

// Mark notes a phase mark. It may come a few turns after its samples.
func (t *Tape) Mark(m Mark) { t.queue.put(item{mark: &m}) }

// Flush commits all that was appended before it, the open segment too, and fills clips as far as samples have come.
func (t *Tape) Flush(ctx context.Context) error {
	ch := make(chan error, 1)
	if !t.queue.put(item{flush: ch}) {
		return ErrClosed
	}
	select {
	case err := <-ch:
		return err
	case <-ctx.Done():
		return ctx.Err()
	}
}

// Close commits all that was appended and closes the files. Appends after it are refused.
func (t *Tape) Close() error {
	t.closeOnce.Do(func() {
		t.queue.close()
		<-t.done
		t.closeErr = errors.Join(t.closeErr, t.ring.close(), t.clips.close())
	})
	return t.closeErr
}

// Run is the number of the run being written: the stretch in which sample numbers are one count. Before the first
// block of a fresh tape it is 0.
func (t *Tape) Run() uint32 { return t.run.Load() }

// SkidHash names the skid file in force.
func (t *Tape) SkidHash() string { return t.hash }

// SkidFile gives the bytes of the skid file with that hash, from ring or clips; nil when neither has it.
func (t *Tape) SkidFile(hash string) ([]byte, error) {
	if hash == t.hash {
		return t.opt.Skid, nil
	}
	for _, s := range []*store{t.ring, t.clips} {
		if file, err := s.skidFile(hash); file != nil || err != nil {
			return file, err
		}
	}
	return nil, nil
}

func (t *Tape) tidySkids() error {
	for _, s := range []*store{t.ring, t.clips} {
		if err := s.update(func(tx *bolt.Tx) error { return dropSkids(tx, s.segs) }); err != nil {
			return fmt.Errorf("tape: tidy %s: %w", s.path, err)
		}
	}
	return nil
}

func (t *Tape) countStates() error {
	done := func() {}
	err := t.clips.update(func(tx *bolt.Tx) (err error) {
		done, err = t.tidyStates(tx, func(f func(*Clip)) {
			for _, c := range t.clip {
				f(c)
			}
		})
		return err
	})
	if err != nil {
		return fmt.Errorf("tape: states in %s: %w", t.clips.path, err)
	}
	done()
	return nil
}

func (t *Tape) noteDamage(d *boltfile.Damage) {
	if d != nil {
		t.mu.Lock()
		defer t.mu.Unlock()
		t.health.damage = append(t.health.damage, *d)
	}
}

func (t *Tape) noteError(err error) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.health.lastErr = err
}

// utc is the time of a sample of the source in force, 0 when not known.
func (o *Options) utc(seq int64) int64 {
	if o.Info.Start.IsZero() {
		return 0
	}
	return o.Info.Start.Add(time.Duration(float64(seq) / o.Info.Rate * 1e9)).UnixNano()
}
