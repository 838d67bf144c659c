package model

import (
	"math"
	"slices"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/skid"
)

// TestHealthyValvesBehave: over the duties the project works at, every group opens once, hits its stop at a plausible speed
// and is shut near its dead centre; nothing flutters. Bounds: stop impacts of 3 to 7 m/s are what models of the trade's valves
// give; at the low end of speed they are softer.
func TestHealthyValvesBehave(t *testing.T) {
	t.Parallel()
	for _, rpm := range []float64{500, 740, 1000} {
		for _, ratio := range []float64{1.8, 2.75, 3.6} {
			if (rpm == 740) != (ratio == 2.75) {
				continue // the corners and the middle are enough for a quick test
			}
			sk := demo()
			sk.Process.Stages[0].Pd = sk.Process.Stages[0].Ps * ratio
			m, err := New(sk, Script{RPM: rpm}, Options{Seed: 1, Rate: 25600})
			if err != nil {
				t.Fatal(err)
			}
			fill(m, 5*60/rpm)
			seen := 0
			for _, tr := range m.Truths() {
				if tr.Rev < 2 {
					continue
				}
				seen++
				bottom, top := 180.0, 360.0 // dead centres where suction and discharge should close
				if tr.End == crank.CE {
					bottom, top = 360, 180
				}
				between := func(what string, v, lo, hi float64) {
					t.Helper()
					if !(v >= lo && v <= hi) {
						t.Errorf("%g rev/min, ratio %g, throw %d end %d turn %d: %s is %.2f, want %g to %g",
							rpm, ratio, tr.Throw+1, tr.End, tr.Rev, what, v, lo, hi)
					}
				}
				between("suction stop speed", tr.Suction.Open.Speed, 2.4, 6)
				between("discharge stop speed", tr.Discharge.Open.Speed, 3, 8)
				between("lag of suction stop", tr.Suction.Open.Impact-tr.Suction.Open.Lift, 0.5, 6)
				between("lag of discharge stop", tr.Discharge.Open.Impact-tr.Discharge.Open.Lift, 0.5, 6)
				between("suction closing", tr.Suction.Close.Impact-bottom, -10, 14)
				between("discharge closing", tr.Discharge.Close.Impact-top, -8, 10)
				between("suction seat speed", tr.Suction.Close.Speed, heard, 2)
				between("discharge seat speed", tr.Discharge.Close.Speed, heard, 2)
				hard := 0
				for _, im := range tr.Impacts {
					if im.Speed > 0.8 {
						hard++
					}
				}
				if hard > 9 { // two valves a group: four stops and up to four firm seats
					t.Errorf("%g rev/min, ratio %g, throw %d end %d turn %d: %d hard impacts", rpm, ratio, tr.Throw+1, tr.End, tr.Rev, hard)
				}
			}
			if seen < 8 {
				t.Errorf("%g rev/min: only %d turns", rpm, seen)
			}
		}
	}
}

// TestOpeningOvershoot: a healthy group opens when the pressure is some per cent beyond the line; 5 to 15 % is the trade's rule for
// break-away (Bloch and Hoefner, p. 137), counted here to the extreme of the overshoot.
func TestOpeningOvershoot(t *testing.T) {
	t.Parallel()
	m := newDemo(t, Script{}, Options{Seed: 1, Rate: 25600})
	l := settle(t, m, 0, crank.HE, 2)
	top, bottom := slices.Max(l.p)/22e5-1, 1-slices.Min(l.p)/8e5
	if top < 0.04 || top > 0.16 {
		t.Errorf("discharge overshoots by %.3f of line pressure", top)
	}
	if bottom < 0.03 || bottom > 0.16 {
		t.Errorf("suction overshoots by %.3f of line pressure", bottom)
	}
}

// last gives the newest truth of an end.
func last(t *testing.T, m *Machine, th, side int) Truth {
	t.Helper()
	ts := m.Truths()
	for i := len(ts) - 1; i >= 0; i-- {
		if ts[i].Throw == th && ts[i].End == side {
			return ts[i]
		}
	}
	t.Fatal("no truth")
	return Truth{}
}

