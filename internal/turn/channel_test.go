package turn

import (
	"math"
	"strings"
	"testing"

	"lapwing/internal/frame"
)

func TestSuspects(t *testing.T) {
	cfg, frames := machine(t, 9)
	frames[2].Q |= frame.Clipped
	for k := 100; k < 140; k++ { // over 1 % of a turn above the 10 MPa of the head end's range
		frames[6].Counts[0][k] = 2e7
	}
	frames[6].Counts[1][100] = 2e7 // a single burst on the crank end: it averages out
	frames[6].Counts[3][100] = -2e6
	for i, turn := range run(converter(t, cfg), frames) {
		if !turn.Valid() {
			continue
		}
		he, ce := turn.Throws[0].Bad[0], turn.Throws[0].Bad[1]
		a, b, far := turn.Throws[0].Vib[0].Suspect, turn.Throws[0].Vib[1].Suspect, turn.Throws[1].Vib[0].Suspect
		switch i {
		case 1, 2, 3: // frame 2 is in the padding of throw 1's turn 3
			if !strings.Contains(he, "overload") || !strings.Contains(ce, "overload") || !strings.Contains(a, "overload") {
				t.Errorf("turn %d: overload not told: %q %q %q", i, he, ce, a)
			}
		case 6: // sample 100 of frame 6 is at 14°: inside throw 1's padded turn 6 (-20..460°), not inside throw 2's (250..730°)
			if !strings.Contains(he, "range") || ce != "" || a != "" || !strings.Contains(b, "range") || far != "" {
				t.Errorf("turn %d: %q %q %q %q %q", i, he, ce, a, b, far)
			}
		case 5: // and inside both padded turns 5
			if !strings.Contains(he, "range") || ce != "" || !strings.Contains(b, "range") || !strings.Contains(far, "range") {
				t.Errorf("turn %d: %q %q %q %q", i, he, ce, b, far)
			}
		case 4: // turn 4 of throw 2 ends at 10° of frame 6
			if he != "" || ce != "" || a != "" || b != "" || far != "" {
				t.Errorf("turn %d: %q %q %q %q %q", i, he, ce, a, b, far)
			}
		}
	}
}

func TestBandsAndRate(t *testing.T) {
	cfg, frames := machine(t, 6)
	for _, c := range []struct {
		rate      float64
		leak, any bool
	}{{51200, true, true}, {25600, false, true}, {4000, false, false}} {
		cfg.Rate = c.rate
		for _, turn := range run(converter(t, cfg), frames) {
			if !turn.Valid() {
				continue
			}
			v := turn.Throws[0].Vib[0]
			if (v.Leak != nil) != c.leak || (v.X != nil) != c.any || (v.Suspect == "") != c.any || v.Rate != c.rate {
				t.Errorf("%g Hz: leak %v, X %v, %q", c.rate, v.Leak != nil, v.X != nil, v.Suspect)
			}
		}
	}
}

func TestBinsAddUp(t *testing.T) {
	cfg, frames := machine(t, 6)
	for _, step := range []float64{0.1, 0.5, 1} { // at 0.1° most bins hold less than one sample
		cfg.Step = step
		for _, turn := range run(converter(t, cfg), frames) {
			for _, th := range turn.Throws {
				v := th.Vib[0]
				var sum, all float64
				for i := range v.RMS {
					if v.RMS[i] > v.Peak[i]*(1+1e-12) || v.Leak[i] < 0 {
						t.Fatalf("step %g: RMS %g over peak %g", step, v.RMS[i], v.Peak[i])
					}
					sum += v.RMS[i] * v.RMS[i]
				}
				for _, x := range v.X {
					all += x * x
				}
				if r := sum / float64(len(v.RMS)) / (all / float64(len(v.X))); math.Abs(r-1) > 0.04 {
					t.Errorf("step %g: mean square over bins is %.4f of that over samples", step, r)
				}
			}
		}
	}
}

// Leak is the mean square in the leak band: a tone inside it shows, one below does not (Butterworth, order 2 per edge).
func TestLeakBand(t *testing.T) {
	const rate, amp = 51200, 10.0
	for _, c := range []struct{ hz, want, tol float64 }{{14000, 1, 0.02}, {3000, 0.005, 0.005}, {10000, 0.5, 0.02}} {
		s := newShaft(rate, 0.6, steady(700), nil, 1)
		frames := s.frames(1, func(_ int, _ float64, n int) float64 {
			return amp / countG * math.Sin(2*math.Pi*c.hz*float64(n)/rate)
		})
		cfg := Config{Rate: rate, Throws: []ThrowConfig{{Pressure: [2]Channel{None(), None()}, Accel: []Channel{{Gain: countG}}}}}
		n := 0
		for _, turn := range run(converter(t, cfg), frames) {
			for _, th := range turn.Throws {
				sum := 0.0
				for _, m := range th.Vib[0].Leak {
					sum += m
					n++
				}
				if share := sum / 961 / (amp * amp / 2); math.Abs(share-c.want) > c.tol {
					t.Errorf("%g Hz: %.4f of the tone's mean square, want %g", c.hz, share, c.want)
				}
			}
		}
		if n == 0 {
			t.Fatal("no turn")
		}
	}
}
