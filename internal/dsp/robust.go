package dsp

import (
	"math"
	"slices"
)

// MADToSigma turns a median absolute deviation into the standard deviation of a normal sample: 1/Φ⁻¹(3/4).
const MADToSigma = 1.4826022185056018

// Median gives the median of the values that are not NaN; NaN when there is none. x is not changed.
func Median(x []float64) float64 { return Quantile(x, 0.5) }

// MAD gives the median absolute deviation from the median (not scaled; see MADToSigma) of the values that are not NaN.
func MAD(x []float64) float64 {
	w := finite(x)
	m := quantileInPlace(w, 0.5)
	for i := range w {
		w[i] = math.Abs(w[i] - m)
	}
	return quantileInPlace(w, 0.5)
}

// Quantile gives the q-quantile (0..1) of the values that are not NaN, linear between order statistics (Hyndman and
// Fan, type 7); NaN when there is none. x is not changed.
func Quantile(x []float64, q float64) float64 { return quantileInPlace(finite(x), q) }

// MedianInPlace is Median without the copy: x must hold no NaN and is reordered.
func MedianInPlace(x []float64) float64 { return quantileInPlace(x, 0.5) }

func finite(x []float64) []float64 {
	w := make([]float64, 0, len(x))
	for _, v := range x {
		if !math.IsNaN(v) {
			w = append(w, v)
		}
	}
	return w
}

func quantileInPlace(w []float64, q float64) float64 {
	n := len(w)
	if n == 0 || math.IsNaN(q) {
		return math.NaN()
	}
	h := math.Max(0, math.Min(1, q)) * float64(n-1)
	k := int(h)
	v := nth(w, k)
	if frac := h - float64(k); frac > 0 { // the next one up is the smallest of what lies behind k
		v += frac * (slices.Min(w[k+1:]) - v)
	}
	return v
}

// nth moves the k-th smallest value to place k, smaller ones before it, and returns it. Quickselect with the median
// of three as pivot. Values are moved without a branch on what they are, which noise would mispredict; where the pivot
// is the smallest there is (many equal values: a flat sensor), all that equal it are set aside together.
func nth(w []float64, k int) float64 {
	lo, hi := 0, len(w)-1
	for lo < hi {
		p := middle(w[lo], w[lo+(hi-lo)/2], w[hi])
		if p-p != 0 { // has no differences
			slices.Sort(w[lo : hi+1])
			break
		}
		at := below(w[lo:hi+1], p)
		if at > 0 {
			if k < lo+at {
				hi = lo + at - 1
			} else {
				lo += at
			}
			continue
		}
		at = upTo(w[lo:hi+1], p)
		if k < lo+at {
			return p
		}
		lo += at
	}
	return w[k]
}

// below moves the values under p to the front and tells how many they are. The sign of the difference is what counts.
func below(w []float64, p float64) int {
	n := 0
	for i, v := range w {
		w[i] = w[n]
		w[n] = v
		n += int(math.Float64bits(v-p) >> 63)
	}
	return n
}

// upTo does the same with the values up to p.
func upTo(w []float64, p float64) int {
	n := 0
	for i, v := range w {
		w[i] = w[n]
		w[n] = v
		n += 1 - int(math.Float64bits(p-v)>>63)
	}
	return n
}

func middle(a, b, c float64) float64 {
	return max(min(a, b), min(max(a, b), c))
}

// TheilSen fits y = a + b*x by the median of the slopes of all pairs with different x; a is the median of y - b*x.
// Up to 29 % of the points may be wild. NaN, NaN when no pair has different x. It costs n²/2 slopes: thin long
// records first. Source: Sen, J. Am. Stat. Assoc. 63 (1968) 1379.
func TheilSen(x, y []float64) (a, b float64) {
	if len(x) != len(y) {
		panic("dsp: TheilSen: x and y differ in length")
	}
	var s []float64
	for i := range x {
		for j := i + 1; j < len(x); j++ {
			if d := x[j] - x[i]; d != 0 {
				s = append(s, (y[j]-y[i])/d)
			}
		}
	}
	b = Median(s)
	r := make([]float64, len(x))
	for i := range x {
		r[i] = y[i] - b*x[i]
	}
	return Median(r), b
}
