package frame

import (
	"math"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/acq"
)

func TestWheelNamesMarksAndAngles(t *testing.T) {
	for name, c := range map[string]struct {
		w     Wheel
		marks int
		some  map[int]float64 // index into Angles and degrees
	}{
		"one mark": {Wheel{}, 1, nil},
		"60-2":     {Wheel{Teeth: 60, Missing: 2}, 58, map[int]float64{0: 6, 56: 342}},
		"36-1":     {Wheel{Teeth: 36, Missing: 1}, 35, map[int]float64{0: 10, 33: 340}},
		"36-2-1":   {Wheel{Teeth: 36, Missing: 2, Also: []int{17}}, 33, map[int]float64{15: 160, 16: 180, 31: 330}},
		"36-2-2":   {Wheel{Teeth: 36, Missing: 2, Also: []int{16, 17}}, 32, map[int]float64{14: 150, 15: 180}},
		"12+1":     {Wheel{Teeth: 12, Extra: true}, 13, map[int]float64{0: 30, 10: 330, 11: 345}},
	} {
		if err := c.w.Check(); (err != nil) != (name == "36-2-2" && c.w.repeats()) {
			t.Errorf("%s: %v", name, err)
		}
		got := c.w.Angles()
		if c.w.Marks() != c.marks || c.w.String() != name || len(got) != c.marks-1 || !slices.IsSorted(got) {
			t.Errorf("%s: called %v, %d marks, angles %v", name, c.w, c.w.Marks(), got)
		}
		for i, want := range c.some {
			if math.Abs(got[i]-want) > 1e-9 {
				t.Errorf("%s: angle %d is %v, want %v", name, i, got[i], want)
			}
		}
	}
}

func TestWheelsThatTellNoTurnAreRefused(t *testing.T) {
	for text, w := range map[string]Wheel{
		"tells where a turn": {Teeth: 60},
		"looks the same":     {Teeth: 36, Missing: 2, Also: []int{10, 11, 22, 23}},
		"without teeth":      {Missing: 2},
		"3 teeth":            {Teeth: 3, Missing: 1},
		"a quarter":          {Teeth: 12, Missing: 4},
		"one or the other":   {Teeth: 12, Missing: 1, Extra: true},
		"not increasing":     {Teeth: 36, Missing: 2, Also: []int{17, 17}},
		"measured tooth":     {Teeth: 12, Missing: 1, Degrees: []float64{30}},
		"quarter pitch":      {Teeth: 6, Missing: 1, Degrees: []float64{60, 120, 200, 240}},
	} {
		if err := w.Check(); err == nil || !strings.Contains(err.Error(), text) {
			t.Errorf("%v: want an error with %q, got %v", w, text, err)
		}
	}
	if _, err := New(Config{Rate: 10000, Inputs: 1, Auto: true, Wheel: Wheel{Teeth: 60, Missing: 2}, MaxRPM: 3000}); err == nil || !strings.Contains(err.Error(), "samples per tooth") {
		t.Errorf("3.3 samples a tooth: %v", err)
	}
}

// teethRight checks all frames but those marked Missing against the shaft: one turn each, ends and inner marks to within tol
// degrees, a lost tooth NaN and nothing else. It gives the number of good frames.
func teethRight(t *testing.T, s cogs, got []copied, tol float64) int {
	t.Helper()
	marks := s.wheel.pitches()
	good := 0
	for i, f := range got {
		if i > 0 && f.Mark0 != got[i-1].Mark1 {
			t.Errorf("turn %d at %.1f does not follow on its neighbour, which ends at %.1f", f.Turn, f.Mark0, got[i-1].Mark1)
		}
		if f.Q&Missing != 0 {
			continue
		}
		if f.Good() {
			good++
		}
		n := math.Round(s.turns(f.Mark0 / s.rate))
		length := (f.Mark1 - f.Mark0) / 360
		check := func(what string, k int, pos, turns float64) {
			if deg := (pos - s.at(turns)) / length; !(math.Abs(deg) <= tol) {
				t.Errorf("turn %d: %s %d is off by %.3f°", f.Turn, what, k, deg)
			}
		}
		check("mark", 0, f.Mark0, n)
		check("mark", 1, f.Mark1, n+1)
		if len(f.Inner) != len(marks)-2 {
			t.Fatalf("turn %d: %d inner marks, want %d", f.Turn, len(f.Inner), len(marks)-2)
		}
		lost := 0
		for k, pos := range f.Inner {
			if math.IsNaN(pos) {
				lost++
				continue
			}
			check("tooth", k+1, pos, n+marks[k+1]/float64(s.wheel.Teeth))
		}
		if lost > 0 && f.Q&LostTooth == 0 {
			t.Errorf("turn %d: %d teeth lost without a word", f.Turn, lost)
		}
	}
	return good
}

