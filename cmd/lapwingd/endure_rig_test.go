package main

import (
	"context"
	"encoding/json"
	"fmt"
	"net"
	"os"
	"os/signal"
	"strconv"
	"sync"
	"syscall"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// The sending half of a daemon for the endurance tests: ledger and uplink as the station uses them, with a stream of
// transitions that no machine makes. It is this test program started again, so that it can be killed.

const endureSkid = "quillmere-c1"

var endureTopics = uplink.Topics{Root: "lapwing", Skid: endureSkid}

// TestMain is that sender when the endurance tests have started it, and runs the tests otherwise.
func TestMain(m *testing.M) {
	state := os.Getenv("LAPWING_ENDURE_STATE")
	if state == "" {
		os.Exit(m.Run())
	}
	ctx, stop := signal.NotifyContext(context.Background(), syscall.SIGTERM)
	defer stop()
	if err := sender(ctx, state, os.Getenv("LAPWING_ENDURE_BROKER"), os.Getenv("LAPWING_ENDURE_DAY")); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	os.Exit(0)
}

// box lets the publisher read the ledger, as the station's does.
type box struct{ l *ledger.Ledger }

func (b box) Next(after uint64, max int) ([]uplink.Message, error) {
	ms, err := b.l.Next(after, max)
	var out []uplink.Message
	for _, m := range ms {
		out = append(out, uplink.Message{ID: m.ID, Topic: m.Topic, Payload: m.Payload, Retain: m.Retain})
	}
	return out, err
}

func (b box) Ack(ids []uint64) error { return b.l.Ack(ids) }

// sender books transitions and publishes them until ctx ends: about fifty a second, or a day's at once.
func sender(ctx context.Context, state, broker, day string) error {
	l, err := ledger.Open(state, ledger.Options{})
	if err != nil {
		return err
	}
	defer l.Close()
	pub, err := uplink.New(uplink.Config{Broker: broker, ClientID: "lapwing-" + endureSkid, Topics: endureTopics, Offline: func() []byte { return wire.Offline(endureSkid) },
		RetryMin: 20 * time.Millisecond, RetryMax: 200 * time.Millisecond}, box{l})
	if err != nil {
		return err
	}
	done := make(chan struct{})
	go func() { defer close(done); pub.Run(ctx) }()
	defer func() { <-done }()
	if day != "" {
		n, err := strconv.Atoi(day)
		if err != nil {
			return err
		}
		const batch = 50
		for i := l.Stats().LastJournal; i < uint64(n); i = l.Stats().LastJournal {
			if err := bookSome(l, i, batch, func(id uint64) time.Time { return dayBegan.Add(time.Duration(id) * 24 * time.Hour / time.Duration(n)) }); err != nil {
				return err
			}
		}
		fmt.Println("booked")
		pub.Wake()
		<-ctx.Done()
		return nil
	}
	tick := time.NewTicker(20 * time.Millisecond)
	defer tick.Stop()
	for {
		select {
		case <-ctx.Done():
			return nil
		case <-tick.C:
		}
		if err := bookSome(l, l.Stats().LastJournal, 1, func(uint64) time.Time { return time.Now() }); err != nil {
			return err
		}
		pub.Wake()
	}
}

var dayBegan = time.Date(2030, 5, 1, 0, 0, 0, 0, time.UTC)

// bookSome books transitions as station.commit does: each with its message and its standing topic, all in one commit.
func bookSome(l *ledger.Ledger, last uint64, n int, at func(id uint64) time.Time) error {
	return l.Commit(func(tx *ledger.Tx) error {
		for id := last + 1; id <= last+uint64(n); id++ {
			tr := alarm.Transition{ID: id, At: at(id).UTC(), Key: fmt.Sprintf("t%d.he.suction/leaking", 1+id%4), Subject: fmt.Sprintf("t%d.he.suction", 1+id%4), Kind: "leaking", Severity: alarm.Alert, Sentence: "made up for a test"}
			tr.From, tr.To = alarm.Normal, alarm.Unacked
			if id/4%2 == 1 {
				tr.From, tr.To = alarm.Unacked, alarm.Normal
			}
			if err := tx.Journal(tr); err != nil {
				return err
			}
			said := wire.FromTransition(endureSkid, &tr, "")
			said.Journal = "endurance"
			payload, err := json.Marshal(said)
			if err != nil {
				return err
			}
			if _, err := tx.Enqueue(ledger.Alarm, endureTopics.Alarm(), payload, false); err != nil {
				return err
			}
			if !said.Open {
				payload = nil
			}
			if _, err := tx.Enqueue(ledger.Alarm, endureTopics.Standing(said.Key), payload, true); err != nil {
				return err
			}
		}
		return nil
	})
}

// proxy is a network that can be cut, in the middle of a packet too, and held up.
type proxy struct {
	ln net.Listener
	to string

	mu    sync.Mutex
	down  bool
	held  chan struct{} // closed when bytes may pass
	conns map[net.Conn]bool
	wg    sync.WaitGroup
}

func startProxy(t *testing.T, to string) *proxy {
	t.Helper()
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	p := &proxy{ln: ln, to: to, held: make(chan struct{}), conns: map[net.Conn]bool{}}
	close(p.held)
	p.wg.Go(func() {
		for {
			c, err := ln.Accept()
			if err != nil {
				return
			}
			p.wg.Go(func() { p.carry(c) })
		}
	})
	t.Cleanup(func() { ln.Close(); p.release(); p.cut(); p.wg.Wait() })
	return p
}

func (p *proxy) port() int { return p.ln.Addr().(*net.TCPAddr).Port }

func (p *proxy) carry(c net.Conn) {
	defer c.Close()
	b, err := net.DialTimeout("tcp", p.to, time.Second)
	if err != nil {
		return
	}
	defer b.Close()
	p.mu.Lock()
	if p.down {
		p.mu.Unlock()
		return
	}
	p.conns[c], p.conns[b] = true, true
	p.mu.Unlock()
	var both sync.WaitGroup
	for _, d := range [][2]net.Conn{{c, b}, {b, c}} {
		both.Go(func() {
			buf := make([]byte, 512) // small pieces, so that a cut falls into packets
			for {
				n, err := d[0].Read(buf)
				p.mu.Lock()
				held := p.held
				p.mu.Unlock()
				<-held
				if n > 0 {
					if _, werr := d[1].Write(buf[:n]); werr != nil {
						return // what the other side has sent already still goes through
					}
				}
				if err != nil {
					_ = d[1].(*net.TCPConn).CloseWrite()
					return
				}
			}
		})
	}
	both.Wait()
	p.mu.Lock()
	delete(p.conns, c)
	delete(p.conns, b)
	p.mu.Unlock()
}

// cut breaks every connection and lets no new one through until mend.
func (p *proxy) cut() {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.down = true
	for c := range p.conns {
		if tc, ok := c.(*net.TCPConn); ok {
			_ = tc.SetLinger(0) // a reset: what is on its way is gone
		}
		c.Close()
	}
}

func (p *proxy) mend() {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.down = false
}

// hold lets no byte pass until release; nobody is told.
func (p *proxy) hold() {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.held = make(chan struct{})
}

func (p *proxy) release() {
	p.mu.Lock()
	defer p.mu.Unlock()
	select {
	case <-p.held:
	default:
		close(p.held)
	}
}
