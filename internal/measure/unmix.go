package measure

import "math"

// Two events that ring into each other are unmixed as Y = a₁T₁(t−t₁) + a₂T₂(t−t₂) + B, with Y the band powers over
// time, by multiplicative updates that lower the Kullback-Leibler divergence (Lee and Seung, 2001; vibration.md
// section 2). Moments are searched about the angle that pressure gives plus the learnt lag.
const (
	searchMs     = 0.3
	searchStep   = 0.15 // ms, then half of it
	updates      = 25
	quickUpdates = 4 // while searching
	rhoSeparated = 0.2
	rhoShared    = 0.6
	leastTwice   = math.Ln2 // ln, by which the stronger must lead to be booked one-sided
	leastFit     = 0.5      // share of the power that the model must explain in place
)

// mixture is two events unmixed. NaN amplitudes: it could not be done.
type mixture struct {
	a, b   spot
	impact [2]float64 // ln, as impact_ln
	snr    [2]bool
	rho    float64
}

// share books one of two events that ring into each other as far as they can be told apart; deg is where it
// begins.
func (m *Measurer) share(c *throwCtx, s spot, at int, deg float64) Sharing {
	c.impactAbsent(at, whySharedEvent)
	perMs := 6 * c.th.RPM / 1000
	o, n := intruder(c.w, s, deg-energyMs*perMs, deg+energyMs*perMs)
	if n != 1 {
		return Shared
	}
	x := m.mixtureOf(c, s, o)
	if x == nil || !(x.rho <= rhoShared) {
		return Shared
	}
	own, other := 0, 1
	if x.b == s {
		own, other = 1, 0
	}
	ahead := x.impact[own] - x.impact[other]
	out := Separated
	if !(x.rho < rhoSeparated) {
		out = OneSided
		if math.Abs(ahead) < leastTwice {
			return Shared
		}
		if ahead < 0 {
			c.impactAbsent(at, whyWeaker)
			return out
		}
	}
	c.impactAbsent(at, whyUnmixed)
	if x.snr[own] {
		c.dst.set(at+vImpact, x.impact[own])
	} else {
		c.dst.absent(at+vImpact, whySNR)
	}
	return out
}

// mixtureOf gives the unmixing of two events, done once a turn; nil when it cannot be done.
func (m *Measurer) mixtureOf(c *throwCtx, s, o spot) *mixture {
	for i := range m.pairs {
		if p := &m.pairs[i]; p.a == s && p.b == o || p.a == o && p.b == s {
			if math.IsNaN(p.rho) {
				return nil
			}
			return p
		}
	}
	m.pairs = append(m.pairs, m.unmix(c, s, o))
	if p := &m.pairs[len(m.pairs)-1]; !math.IsNaN(p.rho) {
		return p
	}
	return nil
}

// expected is the angle at which an event's impact should begin; NaN when that has not been learnt.
func (m *Measurer) expected(c *throwCtx, s spot) float64 {
	mem, w := &m.memory[c.i].Ends[s.e][s.k], &c.w.Ends[s.e].W[s.k]
	if mem.Count < templateLeast || math.IsNaN(w.Angle) {
		return math.NaN()
	}
	return degAt(c.th, c.th.SampleAt(w.Angle)+mem.LagMs*c.th.Vib[0].Rate/1000)
}

