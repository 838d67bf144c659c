package station

import (
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
	"lapwing/internal/wire"
)

var everyFault = flag.Bool("every-fault", false, "fault injection at every step of every commit, not a sample")

// A step of the story: conditions of one evaluation, or an order. All that an alarm point can go through is in it.
type storyStep struct {
	conds []alarm.Condition
	order *Order
}

func story() (out []storyStep) {
	cond := func(key string, sev alarm.Severity) alarm.Condition {
		return alarm.Condition{Key: key, Subject: "t1.he.suction", Kind: "leaking", Known: true, Severity: sev, Sentence: "s", Turn: 7}
	}
	say := func(cs ...alarm.Condition) { out = append(out, storyStep{conds: cs}) }
	ask := func(o Order) { o.By = "A"; out = append(out, storyStep{order: &o}) }
	say(cond("a/x", alarm.Alert), cond("latched/x", alarm.Danger)) // two in one commit
	ask(Order{Verb: "acknowledge", Key: "a/x"})
	say(cond("a/x", alarm.Danger), cond("latched/x", 0))
	ask(Order{Verb: "shelve", Key: "a/x", Reason: "r", ForS: 1000})
	ask(Order{Verb: "acknowledge", Key: "latched/x"})
	ask(Order{Verb: "reset", Key: "latched/x"})
	ask(Order{Verb: "unshelve", Key: "a/x"})
	stopped := cond("a/x", 0)
	stopped.Known, stopped.ByDesign = false, "machine stopped"
	say(stopped)
	say(cond("a/x", alarm.Danger))
	ask(Order{Verb: "out-of-service", Key: "a/x", Reason: "r"})
	say(cond("a/x", 0))
	ask(Order{Verb: "return-to-service", Key: "a/x"})
	ask(Order{Verb: "acknowledge", Key: "a/x"})
	return out
}

var errDisk = errors.New("input/output error")

// stand is a station whose store can be made to fail and whose process can be made to die.
type stand struct {
	*Station
	path string
	cfg  alarm.Config
	step func(string) error
}

// open is what a start does with the store.
func (s *stand) open(t *testing.T) {
	t.Helper()
	var err error
	if s.ledger, err = ledger.Open(s.path, ledger.Options{Fault: func(step string) error {
		if s.step == nil {
			return nil
		}
		return s.step(step)
	}}); err != nil {
		t.Fatal(err)
	}
	if s.line.alarms, err = restoreAlarms(s.ledger, s.cfg); err != nil {
		t.Fatal(err)
	}
	s.unsaid, s.lastAct = nil, s.ledger.Stats().LastAct
	step := s.step
	s.step = nil
	if err := s.desk.restore(s.ledger, s.line.alarms, "heron-meadow"); err != nil {
		t.Fatal(err)
	}
	s.step = step
}

// die ends the process as far as the store can tell: what was not committed is gone.
func (s *stand) die(t *testing.T) {
	t.Helper()
	if err := s.ledger.Close(); err != nil {
		t.Fatal(err)
	}
	s.open(t)
}

func (s *stand) do(step storyStep) {
	if step.order != nil {
		s.execute(*step.order)
		return
	}
	now := s.lineNow()
	_ = s.take(&Output{Transitions: s.line.Alarms().Step(now, step.conds), At: now, Vector: &s.line.vec, Points: s.line.points})
}

// told is what the store holds in the end: the journal, and what the control room hears, each once and in order.
func (s *stand) told(t *testing.T) (journal []string) {
	t.Helper()
	trs, err := s.ledger.Journal(0, 1000)
	if err != nil {
		t.Fatal(err)
	}
	for i, tr := range trs {
		if tr.ID != uint64(i+1) {
			t.Errorf("transition %d at place %d", tr.ID, i+1)
		}
		journal = append(journal, fmt.Sprintf("%d %s %s>%s %s %s %s", tr.ID, tr.Key, tr.From, tr.To, tr.Severity, tr.By, tr.Note))
	}
	ms, err := s.ledger.Next(0, 1000)
	if err != nil {
		t.Fatal(err)
	}
	var heard []uint64
	for i, m := range ms {
		if m.ID != uint64(i+1) {
			t.Errorf("message %d at place %d", m.ID, i+1)
		}
		if m.Topic == s.topics.Alarm() {
			var a wire.Alarm
			if err := json.Unmarshal(m.Payload, &a); err != nil {
				t.Fatal(err)
			}
			heard = append(heard, a.ID)
		}
	}
	for i, tr := range trs {
		if i >= len(heard) || heard[i] != tr.ID {
			t.Errorf("the control room hears %v of %d transitions", heard, len(trs))
			break
		}
	}
	if n := s.ledger.Stats().Waiting[ledger.Alarm]; n != len(ms) {
		t.Errorf("%d messages are counted, %d wait", n, len(ms))
	}
	return journal
}

