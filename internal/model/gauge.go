package model

import (
	"fmt"
	"math"
	"math/rand/v2"

	"lapwing/internal/skid"
)

// Noise and standing errors of the instruments, as shares.
const (
	gaugeNoise = 0.0003 // of the transmitter's span, rms per sample
	gaugeZero  = 0.003  // of suction pressure, one standard deviation between transmitters
	gaugeGain  = 0.002  // likewise, of the reading
	adcNoise   = 3e-6   // of full scale, rms
	phaseNoise = 0.004  // of the pulse height, rms
)

// channel is one converter input.
type channel struct {
	id    string
	input int
	kind  skid.Kind
	// counts = (value/Gain + ZeroV)/volts per count
	perValue, offset float64
	top              float64 // largest code
	noise            float64 // counts rms from the converter

	// pressure
	src        *end
	passage    *section
	gain, zero float64
	drift      float64 // Pa, scripted
	spoil      spoil   // scripted faults of the chain
	grass      float64 // Pa rms
	once       bool    // the mark apart from the wheel
	// acceleration
	accel *shaker
	rnd   *rand.Rand
}

// marker is the once-per-turn mark, or the toothed wheel, as a voltage.
type marker struct {
	lo, hi float64   // V, idle and inside the pulse
	half   float64   // degrees, half the length of an edge
	width  float64   // degrees between the mid-levels
	at     []float64 // degrees of the marks; the first is 0
	k      int       // the mark that passed last
	back   bool      // the pulse lies before the mark: its trailing edge is the active one
	volts  float64
	noise  float64 // V rms
	faults marks
	odd    *rand.Rand
}

func (m *Machine) buildChannels(seed uint64) error {
	errs := stream(seed, 3)
	for i := range m.sk.Channels {
		sc := &m.sk.Channels[i]
		if sc.Gain == 0 || sc.VoltsFull <= 0 {
			return fmt.Errorf("model: channel %s has no scaling", sc.ID)
		}
		gain, off := sc.Scale(m.bits)
		c := &channel{id: sc.ID, input: sc.Input, kind: sc.Kind, perValue: 1 / gain, offset: -off / gain,
			top: float64(int64(1)<<(m.bits-1)) - 1, gain: 1, rnd: stream(seed, 1000+uint64(sc.Input)), spoil: healthy}
		c.noise = adcNoise * c.top * m.par.Noise
		m.inputs = max(m.inputs, sc.Input+1)
		switch sc.Kind {
		case skid.Pressure:
			z, g := errs.NormFloat64(), errs.NormFloat64()
			if err := c.tap(m, sc, z, g); err != nil {
				return err
			}
		case skid.Acceleration:
			for _, t := range m.throws {
				for _, a := range t.accels {
					if a.id == sc.ID {
						c.accel = a
					}
				}
			}
		case skid.PhaseMark:
			if sc.ID == m.sk.Phase.Channel {
				m.mark = newMarker(&m.sk.Phase, sc)
				m.mark.noise *= m.par.Noise
				m.mark.odd = stream(seed, 5)
			} else if sc.ID == m.sk.Phase.Index { // one mark a turn, two fifths of a pitch before the wheel's mark 0
				p := m.sk.Phase
				p.Wheel, p.AutoLevel = skid.Phase{}.Wheel, true
				m.once, c.once = newMarker(&p, sc), true
				m.once.width = 10
				m.once.noise *= m.par.Noise
				m.once.odd = stream(seed, 6)
				m.once.faults.slip = -0.4 * 360 / float64(max(1, m.sk.Phase.Wheel.Teeth))
			}
		}
		m.chans = append(m.chans, c)
	}
	return nil
}

// tap connects a pressure channel to its end, with the transmitter's standing errors.
func (c *channel) tap(m *Machine, sc *skid.Channel, z, g float64) error {
	for _, t := range m.throws {
		for side, e := range t.ends {
			if e == nil || t.sk.Ends[side].Pressure != sc.ID {
				continue
			}
			c.src = e
			c.zero = gaugeZero * t.stage.ps * m.par.GaugeError * z
		}
	}
	c.gain = 1 + gaugeGain*m.par.GaugeError*g
	span := sc.Max - sc.Min
	if !(span > 0) || math.IsInf(span, 0) {
		span = math.Abs(sc.VoltsFull * sc.Gain)
	}
	c.grass = gaugeNoise * span * m.par.Noise
	if sc.Passage > 0 {
		if sc.Passage > 0.2*m.rate {
			return nil // far above anything that passes the converter
		}
		q := sc.PassageQ
		if q <= 0 {
			q = 8
		}
		s := passage(sc.Passage, q, m.rate)
		c.passage = &s
	}
	return nil
}

