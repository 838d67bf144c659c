package main

import (
	"encoding/json"
	"fmt"
	"net"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/wire"
)

// broker is a mosquitto of the test's own, with persistence, on a free port.
type broker struct {
	t    *testing.T
	port int
	conf string
	p    *program
}

func startBroker(t *testing.T) *broker {
	t.Helper()
	dir := t.TempDir()
	b := &broker{t: t, port: freePort(t), conf: filepath.Join(dir, "mosquitto.conf")}
	conf := fmt.Sprintf("listener %d 127.0.0.1\nallow_anonymous true\nlog_dest stderr\nlog_type all\n"+
		"persistence true\npersistence_location %s/\nautosave_on_changes true\nautosave_interval 1\nmax_queued_messages 0\n", b.port, dir)
	if os.Getuid() == 0 {
		conf += "user root\n" // or it could not write into the test's folder
	}
	if err := os.WriteFile(b.conf, []byte(conf), 0o644); err != nil {
		t.Fatal(err)
	}
	b.start()
	return b
}

func (b *broker) start() {
	b.t.Helper()
	b.p = start(b.t, nil, tool(b.t, "mosquitto"), "-c", b.conf)
	until(b.t, 10*time.Second, "mosquitto answers", func() bool {
		if !b.p.running() {
			b.t.Fatalf("mosquitto ended:\n%s", b.p.err.String())
		}
		c, err := net.DialTimeout("tcp", address(b.port), time.Second)
		if err == nil {
			c.Close()
		}
		return err == nil
	})
}

func (b *broker) kill() { b.p.kill() }

func (b *broker) url() string { return "tcp://" + address(b.port) }

// message is one line of mosquitto_sub.
type message struct {
	topic   string
	qos     int
	retain  bool
	payload string
}

const format = "%t %q %r %p"

func parse(t *testing.T, line string) message {
	t.Helper()
	f := strings.SplitN(line, " ", 4)
	if len(f) != 4 {
		t.Fatalf("mosquitto_sub says %q", line)
	}
	q, err := strconv.Atoi(f[1])
	if err != nil {
		t.Fatalf("mosquitto_sub says %q", line)
	}
	return message{topic: f[0], qos: q, retain: f[2] == "1", payload: f[3]}
}

// reader is an independent client with a session that outlives broken connections.
type reader struct {
	t *testing.T
	p *program
}

func (b *broker) subscribe(id, topic string) *reader {
	b.t.Helper()
	args := []string{"-h", "127.0.0.1", "-p", strconv.Itoa(b.port), "-i", id, "-c", "-q", "1", "-t", topic}
	// The first one makes the session and ends: from here on the broker keeps what comes for it.
	if out, errs, code := ran(b.t, tool(b.t, "mosquitto_sub"), append(args, "-E")...); code != 0 {
		b.t.Fatalf("mosquitto_sub: exit %d\n%s%s", code, out, errs)
	}
	return &reader{t: b.t, p: start(b.t, nil, tool(b.t, "mosquitto_sub"), append(args, "-F", format)...)}
}

// got is everything received so far.
func (r *reader) got() []message {
	var out []message
	for _, l := range r.p.out.lines() {
		out = append(out, parse(r.t, l))
	}
	return out
}

// newest is the last message whose topic ends in suffix.
func (r *reader) newest(suffix string) (m message, ok bool) {
	for _, g := range r.got() {
		if strings.HasSuffix(g.topic, suffix) {
			m, ok = g, true
		}
	}
	return m, ok
}

// retained is what somebody sees who comes late.
func (b *broker) retained(topic string) []message {
	b.t.Helper()
	out, errs, code := ran(b.t, tool(b.t, "mosquitto_sub"), "-h", "127.0.0.1", "-p", strconv.Itoa(b.port), "-i", "late", "-q", "1", "-t", topic,
		"--retained-only", "-W", "2", "-F", format)
	if code != 0 && code != 27 { // 27: nothing more came
		b.t.Fatalf("mosquitto_sub: exit %d\n%s", code, errs)
	}
	var ms []message
	for _, l := range strings.Split(strings.TrimSuffix(out, "\n"), "\n") {
		if l != "" {
			ms = append(ms, parse(b.t, l))
		}
	}
	return ms
}

// said is an alarm as it came over the wire, with its evidence.
type said struct {
	wire.Alarm
	Detail *wire.Finding `json:"detail"`
}

func (m message) alarm(t *testing.T) said {
	t.Helper()
	var a said
	if err := json.Unmarshal([]byte(m.payload), &a); err != nil {
		t.Fatalf("%s: %v\n%s", m.topic, err, m.payload)
	}
	return a
}

// health is the part of the health message that the tests look at.
type health struct {
	State    string `json:"state"`
	Line     string `json:"line"`
	Baseline bool   `json:"baseline"`
}

func (m message) health(t *testing.T) health {
	t.Helper()
	var h health
	if err := json.Unmarshal([]byte(m.payload), &h); err != nil {
		t.Fatalf("%s: %v\n%s", m.topic, err, m.payload)
	}
	return h
}

// transitions are the alarm messages in the order received, repeats of an id dropped, and how many were dropped.
func (r *reader) transitions() (as []said, repeats int) {
	r.t.Helper()
	seen := map[uint64]bool{}
	for _, m := range r.got() {
		if !strings.HasSuffix(m.topic, "/alarm") {
			continue
		}
		a := m.alarm(r.t)
		if seen[a.ID] {
			repeats++
			continue
		}
		seen[a.ID] = true
		as = append(as, a)
	}
	return as, repeats
}
