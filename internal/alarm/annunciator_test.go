package alarm

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"
)

var t0 = time.Date(2030, 5, 1, 6, 0, 0, 0, time.UTC)

func at(s float64) time.Time { return t0.Add(time.Duration(s * float64(time.Second))) }

var nan = math.NaN()

// letter reads a point's state as one character; P is a condition that has not yet held for its on-delay, p one that
// has not yet been gone for its off-delay.
func letter(a *Annunciator, key string) byte {
	p := a.points[key]
	switch {
	case p == nil || p.State == Unknown && !p.Rising:
		return '?'
	case p.State == Shelved:
		return 'G'
	case p.State == Suppressed:
		return 'H'
	case p.State == OutOfService:
		return 'I'
	case p.Rising && !p.Inner.Active():
		return 'P'
	}
	return map[State]byte{Normal: 'N', Unacked: 'A', Acked: 'C', ReturnedUnacked: 'D', LatchedUnacked: 'E', LatchedAcked: 'F'}[p.State]
}

// One value a second against a high limit of 3 with a deadband of 1 and an on-delay of two seconds. The form of the
// table follows the known scenario tests of alerting rules: a series and the state expected at each step.
func TestSeriesGivesStates(t *testing.T) {
	for name, c := range map[string]struct {
		values []float64
		want   string
		timing Timing
	}{
		"holds before raising":                       {[]float64{0, 4, 4, 4, 4}, "NPPAA", Timing{OnDelay: 2 * time.Second}},
		"spike does not raise":                       {[]float64{0, 9, 0, 9, 0}, "NPNPN", Timing{OnDelay: 2 * time.Second}},
		"deadband holds":                             {[]float64{4, 4, 4, 2.5, 1}, "PPAAD", Timing{OnDelay: 2 * time.Second}},
		"deadband is not for the pending":            {[]float64{4, 2.5, 4, 4, 4}, "PNPPA", Timing{OnDelay: 2 * time.Second}},
		"gap is not a clear":                         {[]float64{4, 4, 4, nan, 4}, "PPAAA", Timing{OnDelay: 2 * time.Second}},
		"gap counts for no delay":                    {[]float64{4, nan, nan, nan, 4, 4, 4}, "PPPPPPA", Timing{OnDelay: 2 * time.Second}},
		"never judged is not normal":                 {[]float64{nan, nan, 0, nan}, "??NN", Timing{}},
		"no delay raises at once":                    {[]float64{0, 4, 0}, "NAD", Timing{}},
		"off-delay bridges a dip":                    {[]float64{4, 0, 4, 0, 0, 0, 0}, "AAAAAAD", Timing{OffDelay: 3 * time.Second}},
		"a gap during the off-delay counts for none": {[]float64{4, 0, nan, nan, nan, 0, 0, 0}, "AAAAAAAD", Timing{OffDelay: 2 * time.Second}},
		"latched stays":                              {[]float64{4, 0, 0, 4, 0}, "AEEAE", Timing{Latch: true}},
	} {
		t.Run(name, func(t *testing.T) {
			l := Limit{Subject: "t1", Measure: "rod_load_max_kn", High: 3, Low: nan, Deadband: 1, Severity: Alert}
			a := New(Config{Default: c.timing})
			var got []byte
			for i, v := range c.values {
				a.Step(at(float64(i)), Ladder{l}.Conditions(nil, v, a.Level, "", int64(i), 0, 1))
				got = append(got, letter(a, l.HighKey()))
			}
			if string(got) != c.want {
				t.Errorf("states %s, want %s", got, c.want)
			}
		})
	}
}