func TestTeethAtAnySpeed(t *testing.T) {
	for name, set := range map[string]func(*cogs){
		"600 rpm":            func(*cogs) {},
		"60 rpm":             func(s *cogs) { s.rpm, s.seconds, s.rate = 60, 12, 8000 },
		"1800 rpm":           func(s *cogs) { s.rpm = 1800 },
		"1800 rpm at 10 kHz": func(s *cogs) { s.rpm, s.rate, s.wheel = 1800, 10000, Wheel{Teeth: 36, Missing: 1} },
		"10 % a second up":   func(s *cogs) { s.ramp = 0.1 },
		"10 % a second down": func(s *cogs) { s.ramp = -0.1 },
		"slow, speeding up":  func(s *cogs) { s.rpm, s.seconds, s.ramp, s.rate = 60, 12, 0.1, 8000 },
		"slow, slowing down": func(s *cogs) { s.rpm, s.seconds, s.ramp, s.rate = 120, 6, -0.1, 8000 },
		"ripple of 2 %":      func(s *cogs) { s.ripple = 0.02 },
		"ripple of 20 %":     func(s *cogs) { s.ripple, s.rpm = 0.2, 200 },
		"36-1":               func(s *cogs) { s.wheel = Wheel{Teeth: 36, Missing: 1} },
		"36-2":               func(s *cogs) { s.wheel = Wheel{Teeth: 36, Missing: 2} },
		"36-2-1":             func(s *cogs) { s.wheel = Wheel{Teeth: 36, Missing: 2, Also: []int{17}} },
		"12-2":               func(s *cogs) { s.wheel = Wheel{Teeth: 12, Missing: 2} },
		"12+1":               func(s *cogs) { s.wheel = Wheel{Teeth: 12, Extra: true} },
		"24+1":               func(s *cogs) { s.wheel = Wheel{Teeth: 24, Extra: true} },
		"coil":               func(s *cogs) { s.coil = true },
		"coil, speeding up":  func(s *cogs) { s.coil, s.rpm, s.ramp = true, 100, 0.1 },
		"coil, 36-1":         func(s *cogs) { s.coil, s.wheel = true, Wheel{Teeth: 36, Missing: 1} },
		"upside down":        func(s *cogs) { s.height = -s.height },
		"noisy":              func(s *cogs) { s.noise = 300 },
		"begins on the mark": func(s *cogs) { s.u0 = 0 },
	} {
		for _, fixed := range []bool{false, true} {
			s := usualCogs()
			s.seconds = 2
			set(&s)
			t.Run(name, func(t *testing.T) {
				cfg := s.config()
				if s.height < 0 {
					cfg.Edge = Falling
				}
				if fixed {
					if s.coil {
						cfg.Auto, cfg.Threshold = false, 200
					} else {
						cfg.Auto, cfg.Threshold, cfg.Hysteresis = false, 200+s.height/2, 3000
					}
				}
				got, st := frames(t, cfg, cutUp(s.signal(), 512))
				// Noise moves an edge by noise/slope; an edge shorter than a sample is known to a sixth of one.
				pitch := 360 / float64(s.wheel.Teeth)
				tol := 0.03 + 6*s.noise/math.Abs(s.height)*0.08*pitch + 0.16*360*s.rpm/60/s.rate
				if s.coil {
					tol += 0.02*pitch + 6*s.noise/s.height*pitch/6*1000/s.rpm // the fall is as steep as the speed
				}
				teethRight(t, s, got, tol)
				if least := s.whole() - 2; len(got) < least {
					t.Errorf("%d turns of %d, want at least %d (%+v)", len(got), s.whole(), least, st)
				}
				starting := 0
				for _, f := range got {
					if f.Q&Starting != 0 {
						starting++
					}
					if f.Q&^Starting != 0 {
						t.Errorf("turn %d marked %b", f.Turn, f.Q)
					}
				}
				if starting > 2 {
					t.Errorf("%d turns marked starting, want at most 2", starting)
				}
				now := s.rpm * (1 + s.ramp*s.seconds)
				if (st.State != StateRunning && st.State != StateCoasting) || s.ripple < 0.1 && math.Abs(st.RPM/now-1) > 0.05+1.5*s.ripple {
					t.Errorf("%v at %v rpm, want about %.0f", st.State, st.RPM, now)
				}
			})
		}
	}
}

