package sensor

// isTold says which faults come from outside with Tell.
func (f Fault) isTold() bool { return f == Sensitivity || f == Drift || f == Gauge || f == Slipped }

// Tell says what only somebody who sees whole cylinders over a long time can know of a channel: that its sensitivity is
// wrong (Sensitivity), its zero has drifted (Drift), its gauge passage rings otherwise (Gauge), the dead centres have
// moved against the marks (Slipped). The fault stands, with the newest reason, until it is told with an empty one.
func (w *Watch) Tell(channel int, k Fault, turn, seq int64, reason string) {
	e := &w.ch[channel].ep[k]
	switch {
	case reason == "" && e.told:
		*e = episode{}
	case reason == "":
	case e.told:
		e.reason = reason
	default:
		*e = episode{standing: true, told: true, since: turn, seq: seq, last: turn, reason: reason}
	}
}
