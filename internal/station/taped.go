package station

import (
	"errors"
	"fmt"
	"path/filepath"
	"time"

	"lapwing/internal/tape"
	"lapwing/internal/tape/boltfile"
)

// ledgerRoom is kept free in state.db: some ten thousand transitions and messages after the disk has become full.
const ledgerRoom = 16 << 20

// openTape opens the tape. A disk that refuses costs the raw samples, not the alarms: the daemon goes on without them, and
// health says so.
func (s *Station) openTape() error {
	k := &s.sk.Tape
	opt := tape.Options{Info: s.info, Skid: s.sk.Raw, MaxBytes: k.MaxBytes, MaxAge: k.MaxAge, ClipBytes: k.ClipBytes,
		Thin: tape.Thinning{Whole: k.Thin.Whole, OneIn: k.Thin.OneIn, Hourly: k.Thin.Hourly}, Reserve: s.o.Reserve}
	path := filepath.Join(s.o.State, "tape.db")
	t, err := tape.Open(path, opt)
	if opt.Reserve && errors.Is(err, boltfile.ErrRoom) {
		s.desk.say("reserve", fmt.Sprintf("the disk has not the %.4g GB free that the tape was to reserve: others who fill it will shorten the tape", float64(k.MaxBytes)/1e9))
		s.log.Warn("the tape's room is not reserved", "err", err)
		opt.Reserve = false
		t, err = tape.Open(path, opt)
	}
	if err != nil && tape.DiskRefused(err) {
		s.log.Error("raw samples are not kept: going on without the tape", "err", err)
		t, err = tape.Down(path, opt, err), nil
	}
	s.tape = t
	return err
}

// tapeTroubles says in plain words what the tape could not do.
func tapeTroubles(st *tape.Stats, rate float64) (out []string) {
	say := func(format string, a ...any) { out = append(out, fmt.Sprintf(format, a...)) }
	span := func(samples int64) time.Duration {
		return time.Duration(float64(samples) / rate * 1e9).Round(100 * time.Millisecond)
	}
	if st.Down != nil {
		say("raw samples are not kept, alarms have no clips: %v; mend that and restart the daemon", st.Down)
		return out
	}
	for i := range st.Damage {
		say("%s", st.Damage[i].String())
	}
	if st.LostSegments > 0 {
		say("the disk refused %s of raw samples since the start: %v", span(st.LostSamples), st.LastError)
	} else if st.LastError != nil {
		say("the tape met an error since the start: %v", st.LastError)
	}
	if st.QueueDroppedSamples > 0 {
		say("the disk was too slow for %s of raw samples since the start; the slowest write took %s", span(st.QueueDroppedSamples), st.WorstCommit.Round(time.Millisecond))
	}
	if st.ClipsShort > 0 {
		say("%d protected clips since the start hold less than was asked for; their notes say why", st.ClipsShort)
	}
	return out
}
