package frame_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/frame"
	"lapwing/internal/turn"
)

// The whole way from samples to angles with a 60-2 wheel and a speed that swings 1 % twice a turn, against the closed form
// of the shaft's motion: at most 0.02° RMS. One mark a turn would be 0.2° off here (amplitude 0.29°).
func TestAngleWithAToothedWheel(t *testing.T) {
	const ripple = 0.01
	wheel := frame.Wheel{Teeth: 60, Missing: 2}
	for name, c := range map[string]struct {
		rate, rpm, ramp, noise float64
		gone                   bool // one tooth a turn lost
	}{
		"600 rpm, 25.6 kHz":             {25600, 600, 0, 0, false},
		"600 rpm, noise 0.5 %":          {25600, 600, 0, 50, false},
		"1000 rpm, 51.2 kHz":            {51200, 1000, 0, 50, false},
		"300 rpm, 10 % a second":        {25600, 300, 0.1, 50, false},
		"1800 rpm, 51.2 kHz":            {51200, 1800, 0, 0, false},
		"600 rpm, one tooth broken off": {25600, 600, 0, 50, true},
	} {
		t.Run(name, func(t *testing.T) {
			turns := func(s float64) float64 {
				u := -0.3 + c.rpm/60*(s+c.ramp*s*s/2)
				return u - ripple/(4*math.Pi)*math.Sin(4*math.Pi*u)
			}
			r := rand.New(rand.NewPCG(5, 6))
			x := make([]int32, int(2.5*c.rate))
			for i := range x {
				now := turns(float64(i) / c.rate)
				at := (now - math.Floor(now)) * 60
				tooth := int(math.Floor(at + 0.25))
				d := at - float64(tooth) // -0.25..0.75 pitches after a tooth's mark
				v := 0.0
				if n := tooth % 60; n < 58 && !(c.gone && n == 31) {
					v = 10000 * min(max(min(0.5+d/0.16, 0.5+(0.5-d)/0.16), 0), 1)
				}
				x[i] = int32(math.Round(200 + v + c.noise*r.NormFloat64()))
			}
			asm, err := frame.New(frame.Config{Rate: c.rate, Inputs: 1, Auto: true, Wheel: wheel})
			if err != nil {
				t.Fatal(err)
			}
			conv, err := turn.New(turn.Config{Rate: c.rate, Marks: turn.Marks{Inner: wheel.Angles()}, Throws: []turn.ThrowConfig{{DeadCentreDeg: 40,
				Pressure: [2]turn.Channel{{ID: "p", Input: 0, Gain: 1}, turn.None()}}}})
			if err != nil {
				t.Fatal(err)
			}
			var sq, n, worst float64
			valid := 0
			reasons := map[string]int{}
			for i := 0; i < len(x); i += 500 {
				b := acq.Block{Seq0: int64(i), N: min(500, len(x)-i), Counts: [][]int32{x[i:min(i+500, len(x))]}}
				err := asm.Add(&b, func(f *frame.Frame) {
					conv.Add(f, func(tn *turn.Turn) {
						if reasons[tn.Reason]++; !tn.Valid() {
							return
						}
						valid++
						th := &tn.Throws[0]
						for k, pos := range th.Pos {
							want := 360*turns(pos/c.rate) - 40
							e := math.Remainder(want-th.Grid.At(k), 360)
							sq, n, worst = sq+e*e, n+1, max(worst, math.Abs(e))
						}
					})
				})
				if err != nil {
					t.Fatal(err)
				}
			}
			rms := math.Sqrt(sq / n)
			t.Logf("%.4f° RMS, %.4f° at most, over %d turns", rms, worst, valid)
			if whole := int(turns(2.5)); valid < whole-7 || !(rms <= 0.02) {
				t.Errorf("%.4f° RMS over %d valid turns of %d (%v)", rms, valid, whole, reasons)
			}
		})
	}
}
