package main

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"log"
	"math"
	"math/rand/v2"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/simonvetter/modbus"

	"lapwing/internal/wire"
)

// plc is a control system with process values, served by the library that the poller is a client of; the cover
// temperature comes from pymodbus.
type plc struct {
	words [8]atomic.Uint32
	asked atomic.Int64
}

func (p *plc) HandleCoils(*modbus.CoilsRequest) ([]bool, error) {
	return nil, modbus.ErrIllegalFunction
}

func (p *plc) HandleDiscreteInputs(*modbus.DiscreteInputsRequest) ([]bool, error) {
	return nil, modbus.ErrIllegalFunction
}

func (p *plc) HandleHoldingRegisters(q *modbus.HoldingRegistersRequest) (out []uint16, err error) {
	p.asked.Add(1)
	if q.IsWrite || int(q.Addr)+int(q.Quantity) > len(p.words) {
		return nil, modbus.ErrIllegalDataAddress
	}
	for i := range int(q.Quantity) {
		out = append(out, uint16(p.words[int(q.Addr)+i].Load()))
	}
	return out, nil
}

func (p *plc) HandleInputRegisters(*modbus.InputRegistersRequest) ([]uint16, error) {
	return nil, modbus.ErrIllegalFunction
}

// float puts a number into two registers, high word first.
func (p *plc) float(at int, v float32) {
	b := math.Float32bits(v)
	p.words[at].Store(b >> 16)
	p.words[at+1].Store(b & 0xFFFF)
}

func (p *plc) serve(t *testing.T, port int) *modbus.ModbusServer {
	t.Helper()
	s, err := modbus.NewServer(&modbus.ServerConfiguration{URL: "tcp://" + address(port), Timeout: time.Minute, Logger: log.New(io.Discard, "", 0)}, p)
	if err != nil {
		t.Fatal(err)
	}
	until(t, 20*time.Second, "the control system listens", func() bool { return s.Start() == nil })
	t.Cleanup(func() { _ = s.Stop() })
	return s
}

// Debian's own Python has Debian's pymodbus.
var python, modbusPython = "/usr/bin/python3", filepath.Join("testdata", "modbus_client.py")

// moment is what an independent client saw at one moment.
type moment struct {
	Input, Holding map[string]uint16
	Now            wire.Now
}

// register is a line of the printed map.
type register struct {
	at   int
	kind string
}

