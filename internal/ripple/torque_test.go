package ripple

import (
	"math"
	"math/cmplx"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/dsp"
	"lapwing/internal/turn"
)

// worked is machine M1 of the worked examples (10 in × 6 in, 900 rpm) on two throws.
func worked() Machine {
	c := crank.Cylinder{Bore: .254, Stroke: .1524, ConRod: .381, PistonRod: .0635, Clearance: [2]float64{.18, .20}, MassPiston: 80, MassCrosshead: 60}
	both := [2]bool{true, true}
	return Machine{Inertia: 55, Atmosphere: 101325, Throws: []Throw{
		{Cylinder: c, DeadCentreDeg: 37, Works: both}, {Cylinder: c, DeadCentreDeg: 217, Works: both}}}
}

var (
	full     = []load{{ps: 2e6, pd: 5e6}, {ps: 2e6, pd: 5e6}}
	unloaded = []load{{ps: 2e6, pd: 5e6, idle: [2]bool{true, false}}, {ps: 2e6, pd: 5e6}}
	light    = []load{{ps: 2e6, pd: 3e6}, {ps: 2e6, pd: 3e6, idle: [2]bool{true, false}}}
)

// errors runs a converter over a run and gives the angle errors of all turns, by turn, and the stated uncertainty.
func angles(t *testing.T, m Machine, r *run, marks turn.Marks, learn func(*turn.Turn)) (errs [][]float64, u []float64) {
	t.Helper()
	cfg := config(m, r.rate)
	cfg.Marks = marks
	conv, err := turn.New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	errs, u = make([][]float64, r.turns), make([]float64, r.turns)
	for n := range r.turns {
		conv.Add(r.frame(m, n, 1), func(tt *turn.Turn) {
			if !tt.Valid() {
				return
			}
			if learn != nil {
				learn(tt)
			}
			perDeg := r.rate * 60 / tt.RPM / 360
			for k := range tt.Throws {
				th := &tt.Throws[k]
				for i := int(th.Grid.Index(0)); i < int(th.Grid.Index(360)); i++ {
					p := th.Pos[i]
					is := r.position(360*float64(tt.Number) + m.Throws[k].DeadCentreDeg + th.Grid.At(i))
					errs[tt.Number] = append(errs[tt.Number], math.Abs(p-is)/perDeg)
				}
			}
			u[tt.Number] = tt.Throws[0].U
		})
	}
	return errs, u
}

func p95(errs [][]float64, from, to int) float64 {
	var all []float64
	for _, e := range errs[from:to] {
		all = append(all, e...)
	}
	return dsp.Quantile(all, 0.95)
}

// The shaft's own motion under gas and inertia torque, solved by energy in the test, against the computed ripple: with
// the inertia known p95 falls from 0.4 to 1.2° to 0.02°; with 15 % error of the inertia it stays within the stated
// 0.3° (windows.md section 1 found 0.01 to 0.09° and 0.1 to 0.3°).
func TestComputedRippleAgainstTheEnergyOfTheShaft(t *testing.T) {
	for _, c := range []struct {
		name    string
		loads   []load
		rpm     float64
		least   float64 // degrees, p95 when ignored: the case bites
		inertia float64 // stated over true
		most    float64
	}{
		{"both loaded, 900 rpm", full, 900, 0.2, 1, 0.03},
		{"both loaded, 600 rpm", full, 600, 0.4, 1, 0.03},
		{"one end unloaded, 900 rpm", unloaded, 900, 0.4, 1, 0.03},
		{"one end unloaded, 700 rpm", unloaded, 700, 0.8, 1, 0.05},
		{"light, 900 rpm", light, 900, 0.1, 1, 0.03},
		{"inertia 15 % too high", unloaded, 700, 0.8, 1.15, 0.3},
		{"inertia 15 % too low", unloaded, 700, 0.8, 0.85, 0.3},
	} {
		m := worked()
		r := newRun(m, 12800, c.rpm, 11, c.loads)
		before, u := angles(t, m, r, turn.Marks{}, nil)
		if u[8] != 1.2 {
			t.Errorf("%s: without ripple %g° are stated", c.name, u[8])
		}
		said := m
		said.Inertia *= c.inertia
		q, err := NewTorque(said)
		if err != nil {
			t.Fatal(err)
		}
		b := NewBook(Config{At: func(int) []turn.Ripple { return nil }, Torque: q})
		nan := []float64{math.NaN(), math.NaN()}
		after, u := angles(t, m, r, turn.Marks{Shaft: func(float64) turn.Shaft { return b.For(0) }}, func(tt *turn.Turn) {
			if why := b.Learn(tt, nan); why != "" {
				t.Fatal(why)
			}
		})
		x, y := p95(before, 5, 9), p95(after, 5, 9)
		var amp []float64
		for _, z := range b.now.inUse {
			amp = append(amp, 100*cmplx.Abs(z))
		}
		t.Logf("%-26s p95 %.3f° ignored, %.4f° computed, U %.2f°; amplitudes %.3f %%", c.name, x, y, u[8], amp)
		if x < c.least || y > c.most {
			t.Errorf("%s: p95 %.3f° before, %.4f° after; want at least %g and at most %g", c.name, x, y, c.least, c.most)
		}
		if first := dsp.Quantile(after[1], 0.95); u[1] < 1.2 || u[1] < first || u[8] != 0.3 {
			t.Errorf("%s: first turn ±%g°, 95 %% within %.2f°, later ±%g°; want 1.2 at least and 0.3", c.name, u[1], first, u[8])
		}
	}
}

