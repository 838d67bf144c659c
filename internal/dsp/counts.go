package dsp

// Values gives gain·x + offset, to the same bits on every processor. dst has the length of x.
func Values(dst []float64, x []int32, gain, offset float64) {
	dst = dst[:len(x)]
	n := valuesRun(dst, x, gain, offset)
	for i, c := range x[n:] {
		dst[n+i] = float64(gain*float64(c)) + offset
	}
}

// Extremes gives the least and the greatest of at least one count.
func Extremes(x []int32) (least, most int32) {
	least, most = x[0], x[0]
	if n := len(x) &^ 7; n > 0 {
		least, most = extremesRun(x[:n])
		x = x[n:]
	}
	for _, c := range x {
		least, most = min(least, c), max(most, c)
	}
	return least, most
}

func extremesPlain(x []int32) (least, most int32) {
	least, most = x[0], x[0]
	for _, c := range x {
		least, most = min(least, c), max(most, c)
	}
	return least, most
}
