package station

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"
	"time"

	"lapwing/internal/panel"
	"lapwing/internal/tape"
	"lapwing/internal/wire"
)

// mostPull is the longest stretch pulled at once: more fills the disk that the tape is on.
const mostPull = 30 * time.Minute

// Pull writes raw samples and what belongs to them into dir, out of the running tape.
func (s *Station) Pull(ctx context.Context, q wire.PullQuery, dir string) error {
	if err := s.tape.Flush(ctx); err != nil {
		return err
	}
	return pull(s.tape, q, s.sk.ID, dir)
}

// PullFrom is Pull for a daemon that is down.
func PullFrom(state string, q wire.PullQuery, dir string) error {
	t, err := openState(state)
	if err != nil {
		return err
	}
	defer t.Close()
	return pull(t, q, "tape", dir)
}

func pull(t *tape.Tape, q wire.PullQuery, name, dir string) error {
	if q.Clip != "" {
		return exportClip(t, q.Clip, dir)
	}
	var span tape.Span
	var err error
	if q.Turns[1] > q.Turns[0] {
		if span, err = t.Turns(q.Turns[0], q.Turns[1]); errors.Is(err, tape.ErrNoTurns) {
			return fmt.Errorf("%w: %w; it holds %s", panel.ErrQuery, err, tapeHolds(t))
		}
		name = fmt.Sprintf("%s-turns-%d-%d", name, q.Turns[0], q.Turns[1])
	} else {
		span, err = timeSpan(t, q)
		name = fmt.Sprintf("%s-%s", name, q.From.UTC().Format("20060102T150405Z"))
	}
	if err != nil {
		return err
	}
	if long := time.Duration(float64(span.To-span.From) / t.Info().Rate * 1e9); long > mostPull {
		return fmt.Errorf("%w: %s at once; at most %s", panel.ErrQuery, long.Round(time.Second), mostPull)
	}
	_, err = t.ExportSpan(filepath.Join(dir, name), span)
	return err
}

// timeSpan finds the samples of a stretch of time, as far as the tape has them.
func timeSpan(t *tape.Tape, q wire.PullQuery) (tape.Span, error) {
	for _, e := range t.Extents() {
		if e.FromUTC.IsZero() || !q.From.Before(e.ToUTC) || !q.To.After(e.FromUTC) {
			continue
		}
		from, to := e.From, e.To
		rate := t.Info().Rate
		if q.From.After(e.FromUTC) {
			from = e.To - int64(e.ToUTC.Sub(q.From).Seconds()*rate)
		}
		if q.To.Before(e.ToUTC) {
			to = e.To - int64(e.ToUTC.Sub(q.To).Seconds()*rate)
		}
		if to > from {
			return tape.Span{Run: e.Run, From: from, To: to}, nil
		}
	}
	return tape.Span{}, fmt.Errorf("%w: nothing of that time is on the tape; it holds %s", panel.ErrQuery, tapeHolds(t))
}

// tapeHolds says what a tape holds.
func tapeHolds(t *tape.Tape) string {
	all := t.Extents()
	if len(all) == 0 {
		return "nothing"
	}
	first, last := all[0], all[len(all)-1]
	if first.FromUTC.IsZero() || last.ToUTC.IsZero() {
		return fmt.Sprintf("samples %d to %d, without a day", last.From, last.To)
	}
	return fmt.Sprintf("%s to %s", first.FromUTC.UTC().Format(time.RFC3339), last.ToUTC.UTC().Format(time.RFC3339))
}
