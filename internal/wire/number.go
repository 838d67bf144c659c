package wire

import "math"

// opt leaves a number that cannot be known out of a payload: absent, never zero, never NaN on the wire.
func opt(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// round keeps a number of decimals. What is too large to have any is given back as it is.
func round(x float64, decimals int) float64 {
	s := math.Pow(10, float64(decimals))
	y := math.Round(x * s)
	if math.IsInf(y, 0) {
		return x
	}
	return y/s + 0 // no minus zero
}

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