// TestSystemModbus: process values come in over Modbus, and pymodbus reads what the page shows.
func TestSystemModbus(t *testing.T) {
	system(t)
	dir := t.TempDir()
	in, covers, out := freePort(t), freePort(t), freePort(t)
	skid := skidFile(t, dir, "limits", "\n  - {of: t1.he, measure: p_suction_bar_abs, low: 50, on_delay_s: 0.2, off_delay_s: 0.5, severity: alert}")
	section := fmt.Sprintf(`
modbus:
  devices:
    - name: plc
      url: tcp://%s
      every_s: 0.2
      timeout_ms: 2000
      tags:
        - {value: load_step, function: 3, address: 0, max_age_s: 4}
        - {value: stage1.p_suction, function: 3, address: 1, type: f32, unit: bar_abs, max_age_s: 4}
        - {value: stage1.p_discharge, function: 3, address: 3, type: f32, unit: bar_abs, max_age_s: 4}
    - name: covers
      url: rtuovertcp://%s
      unit: 3
      every_s: 0.5
      timeout_ms: 2000
      tags: [{value: TT-1111, function: 3, address: 5, type: i16, scale: 0.1, unit: c, max_age_s: 30}]
  server: {listen: '%s', acknowledge: yes, allow: [127.0.0.1]}
`, address(in), address(covers), address(out))
	f, err := os.OpenFile(skid, os.O_APPEND|os.O_WRONLY, 0)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := f.WriteString(section); err != nil || f.Close() != nil {
		t.Fatal(err)
	}
	p := &plc{}
	p.words[0].Store(0)
	p.float(1, 8)
	p.float(3, 22)
	start(t, nil, python, modbusPython, "serve", strconv.Itoa(covers), "5", "654") // behind a serial server
	control := p.serve(t, in)
	d := start(t, nil, built(t, "lapwingd"), "--skid", skid, "--state", filepath.Join(dir, "state"), "--source", "model:swings", "--listen", "127.0.0.1:0", "--broker", "tcp://127.0.0.1:1")
	page := pageOf(t, d)

	stdout, stderr, code := ran(t, built(t, "lapwing"), "registers", skid, "--csv")
	if code != 0 {
		t.Fatal(stderr)
	}
	regs, ranges := readMap(t, stdout)
	t.Run("values of the page", func(t *testing.T) {
		d.until(2*time.Minute, "the limit stands and there is a whole turn with the line's ratio", func() bool {
			n := nowOf(t, page)
			return len(n.Standing) > 0 && n.Latest != nil && n.Latest.Valid && ratioLine(&n) > 0 && coverOf(&n) > 0
		})
		m := look(t, out, page, ranges)
		n := &m.Now
		if r := ratioLine(n); math.Abs(r-22./8) > 0.01 {
			t.Errorf("the ratio of the lines is %v, the control system says 22 over 8", r)
		}
		if c := coverOf(n); math.Abs(c-65.4) > 0.01 {
			t.Errorf("the cover is at %v °C, the control system says 65.4", c)
		}
		compare(t, regs, &m)
	})
	t.Run("acknowledge", func(t *testing.T) {
		if got := look(t, out, page, ranges); got.Input[strconv.Itoa(regs["t1.he alarm_state"].at)] != 2 {
			t.Errorf("alarm state of t1.he is %d before", got.Input[strconv.Itoa(regs["t1.he alarm_state"].at)])
		}
		said := client(t, "write", strconv.Itoa(out), "0")
		if !strings.Contains(said, `"error": ""`) {
			t.Fatal(said)
		}
		d.until(time.Minute, "the point is acknowledged on page and registers", func() bool {
			m := look(t, out, page, ranges)
			return len(m.Now.Standing) > 0 && m.Now.Standing[0].To == "acknowledged" && m.Input[strconv.Itoa(regs["t1.he alarm_state"].at)] == 3 && m.Input[strconv.Itoa(regs["unacknowledged"].at)] == 0
		})
		if journal := get(t, page+"api/v1/journal"); !strings.Contains(journal, `"via":"modbus"`) || !strings.Contains(journal, "modbus 127.0.0.1") {
			t.Errorf("the journal does not say who: %s", tail(journal, 1500))
		}
	})
	t.Run("stale", func(t *testing.T) {
		if err := control.Stop(); err != nil {
			t.Fatal(err)
		}
		var gone wire.Now
		d.until(time.Minute, "the values have left the computations and health says so", func() bool {
			gone = nowOf(t, page)
			return plantTrouble(&gone) != "" && gone.Latest.Valid && math.IsNaN(ratioLine(&gone))
		})
		said := plantTrouble(&gone)
		for _, want := range []string{"plc", "unit 1", "since 20", "load_step", "stage1.p_suction", "stage1.p_discharge"} {
			if !strings.Contains(said, want) {
				t.Errorf("health says %q, without %q", said, want)
			}
		}
		if e := gone.Latest.Throws[0].Ends[0]; e.Absent["ratio_line"] == "" || e.Values["p_suction_bar_abs"] == 0 {
			t.Errorf("no reason for the line's ratio, or no plateau to go by: %q, %v", e.Absent["ratio_line"], e.Values["p_suction_bar_abs"])
		}
		if m := look(t, out, page, ranges); m.Input[strconv.Itoa(regs["troubles"].at)] == 0 || m.Input[strconv.Itoa(regs["health"].at)] == 1 {
			t.Error("the registers say that all is well")
		}
		p.serve(t, in)
		d.until(2*time.Minute, "the values are back and the trouble has gone", func() bool {
			n := nowOf(t, page)
			return plantTrouble(&n) == "" && ratioLine(&n) > 0 && coverOf(&n) > 0
		})
	})
	t.Run("random clients", func(t *testing.T) {
		files := descriptors(t, d)
		end := time.Now().Add(5 * time.Second)
		var all sync.WaitGroup
		var sent atomic.Int64
		for worker := range 3 {
			all.Go(func() {
				r := rand.New(rand.NewPCG(uint64(worker), 1))
				for time.Now().Before(end) {
					c, err := net.Dial("tcp", address(out))
					if err != nil {
						t.Error(err)
						return
					}
					_ = c.SetDeadline(time.Now().Add(5 * time.Second))
					go func() { _, _ = io.Copy(io.Discard, c) }()
					for range 50 {
						if _, err := c.Write(garbage(r)); err != nil {
							break
						}
						sent.Add(1)
					}
					c.Close()
				}
			})
		}
		all.Wait()
		t.Logf("%d frames", sent.Load())
		d.until(time.Minute, "every connection is given back", func() bool { return descriptors(t, d) <= files+2 })
		if m := look(t, out, page, ranges); m.Input["1"] != 1 {
			t.Error("the map's version is no longer read")
		}
		if strings.Contains(d.err.String(), "panic") {
			t.Error("a panic in the log")
		}
	})
	if code := d.terminate(time.Minute); code != 0 {
		t.Errorf("exit %d", code)
	}
}

