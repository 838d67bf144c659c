package uplink

import (
	"context"
	"crypto/tls"
	"errors"
	"fmt"
	"net"
	"net/url"
	"sync/atomic"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

const (
	boxFlight    = 16   // alarms waiting for an acknowledgement; with the others not above 20, which brokers commonly allow
	otherFlight  = 4    // features, health and renewals waiting likewise
	maxUnsettled = 1024 // acknowledged messages that the outbox could not yet remove; beyond it nothing more is read
)

// session is one connection from connect to loss.
func (p *Publisher) session(ctx context.Context) error {
	opt, err := p.cfg.options()
	if err != nil {
		return err
	}
	var until time.Time
	var dialed atomic.Bool
	switch {
	case p.spark != nil:
		w, err := p.spark.will()
		if err != nil {
			return err
		}
		opt.SetBinaryWill(w.Topic, w.Payload, 1, false)
		defer p.spark.node.End()
	case p.cfg.Offline != nil:
		opt.SetBinaryWill(p.cfg.Topics.Health(), p.cfg.Offline(), 1, true)
	}
	lost := hearLoss(opt)
	opt.SetCustomOpenConnectionFn(func(u *url.URL, o mqtt.ClientOptions) (net.Conn, error) {
		conn, err := p.cfg.dial(o, u, func(st *tls.ConnectionState) { until = expiry(o.TLSConfig, st) })
		dialed.Store(err == nil)
		return conn, err
	})
	opt.SetOrderMatters(true) // commands come in order, and a flood of them makes no goroutines; their handler never waits
	c := mqtt.NewClient(opt)
	err = wait(ctx, c.Connect(), p.cfg.wait.connect+5*time.Second)
	if p.spark != nil && dialed.Load() {
		p.spark.sent()
	}
	if err != nil {
		c.Disconnect(0)
		return explain(p.cfg.Broker, err)
	}
	p.note(func(s *Status) {
		s.Connected, s.Since, s.LastError, s.Connections, s.CertUntil = true, time.Now().UTC(), "", s.Connections+1, until
	})
	p.cfg.Log.Info("uplink: connected", "broker", p.cfg.Broker)

	b := pump{p: p, c: c}
	if p.inbox != nil {
		b.asking = p.inbox.subscribe(c)
	}
	if p.spark != nil {
		err = b.greet(ctx, lost)
	}
	if err == nil {
		err = b.run(ctx, lost)
	}
	b.abandon()
	switch {
	case p.spark != nil:
		if ctx.Err() != nil || errors.Is(err, errHostAway) {
			b.leave()
		}
	case ctx.Err() != nil && p.cfg.Offline != nil: // a clean stop: the broker keeps the will to itself
		c.Publish(p.cfg.Topics.Health(), 1, true, p.cfg.Offline()).WaitTimeout(p.cfg.wait.drain)
	}
	c.Disconnect(250)
	return err
}

func hearLoss(o *mqtt.ClientOptions) <-chan error {
	lost := make(chan error, 1)
	o.SetConnectionLostHandler(func(_ mqtt.Client, err error) {
		select {
		case lost <- err:
		default:
		}
	})
	return lost
}

// pump publishes over one connection. The outbox's messages are settled from the front only, so that they leave it in
// the order in which the broker took them; the others have a queue of their own, so that a slow one holds up no alarm.
type pump struct {
	p       *Publisher
	c       mqtt.Client
	boxed   []flight // from the outbox: they stay there until they are acknowledged
	others  []flight // offers and standing alarms
	after   uint64
	settled []uint64 // acknowledged by the broker, not yet removed from the outbox
	again   time.Time
	asked   bool             // for the standing alarms, once on this connection
	renew   []Message        // standing alarms still to be sent
	fresh   map[string]bool  // retained topics that the outbox itself has sent on this connection: newer than any renewal
	asking  mqtt.Token       // the subscription to commands, while it is not answered
	rebirth <-chan time.Time // a host has asked for a birth, which comes then: no data until then
	bornAt  time.Time
	echo    echo
	stop    bool // only the outbox is emptied, then the connection ends
}

type flight struct {
	m     Message
	offer bool // offered again when the connection goes, unless a newer one has come
	token mqtt.Token
	sent  time.Time
}

// run publishes in order until the connection fails or ctx ends. Alarms go first.
func (b *pump) run(ctx context.Context, lost <-chan error) error {
	if err := b.birth(); err != nil {
		return err
	}
	var granted <-chan struct{}
	var ungranted <-chan time.Time
	if b.asking != nil {
		granted, ungranted = b.asking.Done(), time.After(b.p.cfg.wait.ack)
	}
	var bell <-chan struct{}
	if b.p.spark != nil {
		bell = b.p.spark.mail.bell
	}
	var renew <-chan time.Time
	if b.p.spark == nil { // a birth would be news to every Sparkplug host
		t := time.NewTicker(b.p.cfg.wait.renew)
		defer t.Stop()
		renew = t.C
	}
	done := ctx.Done()
	var drained <-chan time.Time
	for {
		empty, err := b.fill()
		if err != nil {
			return err
		}
		if b.stop && empty && len(b.boxed) == 0 {
			return ctx.Err()
		}
		box, other, late := b.next()
		var again <-chan time.Time
		if !b.again.IsZero() {
			again = time.After(time.Until(b.again))
		}
		select {
		case <-box:
			if err := b.settle(); err != nil {
				return err
			}
		case <-other:
			if err := b.settle(); err != nil {
				return err
			}
		case <-late:
			return fmt.Errorf("uplink: publish: no acknowledgement within %s", b.p.cfg.wait.ack)
		case err := <-lost:
			return fmt.Errorf("uplink: connection lost: %w", err)
		case <-granted:
			b.p.inbox.granted(b.asking)
			granted, ungranted = nil, nil
		case <-ungranted:
			b.p.inbox.granted(nil)
			granted, ungranted = nil, nil
		case <-renew: // a broker's node that dies can take a retained message with it and leave the connection up
			if err := b.birth(); err != nil {
				return err
			}
		case <-b.p.wake:
			if b.p.takeRenew() {
				if err := b.birth(); err != nil {
					return err
				}
			}
		case <-bell:
			if err := b.answer(); err != nil {
				return err
			}
		case <-b.rebirth:
			if err := b.birth(); err != nil {
				return err
			}
		case <-again:
			b.again = time.Time{}
			b.remove()
		case <-done:
			done, b.stop, drained = nil, true, time.After(b.p.cfg.wait.drain)
		case <-drained:
			return ctx.Err()
		}
	}
}

// birth begins a connection, or begins it again when that is asked for: health first, and the standing alarms as soon as
// the outbox is empty.
func (b *pump) birth() error {
	b.asked, b.renew, b.fresh = false, nil, map[string]bool{}
	if b.p.spark != nil {
		return b.sayBirth()
	}
	if m, ok := b.p.takeHealth(); ok {
		b.listen()
		return b.send(&b.others, m, true)
	}
	return nil
}

// next gives what completes when the front of each queue is acknowledged, and the time at which it is too late.
func (b *pump) next() (box, other <-chan struct{}, late <-chan time.Time) {
	var oldest time.Time
	if len(b.boxed) > 0 {
		box, oldest = b.boxed[0].token.Done(), b.boxed[0].sent
	}
	if len(b.others) > 0 {
		other = b.others[0].token.Done()
		if oldest.IsZero() || b.others[0].sent.Before(oldest) {
			oldest = b.others[0].sent
		}
	}
	if !oldest.IsZero() {
		late = time.After(time.Until(oldest.Add(b.p.cfg.wait.ack)))
	}
	return box, other, late
}

// fill sends what there is room for: the outbox, then once the standing alarms, then offers. empty says that the
// outbox has nothing more to send now.
func (b *pump) fill() (empty bool, err error) {
	if b.rebirth != nil {
		return false, nil
	}
	for len(b.boxed) < boxFlight && b.again.IsZero() && len(b.settled) < maxUnsettled {
		batch, err := b.p.box.Next(b.after, boxFlight-len(b.boxed))
		if err != nil {
			b.trouble("read", err)
		}
		for _, m := range batch {
			b.after = m.ID
			if err := checkTopic(m.Topic); err != nil { // it would cost the connection, again and again
				b.p.cfg.Log.Error("uplink: a message cannot be sent and is taken out", "id", m.ID, "err", err)
				b.p.note(func(s *Status) { s.Refused++; s.LastError = err.Error() })
				b.settled = append(b.settled, m.ID)
				b.remove()
				continue
			}
			if m.Retain && (!b.asked || len(b.renew) > 0) {
				b.fresh[m.Topic] = true
			}
			if b.p.spark != nil {
				if err := b.say(b.p.spark.alarm(m)); err != nil {
					return false, err
				}
			}
			if err := b.send(&b.boxed, m, false); err != nil {
				return false, err
			}
		}
		if len(batch) == 0 {
			empty = true
			if b.p.spark != nil && err == nil {
				if err := b.say(b.p.spark.caughtUp()); err != nil {
					return true, err
				}
			}
			break
		}
	}
	for len(b.others) < otherFlight {
		m, ok := b.p.takeReply()
		if !ok {
			break
		}
		if err := b.send(&b.others, m, false); err != nil {
			return empty, err
		}
	}
	if b.stop || !empty && b.again.IsZero() {
		return empty, nil
	}
	if b.again.IsZero() {
		if err := b.sendStanding(); err != nil {
			return empty, err
		}
	}
	for len(b.others) < otherFlight {
		m, ok := b.p.takeLatest()
		if !ok {
			break
		}
		if b.p.spark != nil {
			out, also := b.p.spark.offer(m)
			if err := b.say(out); err != nil {
				return empty, err
			}
			if !also {
				continue
			}
		}
		if err := b.send(&b.others, m, true); err != nil {
			return empty, err
		}
	}
	return empty, nil
}

// sendStanding renews the standing alarms that the outbox has not itself sent on this connection. They are asked for
// while the outbox is empty: what comes into it from then on is sent later, or drops the renewal, and so has the last
// word.
func (b *pump) sendStanding() error {
	if !b.asked {
		b.asked = true
		if b.p.cfg.Standing != nil {
			b.renew = b.p.cfg.Standing()
		}
	}
	for len(b.renew) > 0 && len(b.others) < otherFlight {
		m := b.renew[0]
		b.renew = b.renew[1:]
		if b.fresh[m.Topic] || checkTopic(m.Topic) != nil {
			continue
		}
		m.Retain = true
		if err := b.send(&b.others, m, false); err != nil {
			return err
		}
	}
	return nil
}

// send publishes one message. A publish that the connection could not take ends the connection at once: the next one
// must not overtake it.
func (b *pump) send(queue *[]flight, m Message, offer bool) error {
	t := b.c.Publish(m.Topic, 1, m.Retain, m.Payload)
	*queue = append(*queue, flight{m, offer, t, time.Now()})
	select {
	case <-t.Done():
		if err := t.Error(); err != nil {
			return fmt.Errorf("uplink: publish: %w", err)
		}
	default:
	}
	return nil
}

// settle removes what is acknowledged from the front of each queue. The error is that of a publish that failed.
func (b *pump) settle() error {
	n, bad := acknowledged(b.boxed)
	for _, f := range b.boxed[:n] {
		b.settled = append(b.settled, f.m.ID)
	}
	b.boxed = b.boxed[n:]
	b.remove()
	n, bad2 := acknowledged(b.others)
	b.others = b.others[n:]
	if bad == nil {
		bad = bad2
	}
	if bad != nil {
		return fmt.Errorf("uplink: publish: %w", bad)
	}
	return nil
}

// acknowledged counts the flights at the front that the broker has acknowledged, up to the first that has not come
// back or has failed.
func acknowledged(queue []flight) (n int, failed error) {
	for _, f := range queue {
		select {
		case <-f.token.Done():
			if err := f.token.Error(); err != nil {
				return n, err
			}
			n++
		default:
			return n, nil
		}
	}
	return n, nil
}

// remove takes acknowledged messages out of the outbox. When that fails the connection stays up and it is tried again:
// at worst they are sent twice after a restart.
func (b *pump) remove() {
	if len(b.settled) == 0 {
		return
	}
	if err := b.p.box.Ack(b.settled); err != nil {
		b.trouble("remove", err)
		return
	}
	b.p.note(func(s *Status) { s.Sent += uint64(len(b.settled)) })
	b.settled = nil
}

func (b *pump) trouble(what string, err error) {
	err = fmt.Errorf("uplink: outbox: %s: %w", what, err)
	b.p.cfg.Log.Error("uplink: outbox", "err", err)
	b.p.note(func(s *Status) { s.LastError = err.Error() })
	b.again = time.Now().Add(b.p.cfg.RetryMin)
}

// abandon ends with the connection: what was offered and not acknowledged is offered again, newest first to win.
func (b *pump) abandon() {
	b.echo.end()
	_ = b.settle()
	for i := len(b.others) - 1; i >= 0; i-- {
		switch {
		case b.others[i].offer:
			b.p.giveBack(b.others[i].m)
		case b.others[i].m.Topic == b.p.cfg.Topics.Receipt():
			b.p.replyAgain(b.others[i].m)
		}
	}
	b.boxed, b.others = nil, nil
}

// wait bounds every wait for a token: some never complete.
func wait(ctx context.Context, t mqtt.Token, limit time.Duration) error {
	timer := time.NewTimer(limit)
	defer timer.Stop()
	select {
	case <-t.Done():
		return t.Error()
	case <-ctx.Done():
		return ctx.Err()
	case <-timer.C:
		return fmt.Errorf("no acknowledgement within %s", limit)
	}
}
