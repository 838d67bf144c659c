package turn

import (
	"math"
	"slices"

	"lapwing/internal/dsp"
	"lapwing/internal/frame"
)

// refuse emits a record without a turn, one for each revolution that the frame spans.
func (c *Converter) refuse(r *record, why string, emit func(*Turn)) {
	for n := range r.revs {
		c.out = Turn{
			Number: r.turn + n, Seq0: r.seq0, Seq1: ceil(r.mark1), Time: r.mark0 / c.cfg.Rate,
			RPM: math.NaN(), Reason: why, Quality: r.q,
		}
		if r.q&(frame.Missing|frame.Gap) == 0 && r.revs == 1 && r.mark1 > r.mark0 {
			c.out.RPM = 60 * c.cfg.Rate / (r.mark1 - r.mark0)
		}
		emit(&c.out)
	}
}

// make emits the turn of recs[i], or the reason why there is none.
func (c *Converter) make(i int, emit func(*Turn)) {
	r := c.recs[i]
	why := c.amiss(i)
	if why == "" {
		why = c.convert(c.recs[i-1 : i+ahead+1])
	}
	if why != "" {
		c.refuse(r, why, emit)
		return
	}
	emit(&c.out)
}

// convert fills c.out from four consecutive revolutions, of which the second is in hand. It returns why it cannot.
func (c *Converter) convert(recs []*record) string {
	r := recs[1]
	c.out = Turn{Number: r.turn, Seq0: math.MaxInt64, Throws: c.throws}
	for _, n := range recs {
		c.out.Quality |= n.q
	}
	u, why := c.ask(r)
	if why != "" {
		return why
	}
	if why := c.m.lay(recs); why != "" {
		return why
	}
	if u == 0 {
		u = Uncertainty(c.m.even(), knowsRipple(c.m.ripple))
	}
	c.span, c.u = recs, u
	c.cfg.Do(len(c.throws), c.makeOne)
	for k := range c.hands {
		h := &c.hands[k]
		if h.why != "" {
			return h.why
		}
		c.out.Seq0, c.out.Seq1 = min(c.out.Seq0, h.seq0), max(c.out.Seq1, h.to)
	}
	c.out.Time, c.out.RPM = c.throws[0].T0/c.cfg.Rate, c.throws[0].RPM
	return ""
}

// throwOf fills in throw k.
func (c *Converter) throwOf(k int) {
	t, g, h := &c.throws[k], &c.grids[k], &c.hands[k]
	if h.why = c.m.walk(g, t.Pos, h.perDeg); h.why != "" {
		return
	}
	lo, hi := c.reach(g, t.Pos, h.perDeg)
	if lo < c.base || hi > c.next {
		h.why = whyShort
		return
	}
	overload := false
	for _, n := range c.span {
		overload = overload || n.q&frame.Clipped != 0 && n.mark0 < float64(hi) && n.mark1 > float64(lo)
	}
	c.pressures(k, lo, hi, overload)
	c.vibration(k, lo, hi, overload)
	for j, d := range h.perDeg {
		t.Pos[j] += float64(c.m.ref)
		t.Omega[j] = math.Pi / 180 * c.cfg.Rate / d
	}
	t.T0, t.T1 = t.Pos[g.zero], t.Pos[g.full]
	t.RPM, t.U = 60*c.cfg.Rate/(t.T1-t.T0), c.u
	h.seq0, h.to = lo, hi
}

// ask puts the ripple in force for a revolution into the angle map and gives the uncertainty that goes with it, 0 when
// none is stated. The marks of a revolution and of its neighbours are laid over the one ripple: with one mark a turn
// its phase shift is the same for all of them, and between more marks the spline has little left to bridge.
func (c *Converter) ask(r *record) (u float64, why string) {
	if c.cfg.Marks.Shaft == nil {
		return c.cfg.Marks.U, ""
	}
	s := c.cfg.Marks.Shaft(r.mark0 / c.cfg.Rate)
	if !slices.Equal(s.Ripple, c.m.ripple) {
		if checkRipple(s.Ripple) != nil {
			return 0, whyRipple
		}
		c.m.ripple = append(c.m.ripple[:0], s.Ripple...)
		for k := range c.grids {
			c.grids[k].warp(c.m.ripple)
		}
	}
	if !(s.U >= 0) || math.IsInf(s.U, 0) {
		return 0, whyRipple
	}
	return s.U, ""
}

// reach gives the half-open range of sample numbers that the fits and bins of a grid touch; pos is relative.
func (c *Converter) reach(g *grid, pos, perDeg []float64) (lo, hi int64) {
	n := len(pos) - 1
	edge := func(i int) float64 { return reachSigmas*roundedUp*max(width(g.Step*perDeg[i]), c.least) + 2 }
	lo = min(int64(math.Floor(pos[0]-edge(0))), first(pos))
	hi = max(ceil(pos[n]+edge(n)), end(pos)+c.late) + 1
	return lo + c.m.ref, hi + c.m.ref
}

// pressures fills in the pressures of throw k. Positions are relative to the map's reference sample.
func (c *Converter) pressures(k int, lo, hi int64, overload bool) {
	t, g, h := &c.throws[k], &c.grids[k], &c.hands[k]
	var ends [2]*stream
	for e := range ends {
		t.Bad[e] = ""
		if at := c.throw[k][e]; at >= 0 {
			ends[e] = c.press[at]
			t.Bad[e] = ends[e].suspect(lo, hi, overload)
		}
	}
	// Ends without a known passage share the fit; a transducer whose passage is to be undone has one of its own.
	off := c.m.ref - c.base
	var p, x [2][]float64
	n := 0
	for e, s := range ends {
		switch {
		case s == nil:
		case s.ch.Passage.Hz == 0:
			p[n], x[n] = t.P[e], s.x.live()
			n++
		default:
			lead1, lead2 := s.ch.Passage.leads(c.cfg.Rate)
			h.undone[e].runs(h.perDeg, g.Step, s.least, func(fit *dsp.LineFit, i, j int) {
				fit.Restore(t.P[e][i:j], t.Pos[i:j], s.x.live(), -off, lead1, lead2)
			})
		}
	}
	if n == 0 {
		return
	}
	h.plain.runs(h.perDeg, g.Step, 0, func(fit *dsp.LineFit, i, j int) {
		part := [2][]float64{p[0][i:j]}
		if n > 1 {
			part[1] = p[1][i:j]
		}
		fit.At(part, t.Pos[i:j], x, -off)
	})
}

// vibration fills in the accelerometers of throw k.
func (c *Converter) vibration(k int, lo, hi int64, overload bool) {
	t, h := &c.throws[k], &c.hands[k]
	if len(t.Vib) == 0 {
		return
	}
	from, to := first(t.Pos), end(t.Pos)
	off := c.m.ref - c.base
	h.cut(t.Pos, off)
	for j := range t.Vib {
		v, s := &t.Vib[j], c.vib[c.throw[k][2]+j]
		v.Suspect = s.suspect(lo, hi, overload)
		if s.impact == nil {
			continue
		}
		var leak []float64
		if s.leak != nil {
			leak = s.leak.lived()
		}
		impact := s.impact.lived()
		h.bins.Levels(v.Peak, v.RMS, v.Leak, impact, leak)
		v.Seq0, v.X = from+c.m.ref, impact[from+off:to+off:to+off]
	}
}
