package duty

import (
	"math"
	"math/rand/v2"
	"testing"
)

// One-sided run lengths of reference/methods.md 6.2 (Markov-chain figures; k = 0.5: 335, 931, 18,960, as in textbook
// tables of the CUSUM chart, e.g. Montgomery, Introduction to Statistical Quality Control, where the two-sided values
// are 168 and 465 for h = 4 and 5; from memory). The approximation is good to about 2 %.
func TestRunLengthAgreesWithTables(t *testing.T) {
	for _, c := range []struct{ k, h, want float64 }{
		{0.25, 8, 737}, {0.5, 4, 335}, {0.5, 5, 931}, {0.5, 8, 18960}, {1, 4, 14510},
	} {
		if got := RunLength(c.k, c.h); math.Abs(got/c.want-1) > 0.07 {
			t.Errorf("k %g h %g: %.0f, table %g", c.k, c.h, got, c.want)
		}
	}
	if arl := RunLength(CusumK, CusumLimit) / 2; arl < 1e7 {
		t.Errorf("two-sided run length %.3g blocks, the doc says about 2e7", arl)
	}
}

func TestCusumFindsASmallLastingShift(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	var sum, worst int
	for range 200 {
		var c Cusum
		n := 0
		for math.Abs(c.Step(2+r.NormFloat64())) < 1 {
			n++
		}
		sum += n
		worst = max(worst, n)
	}
	// Siegmund's delay for a drift D = 2−1 with b = 9.166: (e^(−2Db) + 2Db − 1)/(2D²) = 8.7.
	if mean := float64(sum)/200 + 1; math.Abs(mean-8.7) > 1 {
		t.Errorf("mean delay %.1f blocks, expected 8.7", mean)
	}
	var c Cusum
	for range 100 {
		c.Step(math.NaN())
		c.Step(-50)
	}
	if c.Down != 2*CusumLimit || c.Up != 0 {
		t.Errorf("%+v", c)
	}
}
