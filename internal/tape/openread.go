package tape

import (
	"errors"
	"fmt"
	"os"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/tape/boltfile"
)

// OpenRead opens the files of a tape that nobody writes now, to list, read and export: the analyst's way in when the
// daemon is down. Appends are refused. The source's Info is that of the newest segment.
func OpenRead(path string) (*Tape, error) {
	if _, err := os.Stat(path); err != nil {
		return nil, fmt.Errorf("tape: %w", err)
	}
	opt, err := Options{Info: acq.Info{Rate: 1, Channels: 1, Bits: 24}}.withDefaults(path)
	if err != nil {
		return nil, err
	}
	t := &Tape{opt: opt, done: make(chan struct{}), queue: newQueue(1), clip: make(map[string]*Clip)}
	t.queue.close()
	close(t.done)
	var damage *boltfile.Damage
	if t.ring, damage, err = openStore(path, boltfile.Options{Kind: "tape", Version: layoutVersion, Timeout: opt.LockWait}, opt.disk); err != nil {
		return nil, fmt.Errorf("tape: ring: %w", err)
	}
	t.noteDamage(damage)
	if t.clips, damage, err = openStore(opt.ClipsPath, boltfile.Options{Kind: "clips", Version: layoutVersion, Timeout: opt.LockWait, Walk: t.readClips}, opt.disk); err != nil {
		return nil, errors.Join(fmt.Errorf("tape: clips: %w", err), t.ring.close())
	}
	t.noteDamage(damage)
	t.opt.Info = t.newestInfo()
	return t, nil
}

// newestInfo reads the source's description back from the newest readable segment.
func (t *Tape) newestInfo() acq.Info {
	info := t.opt.Info
	for _, s := range []*store{t.clips, t.ring} { // the ring's word is newer
		segs := s.snapshot(func(*segInfo) bool { return true })
		for i := len(segs) - 1; i >= 0; i-- {
			p, err := s.load(segs[i])
			if err != nil {
				continue
			}
			m, err := decodeMeta(p.meta)
			if err != nil {
				continue
			}
			info = acq.Info{Rate: m.Rate, Channels: m.Channels, Bits: m.Bits, Name: m.Source}
			if m.Start != 0 {
				info.Start = time.Unix(0, m.Start).UTC()
			}
			t.run.Store(m.Run)
			break
		}
	}
	return info
}

// Info describes the source being written, or that of the newest segment.
func (t *Tape) Info() acq.Info { return t.opt.Info }
