package uplink

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"sync"
	"time"

	"github.com/eclipse/paho.mqtt.golang/packets"
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
	// Next gives up to max messages with an id above after, in order. With an error it may still give those that it
	// could read.
	Next(after uint64, max int) ([]Message, error)
	// Ack removes messages that the broker has acknowledged: all of them or, with an error, none.
	Ack(ids []uint64) error
}

// Status is what health says of the uplink.
type Status struct {
	Connected   bool      `json:"connected"`
	Since       time.Time `json:"since,omitzero"` // of Connected
	LastError   string    `json:"last_error,omitempty"`
	Connections uint64    `json:"connections"`
	Sent        uint64    `json:"sent"`              // outbox messages acknowledged by the broker
	Replaced    uint64    `json:"replaced"`          // features and health overtaken by newer ones before they were sent
	Dropped     uint64    `json:"dropped,omitempty"` // offers given up because too many topics waited
	Refused     uint64    `json:"refused,omitempty"` // outbox messages with a topic that MQTT does not allow, taken out unsent
	Births      uint64    `json:"births,omitempty"`  // of Sparkplug: one a connection, and one whenever a host asks or a metric is new

	CertUntil time.Time      `json:"cert_until,omitzero"` // when the first certificate of this connection, the broker's or the client's, ends
	Commands  *CommandStatus `json:"commands,omitempty"`  // never changed, only replaced
	Unheard   string         `json:"unheard,omitempty"`   // the broker acknowledges what it throws away
	Echoes    uint64         `json:"-"`                   // of health, which the broker has given back
}

// maxTopics bounds the offers that wait for a connection. A skid has one topic per throw and its health.
const maxTopics = 256

// Publisher empties an outbox into a broker and sends the newest of each offered topic.
type Publisher struct {
	cfg    Config
	box    Outbox
	wake   chan struct{}
	mu     sync.Mutex
	latest map[string]Message
	order  []string // topics of latest, oldest offer first
	health *Message // newest health ever offered: the first message of every connection
	status Status

	inbox   *inbox   // nil: no commands
	spark   *speaker // nil: the JSON dialect
	replies []Message
	renew   bool
}

// New checks the configuration; it opens no connection and reads no file.
func New(cfg Config, box Outbox) (*Publisher, error) {
	if err := cfg.check(time.Second, time.Minute); err != nil {
		return nil, err
	}
	if err := cfg.Topics.check(); err != nil {
		return nil, err
	}
	if cfg.unencrypted() {
		cfg.Log.Warn("uplink: the password crosses the network unencrypted; use tls://", "broker", cfg.Broker)
	}
	cfg.warnReadable()
	p := &Publisher{cfg: cfg, box: box, wake: make(chan struct{}, 1), latest: map[string]Message{}}
	if err := p.openInbox(); err != nil {
		return nil, err
	}
	if cfg.Sparkplug != nil {
		var err error
		if p.spark, err = newSpeaker(cfg.Sparkplug, cfg.Topics); err != nil {
			return nil, err
		}
	}
	return p, nil
}

// Wake tells the publisher that the outbox has something new. It never blocks.
func (p *Publisher) Wake() {
	select {
	case p.wake <- struct{}{}:
	default:
	}
}

// Offer hands over the newest value of a topic; an older one not yet sent is replaced. It never blocks, and what waits
// is bounded: beyond maxTopics topics the one that has waited longest is dropped. The payload must not be changed
// afterwards.
func (p *Publisher) Offer(topic string, payload []byte, retain bool) {
	m := Message{Topic: topic, Payload: payload, Retain: retain}
	p.mu.Lock()
	if _, waiting := p.latest[topic]; waiting {
		p.status.Replaced++
	} else {
		if len(p.order) >= maxTopics {
			delete(p.latest, p.order[0])
			p.order = p.order[1:]
			p.status.Dropped++
		}
		p.order = append(p.order, topic)
	}
	p.latest[topic] = m
	if topic == p.cfg.Topics.Health() {
		p.health = &m
	}
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

// takeHealth gives the newest health, sent before or not: it takes the last will's "offline" off the board.
func (p *Publisher) takeHealth() (Message, bool) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.health == nil {
		return Message{}, false
	}
	if _, waiting := p.latest[p.health.Topic]; waiting {
		delete(p.latest, p.health.Topic)
		for i, t := range p.order {
			if t == p.health.Topic {
				p.order = append(p.order[:i:i], p.order[i+1:]...)
				break
			}
		}
	}
	return *p.health, true
}

