package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"
)

// heardBy is what testdata/sparkplug/decode.mjs makes of what mosquitto_sub received.
type heardBy struct {
	Objections []string `json:"objections"`
	Births     []int    `json:"births"`
	Deaths     []struct {
		BdSeq   int  `json:"bdSeq"`
		Matches bool `json:"matches"`
		After   int  `json:"after"`
	} `json:"deaths"`
	Rebirths int `json:"rebirths"`
	Messages int `json:"messages"`
	Alarms   []struct {
		ID         uint64 `json:"id"`
		Name       string `json:"name"`
		Value      int    `json:"value"`
		State      string `json:"state"`
		Sentence   string `json:"sentence"`
		At         int64  `json:"at"`
		Historical bool   `json:"historical"`
		Birth      bool   `json:"birth"`
	} `json:"alarms"`
	Values map[string]map[string]any `json:"values"`
}

// host is a Sparkplug host made of strangers: mosquitto_sub and _pub, and an npm decoder.
type host struct {
	t         *testing.T
	b         *broker
	sub       *program
	strangers string
	at        int64
}

func startHost(t *testing.T, b *broker) *host {
	t.Helper()
	h := &host{t: t, b: b, strangers: os.Getenv("LAPWING_STRANGERS"), at: time.Now().UnixMilli()}
	if _, err := os.Stat(filepath.Join(h.strangers, "node_modules", "sparkplug-payload")); err != nil {
		t.Fatalf("LAPWING_STRANGERS must name the folder that make system fills: %v", err)
	}
	h.sub = start(t, nil, tool(t, "mosquitto_sub"), "-h", "127.0.0.1", "-p", strconv.Itoa(b.port), "-i", "sparkplug-host", "-q", "1", "-t", "spBv1.0/#", "-F", "%t %q %r %x")
	h.subscribed()
	return h
}

func (h *host) publish(topic string, payload []byte, more ...string) {
	h.t.Helper()
	cmd := exec.CommandContext(h.t.Context(), tool(h.t, "mosquitto_pub"), append([]string{"-h", "127.0.0.1", "-p", strconv.Itoa(h.b.port), "-t", topic, "-s"}, more...)...)
	cmd.Stdin = bytes.NewReader(payload)
	if out, err := cmd.CombinedOutput(); err != nil {
		h.t.Fatalf("mosquitto_pub %s: %v %s", topic, err, out)
	}
}

// subscribed waits until what is published is heard.
func (h *host) subscribed() {
	h.t.Helper()
	h.at++
	topic := fmt.Sprintf("spBv1.0/ping/%d", h.at)
	h.sub.until(30*time.Second, "the host hears", func() bool {
		h.publish(topic, []byte("x"))
		return strings.Contains(h.sub.out.String(), topic)
	})
}

func (h *host) say(online bool) {
	h.t.Helper()
	h.at++
	h.publish("spBv1.0/STATE/room", fmt.Appendf(nil, `{"online":%v,"timestamp":%d}`, online, h.at), "-r", "-q", "1")
}

func (h *host) count(kind string) (n int) {
	for _, l := range h.sub.out.lines() {
		if strings.HasPrefix(l, "spBv1.0/compressors/"+kind+"/") {
			n++
		}
	}
	return n
}

func (h *host) node(script string, stdin []byte, args ...string) []byte {
	h.t.Helper()
	cmd := exec.CommandContext(h.t.Context(), tool(h.t, "node"), append([]string{filepath.Join(root(h.t), "testdata", "sparkplug", script), h.strangers}, args...)...)
	cmd.Stdin = bytes.NewReader(stdin)
	var errs bytes.Buffer
	cmd.Stderr = &errs
	out, err := cmd.Output()
	if err != nil {
		h.t.Fatalf("%s: %v\n%s", script, err, errs.String())
	}
	return out
}

func (h *host) heard() (out heardBy) {
	h.t.Helper()
	raw := h.node("decode.mjs", []byte(strings.Join(h.sub.out.lines(), "\n")))
	if err := json.Unmarshal(raw, &out); err != nil {
		h.t.Fatalf("decode.mjs: %v\n%s", err, raw)
	}
	return out
}

