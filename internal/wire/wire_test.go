package wire_test

import (
	"encoding/json"
	"math"
	"reflect"
	"regexp"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/alarm"
	"lapwing/internal/crank"
	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/uplink"
	"lapwing/internal/verdict"
	"lapwing/internal/window"
	"lapwing/internal/wire"
)

func layout() measure.Layout {
	end := measure.End{Works: true, Suction: []measure.Valve{{ID: "t1.he.s1", Cover: true}, {ID: "t1.he.s2", Cover: true}}, Discharge: []measure.Valve{{ID: "t1.he.d1"}}}
	return measure.NewLayout(measure.Machine{Throws: []measure.Throw{
		{ID: "t1", Stage: 1, Ends: [2]measure.End{end, {Works: true}}, Acoustic: true},
		{ID: "t2", Stage: 2, Ends: [2]measure.End{{Works: true}, {}}},
	}})
}

func machine() *skid.Skid {
	return &skid.Skid{ID: "heron-meadow", Name: "Heron Meadow", Throws: []skid.Throw{{ID: "t1"}, {ID: "t2"}}}
}

// wild draws numbers as broken mathematics gives them: more not-numbers, infinities and extremes than sound ones.
func wild() *rapid.Generator[float64] {
	return rapid.OneOf(
		rapid.SampledFrom([]float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, math.Copysign(0, -1), math.MaxFloat64, -math.MaxFloat64, math.SmallestNonzeroFloat64, 1e-300, 1e308, 1e15, 123456789.123456789}),
		rapid.Float64(), rapid.Float64Range(-1000, 1000))
}

// plain draws strings as they come from files and other programs, also broken ones.
func plain() *rapid.Generator[string] {
	return rapid.OneOf(rapid.SampledFrom([]string{"valves open late", "\"<&>\u2028", "\xff\xfe", "\x00"}), rapid.StringN(1, 20, 60))
}

func encode(t testing.TB, v any) []byte {
	t.Helper()
	b, ok := v.([]byte)
	if !ok {
		var err error
		if b, err = json.Marshal(v); err != nil {
			t.Fatalf("%T does not encode: %v", v, err)
		}
	}
	return b
}

