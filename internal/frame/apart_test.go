package frame

import (
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/acq"
	"lapwing/internal/acq/acqtest"
)

// ringGear is a wheel of equal teeth on input 0 and a mark apart on input 1, near pitches before a tooth.
type ringGear struct {
	cogs
	near  float64
	teeth int
	jit   float64 // pitches, of the mark, σ
	gone  func(turn, tooth int) bool
	blank func(turn int) bool // the mark does not come
	more  func(turn int) bool // a second mark, a third of a turn later
}

func usualGear() ringGear {
	g := ringGear{cogs: usualCogs(), near: 0.4, teeth: 90}
	g.seconds, g.noise = 2.5, 20
	return g
}

func (g ringGear) config() Config {
	return Config{Rate: g.rate, Inputs: 2, Channel: 0, Index: 1, Auto: true, Wheel: Wheel{Teeth: g.teeth, Separate: true}, MaxRPM: 2.3 * g.rpm}
}

// signals are made backwards from the shaft's angle: mark 0 is at whole turns.
func (g ringGear) signals() [][]int32 {
	r := rand.New(rand.NewPCG(g.seed, 9))
	n := int(g.seconds * g.rate)
	x := [][]int32{make([]int32, n), make([]int32, n)}
	jit := map[int]float64{}
	for i := range n {
		u := g.turns(float64(i) / g.rate)
		edge := u + 1./16/float64(g.teeth) // half of the rise
		turn := math.Floor(edge)
		tooth, in := math.Modf((edge - turn) * float64(g.teeth))
		v := g.noise * r.NormFloat64()
		if in < 0.5 && !(g.gone != nil && g.gone(int(turn), int(tooth))) {
			v += g.height * math.Min(1, 8*math.Min(in, 0.5-in))
		}
		x[0][i] = int32(math.Round(v))
		m := u + g.near/float64(g.teeth) // whole where the mark is
		k := int(math.Floor(m + .5))
		if _, ok := jit[k]; !ok {
			jit[k] = g.jit * r.NormFloat64() / float64(g.teeth)
		}
		w := g.noise * r.NormFloat64()
		pulse := func(at float64) {
			if d := m - float64(k) - jit[k] - at; d >= 0 && d < 0.01 {
				w += 9000 * math.Min(1, 3000*math.Min(d, .01-d))
			}
		}
		if !(g.blank != nil && g.blank(k)) {
			pulse(0)
		}
		if g.more != nil && g.more(k) {
			pulse(1. / 3)
		}
		x[1][i] = int32(math.Round(w))
	}
	return x
}

// Turns open at the tooth after the mark, whatever the mark does within its pitch; teeth are the inner marks.
func TestTeethBesideAMark(t *testing.T) {
	for name, c := range map[string]struct {
		set         func(*ringGear)
		lost, extra int // turns so marked
		missing     int
	}{
		"90 teeth":                   {set: func(*ringGear) {}},
		"300 teeth, slow":            {set: func(g *ringGear) { g.teeth, g.rpm, g.seconds, g.rate = 300, 150, 4, 51200 }},
		"ripple of 3 %":              {set: func(g *ringGear) { g.ripple = .03 }},
		"10 % a second up":           {set: func(g *ringGear) { g.ramp = .1 }},
		"the mark on a tooth":        {set: func(g *ringGear) { g.near, g.jit = 0.02, .02 }},
		"just before the next":       {set: func(g *ringGear) { g.near, g.jit = 0.8, .02 }},
		"a mark that jitters":        {set: func(g *ringGear) { g.jit = .1 }},
		"a tooth broken off":         {set: func(g *ringGear) { g.gone = func(turn, tooth int) bool { return turn > 8 && tooth == 40 } }, lost: 15},
		"tooth 0 broken off":         {set: func(g *ringGear) { g.gone = func(turn, tooth int) bool { return turn > 8 && tooth == 0 } }, lost: 16},
		"the mark lost once":         {set: func(g *ringGear) { g.blank = func(turn int) bool { return turn == 14 } }, missing: 1},
		"a second mark now and then": {set: func(g *ringGear) { g.more = func(turn int) bool { return turn > 8 && turn%5 == 0 } }, extra: 3},
	} {
		t.Run(name, func(t *testing.T) {
			g := usualGear()
			c.set(&g)
			got, st := frames(t, g.config(), cutUpAll(g.signals(), 512))
			pitch := 360 / float64(g.teeth)
			tol := .02*pitch + .16*360*g.rpm/60/g.rate
			lost, extra, missing := 0, 0, 0
			for i, f := range got {
				if i > 0 && f.Mark0 != got[i-1].Mark1 {
					t.Errorf("turn %d does not follow on its neighbour", f.Turn)
				}
				lost, extra, missing = lost+int(boolTo(f.Q&LostTooth != 0)), extra+int(boolTo(f.Q&Extra != 0)), missing+int(boolTo(f.Q&Missing != 0))
				n := math.Round(g.turns(f.Mark0 / g.rate))
				length := (f.Mark1 - f.Mark0) / 360
				at := func(what string, k int, pos, turns, tol float64) {
					if deg := (pos - g.at(turns)) / length; !(math.Abs(deg) <= tol) {
						t.Errorf("turn %d: %s %d off by %.3f°", f.Turn, what, k, deg)
					}
				}
				laid := tol
				if g.gone != nil {
					laid += .15 * pitch // mark 0 laid where its tooth would be
				}
				at("mark", 0, f.Mark0, n, laid)
				if f.Q&Missing != 0 {
					if len(f.Inner) > 0 {
						t.Errorf("turn %d spans several and has teeth", f.Turn)
					}
					continue
				}
				at("mark", 1, f.Mark1, n+1, laid)
				if len(f.Inner) != g.teeth-1 {
					t.Fatalf("turn %d: %d inner marks", f.Turn, len(f.Inner))
				}
				nan := 0
				for k, pos := range f.Inner {
					if math.IsNaN(pos) {
						nan++
						continue
					}
					at("tooth", k+1, pos, n+float64(k+1)/float64(g.teeth), tol)
				}
				if nan > 1 || nan == 1 && f.Q&LostTooth == 0 {
					t.Errorf("turn %d: %d teeth lost, %b", f.Turn, nan, f.Q)
				}
			}
			whole := int(g.turns(g.seconds) - g.turns(0))
			if len(got) < whole-4-c.missing || lost != c.lost || extra != c.extra || missing != c.missing || st.State != StateRunning {
				t.Errorf("%d turns of %d, %d with lost teeth, %d with extra marks, %d missing: want %d, %d, %d; %+v", len(got), whole, lost, extra, missing, c.lost, c.extra, c.missing, st)
			}
		})
	}
	for name, w := range map[string]Wheel{"no teeth": {Separate: true}, "two indices": {Teeth: 60, Missing: 2, Separate: true}} {
		if w.Check() == nil {
			t.Errorf("%s pass", name)
		}
	}
	g := usualGear()
	cfg := g.config()
	if cfg.Index = 0; func() error { _, err := New(cfg); return err }() == nil {
		t.Error("mark and teeth on one channel pass")
	}
}

