package panel

import (
	"encoding/json"
	"log/slog"
	"math"
	"net/http"
	"net/http/httptest"
	"net/url"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/wire"
)

func nopLog() *slog.Logger { return slog.New(slog.DiscardHandler) }

func ptr(x float64) *float64 { return &x }

// full is a snapshot with one of everything.
func full() *wire.Now {
	leak := wire.Finding{
		Subject: "t1.he.suction", Kind: "leaking", Valve: "t1.he.s2", Grade: "danger", Odds: ptr(14), SinceTurn: 47100, Turn: 48200,
		Amounts: []wire.Amount{{Name: "leak_area_mm2", Value: 38.2, Low: ptr(31), High: ptr(46)}, {Name: "lost_capacity_percent", Value: 6.1}},
		Evidence: []wire.Reason{{Class: "pressure", Text: "discharge opens 4.1° later than expected at this duty"}, {Class: "vibration", Text: "noise while closed is 9 dB above the baseline"},
			{Class: "temperature", Text: "cover of t1.he.s2 is 14 K above its group"}},
		NotApart: []string{"t1.rings"}, Settle: []string{"compare both covers at the next load change"}, Next: []string{"plan to change the valve; isolate, depressurise and lock out first"},
		Sentence: "t1.he.suction leaking, confirmed: discharge opens 4.1° late for this duty, leak area 38 mm² (31–46)",
	}
	hard := wire.Finding{Subject: "t2.ce.discharge", Kind: "impacting-hard", Grade: "advisory", SinceTurn: 48000, Turn: 48200, Evidence: []wire.Reason{{Class: "vibration", Text: "closing impact 2.3 times the usual at this duty"}},
		Sentence: "t2.ce.discharge impacting hard: one class of evidence only"}
	seen := wire.Finding{Subject: "t2.he.suction", Kind: "opening-late", Grade: "advisory", Evidence: []wire.Reason{{Class: "pressure", Text: "suction opens 0.9° late"}}, Sentence: "t2.he.suction opens late: too little to raise an alarm"}
	tr := func(id uint64, key, subject, kind string, from, to alarm.State, sev alarm.Severity, ago time.Duration, said string) wire.Alarm {
		return wire.FromTransition("heron-meadow", &alarm.Transition{ID: id, Key: key, Subject: subject, Kind: kind, From: from, To: to, Severity: sev, At: at.Add(-ago), Turn: 48000, Sentence: said}, "")
	}
	a := tr(31, "t1.he.suction/leaking", "t1.he.suction", "leaking", alarm.Normal, alarm.Unacked, alarm.Danger, 23*time.Minute, leak.Sentence)
	a.Clip, a.Order, a.Detail = "20260301T100300Z-31", 1, leak
	b := tr(32, "t2/rod_load_max_kn/high", "t2", "rod_load_max_kn-high", alarm.Normal, alarm.Acked, alarm.Alert, 40*time.Second, "t2: rod_load_max_kn is 61.2, at or above its limit of 60")
	b.Order, b.Detail = 2, json.RawMessage(`{"value":61.2,"limit":60,"deadband":1}`)
	c := tr(33, "t2.ce.discharge/impacting-hard", "t2.ce.discharge", "impacting-hard", alarm.Normal, alarm.Unacked, alarm.Advisory, 5*time.Second, hard.Sentence)
	gone := tr(30, "t1.ce.discharge/leaking", "t1.ce.discharge", "leaking", alarm.Unacked, alarm.Normal, alarm.NoSeverity, 26*time.Hour, "t1.ce.discharge leaking: the evidence is gone")
	return &wire.Now{
		Skid: "heron-meadow", Name: "Heron Meadow", Site: "biomethane injection, unit 1", At: at, Caution: wire.Caution,
		Health: wire.Health{Version: 1, Skid: "heron-meadow", At: at, State: "running", Line: "watching", Turns: 48211, RPM: ptr(742.4), Learned: true,
			Tape:     wire.TapeHealth{Bytes: 3 << 30, Limit: 8 << 30, Oldest: at.Add(-4 * time.Hour), Newest: at},
			Channels: []wire.Channel{{ID: "phase", Kind: "phase", State: "good"}, {ID: "a7", Kind: "acceleration", Place: "t2", State: "failure", Fault: "open cable", Reason: "a7 picks up mains and little else", SinceTurn: 48011}},
			Trouble:  []string{"the broker has not been reached since 10:12: alarms wait in the outbox"}},
		Latest:   &wire.Turn{Type: "turn", Turn: 48211, TimeS: 3890, Valid: true, RPM: ptr(742.4), Throws: []wire.TurnThrow{throw("t1", "following"), throw("t2", "idle")}},
		Findings: []wire.Finding{leak, hard, seen}, Standing: []wire.Alarm{a, b, c}, Journal: []wire.Alarm{c, b, a, gone},
		Clips: []wire.Clip{{ID: "20260301T100300Z-31", Reason: "alarm 31: t1.he.suction leaking, danger", Alarms: []uint64{31}, From: at.Add(-24 * time.Minute), To: at.Add(-22 * time.Minute), Complete: true, Bytes: 31 << 20},
			{ID: "20260301T102520Z-32", Reason: "alarm 32: t2 rod_load_max_kn-high, alert", From: at.Add(-time.Minute)}},
	}
}