// readMap takes the printed map in, and gives the stretches to read, at most 125 registers each.
func readMap(t *testing.T, text string) (map[string]register, []string) {
	t.Helper()
	rows, err := csv.NewReader(strings.NewReader(text)).ReadAll()
	if err != nil || len(rows) < 100 {
		t.Fatalf("%d rows, %v", len(rows), err)
	}
	regs := map[string]register{}
	var ends []int // of what is used, by first register
	first := -1
	var ranges []string
	flush := func() {
		if first >= 0 {
			ranges = append(ranges, fmt.Sprintf("%d:%d", first, slices.Max(ends)-first))
		}
		first, ends = -1, nil
	}
	for _, r := range rows[1:] {
		at, _ := strconv.Atoi(r[0])
		words, _ := strconv.Atoi(r[3])
		if r[4] == "bool" {
			continue
		}
		regs[strings.TrimSpace(r[5]+" "+r[6])] = register{at, r[4]}
		if first >= 0 && at+words-first > 100 {
			flush()
		}
		if first < 0 {
			first = at
		}
		ends = append(ends, at+words)
	}
	flush()
	return regs, ranges
}

func client(t *testing.T, args ...string) string {
	t.Helper()
	out, errs, code := ran(t, python, append([]string{modbusPython}, args...)...)
	if code != 0 {
		t.Fatalf("pymodbus: exit %d\n%s%s", code, out, errs)
	}
	return out
}

func look(t *testing.T, port int, page string, ranges []string) (m moment) {
	t.Helper()
	out := client(t, append([]string{"look", strconv.Itoa(port), page}, ranges...)...)
	if err := json.Unmarshal([]byte(out), &m); err != nil {
		t.Fatalf("%v in %s", err, tail(out, 500))
	}
	return m
}

