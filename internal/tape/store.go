package tape

import (
	"errors"
	"fmt"
	"os"
	"sort"
	"sync"
	"syscall"
	"time"

	bolt "go.etcd.io/bbolt"
	berrors "go.etcd.io/bbolt/errors"

	"lapwing/internal/tape/boltfile"
)

var (
	rawBucket  = []byte("raw")
	idxBucket  = []byte("idx")
	skidBucket = []byte("skid")
	clipBucket = []byte("clips")
)

// errGone: the segment has rolled away since the index was read.
var errGone = errors.New("rolled away")

// store is one file of segments with its index in memory. One goroutine writes (the tape's writer); any may read.
type store struct {
	path  string
	opt   boltfile.Options
	disk  func(kind string) error // may be nil
	bound int64                   // bytes of segments it may hold; lowered when the file turns out to be more fragmented than reckoned

	mu     sync.RWMutex // guards what follows
	db     *bolt.DB
	segs   []segInfo // ascending key
	live   int64
	states int64 // bytes of clips' states, which live holds too
	stats  storeStats
}

type storeStats struct {
	commits, failed uint64
	worst           time.Duration
	kept            int64 // bytes of the records put
}

// openStore opens one file; the second value tells of a file that had to be set aside.
func openStore(path string, opt boltfile.Options, disk func(string) error) (*store, *boltfile.Damage, error) {
	s := &store{path: path, opt: opt, disk: disk}
	walk := opt.Walk
	s.opt.Walk = func(tx *bolt.Tx) error {
		segs, err := walkIndex(tx)
		if err != nil {
			return err
		}
		s.segs = segs
		if walk != nil {
			return walk(tx)
		}
		return nil
	}
	damage, err := s.open()
	return s, damage, err
}

