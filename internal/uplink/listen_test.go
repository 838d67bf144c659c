package uplink

import (
	"context"
	"fmt"
	"slices"
	"strings"
	"sync"
	"testing"

	"github.com/eclipse/paho.mqtt.golang/packets"
)

// ear runs Listen until the test ends or stop is called.
type ear struct {
	mu      sync.Mutex
	got     []Received
	reports []string
	err     error
	done    chan struct{}
	stop    func()
}

func listen(t *testing.T, cfg Config) *ear {
	t.Helper()
	e := &ear{done: make(chan struct{})}
	ctx, cancel := context.WithCancel(context.Background())
	go func() {
		defer close(e.done)
		e.err = Listen(ctx, cfg, "lapwing", func(m Received) {
			e.mu.Lock()
			defer e.mu.Unlock()
			e.got = append(e.got, m)
		}, func(s string) {
			e.mu.Lock()
			defer e.mu.Unlock()
			e.reports = append(e.reports, s)
		})
	}()
	e.stop = func() { cancel(); <-e.done }
	t.Cleanup(e.stop)
	return e
}

func (e *ear) said() []string {
	e.mu.Lock()
	defer e.mu.Unlock()
	return slices.Clone(e.reports)
}

func (e *ear) heard() []Received {
	e.mu.Lock()
	defer e.mu.Unlock()
	return slices.Clone(e.got)
}

func TestListen(t *testing.T) {
	w := &watch{}
	srv, addr := openReal(t, "127.0.0.1:0", w)
	box := &store{}
	box.put(topics.Standing("t1/x"), "stands", true)
	p, stop := start(t, config("tcp://"+addr), box)
	await(t, "the retained message", func() bool { return box.len() == 0 })
	cfg := config("tcp://" + addr)
	cfg.ClientID = "control-room"
	e := listen(t, cfg)
	await(t, "the subscription", func() bool { return len(e.said()) == 1 })
	await(t, "what stands", func() bool { return len(e.heard()) == 1 }) // brokers send it apart from what comes new
	for i := 1; i <= 100; i++ {
		box.put(topics.Alarm(), fmt.Sprint(i), false)
	}
	p.Wake()
	await(t, "all", func() bool { return len(e.heard()) == 101 })
	got := e.heard()
	if !got[0].Retained || string(got[0].Payload) != "stands" || got[0].Topic != topics.Standing("t1/x") {
		t.Errorf("first came %+v", got[0])
	}
	var order []string
	for _, m := range got[1:] {
		if m.Retained || m.Topic != topics.Alarm() {
			t.Errorf("came %+v", m)
		}
		order = append(order, string(m.Payload))
	}
	if !slices.Equal(order, numbered(1, 100)) {
		t.Errorf("order %v", order)
	}
	// The broker goes and comes back: the listener says so and goes on.
	if err := srv.Close(); err != nil {
		t.Fatal(err)
	}
	await(t, "the loss", func() bool { return len(e.said()) >= 2 })
	srv, _ = openReal(t, addr, w)
	await(t, "the subscription again", func() bool { s := e.said(); return strings.HasPrefix(s[len(s)-1], "listening to ") })
	box.put(topics.Alarm(), "101", false)
	p.Wake()
	await(t, "one more", func() bool { g := e.heard(); return string(g[len(g)-1].Payload) == "101" })
	for i, want := range []string{"listening to tcp://" + addr + ", topics lapwing/#", "connection lost ("} {
		if got := e.said()[i]; !strings.HasPrefix(got, want) {
			t.Errorf("report %d is %q, want %q", i, got, want)
		}
	}
	e.stop()
	if e.err != nil {
		t.Errorf("a listener that is stopped gives %v", e.err)
	}
	stop()
	if err := srv.Close(); err != nil {
		t.Error(err)
	}
}

// More retained messages than the queue holds arrive before the subscription is answered.
func TestManyRetained(t *testing.T) {
	h := &hostile{}
	for i := range 1000 {
		h.retained = append(h.retained, Message{Topic: topics.Standing(fmt.Sprint(i)), Payload: []byte("stands")})
	}
	e := listen(t, config(openHostile(t, h)))
	await(t, "all of them and the subscription", func() bool { return len(e.heard()) == 1000 && len(e.said()) == 1 })
	for i, m := range e.heard() {
		if m.Topic != topics.Standing(fmt.Sprint(i)) || !m.Retained {
			t.Fatalf("number %d is %+v", i, m)
		}
	}
	e.stop()
}

// What the broker has an acknowledgement for is shown, also when the connection breaks before there was time to.
func TestListenShowsWhatCameBeforeTheLoss(t *testing.T) {
	h := &hostile{}
	cfg := config(openHostile(t, h))
	gate := make(chan struct{})
	var e ear
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() {
		defer close(done)
		e.err = Listen(ctx, cfg, "lapwing", func(m Received) {
			<-gate
			e.mu.Lock()
			defer e.mu.Unlock()
			e.got = append(e.got, m)
		}, func(s string) {
			e.mu.Lock()
			defer e.mu.Unlock()
			e.reports = append(e.reports, s)
		})
	}()
	await(t, "the subscription", func() bool { return len(e.said()) == 1 })
	for i := 1; i <= 200; i++ {
		p := publishOf(Message{Topic: topics.Alarm(), Payload: fmt.Append(nil, i)}, false)
		p.Qos, p.MessageID = 1, uint16(i)
		h.send(0, p)
	}
	await(t, "200 acknowledgements", func() bool { h.mu.Lock(); defer h.mu.Unlock(); return h.pubacks == 200 })
	h.hangUp()
	close(gate)
	await(t, "it connects again", func() bool { return h.connected() == 2 })
	cancel()
	<-done
	if n := len(e.heard()); n != 200 {
		t.Errorf("%d of 200 were shown", n)
	}
}

func TestListenIsRefused(t *testing.T) {
	suback := func(codes ...byte) func(int, *packets.SubscribePacket) []byte {
		return func(int, *packets.SubscribePacket) []byte { return codes }
	}
	for _, c := range []struct {
		name string
		h    *hostile
		want string
	}{
		{"subscription refused", &hostile{onSub: suback(0x80)}, "refuses a subscription to lapwing/#"},
		{"password refused", &hostile{code: packets.ErrRefusedBadUsernameOrPassword}, "refuses user or password"},
		{"client id refused", &hostile{code: packets.ErrRefusedIDRejected}, "refuses the client id"},
		{"no answer to the subscription", &hostile{onSub: suback()}, "no answer within"},
		{"closed at once", &hostile{onConn: func(int) (answer, bool) { return drop, true }}, ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			cfg := config(openHostile(t, c.h))
			cfg.wait.connect = cfg.wait.write
			if c.h.onSub == nil {
				cfg.wait.connect = limit
			}
			e := listen(t, cfg)
			<-e.done
			if e.err == nil || !strings.Contains(e.err.Error(), c.want) {
				t.Errorf("got %v, want %q", e.err, c.want)
			}
			if len(e.said()) != 0 {
				t.Errorf("it reported %v", e.said())
			}
		})
	}
	if err := Listen(context.Background(), config("tcp://127.0.0.1:1"), "lapwing", nil, nil); err == nil || !strings.Contains(err.Error(), "connect tcp://127.0.0.1:1") {
		t.Errorf("nobody there: %v", err)
	}
	for _, root := range []string{"", "#", "a/+", "/a", "a/", "$SYS"} {
		if err := Listen(context.Background(), config("tcp://127.0.0.1:1"), root, nil, nil); err == nil || !strings.Contains(err.Error(), "topic") {
			t.Errorf("root %q: %v", root, err)
		}
	}
}
