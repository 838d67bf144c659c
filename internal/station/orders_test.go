package station

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
	"lapwing/internal/panel"
	"lapwing/internal/wire"
)

var orderStart = time.Date(2030, 5, 2, 6, 0, 0, 0, time.UTC)

// staffed is an open station that does not run, whose sample clock stands at 100 s, with two alerts standing.
func staffed(t *testing.T) *Station {
	t.Helper()
	o := journalled(t, orderStart.Add(-time.Hour))
	o.Start = orderStart
	s, err := Open(o)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	s.pub = nil // no broker: nothing to wait for at the end
	s.pass(0, int64(100*s.info.Rate))
	s.raise(t, alarm.Alert, "t1.he.suction/leaking", "t1.ce.discharge/leaking")
	return s
}

func (s *Station) raise(t *testing.T, sev alarm.Severity, keys ...string) {
	t.Helper()
	var conds []alarm.Condition
	for _, k := range keys {
		subject, kind, _ := strings.Cut(k, "/")
		conds = append(conds, alarm.Condition{Key: k, Subject: subject, Kind: kind, Known: true, Severity: sev, Sentence: k + " for a test", Turn: 12})
	}
	now := s.lineNow()
	if err := s.take(&Output{Transitions: s.line.Alarms().Step(now, conds), At: now, Vector: &s.line.vec, Points: s.line.points}); err != nil {
		t.Fatal(err)
	}
}

func (s *Station) stateOf(key string) alarm.State {
	for _, p := range s.line.Alarms().Points() {
		if p.Key == key {
			return p.State
		}
	}
	return alarm.Unknown
}

