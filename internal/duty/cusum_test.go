package duty

import (
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"
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

// runs plays the test on Gaussian values with a shift and a lag-1 correlation until it signals, and gives the mean
// length and its standard error.
func runs(seed uint64, n int, k, h, shift, phi float64) (mean, se float64) {
	r := rand.New(rand.NewPCG(seed, 4))
	var sum, sq float64
	for range n {
		var c Cusum
		x := r.NormFloat64()
		for i := 1; ; i++ {
			if c.step(x+shift, k, h); c.Up > h || c.Down > h {
				sum += float64(i)
				sq += float64(i) * float64(i)
				break
			}
			x = phi*x + math.Sqrt(1-phi*phi)*r.NormFloat64()
		}
	}
	mean = sum / float64(n)
	return mean, math.Sqrt((sq/float64(n) - mean*mean) / float64(n))
}

// Two-sided run lengths of the tabular CUSUM, k = 0.5, in Montgomery, Introduction to Statistical Quality Control, table
// of ARL performance (figures from memory; it gives credit to Hawkins 1993 for the Markov chain behind them), with the
// clip at four spreads, which costs nothing at these shifts.
func TestMeasuredRunLengthAgreesWithTables(t *testing.T) {
	for _, c := range []struct{ h, shift, want float64 }{
		{4, 0, 168}, {4, 0.5, 26.6}, {4, 1, 8.38}, {4, 2, 3.34}, {5, 0, 465}, {5, 0.5, 38.0}, {5, 1, 10.4}, {5, 2, 4.01},
	} {
		got, se := runs(1, 2500, 0.5, c.h, c.shift, 0)
		t.Logf("h %g, shift %g: %.2f ± %.2f, table %g", c.h, c.shift, got, se, c.want)
		if math.Abs(got-c.want) > 4*se+0.005*c.want {
			t.Errorf("h %g, shift %g: %.2f ± %.2f, table %g", c.h, c.shift, got, se, c.want)
		}
	}
}

// What is missing, infinite or wild does no harm: a missing value changes nothing, and no single value can signal.
func TestCusumIsNotHarmed(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var with, without Cusum
		for range rapid.IntRange(1, 200).Draw(t, "n") {
			switch rapid.IntRange(0, 5).Draw(t, "kind") {
			case 0:
				before := with
				if with.Step(math.NaN()); with != before {
					t.Fatalf("a missing value changed %+v to %+v", before, with)
				}
			case 1:
				z := rapid.SampledFrom([]float64{math.Inf(1), math.Inf(-1), 1e300, -1e300}).Draw(t, "wild")
				before := math.Max(with.Up, with.Down)
				with.Step(z)
				without.Step(z)
				if after := math.Max(with.Up, with.Down); after-before > CusumClip-CusumK+1e-9 {
					t.Fatalf("one value moved it from %g to %g", before, after)
				}
			default:
				z := rapid.Float64Range(-6, 6).Draw(t, "z")
				if a, b := with.Step(z), without.Step(z); a != b || math.IsNaN(a) || math.Abs(a) > 2 {
					t.Fatalf("%g with missing values between, %g without", a, b)
				}
			}
			if with != without || with.Up < 0 || with.Down < 0 {
				t.Fatalf("%+v with missing values between, %+v without", with, without)
			}
		}
	})
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
