package dsp

import "math"

// Line is a straight line y = A + B*x fitted by least squares.
type Line struct {
	A, B  float64 // intercept and slope
	SE    float64 // standard error of B; NaN with fewer than three points
	Sigma float64 // standard deviation of the residuals (n-2 degrees of freedom); NaN with fewer than three points
	N     int     // points used
}

// At gives the line's value at x.
func (l Line) At(x float64) float64 { return l.A + l.B*x }

// FitLine fits a line to the points; A and B are NaN when fewer than two different x are given. The errors hold for
// independent residuals of equal size (any textbook on regression).
func FitLine(x, y []float64) Line {
	if len(x) != len(y) {
		panic("dsp: FitLine: x and y differ in length")
	}
	n := float64(len(x))
	var mx, my float64
	for i := range x {
		mx += x[i]
		my += y[i]
	}
	mx, my = mx/n, my/n
	var sxx, sxy float64
	for i := range x {
		d := x[i] - mx
		sxx += d * d
		sxy += d * (y[i] - my)
	}
	nan := math.NaN()
	if !(sxx > 0) {
		return Line{A: nan, B: nan, SE: nan, Sigma: nan, N: len(x)}
	}
	b := sxy / sxx
	l := Line{A: my - b*mx, B: b, SE: nan, Sigma: nan, N: len(x)}
	if len(x) > 2 {
		var ss float64
		for i := range x {
			r := (y[i] - my) - b*(x[i]-mx)
			ss += r * r
		}
		l.Sigma = math.Sqrt(ss / (n - 2))
		l.SE = l.Sigma / math.Sqrt(sxx)
	}
	return l
}
