package plant

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"io"
	"log"
	"log/slog"
	"math/rand/v2"
	"net"
	"net/netip"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/simonvetter/modbus"

	"lapwing/internal/skid"
)

// serving starts a server on loopback; change sets what differs from the usual.
func serving(t testing.TB, ack Acknowledger, logger *slog.Logger, change func(*skid.ModbusServer)) *Server {
	t.Helper()
	sk := withModbus(t, "  server: {listen: '127.0.0.1:0', idle_s: 30}\n")
	if change != nil {
		change(&sk.Modbus.Server)
	}
	s, err := OpenServer(sk, NewMap(sk), ack, logger)
	if err != nil {
		t.Fatal(err)
	}
	n, points := snapshot()
	s.Show(n, points, false)
	done := make(chan error, 1)
	go func() { done <- s.Serve() }()
	t.Cleanup(func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
		if err := <-done; err != nil {
			t.Error(err)
		}
	})
	return s
}

func dial(t testing.TB, s *Server) net.Conn {
	t.Helper()
	c, err := net.Dial("tcp", s.Addr())
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close() })
	_ = c.SetDeadline(time.Now().Add(20 * time.Second))
	return c
}

// ask sends one request and gives function code and data of the answer.
func ask(t testing.TB, c net.Conn, unit byte, pdu ...byte) []byte {
	t.Helper()
	q := append([]byte{0xBE, 0xEF, 0, 0, 0, byte(1 + len(pdu)), unit}, pdu...)
	if _, err := c.Write(q); err != nil {
		t.Fatal(err)
	}
	head := make([]byte, 7)
	if _, err := io.ReadFull(c, head); err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(head[:4], q[:4]) || head[6] != unit {
		t.Fatalf("header % x for % x", head, q[:7])
	}
	out := make([]byte, int(binary.BigEndian.Uint16(head[4:]))-1)
	if _, err := io.ReadFull(c, out); err != nil {
		t.Fatal(err)
	}
	return out
}

// The answers that Modbus application protocol V1.1b3 wants (6.1, 6.3 to 6.5, 7), one connection for all.
func TestAnswers(t *testing.T) {
	s := serving(t, nil, quietLog(), nil)
	c := dial(t, s)
	for name, x := range map[string]struct {
		unit byte
		q    []byte
		want []byte
	}{
		"head":                   {1, []byte{4, 0, 4, 0, 4}, []byte{4, 8, 0, 2, 0, 3, 0, 2, 0, 2}},
		"the same as holding":    {1, []byte{3, 0, 4, 0, 4}, []byte{3, 8, 0, 2, 0, 3, 0, 2, 0, 2}},
		"unit 255":               {255, []byte{3, 0, 1, 0, 1}, []byte{3, 2, 0, 1}},
		"unit 0":                 {0, []byte{3, 0, 1, 0, 1}, []byte{3, 2, 0, 1}},
		"another unit":           {2, []byte{3, 0, 1, 0, 1}, []byte{0x83, 0x0A}},
		"nothing":                {1, []byte{3, 0, 1, 0, 0}, []byte{0x83, 3}},
		"too many":               {1, []byte{4, 0, 1, 0, 126}, []byte{0x84, 3}},
		"beyond the last":        {1, []byte{4, 0xFF, 0xFF, 0, 1}, []byte{0x84, 2}},
		"across the last":        {1, []byte{4, byte((s.m.size - 1) >> 8), byte(s.m.size - 1), 0, 2}, []byte{0x84, 2}},
		"too long":               {1, []byte{4, 0, 1, 0, 1, 0}, []byte{0x84, 3}},
		"too short":              {1, []byte{4, 0, 1}, []byte{0x84, 3}},
		"discrete inputs":        {1, []byte{2, 0, 1, 0, 1}, []byte{0x82, 1}},
		"write a register":       {1, []byte{6, 0, 1, 0, 1}, []byte{0x86, 1}},
		"write registers":        {1, []byte{16, 0, 1, 0, 1, 2, 0, 1}, []byte{0x90, 1}},
		"write a coil":           {1, []byte{5, 0, 0, 0xFF, 0}, []byte{0x85, 1}},
		"identification":         {1, []byte{0x2B, 0x0E, 1, 0}, []byte{0xAB, 1}},
		"no function":            {1, []byte{0}, []byte{0x80, 1}},
		"coils: all, then group": {1, []byte{1, 0, 0, 0, 101}, append([]byte{1, 13, 1}, append(make([]byte, 11), 0x10)...)},
		"too many coils":         {1, []byte{1, 0, 0, 0x07, 0xD1}, []byte{0x81, 3}},
	} {
		if got := ask(t, c, x.unit, x.q...); !bytes.Equal(got, x.want) {
			t.Errorf("%s: % x, want % x", name, got, x.want)
		}
	}
}

