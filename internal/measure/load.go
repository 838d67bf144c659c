package measure

import (
	"math"

	"lapwing/internal/crank"
)

// calmDeg is half the stretch over which the pin load is smoothed before its changes of sign are placed. Where the load
// lies near zero for long, transmitter noise alone cuts a stay in two: at ratio 1.6 on a modelled hydrogen machine a
// turn was 1 to 2.5° off without it.
const calmDeg = 3.0

const whySigns = "the pin load does not change its sign just once each way"

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
	err := c.in.Cylinder.RodLoads(&m.loads, &m.motions[c.i], p[crank.HE], p[crank.CE], g.At(c.i0), g.Step, n, m.cfg.Atmosphere, c.th.Omega[c.i0:c.i1])
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
	m.shares(c)
	c.dst.set(at+tReversalShare, crank.Reverse(m.loads.Pin).Share)
	smooth := m.smooth(m.loads.Pin, int(math.Round(calmDeg/g.Step)))
	reversal := crank.Reverse(smooth).Longest
	c.dst.set(at+tReversal, reversal)
	c.dst.set(at+tReversalU, m.reversalU(c, p, smooth, reversal))
	pulls, pushes, ok := signChanges(smooth, g.Step)
	c.dst.absent(at+tPinPulls, whySigns)
	c.dst.absent(at+tPinPushes, whySigns)
	if ok {
		c.dst.set(at+tPinPulls, g.At(c.i0)+pulls)
		c.dst.set(at+tPinPushes, g.At(c.i0)+pushes)
	}
}

// Errors of an installation that reversal is tried with, one standard deviation each.
const (
	zeroShare = .003 // of suction pressure
	gainShare = .002 // of the reading
)

// reversalU gives what transmitters and the angle scale leave open in the reversal, 95 %: it is taken anew with each of
// their errors in turn, to either side. Where the pin load lies near zero for long, or two stays nearly meet, it is much.
func (m *Measurer) reversalU(c *throwCtx, p [2]crank.Pressure, load []float64, reversal float64) float64 {
	sum, n := 0.0, len(load)
	m.tried = append(m.tried[:0], load...)
	try := func(off func(i int) float64) {
		most := 0.0
		for _, sign := range [2]float64{-1, 1} {
			for i := range load {
				m.tried[i] = load[i] + sign*off(i)
			}
			most = max(most, math.Abs(crank.Reverse(m.tried).Longest-reversal))
		}
		sum += most * most
	}
	for e := range p {
		if p[e].P == nil {
			continue
		}
		area := c.in.Cylinder.Area(e)
		if ps := c.w.Ends[e].Ps; known(ps) {
			try(func(int) float64 { return zeroShare * area * ps })
		}
		try(func(i int) float64 { return gainShare * area * p[e].P[i] })
	}
	gas, late := m.loads.Gas, c.th.U/2/(2*c.th.Grid.Step)
	try(func(i int) float64 { return late * (gas[(i+1)%n] - gas[(i+n-1)%n]) })
	return 2 * math.Sqrt(sum)
}

// shares gives the load in the piston rod, and the pin's as shares of the rated loads.
func (m *Measurer) shares(c *throwCtx) {
	at := c.ix.throw
	lo, hi := extremes(m.loads.Rod)
	c.dst.set(at+tPistonMax, hi)
	c.dst.set(at+tPistonMin, lo)
	c.dst.absent(at+tRatedComp, whyRated)
	c.dst.absent(at+tRatedTens, whyRated)
	if rated := m.cfg.Machine.RatedCompression; rated > 0 {
		c.dst.set(at+tRatedComp, max(0, c.dst.V[at+tRodMax])/rated)
	}
	if rated := m.cfg.Machine.RatedTension; rated > 0 {
		c.dst.set(at+tRatedTens, max(0, -c.dst.V[at+tRodMin])/rated)
	}
}

func (m *Measurer) noLoads(c *throwCtx, why string) {
	for _, k := range []int{tRodMax, tRodMin, tGasMax, tGasMin, tReversal, tReversalU, tReversalShare, tPinPulls, tPinPushes,
		tPistonMax, tPistonMin, tRatedComp, tRatedTens} {
		c.dst.absent(c.ix.throw+k, why)
	}
}

// smooth fits a parabola to 2k+1 points around each point of a load over one turn, the turn closed to a ring (Savitzky
// and Golay's weights): a short reversal keeps its length, which a mean would cut.
func (m *Measurer) smooth(load []float64, k int) []float64 {
	n := len(load)
	if 2*k+1 >= n || k < 2 {
		return load
	}
	m.y = m.y[:0]
	scale := 3 / float64((2*k-1)*(2*k+1)*(2*k+3))
	for j := range k + 1 {
		m.y = append(m.y, scale*float64(3*k*k+3*k-1-5*j*j))
	}
	m.x = m.x[:0]
	for i := range load {
		sum := m.y[0] * load[i]
		if i >= k && i+k < n {
			for j := 1; j <= k; j++ {
				sum += m.y[j] * (load[i-j] + load[i+j])
			}
		} else {
			for j := 1; j <= k; j++ {
				sum += m.y[j] * (load[(i-j+n)%n] + load[(i+j)%n])
			}
		}
		m.x = append(m.x, sum)
	}
	return m.x
}

func extremes(x []float64) (lo, hi float64) {
	lo, hi = x[0], x[0]
	for _, v := range x {
		lo, hi = min(lo, v), max(hi, v)
	}
	return lo, hi
}

// signChanges gives the degrees at which a load over one turn goes negative and positive; ok when it does each once.
func signChanges(load []float64, step float64) (falls, rises float64, ok bool) {
	nf, nr := 0, 0
	for i, a := range load {
		b := load[(i+1)%len(load)]
		switch {
		case a > 0 && b <= 0:
			falls = step * (float64(i) + a/(a-b))
			nf++
		case a <= 0 && b > 0:
			rises = step * (float64(i) + a/(a-b))
			nr++
		}
	}
	return falls, rises, nf == 1 && nr == 1
}
