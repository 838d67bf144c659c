package dsp

import "math"

// Bins cuts a signal into stretches of some samples. Sums run in four lanes, sample j of a bin in lane j modulo 4, so
// that they have the same bits in vectors of four (AVX2) as without.
type Bins struct {
	at   []int32 // pairs: first sample, one beyond the last
	most int32   // samples in the longest
	end  int32   // one beyond the last sample of all
}

// Reset empties the list.
func (b *Bins) Reset() { b.at, b.most, b.end = b.at[:0], 0, 0 }

// Add adds the bin of the samples from up to to, at least one.
func (b *Bins) Add(from, to int) {
	if from < 0 || to <= from || to > math.MaxInt32 {
		panic("dsp: Bins: not a stretch of samples")
	}
	b.at = append(b.at, int32(from), int32(to))
	b.most, b.end = max(b.most, int32(to-from)), max(b.end, int32(to))
}

// Levels gives, for every bin, the largest magnitude and the root mean square of x, and the mean square of y. y may be
// nil; then square is not used. x and y are finite.
func (b *Bins) Levels(peak, rms, square, x, y []float64) {
	b.levels(peak, rms, square, x, y, hasAVX2)
}

func (b *Bins) levels(peak, rms, square, x, y []float64, vectors bool) {
	n := len(b.at) / 2
	if n == 0 {
		return
	}
	if y == nil {
		y, square = x, rms // a bin's square is written first
	}
	if int(b.end) > min(len(x), len(y)) {
		panic("dsp: Bins: samples missing")
	}
	peak, rms, square = peak[:n], rms[:n], square[:n]
	if vectors {
		levelsAVX2(b, &peak[0], &rms[0], &square[0], &x[0], &y[0])
		return
	}
	levelsPlain(b, peak, rms, square, x, y)
}

func levelsPlain(b *Bins, peak, rms, square, x, y []float64) {
	for i := range peak {
		u, v := x[b.at[2*i]:b.at[2*i+1]], y[b.at[2*i]:b.at[2*i+1]]
		v = v[:len(u)]
		top := uint64(0) // the bits of a magnitude keep its order and need no branch, which noise would mispredict
		var s, t [4]float64
		for j, w := range u {
			top = max(top, math.Float64bits(w)&^(1<<63))
			s[j&3] += float64(w * w)
			t[j&3] += float64(v[j] * v[j])
		}
		n := float64(len(u))
		square[i] = ((t[0] + t[1]) + (t[2] + t[3])) / n
		rms[i] = math.Sqrt(((s[0] + s[1]) + (s[2] + s[3])) / n)
		peak[i] = math.Float64frombits(top)
	}
}
