package uplink

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"
)

var topics = Topics{Root: "lapwing", Skid: "heron-meadow"}

// store is an outbox in memory that checks what is done to it.
type store struct {
	mu      sync.Mutex
	msgs    []Message
	next    uint64
	onAck   func(m Message)
	failAck int // so many removals fail
	nextErr error
}

func (s *store) put(topic, payload string, retain bool) uint64 {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.next++
	s.msgs = append(s.msgs, Message{ID: s.next, Topic: topic, Payload: []byte(payload), Retain: retain})
	return s.next
}

func (s *store) Next(after uint64, max int) (out []Message, err error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, m := range s.msgs {
		if m.ID > after && len(out) < max {
			out = append(out, m)
		}
	}
	return out, s.nextErr
}

func (s *store) Ack(ids []uint64) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.failAck > 0 {
		s.failAck--
		return errors.New("the disk is full")
	}
	s.msgs = slices.DeleteFunc(s.msgs, func(m Message) bool {
		gone := slices.Contains(ids, m.ID)
		if gone && s.onAck != nil {
			s.onAck(m)
		}
		return gone
	})
	return nil
}

func (s *store) len() int {
	s.mu.Lock()
	defer s.mu.Unlock()
	return len(s.msgs)
}

func config(broker string) Config {
	return Config{Broker: broker, ClientID: "lapwing-heron-meadow", Topics: topics, RetryMin: time.Millisecond, RetryMax: 4 * time.Millisecond,
		wait: limits{keepAlive: time.Second, ping: 50 * time.Millisecond, connect: 5 * time.Second, write: 100 * time.Millisecond, ack: 5 * time.Second, drain: 5 * time.Second}}
}

// start runs a publisher until the test ends or stop is called; stop waits for it.
func start(t *testing.T, cfg Config, box Outbox) (p *Publisher, stop func()) {
	t.Helper()
	p, err := New(cfg, box)
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() { defer close(done); p.Run(ctx) }()
	stop = func() { cancel(); <-done }
	t.Cleanup(stop)
	return p, stop
}

// once keeps the first arrival of each payload on a topic.
func once(got []Message, topic string) (out []string) {
	seen := map[string]bool{}
	for _, m := range got {
		if s := string(m.Payload); m.Topic == topic && !seen[s] {
			seen[s] = true
			out = append(out, s)
		}
	}
	return out
}

func numbered(from, to int) (out []string) {
	for i := from; i <= to; i++ {
		out = append(out, fmt.Sprint(i))
	}
	return out
}

// A broker that drops connections at random, acknowledges and drops, and withholds acknowledgements: every message
// arrives, in order once repeats are dropped, and none leaves the outbox without its PUBACK.
func TestNothingIsLostOnAHostileBroker(t *testing.T) {
	const n = 500
	rng := rand.New(rand.NewPCG(7, 7)) // used under the broker's lock only
	calm := false
	h := &hostile{onPub: func(int, Message) answer {
		if calm {
			return ack
		}
		switch x := rng.IntN(200); {
		case x < 6:
			return drop
		case x < 10:
			return ackDrop
		case x < 11:
			return withhold
		}
		return ack
	}, onConn: func(int) (answer, bool) { return drop, rng.IntN(8) == 0 }}
	cfg := config(openHostile(t, h))
	cfg.wait.ack = 50 * time.Millisecond
	box := &store{}
	box.onAck = func(m Message) {
		if !h.hasAcked(string(m.Payload)) {
			t.Errorf("message %s left the outbox without an acknowledgement", m.Payload)
		}
	}
	for i := 1; i <= n/2; i++ {
		box.put(topics.Alarm(), fmt.Sprint(i), false)
	}
	p, _ := start(t, cfg, box)
	for i := n/2 + 1; i <= n; i++ {
		box.put(topics.Alarm(), fmt.Sprint(i), false)
		p.Wake()
		p.Offer(topics.Features("t1"), fmt.Appendf(nil, "f%d", i), false)
	}
	await(t, "an empty outbox", func() bool { return box.len() == 0 })
	if got := once(h.seen(), topics.Alarm()); !slices.Equal(got, numbered(1, n)) {
		t.Errorf("arrived: %v", got)
	}
	await(t, "the newest features", func() bool { // it may be on its way again and again until the broker takes it
		h.mu.Lock()
		calm = true
		h.mu.Unlock()
		return h.hasAcked(fmt.Sprintf("f%d", n))
	})
	st := p.Status()
	if st.Sent != n {
		t.Errorf("status says %d sent, want %d", st.Sent, n)
	}
	repeats := -n
	for _, m := range h.seen() {
		if m.Topic == topics.Alarm() {
			repeats++
		}
	}
	if h.connected() < 5 || repeats == 0 {
		t.Errorf("the broker was not hostile: %d connections, %d repeats", h.connected(), repeats)
	}
	t.Logf("%d messages over %d connections, %d sent twice", n, h.connected(), repeats)
}

