package turn

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The branch-free peak is the plain one, to the last bit.
func TestPeakSumIsThePlainLoop(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOf(rapid.Float64Range(-1e9, 1e9)).Draw(t, "x")
		var peak, sum float64
		for _, s := range x {
			peak = math.Max(peak, math.Abs(s))
			sum += s * s
		}
		if p, s := peakSum(x); p != peak || s != sum {
			t.Fatalf("%g and %g, plain loop %g and %g", p, s, peak, sum)
		}
	})
}

// A history holds what a plain slice would, whatever is added and dropped.
func TestHistoryIsASlice(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var h history
		var want []float64
		v := 0.0
		for range rapid.IntRange(1, 60).Draw(t, "steps") {
			if n := rapid.IntRange(0, len(want)).Draw(t, "drop"); rapid.Bool().Draw(t, "drops") {
				h.drop(n)
				want = want[n:]
			}
			add := h.more(rapid.IntRange(0, 40).Draw(t, "more"))
			for i := range add {
				v++
				add[i] = v
				want = append(want, v)
			}
			got := h.live()
			if len(got) != len(want) {
				t.Fatalf("%d values, want %d", len(got), len(want))
			}
			for i := range got {
				if got[i] != want[i] {
					t.Fatalf("value %d: %g, want %g", i, got[i], want[i])
				}
			}
		}
	})
}

// The value with its weights laid once is the line fitted under the Gaussian by its normal equations, written out.
func TestKernelIsTheLineFit(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		pos := rapid.Float64Range(100, 200).Draw(t, "pos")
		sigma := rapid.Float64Range(0.8, 20).Draw(t, "sigma")
		x := rapid.SliceOfN(rapid.Float64Range(0, 4e6), 400, 400).Draw(t, "x")
		var k kernel
		k.lay(pos, sigma)
		k.line()
		if !(k.hi >= sigma && k.hi < sigma*roundedUp) {
			t.Fatalf("σ %g laid as %g", sigma, k.hi)
		}
		var s0, s1, s2, y0, y1 float64
		for i := range k.h {
			d := float64(k.first+int64(i)) - pos
			w := math.Exp(-d * d / (2 * k.hi * k.hi))
			y := x[k.first+int64(i)]
			s0, s1, s2, y0, y1 = s0+w, s1+w*d, s2+w*d*d, y0+w*y, y1+w*d*y
		}
		want := (s2*y0 - s1*y1) / (s0*s2 - s1*s1)
		if got := k.value(x[k.first:]); math.Abs(got-want) > 1e-10*4e6 {
			t.Fatalf("%g, want %g", got, want)
		}
	})
}
