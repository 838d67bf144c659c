package uplink

import (
	"context"
	"errors"
	"fmt"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"

	"lapwing/internal/uplink/sparkplug"
)

// greet subscribes to what hosts say and waits, if a primary host is named, until it is there: before that nothing is
// published (tck-id-message-flow-edge-node-birth-publish-phid-wait, -ncmd-subscribe).
func (b *pump) greet(ctx context.Context, lost <-chan error) error {
	s := b.p.spark
	hear := func(_ mqtt.Client, m mqtt.Message) { s.mail.put(Received{m.Topic(), m.Payload(), m.Retained()}) }
	topic := s.node.Topic(sparkplug.NCmd, "")
	t := b.c.Subscribe(topic, 1, hear)
	if err := wait(ctx, t, b.p.cfg.wait.connect); err != nil {
		return fmt.Errorf("uplink: subscribe %s: %w", topic, err)
	}
	if err := granted(t, topic); err != nil { // a host that comes late learns the names with the next connection only
		b.p.cfg.Log.Error("uplink: sparkplug: no host can ask for a birth", "err", err)
	}
	if s.cfg.PrimaryHost == "" {
		return nil
	}
	topic = sparkplug.StateTopic(s.cfg.PrimaryHost)
	t = b.c.Subscribe(topic, 1, hear)
	err := wait(ctx, t, b.p.cfg.wait.connect)
	if err == nil {
		err = granted(t, topic)
	}
	if err != nil {
		return fmt.Errorf("uplink: subscribe %s: %w", topic, err)
	}
	for said := false; ; {
		b.hear()
		if s.host.Online() {
			return nil
		}
		if !said {
			said = true
			why := "uplink: sparkplug: waits for the primary host " + s.cfg.PrimaryHost + ", which does not say that it is online; alarms are kept"
			b.p.cfg.Log.Warn(why)
			b.p.note(func(s *Status) { s.LastError = why })
		}
		select {
		case <-s.mail.bell:
		case err := <-lost:
			return fmt.Errorf("uplink: connection lost: %w", err)
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}

// hear looks at what hosts have sent; rebirth tells whether one has asked for everything to be said again.
func (b *pump) hear() (rebirth bool) {
	s := b.p.spark
	for _, m := range s.mail.empty() {
		if m.Topic != s.node.Topic(sparkplug.NCmd, "") {
			if err := s.host.Hear(m.Payload); err != nil {
				b.p.cfg.Log.Warn("uplink: sparkplug: what the primary host says cannot be read", "topic", m.Topic, "err", err)
			}
			continue
		}
		if m.Retained { // it would come again with every connection
			b.p.cfg.Log.Warn("uplink: sparkplug: a retained command is passed over", "topic", m.Topic)
			continue
		}
		ask, refused, err := s.node.Command(m.Payload)
		switch {
		case err != nil:
			b.p.cfg.Log.Warn("uplink: sparkplug: a command cannot be read", "err", err)
		case len(refused) > 0:
			b.p.cfg.Log.Warn("uplink: sparkplug: commands that this node does not obey", "metrics", len(refused), "first", clip(refused[0]))
		}
		rebirth = rebirth || ask
	}
	return rebirth
}

func clip(s string) string {
	if len(s) > 80 {
		s = s[:80] + "…"
	}
	return fmt.Sprintf("%q", s)
}

var errHostAway = errors.New("uplink: sparkplug: the primary host is away; alarms are kept")

// answer is what follows from a host's messages on a connection that has been born.
func (b *pump) answer() error {
	rebirth := b.hear()
	if b.p.spark.cfg.PrimaryHost != "" && !b.p.spark.host.Online() {
		return errHostAway // tck-id-message-flow-edge-node-birth-publish-phid-offline
	}
	if rebirth && b.rebirth == nil {
		// At once, and from now on no data until then; but never faster than this, whoever asks.
		b.rebirth = time.After(time.Until(b.bornAt.Add(b.p.cfg.wait.birth)))
	}
	return nil
}

// sayBirth is the beginning of a connection, and again when it is asked for.
func (b *pump) sayBirth() error {
	s := b.p.spark
	var standing []Message
	if b.p.cfg.Standing != nil {
		standing = b.p.cfg.Standing()
	}
	b.rebirth, b.bornAt = nil, time.Now()
	err := b.say(s.birth(standing, b.p.peekLatest()))
	b.p.note(func(s *Status) { s.Births++ })
	return err
}

// say publishes at QoS 0. What the connection could not take ends it: the next one begins with a birth.
func (b *pump) say(ms []sparkplug.Message) error {
	for i := range ms {
		t := b.c.Publish(ms[i].Topic, 0, false, ms[i].Payload)
		select {
		case <-t.Done():
			if err := t.Error(); err != nil {
				return fmt.Errorf("uplink: publish: %w", err)
			}
		default:
		}
	}
	return nil
}

// leave says the node's death before a connection is closed on purpose: the broker then keeps the will to itself.
func (b *pump) leave() {
	s := b.p.spark
	if s.node.Born() {
		d := s.node.Death(s.now())
		b.c.Publish(d.Topic, 1, false, d.Payload).WaitTimeout(b.p.cfg.wait.drain)
	}
}

// peekLatest gives the newest offers without taking them, oldest first.
func (p *Publisher) peekLatest() (out []Message) {
	p.mu.Lock()
	defer p.mu.Unlock()
	for _, t := range p.order {
		out = append(out, p.latest[t])
	}
	return out
}
