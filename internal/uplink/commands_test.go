package uplink

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"net"
	"slices"
	"strings"
	"sync"
	"testing"
	"testing/iotest"
	"time"

	"github.com/eclipse/paho.mqtt.golang/packets"
	"pgregory.net/rapid"

	"lapwing/internal/wire"
)

// crew carries orders out as the station does, as far as the uplink sees it.
type crew struct {
	mu      sync.Mutex
	orders  []wire.Order
	refused []string
	fail    error
}

func (c *crew) take(_ context.Context, o wire.Order, refusal error) (wire.Receipt, error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.fail != nil {
		return wire.Receipt{}, c.fail
	}
	r := wire.Receipt{Version: 1, OnDisk: true, Caution: wire.Caution}
	r.Act = wire.Act{Type: "act", ID: uint64(len(c.orders) + len(c.refused) + 1), Verb: o.Verb, By: o.By, Via: o.Via, Accepted: refusal == nil, Said: "done"}
	if refusal != nil {
		r.Said = refusal.Error()
		c.refused = append(c.refused, r.Said)
		return r, nil
	}
	c.orders = append(c.orders, o)
	return r, nil
}

func (c *crew) done() (orders []wire.Order, refused []string) {
	c.mu.Lock()
	defer c.mu.Unlock()
	return slices.Clone(c.orders), slices.Clone(c.refused)
}

// commanded starts a publisher that hears commands from a scripted broker.
func commanded(t *testing.T, h *hostile, c *crew, edit func(*Config)) (p *Publisher, out *buffer) {
	t.Helper()
	cfg := config(openHostile(t, h))
	cfg.Commands = &Commands{Allowed: []string{wire.VerbAcknowledge, wire.VerbRebirth}, Take: c.take}
	_, out = logging(&cfg)
	if edit != nil {
		edit(&cfg)
	}
	p, _ = start(t, cfg, &store{})
	return p, out
}

func hearing(t *testing.T, p *Publisher) {
	t.Helper()
	await(t, "the subscription is granted", func() bool { return p.Status().Commands.Hearing })
}

func (h *hostile) command(n int, payload string) {
	h.send(n, publishOf(Message{Topic: topics.Command(), Payload: []byte(payload)}, false))
}

// receipts are those that came, by request.
func (h *hostile) receipts(t *testing.T) (out []wire.Receipt) {
	t.Helper()
	for _, m := range h.seen() {
		if m.Topic != topics.Receipt() {
			continue
		}
		var r wire.Receipt
		if err := json.Unmarshal(m.Payload, &r); err != nil || m.Retain {
			t.Errorf("receipt %s, retained %v: %v", m.Payload, m.Retain, err)
		}
		out = append(out, r)
	}
	return out
}

