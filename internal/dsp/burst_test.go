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

func TestPeakAndMeanSquareArePlain(t *testing.T) {
	if p, at := PeakAbs(nil); p != 0 || at != -1 || !math.IsNaN(MeanSquare(nil)) {
		t.Errorf("of nothing: peak %g at %d, mean square %g", p, at, MeanSquare(nil))
	}
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.OneOf(rapid.Float64Range(-1e6, 1e6), rapid.SampledFrom([]float64{0, math.Copysign(0, -1), -3, 3})), 1, 30).Draw(t, "x")
		peak, at, sum := math.Abs(x[0]), 0, 0.0
		for i, v := range x {
			if math.Abs(v) > peak {
				peak, at = math.Abs(v), i
			}
			sum += v * v
		}
		if p, i := PeakAbs(x); p != peak || i != at {
			t.Fatalf("peak %g at %d, want %g at %d", p, i, peak, at)
		}
		if got, want := MeanSquare(x), sum/float64(len(x)); math.Abs(got-want) > 1e-14*want {
			t.Fatalf("mean square %g, want %g", got, want)
		}
	})
}
