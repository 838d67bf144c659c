package main

import (
	"bytes"
	"encoding/json"
	"net/http"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"lapwing/internal/ledger"
	"lapwing/internal/tape"
	"lapwing/internal/wire"
)

// now asks a daemon's page for its snapshot.
func now(t *testing.T, page string) (n wire.Now, ok bool) {
	t.Helper()
	c := http.Client{Timeout: 10 * time.Second}
	resp, err := c.Get(page + "api/v1/now")
	if err != nil {
		return n, false
	}
	defer resp.Body.Close()
	return n, json.NewDecoder(resp.Body).Decode(&n) == nil
}

// TestSystemControlRoom: a leak grows while the broker is killed and comes back; a stranger's MQTT client, a second one
// that comes late, lapwing listen and an analyst with lapwing pull each get what is theirs.
func TestSystemControlRoom(t *testing.T) {
	system(t)
	dir := t.TempDir()
	skid := skidFile(t, dir, "features_every_s", "5", "health_every_s", "1", "pre_s", "6", "post_s", "4")
	state := filepath.Join(dir, "state")
	b := startBroker(t)
	sub := b.subscribe("control-room", "lapwing/#")
	listen := start(t, nil, built(t, "lapwing"), "listen", "--broker", b.url())
	d := start(t, nil, built(t, "lapwingd"), "--skid", skid, "--state", state, "--broker", b.url(), "--listen", "127.0.0.1:0",
		"--source", "model:grow", "--fast", "--learn", "440")
	page := pageOf(t, d)

	d.until(90*time.Second, "the baseline is learnt, and health says so", func() bool {
		m, ok := sub.newest("quillmere-c1/health")
		return ok && m.health(t).Baseline && m.health(t).State == "running"
	})
	for _, throw := range []string{"t1", "t2"} {
		m, ok := sub.newest("features/" + throw)
		if !ok || m.retain || m.qos != 1 || !json.Valid([]byte(m.payload)) || !strings.Contains(m.payload, "flow_balance") {
			t.Errorf("features of %s: %v %+v", throw, ok, m)
		}
	}
	if as, _ := sub.transitions(); len(as) != 0 {
		t.Fatalf("%d alarms while the machine was healthy: %+v", len(as), as)
	}

	// The leak begins at 142 s of machine time. From just before until the alarm stands in the journal nobody listens.
	d.until(60*time.Second, "the leak is about to begin", func() bool {
		n, ok := now(t, page)
		return ok && n.Latest != nil && n.Latest.TimeS >= 140
	})
	b.kill()
	d.until(60*time.Second, "an alarm is in the journal", func() bool {
		n, ok := now(t, page)
		return ok && len(n.Journal) > 0
	})
	if as, _ := sub.transitions(); len(as) != 0 {
		t.Fatalf("an alarm came through a broker that is dead: %+v", as)
	}
	b.start()
	until(t, 60*time.Second, "the alarm arrives after all", func() bool {
		as, _ := sub.transitions()
		return slices.ContainsFunc(as, namesTheLeak)
	})
	if code := d.end(60 * time.Second); code != 0 {
		t.Fatalf("at the end of its source the daemon exits with %d", code)
	}

	// A late client sees what stands, and that nobody watches now.
	late := b.retained("lapwing/#")
	standing := find(late, "lapwing/quillmere-c1/standing/t1.he.suction/leaking")
	if standing == nil || !namesTheLeak(standing.alarm(t)) || !standing.retain || standing.qos != 1 {
		t.Errorf("standing alarm for a late client: %+v", standing)
	}
	if h := find(late, "lapwing/quillmere-c1/health"); h == nil || h.health(t).State != "offline" {
		t.Errorf("health for a late client: %+v", h)
	}
	for _, m := range late {
		if strings.HasSuffix(m.topic, "/alarm") || strings.Contains(m.topic, "/features/") {
			t.Errorf("%s is retained: a late client would take it for news", m.topic)
		}
	}
	until(t, 20*time.Second, "lapwing listen shows the alarm", func() bool {
		s := listen.out.String()
		return strings.Contains(s, "t1.he.suction/leaking") && regexp.MustCompile(`(?m)^ +pressure +\S`).MatchString(s) && regexp.MustCompile(`(?m)^ +vibration +\S`).MatchString(s) &&
			strings.Contains(s, wire.Caution)
	})
	if code := listen.terminate(10 * time.Second); code != 0 {
		t.Errorf("lapwing listen exits with %d on SIGTERM", code)
	}

	d = start(t, nil, built(t, "lapwingd"), "--skid", skid, "--state", state, "--broker", b.url(), "--listen", "127.0.0.1:0", "--source", "model:swings")
	page = pageOf(t, d)
	line, fetched := pullFrom(t, dir, "--daemon", page)
	d.until(30*time.Second, "the second daemon says that it runs", func() bool {
		m, ok := sub.newest("/health")
		return ok && m.health(t).State == "running"
	})
	if code := d.terminate(20 * time.Second); code != 0 {
		t.Errorf("the daemon exits with %d on SIGTERM", code)
	}
	until(t, 10*time.Second, "health says offline", func() bool {
		m, ok := sub.newest("/health")
		return ok && m.health(t).State == "offline"
	})
	// The will is for accidents: a clean stop takes its leave of the broker.
	if !strings.Contains(b.p.err.String(), "Client lapwing-quillmere-c1 disconnected.") {
		t.Error("the broker did not see the daemon take its leave")
	}
	if out, errs, code := ran(t, built(t, "lapwing"), "pull", "--daemon", page); code != 1 || !strings.Contains(errs, "does not answer") || !strings.Contains(errs, "--state") {
		t.Errorf("pull from a daemon that is down: exit %d\n%s%s", code, out, errs)
	}
	again, offline := pullFrom(t, dir, "--state", state)
	if line != again {
		t.Errorf("the daemon of a later run lists\n%s\nits folder\n%s", line, again)
	}
	for name, body := range fetched {
		if !bytes.Equal(body, offline[name]) {
			t.Errorf("%s: %d bytes from the daemon, %d from its folder, not the same", name, len(body), len(offline[name]))
		}
	}

	as, repeats := sub.transitions()
	t.Logf("%d transitions, %d repeats", len(as), repeats)
	sameAsJournal(t, state, as)
	tp, err := tape.OpenRead(filepath.Join(state, "tape.db"))
	if err != nil {
		t.Fatal(err)
	}
	if st := tp.Stats(); len(st.Damage) > 0 || st.Clips == 0 {
		t.Errorf("the tape after a clean stop: %+v", st)
	}
	if err := tp.Close(); err != nil {
		t.Error(err)
	}
}