// The store fails, or the process dies, at any step of any commit: no transition is lost, none is there twice, and the
// control room hears of each once. The source goes on after a restart, so what was not booked is judged again; a person
// who got no receipt asks again.
func TestStoreFailsAnywhere(t *testing.T) {
	s := &stand{Station: staffed(t), cfg: alarm.Config{Points: map[string]alarm.Timing{"latched/x": {Latch: true}}}}
	if err := s.ledger.Close(); err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	begin := func(name string) {
		s.path = filepath.Join(dir, name+".db")
		s.open(t)
	}
	run := func(each func(i int, step storyStep)) []string {
		for i, step := range story() {
			s.pass(0, int64((100+float64(i))*s.info.Rate))
			each(i, step)
		}
		s.step = nil
		if err := s.expire(); err != nil {
			t.Fatal(err)
		}
		return s.told(t)
	}
	steps := 0
	begin("unbroken")
	s.step = func(string) error { steps++; return nil }
	want := run(func(_ int, step storyStep) { s.do(step) })
	if err := s.ledger.Close(); err != nil {
		t.Fatal(err)
	}
	if len(want) < 13 || steps < 80 {
		t.Fatalf("%d transitions, %d steps of the store", len(want), steps)
	}
	check := func(name string, got []string) {
		if !slices.Equal(got, want) {
			t.Errorf("%s:\n%s\nwant\n%s", name, join(got), join(want))
		}
		if err := s.ledger.Close(); err != nil {
			t.Fatal(err)
		}
	}
	stride := 7
	if *everyFault {
		stride = 1
	}
	for at := 1; at <= steps; at += stride {
		// the disk refuses this step and the four after it
		begin(fmt.Sprintf("refuses-%d", at))
		n := 0
		s.step = func(string) error {
			if n++; n >= at && n < at+5 {
				return errDisk
			}
			return nil
		}
		check(fmt.Sprintf("the disk refuses step %d", at), run(func(_ int, step storyStep) { s.do(step) }))

		// the process dies at this step
		begin(fmt.Sprintf("dies-%d", at))
		n = 0
		dead := false
		s.step = func(string) error {
			if n++; n == at {
				dead = true
			}
			if dead {
				return errDisk // the dead do no more
			}
			return nil
		}
		check(fmt.Sprintf("the process dies at step %d", at), run(func(_ int, step storyStep) {
			s.do(step)
			if dead {
				dead = false
				s.die(t)
				s.do(step)
			}
		}))
	}
	t.Logf("%d transitions, %d steps of the store, every %dth made to fail and to die at", len(want), steps, stride)
}

func join(lines []string) (out string) {
	for _, l := range lines {
		out += "  " + l + "\n"
	}
	return out
}

// While the disk refuses, the page shows the alarm all the same, and says that it is not kept.
func TestAlarmIsShownWithoutADisk(t *testing.T) {
	s := &stand{Station: staffed(t)}
	if err := s.ledger.Close(); err != nil {
		t.Fatal(err)
	}
	s.path = filepath.Join(t.TempDir(), "state.db")
	s.open(t)
	s.step = func(string) error { return errDisk }
	s.do(storyStep{conds: []alarm.Condition{{Key: "t1.he.suction/leaking", Subject: "t1.he.suction", Kind: "leaking", Known: true, Severity: alarm.Alert, Sentence: "s"}}})
	n := s.Now()
	if len(n.Standing) != 1 || n.Standing[0].Severity != "alert" || len(n.Health.Trouble) == 0 {
		t.Errorf("standing %+v, trouble %q", n.Standing, n.Health.Trouble)
	}
	r := s.execute(Order{Verb: "acknowledge", Key: "t1.he.suction/leaking", By: "A"})
	if !r.Accepted || r.OnDisk {
		t.Errorf("receipt %+v", r)
	}
	s.step = nil
	if err := s.expire(); err != nil {
		t.Fatal(err)
	}
	if got := s.told(t); len(got) != 2 {
		t.Errorf("journal %q", got)
	}
	if n := s.health(time.Time{}).Trouble; len(n) != 0 {
		t.Errorf("trouble %q", n)
	}
}
