package verdict

import (
	"encoding/json"
	"fmt"
	"strings"
	"testing"

	"lapwing/internal/duty"
)

// An unloaded end accuses none of its own valves; what stood before stays as it was.
func TestIdleEndIsNotJudged(t *testing.T) {
	s := newSynth(11)
	move := func(i int) { s.idle[1] = (i/200)%2 == 1 }
	r := commission(t, s, 800, move)
	s.idle = [2]bool{}
	s.leak["t1.ce.suction"] = 5
	r.run(s, 150, nil, func(duty.Block, []Finding) {})
	before := r.judge.Findings()
	if len(before) != 1 || before[0].Subject != "t1.ce.suction" || before[0].Grade < Alert {
		t.Fatalf("not raised: %+v", before)
	}
	s.leak["t1.ce.suction"] = 0
	r.run(s, 300, func(int) { s.idle[1] = true }, func(_ duty.Block, fs []Finding) {
		if len(fs) != 1 || fs[0].Turn != before[0].Turn || fs[0].Grade != before[0].Grade {
			t.Fatalf("an idle end changed it: %+v", fs)
		}
	})
	// Loaded again, and repaired: it fades, but not on the first good block.
	s.idle = [2]bool{}
	n, gone := 0, 0
	r.run(s, 450, nil, func(_ duty.Block, fs []Finding) {
		n++
		for _, f := range fs {
			if f.Grade == None && gone == 0 {
				gone = n
			}
		}
	})
	if gone < 6 || len(r.judge.Findings()) != 0 {
		t.Errorf("gone after %d blocks, left %v", gone, r.judge.Findings())
	}
	if s.idle = [2]bool{true, true}; r.judge.Ready(0, 0) != true || New(s.layout, Config{}).Ready(0, 0) {
		t.Error("Ready is wrong")
	}
}

func TestSameBlocksSameFindings(t *testing.T) {
	var runs [2]string
	for k := range runs {
		s, r := commissioned(t, 21)
		s.leak["t1.he.suction"], s.cover["t1.he.s1"], s.hit["t1.ce.discharge"] = 3, 9, 0.9
		var b strings.Builder
		r.run(s, 200, nil, func(_ duty.Block, fs []Finding) {
			for _, f := range fs {
				fmt.Fprintf(&b, "%+v\n", f)
			}
		})
		runs[k] = b.String()
	}
	if runs[0] != runs[1] || runs[0] == "" {
		t.Error("two runs over the same turns differ")
	}
}

// A restart between any two blocks changes nothing.
func TestRestartChangesNoFinding(t *testing.T) {
	s, r := commissioned(t, 21)
	again := New(s.layout, Config{})
	n := 0
	check := func(blk duty.Block, fs []Finding) {
		n++
		raw, err := json.Marshal(again.Snapshot())
		if err != nil {
			t.Fatal(err)
		}
		var snap Snapshot
		if err := json.Unmarshal(raw, &snap); err != nil {
			t.Fatal(err)
		}
		again = New(s.layout, Config{})
		if err := again.Restore(snap); err != nil {
			t.Fatal(err)
		}
		if x, y := fmt.Sprintf("%+v", fs), fmt.Sprintf("%+v", again.Judge(blk)); x != y {
			t.Fatalf("block %d\nunbroken:  %s\nrestarted: %s", n, x, y)
		}
		if x, y := fmt.Sprintf("%+v", r.judge.Findings()), fmt.Sprintf("%+v", again.Findings()); x != y {
			t.Fatalf("block %d\nstanding %s\nrestarted %s", n, x, y)
		}
	}
	s.leak["t1.he.suction"], s.louder = 3, 0.8
	r.run(s, 150, nil, check)
	s.leak["t1.he.suction"], s.louder, s.cover["t1.ce.d1"] = 0, 0, 8
	r.run(s, 150, nil, check)
	if again.Restore(Snapshot{Version: 99}) == nil {
		t.Error("another version was restored")
	}
}