func TestDisturbedTeeth(t *testing.T) {
	gone := func(mark int) func(int, int) float64 {
		return func(turn, m int) float64 { return 1 - boolTo(turn > 8 && turn%5 == 0 && m == mark) }
	}
	for name, c := range map[string]struct {
		set  func(*cogs)
		want map[Quality]int // turns so marked of those after the start; -1: any number
		tol  float64
	}{
		"a tooth lost":             {func(s *cogs) { s.scale = gone(20) }, map[Quality]int{LostTooth: 6}, 0.05},
		"mark 0 lost":              {func(s *cogs) { s.scale = gone(0) }, map[Quality]int{LostTooth: 12}, 0.05},
		"the tooth before the gap": {func(s *cogs) { s.scale = gone(57) }, map[Quality]int{LostTooth: 6}, 0.05},
		"a pulse in the gap":       {func(s *cogs) { s.extra = bumpAt(58, 58.5, 60, 10000, every5) }, map[Quality]int{Extra: 6}, 0.05},
		"a pulse between teeth":    {func(s *cogs) { s.extra = bumpAt(30.65, 30.85, 60, 10000, every5) }, map[Quality]int{Extra: 6}, 0.05},
		"a tooth at a third":       {func(s *cogs) { s.scale = func(turn, m int) float64 { return 1 - 0.62*boolTo(every5(turn) && m == 20) } }, map[Quality]int{Weak: 6}, 0.4},
		"a tooth that rings":       {func(s *cogs) { s.extra = bumpAt(20.06, 20.12, 60, -8000, every5) }, map[Quality]int{Bounced: 6}, 0.05},
		"five teeth lost": {func(s *cogs) {
			s.scale = func(turn, m int) float64 { return 1 - boolTo(every5(turn) && m >= 20 && m < 25) }
		}, map[Quality]int{LostTooth: 6}, 0.05},
		"fade to a tenth": {func(s *cogs) {
			s.scale = func(turn, m int) float64 { return 1 - 0.9*min(1, max(0, float64(turn*58+m-600)/600)) }
		}, nil, 0.08},
		"level drifts by twice the height": {func(s *cogs) { s.extra = func(n float64) float64 { return 20000 * min(1, max(0, (n-10)/20)) } }, nil, 0.08},
		"hum":                              {func(s *cogs) { s.extra = func(n float64) float64 { return 1500 * math.Sin(2*math.Pi*5*n) } }, nil, 0.15},
		"single samples":                   {func(s *cogs) { n := 0; s.extra = func(float64) float64 { n++; return 30000 * boolTo(n%997 == 0) } }, map[Quality]int{Weak: -1}, 0.3},
	} {
		t.Run(name, func(t *testing.T) {
			s := usualCogs()
			s.noise = 20
			c.set(&s)
			got, st := frames(t, s.config(), cutUp(s.signal(), 512))
			teethRight(t, s, got, c.tol)
			if len(got) < s.whole()-2 {
				t.Errorf("%d turns of %d (%+v)", len(got), s.whole(), st)
			}
			n := map[Quality]int{}
			for _, f := range got {
				for b := Extra; b <= LostTooth; b <<= 1 {
					if f.Q&b != 0 && b != Starting {
						n[b]++
					}
				}
			}
			for b := Extra; b <= LostTooth; b <<= 1 {
				if want := c.want[b]; want >= 0 && n[b] != want {
					t.Errorf("quality bit %b on %d turns, want %d", b, n[b], want)
				}
			}
		})
	}
}

func every5(turn int) bool { return turn > 8 && turn%5 == 0 }

