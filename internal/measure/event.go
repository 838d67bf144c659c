package measure

import (
	"math"
	"sort"

	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// Reasons of the vibration features.
const (
	whyNoVibration = "no accelerometer signal in this turn"
	whyNoOnset     = "no impact stands out of the background"
	whyFewSamples  = "window too short for the sampling rate"
	whySNR         = "impact less than 6 dB above the background"
	whySharedEvent = "another event rings in this window"
	whyUnmixed     = "unmixed from another event, which gives its size only"
	whyWeaker      = "another event in this window is stronger; the two cannot be separated"
	whyCrossTalk   = "only another throw's event is heard here"
	whyNoAngle     = "the pressure shows no angle for this event"
	whyNoSlope     = "the pressure shows no slope for this opening"
)

// Sharing says how far what rings in an event's window is the event's own.
type Sharing uint8

// The cases, vibration.md section 2 and its rule on the correlation ρ of the templates.
const (
	Alone     Sharing = iota // nothing else rings in it
	Separated                // unmixed by templates, ρ < 0.2: both events are booked
	OneSided                 // 0.2 ≤ ρ ≤ 0.6: only the stronger is booked, if it is twice the other
	Shared                   // one sum: either of two
	CrossTalk                // only another throw's event rings here
)

// Mark says what else may ring at an event of the turn.
type Mark struct {
	Sharing Sharing
	Knock   bool // the pin load changes sign here: the crosshead may knock
}

// aheadMs before the onset, and energyMs after it, must be free of another event's window.
const aheadMs = 1.0

// spot is one event of a throw.
type spot struct {
	e int
	k window.Event
}

// listenAll hears every window of a throw. Nothing is booked before all throws have been heard.
func (m *Measurer) listenAll(c *throwCtx) {
	suspect := ""
	for i := range c.th.Vib {
		if s := c.th.Vib[i].Suspect; s != "" {
			suspect = s
		}
	}
	for e := range c.ix.event {
		for k, at := range c.ix.event[e] {
			b := &c.heard[e][k]
			*b = burst{onset: math.NaN(), why: whyNotReached}
			c.dst.Marks[c.i][e][k] = Mark{}
			if at < 0 {
				continue
			}
			w := &c.w.Ends[e].W[k]
			switch {
			case math.IsNaN(w.Lo):
				b.why = w.Why
			case suspect != "": // one channel less would read as a smaller impact
				b.why = suspect
			case len(c.th.Vib) == 0:
				b.why = whyNoVibration
			default:
				m.sense(b, c, spot{e, window.Event(k)})
			}
		}
	}
}

// events books what was heard. Where another event may ring around the onset, peak and effective value stand for both
// events; the rest is unmixed by templates if they are known and different enough, else absent.
func (m *Measurer) events(c *throwCtx) {
	m.pairs = m.pairs[:0]
	for e := range c.ix.event {
		for k, at := range c.ix.event[e] {
			if at < 0 {
				continue
			}
			c.openingSlope(e, window.Event(k), at)
			if b := &c.heard[e][k]; b.why != "" {
				for f := range impactFeatures {
					c.dst.absent(at+f, b.why)
				}
			} else {
				m.event(c, spot{e, window.Event(k)}, at, b)
			}
			c.normalise(window.Event(k), at)
		}
	}
	for e := range c.ix.event {
		for k, at := range c.ix.event[e] {
			if at >= 0 && opening(window.Event(k)) {
				m.hits(c, spot{e, window.Event(k)}, at)
			}
		}
	}
}

func (m *Measurer) event(c *throwCtx, s spot, at int, b *burst) {
	w := &c.w.Ends[s.e].W[s.k]
	mark := &c.dst.Marks[c.i][s.e][s.k]
	c.dst.set(at+vPeak, b.peak)
	c.dst.set(at+vRMS, math.Sqrt(b.meanSquare))
	perMs := 6 * c.th.RPM / 1000
	deg := b.deg
	if math.IsNaN(b.onset) { // an earlier event may ring over it: then look where it should be
		if deg = m.expected(c, s); math.IsNaN(deg) || alone(c.w, s, deg-energyMs*perMs, deg+energyMs*perMs) {
			c.impactAbsent(at, whyNoOnset)
			return
		}
	} else if m.crossTalk(c, b) {
		mark.Sharing = CrossTalk
		c.impactAbsent(at, whyCrossTalk)
		return
	}
	mark.Knock = c.knock(deg, perMs)
	if math.IsNaN(b.onset) || !alone(c.w, s, deg-aheadMs*perMs, deg+energyMs*perMs) {
		mark.Sharing = m.share(c, s, at, deg)
		return
	}
	c.dst.set(at+vOnset, b.deg)
	c.dst.absent(at+vLag, whyNoAngle)
	if !math.IsNaN(w.Angle) {
		c.dst.set(at+vLag, (b.onset-c.th.SampleAt(w.Angle))/c.th.Vib[0].Rate)
	}
	m.show(c, at, b)
	gain := b.energy - b.back
	if !(b.energy >= leastSNR*b.back) || !(gain > 0) {
		c.dst.absent(at+vImpact, whySNR)
		return
	}
	c.dst.set(at+vImpact, math.Log(gain)/2)
	m.learn(c, s, b, gain)
}

// impactAbsent leaves peak and effective value standing and gives the rest a reason.
func (c *throwCtx) impactAbsent(at int, why string) {
	for f := vOnset; f < impactFeatures; f++ {
		c.dst.absent(at+f, why)
	}
}

func opening(k window.Event) bool { return k == window.SuctionOpens || k == window.DischargeOpens }

// alone reports whether no other window of the throw reaches into a stretch of angle.
func alone(w *window.Throw, s spot, lo, hi float64) bool {
	_, n := intruder(w, s, lo, hi)
	return n == 0
}

// intruder gives the last other event of the throw whose window reaches into a stretch of angle, and how many do.
func intruder(w *window.Throw, s spot, lo, hi float64) (other spot, n int) {
	for e := range w.Ends {
		for k := range w.Ends[e].W {
			o := &w.Ends[e].W[k]
			if (spot{e, window.Event(k)}) == s || math.IsNaN(o.Lo) {
				continue
			}
			for d := -360.0; d <= 360; d += 360 {
				if o.Lo+d < hi && lo < o.Hi+d {
					other = spot{e, window.Event(k)}
					n++
					break
				}
			}
		}
	}
	return other, n
}

// degAt is the angle of a sample position, linear between grid points; outside the grid its nearest end.
func degAt(th *turn.Throw, pos float64) float64 {
	n := len(th.Pos)
	i := sort.SearchFloat64s(th.Pos, pos)
	switch {
	case i == 0:
		return th.Grid.At(0)
	case i == n:
		return th.Grid.At(n - 1)
	}
	return th.Grid.At(i-1) + th.Grid.Step*(pos-th.Pos[i-1])/(th.Pos[i]-th.Pos[i-1])
}
