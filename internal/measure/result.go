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
	whyNoLeak = "no leak fit: leaks cannot be taken off"
	whyRated  = "the skid file gives no rated rod load"
)

// results gives what follows from power, flow and leak fit: shares, normal volumes, gas delivered, efficiency.
func (m *Measurer) results(c *throwCtx) {
	v, rho := c.dst.V, c.in.Gas.normal()
	rise := c.in.Gas.rise(c.in.LinePs, c.in.Ts, c.in.LinePd)
	loss, delivered := 0.0, 0.0
	for e, at := range c.ix.end {
		if at < 0 {
			continue
		}
		c.over(at+eLossShareS, at+eSuctionLoss, at+ePower)
		c.over(at+eLossShareD, at+eDischargeLoss, at+ePower)
		c.normal(at+eNormS, at+eCapS, rho)
		c.normal(at+eNormD, at+eCapD, rho)
		c.delivered(e, at)
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

// delivered takes the leaks off the capacity by suction, which takes the whole suction volume for fresh gas at line
// temperature. The balance of an end: what is lost of it is
//
//   - what goes back through the suction valves, warmed: it is drawn in again and takes the room of T/Ts times its mass,
//   - what comes past the rings while suction is open (over a whole turn as much is lost to the other end),
//   - what comes through the discharge valves while suction is open, at T₂.
//
// The leaks are signed as they were fitted: the fit's errors on suction and rings cancel each other, clipped they would
// not. Heat from the walls is not in it.
func (c *throwCtx) delivered(e, at int) {
	v := c.dst.V
	flow, suction, discharge := v[at+eCapS], v[c.ix.path[2*e]+lPercent], v[c.ix.path[2*e+1]+lPercent]
	switch {
	case math.IsNaN(flow):
		c.dst.absent(at+eDelivered, c.dst.Why[at+eCapS])
		return
	case math.IsNaN(suction) || math.IsNaN(discharge):
		c.dst.absent(at+eDelivered, whyNoLeak)
		return
	}
	room := c.room(e)
	lost := suction*room[0] + discharge*room[1]
	if k := c.ix.path[4]; k >= 0 && !math.IsNaN(v[k+lPercent]) {
		lost += v[k+lPercent] * room[2]
	}
	c.dst.set(at+eDelivered, flow*(1-lost))
}

// roomStep is the step of the sums in room: their parts bend little.
const roomStep = 4.0 // degrees

// room gives what fresh gas a kilogram of each leak costs an end: through its suction valves, through its discharge
// valves, past the rings.
func (c *throwCtx) room(e int) (cost [3]float64) {
	w := &c.w.Ends[e]
	k := c.in.Gas.KV
	from := opened(&w.W[window.SuctionOpens])
	if !(k > 1) || math.IsNaN(from) {
		return [3]float64{1, 0, 1}
	}
	to := strokeStart(e, window.Compression)
	if late(&w.W[window.SuctionCloses], to) && !math.IsNaN(w.W[window.SuctionCloses].Angle) {
		to = w.W[window.SuctionCloses].Angle
	}
	if to < from {
		to += 360
	}
	hot := adiabatic(c.in, w)/c.in.Ts - 1
	if !(hot > 0) {
		hot = 0
	}
	critical := math.Pow(2/(k+1), k/(k-1))
	p, other := c.th.P[e], c.th.P[1-e]
	if c.th.Bad[1-e] != "" {
		other = nil
	}
	span := 1 / (w.Pd - w.Ps)
	// warm is T/Ts of gas compressed to p: the adiabatic curve by a parabola, within 3 % of the rise.
	warm := func(p float64) float64 {
		t := min(max((p-w.Ps)*span, 0), 1)
		return 1 + hot*t*(1.4-.4*t)
	}
	var all, part [3]float64
	every := max(1, int(math.Round(roomStep/c.th.Grid.Step)))
	for i := c.i0; i < c.i1; i += every {
		a := c.th.Grid.At(i)
		if a < from {
			a += 360
		}
		q := jet(p[i], w.Ps, critical)
		all[0] += q
		part[0] += q * warm(p[i])
		q = jet(w.Pd, p[i], critical)
		all[1] += q
		if a < to {
			part[1] += q * (1 + hot)
		}
		if other != nil {
			q = jet(other[i], p[i], critical)
			all[2] += q
			if a < to {
				part[2] += q * warm(other[i])
			}
		}
	}
	for j := range cost {
		if all[j] > 0 {
			cost[j] = part[j] / all[j]
		}
	}
	return cost
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
