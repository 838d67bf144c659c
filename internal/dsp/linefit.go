package dsp

import "math"

// LineFit gives the heights, at positions between samples, of the straight lines fitted under a Gaussian weight:
// smoothing, interpolation and no delay in one. The weight is cut off so many samples from the one nearest to the position.
//
// The weight of the sample at i from the nearest, d after the position, is exp(−(i+d)²c/2): the Gaussian at i, which is
// kept, times the i-th power of r = exp(−c d), up to a factor that does not matter. Where the processor has vectors of
// four (AVX2), four positions go side by side; each takes the same steps as alone, so the bits are the same.
type LineFit struct {
	c     float64   // 1/σ²
	reach int       // samples to either side
	table []float64 // pairs: the Gaussian, 1 in the middle, and i from −reach to reach
}

// Set makes σ (samples) and the reach. It allocates only when the reach is longer than ever before.
func (l *LineFit) Set(sigma float64, reach int) {
	l.c, l.reach = 1/(sigma*sigma), reach
	n := 2*reach + 1
	if cap(l.table) < 2*n {
		l.table = make([]float64, 2*n, 4*n)
	}
	l.table = l.table[:2*n]
	// Each value from the one before, by a ratio that itself falls by a constant factor: exact for a Gaussian.
	v, ratio, q := 1.0, math.Exp(-l.c/2), math.Exp(-l.c)
	for i := range reach + 1 {
		l.table[2*(reach-i)], l.table[2*(reach+i)] = v, v
		l.table[2*(reach-i)+1], l.table[2*(reach+i)+1] = float64(-i), float64(i)
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
	shift := int(-from) - l.reach
	if lo, hi := int(nearest(pos[0]))+shift, int(nearest(pos[n-1]))-int(from)+l.reach; lo < 0 || hi >= min(len(x[0]), len(x[1])) || !(pos[0] <= pos[n-1]) {
		panic("dsp: LineFit: samples missing")
	}
	dst[0], dst[1] = dst[0][:n], dst[1][:n]
	if done := linesRun(l, dst, pos, x, shift); !done {
		l.plain(dst, pos, x, shift)
	}
}

// nearest gives the sample nearest to a position.
func nearest(pos float64) float64 { return math.Floor(pos + 0.5) }

// plain takes one position after the other.
func (l *LineFit) plain(dst [2][]float64, pos []float64, x [2][]float64, shift int) {
	for k, p := range pos {
		c := nearest(p)
		d := c - p
		// exp by its series: a quarter of what is wanted is at most 0.2, where the rest is below 3e-14, and any error is
		// only another Gaussian
		z := float64(-0.25 * l.c * d)
		e := 1.0
		for _, f := range expSeries {
			e = 1 + float64(float64(z*f)*e)
		}
		r := e * e
		r *= r
		w := 1.0
		var m0, m1, m2, a0, b0, a1, b1 float64
		i := int(c) + shift
		u, v := x[0][i:], x[1][i:]
		u, v = u[:len(l.table)/2], v[:len(l.table)/2]
		for j := range u {
			h := float64(l.table[2*j] * w)
			w = float64(w * r)
			hj := float64(h * l.table[2*j+1])
			m0 += h
			m1 += hj
			m2 += float64(hj * l.table[2*j+1])
			a0 += float64(h * u[j])
			b0 += float64(hj * u[j])
			a1 += float64(h * v[j])
			b1 += float64(hj * v[j])
		}
		dm := float64(d * m0) // moments about the position
		s1 := m1 + dm
		s2 := m2 + float64(d*(m1+m1+dm))
		det := float64(m0*s2) - float64(s1*s1)
		dst[0][k] = (float64(s2*a0) - float64(s1*(b0+float64(d*a0)))) / det
		dst[1][k] = (float64(s2*a1) - float64(s1*(b1+float64(d*a1)))) / det
	}
}

// expSeries is the exponential's in nested form, 1/9 to 1.
var expSeries = [9]float64{1. / 9, 1. / 8, 1. / 7, 1. / 6, 1. / 5, 1. / 4, 1. / 3, 1. / 2, 1}