func cutUpAll(x [][]int32, n int) (out []acq.Block) {
	return acqtest.Cut(acq.Block{N: len(x[0]), Counts: x}, func(int) int { return n })
}

func TestBlockCutsDoNotMatterToAMarkApart(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g := usualGear()
		g.seconds = .7
		g.rpm = rapid.Float64Range(300, 1200).Draw(t, "rpm")
		g.ramp = rapid.Float64Range(-.3, .3).Draw(t, "ramp")
		g.noise = rapid.Float64Range(0, 1500).Draw(t, "noise")
		g.near = rapid.Float64Range(0, 1).Draw(t, "near")
		g.jit = rapid.Float64Range(0, .2).Draw(t, "jitter")
		g.seed = rapid.Uint64().Draw(t, "seed")
		r := rand.New(rand.NewPCG(g.seed, 3))
		bad := make([]bool, 997)
		for i := range bad {
			bad[i] = r.Float64() < .03
		}
		g.gone = func(turn, tooth int) bool { return bad[((turn*g.teeth+tooth)%997+997)%997] }
		g.blank = func(turn int) bool { return bad[((turn*7)%997+997)%997] }
		x := g.signals()
		n := len(x[0])
		var blocks []acq.Block
		for from, seq := 0, int64(0); from < n; {
			k := min(n-from, 2000+r.IntN(9000))
			lost := int64(0)
			if from > 0 {
				lost = int64(r.IntN(2)) * int64(1+r.IntN(2000))
			}
			seq += lost
			blocks = append(blocks, acq.Block{Seq0: seq, N: k, Lost: lost, Counts: [][]int32{x[0][from : from+k], x[1][from : from+k]}})
			seq, from = seq+int64(k), from+k
		}
		want, _ := frames(t, g.config(), blocks)
		var pieces []acq.Block
		longest := 1 + r.IntN(3000)
		for _, b := range blocks {
			pieces = append(pieces, acqtest.Cut(b, func(int) int { return 1 + r.IntN(longest) })...)
		}
		got, _ := frames(t, g.config(), pieces)
		if len(got) != len(want) {
			t.Fatalf("%d frames, in one piece %d", len(got), len(want))
		}
		for i := range got {
			if !same(got[i], want[i]) {
				t.Fatalf("frame %d differs: turn %d %v..%v %b, in one piece turn %d %v..%v %b", i, got[i].Turn, got[i].Mark0, got[i].Mark1, got[i].Q, want[i].Turn, want[i].Mark0, want[i].Mark1, want[i].Q)
			}
			last := got[i].Mark0
			for k, m := range got[i].Inner {
				if !math.IsNaN(m) {
					if !(m > last && m < got[i].Mark1) {
						t.Fatalf("frame %d: tooth %d at %v after %v", i, k, m, last)
					}
					last = m
				}
			}
		}
	})
}
