package dsp

import "math"

// Rectify gives the rectified, smoothed envelope: dst[i] is the mean of |src| over the w samples that end at i (fewer
// at the beginning). It looks back only, so it never shows an impact before it came; its delay is (w-1)/2 samples.
// dst and src have the same length and must not overlap; w < 1 is taken as 1.
func Rectify(dst, src []float64, w int) {
	if len(dst) != len(src) {
		panic("dsp: Rectify: dst and src differ in length")
	}
	w = max(w, 1)
	done := 0
	if n := (len(src) - w + 1) &^ 3; hasAVX2 && n > 0 { // whole fours of outputs with all their samples
		rectifyPlain(dst[:w-1], src[:w-1], w, 0)
		rectifyAVX2(&dst[w-1], &src[0], n, w)
		done = w - 1 + n
	}
	rectifyPlain(dst, src, w, done)
}

func rectifyPlain(dst, src []float64, w, from int) {
	for i := from; i < len(src); i++ {
		lo := max(0, i-w+1)
		var s float64 // summed afresh: a running sum would carry the rounding of everything before
		for _, v := range src[lo : i+1] {
			s += math.Abs(v)
		}
		dst[i] = s / float64(i+1-lo)
	}
}

// MeanSquare gives the mean of the squares; NaN of nothing. Four sums run side by side, so that none waits for the one
// before it.
func MeanSquare(x []float64) float64 {
	var a, b, c, d float64
	n := float64(len(x))
	for len(x) >= 4 {
		a += float64(x[0] * x[0])
		b += float64(x[1] * x[1])
		c += float64(x[2] * x[2])
		d += float64(x[3] * x[3])
		x = x[4:]
	}
	for _, v := range x {
		a += float64(v * v)
	}
	return ((a + b) + (c + d)) / n
}

// PeakAbs gives the largest absolute value and the first index at which it stands; 0, -1 of nothing. Magnitudes are
// compared as the integers that their bits are, which keeps the order of finite values.
func PeakAbs(x []float64) (peak float64, at int) {
	if len(x) == 0 {
		return 0, -1
	}
	const sign = 1 << 63
	top := math.Float64bits(x[0]) &^ sign
	for i, v := range x {
		if b := math.Float64bits(v) &^ sign; b > top {
			top, at = b, i
		}
	}
	return math.Float64frombits(top), at
}

// Onset thresholds: the first sample that exceeds both. Lower shares of the peak fire on flow noise ahead of the
// impact (measured: reference/vibration.md section 1).
const (
	OnsetShare      = 0.35 // of the envelope's peak
	OnsetBackground = 4.0  // times the background before the event
)

// Onset picks the onset of a burst in an envelope e (see Rectify): the first e > max(0.35*peak, 4*background), linear
// between samples. It gives the position in samples from e[0] and the peak of e; ok is false when no sample exceeds
// four backgrounds, or the first sample already does both (the onset lies before the window).
func Onset(e []float64, background float64) (at, peak float64, ok bool) {
	peak, i := PeakAbs(e)
	if i < 0 {
		return math.NaN(), math.NaN(), false
	}
	limit := math.Max(OnsetShare*peak, OnsetBackground*background)
	for i, v := range e {
		if v <= limit {
			continue
		}
		if i == 0 {
			break
		}
		return float64(i-1) + (limit-e[i-1])/(v-e[i-1]), peak, true
	}
	return math.NaN(), peak, false
}
