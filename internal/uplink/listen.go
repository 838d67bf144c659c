package uplink

import (
	"context"
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
// It connects again by itself; report hears of connections and losses.
func Listen(ctx context.Context, cfg Config, root string, on func(Received), report func(string)) error {
	ever := false
	for ctx.Err() == nil {
		up, err := listenOnce(ctx, cfg, root, on, report)
		if ctx.Err() != nil {
			return nil
		}
		if ever = ever || up; !ever {
			return err // a wrong address or password is said at once
		}
		report(fmt.Sprintf("connection lost (%v); trying again", err))
		select {
		case <-ctx.Done():
			return nil
		case <-time.After(2 * time.Second):
		}
	}
	return nil
}

// listenOnce is one connection; up says whether it ever stood.
func listenOnce(ctx context.Context, cfg Config, root string, on func(Received), report func(string)) (up bool, err error) {
	o := mqtt.NewClientOptions().AddBroker(cfg.Broker).SetClientID(cfg.ClientID).SetProtocolVersion(4).
		SetCleanSession(true).SetAutoReconnect(false).SetConnectRetry(false).SetOrderMatters(true).
		SetKeepAlive(30 * time.Second).SetPingTimeout(10 * time.Second).SetConnectTimeout(10 * time.Second).SetWriteTimeout(5 * time.Second)
	if err := secure(o, cfg); err != nil {
		return up, err
	}
	lost := make(chan error, 1)
	o.SetConnectionLostHandler(func(_ mqtt.Client, err error) {
		select {
		case lost <- err:
		default:
		}
	})
	queue := make(chan Received, 256)
	done := make(chan struct{})
	defer close(done)
	c := mqtt.NewClient(o)
	if err := wait(ctx, c.Connect(), 15*time.Second); err != nil {
		return up, fmt.Errorf("uplink: connect %s: %w", cfg.Broker, err)
	}
	defer c.Disconnect(100)
	t := c.Subscribe(root+"/#", 1, func(_ mqtt.Client, m mqtt.Message) {
		select {
		case queue <- Received{m.Topic(), m.Payload(), m.Retained()}:
		case <-done:
		}
	})
	if err := wait(ctx, t, 10*time.Second); err != nil {
		return up, fmt.Errorf("uplink: subscribe %s/#: %w", root, err)
	}
	if st, ok := t.(*mqtt.SubscribeToken); ok {
		if code, there := st.Result()[root+"/#"]; there && code == 0x80 {
			return up, fmt.Errorf("uplink: the broker refuses a subscription to %s/#: its access list must allow this user to read it", root)
		}
	}
	up = true
	report("listening to " + cfg.Broker + ", topics " + root + "/#")
	for {
		select {
		case m := <-queue:
			on(m)
		case err := <-lost:
			return up, err
		case <-ctx.Done():
			return up, nil
		}
	}
}
