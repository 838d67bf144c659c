package skid

import (
	"strings"
	"testing"
)

const ownRipple = "code: 1\n    ripple: [{order: 1, amplitude_percent: 0.4, phase_deg: -31}]"

func TestALoadStepMayHaveItsOwnRipple(t *testing.T) {
	file, _ := swap(t, example(t), "code: 1", ownRipple)
	sk := parsed(t, file)
	if r := sk.RippleAt(1); len(r) != 1 || r[0] != (Ripple{1, 0.004, -31}) {
		t.Errorf("step 1: %v", r)
	}
	for _, code := range []int{0, 2, 99} {
		if r := sk.RippleAt(code); len(r) != 2 || &r[0] != &sk.Phase.Ripple[0] {
			t.Errorf("step %d: %v, want that of phase", code, r)
		}
	}
	var b strings.Builder
	if err := Report(&b, sk, sk.Rate); err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(b.String(), "ripple, step 1     order 1: 0.4 % at -31°") {
		t.Errorf("the report does not tell it:\n%.900s", b.String())
	}
}

func TestARippleIsRefusedInAStepAsInPhase(t *testing.T) {
	for name, c := range map[string]struct{ with, path, says string }{
		"twice":       {"[{order: 1, amplitude_percent: 0.4, phase_deg: 0}, {order: 1, amplitude_percent: 0.1, phase_deg: 0}]", "load_steps[1].ripple[1].order", "harmonic 1 is given twice"},
		"as fraction": {"[{order: 1, amplitude: 0.004, phase_deg: 0}]", "load_steps[1].ripple[0].amplitude", "unknown key"},
		"too strong":  {"[{order: 1, amplitude_percent: 10, phase_deg: 0}, {order: 2, amplitude_percent: 10, phase_deg: 0}, {order: 3, amplitude_percent: 1, phase_deg: 0}]", "load_steps[1].ripple", "add up to 21 %"},
		"empty":       {"[]", "load_steps[1].ripple", "0 items"},
		"no list":     {"{order: 1}", "load_steps[1].ripple", "where a list belongs"},
	} {
		file, _ := swap(t, example(t), "code: 1", "code: 1\n    ripple: "+c.with)
		_, err := Parse("m.yaml", []byte(file))
		found := false
		for _, p := range Problems(err) {
			found = found || p.Path == c.path && strings.Contains(p.Msg, c.says)
		}
		if !found {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// bare takes the measured ripple and the stated uncertainty out of the example.
func bare(t *testing.T) string {
	t.Helper()
	file := example(t)
	a, b := strings.Index(file, "  uncertainty_deg:"), strings.Index(file, "gas:\n")
	if a < 0 || b < a {
		t.Fatal("the example file has changed its order")
	}
	return file[:a] + file[b:]
}

func TestTheRippleIsComputedOnlyWhenItCanBe(t *testing.T) {
	inertia := func(file string) string {
		file, _ = swap(t, file, "  # inertia_kgm2: 38", "  inertia_kgm2: 38 #")
		return file
	}
	single, _ := swap(t, inertia(bare(t)), "      pressure: p2c\n", "")
	own, _ := swap(t, bare(t), "code: 1", ownRipple)
	for name, c := range map[string]struct {
		file     string
		computed bool
		doubt    string // "": none about the ripple
	}{
		"measured":                {example(t), false, ""},
		"measured, with inertia":  {inertia(example(t)), false, ""},
		"nothing known":           {bare(t), false, "neither ripple nor uncertainty_deg is stated"},
		"inertia":                 {inertia(bare(t)), true, ""},
		"inertia, an end unknown": {single, false, "t2.ce has no pressure channel"},
		"one step only":           {own, false, "these have none: 0, 2, 3"},
		"inertia, one step only":  {inertia(own), false, "these have none: 0, 2, 3"},
	} {
		file := c.file
		if name == "inertia, an end unknown" {
			i := strings.Index(file, "  - {id: p2c,")
			file = file[:i] + file[i+strings.Index(file[i:], "\n")+1:]
		}
		sk := parsed(t, file)
		if sk.ComputesRipple() != c.computed {
			t.Errorf("%s: computed %v", name, sk.ComputesRipple())
		}
		var said []string
		for _, d := range Doubts(sk) {
			if strings.Contains(d.Msg, "ripple") || strings.Contains(d.Msg, "inertia") || strings.Contains(d.Msg, "these have none") {
				said = append(said, d.Msg)
			}
		}
		all := strings.Join(said, "; ")
		if c.doubt == "" && all != "" || !strings.Contains(all, c.doubt) {
			t.Errorf("%s: doubts %q, want %q", name, all, c.doubt)
		}
	}
}

func TestASlowMachineIsToldToTakeAFinerGrid(t *testing.T) {
	for grid, doubted := range map[string]bool{"0.5": true, "0.25": false} {
		file, _ := swap(t, example(t), "  grid_deg: 0.5 ", "  grid_deg: "+grid+" ")
		file, _ = swap(t, file, "min_rpm: 500", "min_rpm: 300")
		sk := parsed(t, file)
		found := false
		for _, d := range Doubts(sk) {
			found = found || d.Path == "detection.grid_deg" && strings.Contains(d.Msg, "954 Hz only at 300 rpm")
		}
		if found != doubted {
			t.Errorf("grid %s°: doubted %v, band %g Hz", grid, found, sk.PressureBand(300))
		}
	}
}

func TestAGridThatDoesNotDivideIsRefused(t *testing.T) {
	file, _ := swap(t, example(t), "  grid_deg: 0.5 ", "  grid_deg: 0.35 ")
	_, err := Parse("m.yaml", []byte(file))
	if ps := Problems(err); len(ps) != 1 || ps[0].Path != "detection.grid_deg" || !strings.Contains(ps[0].Msg, "not a whole number of steps of 0.35°") {
		t.Errorf("got %v", err)
	}
}
