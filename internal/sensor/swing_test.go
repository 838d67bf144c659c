package sensor

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"reflect"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
	"lapwing/internal/frame"
)

// A healthy machine whose speed, lines and load steps move all the time is never accused. The short run is in every
// test; LAPWING_LONG=1 plays three machines for more than 3000 turns in all.
func TestHealthyUnderSwings(t *testing.T) {
	runs := []struct {
		skid    string
		seconds float64
	}{{"biomethane-two-throw.yaml", 5}}
	whole := os.Getenv("LAPWING_LONG") != ""
	if whole {
		runs[0].seconds = 150
		runs = append(runs, runs[0], runs[0])
		runs[1].skid, runs[2].skid = "hydrogen-makeup.yaml", "fast-small.yaml"
		runs[2].seconds = 60
	}
	total, learn := 0, 40
	if !whole {
		learn = 16
	}
	for i, c := range runs {
		sk := machine(t, c.skid, whole)
		_, heard, turns := rig{sk: sk, script: swing(sk, c.seconds), seconds: c.seconds, seed: uint64(10 + i), learn: learn}.run(t)
		total += turns
		t.Logf("%s: %d turns", c.skid, turns)
		for _, h := range heard {
			t.Errorf("%s turn %d %s %v: %s", c.skid, h.turn, h.id, h.s.Category, h.s.Reason)
		}
	}
	if whole && total < 3000 || total < 55 {
		t.Errorf("%d turns in all", total)
	}
}

// A start from rest, a stop and another start: marks and machine sounds stretched as the shaft gathers speed.
func TestHealthyStartAndStop(t *testing.T) {
	sk, info, counts := recorded(t)
	speed := func(s float64) float64 { // shaft angle is the integral: 2.5 s start, run, 2 s stop
		switch {
		case s < 0.5:
			return 0
		case s < 3:
			return (s - 0.5) / 2.5
		case s < 4.5:
			return 1
		case s < 6.5:
			return 1 - (s-4.5)/2
		case s < 7:
			return 0
		}
		return min(1, (s-7)/2.5)
	}
	kinds := channels(sk, info)
	n := int(9.8 * info.Rate)
	out := make([][]int32, len(counts))
	at := 1000.0
	noise := map[Kind]float64{Phase: 13000, Pressure: 900, Acceleration: 2000} // rms, codes: what a shaft at rest leaves
	r := rand.New(rand.NewPCG(3, 4))
	for i := range n {
		v := speed(float64(i) / info.Rate)
		at += v
		k := int(at)
		for c := range counts {
			x := float64(counts[c][k]) + (at-float64(k))*(float64(counts[c][k+1])-float64(counts[c][k]))
			out[c] = append(out[c], int32(math.Round(x+(1-v)*noise[kinds[c].Kind]*r.NormFloat64())))
		}
	}
	w, heard, turns := rig{sk: sk, learn: 10, hold: 10}.play(t, acqtest.FromCounts(info, out, 512))
	for _, h := range heard {
		t.Errorf("turn %d %s %v: %s", h.turn, h.id, h.s.Category, h.s.Reason)
	}
	if turns < 40 || w.State(0).Category != Good {
		t.Errorf("%d turns, phase %v", turns, w.State(0))
	}
}

