package tape

import (
	"errors"
	"fmt"
	"os"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/tape/boltfile"
)

// Stats is the tape's health. Sizes are bytes.
type Stats struct {
	Run       uint32
	OldestSeq int64 // of the oldest segment, which may be of an earlier run
	NewestSeq int64 // after the newest committed sample
	OldestUTC time.Time
	NewestUTC time.Time // zero when not known
	Segments  int

	LiveBytes, FileBytes         int64 // ring; live is reckoned on the high side
	ClipLiveBytes, ClipFileBytes int64
	Clips, ClipsPending          int
	ClipsReleased                uint64 // for room, since Open
	ClipsShort                   uint64 // closed with fewer samples than asked for, since Open

	Commits, FailedCommits uint64 // of both files, since Open
	WorstCommit            time.Duration
	WrittenBytes           int64 // pages written since Open
	KeptBytes              int64 // records of segments put since Open

	QueueDroppedBlocks  uint64 // queue full: oldest blocks dropped
	QueueDroppedSamples int64  // per channel
	LostSegments        uint64 // the disk refused them
	LostSamples         int64
	Refused             uint64 // appends of a wrong shape, after Close, or to no tape

	Damage    []boltfile.Damage // files that were found damaged since Open, and where they are now
	LastError error
	Down      error // nothing is kept, for this reason; see Down
}

// Stats gives a picture of now.
func (t *Tape) Stats() Stats {
	s := Stats{Run: t.run.Load()}
	for _, st := range []*store{t.ring, t.clips} {
		st.mu.RLock()
		s.Commits += st.stats.commits
		s.FailedCommits += st.stats.failed
		s.WorstCommit = max(s.WorstCommit, st.stats.worst)
		s.KeptBytes += st.stats.kept
		if st.db != nil {
			tx := st.db.Stats().TxStats
			s.WrittenBytes += tx.GetPageAlloc() + int64(st.stats.commits)*4096 // the meta page comes on top
		}
		st.mu.RUnlock()
	}
	t.ring.mu.RLock()
	s.Segments, s.LiveBytes = len(t.ring.segs), t.ring.live
	if n := len(t.ring.segs); n > 0 {
		first, last := t.ring.segs[0], t.ring.segs[n-1]
		s.OldestSeq, s.NewestSeq = first.seq0, last.end
		if first.utc0 != 0 {
			s.OldestUTC = time.Unix(0, first.utc0).UTC()
		}
		s.NewestUTC, _ = last.endUTC(t.opt.Info.Rate)
	}
	t.ring.mu.RUnlock()
	t.clips.mu.RLock()
	s.ClipLiveBytes = t.clips.live
	t.clips.mu.RUnlock()
	s.FileBytes, s.ClipFileBytes = fileSize(t.ring.path), fileSize(t.clips.path)
	t.clipMu.Lock()
	s.Clips = len(t.clip)
	for _, c := range t.clip {
		if !c.Complete {
			s.ClipsPending++
		}
	}
	t.clipMu.Unlock()
	t.queue.mu.Lock()
	s.QueueDroppedBlocks, s.QueueDroppedSamples = t.queue.blocks, t.queue.samples
	t.queue.mu.Unlock()
	t.mu.Lock()
	h := &t.health
	s.LostSegments, s.LostSamples, s.Refused, s.LastError = h.lostSegments, h.lostSamples, h.refused, h.lastErr
	s.ClipsReleased, s.ClipsShort, s.Down = h.released, h.short, h.down
	s.Damage = append([]boltfile.Damage(nil), h.damage...)
	t.mu.Unlock()
	return s
}

func fileSize(path string) int64 {
	st, err := os.Stat(path)
	if err != nil {
		return 0 // being replaced just now
	}
	return st.Size()
}

// minSeq and maxSeq span every sample number, with room to reckon.
const minSeq, maxSeq = -1 << 62, 1 << 62

// Check reads everything in both files, pages and checksums, and reports all that is wrong. It is slow, and commits wait for it.
func (t *Tape) Check() error {
	var errs []error
	for _, s := range []*store{t.ring, t.clips} {
		// bbolt's check reads the free list, so no commit may run meanwhile: it is done in a write transaction, rolled back.
		err := boltfile.Guard(func() error {
			if s.db == nil {
				return os.ErrClosed
			}
			tx, err := s.db.Begin(true)
			if err != nil {
				return err
			}
			var errs []error
			for err := range tx.Check() {
				errs = append(errs, err)
			}
			return errors.Join(append(errs, tx.Rollback())...)
		})
		if err != nil {
			errs = append(errs, fmt.Errorf("tape: check %s: %w", s.path, err))
		}
		runs := make(map[uint32]bool)
		for _, g := range s.snapshot(func(*segInfo) bool { return true }) {
			runs[g.run] = true
		}
		for run := range runs {
			err := s.read(Span{run, minSeq, maxSeq}, nil, func(*acq.Block) error { return nil })
			if err != nil {
				errs = append(errs, fmt.Errorf("tape: check %s: run %d: %w", s.path, run, err))
			}
		}
	}
	return errors.Join(errs...)
}