func TestCommandsAreAnswered(t *testing.T) {
	h, c := &hostile{}, &crew{}
	p, out := commanded(t, h, c, nil)
	hearing(t, p)
	const leak = `"key":"t1.he.suction/leaking","by":"A"`
	for i, q := range []struct{ payload, request, said string }{
		{`{"request":"a","verb":"acknowledge",` + leak + `}`, "a", "done"},
		{`{"request":"a","verb":"acknowledge",` + leak + `}`, "a", "done"}, // a repeat
		{`{"request":"a","verb":"acknowledge","key":"another","by":"A"}`, "a", "another command had the same request"},
		{`{"request":"b","verb":"shelve","reason":"r","for_s":60,` + leak + `}`, "b", "does not allow it"},
		{`{"request":"c","verb":"learn-start","by":"A"}`, "c", "does not allow it"},
		{`{"request":"d","verb":"acknowledge","trip":true,` + leak + `}`, "d", "unknown field"},
		{`{"verb":"acknowledge",` + leak + `}`, "", "no request"},
		{`not JSON`, "", "invalid character"},
		{`{"request":"e","by":"` + strings.Repeat("x", wire.MaxOrder) + `"}`, "", "more than 8192 bytes"},
		{`{"request":"f","by":"` + strings.Repeat("x", 3<<20) + `"}`, "", "more than 8192 bytes"}, // cut at the door
		{`{"request":"g","verb":"rebirth","by":"A"}`, "g", "done"},
	} {
		h.command(0, q.payload)
		await(t, "receipt "+fmt.Sprint(i), func() bool { return len(h.receipts(t)) == i+1 })
		if r := h.receipts(t)[i]; r.Request != q.request || !strings.Contains(r.Said, q.said) || r.Accepted != (q.said == "done") {
			t.Errorf("%.100s: receipt %+v, want %q", q.payload, r, q.said)
		}
	}
	orders, refused := c.done()
	if len(orders) != 2 || orders[0].Verb != "acknowledge" || orders[0].Via != "mqtt" || len(refused) != 8 {
		t.Errorf("carried out %+v, booked as refused %q", orders, refused)
	}
	st := p.Status()
	if s := st.Commands; s.Accepted != 2 || s.Refused != 8 || s.Repeated != 1 || st.Connections != 1 {
		t.Errorf("status %+v, commands %+v", st, s)
	}
	if !strings.Contains(out.String(), "asks nobody who he is") || !strings.Contains(out.String(), "commands are heard") {
		t.Errorf("log:\n%s", out)
	}
}

// A retained command would come again with every connection: it is refused once, and never carried out.
func TestRetainedCommandIsRefusedOnce(t *testing.T) {
	h, c := &hostile{}, &crew{}
	h.retained = []Message{{Topic: topics.Command(), Payload: []byte(`{"request":"a","verb":"rebirth","by":"A"}`)}}
	p, _ := commanded(t, h, c, nil)
	for i := range 3 {
		await(t, "a connection", func() bool { return h.connected() == i+1 && p.Status().Commands.Hearing })
		await(t, "its retained command", func() bool { _, r := c.done(); return len(r) == 1 && len(p.inbox.queue) == 0 })
		h.hangUp()
		await(t, "the loss is noticed", func() bool { return h.connected() > i+1 || !p.Status().Connected })
	}
	if orders, refused := c.done(); len(orders) != 0 || len(refused) != 1 || !strings.Contains(refused[0], "without retain") {
		t.Errorf("carried out %+v, refused %q", orders, refused)
	}
}

// A flood of commands costs the line no more than the pace, the journal one entry, and alarms nothing.
func TestTooManyCommands(t *testing.T) {
	h, c := &hostile{}, &crew{}
	p, _ := commanded(t, h, c, func(cfg *Config) { cfg.pace = pace{burst: 5, every: time.Hour, tell: 20 * time.Millisecond} })
	hearing(t, p)
	const n = 400
	for i := range n {
		h.command(0, fmt.Sprintf(`{"request":"%d","verb":"acknowledge","key":"k","by":"A"}`, i))
	}
	await(t, "all are counted", func() bool { s := p.Status().Commands; return s.Accepted == 5 && s.Accepted+s.TooMany == n })
	await(t, "the journal is told", func() bool { _, r := c.done(); return len(r) > 0 })
	orders, refused := c.done()
	if len(orders) != 5 || !strings.Contains(refused[0], "came too fast") {
		t.Errorf("%d carried out, refused %q", len(orders), refused)
	}
	if st := p.Status(); st.Connections != 1 {
		t.Errorf("%d connections", st.Connections)
	}
}

func TestCommandThatCannotBeCarriedOut(t *testing.T) {
	h, c := &hostile{}, &crew{fail: errors.New("too much is waiting")}
	p, _ := commanded(t, h, c, nil)
	hearing(t, p)
	ask := `{"request":"a","verb":"rebirth","by":"A"}`
	h.command(0, ask)
	await(t, "a receipt", func() bool { return len(h.receipts(t)) == 1 })
	if r := h.receipts(t)[0]; r.Accepted || r.Request != "a" || !strings.Contains(r.Said, "not carried out: too much is waiting") {
		t.Errorf("receipt %+v", r)
	}
	c.mu.Lock()
	c.fail = nil
	c.mu.Unlock()
	h.command(0, ask) // asking again with the same request is right here
	await(t, "it is carried out", func() bool { o, _ := c.done(); return len(o) == 1 })
}

