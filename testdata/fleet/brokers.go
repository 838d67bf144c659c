package main

import (
	"fmt"
	"io"
	"math/rand/v2"
	"net"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"time"
)

// node is one broker program.
type node struct {
	name, addr, health string
	args               []string
	log                string
	mu                 sync.Mutex
	cmd                *exec.Cmd
}

func freePorts(n int) (out []int, err error) {
	for range n {
		ln, err := net.Listen("tcp", "127.0.0.1:0")
		if err != nil {
			return nil, err
		}
		defer ln.Close()
		out = append(out, ln.Addr().(*net.TCPAddr).Port)
	}
	return out, nil
}

func mosquitto(dir string) ([]*node, error) {
	ports, err := freePorts(1)
	if err != nil {
		return nil, err
	}
	path := "mosquitto"
	if _, err := exec.LookPath(path); err != nil {
		path = "/usr/sbin/mosquitto"
	}
	// max_inflight_messages 0: what comes for the subscriber is on its connection before it is acknowledged to the skid.
	conf := fmt.Sprintf("listener %d 127.0.0.1\nallow_anonymous true\npersistence true\npersistence_location %s/\nautosave_on_changes true\nautosave_interval 1\n"+
		"max_queued_messages 0\nmax_inflight_messages 0\n", ports[0], dir)
	if os.Getuid() == 0 {
		conf += "user root\n"
	}
	file := filepath.Join(dir, "mosquitto.conf")
	return []*node{{name: "mosquitto", addr: fmt.Sprintf("127.0.0.1:%d", ports[0]), args: []string{path, "-c", file}, log: filepath.Join(dir, "log")}},
		os.WriteFile(file, []byte(conf), 0o600)
}

// natsCluster is three nodes whose MQTT side keeps everything in three replicas. What was on its way to a subscriber when
// its node died comes again after ack_wait, which is 30 s when it is not set.
func natsCluster(dir, program string) (out []*node, err error) {
	const n = 3
	ports, err := freePorts(4 * n)
	if err != nil {
		return nil, err
	}
	var routes []string
	for i := range n {
		routes = append(routes, fmt.Sprintf("nats://127.0.0.1:%d", ports[4*i+1]))
	}
	for i := range n {
		p := ports[4*i:]
		conf := fmt.Sprintf(`server_name: n%d
listen: "127.0.0.1:%d"
http: "127.0.0.1:%d"
jetstream { store_dir: %q, max_memory_store: 64MB, max_file_store: 2GB }
cluster { name: fleet, listen: "127.0.0.1:%d", routes: [%s] }
mqtt { listen: "127.0.0.1:%d", stream_replicas: 3, consumer_replicas: 3, max_ack_pending: 1024, ack_wait: "3s" }
`, i+1, p[0], p[2], filepath.Join(dir, fmt.Sprintf("n%d", i+1)), p[1], strings.Join(routes, ", "), p[3])
		file := filepath.Join(dir, fmt.Sprintf("n%d.conf", i+1))
		if err := os.WriteFile(file, []byte(conf), 0o600); err != nil {
			return nil, err
		}
		out = append(out, &node{name: fmt.Sprintf("n%d", i+1), addr: fmt.Sprintf("127.0.0.1:%d", p[3]), health: fmt.Sprintf("http://127.0.0.1:%d/healthz", p[2]),
			args: []string{program, "-c", file}, log: filepath.Join(dir, fmt.Sprintf("n%d.log", i+1))})
	}
	return out, nil
}

func (x *node) start() error {
	f, err := os.OpenFile(x.log, os.O_CREATE|os.O_APPEND|os.O_WRONLY, 0o600)
	if err != nil {
		return err
	}
	defer f.Close()
	cmd := exec.Command(x.args[0], x.args[1:]...)
	cmd.Stdout, cmd.Stderr = f, f
	if err := cmd.Start(); err != nil {
		return err
	}
	x.mu.Lock()
	x.cmd = cmd
	x.mu.Unlock()
	return nil
}

func (x *node) kill() {
	x.mu.Lock()
	defer x.mu.Unlock()
	if x.cmd != nil {
		_ = x.cmd.Process.Kill()
		_ = x.cmd.Wait()
		x.cmd = nil
	}
}

// ready waits until the node answers, in a cluster until its streams have caught up.
func (x *node) ready(limit time.Duration) error {
	err := within(limit, x.name+" is ready", func() bool {
		c, err := net.DialTimeout("tcp", x.addr, time.Second)
		if err != nil {
			return false
		}
		c.Close()
		if x.health == "" {
			return true
		}
		cl := http.Client{Timeout: 2 * time.Second}
		r, err := cl.Get(x.health)
		if err != nil {
			return false
		}
		_, _ = io.Copy(io.Discard, r.Body)
		r.Body.Close()
		return r.StatusCode == http.StatusOK
	})
	if err != nil {
		b, _ := os.ReadFile(x.log)
		return fmt.Errorf("%w\n%s", err, b[max(0, len(b)-3000):])
	}
	return nil
}

// memory is what the broker holds, MB.
func (x *node) memory() int {
	x.mu.Lock()
	defer x.mu.Unlock()
	if x.cmd == nil {
		return 0
	}
	raw, _ := os.ReadFile(fmt.Sprintf("/proc/%d/status", x.cmd.Process.Pid))
	_, rest, _ := strings.Cut(string(raw), "VmRSS:")
	kb, _ := strconv.Atoi(strings.Fields(rest + " 0")[0])
	return kb / 1024
}

// door is the one address of the cluster: it carries each connection to some node that answers, as a balancer does, or a
// name with several addresses.
type door struct {
	ln    net.Listener
	nodes []*node
}

func openDoor(nodes []*node) (*door, error) {
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return nil, err
	}
	d := &door{ln, nodes}
	go func() {
		for {
			c, err := ln.Accept()
			if err != nil {
				return
			}
			go d.carry(c)
		}
	}()
	return d, nil
}

func (d *door) addr() string { return d.ln.Addr().String() }
func (d *door) close()       { d.ln.Close() }

func (d *door) carry(c net.Conn) {
	defer c.Close()
	for _, i := range rand.Perm(len(d.nodes)) {
		b, err := net.DialTimeout("tcp", d.nodes[i].addr, time.Second)
		if err != nil {
			continue
		}
		defer b.Close()
		gone := make(chan struct{})
		go func() { defer close(gone); pass(b, c) }()
		pass(c, b)
		<-gone
		return
	}
}

// pass carries one direction; its end is passed on too, so that what the other side has sent still arrives.
func pass(to, from net.Conn) {
	_, _ = io.Copy(to, from)
	_ = to.(*net.TCPConn).CloseWrite()
}
