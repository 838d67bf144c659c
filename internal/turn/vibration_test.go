package turn

import (
	"math"
	"testing"

	"lapwing/internal/dsp"
)

const countG = 0.001 // m/s² per count

// burst is a ring-down of a valve impact: a sudden start, 1.2 ms decay, in m/s².
func burst(t, hz float64) float64 {
	if t < 0 {
		return 0
	}
	return 400 * math.Exp(-t/0.0012) * math.Sin(2*math.Pi*hz*t)
}

// Impacts at known angles on two throws whose dead centres differ: each is found where it was put, by the onset rule
// of reference/vibration.md section 1 on the full-rate samples, within 0.1° and one sample of where the rule finds
// the impact itself, and less than 0.075 ms after it began.
func TestImpactsOnTwoThrows(t *testing.T) {
	const rate = 51200
	dead := [2]float64{12, 282}
	for _, rpm := range []float64{300, 700, 1400} {
		for _, hz := range []float64{3000, 6000, 12000} {
			s := newShaft(rate, 6.4*60/rpm, ramp(rpm, 0.05), nil, 1)
			at := [2]float64{101.3, 333.7} // after each throw's own dead centre
			var hits [2][]float64          // sample positions
			for rev := 0.0; rev < 5; rev++ {
				for k := range hits {
					hits[k] = append(hits[k], s.position(360*rev+dead[k]+at[k]))
				}
			}
			frames := s.frames(2, func(k int, _ float64, n int) float64 {
				v := 2 * math.Sin(float64(n)*float64(n)) // a little noise
				for _, h := range hits[k] {
					if dt := (float64(n) - h) / rate; dt < 0.02 {
						v += burst(dt, hz)
					}
				}
				return v/countG + 3000 // and a sensor offset
			})
			cfg := Config{Rate: rate}
			for k := range dead {
				cfg.Throws = append(cfg.Throws, ThrowConfig{DeadCentreDeg: dead[k], Pressure: [2]Channel{None(), None()},
					Accel: []Channel{{ID: "a", Input: k, Gain: countG}}})
			}
			conv, err := New(cfg)
			if err != nil {
				t.Fatal(err)
			}
			valid := 0
			for _, turn := range run(conv, frames) {
				for k, th := range turn.Throws {
					valid++
					v := th.Vib[0]
					// window: 8° before the impact to 8° after it
					a, b := int(th.SampleAt(at[k]-8))-int(v.Seq0), int(th.SampleAt(at[k]+8))-int(v.Seq0)
					e := make([]float64, b-a)
					dsp.Rectify(e, v.X[a:b], int(math.Round(0.0001*rate)))
					on, _, ok := dsp.Onset(e, 2)
					if !ok {
						t.Fatalf("%g rpm, %g Hz, throw %d: no onset", rpm, hz, k+1)
					}
					late := (on + float64(a) + float64(v.Seq0) - hits[k][turn.Number]) / rate
					// The same rule on the impact alone, unfiltered, shows what of it is the rule's own.
					bare := make([]float64, len(e))
					for i := range bare {
						bare[i] = burst((float64(a+i)+float64(v.Seq0)-hits[k][turn.Number])/rate, hz)
					}
					dsp.Rectify(e, bare, int(math.Round(0.0001*rate)))
					on, _, _ = dsp.Onset(e, 0)
					own := (on + float64(a) + float64(v.Seq0) - hits[k][turn.Number]) / rate
					perDeg := s.speed[int(th.SampleAt(at[k]))]
					if d := math.Abs(late-own) * rate; d > 1+0.1/perDeg || late < 0 || late > 0.075e-3 {
						t.Errorf("%g rpm, %g Hz, throw %d: onset %.4f ms late, %.4f of it the rule's", rpm, hz, k+1, late*1e3, own*1e3)
					}
					if k == 0 && turn.Number == 2 {
						t.Logf("%g rpm, %g Hz: onset %.4f ms = %.3f° late, %.4f ms of it the rule's", rpm, hz, late*1e3, late*rate*perDeg, own*1e3)
					}
					around := int(th.Grid.Index(at[k] - 20))
					_, i := dsp.PeakAbs(v.Peak[around : around+80])
					if d := th.Grid.At(around+i) - at[k]; d < -0.25 || d > 1+0.3e-3*rate*perDeg {
						t.Errorf("%g rpm, %g Hz, throw %d: peak bin %g° after the impact", rpm, hz, k+1, d)
					}
					peak, _ := dsp.PeakAbs(v.Peak)
					if whole, _ := dsp.PeakAbs(v.X); peak != whole {
						t.Errorf("%g rpm, %g Hz: peak %g in bins, %g in samples", rpm, hz, peak, whole)
					}
				}
			}
			if valid < 4 {
				t.Errorf("%g rpm: %d throws seen", rpm, valid)
			}
		}
	}
}
