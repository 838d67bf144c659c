package uplink

import (
	"encoding/json"
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/eclipse/paho.mqtt.golang/packets"

	"lapwing/internal/uplink/sparkplug"
	"lapwing/internal/uplink/sparkplug/sparkplugtest"
	"lapwing/internal/wire"
)

// counter gives the numbers of connections as a ledger would.
type counter struct {
	mu   sync.Mutex
	next uint8
	err  error
}

func (c *counter) take() (uint8, error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.err != nil {
		return 0, c.err
	}
	c.next++
	return c.next - 1, nil
}

var points = []string{"t1.he.suction/leaking", "t2/rod_load_max_kn/high", "process/sensor"}

func speaking(broker string, c *counter) Config {
	cfg := config(broker)
	cfg.wait.birth = time.Millisecond
	cfg.Sparkplug = &Sparkplug{Group: "compressors", Node: "heron-meadow", BdSeq: c.take, Alarms: points,
		Devices: []SparkplugDevice{{ID: "t1", Measures: [][2]string{{"t1.he", "leak_pct"}, {"t1", "flow_kg_h"}}}, {ID: "t2", Measures: [][2]string{{"t2.ce", "leak_pct"}}}},
		Known:   []sparkplug.Metric{{Name: "Properties/skid", Type: sparkplug.String, Value: "heron-meadow"}}}
	return cfg
}

var dayOf = time.Date(2030, 5, 1, 6, 0, 0, 0, time.UTC)

// said is a transition's JSON: severity and state follow from the id.
func said(id uint64) wire.Alarm {
	a := wire.Alarm{Version: 1, Skid: "heron-meadow", ID: id, Journal: "J", At: dayOf.Add(time.Duration(id) * time.Second), Turn: int64(id), Key: points[id%3],
		From: "normal", To: "unacknowledged", Severity: []string{"advisory", "alert", "danger"}[id/3%3], Was: "none", Sentence: fmt.Sprintf("transition %d", id), Caution: wire.Caution}
	a.Subject, a.Kind, _ = strings.Cut(a.Key, "/")
	if id%5 == 4 {
		a.From, a.To, a.Severity, a.Was = "unacknowledged", "normal", "none", "alert"
	}
	return a
}

func putAlarm(t testing.TB, s *store, a wire.Alarm) {
	b, err := json.Marshal(a)
	if err != nil {
		t.Fatal(err)
	}
	s.put(topics.Alarm(), string(b), false)
	if a.To == "normal" {
		b = nil
	}
	s.put(topics.Standing(a.Key), string(b), true)
}

