package tape

import (
	"errors"
	"testing"
)

// Turns are found where their marks lie, also when the count began anew, and what is not there is said.
func TestTurns(t *testing.T) {
	tp := open(t, t.TempDir(), small())
	count := func(from, to, turn int64) { // a turn every 70 samples, told 100 samples late
		for seq := from; seq < to; seq += 50 {
			tp.Append(block(seq, 50, 3))
			for at := turnAt(from, seq-100); at < seq-50 && at >= from; at += 70 {
				tp.Mark(Mark{Turn: turn + (at-from)/70, At: float64(at) + .25})
			}
		}
	}
	count(0, 4000, 0)
	count(4000, 9000, 0)
	flush(t, tp)
	for _, c := range []struct{ first, end, from, to int64 }{{10, 20, 4700, 5401}, {0, 1, 4000, 4071}, {60, 1000, 8200, 8831}} {
		got, err := tp.Turns(c.first, c.end)
		if err != nil || got.From != c.from || got.To != c.to || got.Run != tp.Run() {
			t.Errorf("turns %d to %d: %+v %v, want %d to %d", c.first, c.end, got, err, c.from, c.to)
		}
	}
	if _, err := tp.Turns(500, 510); !errors.Is(err, ErrNoTurns) {
		t.Errorf("turns that never were: %v", err)
	}
	if _, err := tp.Turns(7, 7); !errors.Is(err, ErrBadSpan) {
		t.Errorf("no turns: %v", err)
	}
}

// turnAt is the first multiple of 70 after from that lies at or above seq.
func turnAt(from, seq int64) int64 {
	if seq <= from {
		return from
	}
	return from + (seq-from+69)/70*70
}