func (c *channel) slow(m *Machine, now float64) {
	if tr := m.plan.zero[c.id]; tr != nil {
		c.drift = tr.at(now)
	}
	c.spoil.slow(m, c.id, now)
}

// convert reads the channel's quantity at the present sample and gives the converter's code.
func (c *channel) convert(m *Machine) (int32, bool) {
	v := 0.0
	switch {
	case c.src != nil:
		v = c.src.p
		if c.passage != nil {
			if m.n == 1 {
				c.passage.settle(v)
			}
			v = c.passage.next(v)
		}
		v = v*c.gain*c.spoil.gain + c.zero + c.drift
		if c.grass > 0 {
			v += c.grass * c.rnd.NormFloat64()
		}
	case c.accel != nil:
		v = c.accel.out
	case c.kind == skid.PhaseMark && m.mark != nil:
		k := m.mark
		if c.once {
			k = m.once
		}
		if v = k.volts; k.noise > 0 {
			v += k.noise * c.rnd.NormFloat64()
		}
	}
	x := v*c.perValue + c.offset
	if c.spoil.any {
		x = c.spoil.wire(x, c, m)
	}
	if c.noise > 0 {
		x += c.noise * c.rnd.NormFloat64()
	}
	x = math.RoundToEven(x)
	if c.spoil.flat {
		x = c.spoil.last
	}
	c.spoil.last = x
	switch {
	case x > c.top:
		return int32(c.top), true
	case x < -c.top-1:
		return int32(-c.top - 1), true
	}
	return int32(x), false
}

// settle puts the filter at rest on a constant input.
func (s *section) settle(x float64) {
	// y = x at rest for a passage of unit gain.
	s.z2 = s.b2*x - s.a2*x
	s.z1 = s.b1*x - s.a1*x + s.z2
}

func newMarker(p *skid.Phase, c *skid.Channel) *marker {
	k := &marker{lo: 0.05 * c.VoltsFull, hi: 0.45 * c.VoltsFull, half: 0.15, width: 4, back: p.Falling}
	k.at = append([]float64{0}, p.Wheel.Angles()...)
	if w := p.Wheel; w.Teeth > 0 {
		pitch := 360 / float64(w.Teeth)
		if w.Extra {
			pitch /= 2
		}
		k.width, k.half = pitch/2, min(0.5, pitch/10)
	}
	if !p.AutoLevel && p.Threshold != 0 {
		// A stated threshold is the middle of the pulse.
		h := max(0.3*c.VoltsFull, math.Abs(p.Threshold)*0.8)
		h = min(h, 0.95*c.VoltsFull-math.Abs(p.Threshold))
		k.lo, k.hi = p.Threshold-h, p.Threshold+h
	}
	k.noise = phaseNoise * (k.hi - k.lo)
	return k
}

// read gives the voltage at the present shaft angle: a trapezoid at every mark, whose active edge is at mid-level exactly
// on the mark.
func (k *marker) read(m *Machine) {
	a := math.Mod(m.theta*180/math.Pi, 360)
	if k.faults.slip != 0 {
		a = math.Mod(a-k.faults.slip+720, 360)
	}
	k.faults.draw(a, k.odd)
	turned := a
	if k.back {
		a = 360 - a
	}
	// The mark that was passed last, seen in the direction of the pulses; the next one's edge may have begun.
	n := len(k.at)
	f := 0.0
	if a < k.place(k.k) {
		k.k = 0
	}
	for k.k+1 < n && a >= k.place(k.k+1) {
		k.k++
	}
	next := 360.0
	if k.k+1 < n {
		next = k.place(k.k + 1)
	}
	before := k.place(k.k) // of a turn with a mark in front of it: that of the turn before
	if a < before {
		before = k.place(n-1) - 360
	}
	for _, p := range [2]float64{before, next} {
		up, down := (a-p+k.half)/(2*k.half), (k.width+k.half-(a-p))/(2*k.half)
		if k.faults.miss && (p == 0 || p == 360) {
			continue
		}
		f = max(f, min(up, down))
	}
	if k.faults.extra {
		f = max(f, min((turned-k.faults.at+k.half)/(2*k.half), (k.width+k.half-(turned-k.faults.at))/(2*k.half)))
	}
	k.volts = k.lo + (k.hi-k.lo)*min(max(f, 0), 1)
}

// place gives the angle of mark i in the direction of the pulses: backwards, they count from the last mark down.
func (k *marker) place(i int) float64 {
	if !k.back || i == 0 {
		return k.at[i]
	}
	return 360 - k.at[len(k.at)-i]
}
