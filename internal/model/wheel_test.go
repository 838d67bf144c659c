package model

import (
	"math"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/frame"
	"lapwing/internal/skid"
)

// TestWheel: the teeth that the frames hold and the dead centres of the truth tell the same shaft angle, for pulses on
// either side of their marks.
func TestWheel(t *testing.T) {
	t.Parallel()
	for _, w := range []frame.Wheel{{Teeth: 60, Missing: 2}, {Teeth: 36, Missing: 2, Also: []int{17}}, {Teeth: 24, Extra: true}} {
		for _, falling := range []bool{false, true} {
			if falling == w.Extra {
				continue // the one with the extra tooth rising, the others falling: half the work
			}
			sk := single()
			sk.Phase.Falling, sk.Phase.Wheel, sk.Phase.MarksPerTurn = falling, w, w.Marks()
			sk.Phase.Ripple = []skid.Ripple{{Order: 1, Amp: 0.004, Phase: 20}, {Order: 2, Amp: 0.01, Phase: 200}}
			m, err := New(sk, Script{}, Options{Seed: 2})
			if err != nil {
				t.Fatal(err)
			}
			ch, _ := sk.ChannelByID("mark")
			cfg := frame.Config{Rate: m.rate, Inputs: m.inputs, Channel: ch.Input, Auto: true, Wheel: w}
			if falling {
				cfg.Edge = frame.Falling
			}
			a, err := frame.New(cfg)
			if err != nil {
				t.Fatal(err)
			}
			counts := collect(m, int(0.72*m.rate), []int{4096})
			var deg, pos []float64
			turns := 0
			err = a.Add(&acq.Block{N: len(counts[0]), Counts: counts}, func(f *frame.Frame) {
				if f.Q&^frame.Starting != 0 {
					t.Errorf("%v, falling %v: turn %d marked %b", w, falling, f.Turn, f.Q)
				}
				deg, pos = append(deg, 360*float64(turns)), append(pos, f.Mark0/m.rate)
				for i, d := range w.Angles() {
					deg, pos = append(deg, 360*float64(turns)+d), append(pos, f.Inner[i]/m.rate)
				}
				turns++
			})
			if err != nil || turns < 6 {
				t.Fatalf("%v, falling %v: %d turns, %v", w, falling, turns, err)
			}
			checked := 0
			for _, tr := range m.Truths() {
				for i := 1; i < len(pos); i++ {
					if tr.T0 >= pos[i-1] && tr.T0 < pos[i] {
						at := deg[i-1] + (deg[i]-deg[i-1])*(tr.T0-pos[i-1])/(pos[i]-pos[i-1])
						within(t, "dead centre against teeth, degrees", math.Remainder(at-sk.Throws[tr.Throw].DeadCentre, 360), 0, 0.06)
						checked++
					}
				}
			}
			if checked < 6 {
				t.Errorf("%v: only %d dead centres checked", w, checked)
			}
		}
	}
}