// TestLoadSteps: pocket, unloader and late closing do what they do on a machine.
func TestLoadSteps(t *testing.T) {
	t.Parallel()
	run := func(step int) Truth {
		m := newDemo(t, Script{Step: step}, Options{Seed: 1, Rate: 25600})
		fill(m, 0.45)
		return last(t, m, 0, crank.HE)
	}
	full, pocket, idle, late := run(0), run(1), run(2), run(3)
	c := demo().Throws[0].Cylinder
	// Closed form: V_open = V_max·(ps/pd)^(1/k) with the greater clearance.
	c.Clearance[0] += 0.3
	vmax := c.ClearanceVolume(0) + c.Swept(0)
	want := c.AngleOf(0, vmax*math.Pow(8.0/22, 1/1.29), true)
	within(t, "discharge opens with pocket", pocket.Discharge.Open.Lift, want, 4)
	if pocket.Delivered > 0.85*full.Delivered {
		t.Errorf("pocket: delivers %.4f kg of %.4f", pocket.Delivered, full.Delivered)
	}
	if !idle.Idle || !math.IsNaN(idle.Suction.Open.Lift) || !math.IsNaN(idle.Discharge.Open.Lift) {
		t.Errorf("idle end has events: %+v %+v", idle.Suction, idle.Discharge)
	}
	if math.Abs(idle.Power) > 0.08*full.Power || math.Abs(idle.Delivered) > 0.01*full.Delivered {
		t.Errorf("idle end takes %.0f W and delivers %.5f kg", idle.Power, idle.Delivered)
	}
	within(t, "late suction closing", late.Suction.Close.Impact, 180+60+6, 6)
	if late.Suction.Close.Speed < 1.3*full.Suction.Close.Speed {
		t.Errorf("late closing sits at %.2f m/s, full load at %.2f", late.Suction.Close.Speed, full.Suction.Close.Speed)
	}
	// 60° of hold leaves about 73 % of delivery in the published-form table; another machine, so a wide bound.
	if f := late.Delivered / full.Delivered; f < 0.6 || f > 0.85 {
		t.Errorf("late closing at 60° delivers %.2f of full load", f)
	}
	if late.Discharge.Open.Lift < full.Discharge.Open.Lift+3 {
		t.Error("late closing did not make the discharge open later")
	}
}

// TestFaults: each scripted fault shows where it should.
func TestFaults(t *testing.T) {
	t.Parallel()
	mean := func(s Script) (hardest, lift float64) {
		m, err := New(single(), s, Options{Seed: 1, Rate: 25600})
		if err != nil {
			t.Fatal(err)
		}
		fill(m, 0.5)
		n := 0.0
		for _, tr := range m.Truths() {
			if tr.Throw == 0 && tr.End == crank.HE && tr.Rev >= 2 {
				hardest += tr.Discharge.Open.Speed
				lift += tr.Discharge.Open.Lift
				n++
			}
		}
		return hardest / n, lift / n
	}
	v0, l0 := mean(Script{})
	v1, l1 := mean(Script{}.Add(0, 0, Sticky, "t1.he.d1", 0.1).Add(0, 0, Sticky, "t1.he.d2", 0.1))
	if v1 < 1.15*v0 || l1 < l0+0.5 {
		t.Errorf("sticking valves open at %.1f° with %.1f m/s, healthy ones at %.1f° with %.1f m/s", l1, v1, l0, v0)
	}
	peak := func(s Script) float64 {
		sk := single()
		m, err := New(sk, s, Options{Seed: 1})
		if err != nil {
			t.Fatal(err)
		}
		x := scaled(sk, "a.t1", collect(m, int(0.42*m.rate), []int{5120}), 24)
		var tops []float64
		for _, tr := range m.Truths() {
			if tr.Throw == 0 && tr.End == crank.HE && tr.Rev >= 2 {
				i := int(tr.Discharge.Open.ImpactTime * m.rate)
				top := 0.0
				for _, v := range x[i : i+120] {
					top = max(top, math.Abs(v))
				}
				tops = append(tops, top)
			}
		}
		slices.Sort(tops)
		return tops[len(tops)/2]
	}
	p0 := peak(Script{})
	p1 := peak(Script{}.Add(0, 0, Broken, "t1.he.d1", 1).Add(0, 0, Broken, "t1.he.d2", 1))
	if p1 < 1.4*p0 {
		t.Errorf("broken plates peak at %.0f m/s², whole ones at %.0f", p1, p0)
	}
	if p := peak(Script{}.Add(0, 0, AccelGain, "a.t1", 0)); p > 1 {
		t.Errorf("a dead accelerometer still peaks at %.1f m/s²", p)
	}
}

