package sensor

import "math"

// How often a suspicion must come before it counts.
const (
	confirmWithin = 4  // turns, or looks, among which two must be suspect
	rangeTimes    = 3  // turns with values outside the valid range …
	rangeWithin   = 6  // … among so many
	phaseTimes    = 3  // suspect turns of the phase reference …
	phaseWithin   = 50 // … among so many
)

// episode is one fault of one channel over time.
type episode struct {
	standing    bool
	reason      string
	since, seq  int64 // turn and sample of the first suspicion
	last        int64 // turn of the newest
	tick        [phaseTimes]int64
	turn, first [phaseTimes]int64 // of the newest suspicions, newest first
	n           int
	told        bool // stands until it is told to be gone
}

// doubt is one suspect turn, before or beside any confirmation.
type doubt struct {
	fault    Fault
	from, to int64
}

// suspect books a suspicion at tick (turns or looks counted) and reports whether it confirms the fault just now.
func (e *episode) suspect(tick, turn, newest, seq int64, times int, within int64) bool {
	for i := phaseTimes - 1; i > 0; i-- {
		e.tick[i], e.turn[i], e.first[i] = e.tick[i-1], e.turn[i-1], e.first[i-1]
	}
	e.tick[0], e.turn[0], e.first[0] = tick, turn, seq
	e.n = min(e.n+1, phaseTimes)
	e.last = newest
	if e.standing || e.n < times || tick-e.tick[times-1] >= within {
		return false
	}
	e.standing, e.since, e.seq = true, e.turn[times-1], e.first[times-1]
	return true
}

// rest ends the fault when nothing has been suspect for hold turns.
func (e *episode) rest(turn, hold int64) {
	if e.last == unknownTurn {
		e.last = turn // restored: the hold begins with the first turn
	}
	if e.standing && !e.told && (turn-e.last >= hold || turn < e.last-hold) {
		*e = episode{}
	}
}

const unknownTurn = math.MinInt64
