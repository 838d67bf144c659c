package uplink

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"
)

func TestLossIsNoticed(t *testing.T) {
	for _, c := range []struct {
		name string
		set  func(*hostile, *Config, *store)
	}{
		{"idle, closed by the broker", func(h *hostile, _ *Config, _ *store) {
			h.onConn = func(n int) (answer, bool) { return drop, n == 0 }
		}},
		{"idle, half open", func(h *hostile, _ *Config, _ *store) {
			h.onConn = func(n int) (answer, bool) { return withhold, n == 0 }
		}},
		{"idle, pings unanswered", func(h *hostile, _ *Config, _ *store) { h.deafPing = true }},
		{"pending, half open", func(h *hostile, cfg *Config, box *store) {
			h.onConn = func(n int) (answer, bool) { return withhold, n == 0 }
			cfg.wait.ack, cfg.wait.keepAlive = 50*time.Millisecond, time.Minute
			box.put(topics.Alarm(), "1", false)
		}},
		{"pending, acknowledgement withheld", func(h *hostile, cfg *Config, box *store) {
			h.onPub = func(n int, _ Message) answer { return []answer{withhold, ack}[min(n, 1)] }
			cfg.wait.ack, cfg.wait.keepAlive = 50*time.Millisecond, time.Minute
			box.put(topics.Alarm(), "1", false)
		}},
		{"pending, the writer blocked", func(h *hostile, cfg *Config, box *store) {
			h.onConn = func(n int) (answer, bool) { return withhold, n == 0 }
			cfg.wait.write, cfg.wait.ack, cfg.wait.keepAlive = time.Second, time.Minute, time.Minute
			box.put(topics.Alarm(), strings.Repeat("x", 16<<20), false) // more than the kernel's buffers hold
		}},
		{"server unavailable", func(h *hostile, _ *Config, _ *store) { h.code = 3 }},
		{"no answer to CONNECT", func(h *hostile, cfg *Config, _ *store) {
			h.mute = true
			cfg.wait.connect = 50 * time.Millisecond
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			h, box := &hostile{}, &store{}
			cfg := config("tcp://unset:1")
			c.set(h, &cfg, box)
			cfg.Broker = openHostile(t, h)
			p, stop := start(t, cfg, box)
			await(t, "a second connection", func() bool { return h.connected() >= 2 })
			await(t, "an empty outbox", func() bool { return box.len() == 0 })
			if h.code != 0 || h.mute {
				await(t, "a reason in the status", func() bool { return p.Status().LastError != "" })
			}
			stop()
		})
	}
}

// An outbox that cannot remove or read for a while costs neither the connection nor a message.
func TestTroubledOutbox(t *testing.T) {
	t.Run("remove", func(t *testing.T) {
		h, box := &hostile{}, &store{failAck: 4}
		for i := 1; i <= 40; i++ {
			box.put(topics.Alarm(), fmt.Sprint(i), false)
		}
		cfg := config(openHostile(t, h))
		_, out := logging(&cfg)
		_, stop := start(t, cfg, box)
		await(t, "an empty outbox", func() bool { return box.len() == 0 })
		stop()
		if h.connected() != 1 || len(once(h.seen(), topics.Alarm())) != 40 || len(h.seen()) != 40 {
			t.Errorf("%d connections, %d messages", h.connected(), len(h.seen()))
		}
		if !strings.Contains(out.String(), "the disk is full") {
			t.Error("nothing was logged")
		}
	})
	t.Run("read", func(t *testing.T) {
		h, box := &hostile{}, &store{nextErr: errors.New("message 3: checksum")}
		box.put(topics.Alarm(), "1", false)
		p, stop := start(t, config(openHostile(t, h)), box)
		p.Offer(topics.Features("t1"), []byte("f"), false)
		await(t, "what can be read, and features", func() bool { return h.hasAcked("1") && h.hasAcked("f") && box.len() == 0 })
		await(t, "the reason in the status", func() bool { return strings.Contains(p.Status().LastError, "message 3: checksum") })
		box.mu.Lock()
		box.nextErr = nil
		box.mu.Unlock()
		box.put(topics.Alarm(), "2", false)
		await(t, "the rest", func() bool { return h.hasAcked("2") })
		if h.connected() != 1 {
			t.Errorf("%d connections", h.connected())
		}
		stop()
	})
}

// A message with a topic that no broker takes would cost every connection: it is taken out, counted and logged.
func TestPoison(t *testing.T) {
	h, box := &hostile{}, &store{}
	box.put(topics.Alarm(), "1", false)
	for _, topic := range []string{"", "lapwing/+/alarm", "lapwing/\x00", "lapwing/\xff", strings.Repeat("x", 65536)} {
		box.put(topic, "poison", false)
	}
	box.put(topics.Alarm(), "2", false)
	p, stop := start(t, config(openHostile(t, h)), box)
	await(t, "an empty outbox", func() bool { return box.len() == 0 && h.hasAcked("2") })
	stop()
	if p.Status().Refused != 5 || h.connected() != 1 || h.hasAcked("poison") {
		t.Errorf("status %+v, %d connections", p.Status(), h.connected())
	}
}

func TestStopWhileConnecting(t *testing.T) {
	h := &hostile{code: 3}
	cfg := config(openHostile(t, h))
	cfg.RetryMin, cfg.RetryMax = time.Hour, time.Hour
	p, stop := start(t, cfg, &store{})
	await(t, "a refusal", func() bool { return p.Status().LastError != "" })
	stop() // ends although the next attempt is an hour away
}
