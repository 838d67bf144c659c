package station

import (
	"math"

	"lapwing/internal/alarm"
	"lapwing/internal/turn"
)

// readings watches whether the process values still live: told pressures that stand still to the last digit while the
// cylinders show that the lines have moved come over a link that is down, or from a page that is no longer refreshed.
// Values that never moved (the fixed ones of a skid file) are nobody's link.
type readings struct {
	told, last []float64 // by throw: suction, discharge, Pa
	own        []float64 // the same by the cylinders' plateaus when the values last moved
	moved      bool      // the values have been seen to move
	since      float64   // s of sample clock: when they last did
	seq        int64
	apart      int // turns in a row in which the cylinders show another pressure than then
	stuck      bool
}

const (
	readingsKey   = "process/sensor"
	readingsStill = 15.0 // s that nothing moves; control systems with a deadband stand still for some
	readingsApart = 0.06 // ln: plateaus move by some per cent with the speed alone
	readingsTurns = 30
)

// see takes a turn; ok is false when nothing can be said yet.
func (r *readings) see(l *Line, t *turn.Turn) (ok bool) {
	r.told = r.told[:0]
	var own []float64
	for i := range l.points {
		r.told = append(r.told, l.win[i].LinePs, l.win[i].LinePd)
		own = append(own, l.points[i].OwnPs, l.points[i].OwnPd)
	}
	same := len(r.last) == len(r.told)
	for k := range r.told {
		if math.IsNaN(r.told[k]) {
			return false // not told at all: the duty goes by the traces, and says so
		}
		same = same && r.told[k] == r.last[k]
	}
	if !same {
		r.moved = len(r.last) > 0
		r.last = append(r.last[:0], r.told...)
		r.since, r.seq, r.apart, r.stuck = t.Time, t.Seq0, 0, false
		r.own = append(r.own[:0], own...)
		return r.moved
	}
	if !r.moved {
		return false
	}
	far := false
	for k, p := range own {
		if math.IsNaN(r.own[k]) {
			r.own[k] = p
		}
		far = far || math.Abs(math.Log(p/r.own[k])) > readingsApart // NaN is not
	}
	if r.apart++; !far {
		r.apart = 0
	}
	r.stuck = r.stuck || r.apart >= readingsTurns && t.Time-r.since > readingsStill
	return true
}

// readingConditions says how the process values do.
func (l *Line) readingConditions(conds []alarm.Condition, t *turn.Turn) []alarm.Condition {
	c := alarm.Condition{Key: readingsKey, Subject: "process", Kind: sensorKind, Turn: t.Number, Seq0: t.Seq0, Seq1: t.Seq1, Known: l.readings.see(l, t)}
	if !c.Known {
		return conds
	}
	c.Sentence = "process values: they move again"
	if l.readings.stuck {
		c.Severity, c.Seq0 = alarm.Advisory, l.readings.seq
		c.Sentence = "out of specification: the process values stand still while the cylinders show that the line pressures have moved: usually the link to the control system is down, or one page of it is no longer refreshed. Next: check the link; until then no valve is judged where the traces disagree with what is told"
	}
	return append(conds, c)
}
