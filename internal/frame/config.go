package frame

import (
	"errors"
	"fmt"
	"math"
)

// Edge says which side of the pulse is the mark, seen in the signal's codes.
type Edge uint8

// The two edges.
const (
	Rising Edge = iota
	Falling
)

func (e Edge) String() string {
	if e == Falling {
		return "falling"
	}
	return "rising"
}

// Config says what the phase reference looks like.
type Config struct {
	Rate        float64 // samples per second and channel, > 0
	Inputs      int     // inputs of every block, > 0
	Channel     int     // index of the phase signal among them
	Edge        Edge    // which edge is the mark
	Auto        bool    // find the levels from the signal: the pulse must stand 3 codes and 8 times the noise out of it
	Threshold   float64 // codes; where Auto is false, the level whose crossing is the mark
	Hysteresis  float64 // codes, >= 0, between the crossing and being ready for the next; 0: by the pulse's height. Teeth: what the signal must turn back by
	Wheel       Wheel   // zero: one mark a turn
	Index       int     // index of the signal of the mark apart, with Wheel.Separate; its levels are found
	MinRPM      float64 // slower is standstill; 0: 30
	MaxRPM      float64 // faster cannot be a shaft mark; 0: 2500
	KeepSeconds float64 // longest frame kept; 0: 2.2 turns at MinRPM, at least 3 s
	FirstTurn   int64   // number of the first frame
}

const (
	defaultMinRPM = 30
	defaultMaxRPM = 2500
)

// withDefaults fills in zero fields and refuses what cannot be.
func (c Config) withDefaults() (Config, error) {
	if c.MinRPM == 0 {
		c.MinRPM = defaultMinRPM
	}
	if c.MaxRPM == 0 {
		c.MaxRPM = defaultMaxRPM
	}
	if c.KeepSeconds == 0 {
		c.KeepSeconds = max(3, 2.2*60/c.MinRPM)
	}
	var errs []error
	no := func(format string, args ...any) { errs = append(errs, fmt.Errorf("frame: "+format, args...)) }
	if !(c.Rate > 0) || math.IsInf(c.Rate, 0) {
		no("rate %v Hz, want > 0", c.Rate)
	}
	if c.Inputs < 1 {
		no("%d inputs, want at least 1", c.Inputs)
	}
	if c.Channel < 0 || c.Channel >= c.Inputs {
		no("phase channel %d is none of the %d inputs", c.Channel, c.Inputs)
	}
	if c.Wheel.Separate && (c.Index < 0 || c.Index >= c.Inputs || c.Index == c.Channel) {
		no("channel %d of the mark apart is none of the %d inputs, or that of the teeth", c.Index, c.Inputs)
	}
	if c.Edge > Falling {
		no("edge %d, want Rising or Falling", c.Edge)
	}
	if !c.Auto && (math.IsNaN(c.Threshold) || math.IsInf(c.Threshold, 0)) {
		no("threshold %v", c.Threshold)
	}
	if !(c.Hysteresis >= 0) || math.IsInf(c.Hysteresis, 0) {
		no("hysteresis %v codes, want >= 0", c.Hysteresis)
	}
	if err := c.Wheel.Check(); err != nil {
		no("%w", err)
	}
	switch {
	case !(c.MinRPM > 0) || !(c.MaxRPM > c.MinRPM) || math.IsInf(c.MaxRPM, 0):
		no("speed range %v to %v rpm, want 0 < min < max", c.MinRPM, c.MaxRPM)
	case c.Rate > 0 && c.Rate*60/c.MaxRPM < minTurn:
		no("%.3g samples per turn at %v rpm, want at least %d: sample faster or lower the greatest speed",
			c.Rate*60/c.MaxRPM, c.MaxRPM, minTurn)
	case c.Wheel.Teeth > 0 && c.Rate*60/c.MaxRPM < MinPitch*float64(c.Wheel.Teeth):
		no("%.3g samples per tooth at %v rpm, want at least %d: sample faster, lower the greatest speed or use a wheel of fewer teeth",
			c.Rate*60/c.MaxRPM/float64(c.Wheel.Teeth), c.MaxRPM, MinPitch)
	}
	if !(c.KeepSeconds > 0) || !(c.KeepSeconds <= 600) {
		no("%v s kept, want 0 to 600", c.KeepSeconds)
	}
	if err := errors.Join(errs...); err != nil {
		return Config{}, err
	}
	return c, nil
}

// minTurn is the least number of samples in the shortest turn.
const minTurn = 40

// MinPitch is the least number of samples from tooth to tooth in the shortest turn.
const MinPitch = 4
