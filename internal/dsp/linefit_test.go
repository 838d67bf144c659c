package dsp

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// The heights are those of the normal equations written out, and both forms give the same bits, alone or together.
func TestLineFitIsTheNormalEquations(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sigma := rapid.Float64Range(0.8, 12).Draw(t, "sigma")
		reach := int(math.Ceil(4 * sigma))
		from := rapid.Int64Range(-1000, 1000).Draw(t, "from")
		step := rapid.Float64Range(0.01, 20).Draw(t, "step")
		n := rapid.IntRange(1, 11).Draw(t, "positions")
		pos := make([]float64, n)
		for i := range pos {
			pos[i] = float64(from) + float64(reach) + rapid.Float64Range(0, 1).Draw(t, "offset") + step*float64(i)
		}
		pos[0] = rapid.SampledFrom([]float64{pos[0], math.Floor(pos[0]), math.Floor(pos[0]) + 0.5}).Draw(t, "first")
		for i := 1; i < n; i++ {
			pos[i] = max(pos[i], pos[i-1])
		}
		var x [2][]float64
		for k := range x {
			for _, c := range noise(int(pos[n-1]-float64(from))+reach+3, 1<<20, rapid.Uint32().Draw(t, "seed")) {
				x[k] = append(x[k], 2e6+float64(c))
			}
		}
		var l LineFit
		l.Set(sigma, reach)
		got := [2][]float64{make([]float64, n), make([]float64, n)}
		l.At(got, pos, x, from)
		plain := [2][]float64{make([]float64, n), make([]float64, n)}
		l.plain(plain, pos, x, int(-from)-reach)
		alone := make([]float64, n)
		l.At([2][]float64{alone}, pos, [2][]float64{x[1]}, from)
		for i, p := range pos {
			for k := range x {
				var s0, s1, s2, y0, y1 float64
				for j := int(nearest(p)) - reach; j <= int(nearest(p))+reach; j++ {
					d := float64(j) - p
					w := math.Exp(-d * d / (2 * sigma * sigma))
					y := x[k][j-int(from)] - 2e6
					s0, s1, s2, y0, y1 = s0+w, s1+w*d, s2+w*d*d, y0+w*y, y1+w*d*y
				}
				want := 2e6 + (s2*y0-s1*y1)/(s0*s2-s1*s1)
				if math.Abs(got[k][i]-want) > 1e-12*2e6 {
					t.Fatalf("position %d of %d, signal %d: %.12g, want %.12g", i, n, k, got[k][i], want)
				}
				if math.Float64bits(got[k][i]) != math.Float64bits(plain[k][i]) {
					t.Fatalf("position %d of %d, signal %d: %.17g, plain form %.17g", i, n, k, got[k][i], plain[k][i])
				}
			}
			if alone[i] != got[1][i] {
				t.Fatalf("position %d: %.17g alone, %.17g beside another", i, alone[i], got[1][i])
			}
		}
	})
}

func TestLineFitWantsItsSamples(t *testing.T) {
	var l LineFit
	l.Set(1, 4)
	x, y := make([]float64, 9), make([]float64, 1)
	for _, c := range []struct {
		pos float64
		bad bool
	}{{4, false}, {4.4, false}, {3.4, true}, {4.6, true}, {math.NaN(), true}} {
		func() {
			defer func() {
				if bad := recover() != nil; bad != c.bad {
					t.Errorf("position %g: refused %v, want %v", c.pos, bad, c.bad)
				}
			}()
			l.At([2][]float64{y}, []float64{c.pos}, [2][]float64{x}, 0)
		}()
	}
}

func BenchmarkLineFit(b *testing.B) {
	var l LineFit
	l.Set(2.37, 10)
	const n = 40
	x := [2][]float64{make([]float64, 300), make([]float64, 300)}
	y := [2][]float64{make([]float64, n), make([]float64, n)}
	pos := make([]float64, n)
	for i := range pos {
		pos[i] = 20 + 4.74*float64(i)
	}
	for name, f := range map[string]func(){"chosen": func() { l.At(y, pos, x, 0) }, "plain": func() { l.plain(y, pos, x, -10) }} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				f()
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*n), "ns/position")
		})
	}
}