// TestZeroDrift: a transmitter's drift moves its channel and nothing else.
func TestZeroDrift(t *testing.T) {
	t.Parallel()
	sk := demo()
	run := func(s Script) [][]int32 {
		m, err := New(sk, s, Options{Seed: 1})
		if err != nil {
			t.Fatal(err)
		}
		return collect(m, 4096, []int{4096})
	}
	a, b := run(Script{}), run(Script{}.Add(0, 0, PressureZero, "p.t2.ce", 20e3))
	for _, c := range sk.Channels {
		x, y := scaled(sk, c.ID, a, 24), scaled(sk, c.ID, b, 24)
		want := 0.0
		if c.ID == "p.t2.ce" {
			want = 20e3
		}
		for i := range x {
			if d := y[i] - x[i]; math.Abs(d-want) > 2 {
				t.Fatalf("channel %s moved by %g, want %g", c.ID, d, want)
			}
		}
	}
}

// TestProcess: ramps arrive, a leaking valve's cover leaves its group, the discharge is as hot as the compression makes it.
func TestProcess(t *testing.T) {
	t.Parallel()
	s := Script{}.Add(0, 1, DischargePressure, "", 24e5).Add(0, 0, ValveLeak, "t1.he.s2", 30*MM2).Add(1, 0, LoadStep, "", 1)
	sk := demo()
	p, err := Typical(sk, nil)
	if err != nil {
		t.Fatal(err)
	}
	p.CoverLag = 1
	m, err := New(sk, s, Options{Seed: 1, Params: &p, Rate: 8000})
	if err != nil {
		t.Fatal(err)
	}
	fill(m, 2)
	start, mid, end := m.Process(0), m.Process(0.5), m.Process(100)
	within(t, "discharge pressure at first", start.Stages[0].Pd, 22e5, 5e3)
	within(t, "discharge pressure half way", mid.Stages[0].Pd, 23e5, 8e3)
	within(t, "discharge pressure at last", end.Stages[0].Pd, 24e5, 5e3)
	if start.Step != 0 || end.Step != 1 {
		t.Errorf("load steps %d and %d, want 0 and 1", start.Step, end.Step)
	}
	if d := end.Covers["t1.he.s2"] - end.Covers["t1.he.s1"]; d < 5 || d > 40 {
		t.Errorf("cover over the leak is %.1f K above its sister", d)
	}
	if d := math.Abs(end.Covers["t2.he.s2"] - end.Covers["t2.he.s1"]); d > 3 {
		t.Errorf("sound sister covers are %.1f K apart", d)
	}
	td := 303 * math.Pow(22.0/8, 0.27/1.27)
	within(t, "discharge temperature", start.Stages[0].Td, td, 12)
}

