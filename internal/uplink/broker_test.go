package uplink

import (
	"crypto/tls"
	"log/slog"
	"net"
	"slices"
	"sync"
	"testing"
	"time"

	"github.com/eclipse/paho.mqtt.golang/packets"
	mochi "github.com/mochi-mqtt/server/v2"
	"github.com/mochi-mqtt/server/v2/listeners"
	mochipackets "github.com/mochi-mqtt/server/v2/packets"
	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// limit bounds every wait of a test; no test passes or fails by how long something takes below it.
const limit = 20 * time.Second

// await waits until a condition holds.
func await(t *testing.T, what string, cond func() bool) {
	t.Helper()
	for end := time.Now().Add(limit); !cond(); time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("never came: %s", what)
		}
	}
}

// answer is what the hostile broker does with a publish.
type answer int

const (
	ack answer = iota
	withhold
	drop    // closes the connection without an acknowledgement
	ackDrop // acknowledges, then closes
)

// hostile is a broker that follows a script: it speaks MQTT 3.1.1 and breaks off where the test says.
type hostile struct {
	ln   net.Listener
	stop sync.WaitGroup

	tls      *tls.Config
	code     byte                                           // of every CONNACK
	onPub    func(n int, m Message) answer                  // n counts publishes over all connections; nil: ack
	onConn   func(n int) (answer, bool)                     // after CONNACK of connection n: drop, or withhold: never read again
	onSub    func(n int, p *packets.SubscribePacket) []byte // return codes; nil codes: no answer
	deafPing bool
	mute     bool      // never a CONNACK
	retained []Message // sent between SUBSCRIBE and SUBACK

	mu       sync.Mutex
	conns    []net.Conn
	connects []*packets.ConnectPacket
	got      []Message // publishes in the order of arrival
	acked    map[string]bool
	closed   int     // DISCONNECT packets
	events   []event // CONNECT, PUBLISH, SUBSCRIBE and DISCONNECT as they came
	pubacks  int     // from the client
}

func openHostile(t *testing.T, h *hostile) string {
	t.Helper()
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	scheme := "tcp://"
	if h.tls != nil {
		ln, scheme = tls.NewListener(ln, h.tls), "tls://"
	}
	h.ln, h.acked = ln, map[string]bool{}
	h.stop.Go(func() {
		for {
			c, err := ln.Accept()
			if err != nil {
				return
			}
			h.mu.Lock()
			h.conns = append(h.conns, c)
			n := len(h.conns) - 1
			h.mu.Unlock()
			h.stop.Go(func() { h.serve(c, n) })
		}
	})
	t.Cleanup(func() {
		ln.Close()
		h.mu.Lock()
		for _, c := range h.conns {
			c.Close()
		}
		h.mu.Unlock()
		h.stop.Wait()
	})
	return scheme + ln.Addr().String()
}

// event is a packet of connection n.
type event struct {
	n int
	p packets.ControlPacket
}

// send writes to connection n as the broker would.
func (h *hostile) send(n int, p packets.ControlPacket) {
	h.mu.Lock()
	c := h.conns[n]
	h.mu.Unlock()
	_ = p.Write(c)
}

func (h *hostile) hangUp() {
	h.mu.Lock()
	defer h.mu.Unlock()
	for _, c := range h.conns {
		c.Close()
	}
}

