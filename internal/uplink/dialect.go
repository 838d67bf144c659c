package uplink

import (
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"sync"
	"time"

	"lapwing/internal/uplink/sparkplug"
	"lapwing/internal/wire"
)

// Sparkplug has the publisher speak Sparkplug B 3.0. Health and alarms become metrics of the node, each device (a throw)
// has its measures; see dialect_words.go for the names.
//
// The specification sends data at QoS 0, which nobody acknowledges. So each alarm transition is also sent, right behind
// its metric, as JSON on Topics.Alarm at QoS 1: its acknowledgement is what takes it out of the outbox, and says that the
// broker took the metric too, which went before it on the same connection. Standing alarms are retained as in the other
// dialect; features and JSON health are not sent.
type Sparkplug struct {
	Group, Node string
	PrimaryHost string // empty: births wait for nobody
	Devices     []SparkplugDevice
	Alarms      []string           // keys of alarm points that are known to exist; others make a birth when they first come
	Known       []sparkplug.Metric // of the node, beside alarms and health: constants, channels
	// BdSeq gives the number of a new connection: one more than the last one, also after a restart, and 0 after 255.
	BdSeq func() (uint8, error)
}

// SparkplugDevice is one throw with all the measures it will ever tell: subject and name as in the features message.
type SparkplugDevice struct {
	ID       string
	Measures [][2]string
}

// speaker turns what the outbox and the offers hold into Sparkplug. It lives over all connections.
type speaker struct {
	cfg    *Sparkplug
	node   *sparkplug.Node
	topics Topics
	host   sparkplug.Host
	mail   mailbox
	now    func() time.Time

	bdSeq  uint8
	unsent bool // bdSeq has been in no CONNECT

	backlog bool             // until the outbox has been empty once on this connection: what comes from it is history
	late    []wire.Alarm     // the newest transition of each point that went out as history
	open    map[string]int32 // severity of what stands, by key
}

func newSpeaker(cfg *Sparkplug, t Topics) (*speaker, error) {
	if cfg.BdSeq == nil {
		return nil, errors.New("uplink: sparkplug: nobody counts the connections")
	}
	if cfg.PrimaryHost != "" {
		if err := sparkplug.CheckID("primary host id", cfg.PrimaryHost); err != nil {
			return nil, err
		}
	}
	var devices []string
	for _, d := range cfg.Devices {
		devices = append(devices, d.ID)
	}
	n, err := sparkplug.NewNode(cfg.Group, cfg.Node, devices...)
	if err != nil {
		return nil, err
	}
	s := &speaker{cfg: cfg, node: n, topics: t, now: func() time.Time { return time.Now().UTC() }, open: map[string]int32{}, mail: mailbox{bell: make(chan struct{}, 1)}}
	told := Vocabulary(cfg)
	n.Define("", told[""]...)
	for _, d := range cfg.Devices {
		n.Define(d.ID, told[d.ID]...)
	}
	return s, nil
}

// Vocabulary gives the metrics that are told from the first birth on, by device; "" is the node. Values are those before
// anything is known.
func Vocabulary(cfg *Sparkplug) map[string][]sparkplug.Metric {
	node := slices.Concat(cfg.Known, healthMetrics(&wire.Health{}, true), []sparkplug.Metric{{Name: worstName, Type: sparkplug.Int32, Value: int32(0)}})
	for _, key := range cfg.Alarms {
		node = append(node, normalAlarm(key, time.Time{}))
	}
	told := map[string][]sparkplug.Metric{"": node}
	for _, d := range cfg.Devices {
		ms := throwMetrics(&wire.Features{Throw: d.ID}, nil)
		for _, m := range d.Measures {
			ms = append(ms, sparkplug.Metric{Name: measureName(d.ID, m[0], m[1]), Type: sparkplug.Double})
		}
		told[d.ID] = ms
	}
	return told
}

// will begins a connection.
func (s *speaker) will() (sparkplug.Message, error) {
	if !s.unsent {
		bd, err := s.cfg.BdSeq()
		if err != nil {
			return sparkplug.Message{}, fmt.Errorf("uplink: sparkplug: the number of this connection cannot be kept: %w", err)
		}
		s.bdSeq, s.unsent = bd, true
	}
	s.host.Forget()
	s.mail.empty()
	return s.node.Will(s.bdSeq, s.now()), nil
}

// sent is called when the will may have reached the broker: its number is used up. One that met no broker is kept, as
// numbers rise by one from CONNECT to CONNECT and not from attempt to attempt.
func (s *speaker) sent() { s.unsent = false }

