package main

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
	"lapwing/internal/panel"
	"lapwing/internal/wire"
)

// handTool runs a command of the hand tool in this process.
func handTool(t *testing.T, args ...string) (string, error) {
	t.Helper()
	var out strings.Builder
	cmd := root()
	cmd.SetArgs(args)
	cmd.SetOut(&out)
	cmd.SetErr(io.Discard)
	err := cmd.ExecuteContext(t.Context())
	return out.String(), err
}

// Every order command sends the order that it says, by the way a tool goes, and reports what became of it.
func TestOrderCommands(t *testing.T) {
	var got []wire.Order
	receipt := wire.Receipt{Version: 1, Act: wire.Act{Type: "act", ID: 3, Accepted: true, Said: "done so"}, OnDisk: true}
	srv := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		raw, err := io.ReadAll(r.Body)
		o, perr := wire.ParseOrder(raw)
		if err != nil || perr != nil || r.Method != http.MethodPost || r.URL.Path != "/api/v1/orders" || r.Header.Get(panel.OrderHeader) != "tool" || r.Header.Get("Content-Type") != "application/json" {
			t.Errorf("%s %s %v: %v %v", r.Method, r.URL, r.Header, err, perr)
		}
		got = append(got, o)
		if !receipt.Accepted {
			w.WriteHeader(http.StatusConflict)
		}
		_ = json.NewEncoder(w).Encode(receipt)
	}))
	defer srv.Close()
	const k = "t1.he.suction/leaking"
	for _, c := range []struct {
		args []string
		want wire.Order
	}{
		{[]string{"ack", k, "--by", "A", "--note", "seen"}, wire.Order{Verb: "acknowledge", Key: k, By: "A", Reason: "seen"}},
		{[]string{"reset", k, "--by", "A"}, wire.Order{Verb: "reset", Key: k, By: "A"}},
		{[]string{"shelve", k, "--by", "A", "--for", "8h", "--reason", "part ordered"}, wire.Order{Verb: "shelve", Key: k, By: "A", Reason: "part ordered", ForS: 28800}},
		{[]string{"unshelve", k, "--by", "A"}, wire.Order{Verb: "unshelve", Key: k, By: "A"}},
		{[]string{"out", k, "--by", "A", "--reason", "gauge off"}, wire.Order{Verb: "out-of-service", Key: k, By: "A", Reason: "gauge off"}},
		{[]string{"back", k, "--by", "A"}, wire.Order{Verb: "return-to-service", Key: k, By: "A"}},
		{[]string{"cut", "odd noise", "--by", "A", "--last", "30s"}, wire.Order{Verb: "cut-clip", Label: "odd noise", By: "A", LastS: 30}},
		{[]string{"cut", "x", "--by", "A", "--from", "2030-05-01T06:00:00Z", "--to", "2030-05-01T06:00:20Z"},
			wire.Order{Verb: "cut-clip", Label: "x", By: "A", From: time.Date(2030, 5, 1, 6, 0, 0, 0, time.UTC), To: time.Date(2030, 5, 1, 6, 0, 20, 0, time.UTC)}},
	} {
		got = nil
		out, err := handTool(t, append(c.args, "--daemon", srv.URL)...)
		if err != nil || out != "done so\n" || len(got) != 1 || got[0] != c.want {
			t.Errorf("%v: %q, %v, sent %+v, want %+v", c.args, out, err, got, c.want)
		}
	}
	receipt.OnDisk = false
	if out, err := handTool(t, "ack", k, "--by", "A", "--daemon", srv.URL); err != nil || !strings.Contains(out, "not taken it yet") {
		t.Errorf("%q, %v", out, err)
	}
	receipt.Accepted, receipt.Said = false, "it is normal"
	if _, err := handTool(t, "ack", k, "--by", "A", "--daemon", srv.URL); err == nil || err.Error() != "refused: it is normal" {
		t.Errorf("%v", err)
	}
	got = nil
	for _, wrong := range [][]string{{"ack", k}, {"ack", "--by", "A"}, {"shelve", k, "--by", "A", "--for", "8h"}, {"shelve", k, "--by", "A", "--reason", "r"}, {"out", k, "--by", "A"},
		{"cut", "x", "--by", "A"}, {"cut", "x", "--by", "A", "--from", "yesterday", "--to", "now"}, {"ack", k, "--by", "two\nlines"}} {
		if out, err := handTool(t, append(wrong, "--daemon", srv.URL)...); err == nil {
			t.Errorf("%v: %q", wrong, out)
		}
	}
	if len(got) != 0 {
		t.Errorf("sent all the same: %+v", got)
	}
	if _, err := handTool(t, "ack", k, "--by", "A", "--daemon", "http://127.0.0.1:1"); err == nil || !strings.Contains(err.Error(), "does not answer") {
		t.Errorf("%v", err)
	}
}

