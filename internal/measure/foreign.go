package measure

import "math"

// Cross-talk: another throw's event arrives here a millisecond or so late and much weaker than it was there.
const (
	crossEarlyMs = 0.3
	crossLateMs  = 2.5
	crossShare   = 0.15 // of the peak at the throw where it comes from; own events are of the same size as theirs
)

// Knock: at a change of sign of the pin load the crosshead may knock.
const (
	knockDeg = 1.5
	knockMs  = 2.0
)

// crossTalk tells whether a burst is what is left of another throw's event.
func (m *Measurer) crossTalk(c *throwCtx, b *burst) bool {
	perMs := c.th.Vib[0].Rate / 1000
	period := c.th.T1 - c.th.T0
	for u := range m.ctx {
		o := &m.ctx[u]
		if u == c.i || o.th == nil {
			continue
		}
		for e := range o.heard {
			for k := range o.heard[e] {
				f := &o.heard[e][k]
				if f.why != "" || math.IsNaN(f.onset) || b.peak > crossShare*f.peak {
					continue
				}
				if o.th.Vib[f.loud].Channel == c.th.Vib[b.loud].Channel { // one sensor for both throws
					continue
				}
				late := b.onset - f.onset
				late -= period * math.Round(late/period) // its turn may be counted from elsewhere
				if late >= -crossEarlyMs*perMs && late <= crossLateMs*perMs {
					return true
				}
			}
		}
	}
	return false
}

// knock tells whether the pin load changes sign at an angle.
func (c *throwCtx) knock(deg, perMs float64) bool {
	for _, k := range []int{tPinPulls, tPinPushes} {
		at := c.dst.V[c.ix.throw+k]
		if math.IsNaN(at) {
			continue
		}
		late := deg - at
		late -= 360 * math.Round(late/360)
		if late >= -knockDeg-c.th.U && late <= knockDeg+c.th.U+knockMs*perMs {
			return true
		}
	}
	return false
}
