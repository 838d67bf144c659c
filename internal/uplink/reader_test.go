package uplink

import (
	"bytes"
	"encoding/json"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
	"unicode"

	"pgregory.net/rapid"

	"lapwing/internal/alarm"
	"lapwing/internal/wire"
)

var update = flag.Bool("update", false, "write the golden files anew; read the difference before keeping it")

func ptr(x float64) *float64 { return &x }

var began = time.Date(2026, 3, 1, 10, 0, 0, 0, time.UTC)

func leak() wire.Finding {
	return wire.Finding{
		Subject: "t1.he.suction", Kind: "leaking", Valve: "t1.he.s2", Grade: "danger", Odds: ptr(14.2), SinceTurn: 4100, Turn: 4480,
		Amounts: []wire.Amount{{Name: "leak_area_mm2", Value: 38, Low: ptr(31), High: ptr(46)}},
		Evidence: []wire.Reason{
			{Class: "pressure", Text: "discharge opens 4.1° later than expected at this duty", Feature: "t1.he/discharge_opens_late_deg", Value: ptr(4.1), Expected: ptr(0), Spreads: ptr(9.3), Weight: ptr(6.1)},
			{Class: "vibration", Text: "noise while closed is 9 dB above the baseline"},
			{Class: "temperature", Text: "cover of t1.he.s2 is 14 K above its group"},
		},
		NotApart: []string{"t1.rings"}, Settle: []string{"compare the covers of both suction valves at the next load change"},
		Next:     []string{"plan to change t1.he.s2; isolate, depressurise and lock out first"},
		Sentence: "t1.he.suction leaking, confirmed: leak area 38 mm² (31–46)",
	}
}

func rise(id uint64, from, to alarm.State, sev alarm.Severity, detail any) wire.Alarm {
	return wire.FromTransition("heron-meadow", &alarm.Transition{ID: id, Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", From: from, To: to,
		Severity: sev, At: began.Add(time.Duration(id) * time.Minute), Turn: 4480, Sentence: "t1.he.suction leaking, confirmed: leak area 38 mm² (31–46)", Detail: detail}, "")
}

func message(topic string, v any) Received {
	if s, ok := v.(string); ok {
		return Received{Topic: topic, Payload: []byte(s)}
	}
	b, err := json.Marshal(v)
	if err != nil {
		panic(err)
	}
	return Received{Topic: topic, Payload: b}
}

func onAlarm(v any) Received { return message(topics.Alarm(), v) }

func kept(m Received) Received { m.Retained = true; return m }