// Every verb about an alarm point: what it does, what the receipt says, what the journal and the control room get.
func TestOrders(t *testing.T) {
	const leak, load = "t1.he.suction/leaking", "t1.ce.discharge/leaking"
	s := staffed(t)
	sent := s.ledger.Stats().LastMessage
	for _, c := range []struct {
		name   string
		order  Order
		to     alarm.State
		key    string
		said   string
		refuse bool
	}{
		{"acknowledge", Order{Verb: "acknowledge", Key: leak, By: "A", Reason: "seen"}, alarm.Acked, leak, "acknowledged: seen, now acknowledged", false},
		{"twice", Order{Verb: "acknowledge", Key: leak, By: "A"}, alarm.Acked, leak, "not possible in this state: it is acknowledged", true},
		{"reset what is not latched", Order{Verb: "reset", Key: leak, By: "A"}, alarm.Acked, leak, "not possible in this state", true},
		{"shelve", Order{Verb: "shelve", Key: leak, By: "B", ForS: 60, Reason: "part ordered"}, alarm.Shelved, leak, "shelved until 2030-05-02T06:02:40Z: part ordered", false},
		{"shelve too long", Order{Verb: "shelve", Key: load, By: "B", ForS: 2 * 86400, Reason: "r"}, alarm.Unacked, load, "24h0m0s at most", true},
		{"shelve into the past", Order{Verb: "shelve", Key: load, By: "B", Until: orderStart, Reason: "r"}, alarm.Unacked, load, "end in the future", true},
		{"no reason", Order{Verb: "shelve", Key: load, By: "B", ForS: 60}, alarm.Unacked, load, "shelve needs reason", true},
		{"no end", Order{Verb: "shelve", Key: load, By: "B", Reason: "r"}, alarm.Unacked, load, "either for_s or until", true},
		{"no name", Order{Verb: "acknowledge", Key: load}, alarm.Unacked, load, "who gives it", true},
		{"no such point", Order{Verb: "acknowledge", Key: "t9/x", By: "A"}, alarm.Unknown, "t9/x", "no such alarm point", true},
		{"no such verb", Order{Verb: "trip", Key: load, By: "A"}, alarm.Unacked, load, `no verb "trip"`, true},
		{"what does not belong", Order{Verb: "acknowledge", Key: load, By: "A", Turns: 4}, alarm.Unacked, load, "takes no turns", true},
		{"unshelve", Order{Verb: "unshelve", Key: leak, By: "B"}, alarm.Unacked, leak, "unshelved, now unacknowledged", false},
		{"out of service", Order{Verb: "out-of-service", Key: load, By: "C", Reason: "gauge off"}, alarm.OutOfService, load, "taken out of service: gauge off", false},
		{"back", Order{Verb: "return-to-service", Key: load, By: "C"}, alarm.Unacked, load, "returned to service, now unacknowledged", false},
	} {
		t.Run(c.name, func(t *testing.T) {
			c.order.Via = "api"
			before := s.line.Alarms().Last()
			r := s.execute(c.order)
			if r.Accepted == c.refuse || !strings.Contains(r.Said, c.said) || !r.OnDisk {
				t.Errorf("receipt %+v, want %q", r, c.said)
			}
			if got := s.stateOf(c.key); got != c.to {
				t.Errorf("now %s, want %s", got, c.to)
			}
			acts, err := s.ledger.Acts(r.ID, 2)
			if err != nil || len(acts) != 1 {
				t.Fatalf("%d acts from %d on, %v", len(acts), r.ID, err)
			}
			a := acts[0]
			if a.By != c.order.By || a.Verb != c.order.Verb || a.Reason != c.order.Reason || a.Via != "api" || a.Accepted == c.refuse || a.Said != r.Said ||
				!a.At.Equal(orderStart.Add(100*time.Second)) || a.After != before {
				t.Errorf("journal has %+v", a)
			}
			if c.refuse {
				if len(a.Transitions) != 0 || s.line.Alarms().Last() != before {
					t.Errorf("a refused order changed something: %+v", a)
				}
				return
			}
			trs, err := s.ledger.Journal(before+1, 2)
			if err != nil || len(trs) != 1 || trs[0].By != c.order.By || trs[0].To != c.to || len(a.Transitions) != 1 || a.Transitions[0] != trs[0].ID {
				t.Fatalf("transitions %+v of %+v, %v", trs, a, err)
			}
			// the control room hears of every act as of any other transition: one message, and the standing topic
			ms, err := s.ledger.Next(sent, 9)
			if err != nil || len(ms) != 2 || ms[0].Topic != s.topics.Alarm() || ms[1].Topic != s.topics.Standing(c.key) || (len(ms[1].Payload) > 0) != c.to.Open() {
				t.Fatalf("messages %+v, %v", ms, err)
			}
			var said wire.Alarm
			if err := json.Unmarshal(ms[0].Payload, &said); err != nil || said.By != c.order.By || said.To != c.to.String() {
				t.Errorf("message %+v, %v", said, err)
			}
			sent = ms[1].ID
		})
	}
	// none of this asked for raw samples: they are those of when the alarm was raised
	if n := len(s.tape.Clips()); n != 0 {
		t.Errorf("%d clips", n)
	}
}

// silent is a source that gives nothing until it is told to end: a machine that stands, or a converter that hangs.
type silent struct{ acq.Source }

func (silent) Read(ctx context.Context, _ *acq.Block) error {
	<-ctx.Done()
	return ctx.Err()
}

// An order does not wait for the shaft to turn, nor for samples.
func TestOrdersWithoutTurns(t *testing.T) {
	s := staffed(t)
	s.src = silent{s.src}
	ctx, stop := context.WithCancel(t.Context())
	done := make(chan error)
	go func() { done <- s.Run(ctx) }()
	bounded, cancel := context.WithTimeout(t.Context(), 30*time.Second)
	defer cancel()
	r, err := s.Order(bounded, Order{Verb: "acknowledge", Key: "t1.he.suction/leaking", By: "A", Via: "api"})
	if err != nil || !r.Accepted {
		t.Errorf("%+v, %v", r, err)
	}
	if n := s.Now(); len(n.Journal) == 0 || n.Journal[0].To != "acknowledged" {
		t.Errorf("the snapshot does not show it: %+v", n.Journal)
	}
	stop()
	if err := <-done; err != nil {
		t.Error(err)
	}
	if _, err := s.Order(t.Context(), Order{Verb: "reset", Key: "k", By: "A"}); !errors.Is(err, panel.ErrNotRunning) {
		t.Errorf("after the end: %v", err)
	}
}

// ended is a source that is at its end at once.
type finished struct{ acq.Source }

func (finished) Read(context.Context, *acq.Block) error { return io.EOF }