// The transition diagram of ANSI/ISA-18.2-2016 (states A normal, B unacknowledged, C acknowledged, D returned
// unacknowledged, E and F latched, G shelved, H suppressed by design, I out of service; reference/handbook.md 9), act by
// act.
// N: condition gone, 1-3: condition with that severity, ?: cannot be judged, S: suppressed by design, a: acknowledge,
// r: reset, h: shelve for an hour, u: unshelve, o: out of service, i: back in service, x: an act that must be refused follows.
func TestTransitionDiagram(t *testing.T) {
	for name, c := range map[string]struct {
		acts  string
		latch bool
		want  string
	}{
		"ack, then gone":                        {"N2aN", false, "NACN"},
		"gone, then ack":                        {"N2Na", false, "NADN"},
		"back before ack":                       {"N2N2", false, "NADA"},
		"worse must be seen anew":               {"N1a2a3", false, "NACACA"},
		"better needs no new ack":               {"N3a1N", false, "NACCN"},
		"latched, ack, reset":                   {"N2Nar", true, "NAEFN"},
		"latched, acknowledged before":          {"N2aNr", true, "NACFN"},
		"latched comes back":                    {"N2aN2", true, "NACFA"},
		"reset needs an acknowledgement":        {"N2Nxrar", true, "NAEEFN"},
		"ack only what is unacknowledged":       {"Nxa2axa", false, "NNACC"},
		"shelved hides":                         {"N2hNN", false, "NAGGG"},
		"unshelve shows the standing anew":      {"N2ahu", false, "NACGA"},
		"what came and went behind a shelf":     {"Nh2Nu", false, "NGGGN"},
		"what returned behind a shelf was seen": {"N2hNu", false, "NAGGD"},
		"shelved twice is refused":              {"N2hxh", false, "NAGG"},
		"stop freezes the unacknowledged":       {"N2SN2", false, "NAHDA"},
		"stop freezes the acknowledged":         {"N2aS?2", false, "NACHCC"},
		"a stop is not a return":                {"N2SSS2", false, "NAHHHA"},
		"shelved and stopped":                   {"N2hSu2", false, "NAGGHA"},
		"unknown from the start":                {"??2", false, "??A"},
		"stopped from the start":                {"SN", false, "HN"},
		"out of service hides":                  {"N2oNi", false, "NAIID"},
		"back in service shows anew":            {"N2aoi", false, "NACIA"},
		"what came and went out of service":     {"No2Ni", false, "NIIIN"},
		"nothing to acknowledge out of service": {"N2oxaxrxhxui", false, "NAIIIIIA"},
		"out of service twice is refused":       {"N2oxo", false, "NAII"},
		"back only what is out":                 {"N2xi", false, "NAA"},
		"a shelf goes on behind":                {"N2hoi", false, "NAGIG"},
		"out of service and stopped":            {"N2oSi2", false, "NAIIHA"},
	} {
		t.Run(name, func(t *testing.T) {
			a := New(Config{Default: Timing{Latch: c.latch}})
			var got []byte
			var ids uint64
			take := func(trs ...Transition) {
				for _, tr := range trs {
					ids++
					if tr.ID != ids {
						t.Fatalf("id %d, want %d", tr.ID, ids)
					}
					if tr.From == tr.To && tr.Severity == tr.Was {
						t.Fatalf("transition that changes nothing: %+v", tr)
					}
				}
			}
			refuse := false
			for i, r := range c.acts {
				now := at(float64(i))
				var tr Transition
				var err error
				act := true
				switch r {
				case 'x':
					refuse = true
					continue
				case 'a':
					tr, err = a.Acknowledge("k", "op", "", now)
				case 'r':
					tr, err = a.Reset("k", "op", "", now)
				case 'h':
					tr, err = a.Shelve("k", "op", "valve ordered", now.Add(time.Hour), now)
				case 'u':
					tr, err = a.Unshelve("k", "op", "", now)
				case 'o':
					tr, err = a.TakeOut("k", "op", "cover off", now)
				case 'i':
					tr, err = a.Return("k", "op", "", now)
				default:
					act = false
					cond := Condition{Key: "k", Subject: "t1.he.suction", Kind: "leaking", Known: r != '?'}
					switch r {
					case '1', '2', '3':
						cond.Severity = Severity(r - '0')
					case 'S':
						cond.Known, cond.ByDesign = false, "machine stopped"
					}
					take(a.Step(now, []Condition{cond})...)
				}
				if act {
					if (err != nil) != refuse {
						t.Fatalf("act %d (%c): error %v, refused wanted: %v", i, r, err, refuse)
					}
					if err == nil {
						take(tr)
					}
					if refuse {
						refuse = false
					}
				}
				got = append(got, letter(a, "k"))
			}
			if string(got) != c.want {
				t.Errorf("states %s, want %s", got, c.want)
			}
		})
	}
}

