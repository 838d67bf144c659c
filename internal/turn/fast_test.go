package turn

import (
	"testing"

	"pgregory.net/rapid"
)

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

// Widths are rounded up by less than 0.4 %, and a rung that is come back to is the same.
func TestLadder(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var l ladder
		for range rapid.IntRange(1, 30).Draw(t, "steps") {
			sigma := rapid.Float64Range(0.8, 20).Draw(t, "sigma")
			_, r := l.step(sigma)
			if !r.has(sigma) || !(r.hi >= sigma && r.hi < sigma*roundedUp) {
				t.Fatalf("σ %g taken as %+v", sigma, *r)
			}
			var alone ladder
			if _, a := alone.step(sigma); *a != *r {
				t.Fatalf("σ %g: %+v, at first %+v", sigma, *r, *a)
			}
		}
	})
}

// lineAt is the value at a position of a signal whose first sample lies at from.
func lineAt(x []float64, from int64, pos, sigma float64) float64 {
	var l ladder
	fit, _ := l.step(sigma)
	y := make([]float64, 1)
	fit.At([2][]float64{y}, []float64{pos}, [2][]float64{x}, from)
	return y[0]
}