// namesTheLeak: the alarm says which valve group, on pressure and vibration.
func namesTheLeak(a said) bool {
	if a.Subject != "t1.he.suction" || a.Kind != "leaking" || a.Detail == nil || !strings.Contains(a.Sentence, "t1.he.suction leaking (suction valves, head end of t1)") {
		return false
	}
	has := func(class string) bool {
		return slices.ContainsFunc(a.Detail.Evidence, func(r wire.Reason) bool { return r.Class == class && r.Text != "" })
	}
	return has("pressure") && has("vibration") && (a.Severity == "alert" || a.Severity == "danger")
}

func find(ms []message, topic string) *message {
	for i := range ms {
		if ms[i].topic == topic {
			return &ms[i]
		}
	}
	return nil
}

// pullFrom lists the clips, fetches the one of the leak, asks for one that does not exist, and gives the line of the
// list and the files.
func pullFrom(t *testing.T, dir, where, what string) (line string, files map[string][]byte) {
	t.Helper()
	out, errs, code := ran(t, built(t, "lapwing"), "pull", where, what)
	if code != 0 || !strings.HasPrefix(out, "CLIP") || !strings.Contains(out, "t1.he.suction leaking") || strings.Contains(out, "0001-01-01") {
		t.Fatalf("pull %s: exit %d\n%s%s", where, code, out, errs)
	}
	for _, l := range strings.Split(out, "\n") {
		if strings.Contains(l, "t1.he.suction leaking") {
			line = l
		}
	}
	clip := strings.Fields(line)[0]
	if out, errs, code := ran(t, built(t, "lapwing"), "pull", where, what, "no-such-clip", "--out", dir); code != 1 || !strings.Contains(errs, "no-such-clip") {
		t.Errorf("pull of an unknown clip: exit %d\n%s%s", code, out, errs)
	}
	if _, err := os.Stat(filepath.Join(dir, "clip-no-such-clip")); err == nil {
		t.Error("pull of an unknown clip left a folder behind")
	}
	into := filepath.Join(dir, strings.TrimPrefix(where, "--"))
	if out, errs, code = ran(t, built(t, "lapwing"), "pull", where, what, clip, "--out", into); code != 0 {
		t.Fatalf("pull %s %s: exit %d\n%s%s", where, clip, code, out, errs)
	}
	files = map[string][]byte{}
	for _, suffix := range []string{".wav", ".skid.yaml", ".process.csv", ".json"} {
		body, err := os.ReadFile(filepath.Join(strings.TrimSpace(out), clip+suffix))
		if err != nil {
			t.Fatal(err)
		}
		files[suffix] = body
	}
	return line, files
}

