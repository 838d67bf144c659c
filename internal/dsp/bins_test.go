package dsp

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The levels are those of their plain definitions, and both forms give the same bits.
func TestBinsLevels(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var b Bins
		end := rapid.IntRange(0, 3).Draw(t, "first")
		n := rapid.IntRange(1, 30).Draw(t, "bins")
		for range n {
			from := max(0, end-rapid.IntRange(0, 1).Draw(t, "overlap"))
			end = from + rapid.IntRange(1, 14).Draw(t, "samples")
			b.Add(from, end)
		}
		var x, y []float64
		for i, c := range noise(2*end, 1<<20, rapid.Uint32().Draw(t, "seed")) {
			if i < end {
				x = append(x, float64(c)/7)
			} else {
				y = append(y, float64(c)/700)
			}
		}
		if rapid.Bool().Draw(t, "one signal") {
			y = nil
		}
		var got, plain [3][]float64
		for k := range got {
			got[k], plain[k] = make([]float64, n), make([]float64, n)
		}
		b.Levels(got[0], got[1], got[2], x, y)
		b.levels(plain[0], plain[1], plain[2], x, y, false)
		for i := range n {
			var peak, sx, sy float64
			from, to := b.at[2*i], b.at[2*i+1]
			for j := from; j < to; j++ {
				peak = math.Max(peak, math.Abs(x[j]))
				sx += x[j] * x[j]
				if y != nil {
					sy += y[j] * y[j]
				}
			}
			m := float64(to - from)
			for k, want := range []float64{peak, math.Sqrt(sx / m), sy / m} {
				if math.Abs(got[k][i]-want) > 1e-14*want {
					t.Fatalf("bin %d of samples %d to %d, level %d: %g, want %g", i, from, to, k, got[k][i], want)
				}
				if math.Float64bits(got[k][i]) != math.Float64bits(plain[k][i]) {
					t.Fatalf("bin %d of samples %d to %d, level %d: %.17g, plain form %.17g", i, from, to, k, got[k][i], plain[k][i])
				}
			}
		}
	})
}

func TestBinsRefuse(t *testing.T) {
	refused := func(f func()) (yes bool) {
		defer func() { yes = recover() != nil }()
		f()
		return false
	}
	var b Bins
	for _, c := range [][2]int{{-1, 2}, {3, 3}, {3, 2}, {0, math.MaxInt32 + 1}} {
		if !refused(func() { b.Add(c[0], c[1]) }) {
			t.Errorf("bin of samples %d to %d taken", c[0], c[1])
		}
	}
	b.Add(0, 4)
	one, x := make([]float64, 1), make([]float64, 3)
	if !refused(func() { b.Levels(one, one, one, x, x) }) {
		t.Error("a bin beyond the signal's end taken")
	}
}

func BenchmarkBins(b *testing.B) {
	var bins Bins
	const n = 960
	for i := range n {
		bins.Add(int(4.74*float64(i)), int(4.74*float64(i+1)))
	}
	var x []float64
	for _, c := range noise(5*n, 1000, 1) {
		x = append(x, float64(c))
	}
	p, r, s := make([]float64, n), make([]float64, n), make([]float64, n)
	for name, vectors := range map[string]bool{"chosen": hasAVX2, "plain": false} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				bins.levels(p, r, s, x, x, vectors)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/(float64(b.N)*4.74*n), "ns/sample")
		})
	}
}