func TestRealBrokerRestarts(t *testing.T) {
	const n = 300
	w := &watch{}
	srv, addr := openReal(t, "127.0.0.1:0", w)
	box := &store{}
	p, _ := start(t, config("tcp://"+addr), box)
	for i := 1; i <= n; i++ {
		box.put(topics.Alarm(), fmt.Sprint(i), false)
		p.Wake()
		if i%100 == 0 {
			await(t, "half of it through", func() bool { return box.len() < 50 })
			if err := srv.Close(); err != nil {
				t.Fatal(err)
			}
			await(t, "the loss is noticed", func() bool { return !p.Status().Connected })
			srv, _ = openReal(t, addr, w)
		}
	}
	await(t, "an empty outbox", func() bool { return box.len() == 0 })
	if got := once(w.seen(), topics.Alarm()); !slices.Equal(got, numbered(1, n)) {
		t.Errorf("arrived: %v", got)
	}
	if c := p.Status().Connections; c < 3 {
		t.Errorf("%d connections", c)
	}
	if err := srv.Close(); err != nil {
		t.Error(err)
	}
}

func TestAlarmsOvertakeFeatures(t *testing.T) {
	h := &hostile{onPub: func(_ int, m Message) answer {
		if strings.Contains(m.Topic, "features") {
			return withhold
		}
		return ack
	}}
	box := &store{}
	cfg := config(openHostile(t, h))
	cfg.wait.ack = time.Minute
	p, stop := start(t, cfg, box)
	for i := range 40 {
		p.Offer(topics.Features(fmt.Sprint("t", i)), []byte("f"), false)
	}
	await(t, "features in flight", func() bool { return len(h.seen()) == otherFlight })
	for i := 1; i <= 100; i++ {
		box.put(topics.Alarm(), fmt.Sprint(i), false)
	}
	p.Wake()
	await(t, "the alarms, while no feature is acknowledged", func() bool { return box.reached(h, 100) })
	got := h.seen()
	if n := len(got) - 100; n != otherFlight {
		t.Errorf("%d features were sent", n)
	}
	if got := once(got, topics.Alarm()); !slices.Equal(got, numbered(1, 100)) {
		t.Errorf("alarms %v", got)
	}
	h.hangUp()
	stop()
}

// reached says whether the broker has seen n alarms.
func (s *store) reached(h *hostile, n int) bool { return len(once(h.seen(), topics.Alarm())) == n }

func TestABacklogOfAlarmsGoesBeforeFeatures(t *testing.T) {
	h := &hostile{}
	box := &store{}
	for i := 1; i <= 60; i++ {
		box.put(topics.Alarm(), fmt.Sprint(i), false)
	}
	p, err := New(config(openHostile(t, h)), box)
	if err != nil {
		t.Fatal(err)
	}
	p.Offer(topics.Features("t1"), []byte("f"), false)
	p.Offer(topics.Health(), []byte("up"), true)
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() { defer close(done); p.Run(ctx) }()
	await(t, "everything", func() bool { return len(h.seen()) == 62 })
	cancel()
	<-done
	got := h.seen()
	if got[0].Topic != topics.Health() || !got[0].Retain {
		t.Errorf("first comes %s: the last will's offline must be taken off the board", got[0].Topic)
	}
	if got[61].Topic != topics.Features("t1") {
		t.Errorf("last comes %s", got[61].Topic)
	}
}

func TestOffersAreLatestWinsAndBounded(t *testing.T) {
	h := &hostile{}
	p, err := New(config(openHostile(t, h)), &store{})
	if err != nil {
		t.Fatal(err)
	}
	for i := range 100 {
		p.Offer(topics.Features("t1"), fmt.Appendf(nil, "a%d", i), false)
		p.Offer(topics.Health(), fmt.Appendf(nil, "h%d", i), true)
	}
	if st := p.Status(); st.Replaced != 198 || st.Dropped != 0 {
		t.Errorf("status %+v", st)
	}
	for i := range 10 * maxTopics {
		p.Offer(topics.Features(fmt.Sprint(i)), []byte("x"), false)
	}
	if len(p.latest) != maxTopics || len(p.order) != maxTopics {
		t.Errorf("%d offers and %d topics wait", len(p.latest), len(p.order))
	}
	if st := p.Status(); st.Dropped != 9*maxTopics+2 {
		t.Errorf("status %+v", st)
	}
	p.Offer(topics.Features("last"), []byte("x"), false)
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() { defer close(done); p.Run(ctx) }()
	await(t, "the newest of each", func() bool { return h.hasAcked("h99") && len(h.seen()) == maxTopics+1 })
	cancel()
	<-done
	got := h.seen()
	if string(got[0].Payload) != "h99" || got[len(got)-1].Topic != topics.Features("last") {
		t.Errorf("first %s, last %s", got[0].Payload, got[len(got)-1].Topic)
	}
}

