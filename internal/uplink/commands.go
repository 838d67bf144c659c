package uplink

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"

	"lapwing/internal/wire"
)

// Commands lets the control room give orders over MQTT, on Topics.Command, answered on Topics.Receipt. Who may give
// them is the broker's to know: its access list must let nobody else write to that topic. Off unless something is allowed.
type Commands struct {
	Allowed []string // verbs, of wire.CommandVerbs
	// Take has an order carried out or, where refusal says why not, booked as refused. An error means that neither was
	// done. It is called by one goroutine, one order at a time.
	Take func(ctx context.Context, o wire.Order, refusal error) (wire.Receipt, error)
}

// CommandStatus is what health says of commands; absent when none are allowed.
type CommandStatus struct {
	Allowed   []string `json:"allowed"`
	Hearing   bool     `json:"hearing"` // the broker has granted the subscription of this connection
	Accepted  uint64   `json:"accepted"`
	Refused   uint64   `json:"refused"`
	Repeated  uint64   `json:"repeated,omitempty"` // answered again, not carried out again
	TooMany   uint64   `json:"too_many,omitempty"` // beyond the rate: not looked at
	LastError string   `json:"last_error,omitempty"`
}

const (
	commandQueue   = 32
	requestsKept   = 256
	maxReceipts    = 64 // that wait for a connection
	commandTimeout = 10 * time.Second
)

// pace bounds how many commands are looked at: burst at once, then one in every. An order costs the line a commit.
type pace struct {
	burst int
	every time.Duration
	tell  time.Duration // how often those beyond it are summed up in the journal
}

func (p *pace) fill() {
	if p.burst <= 0 {
		*p = pace{burst: 30, every: time.Second, tell: time.Minute}
	}
}

// inbox takes commands in. It lives as long as the publisher, over all connections, so that it knows repeats.
type inbox struct {
	cmd      *Commands
	p        *Publisher
	queue    chan Received
	answered map[string]answered
	requests []string // of answered, oldest first
	retained string   // the last retained command that was refused: the broker gives it again on each connection
	tokens   float64
	filled   time.Time
	tooMany  int // since the journal was told
}

type answered struct {
	payload string
	receipt wire.Receipt
}

// openInbox checks what is allowed, and says where anybody could give orders.
func (p *Publisher) openInbox() error {
	cmd := p.cfg.Commands
	if cmd == nil || len(cmd.Allowed) == 0 {
		return nil
	}
	for _, v := range cmd.Allowed {
		if !slices.Contains(wire.CommandVerbs(), v) {
			return fmt.Errorf("uplink: commands: %q cannot be allowed; there are %v", v, wire.CommandVerbs())
		}
	}
	if cmd.Take == nil {
		return errors.New("uplink: commands: nobody takes them")
	}
	switch {
	case p.cfg.UserFile == "" && p.cfg.CertFile == "":
		p.cfg.Log.Warn("uplink: commands are allowed at a broker that asks nobody who he is: whoever reaches it can give them", "broker", p.cfg.Broker)
	case p.cfg.clear():
		p.cfg.Log.Warn("uplink: commands cross the network unencrypted, where they can be forged; use tls://", "broker", p.cfg.Broker)
	}
	p.inbox = newInbox(p)
	p.status.Commands = &CommandStatus{Allowed: slices.Clone(cmd.Allowed)}
	return nil
}

func newInbox(p *Publisher) *inbox {
	return &inbox{cmd: p.cfg.Commands, p: p, queue: make(chan Received, commandQueue), answered: map[string]answered{}, tokens: float64(p.cfg.pace.burst)}
}

// subscribe asks the broker for commands. Nobody waits for the answer: alarms go out meanwhile. At QoS 0: a command that is
// lost brings no receipt and is sent again under the same request, and a cluster that keeps a replicated queue for every
// QoS 1 subscription is not asked for one by each skid.
func (in *inbox) subscribe(c mqtt.Client) mqtt.Token {
	in.heard(false, nil)
	return c.Subscribe(in.p.cfg.Topics.Command(), 0, func(_ mqtt.Client, m mqtt.Message) {
		select {
		case in.queue <- Received{m.Topic(), m.Payload(), m.Retained()}:
		default: // the library must not be held up
			in.status(func(s *CommandStatus) { s.TooMany++ })
		}
	})
}

// granted reads the broker's answer to the subscription; a nil token is one that never came.
func (in *inbox) granted(t mqtt.Token) {
	err := errors.New("uplink: the broker does not answer the subscription to commands")
	if t != nil {
		err = granted(t, in.p.cfg.Topics.Command())
	}
	if err != nil {
		in.p.cfg.Log.Error("uplink: commands are not heard", "err", err)
	} else {
		in.p.cfg.Log.Info("uplink: commands are heard", "topic", in.p.cfg.Topics.Command(), "allowed", in.cmd.Allowed)
	}
	in.heard(err == nil, err)
}

func (in *inbox) heard(yes bool, err error) {
	in.status(func(s *CommandStatus) {
		s.Hearing, s.LastError = yes, ""
		if err != nil {
			s.LastError = err.Error()
		}
	})
}

func (in *inbox) status(f func(*CommandStatus)) {
	in.p.note(func(s *Status) {
		next := *s.Commands // readers keep the old one
		f(&next)
		s.Commands = &next
	})
}

