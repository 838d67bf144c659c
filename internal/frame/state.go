package frame

import "math"

// State says what the phase reference shows of the shaft.
type State uint8

// The states. The zero value is that nothing is known yet.
const (
	StateUnknown    State = iota
	StateStandstill       // no marks for longer than the slowest turn
	StateStarting         // marks come, the speed is not established
	StateRunning          // the speed is known
	StateLost             // marks stopped coming although the shaft was at speed: suspect the pick-up or its cable
)

var stateNames = [...]string{"unknown", "standstill", "starting", "running", "lost"}

func (s State) String() string {
	if int(s) < len(stateNames) {
		return stateNames[s]
	}
	return "invalid"
}

// Status is the phase reference's state and what has been counted since New.
type Status struct {
	State   State
	RPM     float64 // NaN unless running
	Height  float64 // usual height of a pulse, codes; NaN when not known
	Noise   float64 // RMS of the signal at rest, codes; NaN when not known
	Frames  int64   // frames given
	Extra   int64   // pulses that were no marks
	Missing int64   // marks that did not come while running
	Unclear int64   // pulses whose edge lay in lost samples
	LetGo   int64   // samples that went by without becoming part of a frame
}

// Status tells how the shaft reference is doing, as of the last sample added.
func (a *Assembler) Status() Status {
	s := Status{RPM: math.NaN(), Height: math.NaN(), Noise: math.NaN(), Frames: a.frames, Extra: a.gate.nExtra,
		Missing: a.gate.nMissing, Unclear: a.det.edgesLost, LetGo: a.letGo}
	if a.det.have && (a.cfg.Auto || a.det.nh > 0) {
		s.Height, s.Noise = a.det.height(), a.det.lev.noise
	}
	quiet := float64(a.next) - max(a.gate.lastPulse, float64(a.began))
	switch {
	case a.gate.locked:
		s.State, s.RPM = StateRunning, 60*a.cfg.Rate/a.gate.expect
	case a.gate.lost:
		s.State = StateLost
	case a.gate.open:
		s.State = StateStarting
	case quiet > 1.1*a.gate.maxT && (!a.cfg.Auto || a.det.have || a.det.survey.full()):
		s.State = StateStandstill
	}
	return s
}