// giveBack returns an offer that was not acknowledged, unless a newer one has come.
func (p *Publisher) giveBack(m Message) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if _, newer := p.latest[m.Topic]; newer || len(p.order) >= maxTopics {
		return
	}
	p.latest[m.Topic] = m
	p.order = append(p.order, m.Topic)
}

// note changes the status under its lock.
func (p *Publisher) note(f func(*Status)) {
	p.mu.Lock()
	defer p.mu.Unlock()
	f(&p.status)
}

// steady is how long a connection must have stood for the next pause to be short again.
const steady = time.Minute

// Run connects, publishes, and connects again until ctx ends. On a clean stop it gives the outbox a moment to empty
// and says offline by itself.
func (p *Publisher) Run(ctx context.Context) {
	if p.inbox != nil {
		done := make(chan struct{})
		go func() { defer close(done); p.inbox.run(ctx) }()
		defer func() { <-done }()
	}
	pause := p.cfg.RetryMin
	for ctx.Err() == nil {
		began := time.Now()
		err := p.session(ctx)
		p.note(func(s *Status) {
			s.Connected, s.Since, s.LastError, s.CertUntil, s.Unheard = false, time.Now().UTC(), "", time.Time{}, ""
			if err != nil && !errors.Is(err, context.Canceled) {
				s.LastError = err.Error()
			}
		})
		if p.inbox != nil {
			p.inbox.heard(false, nil)
		}
		if ctx.Err() != nil {
			return
		}
		if time.Since(began) > steady {
			pause = p.cfg.RetryMin
		}
		p.cfg.Log.Warn("uplink: no connection", "broker", p.cfg.Broker, "err", err, "again_in", pause)
		if !sleep(ctx, pause) {
			return
		}
		pause = min(longer(pause, err), p.cfg.RetryMax)
	}
}

// longer is the pause after a failure. A refusal is not mended by asking often, and brokers lock accounts.
func longer(pause time.Duration, err error) time.Duration {
	if refused(err) {
		return 4 * pause
	}
	return 2 * pause
}

// sleep waits with jitter, so that a broker that comes back is not met by all skids at once; false when ctx ended.
func sleep(ctx context.Context, pause time.Duration) bool {
	t := time.NewTimer(pause + time.Duration(rand.Int64N(int64(pause)/4+1)))
	defer t.Stop()
	select {
	case <-ctx.Done():
		return false
	case <-t.C:
		return true
	}
}

func refused(err error) bool {
	return errors.Is(err, packets.ErrorRefusedBadUsernameOrPassword) || errors.Is(err, packets.ErrorRefusedNotAuthorised) ||
		errors.Is(err, packets.ErrorRefusedIDRejected)
}

// explain says what a person can do about a connection that was not made.
func explain(broker string, err error) error {
	switch {
	case errors.Is(err, packets.ErrorRefusedBadUsernameOrPassword), errors.Is(err, packets.ErrorRefusedNotAuthorised):
		return fmt.Errorf("uplink: %s refuses user or password (check both files and the broker's access list): %w", broker, err)
	case errors.Is(err, packets.ErrorRefusedIDRejected):
		return fmt.Errorf("uplink: %s refuses the client id: %w", broker, err)
	}
	if why := explainTLS(err); why != "" {
		return fmt.Errorf("uplink: connect %s: %s: %w", broker, why, err)
	}
	return fmt.Errorf("uplink: connect %s: %w", broker, err)
}
