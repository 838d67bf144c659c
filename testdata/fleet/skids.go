package main

import (
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"sync"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// skid is the uplink of one daemon, with an outbox in memory: whether the disk keeps it is tested elsewhere.
type skid struct {
	id  string
	pub *uplink.Publisher

	mu       sync.Mutex
	msgs     []uplink.Message
	last     uint64 // message
	tr       uint64 // transition
	standing map[string][]byte
}

func (s *skid) Next(after uint64, max int) ([]uplink.Message, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	var out []uplink.Message
	for _, m := range s.msgs {
		if m.ID > after && len(out) < max {
			out = append(out, m)
		}
	}
	return out, nil
}

func (s *skid) Ack(ids []uint64) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.msgs = slices.DeleteFunc(s.msgs, func(m uplink.Message) bool { return slices.Contains(ids, m.ID) })
	return nil
}

func (s *skid) topics() uplink.Topics { return uplink.Topics{Root: "lapwing", Skid: s.id} }

// stands gives every alarm point: what stands, and nothing for the others, since a broker may have lost that too.
func (s *skid) stands() (out []uplink.Message) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, k := range []string{key(1), key(2)} {
		out = append(out, uplink.Message{Topic: s.topics().Standing(k), Payload: s.standing[k], Retain: true})
	}
	return out
}

func key(throw uint64) string { return fmt.Sprintf("t%d.he.suction/leaking", throw) }

// transition makes one and hands it to the uplink, with its standing topic, as the station does.
func (s *skid) transition(now time.Time) {
	s.mu.Lock()
	s.tr++
	tr := alarm.Transition{ID: s.tr, At: now.UTC(), Key: key(1 + s.tr%2), Subject: fmt.Sprintf("t%d.he.suction", 1+s.tr%2), Kind: "leaking",
		Severity: alarm.Alert, From: alarm.Normal, To: alarm.Unacked, Sentence: "t1.he.suction leaking, made up for a fleet"}
	if s.standing[tr.Key] != nil {
		tr.From, tr.To = alarm.Unacked, alarm.Normal
	}
	said := wire.FromTransition(s.id, &tr, "")
	said.Journal = "fleet"
	payload, err := json.Marshal(said)
	if err != nil {
		panic(err) // a program for tests
	}
	put := func(topic string, b []byte, retain bool) {
		s.last++
		s.msgs = append(s.msgs, uplink.Message{ID: s.last, Topic: topic, Payload: b, Retain: retain})
	}
	put(s.topics().Alarm(), payload, false)
	if tr.To == alarm.Normal {
		payload = nil
	}
	put(s.topics().Standing(tr.Key), payload, true)
	if payload == nil {
		delete(s.standing, tr.Key)
	} else {
		s.standing[tr.Key] = payload
	}
	s.mu.Unlock()
	s.pub.Wake()
}

type fleet struct {
	skids []*skid
	wg    sync.WaitGroup
	end   context.CancelFunc
}

func newFleet(n int, broker string) (*fleet, error) {
	f := &fleet{end: func() {}}
	for i := range n {
		s := &skid{id: fmt.Sprintf("skid-%03d", i), standing: map[string][]byte{}}
		var err error
		s.pub, err = uplink.New(uplink.Config{Broker: broker, ClientID: "lapwing-" + s.id, Topics: s.topics(), Standing: s.stands,
			Offline: func() []byte { return wire.Offline(s.id) }, RetryMax: 8 * time.Second}, s)
		if err != nil {
			return nil, err
		}
		f.skids = append(f.skids, s)
	}
	return f, nil
}

func (f *fleet) connect(ctx context.Context) {
	ctx, f.end = context.WithCancel(ctx)
	for i, s := range f.skids {
		f.wg.Go(func() {
			time.Sleep(time.Duration(i) * 5 * time.Millisecond)
			s.pub.Run(ctx)
		})
		s.pub.Offer(s.topics().Health(), []byte(`{"v":1,"skid":"`+s.id+`","state":"running","line":"fleet"}`), true)
	}
}

func (f *fleet) renew() {
	for _, s := range f.skids {
		s.pub.Renew()
	}
}

func (f *fleet) stop() { f.end(); f.wg.Wait() }

// make has every skid make a transition in every period, spread evenly.
func (f *fleet) make(every, length time.Duration) {
	gap := every / time.Duration(len(f.skids))
	began := time.Now()
	for i := 0; ; i++ {
		due := began.Add(time.Duration(i) * gap)
		if due.Sub(began) > length {
			return
		}
		time.Sleep(time.Until(due))
		f.skids[i%len(f.skids)].transition(time.Now())
	}
}

func (f *fleet) sum(of func(*skid) int) (n int) {
	for _, s := range f.skids {
		n += of(s)
	}
	return n
}

func (f *fleet) connected() int {
	return f.sum(func(s *skid) int {
		if s.pub.Status().Connected {
			return 1
		}
		return 0
	})
}

func (f *fleet) connections() int {
	return f.sum(func(s *skid) int { return int(s.pub.Status().Connections) })
}

func (f *fleet) waiting() int {
	return f.sum(func(s *skid) int { s.mu.Lock(); defer s.mu.Unlock(); return len(s.msgs) })
}

func (f *fleet) total() int {
	return f.sum(func(s *skid) int { s.mu.Lock(); defer s.mu.Unlock(); return int(s.tr) })
}
