package window

import (
	"encoding/json"
	"math"
	"reflect"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/crank"
	"lapwing/internal/turn"
)

// run tracks n turns of a rig and gives the last end states.
func follow(tr *Tracker, s *solved, from, n int64) Result {
	var res Result
	for i := from; i < from+n; i++ {
		res = tr.Track(s.turn(i), s.input())
	}
	return res
}

func TestStates(t *testing.T) {
	base := newRig(2.5, 750)
	healthy := base.solve()
	noFlow := base
	noFlow.cyl.Clearance = [2]float64{2.5, .2} // compresses, but reaches the discharge line on one end only
	shut := noFlow.solve()
	unloaded := base
	unloaded.idle[crank.HE] = true
	idle := unloaded.solve()

	invalid := &turn.Turn{Reason: "phase: pulse missing"}
	broken := healthy.turn(1)
	broken.Throws[0].P[crank.HE][300] = math.NaN()
	flat := healthy.turn(1)
	for i := range flat.Throws[0].P[crank.HE] {
		flat.Throws[0].P[crank.HE][i] = 2e6
	}
	noChannel := healthy.turn(1)
	noChannel.Throws[0].P[crank.HE] = nil

	for name, v := range map[string]struct {
		tn    *turn.Turn
		in    []Input
		times int
		want  State
	}{
		"healthy follows":                         {healthy.turn(5), healthy.input(), 1, Following},
		"one bad turn is held":                    {invalid, healthy.input(), 1, Holding},
		"ten bad turns are held":                  {invalid, healthy.input(), 10, Holding},
		"eleven bad turns are lost":               {invalid, healthy.input(), 11, Lost},
		"a hole in the pressure is held":          {broken, healthy.input(), 1, Holding},
		"held-open valves are idle":               {idle.turn(3), idle.input(), 1, Idle},
		"no pressure ratio is idle":               {flat, healthy.input(), 1, Idle},
		"compression without discharge":           {shut.turn(3), shut.input(), 1, NotDelivering},
		"no channel is lost":                      {noChannel, healthy.input(), 1, Lost},
		"no channel but held open by the step":    {noChannel, []Input{{Cylinder: m1, K: 1.3, IdleHint: [2]bool{true, false}}}, 1, Idle},
		"no input at all leaves nothing to judge": {healthy.turn(5), nil, 1, Holding},
	} {
		t.Run(name, func(t *testing.T) {
			tr := NewTracker(Config{})
			follow(tr, healthy, 0, 20)
			var end End
			for range v.times {
				end = tr.Track(v.tn, v.in).Throws[0].Ends[crank.HE]
			}
			if end.State != v.want {
				t.Errorf("state %v, want %v (%s)", end.State, v.want, end.W[SuctionOpens].Why)
			}
			for k, w := range end.W {
				if none := w.State == Lost || w.State == Idle; none != math.IsNaN(w.Lo) {
					t.Errorf("event %d is %v with window [%g, %g]", k, w.State, w.Lo, w.Hi)
				}
				if w.Why == "" {
					t.Errorf("event %d gives no reason", k)
				}
				if w.State != Following && !math.IsNaN(w.Angle) {
					t.Errorf("event %d is %v with a measured angle %g", k, w.State, w.Angle)
				}
			}
		})
	}

	t.Run("an end idle by design", func(t *testing.T) {
		tr := NewTracker(Config{Works: [][2]bool{{true, false}}})
		e := follow(tr, healthy, 0, 1).Throws[0].Ends[crank.CE]
		if e.State != Idle || !e.NotPresent {
			t.Errorf("%v, not present %v", e.State, e.NotPresent)
		}
	})
	t.Run("an invalid turn while idle stays idle", func(t *testing.T) {
		tr := NewTracker(Config{})
		follow(tr, idle, 0, 3)
		if e := tr.Track(invalid, idle.input()).Throws[0].Ends[crank.HE]; e.State != Idle {
			t.Errorf("%v", e.State)
		}
	})
}

