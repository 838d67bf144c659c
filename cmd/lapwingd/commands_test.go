package main

import (
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/wire"
)

// TestSystemCommands: orders over a mosquitto with the example access list. The desk may give those that the skid file
// allows; whoever may not write to the topic reaches nobody; everything that reached the daemon is in the journal.
func TestSystemCommands(t *testing.T) {
	system(t)
	a := newAuthority(t)
	a.sign(t, "broker", serverCert())
	a.sign(t, "skid", clientCert())
	b := startSecured(t, a, "broker")
	dir := t.TempDir()
	limit := "\n  - {of: t1.he, measure: p_suction_bar_abs, high: 0.5, deadband: 0.1, on_delay_s: 0.5, off_delay_s: 0.5, severity: alert}"
	skid := skidFile(t, dir, "limits", limit, "max_gb", "0.2", "broker", "tls://"+address(b.port), "root", uplinkKeys("commands: [acknowledge, shelve, cut-clip, rebirth]",
		"user_file: "+secretFile(t, dir, "user", "quillmere-c1"), "password_file: "+secretFile(t, dir, "password", password),
		"ca_file: "+a.file("ca.crt"), "cert_file: "+a.file("skid.crt"), "key_file: "+a.file("skid.key")))
	read := start(t, nil, tool(t, "mosquitto_sub"), append(b.as(a, "control-room", "skid"), "-t", "lapwing/#", "-F", format)...)
	d := start(t, nil, built(t, "lapwingd"), "--skid", skid, "--state", filepath.Join(dir, "state"), "--source", "model:swings", "--listen", "127.0.0.1:0")
	page := pageOf(t, d)
	d.until(20*time.Second, "the daemon hears commands", func() bool { return strings.Contains(d.err.String(), "commands are heard") })
	var point string
	d.until(30*time.Second, "an alarm stands", func() bool {
		for _, m := range (&reader{t, read}).got() {
			if strings.HasSuffix(m.topic, "/alarm") && m.alarm(t).To == "unacknowledged" {
				point = m.alarm(t).Key
				return true
			}
		}
		return false
	})
	t.Logf("standing: %s", point)

	receipts := func() (out []wire.Receipt) {
		for _, m := range (&reader{t, read}).got() {
			if !strings.HasSuffix(m.topic, "/receipt") {
				continue
			}
			var r wire.Receipt
			if err := json.Unmarshal([]byte(m.payload), &r); err != nil {
				t.Fatalf("%v: %s", err, m.payload)
			}
			out = append(out, r)
		}
		return out
	}
	say := func(user, text string, more ...string) {
		args := append(b.as(a, user, "skid"), "-t", "lapwing/quillmere-c1/command")
		if more == nil {
			more = []string{"-m", text}
		}
		if _, errs, code := ran(t, tool(t, "mosquitto_pub"), append(args, more...)...); code != 0 && user == "desk" {
			t.Fatalf("mosquitto_pub: exit %d: %s", code, errs)
		}
	}
	named := func(m map[string]any) string {
		raw, err := json.Marshal(m)
		if err != nil {
			t.Fatal(err)
		}
		return string(raw)
	}
	ack := func(request string) string {
		return named(map[string]any{"request": request, "verb": "acknowledge", "key": point, "by": "A. Operator", "reason": "seen"})
	}

	// nobody without the right gets through: mosquitto takes the message from them and throws it away
	say("control-room", ack("no-1"))
	say("stranger", ack("no-2"))
	say("quillmere-c1", ack("no-3"))
	until(t, 10*time.Second, "mosquitto has refused all three", func() bool { return strings.Count(b.p.err.String(), "Denied PUBLISH") == 3 })

	big := filepath.Join(dir, "big")
	if err := os.WriteFile(big, []byte(`{"request":"big","by":"`+strings.Repeat("x", 100_000)+`"}`), 0o600); err != nil {
		t.Fatal(err)
	}
	for i, c := range []struct {
		text, request, said string
		file                string
	}{
		{text: ack("1"), request: "1", said: "acknowledged: seen"},
		{text: ack("1"), request: "1", said: "acknowledged: seen"},
		{text: ack("2"), request: "2", said: "not possible in this state"},
		{text: named(map[string]any{"request": "3", "verb": "shelve", "key": point, "by": "A. Operator", "reason": "known", "for_s": 600}), request: "3", said: "shelved until"},
		{text: named(map[string]any{"request": "4", "verb": "cut-clip", "label": "odd noise", "last_s": 1, "by": "A. Operator"}), request: "4", said: "of raw samples are protected"},
		{text: named(map[string]any{"request": "5", "verb": "rebirth", "by": "A. Operator"}), request: "5", said: "sent again"},
		{text: named(map[string]any{"request": "6", "verb": "unshelve", "key": point, "by": "A. Operator"}), request: "6", said: "does not allow it"},
		{text: named(map[string]any{"request": "7", "verb": "learn-start", "by": "A. Operator"}), request: "7", said: "does not allow it"},
		{text: `{"request":"8","verb":`, request: "", said: "unexpected EOF"},
		{file: big, said: "more than 8192 bytes"},
	} {
		if c.file != "" {
			say("desk", "", "-f", c.file)
		} else {
			say("desk", c.text)
		}
		d.until(20*time.Second, "receipt of "+c.request+c.file, func() bool { return len(receipts()) > i })
		if r := receipts()[i]; r.Request != c.request || !strings.Contains(r.Said, c.said) {
			t.Errorf("%.60s: receipt %+v, want %q", c.text, r, c.said)
		}
	}
	if n := len(receipts()); n != 10 {
		t.Errorf("%d receipts", n)
	}
	var j wire.JournalPage
	askPage(t, page+"api/v1/journal?limit=500", &j)
	via, accepted := 0, 0
	for _, e := range j.Entries {
		if e.Type == "act" && e.Via == "mqtt" {
			if via++; e.Accepted != nil && *e.Accepted {
				accepted++
			}
		}
	}
	if via != 9 || accepted != 4 {
		t.Errorf("the journal has %d commands, %d accepted; 9 and 4 came", via, accepted)
	}
	var now present
	d.until(10*time.Second, "health counts them", func() bool {
		askPage(t, page+"api/v1/now", &now)
		c := now.Health.Uplink.Commands
		return c != nil && c.Hearing && c.Accepted == 4 && c.Refused == 5
	})
	if code := d.terminate(20 * time.Second); code != 0 {
		t.Errorf("exit %d", code)
	}
}