func throw(id, ce string) wire.TurnThrow {
	t := wire.TurnThrow{ID: id, Duty: "steady", Step: 2, Values: map[string]float64{"rod_load_min_kn": -41.3, "rod_load_max_kn": 58.8, "reversal_deg": 87}}
	for _, e := range []struct{ end, state string }{{"he", "following"}, {"ce", ce}} {
		end := wire.TurnEnd{End: e.end, State: e.state, Values: map[string]float64{"p_suction_bar_abs": 5.02, "p_discharge_bar_abs": 14.1, "indicated_power_kw": 41.6, "n_comp_early": 1.281, "n_comp_late": 1.262, "n_exp_early": 1.22, "flow_balance": 1.044}}
		for k, name := range wire.EventNames {
			ev := wire.TurnEvent{Event: name, State: e.state, Values: map[string]float64{"peak_g": 12.5 + float64(k)}}
			if e.state == "following" {
				x := 31.4 + 90*float64(k)
				ev.Angle, ev.Window, ev.Shared, ev.Why = &x, &[2]float64{x - 3, x + 13}, k == 1, "anchored at the departure from the closed line"
			} else {
				ev.Why = "the end does no work: its suction valves are held open"
			}
			end.Events = append(end.Events, ev)
		}
		t.Ends = append(t.Ends, end)
	}
	return t
}

// draw renders a snapshot as the server would.
func draw(t *testing.T, n *wire.Now) string {
	t.Helper()
	return drawPage(t, &still{now: n}, "/")
}

func drawPage(t *testing.T, src Source, path string) string {
	t.Helper()
	w := httptest.NewRecorder()
	guard(routes(src, nopLog())).ServeHTTP(w, httptest.NewRequest(http.MethodGet, "http://127.0.0.1:8411"+path, nil))
	if w.Code != 200 || w.Header().Get("Content-Type") != "text/html; charset=utf-8" {
		t.Fatalf("status %d, %s: %s", w.Code, w.Header().Get("Content-Type"), w.Body)
	}
	well(t, w.Body.String())
	return w.Body.String()
}

func contains(t *testing.T, page string, want ...string) {
	t.Helper()
	for _, w := range want {
		if !strings.Contains(page, w) {
			t.Errorf("the page does not say %q", w)
		}
	}
}

func lacks(t *testing.T, page string, bad ...string) {
	t.Helper()
	for _, b := range bad {
		if strings.Contains(page, b) {
			t.Errorf("the page says %q", b)
		}
	}
}

var handler = regexp.MustCompile(`\son[a-z]+\s*=`)

var tags = regexp.MustCompile(`<(/?)([a-z0-9]+)([^>]*)>`)

