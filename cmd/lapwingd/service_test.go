package main

import (
	"errors"
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
)

// manager plays the service manager's side of the notification socket.
type manager struct {
	path string
	mu   sync.Mutex
	said []string
}

func newManager(t *testing.T) *manager {
	t.Helper()
	dir, err := os.MkdirTemp("", "lw") // the path of a socket must be short
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	m := &manager{path: filepath.Join(dir, "notify")}
	c, err := net.ListenUnixgram("unixgram", &net.UnixAddr{Name: m.path, Net: "unixgram"})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close() })
	go func() {
		buf := make([]byte, 4096)
		for {
			n, err := c.Read(buf)
			if err != nil {
				if !errors.Is(err, net.ErrClosed) {
					t.Error(err)
				}
				return
			}
			m.mu.Lock()
			m.said = append(m.said, strings.Split(string(buf[:n]), "\n")...)
			m.mu.Unlock()
		}
	}()
	return m
}

func (m *manager) got() []string {
	m.mu.Lock()
	defer m.mu.Unlock()
	return slices.Clone(m.said)
}

func count(said []string, prefix string) (n int) {
	for _, s := range said {
		if strings.HasPrefix(s, prefix) {
			n++
		}
	}
	return n
}

// unitCommand is the ExecStart line of the unit, with its paths replaced by the test's.
func unitCommand(t *testing.T, replace ...string) []string {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join(root(t), "systemd", "lapwingd.service"))
	if err != nil {
		t.Fatal(err)
	}
	m := regexp.MustCompile(`(?m)^ExecStart=(.*)$`).FindStringSubmatch(string(raw))
	if m == nil {
		t.Fatal("the unit has no ExecStart")
	}
	line := m[1]
	for i := 0; i < len(replace); i += 2 {
		if !strings.Contains(line, replace[i]) {
			t.Fatalf("ExecStart has no %s: %s", replace[i], line)
		}
		line = strings.ReplaceAll(line, replace[i], replace[i+1])
	}
	return strings.Fields(line)
}

// TestSystemService: started as the unit starts it, the daemon reports ready, feeds the watchdog while samples flow,
// says what it does, and takes its leave on SIGTERM.
func TestSystemService(t *testing.T) {
	system(t)
	dir := t.TempDir()
	skid := skidFile(t, dir, "broker", "tcp://"+address(freePort(t)), "listen", "none")
	m := newManager(t)
	cmd := unitCommand(t, "/usr/bin/lapwingd", built(t, "lapwingd"), "/etc/lapwing/skid.yaml", skid, "/var/lib/lapwing", filepath.Join(dir, "state"), "${LAPWING_SOURCE}", "model:swings")
	d := start(t, []string{"NOTIFY_SOCKET=" + m.path, "WATCHDOG_USEC=600000"}, cmd[0], cmd[1:]...)
	d.until(20*time.Second, "READY=1", func() bool { return count(m.got(), "READY=1") > 0 })
	d.until(20*time.Second, "four times WATCHDOG=1 while samples flow", func() bool { return count(m.got(), "WATCHDOG=1") >= 4 })
	d.until(20*time.Second, "the status says that it runs without a baseline", func() bool {
		return slices.ContainsFunc(m.got(), func(s string) bool {
			return strings.HasPrefix(s, "STATUS=running: ") && strings.Contains(s, "no baseline")
		})
	})
	if code := d.terminate(20 * time.Second); code != 0 {
		t.Errorf("exit %d on SIGTERM, with the broker away", code)
	}
	said := m.got()
	if said[0] != "READY=1" || count(said, "READY=1") != 1 || count(said, "STOPPING=1") != 1 {
		t.Errorf("told the manager %q", said)
	}
}

// TestSystemUnitIsValid: the service manager's own check finds nothing in the unit.
func TestSystemUnitIsValid(t *testing.T) {
	system(t)
	analyze, err := exec.LookPath("systemd-analyze")
	if err != nil {
		t.Skip("systemd-analyze is absent here: the unit is not checked by it")
	}
	raw, err := os.ReadFile(filepath.Join(root(t), "systemd", "lapwingd.service"))
	if err != nil {
		t.Fatal(err)
	}
	unit := filepath.Join(t.TempDir(), "lapwingd.service")
	if err := os.WriteFile(unit, []byte(strings.ReplaceAll(string(raw), "/usr/bin/lapwingd", built(t, "lapwingd"))), 0o644); err != nil {
		t.Fatal(err)
	}
	if out, errs, code := ran(t, analyze, "verify", unit); code != 0 || strings.Contains(errs, "lapwingd.service:") {
		t.Errorf("systemd-analyze verify: exit %d\n%s%s", code, out, errs)
	}
}