func TestSeverityChangesAreTransitions(t *testing.T) {
	a := New(Config{Default: Timing{OnDelay: 2 * time.Second, OffDelay: 2 * time.Second}})
	var got []string
	// The level that held throughout the delay counts, not the last one.
	for i, s := range []Severity{1, 1, 1, 3, 2, 2, 2, 1, 0, 1, 1} {
		for _, tr := range a.Step(at(float64(i)), []Condition{{Key: "k", Known: true, Severity: s}}) {
			got = append(got, fmt.Sprintf("%d:%s>%s %s>%s", i, tr.From, tr.To, tr.Was, tr.Severity))
		}
	}
	want := "2:normal>unacknowledged none>advisory 5:unacknowledged>unacknowledged advisory>alert " +
		"9:unacknowledged>unacknowledged alert>advisory"
	if strings.Join(got, " ") != want {
		t.Errorf("got  %s\nwant %s", strings.Join(got, " "), want)
	}
}

func TestShelfExpires(t *testing.T) {
	a := New(Config{})
	a.Step(at(0), []Condition{{Key: "k", Known: true, Severity: Alert}})
	if _, err := a.Shelve("k", "op", "valve ordered", at(10), at(1)); err != nil {
		t.Fatal(err)
	}
	if trs := a.Step(at(9), nil); len(trs) != 0 {
		t.Fatalf("before its time: %+v", trs)
	}
	trs := a.Step(at(10), nil)
	if len(trs) != 1 || trs[0].From != Shelved || trs[0].To != Unacked || trs[0].Note != "shelving expired" {
		t.Fatalf("at its time: %+v", trs)
	}
	for name, c := range map[string]struct{ got, want error }{
		"no end in the future": {second(a.Shelve("k", "op", "r", at(11), at(11))), ErrUntil},
		"no name":              {second(a.Shelve("k", "", "r", at(20), at(11))), ErrBy},
		"no point":             {second(a.Shelve("other", "op", "r", at(20), at(11))), ErrNoPoint},
		"no reason":            {second(a.Shelve("k", "op", "", at(20), at(11))), ErrReason},
		"too long":             {second(a.Shelve("k", "op", "r", at(12+86400), at(11))), ErrTooLong},
		"out without a reason": {second(a.TakeOut("k", "op", "", at(11))), ErrReason},
		"out without a name":   {second(a.TakeOut("k", "", "r", at(11))), ErrBy},
		"not out":              {second(a.Return("k", "op", "", at(11))), ErrState},
	} {
		if !errors.Is(c.got, c.want) {
			t.Errorf("%s: %v", name, c.got)
		}
	}
	tr, err := a.Shelve("k", "op", "valve ordered", at(20), at(11))
	if err != nil || tr.Note != "shelved until "+at(20).Format(time.RFC3339)+": valve ordered" || tr.By != "op" {
		t.Errorf("%+v, %v", tr, err)
	}
}

func second(_ Transition, err error) error { return err }

// Three activations within a minute are chatter (ISA-18.2 / EEMUA 191 figure, reference/handbook.md 9).
func TestChatterIsHeld(t *testing.T) {
	a := New(Config{})
	var log []string
	for i := range 200 {
		var s Severity
		if i < 60 && i%2 == 1 {
			s = Alert
		}
		for _, tr := range a.Step(at(float64(i)), []Condition{{Key: "k", Known: true, Severity: s}}) {
			log = append(log, fmt.Sprintf("%d>%s %s", i, tr.To, tr.Note))
		}
	}
	want := []string{"1>unacknowledged ", "2>returned-unacknowledged ", "3>unacknowledged ", "4>returned-unacknowledged ",
		"5>unacknowledged chattering: 3 activations within 1m0s; held until it has been quiet for 1m0s",
		"120>returned-unacknowledged no longer chattering"}
	if strings.Join(log, "\n") != strings.Join(want, "\n") {
		t.Errorf("journal:\n%s\nwant:\n%s", strings.Join(log, "\n"), strings.Join(want, "\n"))
	}
}

