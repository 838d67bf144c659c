package measure

import (
	"math"

	"lapwing/internal/dsp"
	"lapwing/internal/window"
)

// What is read off the shape of the trace, for the eye.
const (
	plateauS   = 26.0 // degrees ahead of the dead centre over which pulsation is looked for: the plateaus' own
	plateauD   = 20.0
	plateauGap = 3.0
	openingDeg = 25.0 // degrees after an opening within which its over- or undershoot lies
	steepDeg   = 1.0  // half of the stretch that dp/dθ is taken over
)

const (
	whyNoOpening = "the opening was not found on this turn"
	whyNoWork    = "the end does no work"
)

// steep gives the extremes of dp/dθ over 0…360°, Pa per degree.
func (m *Measurer) steep(c *throwCtx, e, at int) {
	p := c.th.P[e]
	k := max(1, int(math.Round(steepDeg/c.th.Grid.Step)))
	if c.i0 < k || c.i1+k >= len(p) {
		return
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for i := c.i0; i < c.i1; i++ {
		d := p[i+k] - p[i-k]
		lo, hi = min(lo, d), max(hi, d)
	}
	span := 2 * float64(k) * c.th.Grid.Step
	c.dst.set(at+eFall, lo/span)
	c.dst.set(at+eRise, hi/span)
}

// form gives pulsation, over- and undershoot, straightness of the closed lines, clearance and the expected openings.
func (m *Measurer) form(c *throwCtx, e, at int, w *window.End) {
	comp, exp := strokeStart(e, window.Compression), strokeStart(e, window.Expansion)
	m.pulse(c, e, at+ePulseS, comp, plateauS, w.Ps)
	if w.State != window.NotDelivering {
		m.pulse(c, e, at+ePulseD, exp, plateauD, w.Pd)
	} else {
		c.dst.absent(at+ePulseD, whyNotDeliver)
	}
	c.shoot(e, at+eUndershoot, &w.W[window.SuctionOpens], w.Ps, -1)
	c.shoot(e, at+eOvershoot, &w.W[window.DischargeOpens], w.Pd, +1)
	c.expected(at+eSuctionExpected, &w.W[window.SuctionOpens])
	c.expected(at+eDischargeExpected, &w.W[window.DischargeOpens])
	for s, i := range [2]int{window.Compression: eStraightComp, window.Expansion: eStraightExp} {
		c.dst.absent(at+i, whyFewPoints)
		if r := w.Closed[s]; r.OK && r.Sigma >= 0 {
			c.dst.set(at+i, r.Sigma)
		}
	}
	m.clearance(c, e, at+eClearance, w)
}

// pulse gives the pressure's span ahead of a dead centre, as a share of the plateau.
func (m *Measurer) pulse(c *throwCtx, e, i int, centre, from, plateau float64) {
	c.dst.absent(i, whyNoPlateau)
	if !known(plateau) {
		return
	}
	if centre < from { // inside the turn, not in its padding
		centre += 360
	}
	lo, hi, ok := c.span(e, centre-from, centre-plateauGap)
	if ok {
		c.dst.set(i, (hi-lo)/plateau)
	}
}

// shoot gives how far the pressure goes beyond the plateau to open the valves: sign −1 below suction, +1 above discharge.
func (c *throwCtx) shoot(e, i int, w *window.Window, plateau, sign float64) {
	c.dst.absent(i, whyNoOpening)
	if w.State != window.Following || math.IsNaN(w.Angle) || !known(plateau) {
		return
	}
	if lo, hi, ok := c.span(e, w.Angle, w.Angle+openingDeg); ok {
		far := hi
		if sign < 0 {
			far = lo
		}
		c.dst.set(i, sign*(far/plateau-1))
	}
}

// span gives the extremes of an end's pressure between two angles of the padded turn.
func (c *throwCtx) span(e int, from, to float64) (lo, hi float64, ok bool) {
	p, g := c.th.P[e], c.th.Grid
	a, b := max(int(math.Ceil(g.Index(from))), 0), min(int(math.Floor(g.Index(to))), g.N-1)
	if a > b {
		return 0, 0, false
	}
	lo, hi = extremes(p[a : b+1])
	return lo, hi, true
}

func (c *throwCtx) expected(i int, w *window.Window) {
	if math.IsNaN(w.Expected) {
		c.dst.absent(i, whyNoPrediction)
		return
	}
	c.dst.set(i, w.Expected)
}

// clearance solves p (V_c + x)^KV = constant for V_c over the expansion, x the volume the piston has left behind:
// p^(−1/KV) over x is a straight line that meets zero at −V_c.
func (m *Measurer) clearance(c *throwCtx, e, i int, w *window.End) {
	c.dst.absent(i, whyFewPoints)
	k := c.in.Gas.KV
	r := w.Closed[window.Expansion]
	if !(k > 1) {
		c.dst.absent(i, whyGas)
		return
	}
	if !r.OK || !(w.Pd > w.Ps) {
		return
	}
	ratio := math.Log(w.Pd / w.Ps)
	m.between(c, e, r, w.Ps*math.Exp(levelLow*ratio), w.Ps*math.Exp(levelHigh*ratio))
	if len(m.x) < 6 {
		return
	}
	cyl := &c.in.Cylinder
	swept, clear := cyl.Swept(e), cyl.ClearanceVolume(e)
	ref := math.Log(w.Ps)
	for j := range m.x {
		m.x[j] = (math.Exp(m.x[j]) - clear) / swept
		m.y[j] = math.Exp((ref - m.y[j]) / k)
	}
	if l := dsp.FitLine(m.x, m.y); l.B > 0 {
		c.dst.set(i, l.A/l.B)
	}
}
