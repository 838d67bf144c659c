package uplink

import (
	"strings"
	"testing"
	"time"
)

// A broker that takes everything and passes nothing on, as one does whose access list forbids this user to write.
func TestABrokerThatThrowsAwayIsNoticed(t *testing.T) {
	h := &hostile{}
	cfg := config(openHostile(t, h))
	cfg.wait.ack = 50 * time.Millisecond
	_, out := logging(&cfg)
	p, _ := start(t, cfg, &store{})
	p.Offer(topics.Health(), []byte("up"), true)
	await(t, "it is noticed", func() bool { return strings.Contains(p.Status().Unheard, "access list") })
	if s := p.Status(); !s.Connected || !strings.Contains(out.String(), "not heard") {
		t.Errorf("status %+v, log %s", s, out)
	}
	h.send(0, publishOf(Message{Topic: topics.Health(), Payload: []byte("old")}, true))
	h.send(0, publishOf(Message{Topic: topics.Health(), Payload: []byte("up")}, false))
	await(t, "it is heard after all", func() bool { return p.Status().Unheard == "" })
}

func TestARealBrokerIsHeard(t *testing.T) {
	w := &watch{}
	srv, addr := openReal(t, "127.0.0.1:0", w)
	cfg := config("tcp://" + addr)
	_, out := logging(&cfg)
	p, stop := start(t, cfg, &store{})
	p.Offer(topics.Health(), []byte("up"), true)
	await(t, "its own health", func() bool { return p.Status().Echoes > 0 })
	stop()
	if s := p.Status(); s.Unheard != "" || strings.Contains(out.String(), "not heard") {
		t.Errorf("status %+v, log %s", s, out)
	}
	if err := srv.Close(); err != nil {
		t.Error(err)
	}
}
