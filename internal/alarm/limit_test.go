package alarm

import (
	"strings"
	"testing"
	"time"
)

// An alert and a danger on one measure share a point: severity rises and falls with the value, each step with its own
// deadband, and what is said names the step that counts.
func TestLadder(t *testing.T) {
	l := Ladder{
		{Subject: "t1", Measure: "reversal_deg", Unit: "°", High: nan, Low: 15, Deadband: 3, Severity: Alert},
		{Subject: "t1", Measure: "reversal_deg", Unit: "°", High: nan, Low: 8, Deadband: 1, Severity: Danger},
	}
	a := New(Config{})
	for i, c := range []struct {
		value float64
		level Severity
		said  string
	}{
		{40, NoSeverity, ""},
		{15.1, NoSeverity, ""},
		{15, Alert, "t1: reversal_deg: 15°, at or below its limit of 15°"},
		{17.9, Alert, ""}, // the deadband of the alert
		{7, Danger, "7°, at or below its limit of 8°"},
		{8.5, Danger, ""}, // that of the danger
		{nan, Danger, ""},
		{9.1, Alert, ""}, // milder: no news for a person, but the severity falls
		{18.1, NoSeverity, "18.1°, inside its limit of 15°"},
		{16, NoSeverity, ""}, // the deadband is not for the way in
		{2, Danger, "2°, at or below its limit of 8°"},
	} {
		trs := a.Step(at(float64(i)), l.Conditions(nil, c.value, a.Level, "", int64(i), 0, 1))
		if got := a.Level(l[0].LowKey()); got != c.level {
			t.Errorf("%d: value %g gives %s, want %s", i, c.value, got, c.level)
		}
		if c.said != "" && (len(trs) != 1 || !strings.Contains(trs[0].Sentence, c.said)) {
			t.Errorf("%d: said %+v, want %q", i, trs, c.said)
		}
	}
	if cs := l.Conditions(nil, 40, nil, "", 0, 0, 0); len(cs) != 1 || cs[0].Key != "t1/reversal_deg/low" {
		t.Errorf("conditions %+v", cs)
	}
	if cs := (Ladder)(nil).Conditions(nil, 1, nil, "", 0, 0, 0); cs != nil {
		t.Errorf("no limits give %+v", cs)
	}
}

// A limit that the plant's designers do not want in a duty state is suppressed there, and what stood comes back as it was.
func TestLimitSuppressedByDesign(t *testing.T) {
	l := Ladder{{Subject: "t1", Measure: "reversal_deg", High: nan, Low: 15, Severity: Alert}}
	a := New(Config{})
	var got []byte
	for i, c := range []struct {
		value float64
		why   string
	}{{10, ""}, {10, "throw t1 is starting"}, {40, "throw t1 is starting"}, {10, ""}, {40, ""}} {
		a.Step(at(float64(i)), l.Conditions(nil, c.value, a.Level, c.why, int64(i), 0, 1))
		got = append(got, letter(a, l[0].LowKey()))
	}
	if string(got) != "AHHAD" {
		t.Errorf("states %s", got)
	}
}

// Delays in turns count evaluations that could judge; with a delay in time both must have passed.
func TestDelaysInTurns(t *testing.T) {
	for name, c := range map[string]struct {
		timing Timing
		series string // . normal, x beyond, ? not judged
		every  float64
		want   string
	}{
		"three turns to come":           {Timing{OnTurns: 3}, ".xx.xxx.", 1, "NPPNPPAD"},
		"a gap counts for no turn":      {Timing{OnTurns: 3}, "x?x?x", 1, "PPPPA"},
		"three turns to go":             {Timing{OffTurns: 3}, "x..x...", 1, "AAAAAAD"},
		"turns and seconds":             {Timing{OnTurns: 2, OnDelay: 3 * time.Second}, "xxxxx", 1, "PPPAA"},
		"turns where seconds are over":  {Timing{OnTurns: 4, OnDelay: time.Second}, "xxxxx", 1, "PPPAA"},
		"turns count however far apart": {Timing{OnTurns: 2}, "xx", 3600, "PA"},
		"one turn is no delay":          {Timing{OnTurns: 1}, ".x", 1, "NA"},
		"a worse level begins no anew":  {Timing{OnTurns: 2}, "xX", 1, "PA"},
	} {
		a := New(Config{Default: c.timing})
		var got []byte
		for i, r := range c.series {
			cond := Condition{Key: "k", Known: r != '?'}
			switch r {
			case 'x':
				cond.Severity = Alert
			case 'X':
				cond.Severity = Danger
			}
			a.Step(at(float64(i)*c.every), []Condition{cond})
			got = append(got, letter(a, "k"))
		}
		if string(got) != c.want {
			t.Errorf("%s: %s, want %s", name, got, c.want)
		}
	}
}