func TestReaderGolden(t *testing.T) {
	first := rise(3, alarm.Normal, alarm.Unacked, alarm.Danger, leak())
	first.Clip, first.Order = "20260301T100300Z-3", 1
	grown := first
	grown.Renewed, grown.Sentence = began.Add(2*time.Minute), "t1.he.suction leaking, confirmed: leak area 61 mm² (52–70)"
	gone := rise(5, alarm.Unacked, alarm.Normal, alarm.NoSeverity, nil)
	gone.Sentence = "t1.he.suction leaking: the evidence is gone"
	limit := rise(6, alarm.Normal, alarm.Unacked, alarm.Alert, alarm.LimitDetail{Value: 61.2, Limit: 60, Deadband: 1})
	limit.Key, limit.Sentence, limit.Order, limit.Flood = "t1/rod_load_max_kn/high", "t1: rod_load_max_kn is 61.2, at or above its limit of 60", 2, true
	shelved := rise(7, alarm.Unacked, alarm.Shelved, alarm.Alert, nil)
	shelved.By, shelved.Note, shelved.Test = "control room", "waiting for the spare", true
	standing := topics.Standing("t1.he.suction/leaking")
	rpm := 742.46
	feats := wire.Features{Version: 1, Skid: "heron-meadow", Throw: "t1", At: began, Turn: 88, RPM: &rpm, Duty: "steady", Values: map[string]map[string]float64{"t1": {"power_kw": 80}, "t1.he": {"p_suction_bar_abs": 2, "p_discharge_bar_abs": 6}}, Absent: 4}
	still := feats
	still.RPM = nil
	health := func(state, line string, trouble ...string) Received {
		return kept(message(topics.Health(), wire.Health{Version: 1, Skid: "heron-meadow", State: state, Line: line, Trouble: trouble}))
	}
	old := rise(1, alarm.Normal, alarm.Unacked, alarm.Alert, nil)
	renewed := rise(2, alarm.Normal, alarm.Unacked, alarm.Alert, nil)
	renewed.At = began.Add(time.Hour)
	named := func(journal string, id uint64) wire.Alarm {
		a := rise(id, alarm.Normal, alarm.Unacked, alarm.Advisory, nil)
		a.Journal = journal
		return a
	}
	alien := first
	alien.Skid, alien.Version = "another-skid", 2
	evil := rise(9, alarm.Normal, alarm.Unacked, alarm.Alert, "no finding")
	evil.Sentence, evil.Key = "\x1b]0;title\x07\x1b[2Jcleared\u202e\r\nnext line", "a\tb"
	undated := wire.Alarm{Version: 1, Skid: "heron-meadow", Key: "t1.rings/leaking", To: "acknowledged", Severity: "advisory", Sentence: "t1.rings leaking", Caution: wire.Caution}

	for _, c := range []struct {
		name string
		r    Reader
		msgs []Received
	}{
		{"alarm with its finding", Reader{}, []Received{onAlarm(first)}},
		{"alarm with two lines of evidence", Reader{Evidence: 2}, []Received{onAlarm(first)}},
		{"alarm, repeated, and back to normal", Reader{}, []Received{onAlarm(rise(4, alarm.Normal, alarm.Unacked, alarm.Alert, nil)), onAlarm(rise(4, alarm.Normal, alarm.Unacked, alarm.Alert, nil)), onAlarm(gone), onAlarm(gone)}},
		{"limit alarm in a flood", Reader{}, []Received{onAlarm(limit)}},
		{"shelved test alarm", Reader{}, []Received{onAlarm(shelved)}},
		{"standing alarms when joining", Reader{}, []Received{kept(message(standing, first)), message(standing, gone), kept(message(standing, first)), kept(message(standing, "")), kept(message(topics.Standing("t1.rings/leaking"), undated))}},
		{"standing alarm renewed", Reader{}, []Received{onAlarm(first), message(standing, first), message(standing, grown)}},
		{"numbers missing", Reader{}, []Received{onAlarm(old), onAlarm(rise(5, alarm.Normal, alarm.Unacked, alarm.Alert, nil))}},
		{"a new journal with later times", Reader{}, []Received{onAlarm(rise(40, alarm.Normal, alarm.Unacked, alarm.Alert, nil)), onAlarm(renewed), onAlarm(renewed)}},
		{"a named journal and another", Reader{}, []Received{onAlarm(named("kestrel", 1)), onAlarm(named("kestrel", 2)), onAlarm(named("kestrel", 2)), onAlarm(named("plover", 1)), onAlarm(named("plover", 2))}},
		{"out of order", Reader{}, []Received{onAlarm(rise(4, alarm.Normal, alarm.Unacked, alarm.Alert, nil)), onAlarm(rise(3, alarm.Normal, alarm.Unacked, alarm.Alert, nil)), onAlarm(rise(5, alarm.Normal, alarm.Unacked, alarm.Alert, nil))}},
		{"health", Reader{}, []Received{health("running", "learning, 3 of 900 steady turns"), health("running", "learning, 4 of 900 steady turns"), health("running", "watching"), health("running", "watching", "the line was too slow for 3 blocks"),
			kept(message(topics.Health(), string(wire.Offline("heron-meadow")))), message(topics.Health(), "")}},
		{"features when asked", Reader{Features: true}, []Received{message(topics.Features("t1"), feats), message(topics.Features("t1"), still)}},
		{"features when not asked", Reader{}, []Received{message(topics.Features("t1"), feats)}},
		{"what cannot be read", Reader{Features: true}, []Received{onAlarm("{"), onAlarm("null"), onAlarm(`{"key":"x"}`), onAlarm(`{"key":"x","to":"normal","at":"yesterday"}`), message(topics.Health(), "[]"), message(topics.Features("t1"), "7"), message("lapwing/heron-meadow/surprise", "abc"), message("elsewhere", "abc"), message("lapwing", ""),
			kept(message(standing, "nothing")), message(topics.Alarm(), strings.Repeat(" ", maxPayload+1))}},
		{"another skid and version in the payload", Reader{}, []Received{onAlarm(alien)}},
		{"text that would act on a terminal", Reader{}, []Received{onAlarm(evil), message("lapwing/\x1b[31m/x", "abc")}},
	} {
		t.Run(c.name, func(t *testing.T) {
			var out bytes.Buffer
			c.r.W, c.r.Root = &out, "lapwing"
			for _, m := range c.msgs {
				c.r.Show(m)
			}
			file := filepath.Join("testdata", strings.ReplaceAll(strings.ReplaceAll(c.name, ",", ""), " ", "-")+".golden")
			if *update {
				if err := os.WriteFile(file, out.Bytes(), 0o644); err != nil {
					t.Fatal(err)
				}
			}
			want, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			if out.String() != string(want) {
				t.Errorf("%s:\n--- got\n%s--- want\n%s", file, out.String(), want)
			}
		})
	}
}

