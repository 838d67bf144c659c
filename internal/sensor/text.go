package sensor

import (
	"fmt"
	"math"
)

// say words a fault of the turn in hand: what is seen, and where people usually find the cause.
func (w *Watch) say(c *watched, k Fault) string {
	s := &c.scan
	switch k {
	case Flat:
		return fmt.Sprintf("%s gives one and the same value for %.3g ms of a turn: usually converter, supply or a loose connector", c.ID, 1000*float64(s.run)/w.cfg.Rate)
	case OpenCable:
		return fmt.Sprintf("%s picks up mains (%.0f %% of the signal) and little else: usually an open cable, a loose connector or a broken shield", c.ID, 100*c.share)
	case LostBias:
		v := s.mean * c.PerCount
		if c.Kind == Pressure {
			return fmt.Sprintf("%s reads less than no pressure (mean %.2f V, zero at %.2f V): usually supply, barrier, fuse or a wire that is off", c.ID, v, c.ZeroV)
		}
		return fmt.Sprintf("%s rests at %.2f V instead of %.2f V: the sensor's bias is gone; usually its supply, barrier, cable or the sensor itself", c.ID, v, c.ZeroV)
	case Swapped:
		if c.Kind == Acceleration {
			return fmt.Sprintf("%s shows the slow swing of a pressure: usually two channels are wired to each other's inputs", c.ID)
		}
		if w.bursts(c) {
			return fmt.Sprintf("%s shows the bursts of an accelerometer: usually two channels are wired to each other's inputs", c.ID)
		}
		return fmt.Sprintf("%s peaks %.0f° from where this end must: usually head end and crank end are swapped (then both say so), or the dead-centre angle in the skid file is half a turn off", c.ID, math.Abs(w.fromInner(c)))
	case Range:
		return fmt.Sprintf("%s reads outside its valid range (%s): usually scaling, a wrong range setting or a failing transmitter", c.ID, c.extremes())
	case Clipped:
		return fmt.Sprintf("%s is cut off at %.3g V: usually the input range is too small or the amplifier is saturated", c.ID, clippedAt(c)*c.PerCount)
	case Noisy:
		return fmt.Sprintf("%s is %.0f times noisier than usual at all angles: usually a loose connector, a damaged shield, a drive's cable nearby or a failing amplifier", c.ID, s.quiet/c.levels.Quiet[1])
	}
	return say(c, k)
}

func clippedAt(c *watched) float64 {
	for side := range c.scan.flats {
		if level, flat := c.shelf(side); flat {
			return level
		}
	}
	if c.scan.top >= c.scan.bottom {
		return float64(c.scan.railHi)
	}
	return float64(c.scan.railLo)
}

func (c *watched) extremes() string {
	a, b := c.value(float64(c.scan.min)), c.value(float64(c.scan.max))
	a, b = min(a, b), max(a, b)
	if c.Kind == Pressure {
		return fmt.Sprintf("%.1f to %.1f bar abs", a/1e5, b/1e5)
	}
	return fmt.Sprintf("%.0f to %.0f g", a/gravity, b/gravity)
}

const gravity = 9.80665 // m/s², ISO 80000-3

// say words what needs no numbers.
func say(c *watched, k Fault) string {
	switch k {
	case Dead:
		if c.Kind == Pressure {
			return c.ID + " does not move with the machine while other pressures do: usually a closed or blocked gauge passage, or a dead transmitter"
		}
		return c.ID + " has fallen silent, its own noise with it: usually the sensor, its cable or its amplifier is dead"
	case NoMarks:
		return c.ID + ": the shaft marks stopped from one turn to the next while the machine ran at speed: usually the pick-up, its gap or its cable; no valve is watched without it"
	case Unsteady:
		return c.ID + ": marks are missing or come at times that the shaft cannot do: usually the pick-up's gap, its mounting or the trigger level"
	case Pulses:
		return c.ID + ": extra, ringing or weak pulses beside the marks: usually a scratch on the shaft, run-out, the gap or interference; the marks are still told apart"
	case Teeth:
		return c.ID + ": teeth of the wheel do not come in some turns: usually a damaged tooth, dirt on the pick-up or its gap; the turns are still cut at the right tooth"
	}
	return c.ID + ": " + k.String()
}

func saidWeak(c *watched, snr float64) string {
	return fmt.Sprintf("%s: the mark stands only %.0f times above the noise; usually the pick-up's gap has grown", c.ID, snr)
}

func saidGain(c *watched, factor float64) string {
	return fmt.Sprintf("%s reads about %.2f times as much as it did, on all openings and the noise alike: usually mounting, cable or amplifier setting", c.ID, factor)
}

func saidZero(c *watched, share float64) string {
	return fmt.Sprintf("%s reads %+.0f %% of suction pressure beside the other ends at both plateaus: usually the transmitter's zero, or a leg filled with liquid", c.ID, 100*share)
}

func (w *Watch) humSays(c *watched, k Fault, mains int, l *look) string {
	hz := w.mains.freq[mains]
	if k == OpenCable {
		return fmt.Sprintf("%s picks up %.0f Hz mains (%.0f %% of the signal) and little else: usually an open cable, a loose connector or a broken shield", c.ID, hz, 100*l.share[mains])
	}
	return fmt.Sprintf("%s carries %.0f Hz mains hum, %.2g V rms (%.1f %% of the signal's power): usually a shield earthed at both ends or a supply cable alongside", c.ID, hz, math.Sqrt(l.power[mains])*c.PerCount, 100*l.share[mains])
}
