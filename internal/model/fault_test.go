package model

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"lapwing/internal/crank"
)

// headEnds runs a one-throw demo machine and gives the head end's turns from the third on.
func headEnds(t *testing.T, s Script) (out []Truth) {
	t.Helper()
	m, err := New(single(), s, Options{Seed: 1, Rate: 25600})
	if err != nil {
		t.Fatal(err)
	}
	fill(m, 0.46)
	for _, tr := range m.Truths() {
		if tr.End == crank.HE && tr.Rev >= 2 {
			out = append(out, tr)
		}
	}
	if len(out) < 2 {
		t.Fatalf("%d turns", len(out))
	}
	return out
}

func meanOf(ts []Truth, look func(Truth) float64) float64 {
	sum := 0.0
	for _, tr := range ts {
		sum += look(tr)
	}
	return sum / float64(len(ts))
}

// TestValveFaults: each fault of a valve's mechanics does what people know it for (common practice, no source).
func TestValveFaults(t *testing.T) {
	t.Parallel()
	both := func(w What, to float64) Script {
		return Script{}.Add(0, 0, w, "t1.he.d1", to).Add(0, 0, w, "t1.he.d2", to)
	}
	opens := func(tr Truth) float64 { return tr.Discharge.Open.Lift }
	closes := func(tr Truth) float64 { return tr.Discharge.Close.Impact }
	seat := func(tr Truth) float64 { return tr.Discharge.Close.Speed }
	hits := func(tr Truth) float64 {
		n := 0.0
		for _, im := range tr.Impacts {
			if (im.Valve == "t1.he.d1" || im.Valve == "t1.he.d2") && im.Speed > 0.5 {
				n++
			}
		}
		return n
	}
	sound := headEnds(t, Script{})
	ill := map[string][]Truth{} // by script: some are looked at twice
	for _, c := range []struct {
		what   string
		s      Script
		look   func(Truth) float64
		lo, hi float64 // of the change
	}{
		{"gummed valves close later", both(Gummed, 0.01), closes, 2, 30},
		{"and sit harder", both(Gummed, 0.01), seat, 0.3, 8},
		{"weak springs close later", both(Springs, 0.3), closes, 1.5, 30},
		{"and sit harder", both(Springs, 0.3), seat, 0.3, 8},
		{"springs too stiff for the flow flutter", both(Springs, 4), hits, 2, 40},
		{"a missing piece leaks: the discharge opens earlier", Script{}.Add(0, 0, Missing, "t1.he.d1", 0.05), opens, -30, -2},
		{"a pocket that opens without a load step: the discharge opens later", Script{}.Add(0, 0, Pocket, "t1.he", 0.2), opens, 2, 30},
		{"stepless late closing: likewise", Script{}.Add(0, 0, LateClosing, "t1.he", 60), opens, 2, 40},
		{"and the suction closes late", Script{}.Add(0, 0, LateClosing, "t1.he", 60), func(tr Truth) float64 { return tr.Suction.Close.Impact }, 40, 70},
		{"a lighter gas of a higher exponent: the discharge opens earlier", Script{}.Add(0, 0, GasExponent, "", 0.05), opens, -6, -0.5},
		{"half the molar mass: half the delivery", Script{}.Add(0, 0, GasWeight, "", 0.5), func(tr Truth) float64 { return tr.Delivered / 0.03255 }, -0.55, -0.45},
		{"no wall heat: the discharge opens otherwise, a little", Script{}.Add(0, 0, WallHeat, "", 0), func(tr Truth) float64 { return math.Abs(opens(tr) - 292.467) }, 0.02, 2},
		{"worn rings: the suction opens earlier", Script{}.Add(0, 0, RingLeak, "t1", 40*MM2), func(tr Truth) float64 { return tr.Suction.Open.Lift }, -20, -1},
	} {
		key := fmt.Sprint(c.s)
		if ill[key] == nil {
			ill[key] = headEnds(t, c.s)
		}
		was, is := meanOf(sound, c.look), meanOf(ill[key], c.look)
		t.Logf("%s: %.3f to %.3f", c.what, was, is)
		if d := is - was; !(d > c.lo && d < c.hi) {
			t.Errorf("%s: %.3f became %.3f, a change of %.3f, want %g to %g", c.what, was, is, d, c.lo, c.hi)
		}
	}
}