// The shaft reference.
func TestPhaseReference(t *testing.T) {
	for _, c := range []struct {
		name string
		want Fault
		cat  Category
		do   func(x []int32, rate float64, marks []int)
	}{
		{"healthy", 0, Good, func([]int32, float64, []int) {}},
		{"one lost and one extra mark", 0, Good, func(x []int32, _ float64, m []int) {
			blank(x, m[40], 700)
			bump(x, m[50]+1500, 100)
		}},
		{"marks lost now and then", Unsteady, OutOfSpecification, func(x []int32, _ float64, m []int) {
			for i := 20; i < 60; i += 12 {
				blank(x, m[i], 700)
			}
		}},
		{"scratch on the shaft", Pulses, MaintenanceRequired, func(x []int32, _ float64, m []int) {
			for i := 20; i < 60; i++ {
				bump(x, m[i]+1500, 100)
			}
		}},
		{"pick-up unplugged", NoMarks, Failure, func(x []int32, rate float64, m []int) { blank(x, m[40], len(x)) }},
		{"gap grown", Faint, MaintenanceRequired, func(x []int32, rate float64, m []int) {
			for i := range x {
				x[i] = x[i]/150 + int32((i*7919)%24001) - 12000
			}
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			sk, info, counts := recorded(t)
			x := counts[0]
			var marks []int
			for i := 1; i < len(x); i++ {
				if x[i] > 2e6 && x[i-1] <= 2e6 {
					marks = append(marks, i)
				}
			}
			c.do(x, info.Rate, marks)
			w, heard, _ := rig{sk: sk, learn: 16}.play(t, acqtest.FromCounts(info, counts, 1000))
			for _, h := range heard {
				t.Logf("turn %d %s %v: %s", h.turn, h.id, h.s.Category, h.s.Reason)
				if h.id != "phase" {
					t.Errorf("%s is accused", h.id)
				}
			}
			if s := w.State(0); s.Category != c.cat || s.Category > Good && s.Fault != c.want {
				t.Errorf("%v, %v; want %v, %v", s.Category, s.Fault, c.cat, c.want)
			}
		})
	}
}

func blank(x []int32, at, n int) {
	rest := x[at-2000]
	for i := max(0, at-n/4); i < min(len(x), at+n); i++ {
		x[i] = rest + int32(i%97)*100
	}
}

func bump(x []int32, at, n int) {
	for i := at; i < min(len(x), at+n); i++ {
		x[i] += 3e6
	}
}

// Gain and zero come from outside: residuals against the baseline, plateaus against the other ends.
func TestShifts(t *testing.T) {
	nan := math.NaN()
	fresh := func() *Watch {
		w, err := New(Config{Rate: 51200, Channels: []Channel{
			{ID: "a1", Input: 0, Kind: Acceleration, PerCount: 1e-6, FullV: 10, Gain: 98, InnerDead: nan},
			{ID: "p1h", Input: 1, Kind: Pressure, PerCount: 1e-6, FullV: 10, Gain: 1e6, InnerDead: nan}}})
		if err != nil {
			t.Fatal(err)
		}
		return w
	}
	gain := []struct {
		name     string
		openings []float64
		noise    []float64
		want     bool
	}{
		{"half the gain", []float64{-0.69, -0.7, -0.66, -0.71}, []float64{-0.69, -0.65, -0.7, -0.6}, true},
		{"one opening cannot be told apart", []float64{-0.69, nan, -0.66, -0.71}, []float64{nan, -0.65, nan, -0.6}, true},
		{"a leak: noise alone", []float64{0.02, -0.1, 0.1, 0}, []float64{1, 0.9, 1.2, 0.5}, false},
		{"openings alone", []float64{0.6, 0.5, 0.7, 0.6}, []float64{0.02, 0.1, 0, -0.1}, false},
		{"one opening the other way", []float64{0.6, -0.5, 0.7, 0.6}, []float64{0.6, 0.6, 0.6, 0.6}, false},
		{"the healthy maximum", []float64{0.2, 0.2, 0.2, 0.2}, []float64{0.2, 0.2, 0.2, 0.2}, false},
		{"one opening only", []float64{nan, nan, nan, -0.7}, []float64{-0.7, nan, nan, nan}, false},
		{"nothing known", []float64{nan, nan}, nil, false},
	}
	for _, c := range gain {
		w := fresh()
		for k := range 20 {
			w.turn = int64(k)
			w.Shift(0, int64(k), int64(4000*k), c.openings, c.noise)
			if s := w.State(0); (s.Category == OutOfSpecification && s.Fault == Gain && s.Judge) != (c.want && k >= 6) {
				t.Fatalf("%s: after %d turns %v %v", c.name, k+1, s.Category, s.Fault)
			}
		}
		if why := w.Suspect(0, 0, 1e9); why != "" {
			t.Errorf("%s: the judge would no longer see the channel: %s", c.name, why)
		}
	}
	for _, c := range []struct {
		suction, discharge float64
		want               bool
	}{{0.1, 0.12, true}, {-0.2, -0.18, true}, {0.2, -0.2, false}, {0.03, 0.2, false}, {0.2, nan, false}} {
		w := fresh()
		for k := range 20 {
			w.Plateaus(1, int64(k), int64(4000*k), c.suction, c.discharge)
		}
		if s := w.State(1); (s.Fault == Zero && s.Category == OutOfSpecification) != c.want {
			t.Errorf("plateaus off by %g and %g: %v %v", c.suction, c.discharge, s.Category, s.Fault)
		}
	}
}