// run takes commands one after the other until ctx ends.
func (in *inbox) run(ctx context.Context) {
	tell := time.NewTicker(in.p.cfg.pace.tell)
	defer tell.Stop()
	for {
		select {
		case <-ctx.Done():
			return
		case m := <-in.queue:
			in.take(ctx, m)
		case <-tell.C:
			in.sumUp(ctx)
		}
	}
}

// take answers one command.
func (in *inbox) take(ctx context.Context, m Received) {
	if len(m.Payload) == 0 {
		return // somebody clears a retained one
	}
	c, err := wire.ParseCommand(m.Payload)
	c.Via = "mqtt"
	if c.Verb == "" {
		c.Verb = "unreadable"
	}
	if !in.mayLook(time.Now()) {
		in.tooMany++
		in.status(func(s *CommandStatus) { s.TooMany++ })
		in.refuse(c, "not carried out: too many commands; ask again later")
		return
	}
	if before, repeat := in.answered[c.Request]; repeat && err == nil {
		if before.payload == string(m.Payload) {
			in.status(func(s *CommandStatus) { s.Repeated++ })
			in.answer(before.receipt)
			return
		}
		err = errors.New("another command had the same request: give each its own")
	}
	switch {
	case m.Retained:
		if in.retained == string(m.Payload) {
			return // it is in the journal
		}
		in.retained = string(m.Payload)
		err = errors.New("it is retained, so that it would come again with every connection: send commands without retain, and clear this topic")
	case err != nil:
		err = errors.New(strings.TrimPrefix(err.Error(), "wire: "))
	case !slices.Contains(in.cmd.Allowed, c.Verb):
		err = errors.New("this skid file does not allow it over MQTT (uplink.commands)")
	}
	r, failed := in.pass(ctx, c.Order, err)
	r.Request = c.Request
	if failed != nil {
		in.p.cfg.Log.Error("uplink: command", "request", c.Request, "verb", c.Clean().Verb, "err", failed)
		in.refuse(c, "not carried out: "+failed.Error())
		return
	}
	if err == nil {
		in.keep(c.Request, answered{string(m.Payload), r})
	}
	in.status(func(s *CommandStatus) {
		if r.Accepted {
			s.Accepted++
		} else {
			s.Refused++
		}
	})
	in.answer(r)
}

func (in *inbox) pass(ctx context.Context, o wire.Order, refusal error) (wire.Receipt, error) {
	ctx, cancel := context.WithTimeout(ctx, commandTimeout)
	defer cancel()
	return in.cmd.Take(ctx, o, refusal)
}

// mayLook keeps the pace.
func (in *inbox) mayLook(now time.Time) bool {
	if !in.filled.IsZero() {
		in.tokens = min(float64(in.p.cfg.pace.burst), in.tokens+float64(now.Sub(in.filled))/float64(in.p.cfg.pace.every))
	}
	in.filled = now
	if in.tokens < 1 {
		return false
	}
	in.tokens--
	return true
}

// sumUp books what came too fast as one entry: a flood of commands must not become a flood of the journal.
func (in *inbox) sumUp(ctx context.Context) {
	if in.tooMany == 0 {
		return
	}
	o := wire.Order{Verb: "unreadable", Via: "mqtt"}
	if _, err := in.pass(ctx, o, fmt.Errorf("%d commands came too fast and were not looked at", in.tooMany)); err == nil {
		in.tooMany = 0
	}
}

// keep remembers an answer for repeats.
func (in *inbox) keep(request string, a answered) {
	in.answered[request] = a
	in.requests = append(in.requests, request)
	if len(in.requests) > requestsKept {
		delete(in.answered, in.requests[0])
		in.requests = in.requests[1:]
	}
}

// refuse answers what was not booked.
func (in *inbox) refuse(c wire.Command, said string) {
	in.status(func(s *CommandStatus) { s.Refused++ })
	o := c.Clean()
	in.answer(wire.Receipt{Version: 1, Request: c.Request, Caution: wire.Caution,
		Act: wire.Act{Type: "act", Verb: o.Verb, Key: o.Key, By: o.By, Reason: o.Reason, Via: "mqtt", Said: said}})
}

func (in *inbox) answer(r wire.Receipt) {
	b, err := json.Marshal(r)
	if err != nil {
		in.p.cfg.Log.Error("uplink: receipt", "err", err)
		return
	}
	in.p.reply(Message{Topic: in.p.cfg.Topics.Receipt(), Payload: b})
}

// reply queues a receipt. What waits is bounded: the oldest is given up, its order is in the journal.
func (p *Publisher) reply(m Message) {
	p.mu.Lock()
	p.replies = append(p.replies, m)
	if len(p.replies) > maxReceipts {
		p.replies = p.replies[1:]
		p.status.Dropped++
	}
	p.mu.Unlock()
	p.Wake()
}

// replyAgain puts a receipt that was not acknowledged back to the front.
func (p *Publisher) replyAgain(m Message) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if len(p.replies) < maxReceipts {
		p.replies = slices.Insert(p.replies, 0, m)
	}
}

func (p *Publisher) takeReply() (Message, bool) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if len(p.replies) == 0 {
		return Message{}, false
	}
	m := p.replies[0]
	p.replies = p.replies[1:]
	return m, true
}

// Renew has health and standing alarms sent again on the present connection; without one they are sent with the next
// anyway. It never blocks.
func (p *Publisher) Renew() {
	p.mu.Lock()
	p.renew = true
	p.mu.Unlock()
	p.Wake()
}

func (p *Publisher) takeRenew() bool {
	p.mu.Lock()
	defer p.mu.Unlock()
	r := p.renew
	p.renew = false
	return r
}
