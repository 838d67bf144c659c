package measure

import (
	"math"

	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// What is masked around every event of the turn, so that only quiet degrees are left. Masks follow the turn's own
// angles; one mask for a block of turns left nothing during ramps.
const (
	beforeEvent  = 2.0 // degrees
	afterEvent   = 5.0
	openingMs    = 4.0 // ms after an opening
	closingMs    = 2.5
	foreignDeg   = 1.5 // degrees around an event of another throw
	foreignMs    = 2.0
	leastUsable  = 40.0 // degrees
	adiabaticGas = 1.3  // exponent where the gas is not known: only the flow's shape depends on it
)

const (
	whyNoLeakBand = "sampling rate too low for the leak band"
	whyBusy       = "too few degrees free of valve events"
	whyNoFlow     = "no pressure difference over this path"
	whyPressures  = "both ends' pressures are needed"
	whySilent     = "no signal in the leak band"
)

// noise compares the leak band's mean square per degree, on the degrees free of events, with the flow each leak path
// would have. With S_j the nozzle flow of path j from the live pressures, ⟨·⟩ the mean over the usable degrees and
// y the mean square:
//
//	leak_noise_db = 10 ⟨w lg y⟩/⟨w⟩, w = max(0, S_j − ⟨S_j⟩)   the level where this path would be heard best
//	leak_shape    = ⟨(S_j − ⟨S_j⟩) y⟩/(σ(S_j)·⟨y⟩)             the projection of y on the path's shape
//
// The mean is that of the levels, not of the powers: a stray hit or the tail of an impact then counts as one degree of
// many. On the model a leak of one path raises the level of its own path as far as with powers, and that of the other
// path of its pair (see below) a fifth less far. Weights by 1/(flow of all paths)², which pick the dwells where other leaks are
// quiet, gain nothing over w.
//
// Of all paths, a jet on path j moves the projection on its own shape most (Cauchy–Schwarz). Weights S_j in place of
// w name the wrong one of a pair on the model. Head-end suction and
// crank-end discharge, and the other such pair, have nearly the same shape: noise names the pair.
func (m *Measurer) noise(c *throwCtx, t *turn.Turn, w window.Result, throw int) {
	why := ""
	if c.ix.path[0] < 0 && c.ix.path[2] < 0 {
		return
	}
	if why = m.quiet(c, t, w, throw); why == "" {
		why = m.hear(c)
	}
	var whys [5]string
	if why == "" {
		whys = m.flowsOf(c)
	}
	for j, at := range c.ix.path {
		if at < 0 {
			continue
		}
		reason := why
		if reason == "" {
			reason = whys[j]
		}
		if reason == "" {
			reason = m.path(c, j, at)
		}
		if reason != "" {
			c.dst.absent(at+lNoise, reason)
			c.dst.absent(at+lShape, reason)
		}
	}
}

// quiet marks the degrees of the turn near an event; masked covers 0…360°.
func (m *Measurer) quiet(c *throwCtx, t *turn.Turn, w window.Result, throw int) string {
	n := c.i1 - c.i0
	if cap(m.masked) < n {
		m.masked = make([]bool, n)
	}
	m.masked = m.masked[:n]
	clear(m.masked)
	perMs := 6 * c.th.RPM / 1000
	for e := range c.w.Ends {
		for k := range c.w.Ends[e].W {
			o := &c.w.Ends[e].W[k]
			if math.IsNaN(o.Lo) {
				if o.State == window.Lost && !c.w.Ends[e].NotPresent {
					return o.Why
				}
				continue
			}
			lo, hi, ms := o.Lo, o.Hi, openingMs
			closing, dc := deadCentre(e, window.Event(k))
			if closing {
				ms = closingMs
			}
			if a := o.Angle; !math.IsNaN(a) {
				lo, hi = a-beforeEvent, a+afterEvent
				if closing { // at full load the pressure shows the closing poorly: from the one to the other
					lo, hi = min(a, dc)-beforeEvent, max(a, dc)+afterEvent
				}
			}
			m.mask(c, lo, hi+ms*perMs)
		}
	}
	for u := range w.Throws {
		if u == throw || u >= len(t.Throws) || len(t.Throws[u].Pos) < 2 {
			continue
		}
		for e := range w.Throws[u].Ends {
			for k := range w.Throws[u].Ends[e].W {
				a := w.Throws[u].Ends[e].W[k].Angle
				if math.IsNaN(a) {
					continue
				}
				// The same instant on this throw's scale; a turn is even enough for a mask.
				a = 360 * (t.Throws[u].SampleAt(a) - c.th.T0) / (c.th.T1 - c.th.T0)
				m.mask(c, a-foreignDeg, a+foreignDeg+foreignMs*perMs)
			}
		}
	}
	free := 0
	for _, b := range m.masked {
		if !b {
			free++
		}
	}
	if float64(free)*c.th.Grid.Step < leastUsable {
		return whyBusy
	}
	return ""
}

// deadCentre tells whether an event is a closing, and the dead centre it belongs to.
func deadCentre(e int, k window.Event) (closing bool, deg float64) {
	switch k {
	case window.SuctionCloses:
		return true, strokeStart(e, window.Compression)
	case window.DischargeCloses:
		return true, strokeStart(e, window.Expansion)
	}
	return false, math.NaN()
}

// mask marks a stretch of the turn, which may pass its end.
func (m *Measurer) mask(c *throwCtx, lo, hi float64) {
	n := len(m.masked)
	if !(hi-lo < 360) {
		lo, hi = 0, 360
	}
	a, b := int(math.Floor(lo/c.th.Grid.Step)), int(math.Ceil(hi/c.th.Grid.Step))
	for i := a; i <= b; i++ {
		m.masked[((i%n)+n)%n] = true
	}
}

// hear collects y, the leak band's mean square on the usable degrees, over all accelerometers of the throw.
func (m *Measurer) hear(c *throwCtx) string {
	if len(c.th.Vib) == 0 {
		return whyNoVibration
	}
	m.y = m.y[:0]
	for i, b := range m.masked {
		if b {
			continue
		}
		sum := 0.0
		for v := range c.th.Vib {
			vib := &c.th.Vib[v]
			if vib.Suspect != "" {
				return vib.Suspect
			}
			if len(vib.Leak) != c.th.Grid.N {
				return whyNoLeakBand
			}
			sum += vib.Leak[c.i0+i]
		}
		m.y = append(m.y, sum)
	}
	return ""
}

// flowsOf lists the flow that each path would have on the usable degrees, up to one constant; what has none is empty, with
// the reason.
func (m *Measurer) flowsOf(c *throwCtx) (why [5]string) {
	k := c.in.Gas.KV
	if !(k > 1) {
		k = adiabaticGas
	}
	critical := math.Pow(2/(k+1), k/(k-1))
	for j := range m.flow {
		m.flow[j] = m.flow[j][:0]
		if why[j] = m.flowOf(c, j, critical); why[j] != "" {
			m.flow[j] = m.flow[j][:0]
		}
	}
	return why
}

func (m *Measurer) flowOf(c *throwCtx, j int, critical float64) string {
	e, rings := j/2, j == 4
	he, ce := c.th.P[0], c.th.P[1]
	if (rings && (he == nil || ce == nil)) || (!rings && c.th.P[e] == nil) {
		return whyPressures
	}
	line := math.NaN()
	if !rings {
		w := &c.w.Ends[e]
		line = [2]float64{w.Ps, w.Pd}[j%2]
		if w.State == window.Idle && j%2 == 1 || !known(line) {
			return whyNoPlateau
		}
	}
	for i, b := range m.masked {
		if b {
			continue
		}
		up, down := 0.0, 0.0
		switch i += c.i0; {
		case rings:
			up, down = max(he[i], ce[i]), min(he[i], ce[i])
		case j%2 == 0:
			up, down = c.th.P[e][i], line
		default:
			up, down = line, c.th.P[e][i]
		}
		m.flow[j] = append(m.flow[j], jet(up, down, critical))
	}
	return ""
}

// path weighs y with the flow of one path.
func (m *Measurer) path(c *throwCtx, j, at int) (why string) {
	x := m.flow[j]
	n := float64(len(x))
	var s, ss, y, sy float64
	for i, v := range x {
		s += v
		ss += v * v
		y += m.y[i]
		sy += v * m.y[i]
	}
	s, y = s/n, y/n
	sigma := math.Sqrt(ss/n - s*s)
	if !(sigma > 0) {
		return whyNoFlow
	}
	var w, wy float64
	for i, v := range x {
		if v > s {
			w += v - s
			wy += (v - s) * math.Log(m.y[i])
		}
	}
	if !(y > 0) || math.IsInf(wy, 0) || math.IsNaN(wy) {
		return whySilent
	}
	c.dst.set(at+lNoise, 10/math.Ln10*wy/w)
	c.dst.set(at+lShape, (sy/n-s*y)/(sigma*y))
	return ""
}

// jet is the flow of a nozzle of unit area from one pressure to a lower one, up to a constant: the upstream pressure
// times Saint-Venant and Wantzel's function, here by the ellipse that approximates it to about 1 %; 0 upstream.
func jet(up, down, critical float64) float64 {
	r := down / up
	switch {
	case !(r < 1):
		return 0
	case r <= critical:
		return up
	}
	q := (r - critical) / (1 - critical)
	return up * math.Sqrt(1-q*q)
}
