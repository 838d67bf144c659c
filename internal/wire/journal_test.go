package wire_test

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"net/url"
	"reflect"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/alarm"
	"lapwing/internal/wire"
)

func TestEntries(t *testing.T) {
	s, l := loadSchema(t, "entry"), layout()
	rapid.Check(t, func(rt *rapid.T) {
		tr := drawTransition(rt, l)
		tr.By, tr.Note = plain().Draw(rt, "by"), plain().Draw(rt, "note")
		act := alarm.Act{ID: 3, At: tr.At, Verb: "shelve", Key: "t1.he.suction/leaking", By: plain().Draw(rt, "who"), Reason: plain().Draw(rt, "reason"), Via: "api",
			Accepted: rapid.Bool().Draw(rt, "accepted"), Said: "x", Transitions: []uint64{4}}
		es := []wire.Entry{wire.FromJournal(tr), wire.ActEntry(&act)}
		for i := range es {
			fits(t, s, es[i])
		}
		if es[1].Subject != "t1.he.suction" || es[1].Kind != "leaking" {
			rt.Fatalf("the act is about %+v", es[1])
		}
		var b bytes.Buffer
		w := csv.NewWriter(&b)
		if err := wire.WriteCSV(w, es); err != nil {
			rt.Fatal(err)
		}
		w.Flush()
		rows, err := csv.NewReader(&b).ReadAll()
		if err != nil || len(rows) != 2 || len(rows[0]) != len(wire.JournalColumns) {
			rt.Fatalf("%v: %q", err, rows)
		}
		for i := range rows {
			for k := range rows[i] {
				if x := rows[i][k]; x != "" && strings.ContainsRune("=+-@", rune(x[0])) {
					rt.Fatalf("%s would be a formula: %q", wire.JournalColumns[k], x)
				}
			}
		}
		b.Reset()
		if err := wire.WriteLines(&b, es); err != nil || bytes.Count(b.Bytes(), []byte("\n")) != 2 {
			rt.Fatalf("%v: %q", err, b.String())
		}
	})
	// every field of an entry has its column, but for the evidence
	typ := reflect.TypeFor[wire.Entry]()
	var names []string
	for i := range typ.NumField() {
		if n, _, _ := strings.Cut(typ.Field(i).Tag.Get("json"), ","); n != "detail" {
			names = append(names, n)
		}
	}
	if !reflect.DeepEqual(names, wire.JournalColumns) {
		t.Errorf("fields %q, columns %q", names, wire.JournalColumns)
	}
}

func TestJournalPageFits(t *testing.T) {
	s := loadSchema(t, "journal")
	act := alarm.Act{ID: 3, At: time.Unix(1e9, 0), Verb: "reset", By: "A", Via: "api", Said: "x"}
	fits(t, s, wire.JournalPage{Version: 1, Skid: "heron-meadow", Journal: "J", Entries: []wire.Entry{wire.ActEntry(&act)}, Next: "4.2", Unread: "transition 7"})
	fits(t, s, wire.JournalPage{Version: 1, Skid: "heron-meadow", Journal: "J", Entries: []wire.Entry{}})
}

