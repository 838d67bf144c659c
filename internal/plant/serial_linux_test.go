package plant

import (
	"fmt"
	"io"
	"os"
	"strings"
	"sync"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// line is a pseudo-terminal: the poller opens one end as its serial port, the device sits at the other.
func line(t *testing.T) (device *os.File, port string) {
	t.Helper()
	device, err := os.OpenFile("/dev/ptmx", os.O_RDWR|unix.O_NOCTTY, 0)
	if err != nil {
		t.Skipf("short run: no pseudo-terminals here: %v", err)
	}
	t.Cleanup(func() { device.Close() })
	raw, err := device.SyscallConn()
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	if cerr := raw.Control(func(fd uintptr) {
		if err = unix.IoctlSetPointerInt(int(fd), unix.TIOCSPTLCK, 0); err == nil {
			n, err = unix.IoctlGetInt(int(fd), unix.TIOCGPTN)
		}
	}); cerr != nil || err != nil {
		t.Fatal(cerr, err)
	}
	port = fmt.Sprintf("/dev/pts/%d", n)
	held, err := os.OpenFile(port, os.O_RDWR|unix.O_NOCTTY, 0) // so that the line outlives the poller's closing it
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { held.Close() })
	fd := int(held.Fd())
	term, err := unix.IoctlGetTermios(fd, unix.TCGETS)
	if err != nil {
		t.Fatal(err)
	}
	term.Lflag, term.Iflag, term.Oflag = 0, 0, 0 // no echo before the poller has set the line up
	if err := unix.IoctlSetTermios(fd, unix.TCSETS, term); err != nil {
		t.Fatal(err)
	}
	return device, port
}

// A real serial port of the kernel, with an answer that is late and one that is damaged on the way.
func TestOverASerialPort(t *testing.T) {
	t.Parallel()
	device, port := line(t)
	f := &fake{serial: true, words: map[int]uint16{3<<16 | 10: 8000, 3<<16 | 60: 22000}}
	var mu sync.Mutex
	fault, asked := "", 0
	var all sync.WaitGroup
	t.Cleanup(func() { device.Close(); all.Wait() })
	all.Go(func() {
		for {
			b := make([]byte, 8)
			if _, err := io.ReadFull(device, b); err != nil {
				return
			}
			q := request{unit: b[0], function: b[1], first: int(b[2])<<8 | int(b[3]), n: int(b[4])<<8 | int(b[5])}
			out := frame(true, nil, q.unit, f.answer(q, 0))
			mu.Lock()
			how := fault
			fault = ""
			asked++
			mu.Unlock()
			switch how {
			case "late":
				time.Sleep(150 * time.Millisecond)
			case "damaged":
				out[3] ^= 0x10
			}
			if _, err := device.Write(out); err != nil {
				return
			}
		}
	})
	section := strings.Replace(one("rtu://"+port+"?baud=115200", "      worst_answer_ms: 300\n",
		strings.Replace(tagPs, "0.5", "20", 1), strings.Replace(strings.Replace(tagPd, "address: 11", "address: 60", 1), "0.5", "20", 1)), "timeout_ms: 60", "timeout_ms: 100", 1)
	p := polling(t, withModbus(t, section))
	right := func() bool { l := now(t, p).Stages[0]; return same(l.Ps, 8e5) && same(l.Pd, 22e5) }
	until(t, "both values are right", right)
	for _, how := range []string{"late", "damaged"} {
		mu.Lock()
		fault = how
		before := asked
		mu.Unlock()
		until(t, "the line has been asked often since", func() bool {
			if !right() {
				t.Fatalf("after an answer that was %s: %+v", how, now(t, p).Stages[0])
			}
			mu.Lock()
			defer mu.Unlock()
			return asked > before+4
		})
	}
}
