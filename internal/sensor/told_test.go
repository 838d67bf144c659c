package sensor

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/frame"
)

// A wheel's teeth: lost ones and faint ones are said, of a signal that is otherwise sound; a noisy one that loses nothing is not.
func TestTeethAreSaid(t *testing.T) {
	const rate, teeth = 20000.0, 36
	for _, c := range []struct {
		name  string
		want  Fault
		cat   Category
		noise float64
		lost  func(turn, tooth int) bool
	}{
		{name: "healthy", cat: Good, noise: 50},
		{name: "noisy, but clear", cat: Good, noise: 250},
		{name: "gap grown", want: Faint, cat: MaintenanceRequired, noise: 700},
		{name: "a tooth broken off", want: Teeth, cat: MaintenanceRequired, noise: 50, lost: func(turn, tooth int) bool { return turn > 15 && tooth == 11 }},
		{name: "a tooth lost once", cat: Good, noise: 50, lost: func(turn, tooth int) bool { return turn == 15 && tooth == 11 }},
	} {
		a, err := frame.New(frame.Config{Rate: rate, Inputs: 1, Auto: true, Wheel: frame.Wheel{Teeth: teeth, Missing: 1}, MaxRPM: 1200})
		if err != nil {
			t.Fatal(err)
		}
		w, err := New(Config{Rate: rate, Channels: []Channel{{ID: "phase", Kind: Phase}}})
		if err != nil {
			t.Fatal(err)
		}
		r := rand.New(rand.NewPCG(3, 4))
		b := acq.Block{N: 500, Counts: [][]int32{make([]int32, 500)}}
		for from := 0; from < 5*rate; from += b.N {
			for i := range b.Counts[0] {
				turn, at := math.Modf(float64(from+i) / rate * 10) // 600 rpm
				tooth, in := math.Modf(at * teeth)
				v := c.noise * r.NormFloat64()
				if in < 0.5 && tooth < teeth-1 && !(c.lost != nil && c.lost(int(turn), int(tooth))) {
					v += 10000 * math.Min(1, 10*math.Min(in, 0.5-in))
				}
				b.Counts[0][i] = int32(math.Round(v))
			}
			b.Seq0 = int64(from)
			if err := a.Add(&b, func(f *frame.Frame) { w.Frame(f) }); err != nil {
				t.Fatal(err)
			}
			w.Reference(a.Status(), b.Seq0+int64(b.N))
		}
		s := w.State(0)
		if s.Category != c.cat || s.Category > Good && (s.Fault != c.want || !strings.Contains(s.Reason, "usually")) {
			st := a.Status()
			t.Errorf("%s: %v, %v (%s); height %.0f noise %.0f", c.name, s.Category, s.Fault, s.Reason, st.Height, st.Noise)
		}
	}
}

func TestToldStandsUntilItIsToldGone(t *testing.T) {
	w, err := New(Config{Rate: 1000, Channels: []Channel{{ID: "p", Kind: Pressure, PerCount: 1, FullV: 10, Gain: 1}}, Hold: 3})
	if err != nil {
		t.Fatal(err)
	}
	turn := func(n int64) {
		w.Frame(&frame.Frame{Turn: n, Counts: [][]int32{nil}})
	}
	w.Tell(0, Drift, 4, 40, "") // nothing was told
	w.Tell(0, Drift, 5, 50, "p has drifted")
	for n := range int64(100) {
		turn(6 + n)
	}
	if s := w.State(0); s.Category != MaintenanceRequired || s.Fault != Drift || s.Since != 5 || s.First != 50 || w.Suspect(0, 0, 1000) != "" {
		t.Errorf("%+v, %q", s, w.Suspect(0, 0, 1000))
	}
	w.Tell(0, Drift, 120, 1200, "p has drifted further")
	if s := w.State(0); s.Since != 5 || s.Reason != "p has drifted further" {
		t.Errorf("%+v", s)
	}
	again, err := New(Config{Rate: 1000, Channels: []Channel{{ID: "p", Kind: Pressure, PerCount: 1, FullV: 10, Gain: 1}}, Hold: 3})
	if err != nil || again.Restore(w.Snapshot()) != nil {
		t.Fatal(err)
	}
	for n := range int64(100) {
		again.Frame(&frame.Frame{Turn: n, Counts: [][]int32{nil}})
	}
	if s := again.State(0); s.Fault != Drift || s.Category != MaintenanceRequired {
		t.Errorf("after a restart: %+v", s)
	}
	if again.Tell(0, Drift, 100, 1, ""); again.State(0).Category > Good {
		t.Errorf("after a restart, told gone: %+v", again.State(0))
	}
	if w.Tell(0, Drift, 121, 1210, ""); w.State(0).Category > Good {
		t.Errorf("%+v", w.State(0))
	}
}