// well checks that tags are closed in order, that header cells say their scope, that tables have captions, and that
// there is no script but the page's own file, no inline style and nothing from elsewhere.
func well(t *testing.T, page string) {
	t.Helper()
	body := page
	void := map[string]bool{"meta": true, "link": true, "input": true, "source": true, "img": true}
	var open []string
	for _, m := range tags.FindAllStringSubmatch(body, -1) {
		name := m[2]
		switch {
		case void[name]:
		case m[1] == "":
			open = append(open, name)
		case len(open) == 0 || open[len(open)-1] != name:
			if name == "head" && len(open) == 0 {
				continue
			}
			if name == "html" && len(open) == 0 {
				continue
			}
			t.Fatalf("</%s> closes %v", name, open)
		default:
			open = open[:len(open)-1]
		}
		if m[1] == "" && name == "th" && !strings.Contains(m[3], "scope=") {
			t.Errorf("a header cell without scope: %s", m[0])
		}
		for _, bad := range []string{" style=", "http:", "https:", "javascript:", `="//`} {
			if m[1] == "" && strings.Contains(m[3], bad) {
				t.Errorf("%q in %s", bad, m[0])
			}
		}
		if handler.MatchString(m[3]) {
			t.Errorf("a handler in %s", m[0])
		}
		switch {
		case name == "style", name == "iframe", name == "object", name == "script" && m[1] == "" && m[3] != ` defer src="/app.js"`, name == "link" && m[3] != ` rel="stylesheet" href="/app.css"`:
			t.Errorf("%s on the page", m[0])
		case name == "img" && m[1] == "" && !strings.Contains(m[3], ` alt="`):
			t.Errorf("a picture without words: %s", m[0])
		}
	}
	if len(open) != 0 {
		t.Errorf("left open: %v", open)
	}
	if n, c := strings.Count(body, "<table"), strings.Count(body, "<caption"); n != c {
		t.Errorf("%d tables, %d captions", n, c)
	}
	lacks(t, body, "NaN", "ZgotmplZ", "%!", "0001-01-01", "<no value>", "<nil>")
}

func TestFullPage(t *testing.T) {
	page := draw(t, full())
	keep(t, "full", page)
	channels := drawPage(t, &still{now: full()}, "/channels")
	contains(t, channels, `<tr class="alert"><th scope="row"><a href="/channels/a7">a7</a></th><td>acceleration, t2</td><td><span class="tone">▲ failure</span></td><td>48011</td><td class="text">a7 picks up mains and little else</td></tr>`,
		`<tr class="good"><th scope="row"><a href="/channels/phase">phase</a></th><td>phase</td><td><span class="tone">✓ good</span></td><td>–</td>`)
	contains(t, page, "<title>1 danger, 1 alert, 1 advisory · Machine · Heron Meadow · Lapwing</title>", `class="banner danger" role="status" data-live="banner">◆ Danger: throw t1, head end, suction valves: leaking<small>1 danger, 1 alert, 1 advisory</small></p>`,
		"throw t1, head end, suction valves", "t1.he.suction leaking, confirmed", "discharge opens 4.1° later", "noise while closed is 9 dB above", "38.2 mm² (31 to 46)", "6.1 %",
		"throw t1, head end, suction valve 2", "isolate, depressurise and lock out", `href="/api/v1/clips/20260301T100300Z-31"`, "for 23 min", "for 40 s", "came first",
		"the broker has not been reached", "Seen, no alarm stands on it", "too little to raise an alarm", "opens at 301.4°, window 298.4° to 314.4°",
		`<a href="/channels/a7">a7</a> <span class="tone">▲ failure</span> <span class="soft">a7 picks up mains and little else</span>`, `data-verb="acknowledge" data-key="t1.he.suction/leaking"`, `href="/cylinder/t1"`,
		"idle: does no work, not judged", "danger: leaking", "alert: rod_load_max_kn-high", wire.Caution)
	tape := drawPage(t, &still{now: full()}, "/tape")
	contains(t, tape, "3072.0 MiB of 8192.0 MiB", "still recording", `href="/api/v1/clips/20260301T100300Z-31"`, `data-from="2026-03-01T10:02:00Z"`)
	if n := strings.Count(tape, ">Keep</button>"); n != 1 {
		t.Errorf("%d clips can be kept: one is not complete", n)
	}
	if strings.Index(page, "leaking, confirmed") > strings.Index(page, "rod_load_max_kn is 61.2") || strings.Index(page, "Needs attention") > strings.Index(page, "Valves and sensors now") {
		t.Error("the worst does not come first")
	}
	if n := strings.Count(page, "discharge opens 4.1° later"); n != 1 {
		t.Errorf("the evidence stands %d times", n)
	}
	if n := strings.Count(page, "opens late: too little"); n != 1 {
		t.Errorf("a finding without an alarm stands %d times", n)
	}
}