// TestRecycle: recycled gas comes back warm and the suction pressure rises, slowly, as the discharge thermometer does.
func TestRecycle(t *testing.T) {
	t.Parallel()
	m, err := New(single(), Script{}.Add(0, 0, Recycle, "1", 0.5), Options{Seed: 1, Rate: 12800})
	if err != nil {
		t.Fatal(err)
	}
	fill(m, 0.6)
	l := m.Process(10).Stages[0]
	if !(l.Ts > 305 && l.Ts < 335) || !(l.Ps > 8.1e5 && l.Ps < 8.6e5) {
		t.Errorf("half of the gas recycled: suction at %.1f K and %.0f Pa, was 303 K and 800000 Pa", l.Ts, l.Ps)
	}
}

// TestChannelFaults: every instrument fault shows in its own channel and leaves the others as they were, bit for bit.
func TestChannelFaults(t *testing.T) {
	t.Parallel()
	sk := single()
	const n = 3072
	run := func(s Script) [][]int32 {
		m, err := New(sk, s, Options{Seed: 1})
		if err != nil {
			t.Fatal(err)
		}
		return collect(m, n, []int{n})
	}
	sound := run(Script{})
	full := float64(int(1) << 23)
	p, a := 1, 3 // inputs of p.t1.he and a.t1
	span := func(x []int32) (lo, hi float64) { return float64(slices.Min(x)) / full, float64(slices.Max(x)) / full }
	for _, c := range []struct {
		what   What
		where  string
		to     float64
		inputs []int
		ok     func(x [][]int32) bool
	}{
		{PressureGain, "p.t1.he", 1.1, []int{p}, func(x [][]int32) bool {
			// 0.1 of full scale is absolute zero; the standing zero error of the transmitter is not turned up with it.
			return math.Abs((float64(x[p][100])/full-0.1)/(float64(sound[p][100])/full-0.1)-1.1) < 2e-3
		}},
		{Clip, "a.t1", 0.01, []int{a}, func(x [][]int32) bool { lo, hi := span(x[a]); return lo > -0.0101 && hi < 0.0101 && hi > 0.0099 }},
		{OpenCircuit, "p.t1.he", 1, []int{p}, func(x [][]int32) bool { lo, hi := span(x[p]); return lo < -0.015 && hi > 0.015 && hi < 0.03 }},
		{OpenCircuit, "a.t1", 1, []int{a}, func(x [][]int32) bool { lo, hi := span(x[a]); return lo < -0.015 && hi > 0.015 && hi < 0.03 }},
		{Flat, "a.t1", 1, []int{a}, func(x [][]int32) bool { lo, hi := span(x[a][100:]); return lo == hi }},
		{Hum, "p.t1.he", 0.01, []int{p}, func(x [][]int32) bool {
			lo, hi := span(diff(x[p], sound[p]))
			return math.Abs(lo+0.01) < 1e-3 && math.Abs(hi-0.01) < 1e-3
		}},
		{Noisy, "a.t1", 0.02, []int{a}, func(x [][]int32) bool { lo, hi := span(x[a]); return lo < -0.05 && hi > 0.05 }},
		{Swapped, "p.t1.he a.t1", 1, []int{p, a}, func(x [][]int32) bool {
			return slices.Equal(x[p], sound[a]) && slices.Equal(x[a], sound[p])
		}},
		{FrozenProcess, "", 1, nil, func([][]int32) bool { return true }},
	} {
		x := run(Script{}.Add(0, 0, c.what, c.where, c.to))
		if !c.ok(x) {
			t.Errorf("fault %d on %s does not look so", c.what, c.where)
		}
		for i := range x {
			if !slices.Contains(c.inputs, i) && !slices.Equal(x[i], sound[i]) {
				t.Errorf("fault %d on %s moves input %d", c.what, c.where, i)
			}
		}
	}
}

