package uplink

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"log/slog"
	"math/rand/v2"
	"os"
	"strings"
	"sync"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

// Message is one entry of the outbox.
type Message struct {
	ID      uint64 // increases for ever
	Topic   string
	Payload []byte
	Retain  bool
}

// Outbox is the durable, ordered queue that the publisher empties. Implemented by the ledger.
type Outbox interface {
	// Next gives up to max messages with an id above after, in order.
	Next(after uint64, max int) ([]Message, error)
	// Ack removes messages that the broker has acknowledged.
	Ack(ids []uint64) error
}

// Config of a publisher. User, password and keys are files: secrets are never in the skid file and never logged.
type Config struct {
	Broker                    string // tcp://host:1883, tls://host:8883
	ClientID                  string
	Topics                    Topics
	UserFile, PasswordFile    string
	CAFile, CertFile, KeyFile string
	// Offline gives the last will and the message of a clean stop.
	Offline func() []byte
	// Standing gives the retained standing-alarm messages to renew after a connection is made: the broker may have
	// forgotten them.
	Standing func() []Message
	// Retry bounds the pause between attempts; zero: 1 s to 60 s.
	RetryMin, RetryMax time.Duration
	Log                *slog.Logger
}

// Status is what health says of the uplink.
type Status struct {
	Connected   bool      `json:"connected"`
	Since       time.Time `json:"since,omitzero"`
	LastError   string    `json:"last_error,omitempty"`
	Connections uint64    `json:"connections"`
	Sent        uint64    `json:"sent"`     // outbox messages acknowledged by the broker
	Replaced    uint64    `json:"replaced"` // features and health overtaken by newer ones before they were sent
}

// Publisher empties an outbox into a broker and sends the newest of each offered topic.
type Publisher struct {
	cfg    Config
	box    Outbox
	wake   chan struct{}
	mu     sync.Mutex
	latest map[string]Message
	order  []string // topics of latest, oldest offer first
	status Status
}

// New checks the configuration; it opens no connection.
func New(cfg Config, box Outbox) (*Publisher, error) {
	if cfg.Broker == "" {
		return nil, errors.New("uplink: no broker address")
	}
	scheme, _, ok := strings.Cut(cfg.Broker, "://")
	if !ok {
		return nil, fmt.Errorf("uplink: broker %q: write tcp://host:1883 or tls://host:8883", cfg.Broker)
	}
	switch scheme {
	case "tcp", "mqtt", "tls", "ssl", "mqtts":
	default:
		return nil, fmt.Errorf("uplink: broker %q: scheme %q is not one of tcp, tls", cfg.Broker, scheme)
	}
	if cfg.Log == nil {
		cfg.Log = slog.New(slog.DiscardHandler)
	}
	if cfg.RetryMin <= 0 {
		cfg.RetryMin = time.Second
	}
	if cfg.RetryMax <= 0 {
		cfg.RetryMax = time.Minute
	}
	return &Publisher{cfg: cfg, box: box, wake: make(chan struct{}, 1), latest: map[string]Message{}}, nil
}

// Wake tells the publisher that the outbox has something new. It never blocks.
func (p *Publisher) Wake() {
	select {
	case p.wake <- struct{}{}:
	default:
	}
}

// Offer hands over the newest value of a topic; an older one not yet sent is replaced. It never blocks.
func (p *Publisher) Offer(topic string, payload []byte, retain bool) {
	p.mu.Lock()
	if _, waiting := p.latest[topic]; waiting {
		p.status.Replaced++
	} else {
		p.order = append(p.order, topic)
	}
	p.latest[topic] = Message{Topic: topic, Payload: payload, Retain: retain}
	p.mu.Unlock()
	p.Wake()
}

// Status gives a copy of the present state.
func (p *Publisher) Status() Status {
	p.mu.Lock()
	defer p.mu.Unlock()
	return p.status
}

func (p *Publisher) takeLatest() (Message, bool) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if len(p.order) == 0 {
		return Message{}, false
	}
	t := p.order[0]
	p.order = p.order[1:]
	m := p.latest[t]
	delete(p.latest, t)
	return m, true
}

// giveBack returns an offer that could not be sent, unless a newer one has come.
func (p *Publisher) giveBack(m Message) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if _, newer := p.latest[m.Topic]; newer {
		return
	}
	p.latest[m.Topic] = m
	p.order = append(p.order, m.Topic)
}

// Run connects, publishes, and connects again until ctx ends. On a clean stop it says offline by itself.
func (p *Publisher) Run(ctx context.Context) {
	pause := p.cfg.RetryMin
	for ctx.Err() == nil {
		began := time.Now()
		err := p.session(ctx)
		p.setState(false, err)
		if ctx.Err() != nil {
			return
		}
		if time.Since(began) > time.Minute {
			pause = p.cfg.RetryMin
		}
		p.cfg.Log.Warn("uplink: no connection", "broker", p.cfg.Broker, "err", err, "again_in", pause)
		jitter := time.Duration(rand.Int64N(int64(pause)/4 + 1))
		t := time.NewTimer(pause + jitter)
		select {
		case <-ctx.Done():
			t.Stop()
			return
		case <-t.C:
		}
		pause = min(2*pause, p.cfg.RetryMax)
	}
}

func (p *Publisher) setState(up bool, err error) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if up {
		p.status.Connections++
	}
	p.status.Connected, p.status.Since = up, time.Now().UTC()
	p.status.LastError = ""
	if err != nil && !errors.Is(err, context.Canceled) {
		p.status.LastError = err.Error()
	}
}

