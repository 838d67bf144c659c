package turn

import "math"

// bin fills in the peak, RMS and leak-band mean square per grid angle. A bin reaches half-way, in samples, to the
// grid angles beside it and takes the samples lo <= n < hi; where it holds none (a fine grid at high speed) it takes
// the sample nearest to its angle. x and leak (nil: none) start at sample x0; positions count from the same origin.
func (v *Vib) bin(pos, x, leak []float64, x0 int64) {
	last := len(pos) - 1
	hi := first(pos)
	for i, p := range pos {
		lo := hi
		if i < last {
			hi = ceil((p + pos[i+1]) / 2)
		} else {
			hi = end(pos)
		}
		a, b := lo, hi
		if a >= b {
			a = int64(math.Round(p))
			b = a + 1
		}
		n := float64(b - a)
		peak, sum := peakSum(x[a-x0 : b-x0])
		v.Peak[i], v.RMS[i] = peak, math.Sqrt(sum/n)
		if leak == nil {
			continue
		}
		sum = 0
		for _, s := range leak[a-x0 : b-x0] {
			sum += s * s
		}
		v.Leak[i] = sum / n
	}
}

// peakSum gives the largest absolute value and the sum of the squares of a few finite samples. Magnitudes are compared
// as the integers that their bits are: that keeps the order and needs no branch, which noise would mispredict.
func peakSum(x []float64) (peak, sum float64) {
	top := uint64(0)
	for _, s := range x {
		top = max(top, math.Float64bits(s)&^(1<<63))
		sum += s * s
	}
	return math.Float64frombits(top), sum
}

// first and end give the half-open sample range that the bins of a grid cover.
func first(pos []float64) int64 { return ceil(pos[0] - (pos[1]-pos[0])/2) }

func end(pos []float64) int64 {
	n := len(pos) - 1
	return ceil(pos[n] + (pos[n]-pos[n-1])/2)
}

func ceil(x float64) int64 { return int64(math.Ceil(x)) }