func jsonOf(t testing.TB, v any) []byte {
	b, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// tape is what a broker took, connection by connection.
func (h *hostile) tape() (out []event) {
	h.mu.Lock()
	defer h.mu.Unlock()
	out = slices.Clone(h.events)
	slices.SortStableFunc(out, func(a, b event) int { return a.n - b.n }) // the last packets of a connection may be read after the next one's first
	return out
}

// replay lets the specification listen to what a broker took, and gives the ids of transitions in the order in which
// their JSON came, repeats dropped.
func replay(t testing.TB, h *hostile, host *sparkplugtest.Host) (ids []uint64) {
	t.Helper()
	seen := map[uint64]bool{}
	for _, e := range h.tape() {
		switch p := e.p.(type) {
		case *packets.ConnectPacket:
			host.Connect(p.WillTopic, p.WillQos, p.WillRetain, p.WillMessage)
			if !p.CleanSession {
				t.Error("tck-id-principles-persistence-clean-session: a session that the broker keeps")
			}
		case *packets.PublishPacket:
			if strings.HasPrefix(p.TopicName, "spBv1.0/") {
				host.Hear(p.TopicName, p.Qos, p.Retain, p.Payload)
				continue
			}
			if p.Qos != 1 {
				t.Errorf("%s with QoS %d", p.TopicName, p.Qos)
			}
			if p.TopicName != topics.Alarm() {
				continue
			}
			a, ok := alarmOf(p.Payload)
			if !ok {
				t.Fatalf("%s", p.Payload)
			}
			if !slices.ContainsFunc(host.Stories, func(s sparkplugtest.Story) bool { return s.Props["id"].Value == a.ID }) {
				t.Errorf("the JSON of transition %d came before its metric", a.ID)
			}
			if !seen[a.ID] {
				seen[a.ID] = true
				ids = append(ids, a.ID)
			}
		}
	}
	if len(host.Breaches) > 0 {
		t.Errorf("%d breaches:\n%s", len(host.Breaches), strings.Join(host.Breaches[:min(20, len(host.Breaches))], "\n"))
	}
	return ids
}

// A broker that drops connections at random, acknowledges and drops, and withholds acknowledgements: every transition
// arrives in order, as a metric and behind it as JSON; none leaves the outbox without the acknowledgement; no rule of the
// specification is broken over all the connections; and in the end the host has what is true.
func TestSparkplugOnAHostileBroker(t *testing.T) {
	const n = 240
	rng := rand.New(rand.NewPCG(7, 7)) // used under the broker's lock only
	calm := false
	h := &hostile{onPub: func(int, Message) answer {
		if calm {
			return ack
		}
		switch x := rng.IntN(300); {
		case x < 6:
			return drop
		case x < 10:
			return ackDrop
		case x < 11:
			return withhold
		}
		return ack
	}}
	c := &counter{next: 250} // and over 255
	cfg := speaking(openHostile(t, h), c)
	cfg.wait.ack = 50 * time.Millisecond
	var mu sync.Mutex
	stands := map[string]Message{} // as the annunciator has it: what a birth says of a point that the outbox is done with
	cfg.Standing = func() (out []Message) {
		mu.Lock()
		defer mu.Unlock()
		for _, key := range points {
			if m, ok := stands[key]; ok {
				out = append(out, m)
			}
		}
		return out
	}
	put := func(box *store, a wire.Alarm) {
		mu.Lock()
		m := Message{Topic: topics.Standing(a.Key), Retain: true}
		if a.To != "normal" {
			m.Payload = jsonOf(t, a)
		}
		stands[a.Key] = m
		mu.Unlock()
		putAlarm(t, box, a)
	}
	box := &store{}
	box.onAck = func(m Message) {
		if !h.hasAcked(string(m.Payload)) {
			t.Errorf("message %s left the outbox without an acknowledgement", m.Payload)
		}
	}
	for id := uint64(1); id <= n/2; id++ {
		put(box, said(id))
	}
	p, stop := start(t, cfg, box)
	for id := uint64(n/2 + 1); id <= n; id++ {
		put(box, said(id))
		p.Wake()
		v := float64(id)
		p.Offer(topics.Features("t1"), jsonOf(t, wire.Features{Version: 1, Throw: "t1", At: dayOf.Add(time.Duration(id) * time.Second), Turn: int64(id), RPM: &v, Duty: "steady",
			Values: map[string]map[string]float64{"t1.he": {"leak_pct": v}}}), false)
		p.Offer(topics.Health(), jsonOf(t, wire.Health{Version: 1, Skid: "heron-meadow", At: dayOf, State: "running", Turns: int64(id)}), true)
		if id%8 == 0 {
			await(t, "half of what waits", func() bool { return box.len() < 40 })
		}
	}
	await(t, "most of it", func() bool { return box.len() < 20 })
	h.mu.Lock()
	calm = true
	h.mu.Unlock()
	await(t, "the outbox is empty", func() bool { return box.len() == 0 })
	connections := h.connected()
	stop()

	host := sparkplugtest.New("compressors", "heron-meadow")
	ids := replay(t, h, host)
	for i, id := range ids {
		if id != uint64(i+1) {
			t.Fatalf("transition %d came as number %d", id, i+1)
		}
	}
	if len(ids) != n {
		t.Errorf("%d of %d transitions arrived", len(ids), n)
	}
	var metrics []uint64
	old := 0
	for _, s := range host.Stories {
		if id, ok := s.Props["id"].Value.(uint64); ok && !slices.Contains(metrics, id) {
			metrics = append(metrics, id)
			if a := said(id); s.Name != alarmName(a.Key) || s.Value != uint32(severityOf(&a)) || !s.At.Equal(a.At) || s.Props["sentence"].Value != a.Sentence {
				t.Errorf("transition %d came as %+v", id, s)
			}
		}
		if s.Historical {
			old++
		}
	}
	if len(metrics) != n || !slices.IsSorted(metrics) {
		t.Errorf("%d of %d transitions came as metrics, in order %v", len(metrics), n, slices.IsSorted(metrics))
	}
	for i, key := range points {
		last := said(n - uint64((n-i)%3))
		got := host.Values[""][alarmName(key)]
		if last.To == "normal" && got.Value == uint32(0) && got.Props["id"].Value == nil {
			continue // a birth after its transition says of a point that does not stand that it is normal, and no more
		}
		if got.Value != uint32(severityOf(&last)) || got.Props["id"].Value != last.ID || !got.At.Equal(last.At) {
			t.Errorf("%s is %v of transition %v, in truth of %d", key, got.Value, got.Props["id"].Value, last.ID)
		}
	}
	if host.Alive("") {
		t.Error("after a clean stop the node is not dead")
	}
	t.Logf("%d connections, %d births, %d stories, %d of them historical", connections, host.Births, len(host.Stories), old)
	if connections < 5 || old < n/2 {
		t.Errorf("%d connections, %d historical: the test shows nothing", connections, old)
	}
}

// state sends what a host says of itself to connection n.
func (h *hostile) state(n int, online bool, at int) {
	h.send(n, publishOf(Message{Topic: "spBv1.0/STATE/control-room", Payload: fmt.Appendf(nil, `{"online":%v,"timestamp":%d}`, online, at)}, false))
}

func (h *hostile) published(prefix string) (n int) {
	for _, m := range h.seen() {
		if strings.HasPrefix(m.Topic, prefix) {
			n++
		}
	}
	return n
}

// Nothing is said while the primary host is away, and alarms wait for it.
func TestPrimaryHost(t *testing.T) {
	h := &hostile{}
	cfg := speaking(openHostile(t, h), &counter{})
	cfg.Sparkplug.PrimaryHost = "control-room"
	box := &store{}
	putAlarm(t, box, said(1))
	p, stop := start(t, cfg, box)
	await(t, "the publisher says that it waits", func() bool {
		return strings.Contains(p.Status().LastError, "waits for the primary host control-room")
	})
	h.state(0, false, 10)
	h.send(0, publishOf(Message{Topic: "spBv1.0/STATE/control-room", Payload: []byte("ONLINE")}, false)) // of version 2.2
	h.state(0, true, 9)                                                                                  // older than the offline
	p.Offer(topics.Health(), jsonOf(t, wire.Health{Version: 1, State: "running"}), true)
	if len(h.seen()) > 0 || box.len() != 2 {
		t.Fatalf("said without a host: %v", h.seen())
	}
	h.state(0, true, 11)
	await(t, "birth and alarm", func() bool { return box.len() == 0 && h.published("spBv1.0/compressors/NBIRTH/") == 1 })
	h.state(0, false, 10) // a will of long ago
	putAlarm(t, box, said(3))
	p.Wake()
	await(t, "an alarm while the host is there", func() bool { return box.len() == 0 })
	h.state(0, false, 11)
	await(t, "a death, and a connection that waits", func() bool {
		return h.published("spBv1.0/compressors/NDEATH/") == 1 && h.connected() == 2 && strings.Contains(p.Status().LastError, "waits for the primary host")
	})
	putAlarm(t, box, said(6))
	p.Wake()
	before := len(h.seen())
	h.state(1, true, 12)
	await(t, "the alarm of meanwhile", func() bool { return box.len() == 0 })
	h.hangUp() // what the host said on another connection is of no use on this one
	await(t, "a connection that waits again", func() bool {
		return h.connected() == 3 && strings.Contains(p.Status().LastError, "waits for the primary host")
	})
	h.state(2, true, 12)
	await(t, "a birth after it", func() bool { return h.published("spBv1.0/compressors/NBIRTH/") == 3 })
	stop()
	if after := h.seen(); after[before].Topic != "spBv1.0/compressors/NBIRTH/heron-meadow" {
		t.Errorf("the first that the host hears is %s", after[before].Topic)
	}
	host := sparkplugtest.New("compressors", "heron-meadow")
	if ids := replay(t, h, host); !slices.Equal(ids, []uint64{1, 3, 6}) {
		t.Errorf("transitions %v", ids)
	}
	var history []string
	for _, s := range host.Stories {
		if id, ok := s.Props["id"].Value.(uint64); ok {
			history = append(history, fmt.Sprint(id, s.Historical))
		}
	}
	if !slices.Equal(history, []string{"1 true", "1 false", "3 false", "6 true", "6 false"}) {
		t.Errorf("told as %v", history)
	}
	for _, e := range h.tape() {
		if s, ok := e.p.(*packets.SubscribePacket); ok {
			for i, topic := range s.Topics { // tck-id-message-flow-edge-node-ncmd-subscribe
				if topic != "spBv1.0/compressors/NCMD/heron-meadow" && topic != "spBv1.0/STATE/control-room" || s.Qoss[i] != 1 {
					t.Errorf("subscribed to %s with QoS %d", topic, s.Qoss[i])
				}
			}
		}
	}
}

// ncmd is a host's command, name and boolean value.
func ncmd(name string, yes byte) []byte {
	m := append([]byte{0x0a, byte(len(name))}, name...)
	m = append(m, 0x20, 11, 0x70, yes)
	return append([]byte{0x12, byte(len(m))}, m...)
}

// A rebirth says everything again with the same bdSeq; everything else that a host sends changes nothing.
func TestRebirth(t *testing.T) {
	h := &hostile{}
	box := &store{}
	p, stop := start(t, speaking(openHostile(t, h), &counter{next: 9}), box)
	await(t, "a birth", func() bool { return h.published("spBv1.0/compressors/DBIRTH/") == 2 })
	v := 900.
	p.Offer(topics.Features("t2"), jsonOf(t, wire.Features{Version: 1, Throw: "t2", At: dayOf, Turn: 5, RPM: &v, Values: map[string]map[string]float64{"t2.ce": {"leak_pct": 1.5, "new_mm": 2}}}), false)
	await(t, "a birth of the device with what is new", func() bool { return h.published("spBv1.0/compressors/DBIRTH/heron-meadow/t2") == 2 })
	topic := "spBv1.0/compressors/NCMD/heron-meadow"
	for _, payload := range [][]byte{ncmd("Node Control/Reboot", 1), ncmd("Node Control/Rebirth", 0), []byte("rebirth, please"), nil} {
		h.send(0, publishOf(Message{Topic: topic, Payload: payload}, false))
	}
	h.send(0, publishOf(Message{Topic: topic, Payload: ncmd("Node Control/Rebirth", 1)}, true)) // retained
	for n := 2; n < 5; n++ {
		h.send(0, publishOf(Message{Topic: topic, Payload: ncmd("Node Control/Rebirth", 1)}, false))
		await(t, "a rebirth", func() bool { return h.published("spBv1.0/compressors/NBIRTH/") == n })
	}
	putAlarm(t, box, said(3))
	p.Wake()
	await(t, "an alarm after it", func() bool { return box.len() == 0 })
	if st := p.Status(); st.Births != 4 || st.Connections != 1 {
		t.Errorf("status %+v", st)
	}
	stop()
	host := sparkplugtest.New("compressors", "heron-meadow")
	replay(t, h, host)
	if host.Births != 4 || host.Values["t2"]["Measures/ce/new_mm"].Value != 2. || host.Values[""][alarmName(points[0])].Value != uint32(2) {
		t.Errorf("%d births, %+v", host.Births, host.Values)
	}
	await(t, "the daemon takes its leave", func() bool { h.mu.Lock(); defer h.mu.Unlock(); return h.closed == 1 })
	if host.Alive("") {
		t.Error("the node left without its death")
	}
}

// What a broker keeps of old commands is passed over: it would come again with every connection.
func TestRetainedCommands(t *testing.T) {
	p, err := New(speaking("tcp://127.0.0.1:1", &counter{}), &store{})
	if err != nil {
		t.Fatal(err)
	}
	b := pump{p: p}
	for _, retained := range []bool{true, false} {
		p.spark.mail.put(Received{Topic: p.spark.node.Topic(sparkplug.NCmd, ""), Payload: ncmd("Node Control/Rebirth", 1), Retained: retained})
		if b.hear() == retained {
			t.Errorf("retained %v, obeyed %v", retained, !retained)
		}
	}
	for range 2 * mailKept { // a flood takes no memory, and of a flood the newest counts
		p.spark.mail.put(Received{Topic: "spBv1.0/STATE/x", Payload: []byte(`{"online":false,"timestamp":1}`)})
	}
	p.spark.mail.put(Received{Topic: "spBv1.0/STATE/x", Payload: []byte(`{"online":true,"timestamp":2}`)})
	if n := len(p.spark.mail.got); n != mailKept {
		t.Errorf("%d messages are kept", n)
	}
	if b.hear(); !p.spark.host.Online() {
		t.Error("the newest was lost")
	}
}

// What is not known is null; a throw that cannot be heard is dead, with its alarms where they were.
func TestThrowsLiveAndDie(t *testing.T) {
	c := &counter{}
	s, err := newSpeaker(speaking("tcp://127.0.0.1:1", c).Sparkplug, topics)
	if err != nil {
		t.Fatal(err)
	}
	host := sparkplugtest.New("compressors", "heron-meadow")
	w, err := s.will()
	if err != nil {
		t.Fatal(err)
	}
	host.Connect(w.Topic, 1, false, w.Payload)
	hear := func(ms []sparkplug.Message) {
		for _, m := range ms {
			host.Hear(m.Topic, 0, false, m.Payload)
		}
	}
	stands := said(3)
	features := func(leak any) Message {
		f := wire.Features{Version: 1, Throw: "t1", At: dayOf, Turn: 7, Duty: "steady", Values: map[string]map[string]float64{"t1": {"flow_kg_h": 3}}}
		if v, ok := leak.(float64); ok {
			f.Values["t1.he"] = map[string]float64{"leak_pct": v}
		}
		return Message{Topic: topics.Features("t1"), Payload: jsonOf(t, f)}
	}
	health := func(state string, failed ...string) Message {
		x := wire.Health{Version: 1, At: dayOf, State: state, Turns: 3, Trouble: []string{"look", "here"}}
		for _, id := range []string{"p.t1", "a1", "p2"} {
			ch := wire.Channel{ID: id, Place: map[string]string{"p.t1": "t1.he", "a1": "t1", "p2": "t2.ce"}[id], State: "good"}
			if slices.Contains(failed, id) {
				ch.State, ch.Fault, ch.Reason = "failure", "open cable", "it is open"
			}
			x.Channels = append(x.Channels, ch)
		}
		return Message{Topic: topics.Health(), Payload: jsonOf(t, x)}
	}
	hear(s.birth([]Message{{Payload: jsonOf(t, stands)}}, []Message{health("running")}))
	hear(s.caughtUp())
	v := host.Values
	if v[""][alarmName(stands.Key)].Value != uint32(2) || v[""]["Alarms/worst_severity"].Value != uint32(2) || v[""]["Alarms/process/sensor"].Value != uint32(0) ||
		v[""]["Health/state"].Value != "running" || v[""]["Health/trouble"].Value != "look\nhere" || v[""]["Channels/p/t1"].Value != "good" || !v["t1"]["Measures/he/leak_pct"].Null {
		t.Errorf("born with %+v", v)
	}
	say := func(m Message) {
		out, also := s.offer(m)
		if also {
			t.Errorf("%s goes out as JSON too", m.Topic)
		}
		hear(out)
	}
	say(features(2.5))
	if v := host.Values["t1"]; v["Measures/he/leak_pct"].Value != 2.5 || v["Measures/flow_kg_h"].Value != 3. || v["duty"].Value != "steady" || !v["speed_rpm"].Null || v["turn"].Value != uint64(7) {
		t.Errorf("features came as %+v", v)
	}
	say(features(nil))
	if !host.Values["t1"]["Measures/he/leak_pct"].Null {
		t.Error("what is not known any more still has a value")
	}
	say(features(1.))
	say(health("standstill"))
	if v := host.Values["t1"]; !v["Measures/he/leak_pct"].Null || !v["turn"].Null || v["duty"].Value != "unknown" || !host.Alive("t1") {
		t.Errorf("of a machine that stands still the host has %+v", v)
	}
	say(health("running", "p.t1"))
	if !host.Alive("t1") || host.Values[""]["Channels/p/t1"].Props["reason"].Value != "it is open" {
		t.Errorf("one channel has failed: %v %+v", host.Alive("t1"), host.Values[""]["Channels/p/t1"])
	}
	say(health("running", "p.t1", "a1"))
	if host.Alive("t1") || !host.Alive("t2") {
		t.Error("all channels of t1 have failed")
	}
	say(features(4.))
	say(health("lost"))
	if host.Alive("t2") {
		t.Error("without a shaft reference t2 is not alive")
	}
	if host.Values[""][alarmName(stands.Key)].Value != uint32(2) || !host.Alive("") {
		t.Error("an alarm died with its throw")
	}
	say(health("running"))
	if !host.Alive("t1") || !host.Alive("t2") || host.Values["t1"]["Measures/he/leak_pct"].Value != nil {
		t.Errorf("%v %v %+v", host.Alive("t1"), host.Alive("t2"), host.Values["t1"])
	}
	gone := stands
	gone.ID, gone.To, gone.Severity = 4, "normal", "none"
	hear(s.alarm(Message{Topic: topics.Alarm(), Payload: jsonOf(t, gone)}))
	if host.Values[""]["Alarms/worst_severity"].Value != uint32(0) {
		t.Errorf("nothing stands, the worst is %v", host.Values[""]["Alarms/worst_severity"].Value)
	}
	for _, bad := range []string{"", "{", `{"key":5}`} {
		for _, topic := range []string{topics.Alarm(), topics.Features("t1"), topics.Health(), topics.Standing("x/y"), "other"} {
			m := Message{Topic: topic, Payload: []byte(bad)}
			hear(s.alarm(m))
			out, _ := s.offer(m)
			hear(out)
		}
	}
	if len(host.Breaches) > 0 {
		t.Error(strings.Join(host.Breaches, "\n"))
	}
}

// Numbers rise from CONNECT to CONNECT: attempts that meet no broker use none up.
func TestAttemptsUseNoNumbers(t *testing.T) {
	c := &counter{}
	s, err := newSpeaker(speaking("tcp://127.0.0.1:1", c).Sparkplug, topics)
	if err != nil {
		t.Fatal(err)
	}
	for range 3 {
		if _, err := s.will(); err != nil {
			t.Fatal(err)
		}
	}
	s.sent()
	if _, err := s.will(); err != nil || c.next != 2 {
		t.Errorf("%v, %d numbers taken", err, c.next)
	}
	s.sent()
	c.err = errors.New("the disk is full")
	if _, err := s.will(); err == nil || !strings.Contains(err.Error(), "the disk is full") {
		t.Errorf("%v", err)
	}
}

func TestSparkplugIsChecked(t *testing.T) {
	for name, spoil := range map[string]func(*Sparkplug){
		"no group":          func(s *Sparkplug) { s.Group = "" },
		"a slash":           func(s *Sparkplug) { s.Node = "a/b" },
		"a wildcard":        func(s *Sparkplug) { s.PrimaryHost = "#" },
		"two devices":       func(s *Sparkplug) { s.Devices[1].ID = "t1" },
		"nobody who counts": func(s *Sparkplug) { s.BdSeq = nil },
	} {
		cfg := speaking("tcp://127.0.0.1:1", &counter{})
		spoil(cfg.Sparkplug)
		if _, err := New(cfg, &store{}); err == nil {
			t.Errorf("%s: taken", name)
		}
	}
}
