package main

import (
	"bytes"
	"errors"
	"fmt"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

// The tests of this folder with "system" in their names run the built programs as their users do, with a real broker
// and real clients. They are switched on by `make system`.

// system skips unless the system tests are on.
func system(t *testing.T) {
	t.Helper()
	if os.Getenv("LAPWING_SYSTEM") != "1" {
		t.Skip("short run: the built programs are tested by make system (LAPWING_SYSTEM=1, LAPWING_BIN)")
	}
	t.Parallel()
}

// tool finds a program that the tests cannot do without; make setup installs it.
func tool(t *testing.T, name string) string {
	t.Helper()
	for _, dir := range []string{"", "/usr/sbin/", "/usr/local/sbin/"} {
		if path, err := exec.LookPath(dir + name); err == nil {
			return path
		}
	}
	t.Fatalf("%s is not installed: make setup does it", name)
	return ""
}

// built finds one of our own programs.
func built(t *testing.T, name string) string {
	t.Helper()
	path := filepath.Join(os.Getenv("LAPWING_BIN"), name)
	if _, err := os.Stat(path); err != nil {
		t.Fatalf("LAPWING_BIN must name the folder with the built programs: %v", err)
	}
	return path
}

// root is the repository's.
func root(t *testing.T) string {
	t.Helper()
	dir, err := os.Getwd()
	for err == nil {
		if _, serr := os.Stat(filepath.Join(dir, "go.mod")); serr == nil {
			return dir
		}
		if dir == filepath.Dir(dir) {
			err = errors.New("no go.mod above this folder")
		}
		dir = filepath.Dir(dir)
	}
	t.Fatal(err)
	return ""
}

// until polls for what must come true, and fails the test with what it waited for.
func until(t *testing.T, limit time.Duration, what string, ok func() bool) {
	t.Helper()
	tick := time.NewTicker(10 * time.Millisecond)
	defer tick.Stop()
	end := time.NewTimer(limit)
	defer end.Stop()
	for !ok() {
		select {
		case <-tick.C:
		case <-end.C:
			t.Fatalf("waited %s in vain: %s", limit, what)
		}
	}
}

// freePort is a loopback port nobody listens on at this moment.
func freePort(t *testing.T) int {
	t.Helper()
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer ln.Close()
	return ln.Addr().(*net.TCPAddr).Port
}

// output is what a program writes, readable while it runs.
type output struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (o *output) Write(p []byte) (int, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	return o.b.Write(p)
}

func (o *output) String() string {
	o.mu.Lock()
	defer o.mu.Unlock()
	return o.b.String()
}

// lines are those that are complete.
func (o *output) lines() []string {
	s := o.String()
	i := strings.LastIndexByte(s, '\n')
	if i < 0 {
		return nil
	}
	return strings.Split(s[:i], "\n")
}

// program is a started program. Standard output and standard error are kept apart.
type program struct {
	t        *testing.T
	name     string
	cmd      *exec.Cmd
	out, err output
	ended    chan struct{}
	code     int
}

// start runs a program until it ends by itself or the test does.
func start(t *testing.T, env []string, path string, args ...string) *program {
	t.Helper()
	p := &program{t: t, name: filepath.Base(path), cmd: exec.Command(path, args...), ended: make(chan struct{})}
	p.cmd.Stdout, p.cmd.Stderr = &p.out, &p.err
	p.cmd.Env = append(os.Environ(), env...)
	p.cmd.WaitDelay = 5 * time.Second
	if err := p.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	go func() {
		_ = p.cmd.Wait()
		p.code = p.cmd.ProcessState.ExitCode()
		close(p.ended)
	}()
	t.Cleanup(func() {
		p.kill()
		if t.Failed() {
			t.Logf("%s %s\n%s", p.name, strings.Join(args, " "), tail(p.err.String()+p.out.String(), 4000))
		}
	})
	return p
}

func tail(s string, n int) string {
	if len(s) > n {
		return "…" + s[len(s)-n:]
	}
	return s
}

func (p *program) running() bool {
	select {
	case <-p.ended:
		return false
	default:
		return true
	}
}

// until is until for what only comes while the program runs: when it ends, there is nothing to wait for.
func (p *program) until(limit time.Duration, what string, ok func() bool) {
	p.t.Helper()
	until(p.t, limit, what, func() bool {
		alive := p.running()
		done := ok()
		if !done && !alive {
			p.t.Fatalf("%s ended with exit code %d before this: %s", p.name, p.code, what)
		}
		return done
	})
}

// kill is SIGKILL and the wait for its effect.
func (p *program) kill() {
	_ = p.cmd.Process.Kill()
	<-p.ended
}

// end waits until the program has ended by itself and gives its exit code; -1 is a signal.
func (p *program) end(limit time.Duration) int {
	p.t.Helper()
	until(p.t, limit, p.name+" ends", func() bool { return !p.running() })
	return p.code
}

// terminate is what systemd does to stop a service.
func (p *program) terminate(limit time.Duration) int {
	p.t.Helper()
	if err := p.cmd.Process.Signal(syscall.SIGTERM); err != nil {
		p.t.Fatalf("%s: %v", p.name, err)
	}
	return p.end(limit)
}

// ran is for programs that end by themselves soon.
func ran(t *testing.T, path string, args ...string) (stdout, stderr string, code int) {
	t.Helper()
	p := start(t, nil, path, args...)
	code = p.end(time.Minute)
	return p.out.String(), p.err.String(), code
}

// skidFile writes the built-in example into dir with other values for some keys: key, value, key, value.
func skidFile(t *testing.T, dir string, changes ...string) string {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join(root(t), "configs", "biomethane-two-throw.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	for i := 0; i < len(changes); i += 2 {
		key := regexp.MustCompile(`(?m)^( *` + changes[i] + `:)[^#\n]*`)
		if n := len(key.FindAll(raw, -1)); n != 1 {
			t.Fatalf("the example skid file has %d keys %s", n, changes[i])
		}
		raw = key.ReplaceAll(raw, []byte("${1} "+changes[i+1]+" "))
	}
	path := filepath.Join(dir, "skid.yaml")
	if err := os.WriteFile(path, raw, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// pageOf is the address of a daemon's page, as its log says.
func pageOf(t *testing.T, p *program) string {
	t.Helper()
	var url string
	p.until(20*time.Second, "the daemon says where its page is", func() bool {
		_, rest, ok := strings.Cut(p.err.String(), `msg="status page" url=`)
		if !ok || !strings.Contains(rest, "\n") {
			return false
		}
		url = strings.Fields(rest)[0]
		return true
	})
	return url
}

func address(port int) string { return fmt.Sprintf("127.0.0.1:%d", port) }