func diff(a, b []int32) []int32 {
	out := make([]int32, len(a))
	for i := range a {
		out[i] = a[i] - b[i]
	}
	return out
}

// TestMarkFaults: slipped, extra and missing marks, counted as pulses over half their height.
func TestMarkFaults(t *testing.T) {
	t.Parallel()
	sk := single()
	const rate = 8000.0
	up := func(s Script) (at []float64) {
		m, err := New(sk, s, Options{Seed: 1, Rate: rate})
		if err != nil {
			t.Fatal(err)
		}
		x := scaled(sk, "mark", collect(m, int(1.65*rate), []int{1000}), 24)
		for i := 1; i < len(x); i++ {
			if x[i-1] < 2.5 && x[i] >= 2.5 {
				at = append(at, float64(i-1)+(2.5-x[i-1])/(x[i]-x[i-1]))
			}
		}
		return at
	}
	sound := up(Script{})
	turns := len(sound)
	if turns < 19 || turns > 21 {
		t.Fatalf("%d marks in 1.65 s at 740 rev/min", turns)
	}
	slipped := up(Script{}.Add(0, 0, PhaseSlip, "", 1.5))
	mean := 0.0
	for i := range slipped {
		mean += (slipped[i] - sound[i]) / rate * 740 * 6 / float64(len(slipped))
	}
	// An edge is shorter than a sample here, so a single mark is good to a third of a degree; their mean is better.
	within(t, "slip", mean, 1.5, 0.1)
	if n := len(up(Script{}.Add(0, 0, ExtraPulses, "", 0.5))); n < turns+4 || n > turns+16 {
		t.Errorf("every other turn has an extra pulse: %d marks of %d", n, turns)
	}
	if n := len(up(Script{}.Add(0, 0, MissedPulses, "", 0.5))); n < turns-16 || n > turns-4 {
		t.Errorf("every other mark is missing: %d marks of %d", n, turns)
	}
	if n := len(up(Script{}.Add(0, 0, MissedPulses, "", 1))); n > 1 {
		t.Errorf("all marks are missing: %d of %d", n, turns)
	}
}

// TestFrozenProcess: the readings stay, the machine moves on.
func TestFrozenProcess(t *testing.T) {
	t.Parallel()
	s := Script{}.Add(0.5, 0, FrozenProcess, "", 1).Add(0.6, 0.1, DischargePressure, "", 25e5).Add(1.6, 0, FrozenProcess, "", 0)
	m, err := New(single(), s, Options{Seed: 1, Rate: 8000})
	if err != nil {
		t.Fatal(err)
	}
	fill(m, 2)
	within(t, "frozen discharge pressure", m.Process(1.4).Stages[0].Pd, 22e5, 6e3)
	within(t, "discharge pressure after it", m.Process(1.9).Stages[0].Pd, 25e5, 6e3)
}

func TestFaultErrors(t *testing.T) {
	for name, s := range map[string]Script{
		"one channel to exchange":   Script{}.Add(0, 0, Swapped, "a.t1", 1),
		"a channel with itself":     Script{}.Add(0, 0, Swapped, "a.t1 a.t1", 1),
		"no such channel":           Script{}.Add(0, 0, Swapped, "a.t1 a.t9", 1),
		"springs of no force":       Script{}.Add(0, 0, Springs, "t1.he.s1", 0),
		"more than all is missing":  Script{}.Add(0, 0, Missing, "t1.he.s1", 1.2),
		"slip of one throw":         Script{}.Add(0, 0, PhaseSlip, "t1", 1),
		"pocket of no end":          Script{}.Add(0, 0, Pocket, "t1", 0.1),
		"gain of an accelerometer":  Script{}.Add(0, 0, PressureGain, "a.t1", 0.5),
		"everything comes back":     Script{}.Add(0, 0, Recycle, "", 1),
		"more than every turn":      Script{}.Add(0, 0, ExtraPulses, "", 2),
		"cut off at nothing at all": Script{}.Add(0, 0, Clip, "a.t1", 0),
	} {
		if _, err := New(demo(), s, Options{}); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}