func TestRefusedSubscriptionToCommands(t *testing.T) {
	for name, codes := range map[string][]byte{"refuses a subscription": {subscriptionRefused}, "does not answer": nil} {
		h, c := &hostile{onSub: func(int, *packets.SubscribePacket) []byte { return codes }}, &crew{}
		p, out := commanded(t, h, c, func(cfg *Config) { cfg.wait.ack = 100 * time.Millisecond })
		await(t, name, func() bool { return strings.Contains(p.Status().Commands.LastError, name) })
		p.Offer(topics.Health(), []byte("up"), true)
		await(t, "alarms and health go on", func() bool { return h.hasAcked("up") })
		if s := p.Status(); s.Commands.Hearing || !s.Connected || s.Connections != 1 || !strings.Contains(out.String(), "commands are not heard") {
			t.Errorf("%s: status %+v, commands %+v, log:\n%s", name, s, s.Commands, out)
		}
	}
}

// A receipt whose acknowledgement is lost is sent again.
func TestReceiptSurvivesALoss(t *testing.T) {
	h, c := &hostile{}, &crew{}
	first := true
	h.onPub = func(_ int, m Message) answer {
		if m.Topic == topics.Receipt() && first {
			first = false
			return drop
		}
		return ack
	}
	p, _ := commanded(t, h, c, nil)
	hearing(t, p)
	h.command(0, `{"request":"a","verb":"rebirth","by":"A"}`)
	await(t, "the receipt, twice", func() bool { return len(h.receipts(t)) == 2 })
	if o, _ := c.done(); len(o) != 1 || h.connected() != 2 {
		t.Errorf("carried out %d times over %d connections", len(o), h.connected())
	}
}

func TestRenewSendsHealthAndStandingAgain(t *testing.T) {
	h := &hostile{}
	cfg := config(openHostile(t, h))
	x := topics.Standing("t1.he.suction/leaking")
	cfg.Standing = func() []Message { return []Message{{Topic: x, Payload: []byte("stands")}} }
	p, _ := start(t, cfg, &store{})
	p.Offer(topics.Health(), []byte("up"), true)
	count := func(topic string) (n int) {
		for _, m := range h.seen() {
			if m.Topic == topic {
				n++
			}
		}
		return n
	}
	await(t, "both", func() bool { return count(x) == 1 && count(topics.Health()) == 1 })
	p.Renew()
	await(t, "both again", func() bool { return count(x) == 2 && count(topics.Health()) == 2 })
	if h.connected() != 1 {
		t.Errorf("%d connections", h.connected())
	}
}

// A node of a cluster can lose a retained message and leave the connection up.
func TestStandingIsRenewedFromTimeToTime(t *testing.T) {
	h := &hostile{}
	cfg := config(openHostile(t, h))
	cfg.wait.renew = 10 * time.Millisecond
	x := topics.Standing("t1.he.suction/leaking")
	cfg.Standing = func() []Message { return []Message{{Topic: x, Payload: []byte("stands")}} }
	start(t, cfg, &store{})
	await(t, "five times", func() bool { return len(h.seen()) >= 5 })
	if h.connected() != 1 {
		t.Errorf("%d connections", h.connected())
	}
}