func TestEmptyPages(t *testing.T) {
	for name, n := range map[string]*wire.Now{
		"nothing at all": {},
		"no turn yet":    {Name: "Heron Meadow", Skid: "heron-meadow", Health: wire.Health{State: "starting"}, Caution: wire.Caution},
		"a throw without ends": {Health: wire.Health{State: "running"},
			Latest: &wire.Turn{Valid: true, Throws: []wire.TurnThrow{{ID: "t1"}}}},
		"an event without values": {Latest: &wire.Turn{Valid: true, Throws: []wire.TurnThrow{{ID: "t1", Ends: []wire.TurnEnd{{End: "he", State: "lost", Events: []wire.TurnEvent{{Event: "suction.opens", State: "lost"}}}}}}}},
	} {
		t.Run(name, func(t *testing.T) {
			page := draw(t, n)
			contains(t, page, "No alarm stands, but no valve is being")
			lacks(t, page, `class="banner good"`)
			src := &still{now: n}
			contains(t, drawPage(t, src, "/tape"), "No clip is protected")
			contains(t, drawPage(t, src, "/journal"), "nothing yet", "All alarm points are normal")
			contains(t, drawPage(t, src, "/findings"), "Nothing is found")
			contains(t, drawPage(t, src, "/channels"), "No channel is known yet")
		})
	}
}

