package frame

import (
	"math"
	"testing"

	"lapwing/internal/acq"
)

// A mark that comes 5 % of a turn early is told: neither turn beside it is good.
func TestMarkOutOfItsTimeIsUneven(t *testing.T) {
	s := usual()
	s.scale, s.extra = drop(40), bump(342, 8, 10000, func(n int) bool { return n == 39 })
	got, _ := frames(t, config(s), cutUp(s.signal(), 512))
	if n := tally(got); n[Uneven] != 2 || n[Missing] != 0 {
		t.Errorf("%d uneven turns, want 2; %d missing", n[Uneven], n[Missing])
	}
	marksRight(t, s, got, 0.1)
}

// Two pulses a turn that look alike: nobody can say which is the mark, so there is no good turn.
func TestTwoLikePulsesATurnAreNotLockedOn(t *testing.T) {
	s := usual()
	s.extra = bump(108, 8, 10000, func(int) bool { return true })
	got, st := frames(t, config(s), cutUp(s.signal(), 512))
	for _, f := range got {
		if f.Good() {
			t.Fatalf("turn %d of %v samples is called good", f.Turn, f.Mark1-f.Mark0)
		}
	}
	if st.State != StateStarting {
		t.Errorf("state %v, want starting", st.State)
	}
}

// A step of the speed (a change of driver, a torn recording) is followed within a few turns, and never guessed over.
func TestSpeedStep(t *testing.T) {
	a, b := usual(), usual()
	a.seconds, b.rpm, b.seconds = 3, 750, 3 // a ends at 0.7 of a turn, where b begins
	x := append(a.signal(), b.signal()...)
	got, st := frames(t, config(a), cutUp(x, 512))
	var before, after int
	for _, f := range got {
		if !f.Good() {
			continue
		}
		switch n := f.Mark1 - f.Mark0; {
		case math.Abs(n-2560) < 3 && f.Mark1 < 3*a.rate:
			before++
		case math.Abs(n-2048) < 3 && f.Mark0 > 3*a.rate:
			after++
		default:
			t.Errorf("turn %d of %.1f samples is called good", f.Turn, n)
		}
	}
	if before < 22 || after < 37-9 || st.State != StateRunning {
		t.Errorf("%d good turns of 29 before the step, %d of 37 after it, state %v", before, after, st.State)
	}
}

func TestFixedLevelUnderTrouble(t *testing.T) {
	for name, c := range map[string]struct {
		set  func(*shaft)
		want Quality
		n    int
	}{
		"extra":             {func(s *shaft) { s.extra = bump(90, 8, 10000, every(10)) }, Extra, 3},
		"missing":           {func(s *shaft) { s.scale = drop(40) }, Missing, 1},
		"weak":              {func(s *shaft) { s.scale = func(n int) float64 { return 1 - 0.6*boolTo(n == 40) } }, Weak, 2},
		"noise on the edge": {func(s *shaft) { s.noise, s.edge = 800, 6 }, 0, 0},
	} {
		s := usual()
		c.set(&s)
		cfg := config(s)
		cfg.Auto, cfg.Threshold, cfg.Hysteresis = false, s.base+3500, 1500
		got, _ := frames(t, cfg, cutUp(s.signal(), 512))
		moved := s
		moved.phase += 0.15 * s.edge / 360 // the level lies 15 % under half height: the mark comes so much earlier
		tol := 0.1 + 4*s.noise/s.height*s.edge
		if c.want == Weak {
			tol = 1.1 // a fixed level is passed later on a lower pulse
		}
		if good := marksRight(t, moved, got, tol); good < s.whole()-10 {
			t.Errorf("%s: %d good turns of %d", name, good, s.whole())
		}
		n := tally(got)
		for b := Extra; b <= Uneven; b <<= 1 {
			if want := c.n * int(boolTo(b == c.want)); n[b] != want && b != Bounced {
				t.Errorf("%s: quality bit %b on %d frames, want %d", name, b, n[b], want)
			}
		}
	}
}

// Edge timing against the closed form: standard deviation of the mark, in degrees.
func TestMarkJitter(t *testing.T) {
	for name, c := range map[string]struct {
		noise, edge, want float64
	}{
		"no noise, edge of 2° (14 samples)": {0, 2, 0.001},
		"noise 0.4 % of the height":         {40, 2, 0.012}, // noise/height · edge = 0.008°
		"noise 2 %":                         {200, 2, 0.06}, // 0.04°
	} {
		s := usual()
		s.noise, s.edge, s.seconds = c.noise, c.edge, 12
		got, _ := frames(t, config(s), cutUp(s.signal(), 4096))
		var sum, sq, n float64
		for _, f := range got {
			if f.Good() {
				e := (f.Mark0 - s.markAt(int(math.Round(s.turns(f.Mark0/s.rate))))) * 360 / 2560
				sum, sq, n = sum+e, sq+e*e, n+1
			}
		}
		sd := math.Sqrt(sq/n - sum/n*sum/n)
		t.Logf("%s: mean %+.4f°, deviation %.4f° over %v turns", name, sum/n, sd, n)
		if !(sd <= c.want) || math.Abs(sum/n) > 0.02+c.want {
			t.Errorf("%s: mean %+.4f°, deviation %.4f°, want at most %v", name, sum/n, sd, c.want)
		}
	}
}

func TestAddRefusesWhatDoesNotFit(t *testing.T) {
	a, err := New(Config{Rate: 10000, Inputs: 2, Auto: true})
	if err != nil {
		t.Fatal(err)
	}
	none := func(*Frame) { t.Error("a frame from nothing") }
	if err := a.Add(&acq.Block{N: 2, Counts: [][]int32{{0, 0}, {0, 0}}}, none); err != nil {
		t.Fatal(err)
	}
	for name, b := range map[string]acq.Block{
		"inputs":     {Seq0: 2, N: 1, Counts: [][]int32{{0}}},
		"length":     {Seq0: 2, N: 2, Counts: [][]int32{{0, 0}, {0}}},
		"going back": {Seq0: 1, N: 1, Counts: [][]int32{{0}, {0}}},
	} {
		if err := a.Add(&b, none); err == nil {
			t.Errorf("%s: accepted", name)
		}
	}
	a.Flush(none)
}
