package turn

import (
	"math"
	"testing"

	"lapwing/internal/dsp"
)

// speeds are those between which an event must stand at the same angle.
var speeds = []float64{300, 600, 900, 1200, 1500, 1800}

// A kink in the pressure, as an opening valve makes it: the stroke's exponential rise meets the plateau at an angle. It
// is found where the stroke, fitted well before the kink, crosses the plateau, read well after it. The same angle must
// come out at every speed and through a known passage, whose delay would be 0.7° at 1800 rpm.
func TestAnEventsAngleIsTheSameAtAnySpeed(t *testing.T) {
	const kink, rate = 287.0, 51200.0
	level := func(deg float64) float64 {
		d := math.Mod(deg+720, 360)
		switch {
		case d < 180: // down again, long before
			return 2e6
		case d < kink:
			return math.Max(2e6, 5e6*math.Exp((d-kink)/40))
		case d < 340:
			return 5e6
		}
		return 5e6 - 3e6*(d-340)/20
	}
	for _, way := range []Passage{{}, {Hz: 1100, Q: 4}} {
		var found []float64
		for _, rpm := range speeds {
			s := newShaft(rate, 6.2*60/rpm, steady(rpm), nil, 1)
			x := make([]float64, len(s.theta))
			for i, d := range s.theta {
				x[i] = level(d)
			}
			if way.Hz > 0 {
				x = through(way, x, rate)
			}
			conv := converter(t, Config{Rate: rate, Throws: []ThrowConfig{{Pressure: [2]Channel{{Gain: 10, Passage: way}, None()}}}})
			for _, turn := range run(conv, s.frames(1, func(_ int, _ float64, n int) float64 { return x[n] / 10 })) {
				for _, th := range turn.Throws {
					var deg, ln []float64
					for d := kink - 25; d <= kink-8; d += th.Grid.Step {
						deg, ln = append(deg, d), append(ln, math.Log(th.P[0][int(math.Round(th.Grid.Index(d)))]))
					}
					a, b := dsp.TheilSen(deg, ln)
					top := dsp.Median(th.P[0][int(th.Grid.Index(kink+20)):int(th.Grid.Index(kink+40))])
					found = append(found, (math.Log(top)-a)/b)
				}
			}
		}
		lo, hi := dsp.Quantile(found, 0), dsp.Quantile(found, 1)
		t.Logf("passage %g Hz: %d turns, %.4f to %.4f°", way.Hz, len(found), lo, hi)
		if len(found) < 12 || lo < kink-0.02 || hi > kink+0.02 {
			t.Errorf("passage %g Hz: %d turns, the kink at %g° is found from %.4f to %.4f°", way.Hz, len(found), kink, lo, hi)
		}
	}
}

// through is the passage itself, p″/ω₀² + p′/(Qω₀) + p = x, by trapezoids at sixteen times the rate.
func through(way Passage, x []float64, rate float64) []float64 {
	const over = 16
	w, h := 2*math.Pi*way.Hz, 1/rate/over
	p, v := x[0], 0.0
	out := make([]float64, len(x))
	for i := range x {
		out[i] = p
		for k := range over {
			in := x[i]
			if i+1 < len(x) {
				in += (x[i+1] - x[i]) * (float64(k) + 0.5) / over
			}
			mid := p + v*h/2
			acc := w*w*(in-mid) - w/way.Q*v
			v += acc * h / (1 + w/way.Q*h/2)
			p += v * h
		}
	}
	return out
}

// The impact of a valve at one angle, at every speed: the filter's delay is taken out, so what is left is the onset
// rule's, which counts in time. It is the same at all speeds within a quarter of a sample.
func TestAnImpactsTimeIsTheSameAtAnySpeed(t *testing.T) {
	const rate, at = 51200.0, 101.3
	var late []float64
	for _, rpm := range speeds {
		s := newShaft(rate, 6.4*60/rpm, steady(rpm), nil, 1)
		frames := s.frames(1, func(_ int, deg float64, n int) float64 {
			rev := math.Floor((deg - at) / 360)
			return burst((float64(n)-s.position(360*math.Max(rev, 0)+at))/rate, 6000) / countG
		})
		conv := converter(t, Config{Rate: rate, Throws: []ThrowConfig{{Pressure: [2]Channel{None(), None()}, Accel: []Channel{{Input: 0, Gain: countG}}}}})
		var one []float64
		for _, turn := range run(conv, frames) {
			for _, th := range turn.Throws {
				v := th.Vib[0]
				a := int(th.SampleAt(at-8)) - int(v.Seq0)
				e := make([]float64, int(th.SampleAt(at+8))-int(v.Seq0)-a)
				dsp.Rectify(e, v.X[a:a+len(e)], 5)
				on, _, ok := dsp.Onset(e, 2)
				if !ok {
					t.Fatalf("%g rpm: no onset", rpm)
				}
				one = append(one, (on+float64(a)+float64(v.Seq0)-v.Late-s.position(360*float64(turn.Number)+at))/rate*1e3)
			}
		}
		late = append(late, dsp.Median(one))
	}
	t.Logf("onset after the impact, ms, at %v rpm: %.4f", speeds, late)
	if lo, hi := dsp.Quantile(late, 0), dsp.Quantile(late, 1); len(late) != len(speeds) || hi-lo > 0.25*1000/rate*2 || lo < -0.01 || hi > 0.04 {
		t.Errorf("onset %.4f to %.4f ms after the impact", lo, hi)
	}
}
