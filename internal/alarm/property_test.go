package alarm

import (
	"encoding/json"
	"fmt"
	"reflect"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// op is one thing that happens to an annunciator.
type op struct {
	kind  int
	key   string
	dt    time.Duration
	conds []Condition
}

func drawOps(t *rapid.T) []op { return drawSome(t, 1, 120) }

func drawSome(t *rapid.T, least, most int) []op {
	keys := rapid.SampledFrom([]string{"a", "b", "b", "c", "d"})
	cond := rapid.Custom(func(t *rapid.T) Condition {
		c := Condition{Key: keys.Draw(t, "key"), Subject: "t1", Kind: "leaking", Known: rapid.IntRange(0, 5).Draw(t, "known") > 0,
			Severity: rapid.SampledFrom([]Severity{0, 0, 0, 1, 2, 3}).Draw(t, "severity"), Sentence: "s"}
		if rapid.IntRange(0, 9).Draw(t, "design") == 0 {
			c.ByDesign = "machine stopped"
		}
		if c.Severity == Danger {
			c.Detail = map[string]float64{"x": 1.5}
		}
		return c
	})
	return rapid.SliceOfN(rapid.Custom(func(t *rapid.T) op {
		return op{kind: rapid.SampledFrom([]int{0, 0, 0, 0, 1, 2, 3, 4, 5, 6}).Draw(t, "op"), key: keys.Draw(t, "on"),
			dt:    time.Duration(rapid.SampledFrom([]int{-2, 0, 1, 3, 5, 7, 30}).Draw(t, "dt")) * time.Second,
			conds: rapid.SliceOfN(cond, 0, 4).Draw(t, "conditions")}
	}), least, most).Draw(t, "ops")
}

func apply(a *Annunciator, o op, now time.Time) []Transition {
	var tr Transition
	var err error
	switch o.kind {
	case 0:
		return a.Step(now, o.conds)
	case 1:
		tr, err = a.Acknowledge(o.key, "op", "", now)
	case 2:
		tr, err = a.Shelve(o.key, "op", "r", now.Add(20*time.Second), now)
	case 3:
		tr, err = a.Unshelve(o.key, "op", "", now)
	case 4:
		tr, err = a.Reset(o.key, "op", "", now)
	case 5:
		tr, err = a.TakeOut(o.key, "op", "r", now)
	case 6:
		tr, err = a.Return(o.key, "op", "", now)
	}
	if err != nil {
		return nil
	}
	return []Transition{tr}
}

func wire(t *rapid.T, v any) string {
	b, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

var propertyConfig = Config{Default: Timing{OnDelay: 3 * time.Second, OffDelay: 5 * time.Second},
	Points: map[string]Timing{"b": {Latch: true}, "c": {OnTurns: 2, OffTurns: 3}, "d": {}}}

// A restart at any point gives the same further transitions, and the journal obeys the state machine.
func TestRestartRepeatsNothingAndForgetsNothing(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ops := drawOps(t)
		a, b := New(propertyConfig), New(propertyConfig)
		now := t0
		last := map[string]Transition{}
		var id uint64
		for i, o := range ops {
			now = now.Add(o.dt)
			ta, tb := apply(a, o, now), apply(b, o, now)
			if x, y := wire(t, ta), wire(t, tb); x != y {
				t.Fatalf("op %d: unbroken gives %s\nrestarted gives %s", i, x, y)
			}
			for _, tr := range ta {
				id++
				if tr.ID != id {
					t.Fatalf("op %d: id %d, want %d", i, tr.ID, id)
				}
				prev, seen := last[tr.Key]
				if seen && tr.From != prev.To && !(prev.To == Unknown && tr.From == Normal) {
					t.Fatalf("op %d: %s goes from %s, but was %s", i, tr.Key, tr.From, prev.To)
				}
				if !seen && tr.From != Normal && (tr.From != Unknown || tr.To.Open()) {
					t.Fatalf("op %d: %s begins as %s", i, tr.Key, tr.From)
				}
				if seen && tr.Was != prev.Severity {
					t.Fatalf("op %d: %s was %s, not %s", i, tr.Key, prev.Severity, tr.Was)
				}
				if err := allowed(tr); err != nil {
					t.Fatalf("op %d: %v", i, err)
				}
				last[tr.Key] = tr
			}
			var s Snapshot
			if err := json.Unmarshal([]byte(wire(t, b.Snapshot())), &s); err != nil {
				t.Fatal(err)
			}
			b = New(propertyConfig)
			if err := b.Restore(s); err != nil {
				t.Fatal(err)
			}
			if x, y := wire(t, a.Snapshot()), wire(t, b.Snapshot()); x != y {
				t.Fatalf("op %d: snapshots differ:\n%s\n%s", i, x, y)
			}
		}
	})
}