// When the load changes and nobody says so, the ripple in force is the old one for a few turns: the uncertainty then
// says so, and holds 95 % of the angles of every turn. When the step is told, the new step begins unknown and the old
// one's ripple is still there on the way back.
func TestUncertaintyWidensWhileTheLoadMoves(t *testing.T) {
	m := worked()
	r := newRun(m, 12800, 700, 11, unloaded, full, unloaded)
	q, err := NewTorque(m)
	if err != nil {
		t.Fatal(err)
	}
	for _, told := range []bool{false, true} {
		b := NewBook(Config{At: func(int) []turn.Ripple { return nil }, Torque: q})
		step := func(at float64) int {
			if !told {
				return 0
			}
			k := 0
			for k < 2 && at >= r.starts[k+1]-1e-9 {
				k++
			}
			return k % 2
		}
		errs, u := angles(t, m, r, turn.Marks{Shaft: func(at float64) turn.Shaft { return b.For(step(at)) }}, func(tt *turn.Turn) {
			if why := b.Learn(tt, []float64{0, 0}); why != "" {
				t.Fatal(why)
			}
		})
		widest := 0.0
		for n := 2; n < 31; n++ {
			if len(errs[n]) == 0 {
				t.Fatalf("told %v: turn %d is missing", told, n)
			}
			if e := dsp.Quantile(errs[n], 0.95); e > u[n] {
				t.Errorf("told %v: turn %d states ±%.2f°, 95 %% lie within %.3f°", told, n, u[n], e)
			}
			if n > 8 {
				widest = max(widest, u[n])
			}
		}
		if widest < 0.5 {
			t.Errorf("told %v: the change does not bite, widest ±%g°", told, widest)
		}
		if back := u[24]; told && back != 0.3 {
			t.Errorf("back at a known step: ±%g°", back)
		}
	}
}

// Measured ripple goes before computed one, and nothing is computed then.
func TestMeasuredRippleGoesFirst(t *testing.T) {
	q, err := NewTorque(worked())
	if err != nil {
		t.Fatal(err)
	}
	given := []turn.Ripple{{Order: 1, Amp: 0.01}}
	b := NewBook(Config{Torque: q, U: 0.2, At: func(step int) []turn.Ripple {
		if step == 3 {
			return given
		}
		return nil
	}})
	if s := b.For(3); len(s.Ripple) != 1 || s.U != 0.2 {
		t.Errorf("step 3: %+v", s)
	}
	if why := b.Learn(&turn.Turn{}, nil); why != "" {
		t.Errorf("a measured ripple is learnt: %q", why)
	}
	if s := b.For(4); s.Ripple != nil || s.U != 0.2 {
		t.Errorf("step 4 before its first turn: %+v", s)
	}
}

