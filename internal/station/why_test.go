package station

import (
	"bytes"
	"context"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapwing/internal/wire"
)

func strict(t *testing.T, line string, v any) {
	t.Helper()
	dec := json.NewDecoder(strings.NewReader(line))
	dec.DisallowUnknownFields()
	if err := dec.Decode(v); err != nil {
		t.Fatalf("%v: %.200s", err, line)
	}
}

// A review's reasons and the daemon's answers are the same, and both agree with the findings that were raised.
func TestWhy(t *testing.T) {
	t.Parallel()
	r := recorded(t)
	file := filepath.Join(t.TempDir(), "why.jsonl")
	out := r.lines(t, ReviewOptions{LearnTo: 60, WhyFile: file})
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSpace(string(raw)), "\n")

	// Every turn of the recording has its line for every throw, and says whether it was compared.
	turns := of(out, "turn")
	said := of(lines, "why-turn")
	if len(said) != len(turns)*len(r.sk.Throws) {
		t.Errorf("%d turns of %d throws, %d lines", len(turns), len(r.sk.Throws), len(said))
	}
	reasons := map[string]int{}
	off := false
	for _, line := range said {
		var k wire.WhyTurn
		strict(t, line, &k)
		if k.Compared == (k.Why != "") || !k.Valid && k.Compared {
			t.Errorf("%s", line)
		}
		for _, m := range k.Measures {
			off = off || m.Value != nil && m.Expected != nil && m.Spread != nil && m.Spreads != nil && math.Abs(*m.Spreads) >= tellFrom
		}
		reasons[k.Why]++
	}
	if reasons["no baseline is in force: turns are measured, not judged"] == 0 || reasons[""] == 0 || !off {
		t.Errorf("reasons %v, a measure off: %v", reasons, off)
	}

	// What the blocks come to is what the findings say: same subject, kind, turn and grade, same weight in the end.
	var blocks []wire.WhyBlock
	raised := map[string]wire.WhyCase{}
	last := map[string]string{}
	for _, line := range of(lines, "why") {
		var b wire.WhyBlock
		strict(t, line, &b)
		blocks = append(blocks, b)
		last[b.Throw] = line
		for _, c := range b.Cases {
			if c.Grade != "none" {
				raised[c.Subject+"/"+c.Kind+"@"+jsonInt(b.Turns[1])] = c
			}
		}
	}
	found := 0
	for _, line := range of(out, "finding") {
		var f wire.FindingLine
		strict(t, line, &f)
		if f.Grade == "none" {
			continue
		}
		found++
		c, ok := raised[f.Subject+"/"+f.Kind+"@"+jsonInt(f.Turn)]
		if !ok || c.Grade != f.Grade || c.Total == nil || f.Odds == nil || math.Abs(*c.Total-*f.Odds) > 0.011 {
			t.Errorf("finding %s %s %s at turn %d: reasons %+v", f.Subject, f.Kind, f.Grade, f.Turn, c)
		}
	}
	if len(blocks) < 6 || found == 0 || found != len(raised) {
		t.Fatalf("%d blocks, %d findings, %d raised by their reasons", len(blocks), found, len(raised))
	}

	// Live: the newest block, asked for after the source has ended, is that of the review to the last bit.
	s, err := Open(Options{SkidFile: r.skid, State: t.TempDir(), Source: "wav:" + r.wav, ProcessCSV: r.csv, Fast: true, Listen: "none"})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	plan := LearnPlan{To: 60}
	reasonsKept := s.line.reasons
	if s.line, err = NewLine(s.sk, s.info, nil, plan, nil, s.line.alarms); err != nil {
		t.Fatal(err)
	}
	s.line.reasons = reasonsKept
	s.o.AtEnd = func(ctx context.Context) {
		for _, c := range []struct {
			subject string
			turn    int64
			said    string
			blocks  bool
		}{
			{"t1.he.suction", 0, "t1.he.suction leaking is ", true},
			{"t1.he.suction/leaking", 0, "t1.he.suction leaking is ", true},
			{"t2", 0, "t2: nothing is raised", true},
			{"", 0, "t2: nothing is raised", true},
			{"t1.he.suction", 3, "not among those kept", false},
			{"t9", 0, "nothing on this machine is called t9", false},
		} {
			w, err := s.Why(ctx, c.subject, c.turn)
			if err != nil {
				t.Error(err)
				continue
			}
			if said := strings.Join(w.Said, "\n"); !strings.Contains(said, c.said) || (len(w.Blocks) > 0) != c.blocks {
				t.Errorf("%s, turn %d: %d blocks\n%s", c.subject, c.turn, len(w.Blocks), said)
			}
		}
		w, err := s.Why(ctx, "t1", 0)
		if err != nil || len(w.Blocks) < 2 {
			t.Errorf("%d blocks, %v", len(w.Blocks), err)
			return
		}
		newest, err := json.Marshal(w.Blocks[len(w.Blocks)-1])
		if err != nil || !bytes.Equal(newest, []byte(last["t1"])) {
			t.Errorf("live and offline give other reasons: %s", differ([]string{string(newest)}, []string{last["t1"]}))
		}
		// turn by turn: the evidence's measures of the turns that are kept
		measures := 0
		for _, k := range w.Turns {
			measures += len(k.Measures)
		}
		if len(w.Turns) != whyTurns || measures < 1000 {
			t.Errorf("%d turns with %d measures", len(w.Turns), measures)
		}
		at := w.Blocks[0].Turns[1]
		if one, err := s.Why(ctx, "t1.he.suction", at); err != nil || len(one.Blocks) != 1 || one.Blocks[0].Turns[1] != at {
			t.Errorf("asked for turn %d: %+v, %v", at, one.Blocks, err)
		}
		b, err := json.Marshal(w)
		t.Logf("an answer about a throw has %d bytes; %q (%v)", len(b), w.Said, err)
	}
	if err := s.Run(t.Context()); err != nil {
		t.Fatal(err)
	}
}

func jsonInt(n int64) string {
	b, _ := json.Marshal(n)
	return string(b)
}
