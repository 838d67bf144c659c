package sensor

import (
	"math"

	"lapwing/internal/dsp"
)

// Thresholds of shifts, on medians over ten turns. Gain: reference/vibration.md section 5 (healthy 10-turn maximum
// 0.20). Zero: of the suction pressure; the transmitters of a modelled machine differ by up to 0.6 %.
const (
	gainLn     = 0.35
	zeroShare  = 0.05
	shiftOver  = 10 // turns
	shiftItems = 24
)

// shifts is a channel's last turns against what is expected, in ring order.
type shifts struct {
	at, n int
	calls int64
	v     [shiftOver][shiftItems]float64
}

func (s *shifts) put(items ...[]float64) {
	row := &s.v[s.at]
	for i := range row {
		row[i] = math.NaN()
	}
	k := 0
	for _, list := range items {
		k += copy(row[k:], list)
	}
	s.at = (s.at + 1) % shiftOver
	s.n = min(s.n+1, shiftOver)
	s.calls++
}

// median of one item over the turns that know it; NaN when fewer than six of ten do.
func (s *shifts) median(item int) float64 {
	var w [shiftOver]float64
	n := 0
	for i := range s.v[:s.n] {
		if x := s.v[i][item]; !math.IsNaN(x) {
			w[n] = x
			n++
		}
	}
	if n < 6 {
		return math.NaN()
	}
	return dsp.MedianInPlace(w[:n])
}

// Shift tells of one turn of an accelerometer: how far each opening impact and each leak-band level lies from what is
// expected at this duty, natural logarithms of amplitude, NaN where not known. The same shift of all of them is the
// channel, not the valves. In a baseline's words it is the judge's finding; here it becomes a state.
func (w *Watch) Shift(channel int, turn, seq0 int64, openings, noise []float64) {
	c := &w.ch[channel]
	if c.Kind != Acceleration || len(openings)+len(noise) > shiftItems {
		return
	}
	c.shifts.put(openings, noise)
	least, sign, n := math.Inf(1), 0.0, 0
	for i := range openings {
		m := c.shifts.median(i)
		if math.IsNaN(m) {
			continue
		}
		if n > 0 && m*sign <= 0 {
			return
		}
		sign = math.Copysign(1, m)
		least = min(least, math.Abs(m))
		n++
	}
	var floor [shiftItems]float64
	k := 0
	for i := range noise {
		if m := c.shifts.median(len(openings) + i); !math.IsNaN(m) {
			floor[k] = m
			k++
		}
	}
	if n < 2 || k < 1 {
		return
	}
	f := dsp.MedianInPlace(floor[:k])
	if least = min(least, sign*f); least <= gainLn {
		return
	}
	if c.ep[Gain].suspect(c.shifts.calls, turn, w.turn, seq0, 2, confirmWithin) {
		c.ep[Gain].reason = saidGain(c, math.Exp(sign*least))
	}
}

// Plateaus tells of one turn of a pressure channel: how far both its plateaus lie from those of the machine's other
// ends on the same lines, as a share of suction pressure; NaN not known.
func (w *Watch) Plateaus(channel int, turn, seq0 int64, suction, discharge float64) {
	c := &w.ch[channel]
	if c.Kind != Pressure || math.IsNaN(suction) || math.IsNaN(discharge) {
		return
	}
	off := 0.0
	if suction*discharge > 0 { // a zero moves both
		off = math.Copysign(min(math.Abs(suction), math.Abs(discharge)), suction)
	}
	c.shifts.put([]float64{off})
	if m := c.shifts.median(0); math.Abs(m) > zeroShare {
		if c.ep[Zero].suspect(c.shifts.calls, turn, w.turn, seq0, 2, confirmWithin) {
			c.ep[Zero].reason = saidZero(c, m)
		}
	}
}