// TestSystemSparkplug: a primary host made of strangers sees births, data, a rebirth on its command, the death when it
// goes away; a leak grows while it is away and the broker dead, and reaches it as history; a killed daemon dies by will.
func TestSystemSparkplug(t *testing.T) {
	system(t)
	dir := t.TempDir()
	skid := skidFile(t, dir, "features_every_s", "2", "health_every_s", "1", "pre_s", "6", "post_s", "4",
		"root", "lapwing\n  dialect: sparkplug\n  sparkplug: {group: compressors, primary_host: room}")
	state := filepath.Join(dir, "state")
	b := startBroker(t)
	sub := b.subscribe("control-room", "lapwing/#")
	h := startHost(t, b)
	reboot, rebirth := h.node("command.mjs", nil, "Node Control/Reboot"), h.node("command.mjs", nil, "Node Control/Rebirth") // now, as the machine will not wait
	d := start(t, nil, built(t, "lapwingd"), "--skid", skid, "--state", state, "--broker", b.url(), "--listen", "127.0.0.1:0",
		"--source", "model:grow", "--fast", "--learn", "440")
	page := pageOf(t, d)
	d.until(60*time.Second, "the daemon waits for its host", func() bool { return strings.Contains(d.err.String(), "waits for the primary host room") })
	if n := h.count("NBIRTH"); n != 0 {
		t.Fatalf("%d births without a host", n)
	}
	h.say(true)
	d.until(60*time.Second, "births and data", func() bool {
		return h.count("NBIRTH") == 1 && h.count("DBIRTH") == 2 && h.count("DDATA") > 3 && h.count("NDATA") > 0
	})
	h.publish("spBv1.0/compressors/NCMD/quillmere-c1", reboot)
	h.publish("spBv1.0/compressors/NCMD/quillmere-c1", rebirth)
	d.until(30*time.Second, "a rebirth", func() bool { return h.count("NBIRTH") == 2 && h.count("DBIRTH") == 4 })
	if !strings.Contains(d.err.String(), "Node Control/Reboot") {
		t.Error("a command that is not obeyed is not in the log")
	}

	// The leak begins at 142 s of machine time. From just before until the alarm stands in the journal nobody listens.
	d.until(90*time.Second, "the leak is about to begin", func() bool {
		n, ok := now(t, page)
		return ok && n.Latest != nil && n.Latest.TimeS >= 135
	})
	h.say(false)
	d.until(30*time.Second, "the node takes its leave", func() bool { return h.count("NDEATH") == 1 })
	b.kill()
	d.until(90*time.Second, "an alarm is in the journal", func() bool {
		n, ok := now(t, page)
		return ok && len(n.Journal) > 0
	})
	b.start()
	h.subscribed()
	h.say(true)
	until(t, 60*time.Second, "the alarm arrives after all", func() bool {
		as, _ := sub.transitions()
		return slices.ContainsFunc(as, namesTheLeak)
	})
	if code := d.end(90 * time.Second); code != 0 {
		t.Fatalf("at the end of its source the daemon exits with %d", code)
	}
	until(t, 20*time.Second, "the death of a clean stop", func() bool { return h.count("NDEATH") == 2 })

	d = start(t, nil, built(t, "lapwingd"), "--skid", skid, "--state", state, "--broker", b.url(), "--listen", "127.0.0.1:0", "--source", "model:swings")
	births := h.count("NBIRTH")
	d.until(60*time.Second, "another birth", func() bool { return h.count("NBIRTH") > births && h.count("DBIRTH")%2 == 0 })
	d.kill()
	until(t, 60*time.Second, "the death by will", func() bool { return h.count("NDEATH") == 3 })

	got := h.heard()
	if len(got.Objections) > 0 {
		t.Errorf("the decoder objects:\n%s", strings.Join(got.Objections, "\n"))
	}
	if len(got.Births) < 4 || got.Rebirths < 1 || got.Births[0] != 0 {
		t.Errorf("births %v, %d of them again", got.Births, got.Rebirths)
	}
	for i := 1; i < len(got.Births); i++ {
		if step := got.Births[i] - got.Births[i-1]; step < 0 {
			t.Errorf("bdSeq of the births %v", got.Births)
		}
	}
	for _, x := range got.Deaths {
		if !x.Matches {
			t.Errorf("a death with bdSeq %d, births %v", x.BdSeq, got.Births)
		}
	}
	as, repeats := sub.transitions()
	t.Logf("%d messages, births %v, %d alarm metrics, %d transitions, %d repeats", got.Messages, got.Births, len(got.Alarms), len(as), repeats)
	for _, a := range as {
		found, history := false, false
		for _, m := range got.Alarms {
			if m.ID == a.ID && m.Sentence == a.Sentence && m.State == a.To && m.At == a.At.UnixMilli() && !m.Birth {
				found, history = true, history || m.Historical
			}
		}
		if !found {
			t.Errorf("transition %d (%s to %s) did not come as a metric", a.ID, a.Key, a.To)
		}
		if a.ID == 1 && !history {
			t.Error("what happened while the host was away is not history")
		}
	}
	if v := got.Values[""]["Alarms/t1/he/suction/leaking"]; v != float64(2) && v != float64(3) {
		t.Errorf("what stands on the leaking valve is %v", v)
	}
	if v := got.Values[""]["Properties/skid"]; v != "quillmere-c1" {
		t.Errorf("the node says that it is %v", v)
	}
	if v, ok := got.Values["t1"]["Measures/he/n_comp_late"]; !ok {
		t.Errorf("no exponent among the measures of t1 (%v)", v)
	}
	sameAsJournal(t, state, as)
	for _, m := range b.retained("lapwing/#") {
		if strings.HasSuffix(m.topic, "/health") || strings.Contains(m.topic, "/features/") {
			t.Errorf("%s is sent beside Sparkplug", m.topic)
		}
	}
}