// next is the transition diagram of ANSI/ISA-18.2-2016 and IEC 62682 as this package has it. Source: the state letters
// and the state set are those of reference/handbook.md 9 (public documentation that quotes the standards; OPC 10000-9,
// 4.8); the arrows are from memory of the standard's figure. Shelved, suppressed and out of service are entered from
// every state. The standard leaves them to normal or unacknowledged only. Two arrows go beyond it, on purpose: what a
// stop suppressed while it was acknowledged or returned comes back as it was (a stop is no news to anybody), and what
// returned behind a shelf after people had been told waits for its acknowledgement. Unacknowledged and acknowledged lead
// to themselves where the severity changes.
var next = map[State][]State{
	Unknown:         {Shelved, Suppressed, OutOfService},
	Normal:          {Unacked, Shelved, Suppressed, OutOfService},
	Unacked:         {Unacked, Acked, ReturnedUnacked, LatchedUnacked, Shelved, Suppressed, OutOfService},
	Acked:           {Acked, Unacked, Normal, LatchedAcked, Shelved, Suppressed, OutOfService},
	ReturnedUnacked: {Normal, Unacked, Shelved, Suppressed, OutOfService},
	LatchedUnacked:  {LatchedAcked, Unacked, Shelved, Suppressed, OutOfService},
	LatchedAcked:    {Normal, Unacked, Shelved, Suppressed, OutOfService},
	Shelved:         {Unknown, Normal, Unacked, ReturnedUnacked, LatchedUnacked, LatchedAcked, Suppressed, OutOfService},
	OutOfService:    {Unknown, Normal, Unacked, ReturnedUnacked, LatchedUnacked, LatchedAcked, Suppressed, Shelved},
	Suppressed:      {Unknown, Normal, Unacked, Acked, ReturnedUnacked, LatchedUnacked, LatchedAcked, Shelved, OutOfService},
}

// needsPerson are the arrows that only a person's act may take: nothing is acknowledged, reset, shelved or taken out of
// service by the program.
func needsPerson(tr Transition) bool {
	switch {
	case tr.To == Shelved && tr.From != OutOfService, tr.To == OutOfService, tr.From == OutOfService:
		return true
	case tr.From == Unacked && tr.To == Acked, tr.From == ReturnedUnacked && tr.To == Normal, tr.From == LatchedUnacked && tr.To == LatchedAcked,
		tr.From == LatchedAcked && tr.To == Normal:
		return true
	}
	return false
}

func allowed(tr Transition) error {
	if tr.From == tr.To && tr.Severity == tr.Was {
		return fmt.Errorf("%s: nothing changed", tr.Key)
	}
	if tr.To.Open() != (tr.Severity > NoSeverity) {
		return fmt.Errorf("%s: %s with severity %s", tr.Key, tr.To, tr.Severity)
	}
	if needsPerson(tr) && tr.By == "" {
		return fmt.Errorf("%s: from %s to %s by nobody", tr.Key, tr.From, tr.To)
	}
	if !slices.Contains(next[tr.From], tr.To) {
		return fmt.Errorf("%s: no way from %s to %s", tr.Key, tr.From, tr.To)
	}
	return nil
}

// Every arrow of the diagram is taken somewhere in random play, so that the check of arrows checks them all.
func TestEveryArrowIsTaken(t *testing.T) {
	taken := map[[2]State]bool{}
	gen := rapid.Custom(func(t *rapid.T) []op { return drawSome(t, 150, 200) })
	for seed := range 300 {
		a := New(propertyConfig)
		now := t0
		for _, o := range gen.Example(seed) {
			now = now.Add(o.dt)
			for _, tr := range apply(a, o, now) {
				taken[[2]State{tr.From, tr.To}] = true
			}
		}
	}
	for from, tos := range next {
		for _, to := range tos {
			if !taken[[2]State{from, to}] {
				t.Errorf("never taken: %s to %s", from, to)
			}
		}
	}
}

// What cannot be judged never changes what is shown, save by the clock of a shelf.
func TestUnknownNeverClears(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		a := New(propertyConfig)
		now := t0
		for _, o := range drawOps(t) {
			now = now.Add(o.dt)
			apply(a, o, now)
		}
		a.Step(now.Add(time.Minute), []Condition{{Key: "a", Known: true}, {Key: "b", Known: true}, {Key: "c", Known: true}, {Key: "d", Known: true}})
		before := a.Points()
		for i := range 20 {
			var conds []Condition
			for _, p := range before {
				conds = append(conds, Condition{Key: p.Key, Subject: "t1", Kind: "leaking"})
			}
			if trs := a.Step(now.Add(time.Minute+time.Duration(i)*time.Second), conds); len(trs) != 0 {
				t.Fatalf("a gap gave %+v", trs)
			}
		}
		for i, p := range a.Points() {
			if p.State != before[i].State || p.Level != before[i].Level {
				t.Fatalf("%s was %s, is %s", p.Key, before[i].State, p.State)
			}
		}
	})
}

func TestRestoreRefuses(t *testing.T) {
	for name, s := range map[string]Snapshot{
		"another version": {Version: 99, NextID: 1},
		"no next id":      {Version: snapshotVersion},
		"a doubled point": {Version: snapshotVersion, NextID: 1, Points: []Point{{Key: "a"}, {Key: "a"}}},
		"a nameless one":  {Version: snapshotVersion, NextID: 1, Points: []Point{{}}},
	} {
		a := New(Config{})
		a.Step(t0, []Condition{{Key: "k", Known: true, Severity: Alert}})
		before := a.Snapshot()
		if err := a.Restore(s); err == nil {
			t.Errorf("%s: restored", name)
		}
		if !reflect.DeepEqual(before, a.Snapshot()) {
			t.Errorf("%s: a refused restore changed the state", name)
		}
	}
}