// The same samples give the same states however they were cut; nothing said is NaN.
func TestAnyCutSaysTheSame(t *testing.T) {
	sk, info, counts := recorded(t)
	for i := range counts {
		counts[i] = counts[i][:int(4*info.Rate)]
	}
	for i := int(2.4 * info.Rate); i < len(counts[1]); i++ {
		counts[3][i] = max(-100000, min(100000, counts[3][i]))
		counts[1][i] += int32(8e4 * math.Sin(2*math.Pi*250*float64(i)/info.Rate))
	}
	var want string
	tell := func(w *Watch, heard []news) string {
		m, err := json.Marshal(w.Snapshot())
		if err != nil {
			t.Fatal(err)
		}
		return fmt.Sprint(string(m), heard)
	}
	w, heard, _ := rig{sk: sk, learn: 12, hold: 20}.quiet(t, acqtest.FromCounts(info, counts, 777))
	want = tell(w, heard)
	if len(heard) == 0 {
		t.Fatal("nothing was said")
	}
	n := 0
	rapid.Check(t, func(rt *rapid.T) {
		if n++; n > 6 {
			return // each draw is a whole recording
		}
		max := rapid.SampledFrom([]int{40, 1000, 30000}).Draw(rt, "longest")
		seed := rapid.IntRange(1, 1000).Draw(rt, "seed")
		src := acqtest.NewMemory(info, acqtest.Cut(acq.Block{N: len(counts[0]), Counts: counts}, func(i int) int { return 1 + (i*seed*7919)%max }))
		w, heard, _ := rig{sk: sk, learn: 12, hold: 20}.quiet(t, src)
		if got := tell(w, heard); got != want {
			rt.Fatalf("cut otherwise: %s\nwant %s", got, want)
		}
	})
}

// quiet plays without asking the shaft reference at block ends: those are where the cuts are.
func (r rig) quiet(t testing.TB, src acq.Source) (*Watch, []news, int) {
	r.deaf = true
	return r.play(t, src)
}

// Whatever the codes are, nothing panics, no number is NaN and every state has its sentence.
func FuzzFrames(f *testing.F) {
	f.Add([]byte{1, 2, 3, 250}, uint16(0), byte(0))
	f.Add([]byte{0, 0, 0, 0, 255, 255}, uint16(7), byte(64))
	f.Add([]byte{128, 127, 1}, uint16(65535), byte(200))
	f.Fuzz(func(t *testing.T, data []byte, q uint16, gap byte) {
		if len(data) == 0 {
			return
		}
		w, err := New(Config{Rate: 2560, Learn: 3, Hold: 4, Channels: []Channel{
			{ID: "phase", Input: 0},
			{ID: "p1h", Input: 1, Kind: Pressure, PerCount: 1e-8, FullV: 10, Gain: 1e6, ZeroV: 1, Min: 5e4, Max: 4e6, InnerDead: 20},
			{ID: "a1", Input: 2, Kind: Acceleration, PerCount: 1e-8, FullV: 10, Gain: -98, Min: -500, Max: 500},
			{ID: "a9", Input: 9, Kind: Acceleration, PerCount: 1e-8, FullV: 10, Gain: 98}}})
		if err != nil {
			t.Fatal(err)
		}
		seq := int64(0)
		for k := range 30 {
			n := 200 + int(data[k%len(data)])
			x := make([]int32, n)
			for i := range x {
				v := uint32(data[(i*k+i)%len(data)])
				x[i] = int32(v<<24 | v<<13 | uint32(i)*uint32(data[0]))
			}
			fr := frame.Frame{Turn: int64(k), Seq0: seq, Mark0: float64(seq) + 0.5, Mark1: float64(seq+int64(n)) - 0.5, Counts: [][]int32{x, x, x[:n-int(gap)%2]}}
			if k%5 == 1 {
				fr.Q = frame.Quality(q)
			}
			w.Frame(&fr)
			w.Shift(2, int64(k), seq, []float64{float64(data[0]) / 50}, []float64{math.NaN()})
			seq += int64(n) - 1 + int64(gap)*int64(k%2)
			for i := range w.Channels() {
				s := w.State(i)
				if (s.Reason == "") != (s.Category == Good) {
					t.Fatalf("%v: %q", s.Category, s.Reason)
				}
				w.Suspect(i, 0, seq)
			}
		}
		raw, err := json.Marshal(w.Snapshot())
		if err != nil {
			t.Fatal(err) // NaN and infinities are refused by JSON
		}
		var m Memory
		if err := json.Unmarshal(raw, &m); err != nil {
			t.Fatal(err)
		}
		if err := w.Restore(m); err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(w.Snapshot(), m) {
			t.Fatal("what is restored is not what was kept")
		}
	})
}

