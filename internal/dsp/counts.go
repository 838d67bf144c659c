package dsp

// Values gives gain·x + offset, with the same bits on every processor. dst has the length of x.
func Values(dst []float64, x []int32, gain, offset float64) {
	dst = dst[:len(x)]
	n := 0
	if hasAVX2 && len(x) >= 8 {
		n = len(x) &^ 7
		valuesAVX2(&dst[0], &x[0], n, gain, offset)
	}
	for i := n; i < len(x); i++ {
		dst[i] = float64(gain*float64(x[i])) + offset
	}
}

// Extremes gives the least and the greatest of at least one count.
func Extremes(x []int32) (least, most int32) {
	least, most = x[0], x[0]
	n := 0
	if hasAVX2 && len(x) >= 8 {
		n = len(x) &^ 7
		least, most = extremesAVX2(&x[0], n)
	}
	for _, c := range x[n:] {
		least, most = min(least, c), max(most, c)
	}
	return least, most
}