func (h *hostile) serve(c net.Conn, n int) {
	defer func() {
		if n >= 0 {
			c.Close()
		}
	}()
	for {
		p, err := packets.ReadPacket(c)
		if err != nil {
			return
		}
		switch p.(type) {
		case *packets.ConnectPacket, *packets.PublishPacket, *packets.SubscribePacket, *packets.DisconnectPacket:
			h.mu.Lock()
			h.events = append(h.events, event{n, p})
			h.mu.Unlock()
		}
		switch p := p.(type) {
		case *packets.ConnectPacket:
			h.mu.Lock()
			h.connects = append(h.connects, p)
			h.mu.Unlock()
			if h.mute {
				continue
			}
			r := packets.NewControlPacket(packets.Connack).(*packets.ConnackPacket)
			r.ReturnCode = h.code
			if r.Write(c) != nil || h.code != 0 {
				return
			}
			if h.onConn != nil {
				h.mu.Lock()
				a, act := h.onConn(n)
				h.mu.Unlock()
				switch {
				case act && a == drop:
					return
				case act:
					n = -1 // the link is half open: nobody reads, nobody closes
					return
				}
			}
		case *packets.PublishPacket:
			if !h.publish(c, p) {
				return
			}
		case *packets.SubscribePacket:
			for _, m := range h.retained {
				_ = publishOf(m, true).Write(c)
			}
			r := packets.NewControlPacket(packets.Suback).(*packets.SubackPacket)
			r.MessageID, r.ReturnCodes = p.MessageID, []byte{1}
			if h.onSub != nil {
				if r.ReturnCodes = h.onSub(n, p); r.ReturnCodes == nil {
					continue
				}
			}
			_ = r.Write(c)
		case *packets.PubackPacket:
			h.mu.Lock()
			h.pubacks++
			h.mu.Unlock()
		case *packets.PingreqPacket:
			if !h.deafPing {
				_ = packets.NewControlPacket(packets.Pingresp).Write(c)
			}
		case *packets.DisconnectPacket:
			h.mu.Lock()
			h.closed++
			h.mu.Unlock()
			return
		}
	}
}

func (h *hostile) publish(c net.Conn, p *packets.PublishPacket) bool {
	m := Message{Topic: p.TopicName, Payload: p.Payload, Retain: p.Retain}
	h.mu.Lock()
	n := len(h.got)
	h.got = append(h.got, m)
	a := ack
	if h.onPub != nil {
		a = h.onPub(n, m)
	}
	if a == ack || a == ackDrop {
		h.acked[string(p.Payload)] = true // before the client can know of it
	}
	h.mu.Unlock()
	if p.Qos > 0 && (a == ack || a == ackDrop) {
		r := packets.NewControlPacket(packets.Puback).(*packets.PubackPacket)
		r.MessageID = p.MessageID
		_ = r.Write(c)
	}
	return a == ack || a == withhold
}

func publishOf(m Message, retained bool) *packets.PublishPacket {
	p := packets.NewControlPacket(packets.Publish).(*packets.PublishPacket)
	p.TopicName, p.Payload, p.Retain = m.Topic, m.Payload, retained
	return p
}

func (h *hostile) seen() []Message {
	h.mu.Lock()
	defer h.mu.Unlock()
	return slices.Clone(h.got)
}

func (h *hostile) hasAcked(payload string) bool {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.acked[payload]
}

func (h *hostile) connected() int {
	h.mu.Lock()
	defer h.mu.Unlock()
	return len(h.connects)
}

// watch is a hook that lets everybody in and writes down what a real broker accepted, in its order.
type watch struct {
	mochi.HookBase
	mu  sync.Mutex
	got []Message
}

func (w *watch) ID() string { return "watch" }
func (w *watch) Provides(b byte) bool {
	return b == mochi.OnPublished || b == mochi.OnConnectAuthenticate || b == mochi.OnACLCheck
}
func (w *watch) OnConnectAuthenticate(*mochi.Client, mochipackets.Packet) bool { return true }
func (w *watch) OnACLCheck(*mochi.Client, string, bool) bool                   { return true }
func (w *watch) OnPublished(_ *mochi.Client, p mochipackets.Packet) {
	w.mu.Lock()
	defer w.mu.Unlock()
	w.got = append(w.got, Message{Topic: p.TopicName, Payload: slices.Clone(p.Payload), Retain: p.FixedHeader.Retain})
}

func (w *watch) seen() []Message {
	w.mu.Lock()
	defer w.mu.Unlock()
	return slices.Clone(w.got)
}

// openReal starts a whole broker on an address ("127.0.0.1:0" for any).
func openReal(t *testing.T, addr string, w *watch) (*mochi.Server, string) {
	t.Helper()
	var ln net.Listener
	await(t, "the address is free", func() (ok bool) {
		var err error
		ln, err = net.Listen("tcp", addr)
		return err == nil
	})
	srv := mochi.New(&mochi.Options{Logger: slog.New(slog.DiscardHandler), InlineClient: true})
	if err := srv.AddHook(w, nil); err != nil {
		t.Fatal(err)
	}
	if err := srv.AddListener(listeners.NewNet("test", ln)); err != nil {
		t.Fatal(err)
	}
	if err := srv.Serve(); err != nil {
		t.Fatal(err)
	}
	return srv, ln.Addr().String()
}