// written is the state folder of a daemon that is down: 60 transitions, an act among them, and two points.
func written(t *testing.T) string {
	t.Helper()
	dir := t.TempDir()
	l, err := ledger.Open(filepath.Join(dir, "state.db"), ledger.Options{})
	if err != nil {
		t.Fatal(err)
	}
	at := time.Date(2030, 5, 1, 6, 0, 0, 0, time.UTC)
	err = l.Commit(func(tx *ledger.Tx) error {
		for id := uint64(1); id <= 60; id++ {
			subject := []string{"t1.he.suction", "t2.ce.discharge"}[id%2]
			if err := tx.Journal(alarm.Transition{ID: id, Key: subject + "/leaking", Subject: subject, Kind: "leaking", From: alarm.Normal, To: alarm.Unacked, Severity: alarm.Alert,
				At: at.Add(time.Duration(id) * time.Minute), Sentence: fmt.Sprintf("%s leaking, number %d", subject, id)}); err != nil {
				return err
			}
		}
		if err := tx.Act(alarm.Act{ID: 1, After: 30, At: at.Add(30 * time.Minute), Verb: "shelve", Key: "t1.he.suction/leaking", By: "A. Operator", Reason: "part ordered", Via: "tool", Said: "it is normal"}); err != nil {
			return err
		}
		return tx.AlarmSnapshot(alarm.Snapshot{Version: 1, NextID: 61, Points: []alarm.Point{
			{Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", State: alarm.Shelved, Inner: alarm.Unacked, Level: alarm.Alert, ShelvedBy: "A. Operator", ShelvedWhy: "part ordered", ShelvedUntil: at, Since: at},
			{Key: "t2.ce.discharge/leaking", Subject: "t2.ce.discharge", Kind: "leaking", State: alarm.Unacked, Severity: alarm.Danger, Sentence: "leaks badly", Since: at},
			{Key: "t2/rod_load_max_kn/high", Subject: "t2", Kind: "rod_load_max_kn-high", State: alarm.Normal}}})
	})
	if err != nil {
		t.Fatal(err)
	}
	if err := l.Close(); err != nil {
		t.Fatal(err)
	}
	return dir
}

func TestJournalCommand(t *testing.T) {
	dir := written(t)
	out, err := handTool(t, "journal", "--state", dir)
	lines := strings.Split(strings.TrimSpace(out), "\n")
	if err != nil || len(lines) != 80 || !strings.HasPrefix(lines[0], "2030-05-01 07:00:00Z  60  t1.he.suction/leaking  normal → unacknowledged, alert") {
		t.Fatalf("%d lines, %v\n%s", len(lines), err, lines[0])
	}
	out, err = handTool(t, "journal", "--state", dir, "--type", "act")
	if err != nil || !strings.Contains(out, "a1  shelve t1.he.suction/leaking: REFUSED, by A. Operator (tool)\n    it is normal\n") {
		t.Errorf("%q, %v", out, err)
	}
	for args, want := range map[string]int{"--subject t1": 31, "--severity danger": 0, "--by A. Operator": 1, "--from 2030-05-01T06:30:00Z --to 2030-05-01T06:32:00Z": 3} {
		file := filepath.Join(t.TempDir(), "j.csv")
		var split []string
		for _, a := range strings.SplitAfter(args, "Z ") {
			name, val, _ := strings.Cut(strings.TrimSpace(a), " ")
			split = append(split, name, val)
		}
		if _, err := handTool(t, append([]string{"journal", "--state", dir, "--format", "csv", "--out", file}, split...)...); err != nil {
			t.Fatalf("%q: %v", split, err)
		}
		raw, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		rows, err := csv.NewReader(strings.NewReader(string(raw))).ReadAll()
		if err != nil || len(rows) != want+1 {
			t.Errorf("%s: %d rows, want %d (%v)", args, len(rows), want+1, err)
		}
		if _, err := handTool(t, "journal", "--state", dir, "--format", "csv", "--out", file); err == nil {
			t.Error("a file that was there has been written over")
		}
	}
	out, err = handTool(t, "journal", "--state", dir, "--format", "jsonl")
	if err != nil || strings.Count(out, "\n") != 61 {
		t.Errorf("%d lines, %v", strings.Count(out, "\n"), err)
	}
	var first wire.Entry
	if err := json.Unmarshal([]byte(strings.Split(out, "\n")[30]), &first); err != nil || first.Type != "act" {
		t.Errorf("the act does not stand behind transition 30: %+v, %v", first, err)
	}
	for _, wrong := range [][]string{{"--format", "xml"}, {"--severity", "high"}, {"--from", "x"}, {"--last", "1h", "--from", "2030-05-01T06:00:00Z"}} {
		if _, err := handTool(t, append([]string{"journal", "--state", dir}, wrong...)...); err == nil {
			t.Errorf("%v: taken", wrong)
		}
	}
	if _, err := handTool(t, "journal", "--state", t.TempDir()); err == nil || !strings.Contains(err.Error(), "no state folder") {
		t.Errorf("%v", err)
	}
}

func TestAlarmsCommand(t *testing.T) {
	dir := written(t)
	out, err := handTool(t, "alarms", "--state", dir)
	for _, want := range []string{"t1.he.suction/leaking", "shelved", "until 2030-05-01 06:00Z by A. Operator: part ordered (behind it: unacknowledged, alert)", "danger", "leaks badly"} {
		if !strings.Contains(out, want) {
			t.Errorf("lacks %q:\n%s (%v)", want, out, err)
		}
	}
	if strings.Contains(out, "rod_load") {
		t.Errorf("a normal point is listed:\n%s", out)
	}
	if out, err = handTool(t, "alarms", "--state", dir, "--all"); err != nil || !strings.Contains(out, "t2/rod_load_max_kn/high") {
		t.Errorf("%v\n%s", err, out)
	}
	if out, err = handTool(t, "alarms", "--state", dir, "--json"); err != nil || !json.Valid([]byte(out)) {
		t.Errorf("%v\n%s", err, out)
	}
}

func TestWhyCommand(t *testing.T) {
	x := func(v float64) *float64 { return &v }
	answer := wire.Why{Version: 1, Subject: "t1.he.suction", Said: []string{"t1.he.suction leaking is alert by turns 4 to 19"}, Blocks: []wire.WhyBlock{{Type: "why", Throw: "t1", Turns: [2]int64{4, 19}, Cases: []wire.WhyCase{
		{Subject: "t1.he.suction", Kind: "leaking", Grade: "alert", Judged: true, Classes: []wire.WhyClass{{Class: "pressure", Weight: x(5), Median: x(4.5)}},
			Evidence: []wire.WhyEvidence{{Class: "pressure", Measure: "t1.he/discharge_opens_deg", Value: x(61.5), Expected: x(58), Spreads: x(6.25), Weight: x(3)}}, Missing: []string{"for danger more"}}}}},
		Turns: []wire.WhyTurn{{Turn: 19, Throw: "t1", Why: "the duty is changing"}}}
	var asked string
	srv := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		asked = r.URL.RequestURI()
		_ = json.NewEncoder(w).Encode(answer)
	}))
	defer srv.Close()
	out, err := handTool(t, "why", "t1.he.suction", "--turn", "19", "--daemon", srv.URL)
	if err != nil || asked != "/api/v1/why?subject=t1.he.suction&turn=19" {
		t.Errorf("%v, asked %s", err, asked)
	}
	for _, want := range []string{"leaking is alert by turns 4 to 19", "t1.he/discharge_opens_deg", "61.5 for 58", "+6.2 spreads", "weighs 3.0", "for danger more"} {
		if !strings.Contains(out, want) {
			t.Errorf("lacks %q:\n%s", want, out)
		}
	}
	if strings.Contains(out, "not compared") {
		t.Errorf("turns without --full:\n%s", out)
	}
	if out, err = handTool(t, "why", "--full", "--daemon", srv.URL); err != nil || asked != "/api/v1/why?" || !strings.Contains(out, "not compared: the duty is changing") {
		t.Errorf("%v, asked %s\n%s", err, asked, out)
	}
}