// birth says everything as it is now. standing are the messages of what stands, waiting the newest offers.
func (s *speaker) birth(standing, waiting []Message) []sparkplug.Message {
	first := !s.node.Born()
	now := s.now()
	if first { // what is set now is only kept
		s.backlog, s.late = true, nil
		clear(s.open)
		stands := map[string]bool{}
		for i := range standing {
			if a, ok := alarmOf(standing[i].Payload); ok {
				stands[alarmName(a.Key)] = true
				s.level(&a)
				s.node.Set("", []sparkplug.Metric{alarmMetric(&a, false)}, now)
			}
		}
		for _, name := range s.node.Names("") {
			if key, is := alarmKey(name); is && !stands[name] {
				s.node.Set("", []sparkplug.Metric{normalAlarm(key, now)}, now)
			}
		}
		s.node.Set("", []sparkplug.Metric{s.worst(now)}, now)
		for i := range waiting {
			s.offer(waiting[i])
		}
	}
	return s.node.Birth(now)
}

// alarm says a transition of the outbox.
func (s *speaker) alarm(m Message) []sparkplug.Message {
	if m.Topic != s.topics.Alarm() {
		return nil
	}
	a, ok := alarmOf(m.Payload)
	if !ok {
		return nil
	}
	now := s.now()
	if s.backlog {
		s.late = slices.DeleteFunc(s.late, func(o wire.Alarm) bool { return o.Key == a.Key })
		s.late = append(s.late, a)
		return s.node.Set("", []sparkplug.Metric{alarmMetric(&a, true)}, now)
	}
	return s.present(&a, now)
}

func (s *speaker) present(a *wire.Alarm, now time.Time) []sparkplug.Message {
	s.level(a)
	return s.node.Set("", []sparkplug.Metric{alarmMetric(a, false), s.worst(a.At)}, now)
}

// caughtUp is called when the outbox is empty: what went out as history is the present now, where nothing newer is.
func (s *speaker) caughtUp() (out []sparkplug.Message) {
	if !s.backlog {
		return nil
	}
	s.backlog = false
	for i := range s.late {
		out = append(out, s.present(&s.late[i], s.now())...)
	}
	s.late = nil
	return out
}

// offer says the newest features or health. also tells whether the message goes out as JSON besides.
func (s *speaker) offer(m Message) (out []sparkplug.Message, also bool) {
	_, part, rest := Part(s.topics.Root, m.Topic)
	now := s.now()
	switch part {
	case "standing": // its evidence is renewed; the transition itself came through the outbox
		a, ok := alarmOf(m.Payload)
		if !ok || s.backlog {
			return nil, true
		}
		return s.node.Set("", []sparkplug.Metric{alarmMetric(&a, false)}, now), true
	case "features":
		var f wire.Features
		if json.Unmarshal(m.Payload, &f) != nil {
			return nil, false
		}
		return s.node.Set(rest, throwMetrics(&f, s.node.Names(rest)), now), false
	case "health":
		var h wire.Health
		if json.Unmarshal(m.Payload, &h) != nil {
			return nil, false
		}
		out = s.node.Set("", healthMetrics(&h, false), now)
		for _, d := range s.cfg.Devices {
			dead := unheard(&h, d.ID)
			if dead {
				out = append(out, s.node.Bury(d.ID, now)...)
			}
			if dead || h.State != "running" && h.State != "coasting" { // the values of the last turn are no values of now
				out = append(out, s.node.Set(d.ID, throwMetrics(&wire.Features{Throw: d.ID, At: h.At, Duty: "unknown"}, s.node.Names(d.ID)), now)...)
			}
			if !dead {
				out = append(out, s.node.Raise(d.ID, now)...)
			}
		}
		return out, false
	}
	return nil, true
}

// level keeps what stands.
func (s *speaker) level(a *wire.Alarm) {
	if sev, open := standingSeverity(a); open {
		s.open[a.Key] = sev
	} else {
		delete(s.open, a.Key)
	}
}

func (s *speaker) worst(at time.Time) sparkplug.Metric {
	var w int32
	for _, v := range s.open {
		w = max(w, v)
	}
	return sparkplug.Metric{Name: worstName, Type: sparkplug.Int32, Value: w, At: at}
}

// mailbox keeps what a host has sent until the publisher looks. Its handler never waits.
type mailbox struct {
	bell chan struct{}
	mu   sync.Mutex
	got  []Received
}

const mailKept = 64 // messages; of more the oldest are given up

func (b *mailbox) put(m Received) {
	b.mu.Lock()
	if len(b.got) >= mailKept {
		b.got = b.got[1:]
	}
	b.got = append(b.got, m)
	b.mu.Unlock()
	select {
	case b.bell <- struct{}{}:
	default:
	}
}

func (b *mailbox) empty() []Received {
	b.mu.Lock()
	defer b.mu.Unlock()
	got := b.got
	b.got = nil
	return got
}