// A flood begins above ten in ten minutes and ends below five (reference/handbook.md 9); first-up order is kept.
func TestFloodAndFirstUp(t *testing.T) {
	a := New(Config{})
	raise := func(i int) []Transition {
		return a.Step(at(float64(i)), []Condition{{Key: fmt.Sprintf("k%02d", 20-i), Known: true, Severity: Alert}})
	}
	for i := range 10 {
		if trs := raise(i); trs[0].Flood || trs[0].Order != i+1 {
			t.Fatalf("alarm %d: %+v", i, trs[0])
		}
	}
	if trs := raise(10); !trs[0].Flood || !a.Flood() {
		t.Fatalf("eleventh in ten minutes is no flood: %+v", trs[0])
	}
	if o := a.Open(); len(o) != 11 || o[0].Key != "k20" || o[10].Key != "k10" {
		t.Fatalf("first up is %s of %d", o[0].Key, len(o))
	}
	a.Step(at(605.5), nil) // six have aged out, five are left
	if !a.Flood() {
		t.Error("five in ten minutes ended the flood")
	}
	a.Step(at(606.5), nil)
	if a.Flood() {
		t.Error("four in ten minutes did not end the flood")
	}
	// Order begins anew once nothing stands.
	for i := range 11 {
		k := fmt.Sprintf("k%02d", 20-i)
		a.Step(at(700), []Condition{{Key: k, Known: true}})
		if _, err := a.Acknowledge(k, "op", "", at(701)); err != nil {
			t.Fatal(err)
		}
	}
	if trs := a.Step(at(800), []Condition{{Key: "k05", Known: true, Severity: Alert}}); trs[0].Order != 1 {
		t.Errorf("first up after all cleared has order %d", trs[0].Order)
	}
}

func TestTextOfStatesAndSeverities(t *testing.T) {
	for s := Unknown; s <= OutOfService; s++ {
		b, err := json.Marshal(s)
		var back State
		if err != nil || json.Unmarshal(b, &back) != nil || back != s {
			t.Errorf("%v → %s → %v (%v)", s, b, back, err)
		}
	}
	for s := NoSeverity; s <= Danger; s++ {
		b, err := json.Marshal(s)
		var back Severity
		if err != nil || json.Unmarshal(b, &back) != nil || back != s {
			t.Errorf("%v → %s → %v (%v)", s, b, back, err)
		}
	}
	if err := json.Unmarshal([]byte(`"red"`), new(State)); err == nil {
		t.Error("an unknown state was read")
	}
	if err := json.Unmarshal([]byte(`"urgent"`), new(Severity)); err == nil {
		t.Error("an unknown severity was read")
	}
	if _, err := json.Marshal(State(99)); err == nil {
		t.Error("an unknown state was written")
	}
}

func TestDetailTravels(t *testing.T) {
	a := New(Config{})
	l := Limit{Subject: "t1", Measure: "rod_load_max_kn", What: "largest combined rod load", Unit: "kN", High: 120, Low: -100, Severity: Danger}
	trs := a.Step(at(0), Ladder{l}.Conditions(nil, 131.25, a.Level, "", 7, 100, 200))
	b, err := json.Marshal(trs)
	if err != nil || len(trs) != 1 {
		t.Fatal(len(trs), err)
	}
	for _, want := range []string{`"detail":{"value":131.25,"limit":120,"deadband":0}`, `"t1: largest combined rod load: 131.2 kN, at or above its limit of 120 kN"`,
		`"to":"unacknowledged"`, `"severity":"danger"`, `"seq0":100`} {
		if !strings.Contains(string(b), want) {
			t.Errorf("%s lacks %s", b, want)
		}
	}
	// A detail that JSON cannot hold costs the detail, never the alarm.
	if trs := a.Step(at(1), []Condition{{Key: "k", Known: true, Severity: Alert, Detail: nan}}); len(trs) != 1 {
		t.Error("alarm lost with its detail")
	}
}
