package main

import (
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
)

// restlessLimits come before those of the file: a limit on every plateau makes transitions all the time while the load moves.
func restlessLimits() string {
	var b strings.Builder
	for _, end := range []string{"t1.he", "t1.ce", "t2.he", "t2.ce"} {
		for _, l := range []string{"p_suction_bar_abs, low: 7.6", "p_suction_bar_abs, high: 8.4", "p_discharge_bar_abs, low: 20.5"} {
			fmt.Fprintf(&b, "  - {of: %s, measure: %s, deadband: 0.1, on_delay_s: 0.5, off_delay_s: 0.5, severity: alert}\n", end, l)
		}
	}
	return "\n" + strings.TrimSuffix(b.String(), "\n")
}

// seed is random, shown, and settable by LAPWING_SEED.
func seed(t *testing.T) uint64 {
	t.Helper()
	s := uint64(time.Now().UnixNano())
	if v := os.Getenv("LAPWING_SEED"); v != "" {
		var err error
		if s, err = strconv.ParseUint(v, 10, 64); err != nil {
			t.Fatalf("LAPWING_SEED: %v", err)
		}
	}
	t.Logf("LAPWING_SEED=%d", s)
	return s
}

var alarmLine = regexp.MustCompile(`(?m)^.* msg=alarm id=(\d+) .*\n`)

// committed are the ids of transitions that a daemon's log says are on disk.
func committed(p *program) (ids []uint64) {
	for _, m := range alarmLine.FindAllStringSubmatch(p.err.String(), -1) {
		id, _ := strconv.ParseUint(m[1], 10, 64)
		ids = append(ids, id)
	}
	return ids
}

// TestSystemKilledAgainAndAgain: SIGKILL at random moments while transitions happen, ten times, then a run to the
// end. What a persistent subscriber received is the journal: nothing lost, nothing out of order, nothing raised again.
func TestSystemKilledAgainAndAgain(t *testing.T) {
	system(t)
	s := seed(t)
	rng := rand.New(rand.NewPCG(s, 1))
	dir := t.TempDir()
	state := filepath.Join(dir, "state")
	skid := skidFile(t, dir, "limits", restlessLimits(), "health_every_s", "1", "pre_s", "2", "post_s", "2", "max_gb", "0.2")
	b := startBroker(t)
	sub := b.subscribe("journal", "lapwing/#")
	boot := func(args ...string) *program {
		return start(t, nil, built(t, "lapwingd"), append([]string{"--skid", skid, "--state", state, "--broker", b.url(), "--listen", "none", "--fast"}, args...)...)
	}

	p := boot("--source", "model:swings", "--learn", "200")
	p.until(90*time.Second, "a baseline is learnt", func() bool { return strings.Contains(p.err.String(), `msg="baseline in force"`) })
	if code := p.terminate(20 * time.Second); code != 0 {
		t.Fatalf("exit %d after the learning run", code)
	}
	known := committed(p)

	const rounds = 10
	wills := 0
	for round := range rounds {
		p := boot("--source", "model:unsteady")
		// Some die while they start, most some way into the run, close behind a transition or anywhere after it.
		after, within := rng.IntN(14), 300*time.Millisecond
		if after > 0 {
			within = []time.Duration{3 * time.Millisecond, 30 * time.Millisecond, 600 * time.Millisecond}[rng.IntN(3)]
			wills++
		}
		p.until(60*time.Second, fmt.Sprintf("round %d: %d transitions", round, after), func() bool { return len(committed(p)) >= after })
		<-time.After(time.Duration(rng.Int64N(int64(within)))) // the moment is the test's own choice; nothing is waited for
		p.kill()
		known = append(known, committed(p)...)
		t.Logf("round %d: killed after %d transitions", round, len(committed(p)))
	}

	p = boot("--source", "model:unsteady")
	if code := p.end(120 * time.Second); code != 0 {
		t.Fatalf("exit %d at the end of the source", code)
	}
	known = append(known, committed(p)...)

	open, last := openPoints(t, state)
	until(t, 20*time.Second, "the last transition arrives", func() bool {
		as, _ := sub.transitions()
		return slices.ContainsFunc(as, func(a said) bool { return a.ID == last })
	})
	as, repeats := sub.transitions()
	t.Logf("%d transitions, %d in the log, %d repeats dropped by id", len(as), len(known), repeats)
	sameAsJournal(t, state, as)
	if !slices.IsSorted(known) {
		t.Error("ids went back over a restart")
	}
	for _, id := range known {
		if id > last {
			t.Errorf("transition %d was said to be on disk and is not in the journal", id)
		}
	}
	if !slices.ContainsFunc(as, namesTheLeak) {
		t.Error("the leak was never told")
	}

	// A point that still asks something of a person stands retained on the broker, and nothing else does.
	var have []string
	for _, m := range b.retained("lapwing/+/standing/#") {
		_, key, _ := strings.Cut(m.topic, "/standing/")
		have = append(have, key+" "+m.alarm(t).To)
	}
	slices.Sort(have)
	if !slices.Equal(have, open) {
		t.Errorf("standing on the broker: %q\nopen in the snapshot: %q", have, open)
	}
	offline := 0
	for _, m := range sub.got() {
		if strings.HasSuffix(m.topic, "/health") && m.health(t).State == "offline" {
			offline++
		}
	}
	if offline < wills {
		t.Errorf("health said offline %d times; the daemon died %d times while it was connected", offline, wills)
	}
}

// openPoints reads what stands from a state folder, and the id of the last transition.
func openPoints(t *testing.T, state string) (open []string, last uint64) {
	t.Helper()
	l, err := ledger.Open(filepath.Join(state, "state.db"), ledger.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	var snap alarm.Snapshot
	if ok, err := l.AlarmSnapshot(&snap); err != nil || !ok {
		t.Fatalf("alarm snapshot: %v %v", ok, err)
	}
	for _, p := range snap.Points {
		if p.State.Open() {
			open = append(open, p.Key+" "+p.State.String())
		}
	}
	slices.Sort(open)
	return open, l.Stats().LastJournal
}
