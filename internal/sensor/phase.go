package sensor

import (
	"math"

	"lapwing/internal/frame"
)

// marks looks at what the shaft reference showed in a turn.
func (w *Watch) marks(c *watched, f *frame.Frame) {
	if f.Q&(frame.Gap|frame.Starting) != 0 {
		w.ref = periods{}
		return
	}
	c.seen = true
	if f.Q&frame.LostTooth != 0 && (c.Teeth || !w.apart) {
		if c.ep[Teeth].suspect(w.frames, f.Turn, f.Turn, f.Seq0, phaseTimes, phaseWithin) {
			c.ep[Teeth].reason = say(c, Teeth)
		}
	}
	if c.Teeth {
		return
	}
	if w.ref.odd(f) {
		if c.ep[Unsteady].suspect(w.frames, f.Turn, f.Turn, f.Seq0, phaseTimes, phaseWithin) {
			c.ep[Unsteady].reason = say(c, Unsteady)
		}
	}
	if f.Q&(frame.Extra|frame.Bounced|frame.Weak) != 0 {
		if c.ep[Pulses].suspect(w.frames, f.Turn, f.Turn, f.Seq0, phaseTimes, phaseWithin) {
			c.ep[Pulses].reason = say(c, Pulses)
		}
	}
}

// periods are the last two, samples; 0 not known.
type periods struct{ before, last float64 }

// level is how even neighbouring turns are for a lost mark to be one: a shaft that starts or coasts to its stop
// doubles its period within turns.
const level = 0.08

// odd reports whether the marks of a turn are not those of a shaft. A speed that changes faster than the machine should
// is not yet odd while it goes one way: a motor that starts, a machine that stops.
func (p *periods) odd(f *frame.Frame) bool {
	now := f.Mark1 - f.Mark0
	was := *p
	p.before, p.last = p.last, now
	if was.before == 0 {
		return false
	}
	near := func(a, b float64) bool { return math.Abs(a-b) < level*b }
	if f.Q&frame.Missing != 0 {
		k := math.Round(now / was.last)
		p.last = now / max(1, k)
		return k > 1 && near(now/k, was.last) && near(was.last, was.before)
	}
	return f.Q&frame.Uneven != 0 && (now-was.last)*(was.last-was.before) < 0
}

// Reference takes the state of the shaft reference as of sample seq: what frames cannot tell, because there are none.
// For the same states at the same instants however the stream was cut, ask for it at fixed sample numbers.
func (w *Watch) Reference(s frame.Status, seq int64) {
	for i := range w.ch {
		c := &w.ch[i]
		if c.Kind != Phase || c.Teeth {
			continue
		}
		c.looks++
		if e := &c.ep[NoMarks]; s.State == frame.StateLost {
			e.last = w.turn
			if !e.standing {
				*e = episode{standing: true, since: w.turn, seq: seq, last: w.turn, reason: say(c, NoMarks)}
			}
		}
		if e := &c.ep[Faint]; s.State == frame.StateRunning && s.Height < s.Least*s.Noise {
			if e.suspect(c.looks, w.turn, w.turn, seq, 2, confirmWithin) {
				e.reason = saidWeak(c, s.Height/s.Noise)
			}
		}
	}
}