// Whatever arrives, in whatever order: a transition never shown before is shown, and a recent repeat is not.
func TestReaderSwallowsNothing(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		var m memory
		journal, at := 0, int64(0)
		next, shown := uint64(1), map[mark]bool{}
		var sent []mark
		for range rapid.IntRange(1, 200).Draw(rt, "n") {
			switch rapid.IntRange(0, 9).Draw(rt, "what") {
			case 0: // the state folder is replaced
				journal, next = journal+1, 1
			case 1, 2: // some of the last 16 come again
				for _, k := range sent[max(0, len(sent)-boxFlight):] {
					if ok, _ := m.take(k); ok == shown[k] {
						rt.Fatalf("%+v shown before: %v, shown now: %v", k, shown[k], ok)
					}
					shown[k] = true
				}
			case 3: // one is missed
				next++
			default:
				at += rapid.Int64Range(1, 100).Draw(rt, "later")
				k := mark{id: next, at: at}
				if rapid.Bool().Draw(rt, "named") {
					k.journal = fmt.Sprint(journal)
				}
				next++
				sent = append(sent, k)
				if ok, _ := m.take(k); !ok {
					rt.Fatalf("%+v is swallowed", k)
				}
				shown[k] = true
			}
		}
		if len(m.shown) > remembered {
			rt.Fatalf("%d remembered", len(m.shown))
		}
	})
}

func FuzzShow(f *testing.F) {
	for _, m := range []Received{onAlarm(rise(1, alarm.Normal, alarm.Unacked, alarm.Danger, leak())), onAlarm("{"), onAlarm(`{"key":"a","to":"b","detail":{"evidence":[null]}}`),
		message(topics.Health(), `{"trouble":[""]}`), message(topics.Features("t1"), `{"values":{"a":null}}`), message(topics.Standing("x"), "\xff")} {
		f.Add(m.Topic, m.Payload, m.Retained)
	}
	f.Fuzz(func(t *testing.T, topic string, payload []byte, retained bool) {
		var out bytes.Buffer
		r := Reader{W: &out, Root: "lapwing", Features: true, Evidence: 1}
		m := Received{Topic: topic, Payload: payload, Retained: retained}
		for range 2 {
			r.Show(m)
		}
		for _, c := range out.String() {
			if c != '\n' && !unicode.IsPrint(c) {
				t.Fatalf("%q reaches the terminal in %q", c, out.String())
			}
		}
	})
}

func FuzzPart(f *testing.F) {
	f.Add("lapwing", "lapwing/a/alarm")
	f.Add("a/b", "a/b/c/standing/d/e")
	f.Fuzz(func(t *testing.T, root, topic string) {
		skid, part, rest := Part(root, topic)
		if part != "" && !strings.HasPrefix(topic, root+"/"+skid+"/"+part) {
			t.Fatalf("%q under %q gives %q %q %q", topic, root, skid, part, rest)
		}
	})
}

func TestPart(t *testing.T) {
	for _, c := range []struct{ topic, skid, part, rest string }{
		{topics.Alarm(), "heron-meadow", "alarm", ""},
		{topics.Health(), "heron-meadow", "health", ""},
		{topics.Features("t1"), "heron-meadow", "features", "t1"},
		{topics.Standing("t1.he.suction/leaking"), "heron-meadow", "standing", "t1.he.suction/leaking"},
		{"lapwing/heron-meadow", "", "", ""}, {"lapwing", "", "", ""}, {"other/heron-meadow/alarm", "", "", ""}, {"", "", "", ""},
	} {
		if skid, part, rest := Part("lapwing", c.topic); skid != c.skid || part != c.part || rest != c.rest {
			t.Errorf("%s: %q %q %q", c.topic, skid, part, rest)
		}
	}
}