func fits(t testing.TB, s schema, v any) []byte {
	t.Helper()
	b := encode(t, v)
	if err := s.check(b); err != nil {
		t.Fatalf("%v\n%s", err, b)
	}
	return b
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

func near(a, b, rel float64) bool { return math.Abs(a-b) <= rel*math.Max(math.Abs(a), math.Abs(b)) }

func drawVector(rt *rapid.T, l measure.Layout) *measure.Vector {
	v := &measure.Vector{Turn: rapid.Int64Range(0, 1<<40).Draw(rt, "turn"), RPM: wild().Draw(rt, "rpm"), V: make([]float64, len(l)), Why: make([]string, len(l))}
	few := rapid.SliceOfN(wild(), 8, 8).Draw(rt, "few")
	for i := range v.V {
		v.V[i] = few[rapid.IntRange(0, 7).Draw(rt, "which")]
		if !finite(v.V[i]) {
			v.Why[i] = "the end is idle"
		}
	}
	return v
}

func TestFeatures(t *testing.T) {
	s, l := loadSchema(t, "features"), layout()
	at := time.Date(2026, 3, 1, 11, 0, 0, 0, time.FixedZone("", 3600))
	rapid.Check(t, func(rt *rapid.T) {
		v := drawVector(rt, l)
		raw, err := wire.FromVector("heron-meadow", "t1", 0, l, v, at, "steady")
		if err != nil {
			rt.Fatal(err)
		}
		fits(t, s, raw)
		var back wire.Features
		if err := json.Unmarshal(raw, &back); err != nil {
			rt.Fatal(err)
		}
		absent := 0
		for i := range l {
			if l[i].Throw != 0 {
				continue
			}
			want := v.V[i]*l[i].Scale + l[i].Shift
			got, there := back.Values[l[i].Subject][l[i].Name]
			if there != finite(want) {
				rt.Fatalf("%s/%s is %v, on the wire: %v", l[i].Subject, l[i].Name, want, there)
			}
			if !there {
				absent++
			} else if !near(got, want, 1e-6) {
				rt.Fatalf("%s/%s is %v, on the wire %v", l[i].Subject, l[i].Name, want, got)
			}
		}
		if back.Absent != absent {
			rt.Fatalf("absent %d, want %d", back.Absent, absent)
		}
		if back.Turn != v.Turn || !back.At.Equal(at) || (back.RPM != nil) != finite(v.RPM) {
			rt.Fatalf("head came back as %+v", back)
		}
		if _, other := back.Values["t2.he"]; other {
			rt.Fatal("another throw's features are in the message")
		}
	})
}

func drawFinding(rt *rapid.T, l measure.Layout) *verdict.Finding {
	f := &verdict.Finding{
		Subject: "t1.he.suction", Kind: verdict.Leaking, Grade: rapid.SampledFrom([]verdict.Grade{verdict.None, verdict.Advisory, verdict.Alert, verdict.Danger}).Draw(rt, "grade"),
		Odds: wild().Draw(rt, "odds"), SinceTurn: 7, Turn: 90, Sentence: plain().Draw(rt, "sentence"),
		Severity: []verdict.Quantity{{Name: "leak_area_mm2", Value: wild().Draw(rt, "area"), Lo: wild().Draw(rt, "lo"), Hi: wild().Draw(rt, "hi")}},
	}
	if w := rapid.SampledFrom([]verdict.Way{"", verdict.Unknown, verdict.Rising, verdict.Steady, verdict.Falling}).Draw(rt, "way"); w != "" {
		f.Trend = verdict.Trend{Way: w, Quantity: rapid.SampledFrom([]string{"leak_area_mm2", ""}).Draw(rt, "of"), PerHour: wild().Draw(rt, "rate"), Lo: wild().Draw(rt, "rate lo"),
			Hi: wild().Draw(rt, "rate hi"), From: wild().Draw(rt, "from"), To: wild().Draw(rt, "to"), Hours: math.Abs(wild().Draw(rt, "hours"))}
	}
	for range rapid.IntRange(0, 4).Draw(rt, "reasons") {
		f.Evidence = append(f.Evidence, verdict.Evidence{Class: measure.Class(rapid.IntRange(0, 3).Draw(rt, "class")), Text: plain().Draw(rt, "text"), Feature: rapid.IntRange(-1, len(l)).Draw(rt, "feature"),
			Value: wild().Draw(rt, "value"), Expected: wild().Draw(rt, "expected"), Z: wild().Draw(rt, "z"), LLR: wild().Draw(rt, "llr")})
	}
	return f
}

func TestFinding(t *testing.T) {
	s, l := loadSchema(t, "finding"), layout()
	rapid.Check(t, func(rt *rapid.T) {
		f := drawFinding(rt, l)
		raw := fits(t, s, wire.FindingRecord(rapid.Float64Range(0, 1e6).Draw(rt, "t"), f, l))
		var back wire.FindingLine
		if err := json.Unmarshal(raw, &back); err != nil {
			rt.Fatal(err)
		}
		if back.Subject != f.Subject || back.Grade != f.Grade.String() || len(back.Evidence) != len(f.Evidence) || back.SinceTurn != 7 || back.Turn != 90 {
			rt.Fatalf("came back as %+v", back)
		}
		if (len(back.Amounts) == 1) != finite(f.Severity[0].Value) {
			rt.Fatalf("amount %v came back as %v", f.Severity[0].Value, back.Amounts)
		}
		known := f.Trend.Quantity != "" && f.Trend.Way != "" && f.Trend.Way != verdict.Unknown
		if tr := back.Trend; (tr != nil) != known {
			rt.Fatalf("trend %+v came back as %+v", f.Trend, tr)
		} else if known && (tr.Way != string(f.Trend.Way) || tr.Of != f.Trend.Quantity || (tr.PerHour != nil) != finite(f.Trend.PerHour) ||
			tr.PerHour != nil && !near(*tr.PerHour, f.Trend.PerHour, 1e-5) || (tr.Over != nil) != finite(3600*f.Trend.Hours)) {
			rt.Fatalf("trend %+v came back as %+v", f.Trend, tr)
		}
		for i, e := range f.Evidence {
			r := back.Evidence[i]
			if (r.Spreads != nil) != finite(e.Z) || (r.Weight != nil) != finite(e.LLR) {
				rt.Fatalf("evidence %+v came back as %+v", e, r)
			}
			if e.Feature < 0 || e.Feature >= len(l) {
				if r.Feature != "" || r.Value != nil || r.Expected != nil {
					rt.Fatalf("a feature out of nothing: %+v", r)
				}
			} else if want := e.Value*l[e.Feature].Scale + l[e.Feature].Shift; (r.Value != nil) != finite(want) || r.Value != nil && !near(*r.Value, want, 1e-8) {
				rt.Fatalf("value %v came back as %v", want, r.Value)
			}
		}
	})
}

func states() *rapid.Generator[alarm.State] {
	return rapid.SampledFrom([]alarm.State{alarm.Unknown, alarm.Normal, alarm.Unacked, alarm.Acked, alarm.ReturnedUnacked, alarm.Shelved, alarm.Suppressed, alarm.LatchedUnacked, alarm.LatchedAcked, alarm.OutOfService})
}

func drawTransition(rt *rapid.T, l measure.Layout) *alarm.Transition {
	sev := func(n string) alarm.Severity {
		return rapid.SampledFrom([]alarm.Severity{alarm.NoSeverity, alarm.Advisory, alarm.Alert, alarm.Danger}).Draw(rt, n)
	}
	tr := &alarm.Transition{ID: rapid.Uint64Min(1).Draw(rt, "id"), Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking",
		From: states().Draw(rt, "from"), To: states().Draw(rt, "to"), Severity: sev("severity"), Was: sev("was"),
		At: time.Unix(rapid.Int64Range(0, 1<<32).Draw(rt, "at"), 5e8), Turn: 90, Seq0: 4, Seq1: 9, Sentence: plain().Draw(rt, "sentence"),
		Order: rapid.IntRange(0, 3).Draw(rt, "order"), Flood: rapid.Bool().Draw(rt, "flood")}
	switch rapid.IntRange(0, 3).Draw(rt, "detail") {
	case 1:
		tr.Detail = wire.FromFinding(drawFinding(rt, l), l)
	case 2:
		tr.Detail = alarm.LimitDetail{Value: 61, Limit: 60, Deadband: 1, Next: rapid.SampledFrom([][]string{nil, {"compare"}}).Draw(rt, "next")}
	case 3:
		tr.Detail = json.RawMessage(`{"error":"could not be written"}`)
	}
	return tr
}

func TestAlarm(t *testing.T) {
	s, standing, line, l := loadSchema(t, "alarm"), loadSchema(t, "standing"), loadSchema(t, "transition"), layout()
	rapid.Check(t, func(rt *rapid.T) {
		tr := drawTransition(rt, l)
		a := wire.FromTransition("heron-meadow", tr, rapid.SampledFrom([]string{"", "20260301T100000Z-4"}).Draw(rt, "clip"))
		raw := fits(t, s, a)
		fits(t, standing, a)
		fits(t, line, wire.TransitionRecord(12.5, tr))
		var back wire.Alarm
		if err := json.Unmarshal(raw, &back); err != nil {
			rt.Fatal(err)
		}
		if back.ID != tr.ID || back.To != tr.To.String() || back.From != tr.From.String() || !back.At.Equal(tr.At) || back.Severity != tr.Severity.String() {
			rt.Fatalf("came back as %+v", back)
		}
		if a.Open != tr.To.Open() || back.Caution != wire.Caution {
			rt.Fatalf("open %v, caution %q", a.Open, back.Caution)
		}
	})
}

func TestStandingPoint(t *testing.T) {
	s := loadSchema(t, "standing")
	p := alarm.Point{Key: "t1/rod_load_max_kn/high", Subject: "t1", Kind: "rod_load_max_kn-high", State: alarm.Acked, Severity: alarm.Alert, Sentence: "x", Turn: 4}
	raw := string(fits(t, s, wire.FromPoint("heron-meadow", &p)))
	for _, k := range []string{`"id"`, `"at"`, `"from"`, `"was"`, `"detail"`, "null", "0001-"} {
		if strings.Contains(raw, k) {
			t.Errorf("%s stands in a point that does not know it: %s", k, raw)
		}
	}
	p.Detail, p.Since = json.RawMessage(`{"value":61,"limit":60,"deadband":1}`), time.Unix(1e9, 0)
	if raw := string(fits(t, s, wire.FromPoint("heron-meadow", &p))); !strings.Contains(raw, `"limit":60`) || !strings.Contains(raw, `"at":"2001-09-09T01:46:40Z"`) {
		t.Errorf("detail or time is missing: %s", raw)
	}
}

func TestHealth(t *testing.T) {
	s := loadSchema(t, "health")
	rpm, share, rate := 742.5, 0.0625, 4e6
	for name, h := range map[string]wire.Health{
		"bare": {Version: 1, Skid: "heron-meadow", State: "standstill", Line: "watching", Category: "good"},
		"full": {Version: 1, Skid: "heron-meadow", At: time.Unix(1e9, 0).UTC(), State: "running", Line: "watching", Turns: 9, BadTurns: 1, RPM: &rpm, Learned: true,
			Category: "out of specification", CategoryWhy: "p1h is not used", BadBy: map[string]int64{"samples missing": 1}, Load: &share, LoadWorst: &share,
			Queue: 1, QueueMost: 2, QueueLimit: 256,
			Tape:   wire.TapeHealth{Rate: &rate, Behind: &share, Bytes: 3, Limit: 9, Oldest: time.Unix(1e9, 0).UTC(), Newest: time.Unix(2e9, 0).UTC(), Dropped: 1, Clips: 2, Problems: []string{"x"}},
			Uplink: uplink.Status{Connected: true, Since: time.Unix(1e9, 0).UTC(), LastError: "x", Connections: 4, Sent: 9, Replaced: 1}, Trouble: []string{"look"},
			Channels: []wire.Channel{{ID: "phase", Kind: "phase", State: "good"}, {ID: "p1h", Kind: "pressure", Place: "t1.he", State: "out of specification", Fault: "hum", Reason: "p1h carries hum", SinceTurn: 7}}},
		"uplink with commands": {Version: 1, Skid: "heron-meadow", State: "running", Category: "good", Uplink: uplink.Status{Connected: true, Unheard: "x", CertUntil: time.Unix(2e9, 0).UTC(),
			Commands: &uplink.CommandStatus{Allowed: []string{"acknowledge"}, Hearing: true, Accepted: 3, Refused: 2, Repeated: 1, TooMany: 1, LastError: "x"}}},
		"uplink not yet up": {Version: 1, Skid: "heron-meadow", State: "starting", Category: "function check", Uplink: uplink.Status{}},
	} {
		t.Run(name, func(t *testing.T) {
			raw := string(fits(t, s, h))
			if strings.Contains(raw, "0001-") {
				t.Errorf("a time of nothing: %s", raw)
			}
			if name == "bare" && strings.Contains(raw, "speed_rpm") {
				t.Errorf("a speed out of nothing: %s", raw)
			}
		})
	}
}

func TestOffline(t *testing.T) {
	raw := fits(t, loadSchema(t, "health"), wire.Offline("heron \"meadow\""))
	var h map[string]any
	if err := json.Unmarshal(raw, &h); err != nil {
		t.Fatal(err)
	}
	if h["state"] != "offline" || h["skid"] != "heron \"meadow\"" || h["category"] != "failure" || len(h) != 5 {
		t.Errorf("a daemon that is gone still says %s", raw)
	}
}

func drawTurn(rt *rapid.T) (*turn.Turn, window.Result, []duty.Point) {
	tn := &turn.Turn{Number: 12, Seq0: 1000, Seq1: 5000, Time: wild().Draw(rt, "time"), RPM: wild().Draw(rt, "rpm")}
	var w window.Result
	var pts []duty.Point
	for range 2 {
		tn.Throws = append(tn.Throws, turn.Throw{T0: wild().Draw(rt, "t0"), RPM: wild().Draw(rt, "rpm"), U: wild().Draw(rt, "u")})
		var th window.Throw
		for e := range th.Ends {
			th.Ends[e].State = window.State(rapid.IntRange(0, 4).Draw(rt, "state"))
			th.Ends[e].NotPresent = rapid.IntRange(0, 3).Draw(rt, "present") == 0
			for k := range th.Ends[e].W {
				th.Ends[e].W[k] = window.Window{Angle: wild().Draw(rt, "a"), Thermo: wild().Draw(rt, "b"), Expected: wild().Draw(rt, "c"), Lo: wild().Draw(rt, "lo"), Hi: wild().Draw(rt, "hi"),
					State: window.State(rapid.IntRange(0, 4).Draw(rt, "state")), Conf: rapid.OneOf(rapid.Just(math.NaN()), rapid.Float64Range(0, 1)).Draw(rt, "conf")}
			}
		}
		w.Throws = append(w.Throws, th)
		pts = append(pts, duty.Point{State: duty.State(rapid.IntRange(0, 4).Draw(rt, "duty")), Step: 2, Ps: math.NaN()})
	}
	return tn, w, pts
}

func TestTurn(t *testing.T) {
	s, l := loadSchema(t, "turn"), layout()
	r := wire.NewRecorder(machine(), l, 40000)
	rapid.Check(t, func(rt *rapid.T) {
		tn, w, pts := drawTurn(rt)
		v := drawVector(rt, l)
		rec := r.Record(tn, w, v, pts)
		raw := fits(t, s, rec)
		var back wire.Turn
		if err := json.Unmarshal(raw, &back); err != nil {
			rt.Fatal(err)
		}
		if finite(tn.Time) && math.Abs(back.TimeS-tn.Time) > 1e-6 && !near(back.TimeS, tn.Time, 1e-12) {
			rt.Fatalf("time %v came back as %v", tn.Time, back.TimeS)
		}
		if !finite(tn.Time) && back.TimeS != 0.025 { // sample 1000 at 40 kHz
			rt.Fatalf("a turn without a time stands at %v", back.TimeS)
		}
		for i, th := range back.Throws {
			k := 0
			for e := range w.Throws[i].Ends {
				in := &w.Throws[i].Ends[e]
				if in.NotPresent {
					continue
				}
				out := th.Ends[k]
				k++
				if out.End != wire.EndNames[e] || len(out.Events) != window.Events {
					rt.Fatalf("end %+v", out)
				}
				for ev, x := range out.Events {
					in := in.W[ev]
					if x.Event != wire.EventNames[ev] || (x.Angle != nil) != finite(in.Angle) || (x.Crossing != nil) != finite(in.Thermo) || (x.Expected != nil) != finite(in.Expected) || (x.Conf != nil) != finite(in.Conf) {
						rt.Fatalf("event %+v came back as %+v", in, x)
					}
					if x.Window != nil && x.Window[0] > x.Window[1] {
						rt.Fatalf("window %v runs backwards", *x.Window)
					}
					if ordered := finite(in.Lo) && finite(in.Hi) && in.Lo <= in.Hi; ordered && x.Window == nil {
						rt.Fatalf("window %v to %v is lost", in.Lo, in.Hi)
					}
				}
			}
		}
		// every feature that is known stands somewhere, and none that is not
		known := 0
		for i := range l {
			hidden := l[i].End >= 0 && w.Throws[l[i].Throw].Ends[l[i].End].NotPresent && inEnd(l[i].Subject)
			if finite(v.V[i]*l[i].Scale+l[i].Shift) && !hidden {
				known++
			}
		}
		if n := countValues(&back); n != known {
			rt.Fatalf("%d values in the record, %d features known", n, known)
		}
	})
}

// inEnd tells whether a feature stands under an end (t1.he) or one of its events, not under a leak path or a valve.
func inEnd(subject string) bool {
	f := strings.Split(subject, ".")
	return len(f) == 2 && f[1] != "rings" || len(f) == 4
}

func countValues(t *wire.Turn) (n int) {
	for _, th := range t.Throws {
		n += len(th.Values)
		for _, m := range th.Paths {
			n += len(m)
		}
		for _, e := range th.Ends {
			n += len(e.Values)
			for _, ev := range e.Events {
				n += len(ev.Values)
			}
		}
	}
	return n
}

func TestTurnThatIsNotValid(t *testing.T) {
	r := wire.NewRecorder(machine(), layout(), 40000)
	raw := fits(t, loadSchema(t, "turn"), r.Record(&turn.Turn{Number: 3, Seq0: 10, Seq1: 20, Time: 0.5, RPM: math.NaN(), Reason: "a mark is missing"}, window.Result{}, nil, nil))
	if want := `{"type":"turn","turn":3,"t_s":0.5,"valid":false,"reason":"a mark is missing","samples":[10,20]}`; string(raw) != want {
		t.Errorf("got  %s\nwant %s", raw, want)
	}
}

// One turn in full, so that a change of the outside form is seen.
func TestTurnInFull(t *testing.T) {
	l := measure.Layout{
		{Subject: "t1", Name: "rod_load_max_kn", Throw: 0, End: -1, Scale: 1e-3},
		{Subject: "t1.he", Name: "p_suction_bar_abs", Throw: 0, End: crank.HE, Scale: 1e-5},
		{Subject: "t1.he", Name: "n_comp_late", Throw: 0, End: crank.HE, Scale: 1},
		{Subject: "t1.he.suction", Name: "leak_area_mm2", Throw: 0, End: crank.HE, Scale: 1e6},
		{Subject: "t1.he.suction.opens", Name: "peak_g", Throw: 0, End: crank.HE, Scale: 1 / 9.80665},
		{Subject: "t1.he.s1", Name: "cover_c", Throw: 0, End: crank.HE, Scale: 1, Shift: -273.15},
	}
	sk := machine()
	sk.Throws = sk.Throws[:1]
	var w window.Result
	w.Throws = []window.Throw{{Ends: [2]window.End{{State: window.Following}, {NotPresent: true}}}}
	for k := range w.Throws[0].Ends[0].W {
		w.Throws[0].Ends[0].W[k] = window.Window{Angle: math.NaN(), Thermo: math.NaN(), Expected: math.NaN(), Lo: math.NaN(), Hi: math.NaN(), State: window.Holding, Conf: 0.25, Why: "moved by the model"}
	}
	w.Throws[0].Ends[0].W[window.SuctionOpens] = window.Window{Angle: 31.41592653, Thermo: 31.2, Expected: 30, Lo: 28, Hi: 44, State: window.Following, Conf: 0.9, Shared: true}
	tn := &turn.Turn{Number: 8, Seq0: 100, Seq1: 900, Time: 1.25, RPM: 750, Throws: []turn.Throw{{T0: 50000, RPM: 750, U: 0.2}}}
	v := &measure.Vector{Turn: 8, V: []float64{61234, 1.5e5, math.NaN(), 38e-6, 98.0665, 353.15}, Why: []string{"", "", "the stroke is too short", "", "", ""}}
	raw := fits(t, loadSchema(t, "turn"), wire.NewRecorder(sk, l, 40000).Record(tn, w, v, []duty.Point{{State: duty.Steady, Step: 3}}))
	held := func(e string) string {
		return `{"event":"` + e + `","state":"holding","confidence":0.25,"why":"moved by the model"}`
	}
	want := `{"type":"turn","turn":8,"t_s":1.25,"valid":true,"speed_rpm":750,"samples":[100,900],"throws":[{"throw":"t1","t_s":1.25,"speed_rpm":750,` +
		`"angle_uncertainty_deg":0.2,"duty":"steady","load_step":3,"values":{"rod_load_max_kn":61.234},"ends":[{"end":"he","state":"following",` +
		`"values":{"p_suction_bar_abs":1.5},"absent":{"n_comp_late":"the stroke is too short"},"events":[` + held("discharge.closes") +
		`,{"event":"suction.opens","state":"following","angle_deg":31.4159,"crossing_deg":31.2,"expected_deg":30,"window_deg":[28,44],"confidence":0.9,"shared":true,"values":{"peak_g":10}},` +
		held("suction.closes") + `,` + held("discharge.opens") + `]}],"paths":{"t1.he.s1":{"cover_c":80},"t1.he.suction":{"leak_area_mm2":38}}}]}`
	if string(raw) != want {
		t.Errorf("got  %s\nwant %s", raw, want)
	}
}

// Every number that people read says its unit, or is one that has none.
func TestUnitsInNames(t *testing.T) {
	unit := regexp.MustCompile(`(_bar|_bar_abs|_kw|_kn|_j|_deg|_rpm|_percent|_kg_h|_nm3_h|_kwh_1000nm3|_mm2|_g|_ms|_db|_ln|_c|_k|_s|_bytes|_turns)$`)
	bare := map[string]bool{"ratio_plateau": true, "ratio_line": true, "flow_balance": true, "n_comp_early": true, "n_comp_late": true, "n_exp_early": true, "n_exp_late": true,
		"n_comp_early_se": true, "n_comp_late_se": true, "n_exp_early_se": true, "n_exp_late_se": true, "leak_residual": true, "leak_shape": true,
		"crest": true, "extra_hits": true, "extra_hits_45": true}
	for _, f := range layout() {
		if !unit.MatchString(f.Name) && !bare[f.Name] {
			t.Errorf("%s/%s does not say its unit", f.Subject, f.Name)
		}
	}
	// numbers with a decimal point in our own structures: counts, turns and identifiers need no unit, these do
	pure := map[string]bool{"confidence": true, "weight": true, "spreads": true,
		"value": true, "expected": true, "low": true, "high": true, "per_hour": true, "per_hour_low": true, "per_hour_high": true, "from": true, "to": true} // the unit is in the feature's or amount's name beside them
	var walk func(reflect.Type)
	seen := map[reflect.Type]bool{}
	walk = func(ty reflect.Type) {
		for ty.Kind() == reflect.Pointer || ty.Kind() == reflect.Slice || ty.Kind() == reflect.Map {
			ty = ty.Elem()
		}
		if ty.Kind() != reflect.Struct || seen[ty] {
			return
		}
		seen[ty] = true
		for i := range ty.NumField() {
			f := ty.Field(i)
			in := f.Type
			if in.Kind() == reflect.Pointer {
				in = in.Elem()
			}
			if in.Kind() == reflect.Array {
				in = in.Elem()
			}
			name, _, _ := strings.Cut(f.Tag.Get("json"), ",")
			if in.Kind() == reflect.Float64 && !unit.MatchString(name) && !pure[name] && name != "odds_ln" {
				t.Errorf("%s.%s goes out as %q, without a unit", ty.Name(), f.Name, name)
			}
			walk(f.Type)
		}
	}
	for _, v := range []any{wire.Now{}, wire.Features{}, wire.FindingLine{}, wire.TransitionLine{}} {
		walk(reflect.TypeOf(v))
	}
}
