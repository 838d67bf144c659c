package measure

import (
	"lapwing/internal/crank"
)

// loadsOf gives the rod loads of a throw and their reversal. An end that does no work by design is held at suction
// pressure or at the atmosphere, as the machine is built; a working end without a transducer leaves the loads unknown.
func (m *Measurer) loadsOf(c *throwCtx) {
	n := c.i1 - c.i0
	t := &m.cfg.Machine.Throws[c.i]
	var p [2]crank.Pressure
	for e := range p {
		switch {
		case c.th.P[e] != nil && c.th.Bad[e] == "":
			p[e].P = c.th.P[e][c.i0:c.i1]
		case t.Ends[e].Blind && !t.BlindAtSuction:
			p[e].Held = m.cfg.Atmosphere
		case t.Ends[e].Blind && known(c.in.LinePs):
			p[e].Held = c.in.LinePs
		case t.Ends[e].Blind && known(c.w.Ends[1-e].Ps):
			p[e].Held = c.w.Ends[1-e].Ps
		default:
			m.noLoads(c, whyOtherEnd)
			return
		}
	}
	g := c.th.Grid
	if len(c.th.Omega) != g.N {
		m.noLoads(c, whySpeed)
		return
	}
	err := c.in.Cylinder.RodLoads(&m.loads, p[crank.HE], p[crank.CE], g.At(c.i0), g.Step, n, m.cfg.Atmosphere, c.th.Omega[c.i0:c.i1])
	if err != nil {
		m.noLoads(c, whySpeed)
		return
	}
	at := c.ix.throw
	lo, hi := extremes(m.loads.Pin)
	c.dst.set(at+tRodMax, hi)
	c.dst.set(at+tRodMin, lo)
	lo, hi = extremes(m.loads.Gas)
	c.dst.set(at+tGasMax, hi)
	c.dst.set(at+tGasMin, lo)
	r := crank.Reverse(m.loads.Pin)
	c.dst.set(at+tReversal, r.Longest)
	c.dst.set(at+tReversalShare, r.Share)
}

func (m *Measurer) noLoads(c *throwCtx, why string) {
	for _, k := range []int{tRodMax, tRodMin, tGasMax, tGasMin, tReversal, tReversalShare} {
		c.dst.absent(c.ix.throw+k, why)
	}
}

func extremes(x []float64) (lo, hi float64) {
	lo, hi = x[0], x[0]
	for _, v := range x {
		lo, hi = min(lo, v), max(hi, v)
	}
	return lo, hi
}
