package uplink

import (
	"fmt"
	"testing"
)

func TestStandingIsRenewedOnEachConnection(t *testing.T) {
	h := &hostile{}
	cfg := config(openHostile(t, h))
	x, y := topics.Standing("t1.he.suction/leaking"), topics.Standing("t1/rod_load_max_kn/high")
	cfg.Standing = func() []Message {
		return []Message{{Topic: x, Payload: []byte("x stands")}, {Topic: y, Payload: []byte("y stands")}}
	}
	box := &store{}
	box.put(x, "", true) // x has gone to normal; the snapshot does not know yet
	p, _ := start(t, cfg, box)
	await(t, "the renewal", func() bool { return h.hasAcked("y stands") })
	for _, m := range h.seen() {
		if m.Topic == x && len(m.Payload) > 0 {
			t.Error("a renewal overwrote what the outbox had just said")
		}
		if !m.Retain {
			t.Errorf("%s is not retained", m.Topic)
		}
	}
	h.hangUp()
	await(t, "both on the next connection", func() bool { return h.connected() >= 2 && h.hasAcked("x stands") })
	if p.Status().LastError != "" {
		t.Errorf("status %+v", p.Status())
	}
}

// A transition that comes while renewals are still queued has the last word, whether its renewal has gone or waits.
func TestRenewalNeverOvertakesATransition(t *testing.T) {
	h := &hostile{}
	cfg := config(openHostile(t, h))
	box := &store{}
	var points []string
	for i := range 60 {
		points = append(points, topics.Standing(fmt.Sprintf("t1.he.d%d/leaking", i)))
	}
	cfg.Standing = func() (out []Message) {
		for _, topic := range points {
			out = append(out, Message{Topic: topic, Payload: []byte("stands")})
		}
		for _, topic := range points { // all go to normal in this very moment
			box.put(topic, "", true)
		}
		return out
	}
	p, stop := start(t, cfg, box)
	p.Offer(topics.Features("t1"), []byte("after"), false)
	await(t, "everything", func() bool { return box.len() == 0 && h.hasAcked("after") })
	stop()
	last := map[string]string{}
	renewed := 0
	for _, m := range h.seen() {
		last[m.Topic] = string(m.Payload)
		if string(m.Payload) == "stands" {
			renewed++
		}
	}
	for _, topic := range points {
		if s, there := last[topic]; !there || s != "" {
			t.Errorf("%s still says %q", topic, s)
		}
	}
	if renewed == 0 {
		t.Error("nothing was renewed: the test shows nothing")
	}
}
