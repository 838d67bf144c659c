package dsp

import (
	"errors"
	"math"
)

// Curve is a piecewise cubic through knots, kept as values and slopes. The zero value is ready for FitSpline or
// FitMonotone; its buffers are reused, so a Curve that is fitted again and again allocates nothing after the first.
type Curve struct {
	x, y, s []float64 // knots, values, slopes
	w       []float64 // work
}

var errKnots = errors.New("dsp: curve needs at least two knots, finite and strictly increasing")

func (c *Curve) load(x, y []float64) error {
	if len(x) != len(y) || len(x) < 2 {
		return errKnots
	}
	for i := range x {
		if math.IsNaN(x[i]-x[i]) || math.IsNaN(y[i]-y[i]) || (i > 0 && x[i] <= x[i-1]) {
			return errKnots
		}
	}
	c.x, c.y = append(c.x[:0], x...), append(c.y[:0], y...)
	c.s = append(c.s[:0], y...)
	c.w = append(c.w[:0], y...)
	return nil
}

// FitSpline lays the not-a-knot cubic spline through the knots: two continuous derivatives, exact for cubics. Two
// knots give a line, three a parabola. Source: de Boor, "A Practical Guide to Splines", chapter IV.
func (c *Curve) FitSpline(x, y []float64) error {
	if err := c.load(x, y); err != nil {
		return err
	}
	n := len(x)
	h := func(i int) float64 { return x[i+1] - x[i] }
	d := func(i int) float64 { return (y[i+1] - y[i]) / (x[i+1] - x[i]) }
	s, up := c.s, c.w // right-hand sides then slopes; scaled upper diagonal
	switch n {
	case 2:
		s[0], s[1] = d(0), d(0)
		return nil
	case 3:
		q := (d(1) - d(0)) / (x[2] - x[0])
		s[0], s[1], s[2] = d(0)-q*h(0), d(0)+q*h(0), d(1)+q*h(1)
		return nil
	}
	span := x[2] - x[0]
	up[0] = span / h(1)
	s[0] = ((h(0)+2*span)*h(1)*d(0) + h(0)*h(0)*d(1)) / span / h(1)
	for i := 1; i < n-1; i++ { // forward elimination; the pivots stay positive for increasing knots
		p := 2*(h(i-1)+h(i)) - h(i)*up[i-1]
		up[i] = h(i-1) / p
		s[i] = (3*(h(i)*d(i-1)+h(i-1)*d(i)) - h(i)*s[i-1]) / p
	}
	span = x[n-1] - x[n-3]
	p := h(n-3) - span*up[n-2]
	s[n-1] = ((h(n-2)*h(n-2)*d(n-3)+(2*span+h(n-2))*h(n-3)*d(n-2))/span - span*s[n-2]) / p
	for i := n - 2; i >= 0; i-- {
		s[i] -= up[i] * s[i+1]
	}
	return nil
}

// FitMonotone lays the monotone cubic of Fritsch and Carlson (SIAM J. Numer. Anal. 17 (1980) 238), with the weighted
// harmonic slopes of Fritsch and Butland, through the knots: one continuous derivative, and no extremum that the
// knots do not have. For calibration curves and anything that must not overshoot.
func (c *Curve) FitMonotone(x, y []float64) error {
	if err := c.load(x, y); err != nil {
		return err
	}
	n := len(x)
	h := func(i int) float64 { return x[i+1] - x[i] }
	d := func(i int) float64 { return (y[i+1] - y[i]) / (x[i+1] - x[i]) }
	if n == 2 {
		c.s[0], c.s[1] = d(0), d(0)
		return nil
	}
	for i := 1; i < n-1; i++ {
		a, b := d(i-1), d(i)
		if a*b <= 0 {
			c.s[i] = 0
			continue
		}
		w1, w2 := 2*h(i)+h(i-1), h(i)+2*h(i-1)
		c.s[i] = (w1 + w2) / (w1/a + w2/b)
	}
	c.s[0] = endSlope(h(0), h(1), d(0), d(1))
	c.s[n-1] = endSlope(h(n-2), h(n-3), d(n-2), d(n-3))
	return nil
}

// endSlope is the three-point slope at an end, held to the shape of the data.
func endSlope(h0, h1, d0, d1 float64) float64 {
	s := ((2*h0+h1)*d0 - h0*d1) / (h0 + h1)
	switch {
	case s*d0 <= 0:
		return 0
	case d0*d1 <= 0 && math.Abs(s) > 3*math.Abs(d0):
		return 3 * d0
	}
	return s
}

// At gives the value and the slope at x. Beyond the knots the outer cubics go on. hint is the index of the interval
// where the last call ended; start with zero and pass the same variable while x walks along the curve.
func (c *Curve) At(x float64, hint *int) (v, slope float64) {
	i := max(0, min(*hint, len(c.x)-2))
	for i > 0 && x < c.x[i] {
		i--
	}
	for i < len(c.x)-2 && x >= c.x[i+1] {
		i++
	}
	*hint = i
	h := c.x[i+1] - c.x[i]
	d := (c.y[i+1] - c.y[i]) / h
	t := x - c.x[i]
	c2 := (3*d - 2*c.s[i] - c.s[i+1]) / h
	c3 := (c.s[i] + c.s[i+1] - 2*d) / (h * h)
	return c.y[i] + t*(c.s[i]+t*(c2+t*c3)), c.s[i] + t*(2*c2+3*t*c3)
}
