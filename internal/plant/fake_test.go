package plant

import (
	"encoding/binary"
	"fmt"
	"io"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"

	"lapwing/internal/skid"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// fake is a device written for the tests, not with the library under test: registers behind Modbus TCP or, with serial,
// behind RTU frames over TCP, as serial servers speak. script says how it answers; nil: well.
type fake struct {
	serial bool
	ln     net.Listener
	mu     sync.Mutex
	words  map[int]uint16 // by function·65536 + address; an address that is not there is refused
	asked  []request
	opens  int
	script func(n int, q request) reply // n counts requests from 0, over all connections
	conns  []net.Conn
	all    sync.WaitGroup
}

type request struct {
	unit, function byte
	first, n       int
	conn           int
}

type reply struct {
	after     time.Duration
	raw       []byte // instead of the answer, as it is
	exception byte
	silent    bool
	hangUp    bool
}

func newFake(t testing.TB, f *fake) *fake {
	t.Helper()
	if f.words == nil {
		f.words = map[int]uint16{}
	}
	f.listen(t, "127.0.0.1:0")
	t.Cleanup(f.stop)
	return f
}

func (f *fake) listen(t testing.TB, at string) {
	t.Helper()
	ln, err := net.Listen("tcp", at)
	if err != nil {
		t.Fatal(err)
	}
	f.mu.Lock()
	f.ln = ln
	f.mu.Unlock()
	f.all.Go(func() {
		for {
			c, err := ln.Accept()
			if err != nil {
				return
			}
			f.mu.Lock()
			f.conns = append(f.conns, c)
			id := f.opens
			f.opens++
			f.mu.Unlock()
			f.all.Go(func() { defer c.Close(); f.serve(c, id) })
		}
	})
}

func (f *fake) stop() {
	f.mu.Lock()
	f.ln.Close()
	for _, c := range f.conns {
		c.Close()
	}
	f.conns = nil
	f.mu.Unlock()
	f.all.Wait()
}

func (f *fake) addr() string { return f.ln.Addr().String() }

func (f *fake) set(function, address int, words ...uint16) {
	f.mu.Lock()
	defer f.mu.Unlock()
	for i, w := range words {
		f.words[function<<16|(address+i)] = w
	}
}

func (f *fake) requests() []request {
	f.mu.Lock()
	defer f.mu.Unlock()
	return append([]request(nil), f.asked...)
}

func (f *fake) serve(c net.Conn, id int) {
	for {
		var head []byte
		q := request{conn: id}
		if f.serial {
			b := make([]byte, 8) // every reading request is eight bytes long
			if _, err := io.ReadFull(c, b); err != nil {
				return
			}
			q.unit, q.function, q.first, q.n = b[0], b[1], int(binary.BigEndian.Uint16(b[2:])), int(binary.BigEndian.Uint16(b[4:]))
		} else {
			b := make([]byte, 12)
			if _, err := io.ReadFull(c, b); err != nil {
				return
			}
			head = b[:4]
			q.unit, q.function, q.first, q.n = b[6], b[7], int(binary.BigEndian.Uint16(b[8:])), int(binary.BigEndian.Uint16(b[10:]))
		}
		f.mu.Lock()
		n := len(f.asked)
		f.asked = append(f.asked, q)
		var r reply
		if f.script != nil {
			r = f.script(n, q)
		}
		pdu := f.answer(q, r.exception)
		f.mu.Unlock()
		if r.hangUp {
			return
		}
		if r.silent {
			continue
		}
		out := r.raw
		if out == nil {
			out = frame(f.serial, head, q.unit, pdu)
		}
		if r.after > 0 { // late, and the device goes on hearing questions meanwhile
			f.all.Go(func() {
				time.Sleep(r.after)
				to := c
				if f.serial { // what comes over the wire goes to whoever has the line open by then
					f.mu.Lock()
					if n := len(f.conns); n > 0 {
						to = f.conns[n-1]
					}
					f.mu.Unlock()
				}
				_, _ = to.Write(out)
			})
			continue
		}
		if _, err := c.Write(out); err != nil {
			return
		}
	}
}

// answer is the answer's function and data.
func (f *fake) answer(q request, exception byte) []byte {
	data := []byte{}
	for i := range q.n {
		w, ok := f.words[int(q.function)<<16|(q.first+i)]
		if !ok && exception == 0 {
			exception = 2
		}
		if q.function <= 2 {
			if i%8 == 0 {
				data = append(data, 0)
			}
			data[i/8] |= byte(w&1) << (i % 8)
		} else {
			data = binary.BigEndian.AppendUint16(data, w)
		}
	}
	if exception != 0 {
		return []byte{q.function | 0x80, exception}
	}
	return append([]byte{q.function, byte(len(data))}, data...)
}

func frame(serial bool, head []byte, unit byte, pdu []byte) []byte {
	if serial {
		b := append([]byte{unit}, pdu...)
		return binary.LittleEndian.AppendUint16(b, crc16(b))
	}
	b := append([]byte(nil), head...)
	b = binary.BigEndian.AppendUint16(b, uint16(1+len(pdu)))
	return append(append(b, unit), pdu...)
}

// crc16 is written bit by bit from Modbus over serial line V1.02, 6.2.2.
func crc16(b []byte) uint16 {
	c := uint16(0xFFFF)
	for _, x := range b {
		c ^= uint16(x)
		for range 8 {
			if c&1 != 0 {
				c = c>>1 ^ 0xA001
			} else {
				c >>= 1
			}
		}
	}
	return c
}

// withModbus is the two-throw example with a Modbus section.
func withModbus(t testing.TB, section string) *skid.Skid {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join("..", "..", "configs", "biomethane-two-throw.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	sk, err := skid.Parse("m.yaml", append(raw, []byte("\nmodbus:\n"+section)...))
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

// one is a section with one device.
func one(url, more string, tags ...string) string {
	return fmt.Sprintf("  devices:\n    - name: plc\n      url: %s\n      every_s: 0.1\n      timeout_ms: 60\n%s      tags:\n        - %s\n", url, more, strings.Join(tags, "\n        - "))
}

const (
	tagPs   = "{value: stage1.p_suction, function: 3, address: 10, type: u16, scale: 0.001, unit: bar_abs, max_age_s: 0.5}"
	tagPd   = "{value: stage1.p_discharge, function: 3, address: 11, type: u16, scale: 0.001, unit: bar_abs, max_age_s: 0.5}"
	tagStep = "{value: load_step, function: 4, address: 0, max_age_s: 0.5}"
)

func quietLog() *slog.Logger { return slog.New(slog.DiscardHandler) }

// polling starts a poller that the end of the test stops.
func polling(t *testing.T, sk *skid.Skid) *Poller {
	t.Helper()
	p, err := NewPoller(sk, quietLog())
	if err != nil {
		t.Fatal(err)
	}
	run(t, p)
	return p
}

// until polls for what must come true: time only bounds how long a broken program is waited for.
func until(t *testing.T, what string, ok func() bool) {
	t.Helper()
	end := time.NewTimer(20 * time.Second)
	defer end.Stop()
	tick := time.NewTicker(2 * time.Millisecond)
	defer tick.Stop()
	for !ok() {
		select {
		case <-tick.C:
		case <-end.C:
			t.Fatalf("in vain: %s", what)
		}
	}
}
