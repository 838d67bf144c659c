package panel

import (
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/wire"
)

func TestJournal(t *testing.T) {
	entry := func(i int) wire.Entry {
		return wire.FromJournal(&alarm.Transition{ID: uint64(i), At: time.Unix(1e9, 0), Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", To: alarm.Unacked, Severity: alarm.Alert, Sentence: `leaks, "badly"`, By: "=A"})
	}
	src := &still{now: full(), journal: func(f wire.JournalFilter) (wire.JournalPage, error) { // three pages of one
		i := 1
		if f.Page == "broken" {
			return wire.JournalPage{}, errors.New("/var/lib/secret-place")
		}
		if f.Page != "" {
			if _, err := fmt.Sscanf(f.Page, "%d.0", &i); err != nil {
				return wire.JournalPage{}, fmt.Errorf("%w: page", ErrQuery)
			}
		}
		p := wire.JournalPage{Version: 1, Skid: "heron-meadow", Journal: "J", Entries: []wire.Entry{entry(i)}}
		if i < 3 {
			p.Next = fmt.Sprintf("%d.0", i+1)
		}
		return p, nil
	}}
	url := open(t, src) + "api/v1/journal"
	resp, body := ask(t, url+"?subject=t1&severity=alert&order=oldest", nil)
	if resp.StatusCode != 200 || !strings.Contains(body, `"next":"2.0"`) || strings.Count(body, `"id":`) != 1 {
		t.Errorf("%d %s", resp.StatusCode, body)
	}
	if f := src.asked[0]; f.Subject != "t1" || f.Severity != alarm.Alert || !f.Oldest || f.Limit != 100 {
		t.Errorf("asked for %+v", f)
	}
	resp, body = ask(t, url+"?format=csv", nil)
	lines := strings.Split(strings.TrimSpace(body), "\n")
	if resp.StatusCode != 200 || !strings.HasPrefix(resp.Header.Get("Content-Type"), "text/csv") || len(lines) != 4 || lines[0] != strings.Join(wire.JournalColumns, ",") ||
		!strings.HasPrefix(lines[3], "transition,3,2001-09-09T01:46:40Z,") || !strings.Contains(lines[1], `"leaks, ""badly"""`) || !strings.Contains(lines[1], `'=A`) {
		t.Errorf("%d %q", resp.StatusCode, lines)
	}
	resp, body = ask(t, url+"?format=jsonl", nil)
	if resp.StatusCode != 200 || strings.Count(body, "\n") != 3 || !strings.HasPrefix(body, `{"type":"transition","id":1,`) {
		t.Errorf("%d %s", resp.StatusCode, body)
	}
	for query, want := range map[string]int{"?since=1": 400, "?severity=high": 400, "?page=x": 400, "?page=broken": 500} {
		if resp, body := ask(t, url+query, nil); resp.StatusCode != want || strings.Contains(body, "secret-place") {
			t.Errorf("%s: %d %s", query, resp.StatusCode, body)
		}
	}
	if resp, body := ask(t, strings.TrimSuffix(url, "journal")+"alarms", nil); resp.StatusCode != 200 || !strings.Contains(body, `"points":[]`) {
		t.Errorf("alarms: %d %s", resp.StatusCode, body)
	}
}

func TestWhy(t *testing.T) {
	url := open(t, &still{now: full()}) + "api/v1/why"
	for query, want := range map[string]int{"": 200, "?subject=t1.he.suction&turn=4711": 200, "?turn=0": 400, "?turn=x": 400, "?subjekt=t1": 400, "?turn=1&turn=2": 400, "?subject=busy": 503, "?subject=%ff": 400} {
		resp, body := ask(t, url+query, nil)
		if resp.StatusCode != want {
			t.Errorf("%s: %d %s", query, resp.StatusCode, body)
		}
		if want == 200 && (!strings.Contains(body, `"said":[]`) || strings.Contains(body, "null")) {
			t.Errorf("%s: %s", query, body)
		}
	}
}

func TestSchemasAreServed(t *testing.T) {
	url := open(t, &still{now: full()}) + "api/v1/schemas"
	_, body := ask(t, url, nil)
	var names []string
	if err := json.Unmarshal([]byte(body), &names); err != nil || len(names) < 10 {
		t.Fatalf("%v: %s", err, body)
	}
	for _, n := range names {
		if resp, body := ask(t, url+"/"+n, nil); resp.StatusCode != 200 || !strings.Contains(body, "urn:lapwing:schema:"+n+":1") {
			t.Errorf("%s: %d", n, resp.StatusCode)
		}
	}
	for _, n := range []string{"nothing", "..%2fdoc", "alarm.json"} {
		if resp, _ := ask(t, url+"/"+n, nil); resp.StatusCode != 404 {
			t.Errorf("%s: %d", n, resp.StatusCode)
		}
	}
}
