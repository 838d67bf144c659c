package dsp

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// Whichever form is taken, the envelope has the plain form's bits.
func TestRectifyForms(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Float64Range(-1e6, 1e6), 0, 60).Draw(t, "x")
		w := rapid.IntRange(-1, 70).Draw(t, "w")
		got, plain := make([]float64, len(x)), make([]float64, len(x))
		Rectify(got, x, w)
		rectifyPlain(plain, x, max(w, 1), 0)
		for i := range x {
			if math.Float64bits(got[i]) != math.Float64bits(plain[i]) {
				t.Fatalf("%d of %d over %d: %.17g, plain form %.17g", i, len(x), w, got[i], plain[i])
			}
		}
	})
}
