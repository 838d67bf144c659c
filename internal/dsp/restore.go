package dsp

// Restore is At for one signal that a lag of second order has passed through: the heights of x + lead1·x′ + lead2·x″,
// in units of samples, each smoothed by the Gaussian. The derivatives are those of the parabola fitted under the
// Gaussian, which are its exact derivative filters; the height is the parabola's smoothed by it.
func (l *LineFit) Restore(dst, pos, x []float64, from int64, lead1, lead2 float64) {
	l.restore(dst, pos, x, from, lead1, lead2, hasAVX2)
}

func (l *LineFit) restore(dst, pos, x []float64, from int64, lead1, lead2 float64, vectors bool) {
	n := len(pos)
	if n == 0 {
		return
	}
	shift := l.check(pos, len(x), from)
	dst = dst[:n]
	if groups := (n + 3) / 4; groups > cap(l.deep) {
		l.deep = make([][8][4]float64, groups, 2*groups)
	}
	deep := l.deep[:(n+3)/4]
	if vectors && n >= 4 && l.reach > 0 {
		sumsAVX2(l, &deep[0], &pos[0], n, &x[0], shift)
	} else {
		l.sums(deep, pos, x, shift)
	}
	for g := range deep {
		at := group(g, n)
		for k := 0; k < 4 && at+k < n; k++ {
			d := nearest(pos[at+k]) - pos[at+k]
			dst[at+k] = restored(&deep[g], k, float64(l.reach+1)+d, lead1, lead2)
		}
	}
}

// group is the first position of the g-th four of n; the last four overlap those before, when there are four.
func group(g, n int) int { return max(0, min(4*g, n-4)) }

// sums gives the sums of sums of the weights h, five deep, and of h·x, three deep (see LineFit.plain).
func (l *LineFit) sums(out [][8][4]float64, pos, x []float64, shift int) {
	for g := range out {
		at := group(g, len(pos))
		for k := 0; k < 4 && at+k < len(pos); k++ {
			c, _, r := l.step(pos[at+k])
			w := 1.0
			var m0, m1, m2, m3, m4, a0, a1, a2 float64
			u := x[int(c)+shift:]
			u = u[:len(l.table)]
			for j, t := range l.table {
				h := float64(t * w)
				w = float64(w * r)
				m0 += h
				m1 += m0
				m2 += m1
				m3 += m2
				m4 += m3
				a0 += float64(h * u[j])
				a1 += a0
				a2 += a1
			}
			for i, v := range [8]float64{m0, m1, m2, m3, m4, a0, a1, a2} {
				out[g][i][k] = v
			}
		}
	}
}

// restored makes the value of lane k of the sums. The j-th sum is of (e+j−1)…(e+1)e/j! times what is summed, with e
// counted back from the end; the sample's place from the position is q − e.
func restored(s *[8][4]float64, k int, q, lead1, lead2 float64) float64 {
	e0, e1 := s[0][k], s[1][k]
	e2 := float64(2*s[2][k]) - e1
	e3 := float64(6*(s[3][k]-s[2][k])) + e1
	e4 := float64(24*s[4][k]) - float64(6*e3) - float64(11*e2) - float64(6*e1)
	// moments of the weights about the position, by four steps of Horner's scheme on binomials
	s1 := float64(q*e0) - e1
	t1 := float64(q*e1) - e2 // Σ e·(q − e)·h, and so on
	t2 := float64(q*e2) - e3
	t3 := float64(q*e3) - e4
	s2 := float64(q*s1) - t1
	u1 := float64(q*t1) - t2 // Σ e·(q − e)²·h
	u2 := float64(q*t2) - t3
	s3 := float64(q*s2) - u1
	v1 := float64(q*u1) - u2
	s4 := float64(q*s3) - v1
	// and of the weighted signal
	a0, a1 := s[5][k], s[6][k]
	a2 := float64(2*s[7][k]) - a1
	x1 := float64(q*a0) - a1
	x2 := float64(q*x1) - (float64(q*a1) - a2)
	// The parabola c0 + c1 i + c2 i² solves M c = (a0, x1, x2), M symmetric with the moments. What is wanted is g·c with
	// g = (1, lead1, s2/s0 + 2·lead2), so the value is (a, b, e)·(a0, x1, x2) with M (a, b, e) = g, here by elimination.
	m11, m12, r1 := s2-float64(s1*s1)/e0, s3-float64(s1*s2)/e0, lead1-s1/e0
	m22, r2 := s4-float64(s2*s2)/e0, 2*lead2
	e := (r2 - float64(m12*r1)/m11) / (m22 - float64(m12*m12)/m11)
	b := (r1 - float64(m12*e)) / m11
	a := (1 - float64(s1*b) - float64(s2*e)) / e0
	return float64(a*a0) + float64(b*x1) + float64(e*x2)
}
