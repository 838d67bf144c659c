package turn

import (
	"fmt"
	"math"
	"testing"
)

// What the grid does to a pressure ripple of one shaft order, at each step: in band the Gaussian of σ = half a step
// lowers it by 1 − exp(−(nσ)²/2); beyond the grid's Nyquist, order 180/step, what is left comes back as another order.
// Both in closed form (transform of a Gaussian), less than 1 % of the amplitude apart at enough samples per step. The
// table is the package comment's.
func TestGridErrorByOrder(t *testing.T) {
	const amp = 1e5
	for _, c := range []struct {
		step, rpm, rate float64
	}{
		{0.1, 100, 51200}, {0.2, 300, 51200}, {0.5, 300, 51200}, {0.5, 1200, 51200}, {1, 600, 51200},
	} {
		nyquist := 180 / c.step
		line := fmt.Sprintf("step %g°, %g rpm:", c.step, c.rpm)
		for _, share := range []float64{0.1, 0.25, 0.5, 1.5, 1.9} {
			n := math.Round(share * nyquist)
			s := newShaft(c.rate, 4.6*60/c.rpm, steady(c.rpm), nil, 1)
			conv := converter(t, Config{Rate: c.rate, Step: c.step, Throws: []ThrowConfig{{Pressure: [2]Channel{{Gain: 0.1}, None()}}}})
			var got float64
			for _, turn := range run(conv, s.frames(1, func(_ int, deg float64, _ int) float64 {
				return (3e6 + amp*math.Cos(n*deg*math.Pi/180)) * 10
			})) {
				for _, th := range turn.Throws { // amplitude at the order where it stands on the grid
					a := n
					if a > nyquist {
						a = 2*nyquist - a
					}
					from, to := int(math.Round(th.Grid.Index(0))), int(math.Round(th.Grid.Index(360)))
					var re, im float64
					for i := from; i < to; i++ {
						sin, cos := math.Sincos(a * th.Grid.At(i) * math.Pi / 180)
						re += (th.P[0][i] - 3e6) * cos
						im += (th.P[0][i] - 3e6) * sin
					}
					got = 2 * math.Hypot(re, im) / float64(to-from) / amp
				}
			}
			sigma := math.Max(c.step/2, 0.8*c.rpm*6/c.rate) * math.Pi / 180
			want := math.Exp(-math.Pow(n*sigma, 2) / 2)
			line += fmt.Sprintf("  order %.0f ×%.4f", n, got)
			if got == 0 || math.Abs(got-want) > 0.01 {
				t.Errorf("step %g°, %g rpm: order %g comes through %.4f times, closed form %.4f", c.step, c.rpm, n, got, want)
			}
		}
		t.Log(line)
	}
}
