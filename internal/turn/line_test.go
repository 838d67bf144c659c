package turn

import (
	"math"
	"reflect"
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

// One missing pulse: both revolutions of the frame that spans two, and those that lean on it, get a reason, one record
// each.
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
	list = append(list, frames[7:]...) // the frame after it is numbered by the shaft: 7 after 5
	for _, q := range []frame.Quality{frame.Missing, frame.Missing | frame.Gap, 0} {
		both.Q = q
		own := map[frame.Quality]string{frame.Missing: whyMissing, frame.Missing | frame.Gap: whyGap, 0: whyCount}[q]
		turns := run(converter(t, cfg), list)
		if len(turns) != len(frames) {
			t.Fatalf("%d revolutions, %d records", len(frames), len(turns))
		}
		for i, turn := range turns {
			want := ""
			switch {
			case i == 0:
				want = whyBegin
			case i == 5, i == 6 && q&frame.Gap == 0:
				want = own
			case i == 3 && q == 0: // emitted before the next number told
			case i == 3, i == 4, i == 6, i == 7:
				want = own + neighbour
			case i >= len(turns)-2:
				want = whyEnd
			}
			if turn.Reason != want || turn.Number != int64(i) {
				t.Errorf("quality %b, record %d: turn %d, %q, want %q", q, i, turn.Number, turn.Reason, want)
			}
			if (i == 5 || i == 6) != math.IsNaN(turn.RPM) {
				t.Errorf("quality %b, record %d: %g rpm", q, i, turn.RPM)
			}
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
