package plant

import (
	"context"
	"fmt"
	"math"
	"net"
	"strings"
	"testing"
	"time"

	"lapwing/internal/skid"
)

func run(t *testing.T, p *Poller) {
	t.Helper()
	ctx, stop := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() { p.Run(ctx); close(done) }()
	t.Cleanup(func() { stop(); <-done })
}

// now asks as the line does, and makes sure that asking takes no time to speak of.
func now(t *testing.T, p *Poller) skid.Process { return p.At(p.sk.Process, time.Now()) }

func same(a, b float64) bool {
	return math.IsNaN(a) && math.IsNaN(b) || math.Abs(a-b) < 1e-6*math.Abs(b)+1e-9
}

func TestValuesComeInTheirUnits(t *testing.T) {
	f := newFake(t, &fake{})
	f.set(3, 10, 8123)                   // suction, mbar absolute
	f.set(4, 100, 0x0000, 0x41A8)        // discharge 21.0 bar gauge, low word first
	f.set(4, 102, uint16(0xFFFF&(-100))) // suction temperature −10.0 °C
	f.set(3, 12, 2)                      // load step
	f.set(3, 400, 1832)                  // a cover, 183.2 °F
	sk := withModbus(t, one("tcp://"+f.addr(), "",
		tagPs, "{value: stage1.p_discharge, function: 4, address: 100, type: f32, order: cdab, unit: bar_gauge}",
		"{value: stage1.t_suction, function: 4, address: 102, type: i16, scale: 0.1, unit: c}",
		"{value: load_step, function: 3, address: 12}", "{value: TT-1111, function: 3, address: 400, scale: 0.1, unit: f}"))
	p := polling(t, sk)
	if first := p.At(sk.Process, time.Now()); first.Known && !math.IsNaN(first.Stages[0].Ps) && first.Stages[0].Ps == sk.Process.Stages[0].Ps {
		t.Error("before the first answer the file's fixed pressure stands in for the one that is to be read")
	}
	f.set(3, 11, 0) // between suction and load step: read along
	until(t, "the values are there", func() bool {
		got := now(t, p)
		return got.Known && got.Covers["t1.he.s1"] > 0 && !math.IsNaN(got.Stages[0].Pd)
	})
	got := now(t, p)
	l := got.Stages[0]
	if !same(l.Ps, 812300) || !same(l.Pd, 21e5+101300) || !same(l.Ts, 263.15) || got.Step != 2 || !same(got.Covers["t1.he.s1"], (183.2-32)*5/9+273.15) {
		t.Errorf("%+v", got)
	}
	if !math.IsNaN(l.Td) || got.Age < 0 {
		t.Errorf("Td %v, age %s", l.Td, got.Age)
	}
	if said := p.Troubles(time.Now()); len(said) != 0 {
		t.Errorf("%q", said)
	}
}

// Devices refuse to read across registers that they do not have, or more at once than they like, with one exception or
// another, and some of them sit on a serial line.
func TestADeviceThatRefusesAcrossAHoleIsReadTagByTag(t *testing.T) {
	for _, serial := range []bool{false, true} {
		for _, exception := range []byte{1, 2, 3, 4} {
			t.Run(fmt.Sprint(serial, exception), func(t *testing.T) {
				t.Parallel()
				f := newFake(t, &fake{serial: serial, script: func(_ int, q request) reply {
					if q.n > 1 {
						return reply{exception: exception}
					}
					return reply{}
				}})
				f.set(3, 10, 8000)
				f.set(3, 14, 22000)
				url := "tcp://"
				if serial {
					url = "rtuovertcp://"
				}
				p := polling(t, withModbus(t, one(url+f.addr(), "", strings.Replace(tagPs, "0.5", "20", 1), strings.Replace(strings.Replace(tagPd, "address: 11", "address: 14", 1), "0.5", "20", 1))))
				until(t, "both values are there", func() bool {
					l := now(t, p).Stages[0]
					return same(l.Ps, 8e5) && same(l.Pd, 22e5)
				})
			})
		}
	}
}