func TestImplausibleOpeningIsHeldThenReseeds(t *testing.T) {
	s := newRig(2.5, 750).solve()
	tr := NewTracker(Config{})
	follow(tr, s, 0, 20)
	// A wrong clearance in the duty moves the prediction by far more than 8°: the same trace is then not believed,
	// but held where the prediction puts it, until five such openings agree.
	in := s.input()
	in[0].Cylinder.Clearance[crank.HE] = .26
	for n := int64(20); n < 24; n++ {
		w := tr.Track(s.turn(n), in).Throws[0].Ends[crank.HE].W[SuctionOpens]
		if w.State != Holding || w.Conf > .3 {
			t.Fatalf("turn %d: %v, confidence %.2f: %s", n, w.State, w.Conf, w.Why)
		}
	}
	if w := tr.Track(s.turn(24), in).Throws[0].Ends[crank.HE].W[SuctionOpens]; w.State != Following {
		t.Errorf("five agreeing openings must re-seed, but %v: %s", w.State, w.Why)
	}
}

func TestTailIsLearntPerValve(t *testing.T) {
	s := newRig(2.5, 750).solve()
	tr := NewTracker(Config{})
	early := follow(tr, s, 0, 1).Throws[0].Ends[crank.HE].W[DischargeOpens]
	late := follow(tr, s, 1, 30).Throws[0].Ends[crank.HE].W[DischargeOpens]
	if w := early.Hi - early.Lo; w < searchDeg {
		t.Errorf("unlearnt window is only %.1f° wide", w)
	}
	if w := late.Hi - late.Lo; w > 12 {
		t.Errorf("learnt window is still %.1f° wide", w)
	}
	lag := tr.Snapshot().Throws[0][crank.HE].DischargeOpens.LagMs
	truth := s.truth[crank.HE][DischargeOpens]
	want := (truth.hit-truth.lift)/(6*.75) - liftDischargeMs
	if got := lag[len(lag)-1]; math.Abs(got-want) > .15 { // the grid is 0.11 ms, the departure is good to 0.3°
		t.Errorf("learnt lag %.2f ms, true %.2f ms", got, want)
	}
	// A silent accelerometer teaches nothing.
	deaf := NewTracker(Config{})
	for n := range int64(20) {
		tn := s.turn(n)
		tn.Throws[0].Vib[0].Suspect = "cable open"
		deaf.Track(tn, s.input())
	}
	if l := deaf.Snapshot().Throws[0][crank.HE].DischargeOpens.LagMs; len(l) != 0 {
		t.Errorf("%d lags learnt from a suspect channel", len(l))
	}
}

func TestSharedWindows(t *testing.T) {
	s := newRig(2.5, 750).solve()
	th := follow(NewTracker(Config{}), s, 0, 30).Throws[0]
	for e, end := range th.Ends {
		for k, w := range end.W {
			closing := Event(k) == SuctionCloses || Event(k) == DischargeCloses
			if w.Shared != closing { // at full load the closings of both ends meet at each dead centre, the openings do not
				t.Errorf("end %d event %d shared: %v", e, k, w.Shared)
			}
		}
	}
	if !overlap(350, 370, -5, 5) || overlap(10, 20, 20, 30) || overlap(math.NaN(), 1, 0, 1) {
		t.Error("overlap must see a turn further and nothing in NaN")
	}
}

