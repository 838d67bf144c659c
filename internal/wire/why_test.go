package wire_test

import (
	"encoding/json"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

func drawExplanation(rt *rapid.T, l measure.Layout) *verdict.Explanation {
	x := &verdict.Explanation{ID: "t1", Turn0: 4, Turn1: 19, Seq0: 100, Seq1: 900, Settled: rapid.Bool().Draw(rt, "settled"),
		Point: duty.Point{Step: 2, RPM: wild().Draw(rt, "rpm"), Ps: wild().Draw(rt, "ps"), Pd: wild().Draw(rt, "pd")}}
	x.Ends[0] = verdict.EndShown{Subject: "t1.he", Judged: true, Features: 9, Wanted: 4} // the crank end does not work
	for i := range rapid.IntRange(0, 3).Draw(rt, "cases") {
		r := verdict.Reasoning{Subject: []string{"t1.he.suction", "t1.rings", "p1h"}[i], Kind: "leaking", Sensor: i == 2, Grade: verdict.Grade(rapid.IntRange(0, 3).Draw(rt, "grade")), Judged: rapid.Bool().Draw(rt, "judged"),
			Total: wild().Draw(rt, "total"), Missing: []string{"more"}, Ambiguous: []string{"t1.packing"}}
		if !r.Judged {
			r.Why = "idle"
		}
		r.Pattern = verdict.Pattern{Known: rapid.Bool().Draw(rt, "known"), Amplitude: wild().Draw(rt, "g"), SD: wild().Draw(rt, "sd"), Z: wild().Draw(rt, "z")}
		for c := range 4 {
			r.Classes = append(r.Classes, verdict.ClassVote{Class: measure.Class(c), Raw: wild().Draw(rt, "raw"), LLR: wild().Draw(rt, "llr"), Median: wild().Draw(rt, "median"), Strong: 2})
		}
		for range rapid.IntRange(0, 3).Draw(rt, "evidence") {
			r.Evidence = append(r.Evidence, verdict.Weighed{Class: measure.Class(rapid.IntRange(0, 3).Draw(rt, "class")), Feature: rapid.IntRange(0, len(l)-1).Draw(rt, "feature"), Text: plain().Draw(rt, "text"),
				Value: wild().Draw(rt, "value"), Expected: wild().Draw(rt, "expected"), Spread: wild().Draw(rt, "spread"), Z: wild().Draw(rt, "z"), N: 9, Sign: rapid.SampledFrom([]float64{-1, 0, 1}).Draw(rt, "sign"), Weight: wild().Draw(rt, "weight")})
		}
		x.Cases = append(x.Cases, r)
	}
	return x
}

func TestWhy(t *testing.T) {
	s, block, line, l := loadSchema(t, "why"), loadSchema(t, "why-block"), loadSchema(t, "why-turn"), layout()
	rapid.Check(t, func(rt *rapid.T) {
		x := drawExplanation(rt, l)
		b := wire.FromExplanation(x, l, nil, true)
		raw := fits(t, block, b)
		var back wire.WhyBlock
		if err := json.Unmarshal(raw, &back); err != nil {
			rt.Fatal(err)
		}
		if len(back.Cases) != len(x.Cases) || len(back.Ends) != 1 || back.Turns != [2]int64{4, 19} {
			rt.Fatalf("came back as %+v", back)
		}
		for i, r := range x.Cases {
			c := back.Cases[i]
			if len(c.Evidence) != len(r.Evidence) || (c.Total != nil) != (r.Judged && finite(r.Total)) || (c.Spreads != nil) != (r.Pattern.Known && finite(r.Pattern.Z)) {
				rt.Fatalf("%+v came back as %+v", r, c)
			}
			for k, e := range r.Evidence {
				if f := l[e.Feature]; c.Evidence[k].Measure != f.Subject+"/"+f.Name || (c.Evidence[k].Value != nil) != finite(e.Value*f.Scale+f.Shift) || (c.Evidence[k].Weight != nil) != finite(e.Weight) {
					rt.Fatalf("%+v came back as %+v", e, c.Evidence[k])
				}
			}
		}
		short := wire.FromExplanation(x, l, func(s string) bool { return wire.Within(s, "t1.he") }, false)
		for _, c := range short.Cases {
			if c.Subject != "t1.he.suction" || len(c.Evidence) > 0 {
				rt.Fatalf("asked for t1.he without evidence, got %+v", c)
			}
		}
		d := duty.Deviation{Feature: rapid.IntRange(0, len(l)-1).Draw(rt, "feature"), Value: wild().Draw(rt, "value"), Expected: wild().Draw(rt, "expected"), Spread: wild().Draw(rt, "spread"), Z: wild().Draw(rt, "z")}
		turn := wire.WhyTurn{Type: "why-turn", Turn: 9, Throw: "t1", Valid: true, Duty: "steady", Compared: true, Measures: []wire.WhyMeasure{wire.FromDeviation(&d, l)}}
		fits(t, line, turn)
		fits(t, s, wire.Why{Version: 1, Skid: "heron-meadow", Subject: "t1", Turn: 9, Said: []string{"x"}, Blocks: []wire.WhyBlock{b}, Turns: []wire.WhyTurn{turn}, Points: []wire.Point{}, Caution: wire.Caution})
	})
	if raw := string(fits(t, s, wire.Why{Version: 1, Skid: "heron-meadow", Said: []string{}, Blocks: []wire.WhyBlock{}, Turns: []wire.WhyTurn{}, Points: []wire.Point{}, Caution: wire.Caution})); strings.Contains(raw, "null") {
		t.Errorf("%s", raw)
	}
}

func TestWithin(t *testing.T) {
	for _, c := range []struct {
		subject, whole string
		want           bool
	}{{"t1.he.suction", "t1", true}, {"t1.he.suction", "t1.he", true}, {"t1.he.suction", "t1.he.s", false}, {"t10", "t1", false}, {"t1", "t1", true}, {"t1", "", true}, {"t1", "t1.he", false}} {
		if got := wire.Within(c.subject, c.whole); got != c.want {
			t.Errorf("%s within %s: %v", c.subject, c.whole, got)
		}
	}
}