const (
	inFlight = 16               // publishes waiting for an acknowledgement; brokers commonly allow 20
	ackWait  = 20 * time.Second // no acknowledgement in this time: the connection is given up
)

// session is one connection from connect to loss.
func (p *Publisher) session(ctx context.Context) error {
	opt, err := p.options()
	if err != nil {
		return err
	}
	lost := make(chan error, 1)
	opt.SetConnectionLostHandler(func(_ mqtt.Client, err error) {
		select {
		case lost <- err:
		default:
		}
	})
	c := mqtt.NewClient(opt)
	if err := wait(ctx, c.Connect(), 15*time.Second); err != nil {
		c.Disconnect(0)
		return fmt.Errorf("uplink: connect %s: %w", p.cfg.Broker, err)
	}
	p.setState(true, nil)
	p.cfg.Log.Info("uplink: connected", "broker", p.cfg.Broker)
	if p.cfg.Standing != nil {
		for _, m := range p.cfg.Standing() {
			p.Offer(m.Topic, m.Payload, true)
		}
	}
	err = p.pump(ctx, c, lost)
	if ctx.Err() != nil { // a clean stop: what is in the outbox stays there for the next start
		if p.cfg.Offline != nil {
			t := c.Publish(p.cfg.Topics.Health(), 1, true, p.cfg.Offline())
			t.WaitTimeout(2 * time.Second)
		}
		c.Disconnect(250)
		return ctx.Err()
	}
	c.Disconnect(0)
	return err
}

type flight struct {
	m     Message
	token mqtt.Token
}

// pump publishes in order until the connection fails or ctx ends. Alarms go first.
func (p *Publisher) pump(ctx context.Context, c mqtt.Client, lost <-chan error) error {
	var after uint64
	for {
		batch, err := p.box.Next(after, inFlight)
		if err != nil {
			return fmt.Errorf("uplink: outbox: %w", err)
		}
		if len(batch) > 0 {
			fl := make([]flight, 0, len(batch))
			for _, m := range batch {
				fl = append(fl, flight{m, c.Publish(m.Topic, 1, m.Retain, m.Payload)})
			}
			var acked []uint64
			var bad error
			for _, f := range fl {
				if bad = wait(ctx, f.token, ackWait); bad != nil {
					break
				}
				acked = append(acked, f.m.ID)
				after = f.m.ID
			}
			if len(acked) > 0 {
				if err := p.box.Ack(acked); err != nil {
					return fmt.Errorf("uplink: outbox: %w", err)
				}
				p.mu.Lock()
				p.status.Sent += uint64(len(acked))
				p.mu.Unlock()
			}
			if bad != nil {
				return fmt.Errorf("uplink: publish: %w", bad)
			}
			continue
		}
		if m, ok := p.takeLatest(); ok {
			if err := wait(ctx, c.Publish(m.Topic, 1, m.Retain, m.Payload), ackWait); err != nil {
				p.giveBack(m)
				return fmt.Errorf("uplink: publish: %w", err)
			}
			continue
		}
		select {
		case <-ctx.Done():
			return ctx.Err()
		case err := <-lost:
			return fmt.Errorf("uplink: connection lost: %w", err)
		case <-p.wake:
		}
	}
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

func (p *Publisher) options() (*mqtt.ClientOptions, error) {
	o := mqtt.NewClientOptions().AddBroker(p.cfg.Broker).SetClientID(p.cfg.ClientID).
		SetProtocolVersion(4). // or a refusal is tried again as MQTT 3.1
		SetCleanSession(true).SetAutoReconnect(false).SetConnectRetry(false).SetOrderMatters(false).
		SetKeepAlive(30 * time.Second).SetPingTimeout(10 * time.Second).
		SetConnectTimeout(10 * time.Second).SetWriteTimeout(5 * time.Second)
	if p.cfg.Offline != nil {
		o.SetBinaryWill(p.cfg.Topics.Health(), p.cfg.Offline(), 1, true)
	}
	return o, secure(o, p.cfg)
}

// secure adds user, password and TLS from the files that the configuration names.
func secure(o *mqtt.ClientOptions, cfg Config) error {
	for _, s := range []struct {
		file string
		set  func(string) *mqtt.ClientOptions
	}{{cfg.UserFile, o.SetUsername}, {cfg.PasswordFile, o.SetPassword}} {
		if s.file == "" {
			continue
		}
		b, err := os.ReadFile(s.file)
		if err != nil {
			return fmt.Errorf("uplink: credential: %w", err)
		}
		s.set(strings.TrimRight(string(b), "\r\n"))
	}
	t := &tls.Config{MinVersion: tls.VersionTLS12}
	if cfg.CAFile != "" {
		pem, err := os.ReadFile(cfg.CAFile)
		if err != nil {
			return fmt.Errorf("uplink: CA: %w", err)
		}
		t.RootCAs = x509.NewCertPool()
		if !t.RootCAs.AppendCertsFromPEM(pem) {
			return fmt.Errorf("uplink: CA %s holds no certificate", cfg.CAFile)
		}
	}
	if cfg.CertFile != "" {
		c, err := tls.LoadX509KeyPair(cfg.CertFile, cfg.KeyFile)
		if err != nil {
			return fmt.Errorf("uplink: client certificate: %w", err)
		}
		t.Certificates = []tls.Certificate{c}
	}
	o.SetTLSConfig(t)
	return nil
}
