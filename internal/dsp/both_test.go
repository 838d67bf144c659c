package dsp

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// plain is the section loop of the textbook, one sample and one section at a time: transposed direct form II.
func plain(s SOS, x []float64) []float64 {
	z := make([][2]float64, len(s))
	y := make([]float64, len(x))
	for i, v := range x {
		for k, c := range s {
			w := c.B0*v + z[k][0]
			z[k][0] = c.B1*v - c.A1*w + z[k][1]
			z[k][1] = c.B2*v - c.A2*w
			v = w
		}
		y[i] = v
	}
	return y
}

// However the stream is cut, and whichever loop is taken, the outputs are the plain loop's to the last bit.
func TestBothIsThePlainLoop(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const rate = 51200
		lo := rapid.Float64Range(100, 8000).Draw(t, "lo")
		hi := rapid.Float64Range(lo+200, 24000).Draw(t, "hi")
		order := rapid.SampledFrom([]int{2, 2, 2, 3}).Draw(t, "order") // 3: no pair of two, each runs alone
		f, err := BandPass(order, lo, hi, rate)
		g, err2 := BandPass(2, 9000, 20000, rate)
		if err != nil || err2 != nil {
			t.Fatal(err, err2)
		}
		x := make([]float64, 3000)
		seed := rapid.Float64Range(1, 2).Draw(t, "seed")
		for i := range x {
			x[i] = 1e3 * math.Sin(seed*float64(i)*float64(i))
		}
		a, b := NewFilter(f), NewFilter(g)
		ya, yb := make([]float64, len(x)), make([]float64, len(x))
		for from := 0; from < len(x); {
			to := min(len(x), from+rapid.IntRange(1, 1500).Draw(t, "block"))
			Both(a, b, ya[from:to], yb[from:to], x[from:to])
			from = to
		}
		wa, wb := plain(f, x), plain(g, x)
		for i := range x {
			if ya[i] != wa[i] || yb[i] != wb[i] {
				t.Fatalf("sample %d: %g and %g, plain loop %g and %g", i, ya[i], yb[i], wa[i], wb[i])
			}
		}
	})
}

// A section whose zeros lie elsewhere does not go the short way.
func TestBothOfOtherFilters(t *testing.T) {
	f, err := LowPass(4, 3000, 51200)
	if err != nil {
		t.Fatal(err)
	}
	if NewFilter(f).twoResonators() {
		t.Fatal("a low-pass taken for resonators")
	}
	x := []float64{1, 2, -3, 4, 0.5, 7}
	ya, yb := make([]float64, len(x)), make([]float64, len(x))
	Both(NewFilter(f), NewFilter(f), ya, yb, x)
	for i, w := range plain(f, x) {
		if ya[i] != w || yb[i] != w {
			t.Fatalf("sample %d: %g, %g, want %g", i, ya[i], yb[i], w)
		}
	}
}

func BenchmarkBoth(b *testing.B) {
	f, err := BandPass(2, 2000, 20000, 51200)
	g, err2 := BandPass(2, 10000, 20000, 51200)
	if err != nil || err2 != nil {
		b.Fatal(err, err2)
	}
	x := make([]float64, 3413)
	for i := range x {
		x[i] = math.Sin(float64(i) * float64(i))
	}
	p, q := NewFilter(f), NewFilter(g)
	y, z := make([]float64, len(x)), make([]float64, len(x))
	b.ReportAllocs()
	for b.Loop() {
		Both(p, q, y, z, x)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(x)), "ns/sample")
}
