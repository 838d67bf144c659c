package measure

import (
	"math"

	"lapwing/internal/window"
)

// Normal conditions of DIN 1343 (from memory): 0 °C, 101.325 kPa. ISO 13443's standard conditions are 15 °C and the
// same pressure.
const (
	normalT = 273.15
	normalP = 101325.0
)

const (
	whyNormal = "compressibility at 0 °C and 101.325 kPa not known"
	whyRated  = "the skid file gives no rated rod load"
)

// results gives what follows from power, flow and leak fit: shares, normal volumes, gas delivered, efficiency.
func (m *Measurer) results(c *throwCtx) {
	v, rho := c.dst.V, c.in.Gas.normal()
	rise := c.in.Gas.rise(c.in.LinePs, c.in.Ts, c.in.LinePd)
	f := m.takeIn(c)
	loss, delivered := 0.0, 0.0
	for e, at := range c.ix.end {
		if at < 0 {
			continue
		}
		c.over(at+eLossShareS, at+eSuctionLoss, at+ePower)
		c.over(at+eLossShareD, at+eDischargeLoss, at+ePower)
		c.normal(at+eNormS, at+eCapS, rho)
		c.normal(at+eNormD, at+eCapD, rho)
		c.delivered(f, e, at)
		c.normal(at+eDeliveredNorm, at+eDelivered, rho)
		c.performance(at+eDelivered, at+ePower, at+eEfficiency, at+eSpecific, rise, rho)
		switch c.w.Ends[e].State {
		case window.Idle, window.NotDelivering: // draws nothing in
			continue
		}
		loss += v[at+eSuctionLoss] + v[at+eDischargeLoss]
		delivered += v[at+eDelivered]
	}
	at := c.ix.throw
	c.known(at+tLoss, loss)
	c.known(at+tDelivered, delivered)
	c.over(at+tLossShare, at+tLoss, at+tPower)
	c.normal(at+tDeliveredNorm, at+tDelivered, rho)
	c.performance(at+tDelivered, at+tPower, at+tEfficiency, at+tSpecific, rise, rho)
}

// known sets a sum of ends, absent where one of them is.
func (c *throwCtx) known(i int, x float64) {
	if math.IsNaN(x) {
		c.dst.absent(i, whyPartUnknown)
		return
	}
	c.dst.set(i, x)
}

// delivered sets what an end delivers.
func (c *throwCtx) delivered(f *takeIn, e, at int) {
	if f.why[e] != "" {
		c.dst.absent(at+eDelivered, f.why[e])
		c.dst.absent(at+eDeliveredU, f.why[e])
		return
	}
	mass, u := f.fresh(e)
	c.dst.set(at+eDelivered, mass*c.hz)
	c.dst.set(at+eDeliveredU, u/mass)
}

// over sets a quotient of two features, absent as they are.
func (c *throwCtx) over(i, part, whole int) {
	v := c.dst.V
	switch {
	case math.IsNaN(v[part]):
		c.dst.absent(i, c.dst.Why[part])
	case math.IsNaN(v[whole]):
		c.dst.absent(i, c.dst.Why[whole])
	case !(v[whole] > 0):
		c.dst.absent(i, whyNoWork)
	default:
		c.dst.set(i, v[part]/v[whole])
	}
}

// normal sets a mass flow as volume at normal conditions.
func (c *throwCtx) normal(i, flow int, rho float64) {
	switch {
	case math.IsNaN(c.dst.V[flow]):
		c.dst.absent(i, c.dst.Why[flow])
	case math.IsNaN(rho):
		c.dst.absent(i, whyNormal)
	default:
		c.dst.set(i, c.dst.V[flow]/rho)
	}
}

// performance sets isentropic efficiency and specific energy from gas delivered and power.
func (c *throwCtx) performance(delivered, power, efficiency, specific int, rise, rho float64) {
	v := c.dst.V
	why := ""
	switch {
	case math.IsNaN(v[delivered]):
		why = c.dst.Why[delivered]
	case math.IsNaN(v[power]):
		why = c.dst.Why[power]
	case !(v[power] > 0 && v[delivered] > 0):
		why = whyNoWork
	}
	whyE, whyS := why, why
	if why == "" && math.IsNaN(rise) {
		whyE = whyLines
	}
	if why == "" && math.IsNaN(rho) {
		whyS = whyNormal
	}
	c.dst.absent(efficiency, whyE)
	c.dst.absent(specific, whyS)
	if whyE == "" {
		c.dst.set(efficiency, v[delivered]*rise/v[power])
	}
	if whyS == "" {
		c.dst.set(specific, v[power]/(v[delivered]/rho))
	}
}

// openingShare is what the uncertainty of the angle scale leaves open in the volume at an opening, of the swept volume.
func (c *throwCtx) openingShare(e int, deg float64) float64 {
	cyl := &c.in.Cylinder
	return math.Abs(cyl.DVolume(e, deg)) * math.Pi / 180 * c.th.U / cyl.Swept(e)
}