func TestBeforeTheFirstImageItIsBusy(t *testing.T) {
	s := serving(t, nil, quietLog(), nil)
	s.image.Store(nil)
	if got := ask(t, dial(t, s), 1, 3, 0, 0, 0, 1); !bytes.Equal(got, []byte{0x83, 6}) {
		t.Errorf("% x", got)
	}
}

// What is no Modbus ends the connection and nothing else.
func TestWhatIsNoModbusIsCutOff(t *testing.T) {
	s := serving(t, nil, quietLog(), nil)
	for name, q := range map[string][]byte{
		"another protocol": {0, 1, 0, 7, 0, 6, 1, 3, 0, 0, 0, 1}, "length 0": {0, 1, 0, 0, 0, 0, 1, 3, 0, 0, 0, 1},
		"length 1": {0, 1, 0, 0, 0, 1, 1}, "length 255": append([]byte{0, 1, 0, 0, 0, 255, 1}, make([]byte, 254)...), "a page": []byte("GET / HTTP/1.1\r\n\r\n"),
	} {
		c := dial(t, s)
		_, _ = c.Write(q)
		if n, err := c.Read(make([]byte, 300)); n != 0 || err == nil {
			t.Errorf("%s: answered", name)
		}
	}
	ask(t, dial(t, s), 1, 3, 0, 0, 0, 1)
}

func TestOnlySomeMayConnect(t *testing.T) {
	var said lines
	s := serving(t, nil, slog.New(slog.NewTextHandler(&said, nil)), func(m *skid.ModbusServer) { m.Allow = []string{"192.0.2.0/24"} })
	for range 5 {
		if _, err := dial(t, s).Read(make([]byte, 1)); err == nil {
			t.Fatal("a stranger was let in")
		}
	}
	if n := strings.Count(said.String(), "not on the list"); n != 1 {
		t.Errorf("said %d times: %s", n, said.String())
	}
}

// One address does not take all the connections there are, and gives them back.
func TestConnectionsAreCounted(t *testing.T) {
	s := serving(t, nil, quietLog(), func(m *skid.ModbusServer) { m.PerAddress = 2 })
	a, b := dial(t, s), dial(t, s)
	ask(t, a, 1, 3, 0, 0, 0, 1)
	ask(t, b, 1, 3, 0, 0, 0, 1)
	if _, err := dial(t, s).Read(make([]byte, 1)); err == nil {
		t.Fatal("a third connection")
	}
	a.Close()
	until(t, "there is room again", func() bool { return answered(s) })
	// In all: another address would count apart; here the bound in all is what is reached.
	other := serving(t, nil, quietLog(), func(m *skid.ModbusServer) { m.PerAddress, m.Clients = 9, 1 })
	ask(t, dial(t, other), 1, 3, 0, 0, 0, 1)
	if _, err := dial(t, other).Read(make([]byte, 1)); err == nil {
		t.Fatal("a second connection of one")
	}
}

// answered asks a new connection for the map's version.
func answered(s *Server) bool {
	c, err := net.Dial("tcp", s.Addr())
	if err != nil {
		return false
	}
	defer c.Close()
	_ = c.SetDeadline(time.Now().Add(10 * time.Second))
	_, _ = c.Write([]byte{0, 1, 0, 0, 0, 6, 1, 3, 0, 1, 0, 1})
	got := make([]byte, 11)
	_, err = io.ReadFull(c, got)
	return err == nil && bytes.Equal(got[7:], []byte{3, 2, 0, 1})
}