// What a device does wrong, one at a time: the values of that device leave, others stay, the line never waits, and the
// trouble is named.
func TestBadDevices(t *testing.T) {
	for name, c := range map[string]struct {
		script func(n int, q request) reply
		words  bool
		says   string
		most   int // requests meanwhile
	}{
		"silent":        {func(int, request) reply { return reply{silent: true} }, true, "timed out", 10},
		"slow":          {func(int, request) reply { return reply{after: 150 * time.Millisecond} }, true, "timed out", 10},
		"hangs up":      {func(int, request) reply { return reply{hangUp: true} }, true, "EOF", 10},
		"garbled":       {func(int, request) reply { return reply{raw: []byte("HTTP/1.1 400 Bad Request\r\n\r\n")} }, true, "", 10},
		"short":         {func(int, request) reply { return reply{raw: []byte{0, 1, 0, 0, 0, 3, 1, 3, 0}} }, true, "", 10},
		"another unit":  {func(_ int, q request) reply { return reply{raw: []byte{0, 1, 0, 0, 0, 5, 9, 3, 2, 0x1F, 0x40}} }, true, "bad unit id", 10},
		"busy":          {func(int, request) reply { return reply{exception: 6} }, true, "busy", 10},
		"no such thing": {nil, false, "check function and address", 2},
		"no function":   {func(int, request) reply { return reply{exception: 1} }, true, "check function and address", 2},
		"gateway":       {func(int, request) reply { return reply{exception: 11} }, true, "gateway target", 10},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			good := newFake(t, &fake{})
			good.set(3, 11, 22000)
			bad := newFake(t, &fake{script: c.script})
			if c.words {
				bad.set(3, 10, 8000)
			}
			section := one("tcp://"+bad.addr(), "", tagPs) +
				fmt.Sprintf("    - {name: other, url: 'tcp://%s', every_s: 0.1, timeout_ms: 10000, tags: [%s]}\n", good.addr(), strings.Replace(tagPd, "0.5", "20", 1))
			p := polling(t, withModbus(t, section))
			until(t, "the good device has been read often", func() bool { return len(good.requests()) >= 5 })
			until(t, "the trouble is named", func() bool {
				said := strings.Join(p.Troubles(time.Now()), "\n")
				return strings.Contains(said, "plc") && strings.Contains(said, "stage1.p_suction") && strings.Contains(said, c.says)
			})
			l := now(t, p).Stages[0]
			if !math.IsNaN(l.Ps) || !same(l.Pd, 22e5) {
				t.Errorf("suction %v, discharge %v", l.Ps, l.Pd)
			}
			if said := p.Troubles(time.Now()); len(said) != 1 {
				t.Errorf("%q", said)
			}
			if n := len(bad.requests()); n > c.most {
				t.Errorf("asked %d times: it is hammered", n)
			}
		})
	}
}

// A late answer on a line whose answers carry no number would be taken for the answer to the next question, and so on for
// ever. Registers 10 and 30 cannot be asked for at once; the answer for 10 comes late once.
func TestALateAnswerOnASerialLineShiftsNothing(t *testing.T) {
	t.Parallel()
	f := &fake{serial: true}
	late := make(chan struct{}, 1)
	f.script = func(n int, q request) reply {
		select {
		case <-late:
			return reply{after: 200 * time.Millisecond}
		default:
			return reply{}
		}
	}
	newFake(t, f)
	f.set(3, 10, 8000)
	f.set(3, 60, 22000)
	sk := withModbus(t, one("rtuovertcp://"+f.addr(), "      worst_answer_ms: 300\n", strings.Replace(tagPs, "0.5", "20", 1), strings.Replace(strings.Replace(tagPd, "address: 11", "address: 60", 1), "0.5", "20", 1)))
	p := polling(t, sk)
	right := func() bool {
		l := now(t, p).Stages[0]
		return same(l.Ps, 8e5) && same(l.Pd, 22e5)
	}
	until(t, "both values are right", right)
	for range 2 {
		f.mu.Lock()
		opens, asked := f.opens, len(f.asked)
		f.mu.Unlock()
		late <- struct{}{}
		until(t, "the line was closed and opened, and asked again", func() bool {
			f.mu.Lock()
			defer f.mu.Unlock()
			if l := now(t, p).Stages[0]; !same(l.Ps, 8e5) || !same(l.Pd, 22e5) {
				t.Fatalf("a value of another register: %v %v", l.Ps, l.Pd)
			}
			return f.opens > opens && len(f.asked) > asked+5
		})
	}
	if !right() {
		t.Error("the values did not come back")
	}
}

