package dsp

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// A parabola comes through exactly: x + lead1·x′ + lead2·x″ and σ²/2·x″, which the Gaussian adds (as cut off and sampled:
// its own second moment, here of the plain sum). Both forms give the same bits.
func TestRestore(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sigma := rapid.Float64Range(0.8, 30).Draw(t, "sigma")
		reach := int(math.Ceil(4 * sigma))
		n := rapid.IntRange(1, 11).Draw(t, "positions")
		step := rapid.Float64Range(0.01, 20).Draw(t, "step")
		pos := make([]float64, n)
		for i := range pos {
			pos[i] = float64(reach) + rapid.Float64Range(0.5, 1.5).Draw(t, "first") + step*float64(i)
			if i > 0 {
				pos[i] = max(pos[i], pos[i-1])
			}
		}
		a, b, c := rapid.Float64Range(0, 1e7).Draw(t, "a"), rapid.Float64Range(-1e4, 1e4).Draw(t, "b"), rapid.Float64Range(-100, 100).Draw(t, "c")
		mid := pos[n/2]
		x := make([]float64, int(pos[n-1])+reach+3)
		for i := range x {
			d := float64(i) - mid
			x[i] = a + b*d + c*d*d
		}
		lead1, lead2 := sigma*rapid.Float64Range(0, 2).Draw(t, "lead1"), sigma*sigma*rapid.Float64Range(0, 10).Draw(t, "lead2")
		var l LineFit
		l.Set(sigma, reach)
		got, plain := make([]float64, n), make([]float64, n)
		l.restore(got, pos, x, 0, lead1, lead2, hasAVX2)
		l.restore(plain, pos, x, 0, lead1, lead2, false)
		for i, p := range pos {
			var s0, s2 float64
			for j := int(nearest(p)) - reach; j <= int(nearest(p))+reach; j++ {
				d := float64(j) - p
				w := math.Exp(-d * d / (2 * sigma * sigma))
				s0, s2 = s0+w, s2+w*d*d
			}
			d := p - mid
			want := a + b*d + c*d*d + lead1*(b+2*c*d) + (s2/s0+2*lead2)*c
			scale := a + (math.Abs(b)+math.Abs(2*c*d))*(float64(len(x))+lead1) + math.Abs(c)*(float64(len(x)*len(x))+2*lead2)
			if !(math.Abs(got[i]-want) <= 1e-10*scale) {
				t.Fatalf("position %d of %d: %.12g, want %.12g", i, n, got[i], want)
			}
			if math.Float64bits(got[i]) != math.Float64bits(plain[i]) {
				t.Fatalf("position %d of %d: %.17g, plain form %.17g", i, n, got[i], plain[i])
			}
		}
	})
}

func BenchmarkRestore(b *testing.B) {
	var l LineFit
	l.Set(3, 12)
	const n = 40
	x, y, pos := make([]float64, 300), make([]float64, n), make([]float64, n)
	for i := range pos {
		pos[i] = 20 + 4.74*float64(i)
	}
	for name, vectors := range map[string]bool{"chosen": hasAVX2, "plain": false} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				l.restore(y, pos, x, 0, 2, 9, vectors)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*n), "ns/position")
		})
	}
}
