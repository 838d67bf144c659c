package frame

import "math"

// commit takes the waiting edge for the tooth that it was found to be. Teeth before it that did not come are lost; where
// mark 0 is among them it is laid on the parabola through the teeth beside it.
func (c *cog) commit() {
	p, steps, late := c.cand, c.candSteps, c.candLate
	c.hasCand, c.misfits = false, 0
	if c.isWeak(p, steps) {
		c.q |= Weak
	}
	for k := 1; k < steps; k++ {
		c.q |= LostTooth
		c.nMissing++
		c.widest = max(c.widest, c.f.ahead(steps))
		c.nLost++
		c.pass((c.f.last+k)%c.n, c.f.between(c.f.ahead(k), p.pos, c.f.ahead(steps)), true)
	}
	if !c.relock {
		c.pass((c.f.last+steps)%c.n, p.pos, false)
	}
	if c.relock {
		c.unlock()
		if !c.replaying && c.lastPulse > c.sought {
			c.searching()
		}
		return
	}
	c.f.accept(p.pos, steps, late)
	c.swings.take(c.f.last, p.height, c.det.usual)
	if steps == 1 {
		b := &c.bias[c.f.last]
		*b = min(max(*b+0.3*late, -0.4), 0.4)
	}
	c.setDue()
}

// between gives the sample position of a place d pitches after the last mark, by the parabola through the last two marks
// and one at pos, e pitches after the last.
func (f *follower) between(d, pos, e float64) float64 {
	u := f.ps[f.n-2] - f.pos
	a := f.th[f.n-2] - f.th[f.n-1]
	v := pos - f.pos
	return f.pos + u*d*(d-e)/(a*(a-e)) + v*d*(d-a)/(e*(e-a))
}

// pass notes that a mark has gone by at pos.
func (c *cog) pass(mark int, pos float64, lost bool) {
	if mark > 0 {
		if lost {
			pos = math.NaN()
		}
		if c.open {
			c.marks = append(c.marks, pos)
		}
		return
	}
	c.close(pos)
	if c.relock {
		return
	}
	c.begin(pos)
	if lost {
		c.q |= LostTooth
	}
}

// close gives the open turn, which ends at pos.
func (c *cog) close(pos float64) {
	if !c.open {
		return
	}
	period := pos - c.mark0
	if (c.nLost > 0 && c.nFilled > 0 || c.crowded()) && c.misplaced(period) || period < 0.95*c.minT || period > 1.05*c.maxT || len(c.marks) != c.n-1 {
		c.relock = true
		return
	}
	q := c.q
	if c.nLost > max(1, c.n/6) || c.widest > c.at[c.n]/6+3 {
		q |= Missing
	}
	contiguous := c.mark0 == c.lastEnd
	skip := int64(0)
	if !contiguous && c.expect > 0 {
		skip = int64(math.Round((c.mark0 - c.lastEnd) / c.expect))
	}
	if !contiguous {
		c.hist.n = 0
	}
	if c.hist.n > 0 && c.hist.uneven(period, c.hist.expected()) {
		if c.starting {
			q |= Starting
		} else {
			q |= Uneven
		}
	} else if c.hist.n > 0 {
		c.starting = false
	} else {
		q |= Starting
	}
	c.hist.push(period)
	c.coast.push(period)
	c.expect = c.hist.expected()
	c.ready.add(cut{a: pulse{pos: c.mark0}, b: pulse{pos: pos}, k: 1, q: q, skip: skip, inner: c.marks})
	c.lastEnd = pos
}

// begin opens a turn at pos, unless its samples have gone already or are part of a turn that has been given. What has
// passed since the newest turn while the place on the wheel was not known is one frame marked Missing, without inner marks.
func (c *cog) begin(pos float64) {
	if away := pos - c.lastEnd; c.expect > 0 && away > 0.5*c.expect && away < 0.9*c.keep && c.lastEnd >= float64(c.floor) {
		k := max(1, int(math.Round(away/c.expect)))
		c.ready.add(cut{a: pulse{pos: c.lastEnd}, b: pulse{pos: pos}, k: k, q: Missing | LostTooth})
		c.lastEnd = pos
	}
	c.open = pos >= c.lastEnd && pos >= float64(c.floor)
	c.mark0, c.marks, c.q, c.nLost, c.nStray, c.nFilled, c.widest = pos, c.marks[:0], 0, 0, 0, 0, 0
}
