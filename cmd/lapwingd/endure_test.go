package main

import (
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/ledger"
)

// troubles is how often TestSystemEndurance interferes: a few times in every run, LAPWING_ENDURE times by make endure.
func troubles(t *testing.T) int {
	t.Helper()
	v := os.Getenv("LAPWING_ENDURE")
	if v == "" {
		return 12
	}
	n, err := strconv.Atoi(v)
	if err != nil || n < 1 {
		t.Fatalf("LAPWING_ENDURE=%q", v)
	}
	return n
}

// startSender starts the sending half of a daemon; see TestMain.
func startSender(t *testing.T, state, broker string, more ...string) *program {
	t.Helper()
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	return start(t, append([]string{"LAPWING_ENDURE_STATE=" + state, "LAPWING_ENDURE_BROKER=" + broker}, more...), self)
}

// bookedAndWaiting reads a state file of a sender that is down.
func bookedAndWaiting(t *testing.T, state string) (last uint64, waiting int) {
	t.Helper()
	l, err := ledger.Open(state, ledger.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	st := l.Stats()
	for _, n := range st.Dropped {
		if n > 0 {
			t.Errorf("%d messages gave way", n)
		}
	}
	return st.LastJournal, st.Waiting[ledger.Alarm]
}

// TestSystemEndurance: a broker that is killed or stopped and comes back, a network that is cut or held up on either
// side of it, a sender that is killed or stopped and comes back, at random, under a stream of transitions. What a
// persistent subscriber received, repeats dropped by id, is the journal, in order.
//
// mosquitto acknowledges before it has written: when it is killed, what it holds for a subscriber that is away can be
// lost, whoever sends. So it is killed only while the subscriber is connected.
func TestSystemEndurance(t *testing.T) {
	system(t)
	s := seed(t)
	rng := rand.New(rand.NewPCG(s, 2))
	n := troubles(t)
	state := filepath.Join(t.TempDir(), "state.db")
	b := startBroker(t)
	conf, err := os.ReadFile(b.conf)
	if err != nil {
		t.Fatal(err)
	}
	b.kill() // again with another setting: what comes for the subscriber goes to its connection before it is acknowledged
	if err := os.WriteFile(b.conf, append(conf, "max_inflight_messages 0\n"...), 0o644); err != nil {
		t.Fatal(err)
	}
	b.start()
	near, far := startProxy(t, address(b.port)), startProxy(t, address(b.port))
	sub := (&broker{t: t, port: far.port(), conf: b.conf}).subscribe("journal", "lapwing/#")
	joined := func() {
		t.Helper()
		until(t, 30*time.Second, "the subscriber is connected", func() bool {
			log := b.p.err.String()
			return strings.LastIndex(log, " as journal (") > max(strings.LastIndex(log, "Client journal closed"), strings.LastIndex(log, "Client journal disconnected"))
		})
	}
	var p *program
	boot := func() { p = startSender(t, state, "tcp://"+address(near.port())) }
	boot()
	did := map[string]int{}
	pause := func(most time.Duration) { <-time.After(time.Duration(rng.Int64N(int64(most)))) } // the moment is the test's choice
	kinds := []string{"broker killed", "broker stopped", "network cut", "network held up", "subscriber cut", "sender killed", "sender stopped", "network cut", "sender killed"}
	began := time.Now()
	for range n {
		pause(600 * time.Millisecond)
		kind := kinds[rng.IntN(len(kinds))]
		did[kind]++
		switch kind {
		case "broker killed":
			joined()
			b.kill()
			b.start()
		case "broker stopped":
			b.p.terminate(20 * time.Second)
			pause(300 * time.Millisecond)
			b.start()
		case "network cut":
			near.cut()
			pause(300 * time.Millisecond)
			near.mend()
		case "network held up":
			near.hold()
			pause(800 * time.Millisecond)
			near.release()
		case "subscriber cut":
			far.cut()
			pause(300 * time.Millisecond)
			far.mend()
		case "sender killed":
			p.kill()
			boot()
		case "sender stopped":
			if code := p.terminate(20 * time.Second); code != 0 {
				t.Fatalf("the sender ended with %d:\n%s", code, p.out.String())
			}
			boot()
		}
	}
	joined()
	<-time.After(time.Second)
	if code := p.terminate(30 * time.Second); code != 0 {
		t.Fatalf("the sender ended with %d:\n%s", code, p.out.String())
	}
	last, waiting := bookedAndWaiting(t, state)
	if waiting > 0 { // a stop gives the outbox two seconds; the rest goes with the next start
		boot()
		until(t, 60*time.Second, "the rest arrives", func() bool { return arrived(t, sub.got(), last) })
		p.terminate(30 * time.Second)
		last, _ = bookedAndWaiting(t, state)
	}
	until(t, 60*time.Second, fmt.Sprintf("transition %d arrives", last), func() bool { return arrived(t, sub.got(), last) })
	as, repeats := sub.transitions()
	t.Logf("%d troubles in %.0f s %v: %d transitions, %d repeats dropped by id", n, time.Since(began).Seconds(), did, len(as), repeats)
	if uint64(len(as)) != last {
		t.Errorf("%d transitions arrived, %d were booked", len(as), last)
	}
	for i, a := range as {
		if a.ID != uint64(i+1) {
			t.Fatalf("transition %d is the one in place %d", a.ID, i+1)
		}
		if i > 0 && a.At.Before(as[i-1].At) {
			t.Errorf("transition %d has a time before that of %d", a.ID, as[i-1].ID)
		}
	}
	// what stands on the broker is what the last transitions say
	want := map[string]string{}
	for _, a := range as {
		if delete(want, a.Key); a.To != "normal" {
			want[a.Key] = a.To
		}
	}
	for _, m := range b.retained("lapwing/+/standing/#") {
		_, key, _ := strings.Cut(m.topic, "/standing/")
		if want[key] != m.alarm(t).To {
			t.Errorf("%s stands on the broker as %s, not as %q", key, m.alarm(t).To, want[key])
		}
		delete(want, key)
	}
	if len(want) > 0 {
		t.Errorf("not on the broker: %v", want)
	}
}

// arrived says whether a transition has come, without reading what came before it.
func arrived(t *testing.T, ms []message, id uint64) bool {
	t.Helper()
	for _, m := range slices.Backward(ms) {
		if strings.HasSuffix(m.topic, "/alarm") && m.alarm(t).ID == id {
			return true
		}
	}
	return false
}

// TestSystemBrokerAwayForADay: a day's transitions are booked while there is no broker; when it comes, all arrive in
// order with their original times. Memory stays what it was, the disk holds what waits.
func TestSystemBrokerAwayForADay(t *testing.T) {
	system(t)
	n := 2000 // of two messages each; an alarm system is called overloaded at a tenth of that
	if os.Getenv("LAPWING_ENDURE") != "" {
		n = 40_000
	}
	state := filepath.Join(t.TempDir(), "state.db")
	b := startBroker(t)
	sub := b.subscribe("journal", "lapwing/+/alarm")
	far := startProxy(t, address(b.port))
	far.cut()
	p := startSender(t, state, "tcp://"+address(far.port()), fmt.Sprintf("LAPWING_ENDURE_DAY=%d", n))
	p.until(10*time.Minute, "the day is booked", func() bool { return strings.Contains(p.out.String(), "booked") })
	before := memory(t, p)
	disk, err := os.Stat(state)
	if err != nil {
		t.Fatal(err)
	}
	began := time.Now()
	far.mend()
	until(t, 10*time.Minute, "all of it arrives", func() bool {
		ms := sub.p.out.lines()
		if len(ms) < n {
			return false
		}
		var a struct{ ID int }
		_, payload, _ := strings.Cut(ms[len(ms)-1], "{")
		return json.Unmarshal([]byte("{"+payload), &a) == nil && a.ID == n
	})
	took := time.Since(began)
	as, repeats := sub.transitions()
	t.Logf("%d transitions, %d repeats, %.1f s after the broker came (%.0f transitions/s); state file %.1f MB; memory %d MB waiting, %d MB after", len(as), repeats, took.Seconds(), float64(n)/took.Seconds(), float64(disk.Size())/1e6, before, memory(t, p))
	if len(as) != n {
		t.Fatalf("%d transitions arrived of %d", len(as), n)
	}
	for i, a := range as {
		if at := dayBegan.Add(time.Duration(i+1) * 24 * time.Hour / time.Duration(n)); a.ID != uint64(i+1) || !a.At.Equal(at) {
			t.Fatalf("in place %d came %d of %s, want %s", i+1, a.ID, a.At, at)
		}
	}
	if code := p.terminate(30 * time.Second); code != 0 {
		t.Errorf("the sender ended with %d", code)
	}
}

// memory is what a program holds, MB.
func memory(t *testing.T, p *program) int {
	t.Helper()
	raw, err := os.ReadFile(fmt.Sprintf("/proc/%d/status", p.cmd.Process.Pid))
	if err != nil {
		t.Fatal(err)
	}
	_, rest, _ := strings.Cut(string(raw), "VmRSS:")
	kb, err := strconv.Atoi(strings.Fields(rest + " x")[0])
	if err != nil {
		t.Fatalf("no VmRSS: %v", err)
	}
	return kb / 1024
}