func TestWhatCannotBeComputedSaysWhy(t *testing.T) {
	m := worked()
	r := newRun(m, 12800, 900, 6, full)
	conv, err := turn.New(config(m, r.rate))
	if err != nil {
		t.Fatal(err)
	}
	var tt *turn.Turn
	for n := range r.turns {
		conv.Add(r.frame(m, n, 1), func(x *turn.Turn) {
			if x.Valid() {
				tt = x.Clone()
			}
		})
	}
	try := func(m Machine, spoil func(*turn.Turn), ps ...float64) (Harmonics, string) {
		q, err := NewTorque(m)
		if err != nil {
			t.Fatal(err)
		}
		c := tt.Clone()
		spoil(c)
		return q.Of(c, ps)
	}
	none := func(*turn.Turn) {}
	blind := m
	blind.Throws = append([]Throw(nil), m.Throws...)
	blind.Throws[1].Works[1] = false
	suction := blind
	suction.Throws = append([]Throw(nil), blind.Throws...)
	suction.Throws[1].BlindAtSuction = true
	for name, c := range map[string]struct {
		m     Machine
		spoil func(*turn.Turn)
		ps    []float64
		want  string
	}{
		"sound":                 {m, none, []float64{0, 0}, ""},
		"not valid":             {m, func(x *turn.Turn) { x.Reason = "x" }, []float64{0, 0}, whyTurn},
		"a throw less":          {m, func(x *turn.Turn) { x.Throws = x.Throws[:1] }, []float64{0, 0}, whyThrows},
		"bad pressure":          {m, func(x *turn.Turn) { x.Throws[1].Bad[0] = "x" }, []float64{0, 0}, whyPressure},
		"no pressure":           {m, func(x *turn.Turn) { x.Throws[0].P[1] = nil }, []float64{0, 0}, whyPressure},
		"blind, no pressure":    {blind, func(x *turn.Turn) { x.Throws[1].P[1] = nil }, []float64{0, 0}, ""},
		"blind at unknown":      {suction, none, []float64{0, math.NaN()}, whySuction},
		"blind at suction":      {suction, none, []float64{0, 2e6}, ""},
		"not a number in trace": {m, func(x *turn.Turn) { x.Throws[0].P[0][300] = math.NaN() }, []float64{0, 0}, whyPressure},
	} {
		h, why := try(c.m, c.spoil, c.ps...)
		if why != c.want || (why == "") != (h != Harmonics{}) {
			t.Errorf("%s: %q, want %q; %v", name, why, c.want, h)
		}
	}
	// A constant force is no torque of its own mean, but of order 1: 2e6 Pa behind the piston must show.
	a, _ := try(blind, none, 0, 0)
	b, _ := try(suction, none, 0, 2e6)
	if a.Apart(b) < 0.05 {
		t.Errorf("pressure behind a blind end moves the ripple by %g° only", a.Apart(b))
	}
	if _, err := NewTorque(Machine{Inertia: 1, Atmosphere: 1e5}); err == nil {
		t.Error("a machine without throws is taken")
	}
	if _, err := NewTorque(Machine{Atmosphere: 1e5, Throws: m.Throws}); err == nil {
		t.Error("a machine without inertia is taken")
	}
	// A ripple in force that can no longer be checked is not called known.
	known, _ := NewTorque(m)
	kept := NewBook(Config{Torque: known, At: func(int) []turn.Ripple { return nil }})
	for i, spoil := range []string{"", "", "open cable"} {
		kept.For(0)
		c := tt.Clone()
		c.Throws[0].Bad[0] = spoil
		for k := range c.Throws {
			c.Throws[k].U = 0.3
		}
		why := kept.Learn(c, []float64{0, 0})
		if want := []bool{true, false, true}[i]; (c.Throws[1].U > 0.3) != want || (why != "") != (spoil != "") {
			t.Errorf("turn %d, %q: ±%g°, %q", i, spoil, c.Throws[1].U, why)
		}
	}
	tiny := m
	tiny.Inertia = 0.5
	q, _ := NewTorque(tiny)
	book := NewBook(Config{Torque: q, At: func(int) []turn.Ripple { return nil }})
	book.For(0)
	if why := book.Learn(tt.Clone(), []float64{0, 0}); why != whyInertia || len(book.For(0).Ripple) != 0 {
		t.Errorf("an inertia a hundred times too small: %q, %v", why, book.For(0).Ripple)
	}
}

func BenchmarkLearn(b *testing.B) {
	m := worked()
	r := newRun(m, 12800, 900, 6, full)
	conv, err := turn.New(config(m, r.rate))
	if err != nil {
		b.Fatal(err)
	}
	q, err := NewTorque(m)
	if err != nil {
		b.Fatal(err)
	}
	book := NewBook(Config{Torque: q, At: func(int) []turn.Ripple { return nil }})
	for n := range r.turns {
		conv.Add(r.frame(m, n, 1), func(x *turn.Turn) {
			if x.Number == 2 {
				ps := []float64{0, 0}
				b.ReportAllocs()
				for b.Loop() {
					book.For(0)
					book.Learn(x, ps)
				}
			}
		})
	}
}
