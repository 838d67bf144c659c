package dsp

import (
	"math"
	"math/big"
	"testing"

	"pgregory.net/rapid"
)

// Both are within one unit in the last place of the library's, which is itself within one of the truth; both forms give
// the same bits, and what is not usual is the library's to the bit.
func TestLogsAndExps(t *testing.T) {
	odd := rapid.SampledFrom([]float64{0, math.Copysign(0, -1), -3, math.Inf(1), math.Inf(-1), math.NaN(), 5e-324, 0x1p-1022, math.MaxFloat64, 700, 701, -700, -745.2, 710, 1})
	for name, c := range map[string]struct {
		of    func(dst, x []float64, vectors bool)
		want  func(float64) float64
		usual func(x float64) bool
		value *rapid.Generator[float64]
	}{
		"log": {logs, math.Log, func(x float64) bool { return x >= 0x1p-1022 && x <= math.MaxFloat64 },
			rapid.OneOf(rapid.Float64Range(0x1p-1022, math.MaxFloat64), rapid.Float64Range(0.5, 2), rapid.Float64Range(1e3, 1e8))},
		"exp": {exps, math.Exp, func(x float64) bool { return math.Abs(x) <= 700 }, rapid.OneOf(rapid.Float64Range(-700, 700), rapid.Float64Range(-3, 3))},
	} {
		rapid.Check(t, func(t *rapid.T) {
			x := rapid.SliceOfN(c.value, 0, 30).Draw(t, "x")
			for range rapid.IntRange(0, 2).Draw(t, "odd ones") {
				x = append(x, odd.Draw(t, "odd"))
				i := rapid.IntRange(0, len(x)-1).Draw(t, "at")
				x[i], x[len(x)-1] = x[len(x)-1], x[i]
			}
			got, plain := make([]float64, len(x)), make([]float64, len(x))
			c.of(got, x, hasAVX2)
			c.of(plain, x, false)
			for i, v := range x {
				want := c.want(v)
				if math.Float64bits(got[i]) != math.Float64bits(plain[i]) {
					t.Fatalf("%s(%g) = %.17g, plain form %.17g", name, v, got[i], plain[i])
				}
				if !c.usual(v) && math.Float64bits(got[i]) != math.Float64bits(want) {
					t.Fatalf("%s(%g) = %g, want %g", name, v, got[i], want)
				}
				if c.usual(v) && math.Abs(got[i]-want) > 1.01*(math.Nextafter(math.Abs(want), math.Inf(1))-math.Abs(want)) {
					t.Fatalf("%s(%.17g) = %.17g, want %.17g", name, v, got[i], want)
				}
			}
		})
	}
}

// ln 2 and e to 20 places, from memory.
func TestLogsAndExpsOfConstants(t *testing.T) {
	ln2, _, err := big.ParseFloat("0.69314718055994530942", 10, 80, big.ToNearestEven)
	e, _, err2 := big.ParseFloat("2.71828182845904523536", 10, 80, big.ToNearestEven)
	if err != nil || err2 != nil {
		t.Fatal(err, err2)
	}
	x := []float64{2, 4, 0.5, 1}
	Logs(x, x)
	l, _ := ln2.Float64()
	for i, want := range []float64{l, 2 * l, -l, 0} {
		if x[i] != want {
			t.Errorf("log %d: %.17g, want %.17g", i, x[i], want)
		}
	}
	y := []float64{1, 0}
	Exps(y, y)
	if w, _ := e.Float64(); math.Abs(y[0]-w) > 5e-16 || y[1] != 1 {
		t.Errorf("e is %.17g, want %.17g; its power of nought %g", y[0], w, y[1])
	}
}

func BenchmarkLogs(b *testing.B) {
	x, y := make([]float64, 1000), make([]float64, 1000)
	for i := range x {
		x[i] = 1e5 * float64(i+7)
	}
	for name, vectors := range map[string]bool{"chosen": hasAVX2, "plain": false} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				logs(y, x, vectors)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(x)), "ns/value")
		})
	}
}
