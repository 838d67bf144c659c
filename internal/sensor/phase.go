package sensor

import "lapwing/internal/frame"

// marks looks at what the shaft reference showed in a turn.
func (w *Watch) marks(c *watched, f *frame.Frame) {
	if f.Q&(frame.Gap|frame.Starting) != 0 {
		return
	}
	c.seen = true
	if f.Q&(frame.Missing|frame.Uneven) != 0 {
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

// noisyPulse is the height of a pulse over the noise under which marks will soon be lost: they are looked for above
// six times the noise.
const noisyPulse = 12

// Reference takes the state of the shaft reference as of sample seq: what frames cannot tell, because there are none.
// For the same states at the same instants however the stream was cut, ask for it at fixed sample numbers.
func (w *Watch) Reference(s frame.Status, seq int64) {
	for i := range w.ch {
		c := &w.ch[i]
		if c.Kind != Phase {
			continue
		}
		if e := &c.ep[NoMarks]; s.State == frame.StateLost {
			e.last = w.turn
			if !e.standing {
				*e = episode{standing: true, since: w.turn, seq: seq, last: w.turn, reason: say(c, NoMarks)}
			}
		}
		if e := &c.ep[Pulses]; s.State == frame.StateRunning && s.Height < noisyPulse*s.Noise {
			e.last = w.turn
			if !e.standing {
				*e = episode{standing: true, since: w.turn, seq: seq, last: w.turn, reason: saidWeak(c, s.Height/s.Noise)}
			}
		}
	}
}
