package dsp

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestCountsOfEveryLength(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Int32(), 1, 40).Draw(t, "x")
		gain, offset := rapid.Float64Range(-10, 10).Draw(t, "gain"), rapid.Float64Range(-1e6, 1e6).Draw(t, "offset")
		y := make([]float64, len(x))
		Values(y, x, gain, offset)
		lo, hi := slices.Min(x), slices.Max(x)
		if a, b := Extremes(x); a != lo || b != hi {
			t.Fatalf("extremes %d, %d, want %d, %d", a, b, lo, hi)
		}
		for i, c := range x {
			if want := float64(gain*float64(c)) + offset; math.Float64bits(y[i]) != math.Float64bits(want) {
				t.Fatalf("value %d: %g, want %g", i, y[i], want)
			}
		}
	})
}
