package dsp

// Both runs two filters over the same samples in one pass, into df and dg (as long as src; none of the three may
// overlap). The outputs and the states kept are those of f.Process(df, src) and g.Process(dg, src). Two band-passes of
// two sections each, the common case, go side by side, so that the processor works on one while it waits for the other.
func Both(f, g *Filter, df, dg, src []float64) {
	if len(df) != len(src) || len(dg) != len(src) {
		panic("dsp: Both: lengths differ")
	}
	if !f.twoResonators() || !g.twoResonators() || f.seen != g.seen {
		f.Process(df, src)
		g.Process(dg, src)
		return
	}
	for len(src) > 0 {
		n := min(len(src), flushEvery-f.seen)
		both(f, g, df[:n], dg[:n], src[:n])
		if f.seen += n; f.seen == flushEvery {
			f.flush()
			g.flush()
			f.seen = 0
		}
		g.seen = f.seen
		df, dg, src = df[n:], dg[n:], src[n:]
	}
}

// twoResonators reports whether the filter is two sections of a band-pass, with their zeros at ±1: B1 = 0, B2 = −B0.
func (f *Filter) twoResonators() bool {
	return len(f.sos) == 2 && f.sos[0].resonator() && f.sos[1].resonator()
}

func (s Section) resonator() bool { return s.B1 == 0 && s.B2 == -s.B0 }

// both is Filter.run for two pairs of resonators: B1·x adds nothing and B2·x is −B0·x, to the last bit.
func both(f, g *Filter, df, dg, src []float64) {
	p0, p1, p2 := f.sos[0].B0, f.sos[0].A1, f.sos[0].A2
	q0, q1, q2 := f.sos[1].B0, f.sos[1].A1, f.sos[1].A2
	r0, r1, r2 := g.sos[0].B0, g.sos[0].A1, g.sos[0].A2
	s0, s1, s2 := g.sos[1].B0, g.sos[1].A1, g.sos[1].A2
	a1, a2, b1, b2 := f.z[0][0], f.z[0][1], f.z[1][0], f.z[1][1]
	c1, c2, d1, d2 := g.z[0][0], g.z[0][1], g.z[1][0], g.z[1][1]
	df, dg = df[:len(src)], dg[:len(src)]
	for i, x := range src {
		t := p0 * x
		y := t + a1
		a1 = a2 - p1*y
		a2 = -t - p2*y
		t = q0 * y
		y = t + b1
		b1 = b2 - q1*y
		b2 = -t - q2*y
		df[i] = y

		t = r0 * x
		y = t + c1
		c1 = c2 - r1*y
		c2 = -t - r2*y
		t = s0 * y
		y = t + d1
		d1 = d2 - s1*y
		d2 = -t - s2*y
		dg[i] = y
	}
	f.z[0], f.z[1] = [2]float64{a1, a2}, [2]float64{b1, b2}
	g.z[0], g.z[1] = [2]float64{c1, c2}, [2]float64{d1, d2}
}