// sameAsJournal compares what a subscriber received with the daemon's own journal, after the daemon has ended.
func sameAsJournal(t *testing.T, state string, as []said) {
	t.Helper()
	l, err := ledger.Open(filepath.Join(state, "state.db"), ledger.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	if st := l.Stats(); st.Damage != nil || len(st.BadRecords) > 0 {
		t.Errorf("the ledger is damaged: %+v %v", st.Damage, st.BadRecords)
	}
	journal, err := l.Journal(0, 1<<20)
	if err != nil {
		t.Fatal(err)
	}
	if left, err := l.NextOf(ledger.Alarm, 0, 100); err != nil || len(left) > 0 {
		t.Errorf("%d alarm messages are still in the outbox, %v", len(left), err)
	}
	if len(journal) == 0 {
		t.Error("the journal is empty")
	}
	if len(as) != len(journal) {
		t.Errorf("%d transitions received, %d in the journal", len(as), len(journal))
	}
	state0 := map[string]string{}
	for i := range journal {
		j := wire.FromTransition("quillmere-c1", &journal[i], "")
		if j.ID != uint64(i+1) {
			t.Errorf("journal entry %d has id %d", i+1, j.ID)
		}
		if i > 0 && journal[i].At.Before(journal[i-1].At) {
			t.Errorf("journal entry %d is of %s, the one before of %s", j.ID, journal[i].At, journal[i-1].At)
		}
		if was, known := state0[j.Key]; known && was != j.From+" "+j.Was || !known && j.From != "unknown" && j.From != "normal" {
			t.Errorf("entry %d: %s goes from %s %s, but stood at %q", j.ID, j.Key, j.From, j.Was, was)
		}
		if j.From == j.To && j.Was == j.Severity {
			t.Errorf("entry %d: %s is said again: %s %s", j.ID, j.Key, j.To, j.Severity)
		}
		state0[j.Key] = j.To + " " + j.Severity
		if i >= len(as) {
			continue
		}
		if a := as[i]; a.ID != j.ID || a.Key != j.Key || a.From != j.From || a.To != j.To || a.Severity != j.Severity || a.Sentence != j.Sentence || !a.At.Equal(j.At) {
			t.Errorf("received as number %d: id %d %s %s → %s; the journal has id %d %s %s → %s", i+1, a.ID, a.Key, a.From, a.To, j.ID, j.Key, j.From, j.To)
		}
	}
}