// unmix does the work.
func (m *Measurer) unmix(c *throwCtx, s, o spot) mixture {
	out := mixture{a: s, b: o, rho: math.NaN()}
	rate := c.th.Vib[0].Rate
	perMs := rate / 1000
	var at [2]float64 // ms, the onsets expected, from the first frame's centre
	var mem [2]*EventMemory
	for i, sp := range [2]spot{s, o} {
		mem[i] = &m.memory[c.i].Ends[sp.e][sp.k]
		angle := c.w.Ends[sp.e].W[sp.k].Angle
		if math.IsNaN(angle) || mem[i].Count < templateLeast {
			return out
		}
		at[i] = c.th.SampleAt(angle)/perMs + mem[i].LagMs
	}
	// The crank-end events lie a turn away where the padded grid holds them twice.
	period := (c.th.T1 - c.th.T0) / perMs
	at[1] += period * math.Round((at[0]-at[1])/period)
	gap := math.Abs(at[0] - at[1])
	if gap > templateMs+1 {
		return out
	}
	start := min(at[0], at[1]) - leadMs - 2*hopMs
	frames := frameCount + int(math.Ceil(gap/hopMs)) + 4
	n := frames * bandCount
	m.cells = sizedTo(m.cells, n)
	first := s
	if at[1] < at[0] {
		first = o
	}
	var back [bandCount]float64
	if !m.powers(m.cells, c.th, start*perMs) || !m.backPowers(&back, c, first) {
		return out
	}
	for i := range at {
		at[i] -= start
	}
	x := &m.mix
	x.size(n)
	power := 0.0
	for i, p := range m.cells {
		x.b[i] = max(back[i%bandCount], 1e-12)
		power += p
	}
	if !(power > 0) {
		return out
	}
	for i := range at {
		x.shift(i, mem[i].Cells, at[i])
	}
	x.amp = [3]float64{power / 2, power / 2, 1}
	expected := at
	best := x.run(m.cells, quickUpdates)
	for _, step := range []float64{searchStep, searchStep, searchStep / 2} {
		for i := range at {
			for _, d := range []float64{-step, step} {
				moved := at[i] + d
				if math.Abs(moved-expected[i]) > searchMs {
					continue
				}
				amp := x.amp
				x.shift(i, mem[i].Cells, moved)
				if cost := x.run(m.cells, quickUpdates); cost < best {
					best, at[i] = cost, moved
					break
				}
				x.amp = amp
				x.shift(i, mem[i].Cells, at[i])
			}
		}
	}
	x.run(m.cells, updates)
	var off, w11, w12, w22, floor float64
	for i, y := range m.cells {
		off += math.Abs(y - x.m[i])
		w11 += x.s[0][i] * x.s[0][i] / x.m[i]
		w12 += x.s[0][i] * x.s[1][i] / x.m[i]
		w22 += x.s[1][i] * x.s[1][i] / x.m[i]
	}
	for _, b := range back {
		floor += b * frameCount
	}
	if off > (1-leastFit)*power {
		return out
	}
	out.rho = w12 / math.Sqrt(w11*w22)
	for i := range out.impact {
		out.impact[i] = math.Log(max(x.amp[i], 1e-300))/2 + mem[i].Level
		out.snr[i] = x.amp[i] > (leastSNR-1)*floor
	}
	return out
}

// mix is the model of a mixture: two shifted templates and a background, with their amplitudes.
type mix struct {
	s    [2][]float64
	b, m []float64
	amp  [3]float64
	sum  [3]float64
}

func (x *mix) size(n int) {
	x.s[0], x.s[1], x.b, x.m = sizedTo(x.s[0], n), sizedTo(x.s[1], n), sizedTo(x.b, n), sizedTo(x.m, n)
}

// shift puts a template with its onset at so many ms, linear between frames.
func (x *mix) shift(k int, cells []float64, onset float64) {
	s := x.s[k]
	clear(s)
	off := (onset - leadMs) / hopMs
	whole := math.Floor(off)
	part := off - whole
	for f := range frameCount {
		to := (f + int(whole)) * bandCount
		for b := range bandCount {
			p := cells[f*bandCount+b]
			if i := to + b; i >= 0 && i < len(s) {
				s[i] += (1 - part) * p
			}
			if i := to + bandCount + b; i >= 0 && i < len(s) {
				s[i] += part * p
			}
		}
	}
}

// run updates the amplitudes n times and gives the divergence, up to what the data alone make of it.
func (x *mix) run(y []float64, n int) float64 {
	s0, s1, b, m := x.s[0][:len(y)], x.s[1][:len(y)], x.b[:len(y)], x.m[:len(y)]
	x.sum = [3]float64{}
	for i := range y {
		x.sum[0] += s0[i]
		x.sum[1] += s1[i]
		x.sum[2] += b[i]
	}
	a0, a1, a2 := x.amp[0], x.amp[1], x.amp[2]
	for range n {
		var g0, g1, g2 float64
		for i, v := range y {
			r := v / (a0*s0[i] + a1*s1[i] + a2*b[i])
			g0 += s0[i] * r
			g1 += s1[i] * r
			g2 += b[i] * r
		}
		a0 *= g0 / max(x.sum[0], 1e-300)
		a1 *= g1 / max(x.sum[1], 1e-300)
		a2 *= g2 / x.sum[2]
	}
	x.amp = [3]float64{a0, a1, a2}
	cost := 0.0
	for i, v := range y {
		m[i] = a0*s0[i] + a1*s1[i] + a2*b[i]
		cost += m[i] - v*math.Log(m[i])
	}
	return cost
}
