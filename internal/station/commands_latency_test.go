package station

import (
	"context"
	"encoding/json"
	"fmt"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// stamped notes when each block has come out of the source.
type stamped struct {
	acq.Source
	mu   sync.Mutex
	ends []int64 // sample number after each block
	came []time.Time
}

func (s *stamped) Read(ctx context.Context, b *acq.Block) error {
	err := s.Source.Read(ctx, b)
	if err == nil {
		s.mu.Lock()
		s.ends, s.came = append(s.ends, b.Seq0+int64(b.N)), append(s.came, time.Now())
		s.mu.Unlock()
	}
	return err
}

// at is when sample n was there.
func (s *stamped) at(n int64) (time.Time, bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	i, _ := slices.BinarySearch(s.ends, n)
	if i == len(s.ends) {
		return time.Time{}, false
	}
	return s.came[i], true
}

// TestLatency states how long it takes from the last raw sample of the turn that makes a transition to its message at a
// subscriber, in real time, with the journal on the disk and a mosquitto on loopback between. No figure decides it.
// LAPWING_LATENCY says for how long it looks, e.g. 100s.
func TestLatency(t *testing.T) {
	length, err := time.ParseDuration(os.Getenv("LAPWING_LATENCY"))
	if err != nil {
		t.Skip("short run: figures are made by make latency")
	}
	broker := startMosquitto(t)
	raw, err := os.ReadFile(filepath.Join("..", "..", "configs", "biomethane-two-throw.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	// Limits that the moving load crosses again and again, each with its delay of half a second.
	limits := "limits:\n"
	for _, end := range []string{"t1.he", "t1.ce", "t2.he", "t2.ce"} {
		for _, l := range []string{"p_suction_bar_abs, low: 7.6", "p_suction_bar_abs, high: 8.4", "p_discharge_bar_abs, low: 20.5", "p_discharge_bar_abs, high: 22"} {
			limits += fmt.Sprintf("  - {of: %s, measure: %s, deadband: 0.1, on_delay_s: 0.5, off_delay_s: 0.5, severity: alert}\n", end, l)
		}
	}
	text := regexp.MustCompile(`(?m)^limits:.*\n`).ReplaceAllLiteralString(string(raw), limits)
	text = strings.Replace(text, "max_gb: 20", "max_gb: 0.2", 1)
	file := filepath.Join(t.TempDir(), "skid.yaml")
	if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	var mu sync.Mutex
	ends, told, arrived := map[int64]int64{}, map[int64]time.Time{}, map[int64]time.Time{}
	var turns []time.Duration
	s, err := Open(Options{SkidFile: file, State: t.TempDir(), Source: "model:unsteady", Broker: broker, Listen: "none", OnTurn: func(r *wire.Turn) {
		mu.Lock()
		defer mu.Unlock()
		ends[r.Turn], told[r.Turn] = r.Samples[1], time.Now()
		if r.RPM != nil {
			turns = append(turns, time.Duration(float64(time.Minute) / *r.RPM))
		}
	}})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	src := &stamped{Source: s.src}
	s.src = src
	ctx, stop := context.WithTimeout(t.Context(), length)
	defer stop()
	heard := make(chan error, 1)
	go func() {
		heard <- uplink.Listen(ctx, uplink.Config{Broker: broker, ClientID: "latency"}, "lapwing", func(m uplink.Received) {
			now := time.Now()
			var a wire.Alarm
			if strings.HasSuffix(m.Topic, "/alarm") && json.Unmarshal(m.Payload, &a) == nil && a.By == "" {
				mu.Lock()
				defer mu.Unlock()
				if arrived[a.Turn].IsZero() { // the first of a turn's transitions
					arrived[a.Turn] = now
				}
			}
		}, func(string) {})
	}()
	if err := s.Run(ctx); err != nil {
		t.Fatal(err)
	}
	if err := <-heard; err != nil {
		t.Error(err)
	}
	mu.Lock()
	defer mu.Unlock()
	var whole, line []time.Duration
	for turn, now := range arrived {
		from, ok := src.at(ends[turn])
		if ok && ends[turn] > 0 {
			whole, line = append(whole, now.Sub(from)), append(line, told[turn].Sub(from))
		}
	}
	var quiet []time.Duration // turns that change nothing: no commit
	for turn, now := range told {
		if from, ok := src.at(ends[turn]); ok && arrived[turn].IsZero() {
			quiet = append(quiet, now.Sub(from))
		}
	}
	if len(whole) == 0 {
		t.Fatal("no transition came")
	}
	slices.Sort(turns)
	q := func(d []time.Duration, p float64) time.Duration {
		slices.Sort(d)
		return d[int(p*float64(len(d)-1)+0.5)].Round(100 * time.Microsecond)
	}
	t.Logf("%d turns with transitions, of %d; a turn takes %s", len(whole), len(ends), q(turns, 0.5))
	t.Logf("from the turn's last sample to the message at a subscriber: p50 %s, p90 %s, p99 %s, largest %s", q(whole, 0.5), q(whole, 0.9), q(whole, 0.99), q(whole, 1))
	t.Logf("of that to the end of the line, journal on the disk: p50 %s, p90 %s, p99 %s, largest %s", q(line, 0.5), q(line, 0.9), q(line, 0.99), q(line, 1))
	t.Logf("other turns, to the end of the line: p50 %s, p90 %s, p99 %s, largest %s; the ledger's worst commit %s", q(quiet, 0.5), q(quiet, 0.9), q(quiet, 0.99), q(quiet, 1), s.ledger.Stats().WorstCommit.Round(time.Millisecond))
}

// startMosquitto runs a broker of the test's own on loopback.
func startMosquitto(t *testing.T) (url string) {
	t.Helper()
	path, err := exec.LookPath("mosquitto")
	if err != nil {
		if path, err = exec.LookPath("/usr/sbin/mosquitto"); err != nil {
			t.Fatal("mosquitto is not installed: make setup does it")
		}
	}
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	port := ln.Addr().(*net.TCPAddr).Port
	ln.Close()
	cmd := exec.Command(path, "-p", fmt.Sprint(port))
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = cmd.Process.Kill(); _ = cmd.Wait() })
	for end := time.Now().Add(10 * time.Second); ; time.Sleep(20 * time.Millisecond) {
		c, err := net.Dial("tcp", fmt.Sprintf("127.0.0.1:%d", port))
		if err == nil {
			c.Close()
			return fmt.Sprintf("tcp://127.0.0.1:%d", port)
		}
		if time.Now().After(end) {
			t.Fatal(err)
		}
	}
}
