package dsp

import "math"

// LineFit gives the heights, at positions between samples, of the straight lines fitted under a Gaussian weight:
// smoothing, interpolation and no delay in one. The weight is cut off so many samples from the one nearest to the position.
//
// The weight of the sample at i from the nearest, d after the position, is exp(−(i+d)²c/2): the Gaussian at i, which is
// kept, times the i-th power of r = exp(−c d), up to a factor that does not matter. Where the processor has vectors of
// four (AVX2), four positions go side by side; each takes the same steps as alone, so the bits are the same.
type LineFit struct {
	c     float64         // 1/σ²
	reach int             // samples to either side
	table []float64       // the Gaussian from −reach to reach, 1 in the middle
	deep  [][8][4]float64 // scratch of Restore
}

// Set makes σ (samples) and the reach. It allocates only when the reach is longer than ever before.
func (l *LineFit) Set(sigma float64, reach int) {
	l.c, l.reach = 1/(sigma*sigma), reach
	n := 2*reach + 1
	if cap(l.table) < n {
		l.table = make([]float64, n, 2*n)
	}
	l.table = l.table[:n]
	// Each value from the one before, by a ratio that itself falls by a constant factor: exact for a Gaussian.
	v, ratio, q := 1.0, math.Exp(-l.c/2), math.Exp(-l.c)
	for i := range reach + 1 {
		l.table[reach-i], l.table[reach+i] = v, v
		v *= ratio
		ratio *= q
	}
}

// At gives the heights at increasing positions of one signal or two (x[1] nil: one). x[.][0] is the sample at position
// from. Every position must have its samples; dst has the length of pos.
func (l *LineFit) At(dst [2][]float64, pos []float64, x [2][]float64, from int64) {
	n := len(pos)
	if n == 0 {
		return
	}
	if x[1] == nil {
		x[1], dst[1] = x[0], dst[0]
	}
	shift := l.check(pos, min(len(x[0]), len(x[1])), from)
	dst[0], dst[1] = dst[0][:n], dst[1][:n]
	if hasAVX2 && n >= 4 && l.reach > 0 {
		linesAVX2(l, &dst[0][0], &dst[1][0], &pos[0], n, &x[0][0], &x[1][0], shift)
		return
	}
	l.plain(dst, pos, x, shift)
}

// check refuses positions without samples, and gives what the index of a position's first sample is beyond the sample
// nearest to it.
func (l *LineFit) check(pos []float64, samples int, from int64) (shift int) {
	first, last := pos[0], pos[len(pos)-1]
	shift = int(-from) - l.reach
	if lo, hi := int(nearest(first))+shift, int(nearest(last))-int(from)+l.reach; lo < 0 || hi >= samples || !(first <= last) {
		panic("dsp: LineFit: samples missing")
	}
	return shift
}

// nearest gives the sample nearest to a position.
func nearest(pos float64) float64 { return math.Floor(pos + 0.5) }

// plain takes one position after the other.
func (l *LineFit) plain(dst [2][]float64, pos []float64, x [2][]float64, shift int) {
	for k, p := range pos {
		c, d, r := l.step(p)
		// Moments by sums of sums: with S the sum so far, the sum of all S is the sum of (n − j)·h over the samples j = 0 …
		// n−1, which takes an addition where the product would take two operations more.
		w := 1.0
		var m0, m1, m2, a0, b0, a1, b1 float64
		i := int(c) + shift
		u, v := x[0][i:], x[1][i:]
		u, v = u[:len(l.table)], v[:len(l.table)]
		for j, g := range l.table {
			h := float64(g * w)
			w = float64(w * r)
			m0 += h
			m1 += m0
			m2 += m1
			a0 += float64(h * u[j])
			b0 += a0
			a1 += float64(h * v[j])
			b1 += a1
		}
		// About the position: sample j lies i = j − reach + d = q − (n − j) from it, with n = 2·reach + 1 and q = reach + 1 + d.
		// s1 is the sum of h·i, s2 of h·i²; m2 is the sum of (n−j)(n−j+1)/2·h.
		q := float64(l.reach+1) + d
		qm := float64(q * m0)
		s1 := qm - m1
		s2 := float64(q*(qm-(m1+m1))) + ((m2 + m2) - m1)
		det := float64(m0*s2) - float64(s1*s1)
		dst[0][k] = (float64(s2*a0) - float64(s1*(float64(q*a0)-b0))) / det
		dst[1][k] = (float64(s2*a1) - float64(s1*(float64(q*a1)-b1))) / det
	}
}

// step gives the sample nearest to a position, how far after it that lies, and r.
func (l *LineFit) step(p float64) (c, d, r float64) {
	c = nearest(p)
	d = c - p
	// exp by its series: a quarter of what is wanted is at most 0.2, where the rest is below 3e-14, and any error is only
	// another Gaussian
	z := float64(-0.25 * l.c * d)
	e := 1.0
	for _, f := range expSeries {
		e = 1 + float64(float64(z*f)*e)
	}
	r = e * e
	return c, d, r * r
}

// expSeries is the exponential's in nested form, 1/9 to 1.
var expSeries = [9]float64{1. / 9, 1. / 8, 1. / 7, 1. / 6, 1. / 5, 1. / 4, 1. / 3, 1. / 2, 1}
