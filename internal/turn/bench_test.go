package turn

import (
	"math"
	"testing"

	"lapwing/internal/frame"
)

func TestSteadyStateAllocatesNothing(t *testing.T) {
	cfg, frames := machine(t, 40)
	cfg.Throws[0].Pressure[1].Passage = Passage{900, 8}
	c := converter(t, cfg)
	i, seen := 0, 0
	count := func(t *Turn) {
		if t.Valid() {
			seen++
		}
	}
	next := func() {
		c.Add(frames[i], count)
		i++
	}
	for range 12 {
		next()
	}
	if n := testing.AllocsPerRun(20, next); n != 0 {
		t.Errorf("%g allocations a turn", n)
	}
	if seen < 20 {
		t.Errorf("%d turns", seen)
	}
}

// One cylinder with two pressures and one accelerometer at 51.2 kHz and 700 rpm.
func BenchmarkTurn(b *testing.B) {
	const rate, rpm = 51200, 700
	s := newShaft(rate, 4, steady(rpm), []Ripple{{2, 0.01, 30}}, 1)
	frames := s.frames(3, func(k int, deg float64, n int) float64 { return 1e6 + 4e5*math.Sin(float64(n%977)+deg) })
	c := converter(b, Config{Rate: rate, Marks: Marks{Ripple: []Ripple{{2, 0.01, 30}}}, Throws: []ThrowConfig{{DeadCentreDeg: 40,
		Pressure: [2]Channel{{Input: 0, Gain: 1}, {Input: 1, Gain: 1}}, Accel: []Channel{{Input: 2, Gain: 1e-3}}}}})
	frames = frames[:20]
	span := frames[19].Mark1 - frames[0].Mark0
	whole := math.Round(span)
	f, n, turns := new(frame.Frame), 0, 0
	count := func(t *Turn) {
		if t.Valid() {
			turns++
		}
	}
	b.ReportAllocs()
	for b.Loop() { // the same twenty revolutions again and again, later and later
		*f = *frames[n%20]
		lap := n / 20
		f.Turn = int64(n)
		f.Seq0 += int64(lap) * int64(whole)
		f.Mark0 += float64(lap) * whole
		f.Mark1 += float64(lap) * whole
		if n%20 == 19 {
			f.Mark1 = frames[0].Mark0 + float64(lap+1)*whole
		}
		c.Add(f, count)
		n++
	}
	b.ReportMetric(float64(turns)/b.Elapsed().Seconds(), "turns/s")
	if n > 10 && turns < n/2 {
		b.Fatalf("%d frames, %d turns", n, turns)
	}
}