func TestScriptErrors(t *testing.T) {
	for name, s := range map[string]Script{
		"unknown valve":   Script{}.Add(0, 0, ValveLeak, "t9.he.s1", 1e-6),
		"unknown channel": Script{}.Add(0, 0, AccelGain, "p.t1.he", 0.5),
		"unknown stage":   Script{}.Add(0, 0, SuctionPressure, "2", 1e5),
		"unknown step":    Script{}.Add(0, 0, LoadStep, "", 17),
		"negative leak":   Script{}.Add(0, 0, ValveLeak, "t1.he.s1", -1e-6),
		"backwards":       Script{}.Add(0, 0, Speed, "", -10),
		"not a number":    Script{}.Add(0, 0, Speed, "", math.NaN()),
		"unknown what":    Script{}.Add(0, 0, What(99), "", 1),
		"no pressure":     {Lines: []skid.Line{{Ps: math.NaN(), Pd: 1e6, Ts: 300}}},
	} {
		if _, err := New(demo(), s, Options{}); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
	if _, err := New(demo(), Script{}, Options{Bits: 64}); err == nil {
		t.Error("64 bits: no error")
	}
	if _, err := New(&skid.Skid{}, Script{}, Options{}); err == nil {
		t.Error("a skid without throws: no error")
	}
}

// TestTrack: ramps, steps and a change that overtakes another.
func TestTrack(t *testing.T) {
	tr := track{base: 10, moves: []Change{{At: 1, Over: 2, To: 20}, {At: 2, Over: 1, To: 5}, {At: 5, To: 7}}}
	for _, c := range []struct{ t, want float64 }{{0, 10}, {1, 10}, {1.5, 12.5}, {2, 15}, {2.5, 10}, {3, 5}, {4.9, 5}, {5, 7}, {9, 7}} {
		within(t, "track", tr.at(c.t), c.want, 1e-12)
	}
}

// TestFinerSteps: four times the sampling rate moves neither angles nor masses noticeably.
func TestFinerSteps(t *testing.T) {
	t.Parallel()
	run := func(rate float64) Truth {
		p, err := Typical(demo(), nil)
		if err != nil {
			t.Fatal(err)
		}
		p.Scatter = 0
		sk := demo()
		sk.Throws = sk.Throws[:1]
		m, err := New(sk, Script{}, Options{Rate: rate, Params: &p})
		if err != nil {
			t.Fatal(err)
		}
		fill(m, 0.3)
		return last(t, m, 0, crank.HE)
	}
	a, b := run(25600), run(102400)
	within(t, "suction opening", a.Suction.Open.Lift, b.Suction.Open.Lift, 0.03)
	within(t, "discharge opening", a.Discharge.Open.Lift, b.Discharge.Open.Lift, 0.03)
	within(t, "suction stop", a.Suction.Open.Impact, b.Suction.Open.Impact, 0.05)
	within(t, "discharge stop", a.Discharge.Open.Impact, b.Discharge.Open.Impact, 0.05)
	within(t, "suction seat", a.Suction.Close.Impact, b.Suction.Close.Impact, 0.2)
	within(t, "discharge seat", a.Discharge.Close.Impact, b.Discharge.Close.Impact, 0.2)
	within(t, "stop speed", a.Discharge.Open.Speed, b.Discharge.Open.Speed, 0.1)
	within(t, "delivered", a.Delivered, b.Delivered, 1e-3*b.Delivered)
	within(t, "work", a.Work, b.Work, 1e-3*b.Work)
}

// TestSingleActing: a throw with one working end runs, and its rings leak to the blind side.
func TestSingleActing(t *testing.T) {
	t.Parallel()
	for _, blindAtSuction := range []bool{false, true} {
		sk := demo()
		sk.Throws = sk.Throws[:1]
		sk.Throws[0].Ends[crank.CE].Works = false
		sk.Throws[0].BlindAtSuction = blindAtSuction
		m, err := New(sk, Script{}, Options{Rate: 25600})
		if err != nil {
			t.Fatal(err)
		}
		fill(m, 0.3)
		tr := last(t, m, 0, crank.HE)
		if tr.Leaked.Rings <= 0 || math.IsNaN(tr.Discharge.Open.Impact) {
			t.Errorf("blind at suction %v: rings lose %g kg, discharge opens %v", blindAtSuction, tr.Leaked.Rings, tr.Discharge.Open)
		}
	}
}