// What is shelved or out of service must not look like health, nor what is found and raises no alarm.
func TestHiddenIsNotHealthy(t *testing.T) {
	n := full()
	n.Standing, n.Findings, n.Health.Trouble = nil, n.Findings[2:], nil
	v := arrange(n, 0)
	v.hidden([]wire.Point{{Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", State: "shelved", Level: "alert"}, {Key: "t1.ce.d1/x", Subject: "t1.ce.d1", Kind: "x", State: "out-of-service", Level: "none"},
		{Key: "t1.ce.s1/y", Subject: "t1.ce.s1", Kind: "y", State: "suppressed", Level: "none"}, {Key: "t1.he.discharge/z", Subject: "t1.he.discharge", Kind: "z", State: "normal"}})
	for _, c := range []struct {
		got          cell
		class, words string
	}{{v.Valves[0].Rows[0].Cells[0], "mute", "leaking: shelved"}, {v.Valves[0].Rows[1].Cells[1], "mute", "x: out of service"}, {v.Valves[0].Rows[1].Cells[0], "good", "no alarm"}, {v.Valves[0].Rows[0].Cells[1], "good", "no alarm"},
		{v.Valves[1].Rows[0].Cells[0], "advisory", "advisory: opening-late, no alarm stands on it"}} {
		if c.got.Class != c.class || c.got.Words != c.words {
			t.Errorf("%+v, want %s %q", c.got, c.class, c.words)
		}
	}
	if b := v.Banner; b.Class != "mute" || !strings.Contains(b.Text, "one is hidden") || !strings.HasSuffix(b.More, "t1.he.suction/leaking is shelved, behind it: alert; t1.ce.d1/x is out of service") {
		t.Errorf("%+v", b)
	}
}

// Silence must not look like health.
func TestBanner(t *testing.T) {
	good := func() *wire.Now {
		return &wire.Now{At: at, Health: wire.Health{State: "running", Line: "watching", Learned: true}, Latest: &wire.Turn{Valid: true, Throws: []wire.TurnThrow{throw("t1", "following")}}}
	}
	for _, c := range []struct {
		name        string
		age         time.Duration
		edit        func(*wire.Now)
		class, text string
	}{
		{"all well", 0, func(*wire.Now) {}, "good", "No alarm stands. Watching."},
		{"one end idle", 0, func(n *wire.Now) { n.Latest.Throws[0] = throw("t1", "idle") }, "good", "Watching. | Not judged now: t1.ce (idle)"},
		{"all ends lost", 0, func(n *wire.Now) {
			n.Latest.Throws[0] = throw("t1", "lost")
			n.Latest.Throws[0].Ends[0].State = "lost"
		}, "mute", "no valve can be judged on this turn | Not judged now: t1.he (lost), t1.ce (lost)"},
		{"no turn", 0, func(n *wire.Now) { n.Latest = nil }, "mute", "no turn has been measured yet"},
		{"standstill", 0, func(n *wire.Now) { n.Health.State = "standstill" }, "mute", "No alarm stands, but no valve is being watched: standstill"},
		{"phase lost", 0, func(n *wire.Now) { n.Health.State = "lost" }, "mute", "no valve is being watched: lost"},
		{"no baseline", 0, func(n *wire.Now) { n.Health.Learned, n.Health.Line = false, "learning, 3 of 900 steady turns" }, "mute", "no valve is being judged: learning, 3 of 900 steady turns"},
		{"turn not valid", 0, func(n *wire.Now) { n.Latest.Valid, n.Latest.Reason = false, "a mark is missing" }, "mute", "the last turn was not judged: a mark is missing"},
		{"trouble", 0, func(n *wire.Now) { n.Health.Trouble = []string{"the tape drops blocks"} }, "mute", "this monitor needs attention itself"},
		{"an alarm at standstill", 0, func(n *wire.Now) {
			n.Health.State, n.Standing = "standstill", []wire.Alarm{{Severity: "alert", Subject: "t2", Kind: "high"}}
		}, "alert", "Alert: t2: high | 1 alert"},
		{"many", 0, func(n *wire.Now) {
			n.Standing = []wire.Alarm{{Severity: "danger"}, {Severity: "danger"}, {Severity: "advisory"}, {Severity: "none", To: "returned-unacknowledged"}}
		}, "danger", "2 dangers, 1 advisory, 1 waiting for an acknowledgement"},
		{"only returned", 0, func(n *wire.Now) { n.Standing = []wire.Alarm{{Severity: "none", Subject: "t1.x", Kind: "gone"}} }, "mute", "t1.x: gone | 1 waiting for an acknowledgement"},
		{"just new enough", stale, func(*wire.Now) {}, "good", "Watching"},
		{"old", 3 * time.Minute, func(*wire.Now) {}, "mute", "No alarm stands, but nothing new has come for 3 min"},
		{"old and never begun", time.Minute, func(n *wire.Now) { n.At = time.Time{} }, "mute", "nothing has come yet"},
		{"old with an alarm", time.Minute, func(n *wire.Now) { n.Standing = []wire.Alarm{{Severity: "danger"}} }, "danger", "1 danger; nothing new has come for 1 min"},
	} {
		t.Run(c.name, func(t *testing.T) {
			n := good()
			c.edit(n)
			if b := headline(n, c.age); b.Class != c.class || !strings.Contains(b.Text+" | "+b.More, c.text) {
				t.Errorf("got %+v, want %s %q", b, c.class, c.text)
			}
			keep(t, "banner-"+strings.ReplaceAll(c.name, " ", "-"), draw(t, n))
		})
	}
}

func TestAgeOfTheSnapshot(t *testing.T) {
	var s newest
	a, b := &wire.Now{}, &wire.Now{}
	for i, c := range []struct {
		n    *wire.Now
		at   time.Duration
		want time.Duration
	}{{a, 0, 0}, {a, 4 * time.Second, 4 * time.Second}, {b, 5 * time.Second, 0}, {b, 25 * time.Second, 20 * time.Second}, {a, 30 * time.Second, 0}} {
		if got := s.age(c.n, at.Add(c.at)); got != c.want {
			t.Errorf("look %d: age %v, want %v", i, got, c.want)
		}
	}
}

func TestValveMap(t *testing.T) {
	n := full()
	n.Standing = []wire.Alarm{{Key: "a", Subject: "t1.he.s2", Kind: "leaking", Severity: "advisory", To: "unacknowledged"}, {Key: "b", Subject: "t1.he.suction", Kind: "leaking", Severity: "alert", To: "acknowledged"},
		{Key: "c", Subject: "t1.rings", Kind: "leaking", Severity: "danger", To: "acknowledged"}, {Key: "d", Subject: "t1.ce.discharge.opens", Kind: "x", Severity: "none", To: "returned-unacknowledged"}}
	m := arrange(n, 0).Valves[0]
	for _, c := range []struct {
		got                cell
		class, words, open string
	}{
		{m.Whole, "danger", "danger: leaking", ""},
		{m.Rows[0].Cells[0], "alert", "alert: leaking", "opens at 121.4°, window 118.4° to 134.4°"},
		{m.Rows[0].Cells[1], "good", "no alarm", "opens at 301.4°, window 298.4° to 314.4°"},
		{m.Rows[1].Cells[0], "good", "no alarm", "opens at 121.4°, window 118.4° to 134.4°"},
		{m.Rows[1].Cells[1], "mute", "x: condition gone, not acknowledged", "opens at 301.4°, window 298.4° to 314.4°"},
	} {
		if c.got != (cell{Class: c.class, Words: c.words, Opens: c.open}) {
			t.Errorf("got %+v, want %+v", c.got, c)
		}
	}
	idle := arrange(n, 0).Valves[1].Rows[1].Cells[0]
	if idle.Class != "mute" || !strings.Contains(idle.Words, "not judged") || idle.Opens != "" {
		t.Errorf("an idle end shows %+v", idle)
	}
	n.Health.Learned, n.Standing, n.Findings = false, nil, nil
	if c := arrange(n, 0).Valves[0].Rows[0].Cells[0]; c.Class != "mute" || c.Words != "measured, not judged" {
		t.Errorf("without a baseline a valve shows %+v", c)
	}
	n.Latest.Valid = false
	if len(arrange(n, 0).Valves) != 0 {
		t.Error("a turn that is not valid shows valves")
	}
}

func TestWords(t *testing.T) {
	for in, want := range map[string]string{"t1.he.suction": "throw t1, head end, suction valves", "t2.ce.d3": "throw t2, crank end, discharge valve 3", "t1.rings": "throw t1, piston rings", "t1.packing": "throw t1, rod packing",
		"t1": "t1", "vib_t1": "vib_t1", "t1.he.sx": "t1.he.sx", "a.b.c": "a.b.c", "": ""} {
		if got := inWords(in); got != want {
			t.Errorf("%s: %q, want %q", in, got, want)
		}
	}
	for d, want := range map[time.Duration]string{0: "0 s", 59 * time.Second: "59 s", 61 * time.Second: "1 min", 3*time.Hour + 5*time.Minute: "3 h 5 min", 50 * time.Hour: "2 days", -time.Second: ""} {
		if got := lasted(at, at.Add(d)); got != want {
			t.Errorf("%v: %q, want %q", d, got, want)
		}
	}
	if lasted(time.Time{}, at) != "" || lasted(at, time.Time{}) != "" {
		t.Error("a span out of nothing")
	}
	for _, c := range []struct {
		a    wire.Amount
		unit string
		text string
	}{
		{wire.Amount{Name: "leak_area_mm2", Value: 38.24, Low: ptr(31), High: ptr(46)}, "leak area", "38.2 mm² (31 to 46)"},
		{wire.Amount{Name: "lost_capacity_kg_h", Value: 123456}, "lost capacity", "123456 kg/h"},
		{wire.Amount{Name: "odd_thing", Value: -0.5, Low: ptr(1)}, "odd thing", "−0.5"},
	} {
		if u, s := unit(c.a.Name), amount(c.a); u != c.unit || s != c.text {
			t.Errorf("%s: %q %q", c.a.Name, u, s)
		}
	}
}

// Everything that comes from a file or a sensor is text on the page, never markup.
func TestNoMarkupGetsThrough(t *testing.T) {
	evil := `"><script>alert(1)</script><b class='x`
	n := full()
	n.Name, n.Site, n.Skid, n.Health.Line, n.Health.State, n.Health.Trouble = evil, evil, evil, evil, evil, []string{evil}
	for i := range n.Standing {
		a := &n.Standing[i]
		a.Subject, a.Kind, a.Severity, a.Sentence, a.Clip, a.By, a.Note, a.To = evil, evil, evil, evil, evil, evil, evil, evil
	}
	n.Journal, n.Clips[0].ID, n.Clips[0].Reason = n.Standing, evil, evil
	n.Findings[2].Evidence[0].Text, n.Findings[2].Grade, n.Findings[2].Valve = evil, evil, evil
	n.Latest.Throws[0].ID, n.Latest.Throws[0].Ends[0].State, n.Latest.Throws[0].Ends[0].Events[0].Why = evil, evil, evil
	n.Health.Channels[0].ID, n.Health.Channels[0].Reason, n.Health.Channels[1].Place = evil, evil, evil
	src := &still{now: n, journal: func(wire.JournalFilter) (wire.JournalPage, error) {
		return wire.JournalPage{Unread: evil, Entries: []wire.Entry{{Type: "act", Key: evil, Verb: evil, By: evil, Note: evil, Said: evil, Clip: evil}}}, nil
	}}
	for _, path := range []string{"/", "/journal", "/findings?subject=" + url.QueryEscape(evil), "/tape", "/channels"} {
		page := drawPage(t, src, path)
		lacks(t, page, "<script>", "<b class='x")
		contains(t, page, "&lt;script&gt;")
	}
}

// Text is readable in both schemes: contrast ratio at least 4.5 (WCAG 2.1, success criterion 1.4.3, level AA; relative
// luminance and ratio as its glossary defines them).
func TestContrast(t *testing.T) {
	css, err := files.ReadFile("pages/app.css")
	if err != nil {
		t.Fatal(err)
	}
	schemes := regexp.MustCompile(`:root\{(color-scheme[^}]*|--ink[^}]*)\}`).FindAllStringSubmatch(string(css), -1)
	if len(schemes) != 2 {
		t.Fatalf("%d colour schemes", len(schemes))
	}
	for i, s := range schemes {
		c := map[string]float64{}
		for _, m := range regexp.MustCompile(`--([a-z]+):#([0-9a-f]{6})`).FindAllStringSubmatch(s[1], -1) {
			c[m[1]] = luminance(t, m[2])
		}
		pairs := [][2]string{{"onfill", "danger"}, {"onfill", "alert"}, {"onfill", "advisory"}, {"onfill", "good"}, {"onfill", "mute"}}
		for _, fore := range []string{"ink", "soft", "danger", "alert", "advisory", "good", "mute"} {
			pairs = append(pairs, [2]string{fore, "paper"}, [2]string{fore, "card"})
		}
		for _, p := range pairs {
			a, okA := c[p[0]]
			b, okB := c[p[1]]
			if !okA || !okB {
				t.Fatalf("scheme %d has no %v", i, p)
			}
			if r := (math.Max(a, b) + 0.05) / (math.Min(a, b) + 0.05); r < 4.5 {
				t.Errorf("scheme %d: %s on %s has a contrast of %.2f", i, p[0], p[1], r)
			}
		}
	}
	if r := (luminance(t, "ffffff") + 0.05) / (luminance(t, "000000") + 0.05); math.Abs(r-21) > 1e-9 {
		t.Errorf("white on black is %v, not 21", r)
	}
}

func luminance(t *testing.T, hex string) float64 {
	t.Helper()
	var l float64
	for i, w := range []float64{0.2126, 0.7152, 0.0722} {
		n, err := strconv.ParseUint(hex[2*i:2*i+2], 16, 8)
		if err != nil {
			t.Fatal(err)
		}
		x := float64(n) / 255
		if x <= 0.03928 {
			x /= 12.92
		} else {
			x = math.Pow((x+0.055)/1.055, 2.4)
		}
		l += w * x
	}
	return l
}

// Each class has a shape of its own, so that nobody needs colour to tell them apart.
func TestMarks(t *testing.T) {
	seen := map[string]string{}
	for _, c := range []string{"danger", "alert", "advisory", "good", "mute"} {
		m := mark(c)
		if other, twice := seen[m]; twice || m == "" {
			t.Errorf("%s and %s look the same", c, other)
		}
		seen[m] = c
	}
	if tone("danger") != "danger" || tone("none") != "mute" || tone("x\"y") != "mute" {
		t.Error("a class out of a word that is no severity")
	}
}
