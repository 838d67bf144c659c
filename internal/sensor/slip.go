package sensor

import (
	"math"

	"lapwing/internal/dsp"
)

// Slip watches the phase reference by the phase that the leak fit of every turn finds beyond the baseline's.
//
// Needs: steady turns of each throw. Waits: for two blocks of 32 turns of every throw that works. Emits: the angle by
// which the marks come late, when all throws say the same; one throw alone has something of its own and is no slip.
type Slip struct {
	throws []slipThrow
	doubt  bool
	late   float64
}

type slipThrow struct {
	n      int
	v      [levelTurns]float64
	block  [2]float64 // newest first
	turn   int64      // of the newest
	blocks int
}

const (
	slipFrom  = .3  // degrees, said from
	slipTo    = .2  // believed again below
	slipApart = .15 // by which throws and blocks may differ, and a fifth of the slip
	slipFresh = 2000
)

// NewSlip watches so many throws.
func NewSlip(throws int) *Slip {
	return &Slip{throws: make([]slipThrow, throws), late: math.NaN()}
}

// Anew begins again against another baseline.
func (s *Slip) Anew() {
	clear(s.throws)
	s.doubt, s.late = false, math.NaN()
}

// Add takes the phase, degrees to be added to the angles beyond the baseline's, of a steady turn of a throw, and reports
// whether a block closed.
func (s *Slip) Add(throw int, turn int64, phase float64) bool {
	t := &s.throws[throw]
	if math.IsNaN(phase) {
		return false
	}
	t.v[t.n] = phase
	if t.n++; t.n < levelTurns {
		return false
	}
	t.n = 0
	w := t.v
	t.block[1], t.block[0] = t.block[0], dsp.MedianInPlace(w[:])
	t.turn = turn
	t.blocks++
	s.look(turn)
	return true
}

// look compares the newest blocks of all throws.
func (s *Slip) look(turn int64) {
	lo, hi, n := math.Inf(1), math.Inf(-1), 0
	for i := range s.throws {
		t := &s.throws[i]
		if t.blocks < 2 || turn-t.turn > slipFresh {
			continue
		}
		n++
		for _, v := range t.block {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
	}
	if n == 0 {
		return
	}
	mid := (lo + hi) / 2
	switch {
	case hi-lo > slipApart+math.Abs(mid)/5:
		s.doubt = s.doubt && math.Abs(mid) > slipTo
	case math.Abs(mid) > slipFrom:
		s.doubt = true
	case math.Abs(mid) < slipTo:
		s.doubt = false
	}
	s.late = mid
}

// Late gives the degrees to be added to the angles beyond those of the baseline, NaN when not known, and whether they
// are to be told.
func (s *Slip) Late() (deg float64, doubt bool) { return s.late, s.doubt }

// Throws is how many throws the last answer rests on.
func (s *Slip) Throws(turn int64) (n int) {
	for i := range s.throws {
		if t := &s.throws[i]; t.blocks >= 2 && turn-t.turn <= slipFresh {
			n++
		}
	}
	return n
}
