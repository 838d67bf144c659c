package measure

import (
	"math"

	"lapwing/internal/leak"
	"lapwing/internal/window"
)

// leaks runs the leak fit on the turn's closed strokes and hands its numbers on, signed: clipping is for display.
func (m *Measurer) leaks(c *throwCtx) {
	in := leak.Input{Cylinder: c.in.Cylinder, Lo: c.th.Grid.Lo, Step: c.th.Grid.Step, V: c.v, K: c.in.Gas.KV,
		RZ: c.in.Gas.R * (c.in.Gas.Zs + c.in.Gas.Zd) / 2, Ts: c.in.Ts, Td: c.in.Td,
		Ps: c.in.LinePs, Pd: c.in.LinePd, Omega: c.th.Omega}
	ps, pd, ends := 0.0, 0.0, 0.0
	for e := range in.P {
		w := &c.w.Ends[e]
		if c.th.P[e] == nil || w.NotPresent || c.th.Bad[e] != "" || !allPositive(c.th.P[e]) {
			continue
		}
		in.P[e] = c.th.P[e]
		in.Late[e] = late(&w.W[window.SuctionCloses], strokeStart(e, window.Compression))
		if w.State == window.Idle || w.State == window.NotDelivering {
			continue
		}
		for s, r := range w.Closed {
			if r.OK {
				in.Closed[e][s] = leak.Range{From: r.I0, To: r.I1}
			}
		}
		ps, pd, ends = ps+w.Ps, pd+w.Pd, ends+1
	}
	if !known(in.Ps) {
		in.Ps = ps / ends
	}
	if !known(in.Pd) {
		in.Pd = pd / ends
	}
	why := ""
	switch {
	case ends == 0:
		why = whyFewPoints
	case !known(in.Ts, in.RZ) || !(in.K > 1):
		why = whyGas
	}
	if !known(in.Td) {
		in.Td = in.Ts * math.Pow(in.Pd/in.Ps, (c.in.Gas.KT-1)/c.in.Gas.KT)
	}
	if why != "" {
		m.noFit(c, why)
		return
	}
	fit := m.fitters[c.i].Fit(&in)
	if !fit.Valid() {
		m.noFit(c, fit.Reason)
		return
	}
	for j, at := range c.ix.path {
		if at < 0 {
			continue
		}
		if math.IsNaN(fit.Area[j]) {
			c.dst.absent(at+lArea, fit.Why[j])
			c.dst.absent(at+lPercent, fit.Why[j])
			continue
		}
		c.dst.set(at+lArea, fit.Area[j])
		if m := c.throughput(j); m > 0 {
			c.dst.set(at+lPercent, fit.Mass[j]/m)
		} else {
			c.dst.absent(at+lPercent, whyThroughput)
		}
	}
	c.dst.set(c.ix.throw+tLeakPhase, fit.Phase)
	c.dst.set(c.ix.throw+tLeakRMS, fit.RMS)
	for e, at := range c.ix.end {
		if at < 0 {
			continue
		}
		if math.IsNaN(fit.Zero[e]) {
			c.dst.absent(at+eLeakZero, whyFewPoints)
			continue
		}
		c.dst.set(at+eLeakZero, fit.Zero[e])
	}
}

// throughput gives the kilograms that a turn delivers through the end of a path (rings: through both ends); NaN when it
// is not known. By suction: the discharge thermometer lags behind a change of load, the suction line hardly moves.
func (c *throwCtx) throughput(path int) float64 {
	if path != leak.RG {
		return c.dst.V[c.ix.end[path/2]+eCapS] / c.hz
	}
	return (c.dst.V[c.ix.end[0]+eCapS] + c.dst.V[c.ix.end[1]+eCapS]) / c.hz
}

func (m *Measurer) noFit(c *throwCtx, why string) {
	for _, at := range c.ix.path {
		if at >= 0 {
			c.dst.absent(at+lArea, why)
			c.dst.absent(at+lPercent, why)
		}
	}
	c.dst.absent(c.ix.throw+tLeakPhase, why)
	c.dst.absent(c.ix.throw+tLeakRMS, why)
	for _, at := range c.ix.end {
		if at >= 0 {
			c.dst.absent(at+eLeakZero, why)
		}
	}
}
