package turn

import "math"

// cut lays the bins of the grid angles. A bin reaches half-way, in samples, to the grid angles beside it and takes the
// samples lo <= n < hi; where it holds none (a fine grid at high speed) it takes the sample nearest to its angle. off
// is where in the histories the sample at position 0 lies.
func (h *hand) cut(pos []float64, off int64) {
	h.bins.Reset()
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
		h.bins.Add(int(a+off), int(b+off))
	}
}

// first and end give the half-open sample range that the bins of a grid cover.
func first(pos []float64) int64 { return ceil(pos[0] - (pos[1]-pos[0])/2) }

func end(pos []float64) int64 {
	n := len(pos) - 1
	return ceil(pos[n] + (pos[n]-pos[n-1])/2)
}

func ceil(x float64) int64 { return int64(math.Ceil(x)) }