func TestRestartForgetsNothing(t *testing.T) {
	s := newRig(1.8, 1000).solve()
	a, b := NewTracker(Config{}), NewTracker(Config{})
	follow(a, s, 0, 25)
	data, err := json.Marshal(a.Snapshot())
	if err != nil {
		t.Fatal(err)
	}
	var m Memory
	if err := json.Unmarshal(data, &m); err != nil {
		t.Fatal(err)
	}
	if err := b.Restore(m); err != nil {
		t.Fatal(err)
	}
	// NaN differs from itself: compare the printed form.
	if x, y := text(t, follow(a, s, 25, 5)), text(t, follow(b, s, 25, 5)); x != y {
		t.Errorf("after a restart:\n%s\nwithout:\n%s", y, x)
	}
	if !reflect.DeepEqual(a.Snapshot(), b.Snapshot()) {
		t.Error("memories differ after the same turns")
	}
	for name, bad := range map[string]Memory{
		"throws":    {Throws: make([][2]EndMemory, 2)},
		"NaN":       {Throws: [][2]EndMemory{{{SuctionOpens: OpenMemory{LagMs: []float64{math.NaN()}}}}}},
		"too long":  {Throws: [][2]EndMemory{{{SuctionOpens: OpenMemory{OffsetDeg: make([]float64, 99)}}}}},
		"late":      {Throws: [][2]EndMemory{{{LateDeg: -3}}}},
		"neg. miss": {Throws: [][2]EndMemory{{{SuctionOpens: OpenMemory{Missed: -1}}}}},
	} {
		if b.Restore(bad) == nil {
			t.Errorf("a memory with bad %s was taken", name)
		}
	}
}

func text(t *testing.T, r Result) string {
	t.Helper()
	var out []byte
	for _, th := range r.Throws {
		for _, e := range th.Ends {
			for _, w := range e.W {
				for _, v := range []float64{w.Angle, w.Thermo, w.Expected, w.Lo, w.Hi, w.Conf} {
					b, _ := json.Marshal(math.Float64bits(v))
					out = append(append(out, b...), ' ')
				}
			}
		}
	}
	return string(out)
}

// Whatever the trace looks like, there is no panic, and every window lies inside the padded grid.
func TestAnyTrace(t *testing.T) {
	s := newRig(2.5, 750).solve()
	rapid.Check(t, func(rt *rapid.T) {
		tr := NewTracker(Config{})
		for n := range int64(rapid.IntRange(1, 4).Draw(rt, "turns")) {
			tn := s.turn(n)
			th := &tn.Throws[0]
			for range rapid.IntRange(0, 6).Draw(rt, "wounds") {
				e, i := rapid.IntRange(0, 1).Draw(rt, "end"), rapid.IntRange(0, 959).Draw(rt, "at")
				w := rapid.IntRange(1, 400).Draw(rt, "width")
				f := rapid.Float64Range(-.5, 4).Draw(rt, "factor")
				for j := i; j < min(i+w, 961); j++ {
					th.P[e][j] *= f
				}
			}
			in := s.input()
			in[0].K = rapid.Float64Range(0, 2).Draw(rt, "k")
			in[0].Cylinder.Clearance[0] = rapid.Float64Range(.02, 3).Draw(rt, "clearance")
			for _, th := range tr.Track(tn, in).Throws {
				for _, e := range th.Ends {
					for k, w := range e.W {
						none := w.State == Lost || w.State == Idle
						if none != math.IsNaN(w.Lo) || none != math.IsNaN(w.Hi) {
							rt.Fatalf("event %d %v: [%g, %g]", k, w.State, w.Lo, w.Hi)
						}
						if !none && !(w.Lo >= -60 && w.Hi <= 420 && w.Lo <= w.Hi) {
							rt.Fatalf("event %d %v: [%g, %g] leaves the grid", k, w.State, w.Lo, w.Hi)
						}
						if !(w.Conf >= 0 && w.Conf <= 1) {
							rt.Fatalf("confidence %g", w.Conf)
						}
					}
				}
			}
		}
	})
}

func TestSteadyStateDoesNotAllocate(t *testing.T) {
	s := newRig(2.5, 750).solve()
	tr := NewTracker(Config{})
	follow(tr, s, 0, 50)
	tn, in := s.turn(50), s.input()
	if n := testing.AllocsPerRun(20, func() { tr.Track(tn, in) }); n != 0 {
		t.Errorf("%g allocations a turn", n)
	}
}

func BenchmarkTrack(b *testing.B) {
	s := newRig(2.5, 750).solve()
	tr := NewTracker(Config{})
	follow(tr, s, 0, 50)
	tn, in := s.turn(50), s.input()
	b.ReportAllocs()
	for b.Loop() {
		tr.Track(tn, in)
	}
}
