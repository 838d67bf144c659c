package window

import (
	"math"
	"testing"

	"lapwing/internal/crank"
)

// A suction closing far from where the pressure puts it is heard, and its window reaches there; nothing is learnt from
// an accelerometer that is not believed.
func TestClosingIsHeard(t *testing.T) {
	start := strokeStart(crank.HE, Compression)
	for name, at := range map[string]float64{"before the dead centre": -15, "after it": 30} {
		s := newRig(2.5, 750).solve()
		s.truth[crank.HE][SuctionCloses].hit = start + at
		s.truth[crank.CE][DischargeCloses].hit = math.NaN() // nothing else rings there
		tr, deaf := NewTracker(Config{}), NewTracker(Config{})
		for n := range int64(heardLeast + 1) {
			tn := s.turn(n)
			tr.Track(tn, s.input())
			tn.Throws[0].Vib[0].Suspect = "cable open"
			deaf.Track(tn, s.input())
		}
		heard := tr.Snapshot().Throws[0][crank.HE].LastDeg
		if at > 20 { // the closed stroke has begun by then: nothing can close
			if len(heard) != 0 {
				t.Errorf("%s: a closing is heard at %.1f° inside the closed stroke", name, heard)
			}
			continue
		}
		w := tr.Track(s.turn(heardLeast+1), s.input()).Throws[0].Ends[crank.HE].W[SuctionCloses]
		if w.Lo > start+at-1 || w.Hi < start+at || w.Why != whyHeard {
			t.Errorf("%s: the closing at %.1f° lies outside [%.1f, %.1f]: %s", name, start+at, w.Lo, w.Hi, w.Why)
		}
		if l := deaf.Snapshot().Throws[0][crank.HE].LastDeg; len(l) != 0 {
			t.Errorf("%s: %d closings heard by a suspect channel", name, len(l))
		}
	}
}

// What rings where the pressure shows another event is not the suction closing.
func TestClosingIsNotAnothersImpact(t *testing.T) {
	s := newRig(2.5, 750).solve()
	s.truth[crank.HE][SuctionCloses].hit = math.NaN()
	tr := NewTracker(Config{})
	for n := range int64(12) {
		tr.Track(s.turn(n), s.input())
	}
	if l := tr.Snapshot().Throws[0][crank.HE].LastDeg; len(l) != 0 {
		t.Errorf("the other end's discharge closing at %.1f° is taken for the suction closing: %.1f°", s.truth[crank.CE][DischargeCloses].hit, l)
	}
}

// Line pressures from the process values are not needed, and do not move a window.
func TestLinePressuresAreNotNeeded(t *testing.T) {
	s := newRig(1.8, 1000).solve()
	with, without := NewTracker(Config{}), NewTracker(Config{})
	in := s.input()
	in[0].LinePs, in[0].LinePd = math.NaN(), math.NaN()
	for n := range int64(20) {
		a, b := with.Track(s.turn(n), s.input()), without.Track(s.turn(n), in)
		if x, y := text(t, a), text(t, b); x != y {
			t.Fatalf("turn %d with line pressures:\n%s\nwithout:\n%s", n, x, y)
		}
	}
}

// With pulsation that brings the plateaus together the end still works: what shows it are its closed strokes.
func TestPulsationDoesNotMakeIdle(t *testing.T) {
	r := newRig(1.15, 750)
	r.pulse = .05
	s := r.solve()
	tr := NewTracker(Config{})
	for n := range int64(20) {
		res := tr.Track(s.turn(n), s.input())
		for e, end := range res.Throws[0].Ends {
			if end.State == Idle {
				t.Fatalf("turn %d: end %d is idle: %s", n, e, end.W[0].Why)
			}
		}
	}
	r.idle = [2]bool{true, true}
	s = r.solve()
	for n := range int64(5) {
		for e, end := range tr.Track(s.turn(n), s.input()).Throws[0].Ends {
			if end.State != Idle {
				t.Fatalf("turn %d: end %d is held open and %s", n, e, end.State)
			}
		}
	}
}
