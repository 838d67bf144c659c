package turn

import (
	"math"
	"math/cmplx"
	"testing"
)

// A sum of steady sinusoids goes through a passage exactly: order n comes out multiplied by
// 1/(1 − (f/f₀)² + j f/(f₀Q)). Undone, it must be what the Gaussian alone makes of the true pressure.
func TestPassageUndone(t *testing.T) {
	orders := []float64{1, 2, 9, 30, 70, 120}
	amps := []float64{1.5e6, 4e5, 1e5, 3e4, 1e4, 5e3}
	for _, c := range []struct {
		rate, rpm float64
		p         Passage
	}{{51200, 700, Passage{900, 8}}, {51200, 300, Passage{400, 15}}, {51200, 1400, Passage{2000, 5}}, {25600, 600, Passage{1500, 10}}} {
		s := newShaft(c.rate, 7*60/c.rpm, steady(c.rpm), nil, 1)
		sum := func(deg float64, through func(hz float64) complex128) float64 {
			v := 3e6
			for i, n := range orders {
				v += amps[i] * real(through(n*c.rpm/60)*cmplx.Exp(complex(0, (n*deg+10*n*n)*math.Pi/180)))
			}
			return v
		}
		passage := func(hz float64) complex128 {
			u := hz / c.p.Hz
			return 1 / complex(1-u*u, u/c.p.Q)
		}
		sigma := max(0.25/(6*c.rpm), 0.8/c.rate, gaussianMinus/math.Min(2.5*c.p.Hz, 5000)) // s
		smooth := func(hz float64) complex128 { return complex(math.Exp(-math.Pow(2*math.Pi*hz*sigma, 2)/2), 0) }
		frames := s.frames(1, func(_ int, deg float64, _ int) float64 { return sum(deg, passage) / countPa })
		worst := func(p Passage) (w float64) {
			conv := converter(t, Config{Rate: c.rate, Throws: []ThrowConfig{{DeadCentreDeg: 5, Pressure: [2]Channel{{Gain: countPa, Passage: p}, None()}}}})
			for _, turn := range run(conv, frames) {
				for _, th := range turn.Throws {
					for i, got := range th.P[0] {
						w = math.Max(w, math.Abs(got-sum(360*float64(turn.Number)+5+th.Grid.At(i), smooth)))
					}
				}
			}
			return w
		}
		undone, left := worst(c.p), worst(Passage{})
		t.Logf("%g Hz, %g rpm, %+v: off by %.0f Pa undone, %.0f Pa left as it is", c.rate, c.rpm, c.p, undone, left)
		if undone == 0 || undone > 150 { // 0.01 % of the first order's amplitude
			t.Errorf("%g Hz, %g rpm, %+v: off by %g Pa", c.rate, c.rpm, c.p, undone)
		}
		if left < 5000 {
			t.Errorf("%g Hz, %g rpm, %+v: only %g Pa without the inverse; the case does not bite", c.rate, c.rpm, c.p, left)
		}
	}
}