func TestTheCanaryTakesEverythingBack(t *testing.T) {
	t.Parallel()
	f := newFake(t, &fake{})
	f.set(3, 10, 8000)
	f.set(3, 0, 4711)
	p := polling(t, withModbus(t, one("tcp://"+f.addr(), "      canary: {function: 3, address: 0, is: 4711}\n", tagPs)))
	until(t, "the value is there", func() bool { return same(now(t, p).Stages[0].Ps, 8e5) })
	f.set(3, 0, 4712)
	until(t, "the value has gone", func() bool { return math.IsNaN(now(t, p).Stages[0].Ps) })
	if said := strings.Join(p.Troubles(time.Now()), ""); !strings.Contains(said, "canary reads 4712 instead of 4711") {
		t.Errorf("%q", said)
	}
	f.set(3, 0, 4711)
	until(t, "the value is back", func() bool { return same(now(t, p).Stages[0].Ps, 8e5) })
}

// A gateway answers with the last values of a controller that has stopped: only a register that moves tells.
func TestAHeartbeatThatStandsStill(t *testing.T) {
	t.Parallel()
	f := newFake(t, &fake{})
	f.set(3, 10, 8000)
	f.set(3, 0, 1)
	beating := make(chan struct{})
	var beat uint16
	f.script = func(_ int, q request) reply {
		select {
		case <-beating:
		default:
			if q.first == 0 {
				beat++
				f.words[3<<16] = beat
			}
		}
		return reply{}
	}
	p := polling(t, withModbus(t, one("tcp://"+f.addr(), "      heartbeat: {function: 3, address: 0, within_s: 0.3}\n", tagPs)))
	until(t, "the value is there", func() bool { return same(now(t, p).Stages[0].Ps, 8e5) })
	until(t, "and has been read often", func() bool { return len(f.requests()) > 12 })
	if !same(now(t, p).Stages[0].Ps, 8e5) {
		t.Error("gone, with a heart that beats")
	}
	close(beating)
	until(t, "the value has gone", func() bool { return math.IsNaN(now(t, p).Stages[0].Ps) })
	if said := strings.Join(p.Troubles(time.Now()), ""); !strings.Contains(said, "heartbeat stands still at") {
		t.Errorf("%q", said)
	}
	f.set(3, 0, 9999)
	until(t, "the value is back, if only for a while", func() bool { return same(now(t, p).Stages[0].Ps, 8e5) })
}

func TestStaleValuesLeaveAreNamedAndComeBack(t *testing.T) {
	t.Parallel()
	f := newFake(t, &fake{})
	f.set(3, 10, 8000)
	f.set(3, 11, 22000)
	f.set(4, 0, 1)
	p := polling(t, withModbus(t, one("tcp://"+f.addr(), "", tagPs, tagPd, tagStep)))
	there := func() bool { q := now(t, p); return q.Known && q.Step == 1 && same(q.Stages[0].Ps, 8e5) }
	until(t, "the values are there", there)
	at := f.addr()
	f.stop()
	until(t, "nothing is known", func() bool { return !now(t, p).Known })
	said := strings.Join(p.Troubles(time.Now()), "\n")
	for _, want := range []string{"plc (tcp://" + at + ", unit 1)", "since 20", "stage1.p_suction", "load_step"} {
		if !strings.Contains(said, want) {
			t.Errorf("%q does not say %q", said, want)
		}
	}
	f.listen(t, at)
	until(t, "the values are back", there)
	if said := p.Troubles(time.Now()); len(said) != 0 {
		t.Errorf("%q", said)
	}
}

