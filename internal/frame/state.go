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
	StateCoasting         // the speed is known and falls from turn to turn without recovery: the driver is off (see coast)
)

var stateNames = [...]string{"unknown", "standstill", "starting", "running", "lost", "coasting"}

func (s State) String() string {
	if int(s) < len(stateNames) {
		return stateNames[s]
	}
	return "invalid"
}

// Status is the phase reference's state and what has been counted since New.
type Status struct {
	State   State
	RPM     float64 // NaN unless running or coasting
	Height  float64 // usual height of a pulse (of the mark apart, where there is one) or swing of a tooth, codes; NaN when not known
	Noise   float64 // RMS of the signal's noise, codes: at rest, or with teeth what does not repeat from turn to turn; NaN when not known
	Least   float64 // multiple of the noise below which the usual height loses marks
	Frames  int64   // frames given
	Extra   int64   // pulses that were no marks
	Missing int64   // marks, or teeth, that did not come while running
	Unclear int64   // pulses whose edge lay in lost samples
	LetGo   int64   // samples that went by without becoming part of a frame
}

// A pulse is looked for above six times the noise, at half its height at most. A tooth's swing must turn back by three
// tenths of the usual one, and the extremes of noise on its top reach four times the noise up and down: measured, teeth
// begin to be split or lost at about the given multiple (TestFaintTeeth).
const (
	leastMark  = 12
	leastTooth = 25
)

// Status tells how the shaft reference is doing, as of the last sample added.
func (a *Assembler) Status() Status {
	r := a.ref.state()
	s := Status{RPM: math.NaN(), Height: r.height, Noise: r.noise, Least: leastMark, Frames: a.frames, Extra: r.extra, Missing: r.missing,
		Unclear: r.unclear, LetGo: a.letGo}
	if a.cfg.Wheel.Teeth > 0 && !a.cfg.Wheel.Separate {
		s.Least = leastTooth
	}
	quiet := float64(a.next) - max(r.lastPulse, float64(a.began))
	if r.locked {
		s.RPM = 60 * a.cfg.Rate / r.expect
	}
	switch {
	case r.locked && r.coasting:
		s.State = StateCoasting
	case r.locked:
		s.State = StateRunning
	case r.lost:
		s.State = StateLost
	case r.open:
		s.State = StateStarting
	case quiet > 1.1*r.maxT && r.seen:
		s.State = StateStandstill
	}
	return s
}