// While the page of a recording that has ended is still up, orders are still carried out: here as the page takes them,
// and as it shows what came of them.
func TestOrdersAfterTheSourceHasEnded(t *testing.T) {
	s := staffed(t)
	s.src = finished{s.src}
	var err error
	if s.panel, err = panel.Open("127.0.0.1:0", s, nil); err != nil {
		t.Fatal(err)
	}
	s.o.AtEnd = func(ctx context.Context) {
		defer http.DefaultClient.CloseIdleConnections()
		ask := func(method, path, body string) (int, string) {
			req, err := http.NewRequestWithContext(ctx, method, s.PageURL()+"api/v1/"+path, strings.NewReader(body))
			if err != nil {
				t.Error(err)
				return 0, ""
			}
			req.Header.Set("Content-Type", "application/json")
			req.Header.Set(panel.OrderHeader, "page")
			resp, err := http.DefaultClient.Do(req)
			if err != nil {
				t.Error(err)
				return 0, ""
			}
			defer resp.Body.Close()
			b, err := io.ReadAll(resp.Body)
			if err != nil {
				t.Error(err)
			}
			return resp.StatusCode, string(b)
		}
		const order = `{"verb":"acknowledge","key":"t1.he.suction/leaking","by":"A. Operator"}`
		for i, c := range []struct {
			method, path, body string
			status             int
			holds              string
		}{
			{"POST", "orders", order, 200, `"said":"t1.he.suction/leaking: acknowledged, now acknowledged"`},
			{"POST", "orders", order, 409, `it is acknowledged`},
			{"GET", "journal?type=act&limit=1", "", 200, `"by":"A. Operator"`},
			{"GET", "journal?type=act&limit=1", "", 200, `"next":`},
			{"GET", "journal?page=nonsense", "", 400, "is no page of it"},
			{"GET", "journal?subject=t1&order=oldest&format=csv", "", 200, "acknowledge,page,true,"},
			{"GET", "alarms", "", 200, `"key":"t1.he.suction/leaking","subject":"t1.he.suction","kind":"leaking","state":"acknowledged","severity":"alert"`},
			{"GET", "why?subject=t1.he.suction", "", 200, "no turn has come yet"},
			{"GET", "now", "", 200, `"to":"acknowledged"`},
		} {
			if status, body := ask(c.method, c.path, c.body); status != c.status || !strings.Contains(body, c.holds) {
				t.Errorf("%d: %s %s: %d %.600s", i, c.method, c.path, status, body)
			}
		}
	}
	if err := s.Run(t.Context()); err != nil {
		t.Fatal(err)
	}
}

// An asker who has gone before his turn came gets an error, and nothing is done behind his back.
func TestOrderWithdrawn(t *testing.T) {
	s := staffed(t)
	gone, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := s.Order(gone, Order{Verb: "acknowledge", Key: "t1.he.suction/leaking", By: "A"}); !errors.Is(err, panel.ErrBusy) || !errors.Is(err, context.Canceled) {
		t.Errorf("%v", err)
	}
	s.carryOut(<-s.orders)
	if got := s.stateOf("t1.he.suction/leaking"); got != alarm.Unacked {
		t.Errorf("carried out all the same: %s", got)
	}
	for range ordersWait {
		s.orders <- &request{}
	}
	if _, err := s.Order(t.Context(), Order{}); !errors.Is(err, panel.ErrBusy) {
		t.Errorf("a full queue: %v", err)
	}
}

// A shelf ends by the sample clock while the machine stands, and what stands comes back.
func TestShelfEndsWithoutTurns(t *testing.T) {
	s := staffed(t)
	if r := s.execute(Order{Verb: "shelve", Key: "t1.he.suction/leaking", By: "A", Reason: "r", ForS: 50}); !r.Accepted {
		t.Fatal(r.Said)
	}
	s.pass(0, int64(149*s.info.Rate))
	if err := s.expire(); err != nil || s.stateOf("t1.he.suction/leaking") != alarm.Shelved {
		t.Fatalf("before its time: %s, %v", s.stateOf("t1.he.suction/leaking"), err)
	}
	s.pass(0, int64(150*s.info.Rate))
	if err := s.expire(); err != nil || s.stateOf("t1.he.suction/leaking") != alarm.Unacked {
		t.Fatalf("at its time: %s, %v", s.stateOf("t1.he.suction/leaking"), err)
	}
	trs, err := s.ledger.Journal(s.line.Alarms().Last(), 1)
	if err != nil || len(trs) != 1 || trs[0].Note != "shelving expired" || trs[0].By != "" {
		t.Errorf("%+v, %v", trs, err)
	}
}