// compare finds every number of the page's newest turn in the registers, and the counts.
func compare(t *testing.T, regs map[string]register, m *moment) {
	t.Helper()
	n := &m.Now
	word := func(at int) uint32 { return uint32(m.Input[strconv.Itoa(at)]) }
	float := func(r register) float64 {
		return float64(math.Float32frombits(word(r.at)<<16 | word(r.at+1)))
	}
	numbers := 0
	known := func(subject string, values map[string]float64) {
		for name, r := range regs {
			s, measure, ok := strings.Cut(name, " ")
			if !ok || s != subject || r.kind != "f32" {
				continue
			}
			got := float(r)
			want, there := values[measure]
			switch {
			case !there && !math.IsNaN(got):
				t.Errorf("%s is %v, the page has none", name, got)
			case there && (math.IsNaN(got) || math.Abs(got-want) > 1e-6*math.Abs(want)):
				t.Errorf("%s is %v, the page says %v", name, got, want)
			case there:
				numbers++
			}
		}
	}
	for _, th := range n.Latest.Throws {
		known(th.ID, th.Values)
		for _, e := range th.Ends {
			known(th.ID+"."+e.End, e.Values)
			for _, g := range []string{".suction", ".discharge"} {
				known(th.ID+"."+e.End+g, th.Paths[th.ID+"."+e.End+g])
			}
		}
		known(th.ID+".rings", th.Paths[th.ID+".rings"])
		if got := word(regs[th.ID+" load_step"].at); got != uint32(th.Step) {
			t.Errorf("load step of %s is %d, the page says %d", th.ID, got, th.Step)
		}
	}
	if numbers < 40 {
		t.Errorf("only %d numbers were compared", numbers)
	}
	t.Logf("%d numbers compared", numbers)
	for name, want := range map[string]int{"standing": len(n.Standing), "worst_severity": 2, "troubles": len(n.Health.Trouble), "shaft": 3} {
		if got := word(regs[name].at); int(got) != want {
			t.Errorf("%s is %d, want %d", name, got, want)
		}
	}
	for i := range n.Health.Channels {
		c := &n.Health.Channels[i]
		want := slices.Index([]string{"function check", "good", "maintenance required", "out of specification", "failure"}, c.State)
		if got := word(regs[c.ID+" state"].at); int(got) != want {
			t.Errorf("channel %s is %d, the page says %s", c.ID, got, c.State)
		}
	}
}

func get(t *testing.T, url string) string {
	t.Helper()
	r, err := http.Get(url)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Body.Close()
	b, err := io.ReadAll(r.Body)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

func nowOf(t *testing.T, page string) (n wire.Now) {
	t.Helper()
	if err := json.Unmarshal([]byte(get(t, page+"api/v1/now")), &n); err != nil {
		t.Fatal(err)
	}
	return n
}

// ratioLine is the first end's ratio of the lines; NaN when it is absent.
func ratioLine(n *wire.Now) float64 {
	if n.Latest != nil && len(n.Latest.Throws) > 0 && len(n.Latest.Throws[0].Ends) > 0 {
		if v, ok := n.Latest.Throws[0].Ends[0].Values["ratio_line"]; ok {
			return v
		}
	}
	return math.NaN()
}

// coverOf is the first valve's cover temperature; NaN when it is absent.
func coverOf(n *wire.Now) float64 {
	if n.Latest != nil && len(n.Latest.Throws) > 0 {
		if v, ok := n.Latest.Throws[0].Paths["t1.he.s1"]["cover_c"]; ok {
			return v
		}
	}
	return math.NaN()
}

func plantTrouble(n *wire.Now) string {
	for _, s := range n.Health.Trouble {
		if strings.Contains(s, "process values of plc") {
			return s
		}
	}
	return ""
}

// descriptors counts a program's open files.
func descriptors(t *testing.T, p *program) int {
	t.Helper()
	es, err := os.ReadDir(fmt.Sprintf("/proc/%d/fd", p.cmd.Process.Pid))
	if err != nil {
		t.Fatal(err)
	}
	return len(es)
}

// garbage is a frame with anything inside, or no frame at all. It never sets a coil: that would be an order.
func garbage(r *rand.Rand) []byte {
	b := make([]byte, r.IntN(300))
	for i := range b {
		b[i] = byte(r.Uint32())
	}
	if len(b) < 8 || r.IntN(10) == 0 {
		return b
	}
	n := len(b) - 6
	if n > 254 || r.IntN(20) == 0 {
		n = r.IntN(70000)
	}
	b[2], b[3], b[4], b[5], b[6] = 0, 0, byte(n>>8), byte(n), 1
	b[7] = []byte{1, 2, 3, 4, 6, 15, 16, 0x2B, 0x83, 0}[r.IntN(10)]
	if len(b) >= 12 && r.IntN(2) == 0 {
		b = b[:12]
		b[4], b[5], b[8], b[10] = 0, 6, byte(r.IntN(14)), 0
	}
	return b
}
