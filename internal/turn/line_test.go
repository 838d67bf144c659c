package turn

import (
	"math"
	"reflect"
	"strings"
	"testing"

	"lapwing/internal/frame"
	"pgregory.net/rapid"
)

// machine gives a small two-throw configuration with all kinds of channels and its frames.
func machine(t testing.TB, revs float64) (Config, []*frame.Frame) {
	t.Helper()
	const rate, rpm = 51200, 1200
	s := newShaft(rate, (revs+1)*60/rpm, ramp(rpm, 0.02), nil, 1)
	frames := s.frames(4, func(k int, deg float64, n int) float64 {
		if k < 2 {
			return 1e6 + 4e5*math.Cos((deg+180*float64(k))*math.Pi/180)
		}
		return 1e4 * math.Sin(float64(n)*float64(n)*0.37)
	})
	acc := func(id string, k int) Channel { return Channel{ID: id, Input: k, Gain: 1e-3, Min: -1e3, Max: 1e3} }
	return Config{Rate: rate, Throws: []ThrowConfig{
		{DeadCentreDeg: 40, Pressure: [2]Channel{{ID: "h", Input: 0, Gain: 1, Max: 1e7}, {ID: "c", Input: 1, Gain: 1}}, Accel: []Channel{acc("a", 2), acc("b", 3)}},
		{DeadCentreDeg: 310, Pressure: [2]Channel{None(), None()}, Accel: []Channel{acc("b", 3)}},
	}}, frames
}