// An offer lost with its connection is offered again, but never over a newer one.
func TestOffersComeBack(t *testing.T) {
	var p *Publisher
	h := &hostile{}
	h.onPub = func(n int, m Message) answer {
		switch {
		case n == 0:
			p.Offer(topics.Features("t1"), []byte("new"), false)
			return withhold
		case n < 4:
			return drop
		}
		return ack
	}
	p, err := New(config(openHostile(t, h)), &store{})
	if err != nil {
		t.Fatal(err)
	}
	p.Offer(topics.Features("t1"), []byte("old"), false)
	p.Offer(topics.Features("t2"), []byte("kept"), false)
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() { defer close(done); p.Run(ctx) }()
	await(t, "both", func() bool { return h.hasAcked("new") && h.hasAcked("kept") })
	cancel()
	<-done
	last := map[string]string{}
	for _, m := range h.seen() {
		last[m.Topic] = string(m.Payload)
	}
	if last[topics.Features("t1")] != "new" || last[topics.Features("t2")] != "kept" {
		t.Errorf("last on the wire: %v", last)
	}
}

func TestWillAndCleanStop(t *testing.T) {
	h := &hostile{}
	cfg := config(openHostile(t, h))
	cfg.Offline = func() []byte { return []byte("offline") }
	box := &store{}
	p, stop := start(t, cfg, box)
	p.Offer(topics.Health(), []byte("up"), true)
	await(t, "health", func() bool { return h.hasAcked("up") })
	for i := 1; i <= 50; i++ { // no Wake: they are found when the stop empties the outbox
		box.put(topics.Alarm(), fmt.Sprint(i), false)
	}
	stop()
	c := h.connects[0]
	if !c.WillFlag || !c.WillRetain || c.WillQos != 1 || c.WillTopic != topics.Health() || string(c.WillMessage) != "offline" {
		t.Errorf("last will: flag %v retain %v qos %d topic %s message %s", c.WillFlag, c.WillRetain, c.WillQos, c.WillTopic, c.WillMessage)
	}
	if !c.CleanSession || c.ProtocolVersion != 4 {
		t.Errorf("clean session %v, protocol %d", c.CleanSession, c.ProtocolVersion)
	}
	got := h.seen()
	if last := got[len(got)-1]; string(last.Payload) != "offline" || !last.Retain || last.Topic != topics.Health() {
		t.Errorf("the last message is %s on %s", last.Payload, last.Topic)
	}
	if got := once(got, topics.Alarm()); !slices.Equal(got, numbered(1, 50)) || box.len() != 0 {
		t.Errorf("a clean stop left %d messages; sent %v", box.len(), got)
	}
	await(t, "DISCONNECT", func() bool { h.mu.Lock(); defer h.mu.Unlock(); return h.closed == 1 })
	if p.Status().Connected {
		t.Error("status still says connected")
	}
}

// The last will on a real broker: a connection that breaks leaves "offline" on the board, the next one takes it off.
func TestWillOnARealBroker(t *testing.T) {
	w := &watch{}
	srv, addr := openReal(t, "127.0.0.1:0", w)
	cfg := config("tcp://" + addr)
	cfg.Offline = func() []byte { return []byte("offline") }
	p, stop := start(t, cfg, &store{})
	p.Offer(topics.Health(), []byte("up"), true)
	board := func() string {
		for _, pk := range srv.Topics.Messages(topics.Health()) {
			return string(pk.Payload)
		}
		return ""
	}
	await(t, "health on the board", func() bool { return board() == "up" })
	cl, ok := srv.Clients.Get(cfg.ClientID)
	if !ok {
		t.Fatal("no client")
	}
	cl.Stop(errors.New("cut")) // the broker loses the connection without a DISCONNECT
	await(t, "a second connection with health on the board", func() bool { return p.Status().Connections >= 2 && board() == "up" })
	stop()
	if board() != "offline" {
		t.Errorf("after a clean stop the board says %q", board())
	}
	if err := srv.Close(); err != nil {
		t.Error(err)
	}
}
