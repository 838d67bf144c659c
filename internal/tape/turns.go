package tape

import (
	"errors"
	"fmt"
	"math"
)

// ErrNoTurns says that the ring holds no mark of the turns asked for.
var ErrNoTurns = errors.New("no such turns on the tape")

// Turns gives the samples of the turns from first to before end, of the run being written and, where turns were counted
// anew within it, of the newest count: from the opening mark of the first to that of end, or as far as marks have come.
// It reads descriptions from the newest segment back, about a thousand a second.
func (t *Tape) Turns(first, end int64) (Span, error) {
	if first < 0 || end <= first {
		return Span{}, fmt.Errorf("tape: turns %d to %d: %w", first, end, ErrBadSpan)
	}
	run := t.run.Load()
	segs := t.ring.snapshot(func(g *segInfo) bool { return g.run == run })
	lo, hi := math.Inf(1), math.Inf(-1)
	last := int64(math.MaxInt64)
	for i := len(segs) - 1; i >= 0; i-- {
		rec, err := t.ring.meta(segs[i])
		if err != nil {
			continue // thinned out, rolled away or damaged meanwhile: the samples will say so
		}
		m, err := decodeMeta(rec)
		if err != nil {
			continue
		}
		for k := len(m.Marks) - 1; k >= 0; k-- {
			x := m.Marks[k]
			if x.Turn > last { // an older count
				i, k = 0, 0
				continue
			}
			last = x.Turn
			switch {
			case x.Turn >= first && x.Turn <= end:
				lo, hi = min(lo, x.At), max(hi, x.At)
			case x.Turn < first:
				i, k = 0, 0
			}
		}
	}
	if !(hi > lo) {
		return Span{}, fmt.Errorf("tape: turns %d to %d: %w", first, end, ErrNoTurns)
	}
	return Span{run, int64(math.Floor(lo)), int64(math.Ceil(hi))}, nil
}