func TestAnIdleConnectionIsClosed(t *testing.T) {
	s := serving(t, nil, quietLog(), func(m *skid.ModbusServer) { m.Idle = 20 * time.Millisecond })
	if _, err := dial(t, s).Read(make([]byte, 1)); !errors.Is(err, io.EOF) {
		t.Errorf("%v", err)
	}
}

func TestAcknowledgeCoils(t *testing.T) {
	var mu sync.Mutex
	var keys, who []string
	var fail error
	ack := func(_ context.Context, k []string, by string) error {
		mu.Lock()
		defer mu.Unlock()
		keys, who = append(keys, k...), append(who, by)
		return fail
	}
	s := serving(t, ack, quietLog(), func(m *skid.ModbusServer) { m.Acknowledge = true })
	c := dial(t, s)
	for name, x := range map[string]struct{ q, want []byte }{
		"neither on nor off": {[]byte{5, 0, 0, 1, 0}, []byte{0x85, 3}}, "no such coil": {[]byte{5, 0, 1, 0xFF, 0}, []byte{0x85, 2}},
		"off": {[]byte{5, 0, 0, 0, 0}, []byte{5, 0, 0, 0, 0}}, "nothing waits there": {[]byte{5, 0, groupsAt + groupSize, 0xFF, 0}, []byte{5, 0, groupsAt + groupSize, 0xFF, 0}},
	} {
		if got := ask(t, c, 1, x.q...); !bytes.Equal(got, x.want) || len(keys) > 0 {
			t.Errorf("%s: % x, %q", name, got, keys)
		}
	}
	if got := ask(t, c, 1, 5, 0, groupsAt, 0xFF, 0); !bytes.Equal(got, []byte{5, 0, groupsAt, 0xFF, 0}) {
		t.Errorf("% x", got)
	}
	if !slices.Equal(keys, []string{"t1.he.suction/leaking"}) || !slices.Equal(who, []string{"modbus 127.0.0.1"}) {
		t.Errorf("%q by %q", keys, who)
	}
	fail = errors.New("not now")
	if got := ask(t, c, 1, 5, 0, 0, 0xFF, 0); !bytes.Equal(got, []byte{0x85, 6}) {
		t.Errorf("% x", got)
	}
}

// A float that is read in one request is never half of one image and half of another: speed and turn count are made to
// belong together in every image.
func TestNoFloatIsTorn(t *testing.T) {
	s := serving(t, nil, quietLog(), nil)
	wanted := make(chan struct{}, 1)
	var show sync.WaitGroup
	show.Go(func() {
		n, points := snapshot()
		i := int64(0)
		for range wanted { // some images while the next request is under way
			for range 5 {
				i++
				next := *n
				rpm := float64(i % 100000)
				next.Health.Turns, next.Health.RPM = i%100000, &rpm
				s.Show(&next, points, false)
			}
		}
	})
	defer show.Wait()
	defer close(wanted)
	c, err := modbus.NewClient(&modbus.ClientConfiguration{URL: "tcp://" + s.Addr(), Timeout: 20 * time.Second, Logger: log.New(io.Discard, "", 0)})
	if err != nil {
		t.Fatal(err)
	}
	if err := c.Open(); err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	changed := 0
	last := uint32(0)
	for reads := 0; reads < 2000 || changed < 10; reads++ { // as many as it takes to see some images
		select {
		case wanted <- struct{}{}:
		default:
		}
		w, err := c.ReadRegisters(rTurns, 6, modbus.INPUT_REGISTER)
		if err != nil {
			t.Fatal(err)
		}
		turns := uint32(w[0])<<16 | uint32(w[1])
		rpm, err := decode("f32", "abcd", w[4:6])
		if err != nil || rpm != 740.5 && rpm != float64(turns) {
			t.Fatalf("turn %d with %v rpm (%v)", turns, rpm, err)
		}
		if turns != last {
			changed++
		}
		last = turns
	}
}