func TestJournalFilter(t *testing.T) {
	at := time.Date(2030, 5, 1, 6, 0, 0, 0, time.UTC)
	yes := true
	tr := wire.Entry{Type: "transition", ID: 4, At: at, Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", Severity: "none", Was: "alert", By: "A"}
	act := wire.Entry{Type: "act", ID: 1, At: at, Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", Verb: "acknowledge", By: "A", Accepted: &yes}
	for query, want := range map[string][2]bool{
		"":                          {true, true},
		"from=2030-05-01T06:00:00Z": {true, true},
		"from=2030-05-01T06:00:01Z": {false, false},
		"to=2030-05-01T06:00:00Z":   {false, false},
		"to=2030-05-01T08:00:01%2B02:00&from=2030-05-01T00:00:00Z": {true, true},
		"subject=t1":                  {true, true},
		"subject=t1.he":               {true, true},
		"subject=t1.he.s":             {false, false},
		"subject=t":                   {false, false},
		"kind=leaking":                {true, true},
		"kind=fluttering":             {false, false},
		"severity=alert":              {true, false},
		"severity=danger":             {false, false},
		"type=act":                    {false, true},
		"type=transition":             {true, false},
		"verb=acknowledge":            {false, true},
		"by=A":                        {true, true},
		"by=B":                        {false, false},
		"key=t1.he.suction/leaking":   {true, true},
		"key=t1.he.suction":           {false, false},
		"order=oldest&limit=7&page=x": {true, true},
	} {
		q, err := url.ParseQuery(query)
		if err != nil {
			t.Fatal(err)
		}
		f, err := wire.ParseJournalFilter(q)
		if err != nil {
			t.Errorf("%s: %v", query, err)
			continue
		}
		if got := [2]bool{f.Keeps(&tr), f.Keeps(&act)}; got != want {
			t.Errorf("%s keeps %v, want %v", query, got, want)
		}
		again, err := wire.ParseJournalFilter(f.Query())
		if a, b := encode(t, again), encode(t, f); err != nil || !again.From.Equal(f.From) || !again.To.Equal(f.To) || again.Subject != f.Subject || len(a) == 0 || len(b) == 0 || again.Limit != f.Limit || again.Oldest != f.Oldest || again.Severity != f.Severity {
			t.Errorf("%s came back as %+v (%v)", query, again, err)
		}
	}
	for _, query := range []string{"since=2030", "from=yesterday", "severity=high", "type=all", "limit=0", "limit=1001", "limit=x", "order=up", "kind=a&kind=b", "format=xml", "detail=1"} {
		q, _ := url.ParseQuery(query)
		if f, err := wire.ParseJournalFilter(q); err == nil {
			t.Errorf("%s was read as %+v", query, f)
		}
	}
}

func FuzzParseJournalFilter(f *testing.F) {
	f.Add("from=2030-05-01T06:00:00Z&subject=t1")
	f.Add("limit=-1&page=%ff&severity=none")
	f.Fuzz(func(t *testing.T, query string) {
		q, err := url.ParseQuery(query)
		if err != nil {
			return
		}
		filter, err := wire.ParseJournalFilter(q)
		if err != nil {
			return
		}
		if filter.Limit < 1 || filter.Limit > wire.MaxPage {
			t.Fatalf("limit %d", filter.Limit)
		}
		if _, err := json.Marshal(filter.Query()); err != nil {
			t.Fatal(err)
		}
		if _, err := wire.ParseJournalFilter(filter.Query()); err != nil && filter.From.Year() < 9999 && filter.To.Year() < 9999 {
			t.Fatalf("%q cannot be read again: %v", query, err)
		}
	})
}

func TestAlarmPoints(t *testing.T) {
	s := loadSchema(t, "alarms")
	rapid.Check(t, func(rt *rapid.T) {
		text := plain()
		p := alarm.Point{Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", State: states().Draw(rt, "state"), Inner: states().Draw(rt, "inner"), Level: alarm.Alert,
			Sentence: text.Draw(rt, "sentence"), Note: text.Draw(rt, "note"), ByDesign: rapid.SampledFrom([]string{"", "machine stopped"}).Draw(rt, "design")}
		if rapid.Bool().Draw(rt, "shelved") {
			p.ShelvedBy, p.ShelvedUntil, p.ShelvedWhy, p.Since = "A", time.Unix(1e9, 0), "part ordered", time.Unix(1e9, 0)
		}
		if rapid.Bool().Draw(rt, "out") {
			p.OutBy, p.OutWhy = "B", "cover off"
		}
		w := wire.FromState(&p)
		fits(t, s, wire.Alarms{Version: 1, Skid: "heron-meadow", Points: []wire.Point{w}, Caution: wire.Caution})
		if (w.Shelf != nil) != (p.ShelvedBy != "") || (w.Out != nil) != (p.OutBy != "") {
			rt.Fatalf("%+v came out as %+v", p, w)
		}
	})
	fits(t, s, wire.Alarms{Version: 1, Points: []wire.Point{}, Caution: wire.Caution})
}
