package ripple

import (
	"encoding/json"
	"math"
	"reflect"
	"strings"
	"testing"

	"lapwing/internal/turn"
)

// A restart begins with the computed ripple of every load step that had one; what cannot be is refused by name; what is
// in force is said, and so is why nothing is.
func TestRippleOverARestart(t *testing.T) {
	m := worked()
	q, err := NewTorque(m)
	if err != nil {
		t.Fatal(err)
	}
	unknown := func(int) []turn.Ripple { return nil }
	b := NewBook(Config{At: unknown, Torque: q})
	r := newRun(m, 12800, 700, 11, unloaded, full, unloaded)
	said := ""
	angles(t, m, r, turn.Marks{Shaft: func(at float64) turn.Shaft {
		if said == "" {
			b.For(7)
			said = b.Say()
		}
		if at >= r.starts[1] {
			return b.For(8)
		}
		return b.For(7)
	}}, func(tt *turn.Turn) { b.Learn(tt, []float64{0, 0}) })
	if !strings.Contains(said, "yet at this load step") {
		t.Errorf("before the first turn: %q", said)
	}
	raw, err := json.Marshal(b.Snapshot())
	if err != nil {
		t.Fatal(err)
	}
	var mem Memory
	if err := json.Unmarshal(raw, &mem); err != nil || len(mem) != 2 || mem[0].Step != 7 || mem[1].Step != 8 {
		t.Fatalf("%v: %s", err, raw)
	}
	again := NewBook(Config{At: unknown, Torque: q})
	if err := again.Restore(mem); err != nil {
		t.Fatal(err)
	}
	for _, step := range []int{7, 8} {
		want, got := b.For(step), again.For(step)
		if len(got.Ripple) == 0 || !reflect.DeepEqual(want, got) {
			t.Errorf("step %d: %+v, before %+v", step, got, want)
		}
	}
	if s := again.Say(); !strings.Contains(s, "computed from the torque") || !strings.Contains(s, "of order 2") {
		t.Errorf("%q", s)
	}
	if s := again.For(9); s.Ripple != nil {
		t.Errorf("step 9 was never seen: %+v", s)
	}
	again.For(7)
	for range Lasting {
		if why := again.Learn(&turn.Turn{Reason: "no marks"}, nil); why != whyTurn {
			t.Fatal(why)
		}
	}
	if s := again.Say(); !strings.Contains(s, "not computed for the last 10 turns: "+whyTurn) {
		t.Errorf("%q", s)
	}

	mem[0].CosSin[0][0] = .2 // a fifth of the speed
	mem[1].CosSin[1][1] = math.NaN()
	none := NewBook(Config{At: unknown, Torque: q})
	if err := none.Restore(mem); err == nil || !strings.Contains(err.Error(), "[7 8]") || len(none.Snapshot()) != 0 {
		t.Errorf("%v, %+v", err, none.Snapshot())
	}
	if err := NewBook(Config{At: unknown}).Restore(mem); err != nil {
		t.Errorf("where nothing is computed nothing is restored: %v", err)
	}
}