// A restart knows what was usual, and a fault that stood stands until the hold is over.
func TestRestart(t *testing.T) {
	sk, info, counts := recorded(t)
	half := int(3 * info.Rate)
	x := counts[3]
	for i := half - int(info.Rate); i < half; i++ {
		x[i] = max(-100000, min(100000, x[i]))
	}
	part := func(from, to int) (out [][]int32) {
		for _, c := range counts {
			out = append(out, c[from:to])
		}
		return out
	}
	before, _, _ := rig{sk: sk, learn: 20, hold: 12}.play(t, acqtest.FromCounts(info, part(0, half), 1000))
	if s := before.State(3); s.Fault != Clipped || s.Category != OutOfSpecification {
		t.Fatalf("before the restart: %+v", s)
	}
	m := before.Snapshot()
	var first State
	after, heard, _ := rig{sk: sk, learn: 20, hold: 12, start: func(w *Watch) {
		if err := w.Restore(m); err != nil {
			t.Fatal(err)
		}
		first = w.State(3)
	}}.play(t, acqtest.FromCounts(info, part(half, 2*half), 1000))
	if first.Fault != Clipped || first.Reason != before.State(3).Reason {
		t.Errorf("just after the restart: %+v", first)
	}
	if s := after.State(3); s.Category != Good || len(heard) > 2 {
		t.Errorf("after the hold: %+v, said %v", s, heard)
	}
	if after.ch[1].levels.N != before.ch[1].levels.N {
		t.Errorf("levels were learnt anew: %+v, had %+v", after.ch[1].levels, before.ch[1].levels)
	}
	bad := Memory{Channels: []ChannelMemory{{ID: "p9"}, {ID: "a1", Usual: Levels{N: -1}}, {ID: "p1h", Standing: []Standing{{"gone", "x"}}}}}
	if err := after.Restore(bad); err == nil {
		t.Error("a memory of another machine is taken")
	}
}

func TestNewRefuses(t *testing.T) {
	ok := Channel{ID: "a", Kind: Acceleration, PerCount: 1e-6, FullV: 10, Gain: 1}
	for name, cfg := range map[string]Config{
		"no rate":  {Channels: []Channel{ok}},
		"input":    {Rate: 1000, Channels: []Channel{{ID: "a", Input: -1}}},
		"no scale": {Rate: 1000, Channels: []Channel{{ID: "a", Kind: Pressure}}},
		"mains":    {Rate: 1000, MainsHz: 5000},
		"nan":      {Rate: math.NaN()},
	} {
		if _, err := New(cfg); err == nil {
			t.Errorf("%s is taken", name)
		}
	}
}

// The cost of a turn of seventeen channels.
func BenchmarkFrame(b *testing.B) {
	_, info, counts := recorded(b)
	var cfg Config
	cfg.Rate = info.Rate
	f := frame.Frame{Mark1: 4096.5, Mark0: 0.5}
	for i := range 17 {
		k := Pressure
		c := counts[1]
		if i > 12 {
			k, c = Acceleration, counts[3]
		}
		cfg.Channels = append(cfg.Channels, Channel{ID: fmt.Sprint(i), Input: i, Kind: k, PerCount: 1e-6, FullV: 10, Gain: 1, InnerDead: math.NaN()})
		f.Counts = append(f.Counts, c[50000:50000+4097])
	}
	w, err := New(cfg)
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		w.Frame(&f)
		f.Turn++
		f.Seq0 += 4096
		f.Mark0 += 4096
		f.Mark1 += 4096
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/17/4096, "ns/sample")
}