func converter(t testing.TB, cfg Config) *Converter {
	t.Helper()
	c, err := New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func TestStartAndEnd(t *testing.T) {
	cfg, frames := machine(t, 6)
	turns := run(converter(t, cfg), frames)
	if len(turns) != len(frames) || len(frames) < 6 {
		t.Fatalf("%d frames, %d turns", len(frames), len(turns))
	}
	for i, turn := range turns {
		want := ""
		switch i {
		case 0:
			want = whyBegin
		case len(turns) - 2, len(turns) - 1:
			want = whyEnd
		}
		if turn.Reason != want || turn.Number != int64(i) {
			t.Errorf("turn %d of number %d: %q, want %q", i, turn.Number, turn.Reason, want)
		}
		if (want == "") != (len(turn.Throws) == 2) {
			t.Errorf("turn %d: %q with %d throws", i, turn.Reason, len(turn.Throws))
		}
		if rpm := 1200 * (1 + 0.02*frames[i].Mark0/cfg.Rate); math.Abs(turn.RPM/rpm-1) > 0.003 {
			t.Errorf("turn %d: %g rpm, want %g", i, turn.RPM, rpm)
		}
		for _, th := range turn.Throws {
			if th.Pos[0] < float64(turn.Seq0) || th.Pos[th.Grid.N-1] > float64(turn.Seq1) {
				t.Errorf("turn %d: grid %g..%g outside samples %d..%d", i, th.Pos[0], th.Pos[th.Grid.N-1], turn.Seq0, turn.Seq1)
			}
		}
		if want == "" && math.Abs(turn.Time-turn.Throws[0].T0/cfg.Rate) > 1e-12 {
			t.Errorf("turn %d: time %g", i, turn.Time)
		}
	}
}

// Whatever befalls a frame, every frame gives exactly one record, in order, and only those whose neighbours are sound
// give a turn.
func TestOneRecordPerFrame(t *testing.T) {
	s := newShaft(2400, 2.3, steady(600), nil, 1)
	sound := s.frames(1, func(int, float64, int) float64 { return 5 })
	flags := []frame.Quality{0, 0, 0, 0, 0, 0, frame.Missing, frame.Gap, frame.Starting, frame.Uneven, frame.Clipped, frame.Extra}
	rapid.Check(t, func(t *rapid.T) {
		c, err := New(Config{Rate: s.rate, Throws: []ThrowConfig{{DeadCentreDeg: rapid.Float64Range(0, 359).Draw(t, "dead"),
			Pressure: [2]Channel{{Gain: 1}, None()}}}})
		if err != nil {
			t.Fatal(err)
		}
		var frames []*frame.Frame
		joined := map[int]bool{} // frame follows the one before it without a break
		for i, f := range sound {
			g := *f
			g.Q = flags[rapid.IntRange(0, len(flags)-1).Draw(t, "flag")]
			joined[len(frames)] = i > 0
			switch rapid.IntRange(0, 24).Draw(t, "fate") {
			case 0: // lost altogether
				continue
			case 1: // without the needed input
				g.Counts = nil
			case 2: // without the sample it shares with the one before
				g.Counts = [][]int32{g.Counts[0][1:]}
				g.Seq0++
			}
			frames = append(frames, &g)
		}
		good := func(i int) bool {
			return i >= 0 && i < len(frames) && frames[i].Good() && frames[i].Counts != nil
		}
		next := func(i int) bool { return frames[i].Turn == frames[i-1].Turn+1 }
		turns := run(c, frames)
		if len(turns) != len(frames) {
			t.Fatalf("%d frames, %d records", len(frames), len(turns))
		}
		for i, turn := range turns {
			want := good(i-1) && good(i) && good(i+1) && good(i+2) && next(i) && next(i+1) && next(i+2)
			if turn.Number != frames[i].Turn || turn.Valid() != want {
				t.Fatalf("record %d: turn %d %q; want turn %d, valid %v", i, turn.Number, turn.Reason, frames[i].Turn, want)
			}
			for _, th := range turn.Throws {
				for _, p := range th.P[0] {
					if math.Abs(p-5) > 1e-9 {
						t.Fatalf("record %d: pressure %g", i, p)
					}
				}
				if clip := frames[i-1].Q | frames[i].Q | frames[i+1].Q | frames[i+2].Q; turn.Quality != clip {
					t.Fatalf("record %d: quality %b, want %b", i, turn.Quality, clip)
				}
			}
		}
	})
}

// One missing pulse: the frame that spans two revolutions and its neighbours get a reason, one record each.
func TestMissingPulse(t *testing.T) {
	cfg, frames := machine(t, 12)
	f, g := frames[5], frames[6]
	both := *f
	both.Mark1, both.Q = g.Mark1, frame.Missing
	both.Counts = nil
	for k := range f.Counts {
		shared := int(f.Seq0) + len(f.Counts[k]) - int(g.Seq0)
		both.Counts = append(both.Counts, append(append([]int32(nil), f.Counts[k]...), g.Counts[k][shared:]...))
	}
	list := append(append([]*frame.Frame(nil), frames[:5]...), &both)
	for i, f := range frames[7:] { // the assembler counts on by one
		h := *f
		h.Turn = int64(6 + i)
		list = append(list, &h)
	}
	turns := run(converter(t, cfg), list)
	if len(turns) != len(list) {
		t.Fatalf("%d frames, %d records", len(list), len(turns))
	}
	for i, turn := range turns {
		want := ""
		switch {
		case i == 0:
			want = whyBegin
		case i == 5:
			want = whyMissing
		case i == 3 || i == 4 || i == 6:
			want = whyMissing + neighbour
		case i >= len(turns)-2:
			want = whyEnd
		}
		if turn.Reason != want || turn.Number != int64(i) {
			t.Errorf("record %d: turn %d, %q, want %q", i, turn.Number, turn.Reason, want)
		}
		if (i == 5) != math.IsNaN(turn.RPM) {
			t.Errorf("record %d: %g rpm", i, turn.RPM)
		}
	}
}

// Lost samples reset the filters: after a gap the turns are those of a stream that begins there, bit for bit.
func TestGapStartsAfresh(t *testing.T) {
	cfg, frames := machine(t, 14)
	broken := *frames[5]
	broken.Q = frame.Gap
	broken.Counts = [][]int32{{1}, {2}, {3}, {4}}
	all := run(converter(t, cfg), append(append(append([]*frame.Frame(nil), frames[:5]...), &broken), frames[6:]...))
	tail := run(converter(t, cfg), frames[6:])
	if len(all) != len(frames) || all[5].Reason != whyGap || all[4].Reason != whyGap+neighbour || all[6].Reason != whyGap+neighbour {
		t.Fatalf("%d records: %q %q %q", len(all), all[4].Reason, all[5].Reason, all[6].Reason)
	}
	for i := 1; i < len(tail); i++ {
		if !reflect.DeepEqual(all[6+i], tail[i]) {
			t.Errorf("turn %d differs from that of a fresh stream", tail[i].Number)
		}
	}
	if !tail[1].Valid() {
		t.Errorf("turn %d: %s", tail[1].Number, tail[1].Reason)
	}
}

// Frames may share their boundary sample or not; the turns are the same bits. So are those of a second run.
func TestSameBits(t *testing.T) {
	cfg, frames := machine(t, 8)
	a, b := run(converter(t, cfg), frames), run(converter(t, cfg), frames)
	var lean []*frame.Frame
	for i, f := range frames {
		g := *f
		if i > 0 {
			g.Seq0++
			g.Counts = nil
			for _, c := range f.Counts {
				g.Counts = append(g.Counts, c[1:])
			}
		}
		lean = append(lean, &g)
	}
	c := run(converter(t, cfg), lean)
	for i := range a {
		if !a[i].Valid() {
			continue
		}
		if !reflect.DeepEqual(a[i], b[i]) || !reflect.DeepEqual(a[i], c[i]) {
			t.Errorf("turn %d differs", i)
		}
	}
}

func TestSuspects(t *testing.T) {
	cfg, frames := machine(t, 9)
	frames[2].Q |= frame.Clipped
	frames[6].Counts[0][100] = 2e7 // above the 10 MPa of the head end's range
	frames[6].Counts[3][100] = -2e6
	for i, turn := range run(converter(t, cfg), frames) {
		if !turn.Valid() {
			continue
		}
		he, ce := turn.Throws[0].Bad[0], turn.Throws[0].Bad[1]
		a, b, far := turn.Throws[0].Vib[0].Suspect, turn.Throws[0].Vib[1].Suspect, turn.Throws[1].Vib[0].Suspect
		switch i {
		case 1, 2:
			if !strings.Contains(he, "overload") || !strings.Contains(ce, "overload") || !strings.Contains(a, "overload") {
				t.Errorf("turn %d: overload not told: %q %q %q", i, he, ce, a)
			}
		case 6: // sample 100 of frame 6 is at 39°: in turn 6 of throw 1 (dead centre 40°) and, padded, in turn 5 of both
			if !strings.Contains(he, "range") || ce != "" || a != "" || !strings.Contains(b, "range") || far != "" {
				t.Errorf("turn %d: %q %q %q %q %q", i, he, ce, a, b, far)
			}
		case 5:
			if !strings.Contains(he, "range") || !strings.Contains(far, "range") {
				t.Errorf("turn %d: %q %q", i, he, far)
			}
		case 4:
			if he != "" || !strings.Contains(far, "range") { // throw 2 turn 4 reaches to 310+420 = 730°
				if he != "" {
					t.Errorf("turn %d: %q", i, he)
				}
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

func TestConfigRefusals(t *testing.T) {
	for name, spoil := range map[string]func(*Config){
		"no rate":       func(c *Config) { c.Rate = 0 },
		"step":          func(c *Config) { c.Step = 0.7 },
		"fine step":     func(c *Config) { c.Step = 0.05 },
		"no throws":     func(c *Config) { c.Throws = nil },
		"dead centre":   func(c *Config) { c.Throws[0].DeadCentreDeg = 360 },
		"NaN gain":      func(c *Config) { c.Throws[0].Pressure[0].Gain = math.NaN() },
		"zero gain":     func(c *Config) { c.Throws[0].Accel[0].Gain = 0 },
		"range":         func(c *Config) { c.Throws[0].Accel[0].Min = 2000 },
		"no input":      func(c *Config) { c.Throws[0].Accel[0].Input = -1 },
		"band":          func(c *Config) { c.ImpactBand = [2]float64{5000, 3000} },
		"ripple size":   func(c *Config) { c.Marks.Ripple = []Ripple{{2, 2, 0}} },
		"ripple order":  func(c *Config) { c.Marks.Ripple = []Ripple{{0, 0.01, 0}} },
		"marks":         func(c *Config) { c.Marks.Inner = []float64{200, 100} },
		"uncertainty":   func(c *Config) { c.Marks.U = -1 },
		"nothing to do": func(c *Config) { c.Throws = []ThrowConfig{{Pressure: [2]Channel{None(), None()}}} },
	} {
		cfg, _ := machine(t, 1)
		spoil(&cfg)
		if _, err := New(cfg); err == nil || !strings.HasPrefix(err.Error(), "turn: ") {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestMarksThatDoNotFit(t *testing.T) {
	cfg, frames := machine(t, 7)
	frames[3].Inner = []float64{(frames[3].Mark0 + frames[3].Mark1) / 2}
	for i, turn := range run(converter(t, cfg), frames) {
		if i >= 1 && i <= 4 && !strings.Contains(turn.Reason, "number of marks") {
			t.Errorf("turn %d: %q", i, turn.Reason)
		}
	}
	cfg, frames = machine(t, 7)
	cfg.Marks.Inner = []float64{120, 240}
	if r := run(converter(t, cfg), frames)[2].Reason; !strings.Contains(r, "configured") {
		t.Errorf("%q", r)
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

func TestSteadyStateAllocatesNothing(t *testing.T) {
	cfg, frames := machine(t, 40)
	c := converter(t, cfg)
	i, seen := 0, 0
	count := func(t *Turn) {
		if t.Valid() {
			seen++
		}
	}
	next := func() {
		c.Add(frames[i], count)
		i++
	}
	for range 12 {
		next()
	}
	if n := testing.AllocsPerRun(20, next); n != 0 {
		t.Errorf("%g allocations a turn", n)
	}
	if seen < 20 {
		t.Errorf("%d turns", seen)
	}
}

// One cylinder with two pressures and one accelerometer at 51.2 kHz and 700 rpm.
func BenchmarkTurn(b *testing.B) {
	const rate, rpm = 51200, 700
	s := newShaft(rate, 4, steady(rpm), []Ripple{{2, 0.01, 30}}, 1)
	frames := s.frames(3, func(k int, deg float64, n int) float64 { return 1e6 + 4e5*math.Sin(float64(n%977)+deg) })
	c := converter(b, Config{Rate: rate, Marks: Marks{Ripple: []Ripple{{2, 0.01, 30}}}, Throws: []ThrowConfig{{DeadCentreDeg: 40,
		Pressure: [2]Channel{{Input: 0, Gain: 1}, {Input: 1, Gain: 1}}, Accel: []Channel{{Input: 2, Gain: 1e-3}}}}})
	frames = frames[:20]
	span := frames[19].Mark1 - frames[0].Mark0
	whole := math.Round(span)
	f, n, turns := new(frame.Frame), 0, 0
	count := func(t *Turn) {
		if t.Valid() {
			turns++
		}
	}
	b.ReportAllocs()
	for b.Loop() { // the same twenty revolutions again and again, later and later
		*f = *frames[n%20]
		lap := n / 20
		f.Turn = int64(n)
		f.Seq0 += int64(lap) * int64(whole)
		f.Mark0 += float64(lap) * whole
		f.Mark1 += float64(lap) * whole
		if n%20 == 19 {
			f.Mark1 = frames[0].Mark0 + float64(lap+1)*whole
		}
		c.Add(f, count)
		n++
	}
	b.ReportMetric(float64(turns)/b.Elapsed().Seconds(), "turns/s")
	if n > 10 && turns < n/2 {
		b.Fatalf("%d frames, %d turns", n, turns)
	}
}
