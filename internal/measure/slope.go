package measure

import (
	"math"

	"lapwing/internal/window"
)

// An opening's stop impact follows the pressure slope at opening (one third power without springs). The exponent is
// fixed at the prior of vibration.md section 1, where fits gave 0.32 to 0.68 on 11 of 12 valves and a ridge toward
// (0.45, 0, 0) beat free fits; what speed and line pressure still do is the duty model's.
const (
	slopeExponent = 0.45
	slopeFrom     = 7.0 // degrees before the opening
	slopeTo       = 1.5
	leastSlope    = 4 // grid points
)

// openingSlope fits the cylinder pressure's slope ahead of an opening, in time.
func (c *throwCtx) openingSlope(e int, k window.Event, at int) {
	if !opening(k) {
		return
	}
	c.dst.absent(at+vSlope, whyNoSlope)
	a := c.w.Ends[e].W[k].Angle
	p := c.th.P[e]
	if p == nil || c.th.Bad[e] != "" || math.IsNaN(a) {
		return
	}
	g := c.th.Grid
	i0, i1 := max(int(math.Ceil(g.Index(a-slopeFrom))), 0), min(int(math.Floor(g.Index(a-slopeTo))), g.N-1)
	n := float64(i1 - i0 + 1)
	if n < leastSlope || len(c.th.Vib) == 0 {
		return
	}
	var st, sp float64
	for i := i0; i <= i1; i++ {
		st += c.th.Pos[i] - c.th.Pos[i0]
		sp += p[i]
	}
	st, sp = st/n, sp/n
	var tt, tp float64
	for i := i0; i <= i1; i++ {
		t := c.th.Pos[i] - c.th.Pos[i0] - st
		tt += t * t
		tp += t * (p[i] - sp)
	}
	if slope := math.Abs(tp / tt * c.th.Vib[0].Rate); slope > 0 && !math.IsInf(slope, 0) {
		c.dst.set(at+vSlope, slope)
	}
}

// normalise takes the slope's share out of an opening's impact.
func (c *throwCtx) normalise(k window.Event, at int) {
	if !opening(k) {
		return
	}
	switch impact, slope := c.dst.V[at+vImpact], c.dst.V[at+vSlope]; {
	case math.IsNaN(impact):
		c.dst.absent(at+vNorm, c.dst.Why[at+vImpact])
	case math.IsNaN(slope):
		c.dst.absent(at+vNorm, c.dst.Why[at+vSlope])
	default:
		c.dst.set(at+vNorm, impact-slopeExponent*math.Log(slope*1e-5))
	}
}