// Where much is lost the frame says so, is never a part of a turn, and the count of turns stays right.
func TestTeethThroughLosses(t *testing.T) {
	s := usualCogs()
	x := s.signal()
	half := int(s.at(20.5))
	for name, c := range map[string]struct {
		blocks func() []acq.Block
		within int // turns that are not good
	}{
		"half a turn of teeth": {func() []acq.Block {
			y := slices.Clone(x)
			for i := half; i < half+1280; i++ {
				y[i] = 200
			}
			return oneBlock(y)
		}, 3},
		"two turns of teeth": {func() []acq.Block {
			y := slices.Clone(x)
			for i := half; i < half+5120; i++ {
				y[i] = 200
			}
			return oneBlock(y)
		}, 4},
		"samples of three teeth": {func() []acq.Block { return lostBetween(x, half, 128) }, 1},
		"samples of a turn":      {func() []acq.Block { return lostBetween(x, half, 2560) }, 4},
		"samples of ten turns":   {func() []acq.Block { return lostBetween(x, half, 25600) }, 13},
	} {
		got, _ := frames(t, s.config(), c.blocks())
		good := 0
		for _, f := range got {
			if turns := math.Round(s.turns(f.Mark0 / s.rate)); float64(f.Turn-got[0].Turn) != turns-math.Round(s.turns(got[0].Mark0/s.rate)) {
				t.Errorf("%s: turn %d, the shaft says %v", name, f.Turn, turns)
			}
			if f.Good() {
				good++
				if math.Abs(f.Mark1-f.Mark0-2560) > 0.5 {
					t.Errorf("%s: turn %d of %.1f samples is called good", name, f.Turn, f.Mark1-f.Mark0)
				}
			}
		}
		if least := s.whole() - 2 - c.within; good < least {
			t.Errorf("%s: %d good turns of %d, want %d", name, good, s.whole(), least)
		}
	}
}

func lostBetween(x []int32, at, n int) []acq.Block {
	return []acq.Block{{N: at, Counts: [][]int32{x[:at]}}, {Seq0: int64(at + n), N: len(x) - at - n, Lost: int64(n), Counts: [][]int32{x[at+n:]}}}
}

// A life on a toothed wheel: standing in noise, starting, running, coasting down to rest, running, a cut cable.
func TestStatesWithTeeth(t *testing.T) {
	const rate = 10000
	w := Wheel{Teeth: 36, Missing: 1}
	var x []int32
	place := 0.3
	add := func(seconds, from, to float64, cable bool) {
		for i := range int(seconds * rate) {
			place += (from + (to-from)*float64(i)/(seconds*rate)) / 60 / rate
			at := (place - math.Floor(place)) * 36
			v := int32(100 + 17*i%7)
			if cable && at < 35 && at-math.Floor(at) < 0.5 {
				v += 5000
			}
			x = append(x, v)
		}
	}
	type stop struct {
		at   int
		want State
	}
	var stops []stop
	expect := func(s State) { stops = append(stops, stop{len(x), s}) }
	add(8, 0, 0, true)
	expect(StateStandstill)
	add(8, 0, 600, true)
	add(3, 600, 600, true)
	expect(StateRunning)
	add(2, 600, 400, true)
	expect(StateCoasting)
	add(3, 400, 0, true)
	add(4, 0, 0, true)
	expect(StateStandstill)
	add(8, 0, 600, true)
	add(3, 600, 600, true)
	expect(StateRunning)
	add(3, 600, 600, false)
	expect(StateLost)
	a, err := New(Config{Rate: rate, Inputs: 1, Auto: true, Wheel: w})
	if err != nil {
		t.Fatal(err)
	}
	at, good := 0, 0
	for _, s := range stops {
		b := acq.Block{Seq0: int64(at), N: s.at - at, Counts: [][]int32{x[at:s.at]}}
		if err := a.Add(&b, func(f *Frame) { good += int(boolTo(f.Good())) }); err != nil {
			t.Fatal(err)
		}
		at = s.at
		if st := a.Status(); st.State != s.want {
			t.Errorf("at %.1f s: %v, want %v (%+v)", float64(at)/rate, st.State, s.want, st)
		}
	}
	if good < 90 {
		t.Errorf("%d good turns in all, want 90 and more", good)
	}
	if n := cap(a.ring.buf[0]); n > 40*rate {
		t.Errorf("%d samples held", n)
	}
}
