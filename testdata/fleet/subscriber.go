package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"sync"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

// subscriber is a control room with a session that the broker keeps.
type subscriber struct {
	broker string
	done   chan struct{}

	mu     sync.Mutex
	up     bool
	conns  int
	seen   map[string]map[uint64]bool // of each skid
	last   map[string]uint64          // the highest id that has come
	wrong  []string
	firsts int
	dups   int
	behind int // came after one with a higher id
	lat    []time.Duration
}

func newSubscriber(broker string, n int) *subscriber {
	return &subscriber{broker: broker, done: make(chan struct{}), seen: make(map[string]map[uint64]bool, n), last: map[string]uint64{}}
}

func (s *subscriber) run(ctx context.Context) {
	defer close(s.done)
	for ctx.Err() == nil {
		lost := make(chan error, 1)
		o := mqtt.NewClientOptions().AddBroker(s.broker).SetClientID("control-room").SetProtocolVersion(4).SetCleanSession(false).
			SetAutoReconnect(false).SetConnectRetry(false).SetOrderMatters(true).SetKeepAlive(10 * time.Second).SetPingTimeout(5 * time.Second).
			SetConnectTimeout(20 * time.Second).SetWriteTimeout(5 * time.Second).
			SetDefaultPublishHandler(s.hear). // what the session kept comes before the subscription is answered
			SetConnectionLostHandler(func(_ mqtt.Client, err error) { lost <- err })
		c := mqtt.NewClient(o)
		if t := c.Connect(); !t.WaitTimeout(30*time.Second) || t.Error() != nil {
			c.Disconnect(0)
			time.Sleep(300 * time.Millisecond)
			continue
		}
		if t := c.Subscribe("lapwing/+/alarm", 1, s.hear); !t.WaitTimeout(30*time.Second) || t.Error() != nil {
			c.Disconnect(0)
			continue
		}
		s.mu.Lock()
		s.up, s.conns = true, s.conns+1
		s.mu.Unlock()
		select {
		case <-lost:
		case <-ctx.Done():
		}
		s.mu.Lock()
		s.up = false
		s.mu.Unlock()
		c.Disconnect(100)
	}
}

func (s *subscriber) hear(_ mqtt.Client, m mqtt.Message) {
	now := time.Now()
	var a struct {
		ID   uint64
		At   time.Time
		Skid string
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if err := json.Unmarshal(m.Payload(), &a); err != nil || m.Topic() != "lapwing/"+a.Skid+"/alarm" {
		s.wrong = append(s.wrong, fmt.Sprintf("%s: %.80s (%v)", m.Topic(), m.Payload(), err))
		return
	}
	if s.seen[a.Skid] == nil {
		s.seen[a.Skid] = map[uint64]bool{}
	}
	if s.seen[a.Skid][a.ID] {
		s.dups++
		return
	}
	s.seen[a.Skid][a.ID] = true
	s.firsts++
	s.lat = append(s.lat, now.Sub(a.At))
	if a.ID < s.last[a.Skid] {
		s.behind++
	}
	s.last[a.Skid] = max(s.last[a.Skid], a.ID)
}

func (s *subscriber) in() bool         { s.mu.Lock(); defer s.mu.Unlock(); return s.up }
func (s *subscriber) first() int       { s.mu.Lock(); defer s.mu.Unlock(); return s.firsts }
func (s *subscriber) repeats() int     { s.mu.Lock(); defer s.mu.Unlock(); return s.dups }
func (s *subscriber) connections() int { s.mu.Lock(); defer s.mu.Unlock(); return s.conns }
func (s *subscriber) latencies() []time.Duration {
	s.mu.Lock()
	defer s.mu.Unlock()
	return append([]time.Duration(nil), s.lat...)
}

// verdict: a broker alone keeps the order; a cluster that loses a node sends what was on its way to a subscriber again
// later, so there a receiver has to sort by id.
func (s *subscriber) verdict(f *fleet, ordered bool) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, k := range f.skids {
		for id := uint64(1); id <= k.tr; id++ {
			if !s.seen[k.id][id] {
				s.wrong = append(s.wrong, fmt.Sprintf("%s: transition %d of %d never came", k.id, id, k.tr))
			}
		}
		if n := len(s.seen[k.id]); n > int(k.tr) {
			s.wrong = append(s.wrong, fmt.Sprintf("%s: %d transitions came, %d were made", k.id, n, k.tr))
		}
	}
	fmt.Printf("%d transitions came behind one with a higher id\n", s.behind)
	if ordered && s.behind > 0 {
		s.wrong = append(s.wrong, "out of order")
	}
	if len(s.wrong) > 0 {
		return fmt.Errorf("%d things wrong, e.g. %s", len(s.wrong), strings.Join(s.wrong[:min(5, len(s.wrong))], "; "))
	}
	return nil
}

// late joins now, and counts what it reads as standing and does not stand, or the other way round.
func late(broker string, f *fleet) (bad int, err error) {
	want := map[string]string{}
	for _, k := range f.skids {
		for _, m := range k.stands() {
			if m.Payload != nil {
				want[m.Topic] = string(m.Payload)
			}
		}
	}
	var mu sync.Mutex
	got := map[string]string{}
	c := mqtt.NewClient(mqtt.NewClientOptions().AddBroker(broker).SetClientID("late").SetProtocolVersion(4).SetAutoReconnect(false).SetConnectTimeout(20 * time.Second))
	if t := c.Connect(); !t.WaitTimeout(30*time.Second) || t.Error() != nil {
		return 0, errors.Join(errors.New("a late subscriber does not get in"), t.Error())
	}
	defer c.Disconnect(100)
	t := c.Subscribe("lapwing/+/standing/#", 1, func(_ mqtt.Client, m mqtt.Message) {
		mu.Lock()
		defer mu.Unlock()
		got[m.Topic()] = string(m.Payload())
	})
	if !t.WaitTimeout(30*time.Second) || t.Error() != nil {
		return 0, errors.Join(errors.New("a late subscriber cannot subscribe"), t.Error())
	}
	_ = within(10*time.Second, "", func() bool { mu.Lock(); defer mu.Unlock(); return len(got) >= len(want) })
	time.Sleep(500 * time.Millisecond) // for what should not come
	mu.Lock()
	defer mu.Unlock()
	for topic, w := range want {
		if got[topic] != w {
			bad++
		}
	}
	for topic := range got {
		if _, stands := want[topic]; !stands {
			bad++
		}
	}
	fmt.Printf("a late subscriber reads %d standing alarms, %d stand, %d wrong\n", len(got), len(want), bad)
	return bad, nil
}