func TestCommandsThatCannotBeAllowed(t *testing.T) {
	take := (&crew{}).take
	for want, c := range map[string]*Commands{
		`"learn-start" cannot be allowed`: {Allowed: []string{"learn-start"}, Take: take},
		"nobody takes them":               {Allowed: []string{"reset"}},
	} {
		cfg := config("tcp://127.0.0.1:1")
		cfg.Commands = c
		if _, err := New(cfg, &store{}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
	cfg := config("tcp://192.0.2.1:1883")
	cfg.UserFile = "u"
	cfg.Commands = &Commands{Allowed: []string{"reset"}, Take: take}
	_, out := logging(&cfg)
	if _, err := New(cfg, &store{}); err != nil || !strings.Contains(out.String(), "can be forged") {
		t.Errorf("%v, log %s", err, out)
	}
}

func TestReaderShowsReceipts(t *testing.T) {
	var out strings.Builder
	r := Reader{W: &out, Root: topics.Root}
	for topic, payload := range map[string]string{
		topics.Command(): `{"request":"a","verb":"trip"}`,
		topics.Receipt(): `{"request":"desk-1","verb":"acknowledge","by":"A\u001b[2J","accepted":true,"said":"now acknowledged"}`,
	} {
		r.Show(Received{Topic: topic, Payload: []byte(payload)})
	}
	if want := "heron-meadow: order acknowledge of desk-1 by A?[2J carried out: now acknowledged\n"; out.String() != want {
		t.Errorf("%q, want %q", out.String(), want)
	}
}

// pipe is a connection of bytes that are there.
type pipe struct {
	net.Conn
	io.Reader
}

func (p pipe) Read(b []byte) (int, error) { return p.Reader.Read(b) }

// Packets that fit come through unchanged, larger messages come cut, however the bytes arrive.
func TestNarrow(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		var in, want bytes.Buffer
		for range rapid.IntRange(0, 6).Draw(rt, "packets") {
			n := rapid.IntRange(0, 400).Draw(rt, "length")
			body := bytes.Repeat([]byte{byte(n)}, n)
			kind := rapid.SampledFrom([]byte{kindPublish<<4 | 2, 4 << 4, 9 << 4}).Draw(rt, "kind")
			if kind>>4 != kindPublish {
				body = body[:min(n, 150)]
			}
			in.Write(append(append([]byte{kind}, varint(len(body))...), body...))
			body = body[:min(len(body), 150)]
			want.Write(append(append([]byte{kind}, varint(len(body))...), body...))
		}
		r := io.Reader(&in)
		if rapid.Bool().Draw(rt, "byte by byte") {
			r = iotest.OneByteReader(r)
		}
		got, err := io.ReadAll(iotest.HalfReader(narrowed(pipe{nil, r}, 150)))
		if err != nil || !bytes.Equal(got, want.Bytes()) {
			rt.Fatalf("%v: % x, want % x", err, got, want.Bytes())
		}
	})
	for in, want := range map[string]string{
		"\x40\x97\x01":             "kind 4 with 151 bytes",
		"\x30\xff\xff\xff\xff\x01": "more than 4 bytes",
		"\x30\x80":                 "unexpected EOF",
	} {
		if _, err := io.ReadAll(narrowed(pipe{nil, strings.NewReader(in)}, 150)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("% x: %v, want %q", in, err, want)
		}
	}
}

// Whatever a broker sends, what comes through is packets of the allowed size, and no panic.
func FuzzNarrow(f *testing.F) {
	f.Add([]byte("\x30\x03abc"), uint64(1))
	f.Add([]byte("\x30\xff\xff\xff\x7fabc"), uint64(2))
	f.Add([]byte("\xff\xff"), uint64(3))
	f.Fuzz(func(t *testing.T, in []byte, seed uint64) {
		rng := rand.New(rand.NewPCG(seed, 0))
		n := narrowed(pipe{nil, bytes.NewReader(in)}, 10)
		total := 0
		for {
			k, err := n.Read(make([]byte, 1+rng.IntN(5)))
			if total += k; err != nil {
				break
			}
			if k == 0 {
				t.Fatal("nothing read, no error")
			}
		}
		if total > len(in) {
			t.Fatalf("%d bytes out of %d", total, len(in))
		}
	})
}
