package tape

import (
	"errors"
	"fmt"
	"time"
)

// Thinning lets a small disk look back further: what is older than Whole keeps one segment in OneIn, and what is older
// than Hourly only the first minute of each hour. Whole segments stay and whole ones go, so that turns stay neighbours:
// one second in twenty holds as many turns as one turn in twenty, and more can be done with them. The zero value thins
// nothing. Thinning saves room, not wear: a segment is written before it is old.
type Thinning struct {
	Whole  time.Duration // everything newer is kept
	OneIn  int           // of the segments between Whole and Hourly
	Hourly time.Duration // 0: never
}

func (h Thinning) on() bool { return h.Whole > 0 }

func (h Thinning) check() error {
	switch {
	case h == Thinning{}:
		return nil
	case h.Whole <= 0:
		return errors.New("tape: options: thinning needs a time for which everything is kept")
	case h.OneIn < 2:
		return fmt.Errorf("tape: options: thinning to one segment in %d thins nothing", h.OneIn)
	case h.Hourly != 0 && h.Hourly <= h.Whole:
		return fmt.Errorf("tape: options: thinning to a minute an hour from %v on lies within the %v kept whole", h.Hourly, h.Whole)
	}
	return nil
}

// keeps says whether a segment stays at a stage: 0 one in so many and the first minute of an hour, which stays for good,
// 1 that minute alone. Segments are told by
// number, and by UTC where they have it, so that the answer is the same whenever it is asked.
func (h Thinning) keeps(g *segInfo, stage int, segment time.Duration) bool {
	if stage == 0 && g.key%uint64(h.OneIn) == 0 {
		return true
	}
	if h.Hourly == 0 {
		return false
	}
	at := time.Duration(g.key) * segment
	if g.utc0 != 0 {
		at = time.Duration(g.utc0)
	}
	return at%time.Hour < time.Minute
}

const thinnedAtOnce = 16 // segments looked at per commit and stage: more than come in

// thinned gives the segments that have grown too old to be kept whole since it was last asked.
func (w *writer) thinned(newest segInfo) (gone []segInfo) {
	h := w.t.opt.Thin
	if !h.on() {
		return nil
	}
	for stage, after := range [2]time.Duration{h.Whole, h.Hourly} {
		if after == 0 {
			continue
		}
		for _, g := range w.t.ring.from(w.thin[stage], thinnedAtOnce) {
			age, known := w.age(g, newest)
			if known && age <= after.Seconds() {
				break
			}
			w.thin[stage] = g.key + 1
			if known && !h.keeps(&g, stage, w.t.opt.Segment) {
				gone = append(gone, g)
			}
		}
	}
	return gone
}

// age is how much older g is than the newest segment, s: by UTC where both have it, by sample numbers within a run.
func (w *writer) age(g, newest segInfo) (seconds float64, known bool) {
	switch {
	case g.utc0 != 0 && newest.utc0 != 0:
		return float64(newest.utc0-g.utc0) / 1e9, true
	case g.run == newest.run:
		return float64(newest.seq0-g.seq0) / w.t.opt.Info.Rate, true
	}
	return 0, false
}

// from gives at most n segments of number key and above.
func (s *store) from(key uint64, n int) []segInfo {
	s.mu.RLock()
	defer s.mu.RUnlock()
	i, _ := s.at(key)
	return append([]segInfo(nil), s.segs[i:min(i+n, len(s.segs))]...)
}

// without leaves out of more what is in list already.
func without(list, more []segInfo) (out []segInfo) {
	for _, g := range more {
		twice := false
		for i := range list {
			twice = twice || list[i].key == g.key
		}
		for i := range out {
			twice = twice || out[i].key == g.key
		}
		if !twice {
			out = append(out, g)
		}
	}
	return out
}