// A client that sends anything at all: the server lives, gives connections back, and answers the next one.
func TestRandomClients(t *testing.T) {
	s := serving(t, func(context.Context, []string, string) error { return nil }, quietLog(), func(m *skid.ModbusServer) { m.Acknowledge, m.PerAddress = true, 64 })
	var all sync.WaitGroup
	for worker := range 4 {
		all.Go(func() {
			r := rand.New(rand.NewPCG(7, uint64(worker)))
			for range 60 {
				c, err := net.Dial("tcp", s.Addr())
				if err != nil {
					t.Error(err)
					return
				}
				_ = c.SetDeadline(time.Now().Add(20 * time.Second))
				go io.Copy(io.Discard, c)
				for range 40 {
					if _, err := c.Write(randomFrame(r)); err != nil {
						break
					}
				}
				c.Close()
			}
		})
	}
	all.Wait()
	// Those that wait in the listener's queue are still to be let in and to go: until then there may be no room.
	until(t, "the next one is answered", func() bool { return answered(s) })
	until(t, "every connection is given back", func() bool { s.mu.Lock(); defer s.mu.Unlock(); return len(s.conns) == 0 })
}

// randomFrame is mostly a frame with anything inside, and sometimes just bytes.
func randomFrame(r *rand.Rand) []byte {
	pdu := make([]byte, r.IntN(260))
	for i := range pdu {
		pdu[i] = byte(r.Uint32())
	}
	if r.IntN(8) == 0 {
		return pdu
	}
	if len(pdu) > 0 && r.IntN(4) > 0 {
		pdu[0] = []byte{1, 2, 3, 4, 5, 6, 15, 16, 0x2B, 0x83}[r.IntN(10)]
	}
	if len(pdu) > 5 && r.IntN(2) == 0 {
		pdu = append(pdu[:1], byte(r.IntN(14)), byte(r.Uint32()), 0, byte(r.IntN(130)))
	}
	n := 1 + len(pdu)
	if r.IntN(10) == 0 {
		n = r.IntN(70000)
	}
	return append([]byte{1, 2, 0, byte(r.IntN(20) / 19), byte(n >> 8), byte(n), 1}, pdu...)
}

// FuzzAnswer: whatever a request holds, the answer is one of the standard's: same function, or that with an exception.
func FuzzAnswer(f *testing.F) {
	sk := withModbus(f, "  server: {listen: '127.0.0.1:0', acknowledge: yes}\n")
	m := NewMap(sk)
	s := &Server{m: m, conf: sk.Modbus.Server, log: quietLog(), ack: func(context.Context, []string, string) error { return nil }}
	n, points := snapshot()
	s.image.Store(m.draw(n, points, false, 1, true))
	for _, q := range [][]byte{{3, 0, 0, 0, 125}, {4, 0x0B, 0xB8, 0, 9}, {1, 0, 0, 7, 0xD0}, {5, 0, 0, 0xFF, 0}, {16, 0, 1, 0, 1, 2, 0, 1}, {0x2B, 14, 1, 0}, {255}} {
		f.Add(byte(1), q)
	}
	f.Fuzz(func(t *testing.T, unit byte, q []byte) {
		if len(q) == 0 || len(q) > 253 {
			return
		}
		var room [253]byte
		a := s.answer(room[:0], unit, q, "test")
		switch {
		case len(a) < 2 || len(a) > 253:
			t.Fatalf("% x is answered with %d bytes", q, len(a))
		case a[0] == q[0]|0x80:
			if len(a) != 2 || !slices.Contains([]byte{1, 2, 3, 6, 10}, a[1]) {
				t.Fatalf("% x: exception % x", q, a)
			}
		case a[0] != q[0]:
			t.Fatalf("% x: % x", q, a)
		case q[0] == 3 || q[0] == 4:
			if len(a) != 2+int(a[1]) || int(a[1]) != 2*int(binary.BigEndian.Uint16(q[3:])) {
				t.Fatalf("% x: % x", q, a)
			}
		}
	})
}

func TestAddressesOfConnections(t *testing.T) {
	s := serving(t, nil, quietLog(), nil)
	if got := addrOf(dial(t, s)); got != netip.MustParseAddr("127.0.0.1") {
		t.Error(got)
	}
}

// lines is a log to look at.
type lines struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *lines) Write(b []byte) (int, error) { l.mu.Lock(); defer l.mu.Unlock(); return l.b.Write(b) }
func (l *lines) String() string              { l.mu.Lock(); defer l.mu.Unlock(); return l.b.String() }
