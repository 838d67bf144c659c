package wire

import "math"

// opt leaves a number that cannot be known out of a payload: absent, never zero, never NaN on the wire.
func opt(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// round keeps a number of decimals, 0 to 15. What is too large to have any is given back as it is.
func round(x float64, decimals int) float64 {
	s := tens[decimals]
	y := math.Round(x * s)
	if math.IsInf(y, 0) {
		return x
	}
	return y/s + 0 // no minus zero
}

// tens are the powers of ten that are whole numbers to the last bit, as far as they are used here.
var tens = [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

// figures keeps a number of significant figures.
func figures(x float64, n int) float64 {
	if opt(x) == nil || x == 0 {
		return x + 0
	}
	d := n - 1 - int(math.Floor(math.Log10(math.Abs(x))))
	if d < 0 || d > 15 {
		return x
	}
	return round(x, d)
}

// angle keeps a ten-thousandth of a degree.
func angle(deg float64) *float64 { return opt(round(deg, 4)) }