// Ages are told from outside, so that nothing has to wait for them.
func TestEachValueHasAnAgeOfItsOwn(t *testing.T) {
	sk := withModbus(t, one("tcp://127.0.0.1:1", "", tagPs, tagPd, tagStep, "{value: stage1.t_suction, function: 3, address: 20, unit: c, max_age_s: 60}"))
	p, err := NewPoller(sk, nil)
	if err != nil {
		t.Fatal(err)
	}
	t0 := time.Unix(1000, 0)
	p.devices[0].state.Store(&state{tags: []reading{{v: 8e5, at: t0}, {v: 22e5, at: t0.Add(300 * time.Millisecond)}, {v: 1, at: t0.Add(600 * time.Millisecond)}, {v: 300, at: t0}}})
	nan := math.NaN()
	for _, c := range []struct {
		at             time.Duration
		ps, pd, ts     float64
		known          bool
		step           int
		age            time.Duration
		troubles, says string
	}{
		{400 * time.Millisecond, 8e5, 22e5, 300, true, 1, 400 * time.Millisecond, "", ""},
		{600 * time.Millisecond, nan, 22e5, 300, true, 1, 300 * time.Millisecond, "stage1.p_suction", ""},
		{time.Second, nan, nan, 300, true, 1, 400 * time.Millisecond, "stage1.p_discharge", ""},
		{2 * time.Second, nan, nan, nan, false, 0, 0, "load_step", ""}, // no load step: nothing at all
	} {
		q := p.At(sk.Process, t0.Add(c.at))
		l := q.Stages[0]
		if !same(l.Ps, c.ps) || !same(l.Pd, c.pd) || !same(l.Ts, c.ts) || q.Known != c.known || c.known && q.Step != c.step || q.Age != c.age {
			t.Errorf("after %s: %+v", c.at, q)
		}
		if said := strings.Join(p.Troubles(t0.Add(c.at)), "\n"); !strings.Contains(said, c.troubles) || (said == "") != (c.troubles == "") {
			t.Errorf("after %s: %q", c.at, said)
		}
	}
}

func TestAValueThatIsNotBelievedIsGoneAtOnce(t *testing.T) {
	t.Parallel()
	f := newFake(t, &fake{})
	f.set(3, 10, 8000)
	f.set(4, 0, 1)
	p := polling(t, withModbus(t, one("tcp://"+f.addr(), "", "{value: stage1.p_suction, function: 3, address: 10, scale: 0.001, unit: bar_abs, min: 5, max: 12, max_age_s: 20}", tagStep)))
	until(t, "the value is there", func() bool { return same(now(t, p).Stages[0].Ps, 8e5) })
	f.set(3, 10, 65535)
	until(t, "the value has gone", func() bool { return math.IsNaN(now(t, p).Stages[0].Ps) })
	if said := strings.Join(p.Troubles(time.Now()), ""); !strings.Contains(said, "65.535 bar_abs is outside 5 to 12") {
		t.Errorf("%q", said)
	}
	f.set(4, 0, 9)
	until(t, "the load step is not believed", func() bool { return strings.Contains(strings.Join(p.Troubles(time.Now()), ""), "no load step 9") })
	if now(t, p).Known {
		t.Error("with several load steps, nothing is known while the one in force is not")
	}
}

// Two units behind one address are asked one after the other over one connection.
func TestUnitsOfOneAddressShareItsConnection(t *testing.T) {
	f := newFake(t, &fake{serial: true})
	f.set(3, 10, 8000)
	f.set(3, 11, 22000)
	p := polling(t, withModbus(t, one("rtuovertcp://"+f.addr(), "      unit: 7\n", tagPs)+
		fmt.Sprintf("    - {name: second, url: 'rtuovertcp://%s', unit: 8, every_s: 0.1, timeout_ms: 60, tags: [%s]}\n", f.addr(), tagPd)))
	until(t, "both are read", func() bool { l := now(t, p).Stages[0]; return same(l.Ps, 8e5) && same(l.Pd, 22e5) })
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.opens != 1 {
		t.Errorf("%d connections", f.opens)
	}
}

func TestStoppingDoesNotWaitForADeadNetwork(t *testing.T) {
	// A listener whose queue is never served stands for a network that swallows what is sent.
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer ln.Close()
	p, err := NewPoller(withModbus(t, one("tcp://"+ln.Addr().String(), "", tagPs)), quietLog())
	if err != nil {
		t.Fatal(err)
	}
	ctx, stop := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() { p.Run(ctx); close(done) }()
	until(t, "it has tried", func() bool { return p.devices[0].state.Load().link != "not read yet" })
	stop()
	<-done
}