func (s *store) open() (*boltfile.Damage, error) {
	s.segs, s.live = nil, 0
	db, damage, err := boltfile.Open(s.path, s.opt)
	if err != nil {
		return damage, err
	}
	s.db = db
	for _, g := range s.segs {
		s.live += g.size
	}
	// A few per cent for fragments and the buckets' own pages; put keeps two segments free on top of that.
	usable := s.opt.MaxBytes - int64(db.AllocSize) - 64<<10
	s.bound = usable - usable/32
	err = s.update(func(tx *bolt.Tx) error {
		for _, b := range [][]byte{rawBucket, idxBucket, skidBucket, clipBucket} {
			if _, err := tx.CreateBucketIfNotExists(b); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		return damage, errors.Join(err, boltfile.Guard(db.Close))
	}
	return damage, nil
}

// walkIndex reads every idx record and holds it against the segments that are there.
func walkIndex(tx *bolt.Tx) ([]segInfo, error) {
	idx, raw := tx.Bucket(idxBucket), tx.Bucket(rawBucket)
	if idx == nil || raw == nil {
		return nil, nil // created, never used
	}
	var segs []segInfo
	there := raw.Cursor()
	rawKey, _ := there.First()
	c := idx.Cursor()
	for k, v := c.First(); k != nil; k, v = c.Next() {
		g, err := decodeInfo(k, v)
		if err != nil {
			return nil, err
		}
		if string(rawKey) != string(k) {
			return nil, fmt.Errorf("segment %d is in the index only", g.key)
		}
		rawKey, _ = there.Next()
		segs = append(segs, g)
	}
	if rawKey != nil {
		return nil, fmt.Errorf("segment %x is not in the index", rawKey)
	}
	return segs, nil
}

// update runs one write transaction with the panics and faults of a damaged file made into errors.
func (s *store) update(f func(*bolt.Tx) error) error {
	t0 := time.Now()
	err := boltfile.Guard(func() error {
		if s.disk != nil {
			if err := s.disk(s.opt.Kind); err != nil {
				return err
			}
		}
		if s.db == nil {
			return os.ErrClosed
		}
		return s.db.Update(f)
	})
	took := time.Since(t0)
	s.mu.Lock()
	defer s.mu.Unlock()
	if err != nil {
		s.stats.failed++
		return err
	}
	s.stats.commits++
	s.stats.worst = max(s.stats.worst, took)
	return nil
}

// view runs one short read transaction, under the lock that keeps the file open meanwhile.
func (s *store) view(f func(*bolt.Tx) error) error {
	s.mu.RLock()
	defer s.mu.RUnlock()
	if s.db == nil {
		return os.ErrClosed
	}
	return boltfile.Guard(func() error { return s.db.View(f) })
}

// room says which of the oldest segments must go before need more bytes fit, never the newest one.
func (s *store) room(need int64) (evict []segInfo) {
	s.mu.RLock()
	defer s.mu.RUnlock()
	over := s.live + 3*need - s.bound // the new one, and two of its size: pages freed now are free for the next commit only
	for i := 0; over > 0 && i < len(s.segs)-1; i++ {
		evict = append(evict, s.segs[i])
		over -= s.segs[i].size
	}
	return evict
}

// full tells whether need more bytes would pass the bound; the clips ask, as they do not roll.
func (s *store) full(need int64) bool {
	s.mu.RLock()
	defer s.mu.RUnlock()
	return s.live+2*need > s.bound
}

// put stores some segments and removes evict in one transaction. When the file is full none the less, more of the oldest
// go, in a commit of their own, and it tries again: give says whether that is allowed.
func (s *store) put(ps []*packed, evict []segInfo, skid []byte, give bool) error {
	need := footprint(ps)
	for _, p := range ps {
		p.info.size = p.footprint()
	}
	var err error
	for range 16 {
		err = s.update(func(tx *bolt.Tx) error {
			if err := remove(tx, evict); err != nil {
				return err
			}
			for _, p := range ps {
				if err := p.write(tx, skid); err != nil {
					return err
				}
			}
			return nil
		})
		if err == nil {
			s.account(ps, evict)
			return nil
		}
		if !give || !noRoom(err) {
			break
		}
		if errors.Is(err, berrors.ErrMaxSizeReached) {
			s.bound = max(s.bound-need, s.opt.MaxBytes/2)
		}
		gone := s.oldest(len(evict) + len(ps))
		if len(gone) == 0 {
			break
		}
		if err := s.drop(gone); err != nil {
			break
		}
		evict = nil
	}
	return fmt.Errorf("put segment %d: %w", ps[0].info.key, err)
}

// noRoom tells errors that giving away the oldest can mend.
func noRoom(err error) bool {
	return errors.Is(err, berrors.ErrMaxSizeReached) || errors.Is(err, syscall.ENOSPC) || errors.Is(err, syscall.EDQUOT) || errors.Is(err, syscall.EFBIG)
}

// drop removes segments in a transaction of their own.
func (s *store) drop(gone []segInfo) error {
	if err := s.update(func(tx *bolt.Tx) error { return remove(tx, gone) }); err != nil {
		return err
	}
	s.account(nil, gone)
	return nil
}

func (s *store) oldest(n int) []segInfo {
	s.mu.RLock()
	defer s.mu.RUnlock()
	return append([]segInfo(nil), s.segs[:min(n, len(s.segs))]...)
}

// account brings the index in memory up to what was just committed.
func (s *store) account(put []*packed, gone []segInfo) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, g := range gone {
		if i, ok := s.at(g.key); ok {
			s.live -= s.segs[i].size
			if i == 0 {
				s.segs = s.segs[1:] // the usual case must not move a day's index
			} else {
				s.segs = append(s.segs[:i], s.segs[i+1:]...)
			}
		}
	}
	for _, p := range put {
		i, _ := s.at(p.info.key)
		s.segs = append(s.segs, segInfo{})
		copy(s.segs[i+1:], s.segs[i:])
		s.segs[i] = p.info
		s.live += p.info.size
		s.stats.kept += p.payload()
	}
}

func (s *store) at(key uint64) (int, bool) {
	i := sort.Search(len(s.segs), func(i int) bool { return s.segs[i].key >= key })
	return i, i < len(s.segs) && s.segs[i].key == key
}

func (s *store) has(key uint64) bool {
	s.mu.RLock()
	defer s.mu.RUnlock()
	_, ok := s.at(key)
	return ok
}

// snapshot copies the index entries that f wants.
func (s *store) snapshot(f func(*segInfo) bool) []segInfo {
	s.mu.RLock()
	defer s.mu.RUnlock()
	var out []segInfo
	for i := range s.segs {
		if f(&s.segs[i]) {
			out = append(out, s.segs[i])
		}
	}
	return out
}

// renew sets a file that turned out damaged while running aside and begins a new one.
func (s *store) renew(reason string) (*boltfile.Damage, error) {
	s.mu.Lock()
	closeErr := boltfile.Guard(s.db.Close)
	s.db = nil
	s.mu.Unlock()
	d, err := boltfile.SetAside(s.path, reason, s.opt.Disposable)
	if err != nil {
		return nil, errors.Join(err, closeErr)
	}
	fresh := &store{path: s.path, opt: s.opt, disk: s.disk}
	fresh.opt.Walk = nil
	if _, err := fresh.open(); err != nil {
		return d, err
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.db, s.segs, s.live, s.bound = fresh.db, nil, 0, fresh.bound
	return d, nil
}

func (s *store) close() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.db == nil {
		return nil
	}
	err := boltfile.Guard(s.db.Close)
	s.db = nil
	return err
}
