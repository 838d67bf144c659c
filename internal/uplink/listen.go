package uplink

import (
	"context"
	"errors"
	"fmt"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

// Received is one message as a listener gets it.
type Received struct {
	Topic    string
	Payload  []byte
	Retained bool
}

// Listen subscribes to every skid under root and gives each message to on, one at a time, in order, until ctx ends.
// It connects again by itself; report hears of connections and losses. A first connection that fails, for a wrong
// address or password or a refused subscription, is an error at once.
//
// The session is not kept by the broker: transitions sent while the listener is away are not sent again to it. It sees
// what still stands when it comes back, and a Reader tells which numbers are missing.
func Listen(ctx context.Context, cfg Config, root string, on func(Received), report func(string)) error {
	if err := cfg.check(2*time.Second, 30*time.Second); err != nil {
		return err
	}
	if err := checkRoot(root); err != nil {
		return err
	}
	ever, pause := false, cfg.RetryMin
	for ctx.Err() == nil {
		began := time.Now()
		up, err := listenOnce(ctx, cfg, root, on, report)
		if ctx.Err() != nil {
			return nil
		}
		if ever = ever || up; !ever {
			return err
		}
		if up && time.Since(began) > steady {
			pause = cfg.RetryMin
		}
		report(fmt.Sprintf("connection lost (%v); trying again", err))
		if !sleep(ctx, pause) {
			return nil
		}
		pause = min(longer(pause, err), cfg.RetryMax)
	}
	return nil
}

// listenOnce is one connection; up says whether the subscription ever stood.
func listenOnce(ctx context.Context, cfg Config, root string, on func(Received), report func(string)) (up bool, err error) {
	o, err := cfg.options()
	if err != nil {
		return false, err
	}
	o.SetOrderMatters(true)
	lost := hearLoss(o)
	queue := make(chan Received, 256)
	done := make(chan struct{})
	c := mqtt.NewClient(o)
	if err := wait(ctx, c.Connect(), cfg.wait.connect+5*time.Second); err != nil {
		c.Disconnect(0)
		return false, explain(cfg.Broker, err)
	}
	defer func() {
		for { // what has come is shown, also when the connection has gone since
			select {
			case m := <-queue:
				on(m)
				continue
			default:
			}
			break
		}
		close(done)
		c.Disconnect(100)
	}()
	filter := root + "/#"
	t := c.Subscribe(filter, 1, func(_ mqtt.Client, m mqtt.Message) {
		select {
		case queue <- Received{m.Topic(), m.Payload(), m.Retained()}:
		case <-done:
		}
	})
	// Retained messages may come before the answer to the subscription, more than the queue holds: both are awaited.
	answer, late := t.Done(), time.After(cfg.wait.connect)
	for {
		select {
		case m := <-queue:
			on(m)
		case <-answer:
			if err := granted(t, filter); err != nil {
				return false, err
			}
			answer, late, up = nil, nil, true
			report("listening to " + cfg.Broker + ", topics " + filter)
		case <-late:
			return false, fmt.Errorf("uplink: subscribe %s: no answer within %s", filter, cfg.wait.connect)
		case err := <-lost:
			return up, err
		case <-ctx.Done():
			return up, nil
		}
	}
}

const subscriptionRefused = 0x80 // MQTT 3.1.1, section 3.9.3

func granted(t mqtt.Token, filter string) error {
	if st, ok := t.(*mqtt.SubscribeToken); ok {
		if code, there := st.Result()[filter]; there && code == subscriptionRefused {
			return fmt.Errorf("uplink: the broker refuses a subscription to %s: its access list must allow this user to read it", filter)
		}
	} else {
		return errors.New("uplink: the library gave a token of another kind")
	}
	if err := t.Error(); err != nil {
		return fmt.Errorf("uplink: subscribe %s: %w", filter, err)
	}
	return nil
}