// A clip cut by hand has its label and goes where it was asked to.
func TestCutClip(t *testing.T) {
	s := staffed(t)
	for name, c := range map[string]struct {
		order Order
		said  string
		ok    bool
	}{
		"last seconds":       {Order{LastS: 20}, "20.0 s of raw samples", true},
		"more than there is": {Order{LastS: 500}, "100.0 s of raw samples", true},
		"by time":            {Order{From: orderStart.Add(40 * time.Second), To: orderStart.Add(50 * time.Second)}, "10.0 s of raw samples", true},
		"before the run":     {Order{From: orderStart.Add(-time.Minute), To: orderStart.Add(-time.Second)}, "nothing of that time", false},
		"far ahead":          {Order{From: orderStart, To: orderStart.Add(30 * time.Minute)}, "ahead", false},
		"turned round":       {Order{From: orderStart.Add(9 * time.Second), To: orderStart}, "in this order", false},
		"neither":            {Order{}, "either last_s", false},
	} {
		t.Run(name, func(t *testing.T) {
			c.order.Verb, c.order.By, c.order.Label = "cut-clip", "A", "odd noise"
			r := s.execute(c.order)
			if r.Accepted != c.ok || !strings.Contains(r.Said, c.said) {
				t.Errorf("%+v, want %q", r, c.said)
			}
			if c.ok {
				if clip, err := s.tape.Clip(r.Clip); err != nil || !strings.Contains(clip.Label, "odd noise") {
					t.Errorf("clip %+v, %v", clip, err)
				}
			}
		})
	}
}

// What people ordered is there after a restart, shelf and all, and numbers go on.
func TestOrdersOutliveARestart(t *testing.T) {
	s := staffed(t)
	if r := s.execute(Order{Verb: "shelve", Key: "t1.he.suction/leaking", By: "A", Reason: "r", ForS: 3600}); !r.Accepted {
		t.Fatal(r.Said)
	}
	if r := s.execute(Order{Verb: "trip", By: "A"}); r.Accepted || r.ID != 2 {
		t.Fatalf("%+v", r)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	again, err := Open(s.o)
	if err != nil {
		t.Fatal(err)
	}
	defer again.Close()
	if got := again.stateOf("t1.he.suction/leaking"); got != alarm.Shelved {
		t.Errorf("after a restart %s", got)
	}
	if r := again.execute(Order{Verb: "unshelve", Key: "t1.he.suction/leaking", By: "A"}); !r.Accepted || r.ID != 3 {
		t.Errorf("%+v", r)
	}
	l := again.ledger
	again.ledger = nil
	defer l.Close()
	if acts, err := l.Acts(0, 9); err != nil || len(acts) != 3 {
		t.Errorf("%d acts, %v", len(acts), err)
	}
	if _, err := ledger.Open(filepath.Join(s.o.State, "state.db"), ledger.Options{LockWait: time.Millisecond}); err == nil {
		t.Error("two hold the state file")
	}
}

// More than ten alarms within ten minutes are a flood: page and health say so, and name the first that still stands.
func TestFloodIsSaid(t *testing.T) {
	s := staffed(t) // two stand
	var keys []string
	for i := range 9 {
		keys = append(keys, fmt.Sprintf("t2.ce.d%d/leaking", i))
	}
	s.raise(t, alarm.Advisory, keys[:8]...)
	if said := s.Now().Health.Trouble; len(said) != 0 {
		t.Errorf("ten alarms: %q", said)
	}
	s.raise(t, alarm.Advisory, keys[8])
	said := s.Now().Health.Trouble
	if len(said) != 1 || !strings.Contains(said[0], "alarm flood") || !strings.Contains(said[0], "t1.he.suction/leaking") || !s.Alarms().Flood {
		t.Errorf("eleven alarms: %q", said)
	}
}
