package turn

import (
	"math"
	"reflect"
	"testing"
)

// A ripple that changes with the load step gives each turn exactly what a converter set to that ripple alone gives
// it, and no turn gets a mixture.
func TestRippleInForceAtTheTurn(t *testing.T) {
	cfg, frames := machine(t, 20)
	sets := []Shaft{
		{Ripple: []Ripple{{1, 0.004, 20}, {2, 0.012, 200}}},
		{Ripple: []Ripple{{1, 0.002, 90}, {2, 0.006, 10}, {3, 0.001, 0}}, U: 0.2},
		{}, // not known
	}
	which := func(at float64) int { return int(at/0.2) % 3 }
	var alone [][]*Turn
	for _, s := range sets {
		c := cfg
		c.Marks.Ripple, c.Marks.U = s.Ripple, s.U
		alone = append(alone, run(converter(t, c), frames))
	}
	cfg.Marks.Ripple = []Ripple{{2, 0.1, 0}} // must not be looked at
	asked := 0
	cfg.Marks.Shaft = func(at float64) Shaft { asked++; return sets[which(at)] }
	got := run(converter(t, cfg), frames)
	seen := map[int]int{}
	for i, turn := range got {
		if !turn.Valid() {
			continue
		}
		k := which(frames[i].Mark0 / cfg.Rate)
		seen[k]++
		if !reflect.DeepEqual(turn, alone[k][i]) {
			t.Errorf("turn %d: not that of ripple %d alone", i, k)
		}
		if want := []float64{0.3, 0.2, 1.2}[k]; turn.Throws[0].U != want {
			t.Errorf("turn %d: uncertainty %g°, want %g°", i, turn.Throws[0].U, want)
		}
	}
	if seen[0] < 3 || seen[1] < 3 || seen[2] < 3 || asked != seen[0]+seen[1]+seen[2] {
		t.Errorf("turns by ripple %v, asked %d times", seen, asked)
	}
	if reflect.DeepEqual(alone[0][5], alone[1][5]) {
		t.Error("the ripples do not bite")
	}
}

// An answer that no shaft can follow costs the turn, with its reason.
func TestImpossibleRippleIsRefused(t *testing.T) {
	cfg, frames := machine(t, 8)
	for name, s := range map[string]Shaft{
		"too strong":     {Ripple: []Ripple{{1, 0.15, 0}, {2, 0.15, 0}}},
		"not a number":   {Ripple: []Ripple{{1, math.NaN(), 0}}},
		"order 0":        {Ripple: []Ripple{{0, 0.01, 0}}},
		"uncertainty <0": {U: -1},
	} {
		cfg.Marks.Shaft = func(float64) Shaft { return s }
		turns := run(converter(t, cfg), frames)
		if turns[3].Reason != whyRipple || len(turns) != len(frames) {
			t.Errorf("%s: %q", name, turns[3].Reason)
		}
	}
}

// The answer is copied: who gave it may change it for the next turn. Nothing is allocated for it.
func TestRippleAnswerIsCopied(t *testing.T) {
	cfg, frames := machine(t, 40)
	own := []Ripple{{2, 0.01, 0}}
	cfg.Marks.Shaft = func(float64) Shaft { own[0].PhaseDeg++; return Shaft{Ripple: own} }
	c := converter(t, cfg)
	i := 0
	next := func() {
		c.Add(frames[i], func(*Turn) {})
		i++
	}
	for range 12 {
		next()
	}
	if c.m.ripple[0].PhaseDeg != own[0].PhaseDeg || &c.m.ripple[0] == &own[0] {
		t.Error("the ripple in force is not a copy of the answer")
	}
	if n := testing.AllocsPerRun(20, next); n != 0 {
		t.Errorf("%g allocations a turn", n)
	}
}
