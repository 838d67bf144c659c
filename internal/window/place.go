package window

import (
	"math"
	"slices"

	"lapwing/internal/turn"
)

// learn books the burst of each opening that stands alone to its valve's impact lag.
func (t *Tracker) learn(th *throw, tt *turn.Throw) {
	m := 6 * tt.RPM / 1000 // degrees per ms
	for e := range th.now {
		for s := range th.now[e].open {
			at := th.now[e].at[s]
			if math.IsNaN(at) || at != th.now[e].open[s] { // held, not found
				continue
			}
			lo, hi := at-lead-tt.U, at+searchDeg+searchMs*m+tt.U
			other := &th.now[1-e]
			if other.working && (others(other, 1-e, lo-3*m, hi)) {
				continue
			}
			if peak, ok := burst(tt, lo, hi); ok {
				th.memory[e].open[s].lag.push((peak-at)/m, lagTurns)
			}
		}
	}
}

// others reports whether the other end of the cylinder has an event between two angles.
func others(see *sight, e int, lo, hi float64) bool {
	for s := range see.at {
		if within(see.at[s], lo, hi) {
			return true
		}
		c := strokeStart(e, s)
		if within(c, lo, hi) || within(c+see.close[s], lo, hi) {
			return true
		}
	}
	return false
}

// within reports whether an angle, or its repetition a turn away, lies between two.
func within(at, lo, hi float64) bool {
	return (at >= lo && at <= hi) || (at+360 >= lo && at+360 <= hi) || (at-360 >= lo && at-360 <= hi)
}

// burst gives the angle of the largest peak between two angles over all sound accelerometers; false when none
// stands out of the background before it.
func burst(tt *turn.Throw, lo, hi float64) (float64, bool) {
	g := tt.Grid
	a, b := max(int(math.Ceil(g.Index(lo))), 0), min(int(g.Index(hi)), g.N-1)
	back := max(int(g.Index(lo-backDeg)), 0)
	best, at, found := 0.0, 0, false
	for v := range tt.Vib {
		vib := &tt.Vib[v]
		if vib.Suspect != "" || len(vib.Peak) != g.N || len(vib.RMS) != g.N || a-back < 2 {
			continue
		}
		noise := 0.0
		for i := back; i < a; i++ {
			noise += vib.RMS[i] * vib.RMS[i]
		}
		noise = math.Sqrt(noise / float64(a-back))
		for i := a; i <= b; i++ {
			if p := vib.Peak[i]; p > best && p > burstRatio*noise {
				best, at, found = p, i, true
			}
		}
	}
	return g.At(at), found
}

// place sets the limits of the windows of one end. tt is nil on a turn that is not valid: then the last angle scale
// is not known and the widths of 1000 rpm and one mark a turn are taken, the widest that are usual.
func (t *Tracker) place(th *throw, tt *turn.Throw, e int, out *End) {
	m, u := 6.0, 1.2
	first, last := -turn.PadDeg*1.0, 360+turn.PadDeg*1.0
	if tt != nil {
		m, u = 6*tt.RPM/1000, tt.U
		first, last = tt.Grid.Lo, tt.Grid.At(tt.Grid.N-1)
	}
	see, mem := &th.now[e], &th.memory[e]
	for s := range mem.open {
		start := strokeStart(e, s)
		if w := &out.W[opens(s)]; w.State == Following || w.State == Holding {
			at := see.at[s]
			w.Lo, w.Hi = at-lead-u, at+t.tail(&mem.open[s], m)+u
			if w.State == Holding { // the prediction is good to 2–3° in a load swing
				w.Lo, w.Hi = w.Lo-3, w.Hi+3
			}
		} else if w.State == NotDelivering {
			w.Lo, w.Hi = start+latestOpen-lead-u, start+180+searchDeg+searchMs*m+u
			if s == Expansion {
				w.Lo = start + latestOpenS - lead - u
			}
		}
		w := &out.W[closes(s)]
		if w.State == Lost || w.State == Idle {
			continue
		}
		lo, hi := t.closingWindow(mem, s, see.close[s], m)
		w.Lo, w.Hi = start+lo-u, start+hi+u+ringMs*m
	}
	for k := range out.W {
		w := &out.W[k]
		if !math.IsNaN(w.Lo) {
			w.Lo, w.Hi = max(w.Lo, first), min(w.Hi, last)
		}
	}
}

// tail is how far an opening's window reaches past the departure, degrees: learnt, or wide enough for any valve. The
// lag is learnt to the burst's peak, which comes after the impact, so nothing is added for the ringing.
func (t *Tracker) tail(o *opener, m float64) float64 {
	if len(o.lag.v) < lagLeast {
		return searchDeg + (searchMs+ringMs)*m
	}
	median, sigma := o.lag.centre(t.buf)
	return (median+max(0.25, min(4*sigma, 1)))*m + afterPeak
}

// closingWindow gives the limits of a closing's window after its dead centre; c is the closing found, NaN when none.
func (t *Tracker) closingWindow(mem *endMemory, stroke int, c, m float64) (lo, hi float64) {
	if math.IsNaN(c) {
		c = 0
	}
	switch {
	case stroke == Expansion:
		return math.Min(-7, c-3), math.Max(3+0.8*m, c+5+0.6*m)
	case c > lateClosing:
		if mem.lag.count() < heardLeast {
			return c - 3, c + 8 + 1.1*m
		}
		median, sigma := mem.lag.centre(t.buf)
		return c - lead, c + (median+max(0.25, min(4*sigma, 1))-ringMs)*m + afterPeak // learnt from the ringing
	}
	lo, hi = math.Min(-9, c-3), math.Max(12+0.5*m, c+8+1.1*m)
	if mem.heard[0].count() >= heardLeast {
		// The peak comes up to half a millisecond after the impact.
		lo = math.Max(math.Min(-9, t.passed(&mem.heard[0], heardEarly)-heardSpare-0.3*m), earliestHeard)
		hi = math.Max(hi-heardLess, t.passed(&mem.heard[1], heardLate)+heardSpare/2)
	}
	return lo, hi
}

// passed gives the value that a share of the remembered ones does not pass.
func (t *Tracker) passed(r *recent, p float64) float64 {
	w := append(t.buf[:0], r.v...)
	slices.Sort(w)
	return w[int(p*float64(len(w)-1)+0.5)]
}

// share marks the windows in which another event of the throw may ring.
func share(th *Throw) {
	for e := range th.Ends {
		for k := range th.Ends[e].W {
			w := &th.Ends[e].W[k]
			for e2 := range th.Ends {
				for k2 := range th.Ends[e2].W {
					v := &th.Ends[e2].W[k2]
					if v != w && overlap(w.Lo, w.Hi, v.Lo, v.Hi) {
						w.Shared = true
					}
				}
			}
		}
	}
}

// overlap reports whether two stretches of the turn, or their repetitions, meet. NaN meets nothing.
func overlap(a0, a1, b0, b1 float64) bool {
	for d := -360.0; d <= 360; d += 360 {
		if a0 < b1+d && b0+d < a1 {
			return true
		}
	}
	return false
}
