package frame

import (
	"math"
	"strings"
	"testing"
)

func TestMarksAtAnySpeed(t *testing.T) {
	for name, c := range map[string]struct {
		set  func(*shaft)
		miss int // turns that may go by before the speed is established
	}{
		"60 rpm":             {func(s *shaft) { s.rpm, s.seconds, s.rate = 60, 25, 8000 }, 9},
		"120 rpm":            {func(s *shaft) { s.rpm, s.seconds, s.rate = 120, 12, 8000 }, 9},
		"600 rpm":            {func(*shaft) {}, 10},
		"1800 rpm":           {func(s *shaft) { s.rpm = 1800 }, 20},
		"1800 rpm at 10 kHz": {func(s *shaft) { s.rpm, s.rate = 1800, 10000 }, 20},
		"10 % a second up":   {func(s *shaft) { s.ramp = 0.1 }, 10},
		"10 % a second down": {func(s *shaft) { s.ramp = -0.1 }, 10},
		"slow, speeding up":  {func(s *shaft) { s.rpm, s.seconds, s.ramp, s.rate = 60, 25, 0.1, 8000 }, 9},
		"slow, slowing down": {func(s *shaft) { s.rpm, s.seconds, s.ramp, s.rate = 120, 7, -0.1, 8000 }, 9},
		"fast, slowing down": {func(s *shaft) { s.rpm, s.ramp = 1800, -0.1 }, 20},
		"noisy":              {func(s *shaft) { s.noise = 400 }, 10},
		"small":              {func(s *shaft) { s.height, s.noise = 60, 1 }, 10},
		"narrow":             {func(s *shaft) { s.width, s.edge = 1, 0.3 }, 10},
		"half a turn wide":   {func(s *shaft) { s.width = 180 }, 10},
		"nearly a turn wide": {func(s *shaft) { s.width = 300 }, 10},
		"far from zero":      {func(s *shaft) { s.base = -1 << 29 }, 10},
		"hum":                {func(s *shaft) { s.extra = func(n float64) float64 { return 300 * math.Sin(2*math.Pi*5*n) } }, 10},
		"24 bit codes":       {func(s *shaft) { s.base, s.height, s.noise = 1e5, 6e6, 2e4 }, 10},
		"starts on a mark":   {func(s *shaft) { s.phase = -1e-9 }, 10},
		"pulse with undershoot": {func(s *shaft) {
			s.extra = func(n float64) float64 {
				if d := (n - math.Floor(n)) * 360; d > 10 && d < 18 {
					return -7000
				}
				return 0
			}
		}, 10},
	} {
		t.Run(name, func(t *testing.T) {
			s := usual()
			c.set(&s)
			got, st := frames(t, config(s), cutUp(s.signal(), 512))
			tol := 0.05 + 4*s.noise/math.Abs(s.height)*s.edge // an edge of this slope turns noise into angle
			tol = max(tol, 360/s.rate*s.rpm/60*0.3*boolTo(s.edge < 1))
			good := marksRight(t, s, got, tol)
			if least := s.whole() - c.miss; good < least {
				t.Errorf("%d good turns of %d, want at least %d", good, s.whole(), least)
			}
			for _, f := range got {
				if f.Q&^Starting != 0 {
					t.Errorf("turn %d marked %b", f.Turn, f.Q)
				}
			}
			want := StateRunning
			if s.ramp < 0 && len(got) > 12 { // seconds without one turn that is not slower
				want = StateCoasting
			}
			if now := s.rpm * (1 + s.ramp*s.seconds); st.State != want || math.Abs(st.RPM/now-1) > 0.05+1.5*math.Abs(s.ramp)*s.rpm/now*60/now {
				t.Errorf("status %v at %v rpm, want %v at about %.0f", st.State, st.RPM, want, now)
			}
			if st.Missing != 0 || st.Extra != 0 || st.Frames != int64(len(got)) {
				t.Errorf("status %+v", st)
			}
			inFrames := int64(math.Ceil(got[len(got)-1].Mark1)) - got[0].Seq0
			if n := int64(s.rate * s.seconds); st.LetGo != n-inFrames {
				t.Errorf("%d samples let go and %d in frames of %d", st.LetGo, inFrames, n)
			}
		})
	}
}

func boolTo(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

func TestEdgesAndPolarities(t *testing.T) {
	// The true mark of a falling edge lies one pulse width after that of the rising edge (before it, seen from a notch).
	for name, c := range map[string]struct {
		edge   Edge
		height float64
		after  float64 // degrees: mark after the shape's first flank
	}{
		"pulse, rising":  {Rising, 10000, 0},
		"pulse, falling": {Falling, 10000, 8},
		"notch, falling": {Falling, -10000, 0},
		"notch, rising":  {Rising, -10000, 8},
	} {
		for _, auto := range []bool{true, false} {
			s := usual()
			s.height = c.height
			cfg := config(s)
			cfg.Edge, cfg.Auto, cfg.Threshold = c.edge, auto, s.base+s.height/2
			got, _ := frames(t, cfg, cutUp(s.signal(), 300))
			moved := s
			moved.phase -= c.after / 360
			if good := marksRight(t, moved, got, 0.06); good < s.whole()-10 {
				t.Errorf("%s, auto %v: %d good turns of %d", name, auto, good, s.whole())
			}
		}
	}
}

func TestRefusesWhatCannotBe(t *testing.T) {
	ok := Config{Rate: 25600, Inputs: 2, Auto: true}
	for text, set := range map[string]func(*Config){
		"rate":             func(c *Config) { c.Rate = 0 },
		"inputs":           func(c *Config) { c.Inputs = 0 },
		"phase channel":    func(c *Config) { c.Channel = 2 },
		"edge":             func(c *Config) { c.Edge = 9 },
		"threshold":        func(c *Config) { c.Auto, c.Threshold = false, math.NaN() },
		"hysteresis":       func(c *Config) { c.Hysteresis = -1 },
		"tells where":      func(c *Config) { c.Wheel.Teeth = 60 },
		"speed range":      func(c *Config) { c.MinRPM, c.MaxRPM = 500, 400 },
		"samples per turn": func(c *Config) { c.Rate = 1000 },
		"kept":             func(c *Config) { c.KeepSeconds = -1 },
	} {
		c := ok
		set(&c)
		if _, err := New(c); err == nil || !strings.Contains(err.Error(), text) {
			t.Errorf("want an error about %q, got %v", text, err)
		}
	}
	if _, err := New(ok); err != nil {
		t.Error(err)
	}
}
