package measure

import (
	"math"

	"lapwing/internal/dsp"
	"lapwing/internal/window"
)

// Levels between which exponents are taken, as shares of ln(pd/ps): clear of both valves.
const (
	levelLow  = 0.08
	levelHigh = 0.92
)

// lateFrom is the closing, in degrees after the dead centre, from which suction closing counts as late. Below it the
// pressure shows the closing poorly.
const lateFrom = 20.0

// known reports whether numbers that must be positive are known.
func known(x ...float64) bool {
	for _, v := range x {
		if !(v > 0) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

// strokeStart is the angle at which an end's stroke begins: the head end expands from 0°, the crank end from 180°.
func strokeStart(end, stroke int) float64 {
	if (stroke == window.Compression) == (end == 0) {
		return 180
	}
	return 0
}

// end measures one end.
func (m *Measurer) end(c *throwCtx, e int) {
	at := c.ix.end[e]
	if at < 0 {
		return
	}
	w := &c.w.Ends[e]
	why := w.W[window.SuctionOpens].Why
	for k := range endCount {
		c.dst.absent(at+k, why)
	}
	if w.NotPresent || c.th.P[e] == nil || c.th.Bad[e] != "" {
		return
	}
	m.cycle(c, e, at)
	if !allPositive(c.th.P[e]) { // what follows takes logarithms
		return
	}
	if w.State == window.Idle {
		c.dst.set(at+ePs, w.Ps)
		return
	}
	m.levels(c, e, at, w)
	m.angles(c, at, w)
	m.exponents(c, e, at, w)
	m.losses(c, e, at, w)
	m.flows(c, e, at, w)
	m.form(c, e, at, w)
}

func allPositive(p []float64) bool {
	for _, v := range p {
		if !(v > 0) {
			return false
		}
	}
	return true
}

// cycle gives what needs no event: extremes, work, power and mean effective pressure over 0…360°. The work is
// −∮ p dV by the trapezoid rule, positive for work done on the gas.
func (m *Measurer) cycle(c *throwCtx, e, at int) {
	p, v := c.th.P[e], c.v[e]
	lo, hi := p[c.i0], p[c.i0]
	work, lag := 0.0, 0.0
	for i := c.i0; i < c.i1; i++ {
		lo, hi = min(lo, p[i]), max(hi, p[i])
		dv := v[i+1] - v[i]
		work -= (p[i] + p[i+1]) / 2 * dv
		lag -= (p[i-1] + p[i]) / 2 * dv
	}
	c.dst.set(at+ePMin, lo)
	c.dst.set(at+ePMax, hi)
	c.dst.set(at+eWork, work)
	c.dst.set(at+ePower, work*c.hz)
	c.dst.set(at+eMep, work/c.in.Cylinder.Swept(e))
	if work > 0 {
		c.dst.set(at+ePowerU, math.Abs(lag-work)/c.th.Grid.Step*c.th.U/work)
	} else {
		c.dst.absent(at+ePowerU, whyNoWork)
	}
	m.steep(c, e, at)
}

// levels gives plateaus, ratios and the temperatures that follow from them.
func (m *Measurer) levels(c *throwCtx, e, at int, w *window.End) {
	in := c.in
	c.dst.set(at+ePs, w.Ps)
	c.dst.absent(at+eRatioLine, whyLines)
	if known(in.LinePs, in.LinePd) {
		c.dst.set(at+eRatioLine, in.LinePd/in.LinePs)
	}
	for _, k := range []int{ePd, eRatio, eTAdiabatic, eTExcess, eTDischarge} {
		c.dst.absent(at+k, whyNotDeliver)
	}
	if w.State == window.NotDelivering {
		return
	}
	c.dst.set(at+ePd, w.Pd)
	c.dst.set(at+eRatio, w.Pd/w.Ps)
	c.dst.absent(at+eTDischarge, whyNoDischargeT)
	if known(in.Td) {
		c.dst.set(at+eTDischarge, in.Td)
	}
	c.dst.absent(at+eTAdiabatic, whyGas)
	c.dst.absent(at+eTExcess, whyGas)
	if t2 := adiabatic(in, w); known(t2) {
		c.dst.set(at+eTAdiabatic, t2)
		c.dst.absent(at+eTExcess, whyNoDischargeT)
		if known(in.Td) {
			c.dst.set(at+eTExcess, in.Td-t2)
		}
	}
}

// adiabatic is the discharge temperature by the temperature exponent over the end's own plateaus, K; NaN unknown.
func adiabatic(in *Input, w *window.End) float64 {
	if !known(in.Ts, in.Gas.KT, w.Ps, w.Pd) {
		return math.NaN()
	}
	return in.Ts * math.Pow(w.Pd/w.Ps, (in.Gas.KT-1)/in.Gas.KT)
}

// angles hands on what the windows found.
func (m *Measurer) angles(c *throwCtx, at int, w *window.End) {
	for k, i := range [window.Events]int{
		window.DischargeCloses: eDischargeCloses, window.SuctionOpens: eSuctionOpens,
		window.SuctionCloses: eSuctionCloses, window.DischargeOpens: eDischargeOpens,
	} {
		if math.IsNaN(w.W[k].Angle) {
			c.dst.absent(at+i, w.W[k].Why)
			continue
		}
		c.dst.set(at+i, w.W[k].Angle)
	}
	m.late(c, at+eSuctionLate, &w.W[window.SuctionOpens])
	m.late(c, at+eDischargeLate, &w.W[window.DischargeOpens])
}

func (m *Measurer) late(c *throwCtx, i int, w *window.Window) {
	switch {
	case w.State != window.Following:
		c.dst.absent(i, w.Why)
	case math.IsNaN(w.Thermo - w.Expected):
		c.dst.absent(i, whyNoPrediction)
	default:
		c.dst.set(i, w.Thermo-w.Expected)
	}
}

// exponents fits −d ln p/d ln V to the four halves of the closed strokes, split at √(ps·pd), and reads the apparent
// gain of mass off Y = ln p + k ln V: Δm/m = ΔY/k, between the first and the last tenth of the stroke.
func (m *Measurer) exponents(c *throwCtx, e, at int, w *window.End) {
	ratio := math.Log(w.Pd / w.Ps)
	low, high := w.Ps*math.Exp(levelLow*ratio), w.Ps*math.Exp(levelHigh*ratio)
	mid := math.Sqrt(w.Ps * w.Pd)
	for s, f := range [2]struct{ low, lowSE, high, highSE, mass int }{
		window.Compression: {eNCompEarly, eNCompEarlySE, eNCompLate, eNCompLateSE, eMassComp},
		window.Expansion:   {eNExpLate, eNExpLateSE, eNExpEarly, eNExpEarlySE, eMassExp},
	} {
		r := w.Closed[s]
		if !r.OK || !(ratio > 0) {
			for _, i := range []int{f.low, f.lowSE, f.high, f.highSE, f.mass} {
				c.dst.absent(at+i, whyFewPoints)
			}
			continue
		}
		m.exponent(c, e, r, low, mid, at+f.low, at+f.lowSE)
		m.exponent(c, e, r, mid, high, at+f.high, at+f.highSE)
		m.mass(c, e, r, low, high, at+f.mass)
	}
}

// between collects ln V and ln p of a run's points between two pressures.
func (m *Measurer) between(c *throwCtx, e int, r window.Run, low, high float64) {
	m.x, m.y = m.x[:0], m.y[:0]
	for i := r.I0; i < r.I1; i++ {
		if p := c.th.P[e][i]; p >= low && p <= high {
			m.x = append(m.x, c.v[e][i])
			m.y = append(m.y, p)
		}
	}
	dsp.Logs(m.x, m.x)
	dsp.Logs(m.y, m.y)
}

func (m *Measurer) exponent(c *throwCtx, e int, r window.Run, low, high float64, n, se int) {
	m.between(c, e, r, low, high)
	if len(m.x) < 6 {
		c.dst.absent(n, whyFewPoints)
		c.dst.absent(se, whyFewPoints)
		return
	}
	l := dsp.FitLine(m.x, m.y)
	c.dst.set(n, -l.B)
	c.dst.set(se, l.SE)
}

func (m *Measurer) mass(c *throwCtx, e int, r window.Run, low, high float64, i int) {
	k := c.in.Gas.KV
	if !(k > 1) {
		c.dst.absent(i, whyGas)
		return
	}
	m.between(c, e, r, low, high)
	n := len(m.x)
	tenth := max(3, n/10)
	if n < 4*tenth {
		c.dst.absent(i, whyFewPoints)
		return
	}
	first, last := 0.0, 0.0
	for j := range tenth {
		first += m.y[j] + k*m.x[j]
		last += m.y[n-1-j] + k*m.x[n-1-j]
	}
	c.dst.set(i, (last-first)/float64(tenth)/k)
}

// losses gives the power lost in the valves: the area between the cylinder's and the line's pressure (the plateau
// where the line is not known) from the opening to the dead centre, and on to a late suction closing.
func (m *Measurer) losses(c *throwCtx, e, at int, w *window.End) {
	refS, refD := w.Ps, w.Pd
	if known(c.in.LinePs) {
		refS = c.in.LinePs
	}
	if known(c.in.LinePd) {
		refD = c.in.LinePd
	}
	comp, exp := strokeStart(e, window.Compression), strokeStart(e, window.Expansion)
	if from := opened(&w.W[window.SuctionOpens]); !math.IsNaN(from) {
		j := m.area(c, e, refS, from, exp+180)
		if late := w.W[window.SuctionCloses].Angle; late > comp+lateFrom {
			j += m.area(c, e, refS, comp, late)
		}
		c.dst.set(at+eSuctionLoss, j*c.hz)
	} else {
		c.dst.absent(at+eSuctionLoss, w.W[window.SuctionOpens].Why)
	}
	if from := opened(&w.W[window.DischargeOpens]); !math.IsNaN(from) {
		c.dst.set(at+eDischargeLoss, m.area(c, e, refD, from, comp+180)*c.hz)
	} else {
		c.dst.absent(at+eDischargeLoss, w.W[window.DischargeOpens].Why)
	}
}

// opened is the best angle of an opening that was found: where the closed line meets the plateau, else the departure.
func opened(w *window.Window) float64 {
	if w.State != window.Following || math.IsNaN(w.Thermo) {
		return w.Angle
	}
	return w.Thermo
}

// area is ∫ (ref − p) dV between two angles, J, by the trapezoid rule on whole grid steps.
func (m *Measurer) area(c *throwCtx, e int, ref, from, to float64) float64 {
	p, v, g := c.th.P[e], c.v[e], c.th.Grid
	a, b := max(int(math.Ceil(g.Index(from)-1e-9)), 0), min(int(math.Floor(g.Index(to)+1e-9)), g.N-1)
	sum := 0.0
	for i := a; i < b; i++ {
		sum += (ref - (p[i]+p[i+1])/2) * (v[i+1] - v[i])
	}
	return sum
}

// flows gives volumetric efficiencies, capacities and their ratio.
//
//	VE_s = (V_trapped − V_opens)/V_swept
//	VE_d = (V_opens − V_clearance)/V_swept
//	m_s = VE_s·V_swept·ps/(Zs R Ts)·n     m_d = VE_d·V_swept·pd/(Zd R Td)·n
//
// V_trapped is the volume at which the compression line meets the suction plateau. It needs no closing angle, which the
// pressure shows poorly at full load, and holds for valves that close early, at the dead centre or late: with the dead
// centre's volume a healthy machine under late closing reads as leaking. On the model it brings the healthy balance
// from 0.979–0.997 (dead centre) to 0.989–0.997 over ratios 1.8–3.6 and 500–1000 rpm at full load.
//
// The balance takes the adiabatic discharge temperature for Td: the measured one lags a load change by minutes, and
// its excess is a feature of its own.
func (m *Measurer) flows(c *throwCtx, e, at int, w *window.End) {
	cyl, in, g := &c.in.Cylinder, c.in, &c.in.Gas
	swept, clear := cyl.Swept(e), cyl.ClearanceVolume(e)
	s, d := &w.W[window.SuctionOpens], &w.W[window.DischargeOpens]
	veS, veD := math.NaN(), math.NaN()
	if from, full := opened(s), w.Trapped[window.Compression]; math.IsNaN(from) {
		c.dst.absent(at+eVeS, s.Why)
		c.dst.absent(at+eVeSU, s.Why)
	} else if math.IsNaN(full) { // the dead centre's would be up to twice too much under late closing
		c.dst.absent(at+eVeS, whyTrapped)
		c.dst.absent(at+eVeSU, whyTrapped)
	} else {
		veS = (full - cyl.Volume(e, from)) / swept
		c.dst.set(at+eVeS, veS)
		c.dst.set(at+eVeSU, c.openingShare(e, from))
	}
	if from := opened(d); math.IsNaN(from) {
		c.dst.absent(at+eVeD, d.Why)
		c.dst.absent(at+eVeDU, d.Why)
	} else {
		veD = (cyl.Volume(e, from) - clear) / swept
		c.dst.set(at+eVeD, veD)
		c.dst.set(at+eVeDU, c.openingShare(e, from))
	}

	c.dst.absent(at+eCapS, c.dst.Why[at+eVeS])
	c.dst.absent(at+eCapD, c.dst.Why[at+eVeD])
	c.dst.absent(at+eBalance, whyGas)
	ms, mdAd := math.NaN(), math.NaN()
	if !math.IsNaN(veS) {
		c.dst.absent(at+eCapS, whyGas)
		if known(g.R, g.Zs, in.Ts) {
			ms = veS * swept * w.Ps / (g.Zs * g.R * in.Ts)
			c.dst.set(at+eCapS, ms*c.hz)
		}
	}
	if !math.IsNaN(veD) {
		c.dst.absent(at+eCapD, whyGas)
		if known(g.R, g.Zd) {
			ad := adiabatic(in, w)
			mdAd = veD * swept * w.Pd / (g.Zd * g.R * ad)
			md := mdAd
			if known(in.Td) {
				md = veD * swept * w.Pd / (g.Zd * g.R * in.Td)
			}
			if !math.IsNaN(md) {
				c.dst.set(at+eCapD, md*c.hz)
			}
		}
	}
	switch {
	case math.IsNaN(veS) || math.IsNaN(veD):
		c.dst.absent(at+eBalance, whyPartUnknown)
	case !math.IsNaN(ms / mdAd):
		c.dst.set(at+eBalance, ms/mdAd)
	}
}

// late reports whether the suction closing is a late one: as found, or, where it was not, as its window is held.
func late(w *window.Window, deadCentre float64) bool {
	at := w.Angle
	if math.IsNaN(at) && w.State == window.Holding {
		at = w.Lo
	}
	return at > deadCentre+lateFrom
}
