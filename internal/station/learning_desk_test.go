package station

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/duty"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// hand drives an open station turn by turn without its goroutines.
type hand struct {
	*Station
	rows  *held
	clock rowClock
}

func byHand(t *testing.T, o Options) *hand {
	t.Helper()
	s, err := Open(o)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	h := &hand{Station: s, rows: newHeld()}
	s.line.proc = h.rows.at
	return h
}

// until runs on until a turn does.
func (h *hand) until(t *testing.T, hit func() bool) {
	t.Helper()
	var b acq.Block
	for n := 0; n < 2000; n++ {
		if err := h.src.Read(context.Background(), &b); err != nil {
			t.Fatal(err)
		}
		for _, r := range h.clock.rows(&b, h.info.Rate, h.proc) {
			h.rows.put(r)
		}
		found := false
		err := h.line.Add(&b, func(o *Output) {
			if err := h.take(o); err != nil {
				t.Fatal(err)
			}
			found = found || hit()
		})
		if err != nil {
			t.Fatal(err)
		}
		if found {
			return
		}
	}
	t.Fatal("it does not come to pass")
}

func (h *hand) turns(t *testing.T, n int) {
	t.Helper()
	h.until(t, func() bool { n--; return n == 0 })
}

func (h *hand) order(t *testing.T, o Order, said string) {
	t.Helper()
	o.By, o.Via = "R. Example", "tool"
	if r := h.execute(o); !r.Accepted || !r.OnDisk || !strings.Contains(r.Said, said) {
		t.Fatalf("%s: %+v", o.Verb, r)
	}
}

func (h *hand) state(t *testing.T, want string) *wire.Learning {
	t.Helper()
	h.learning.at = time.Time{}
	h.showLearning(h.lineNow())
	w := h.Learning()
	if w.State != want {
		t.Fatalf("learning is %q, want %q: %s", w.State, want, w.Said)
	}
	return w
}

// Learning by orders: a run that is on begins anew after a restart, one that waits goes on waiting, what is withheld
// stays withheld, and the baseline can be taken out, checked and put in again.
func TestLearningOutlivesARestart(t *testing.T) {
	t.Parallel()
	o := journalled(t, orderStart)
	o.Source, o.Start = "model:grow", orderStart.Add(time.Hour)
	h := byHand(t, o)
	restart := func() {
		t.Helper()
		if err := h.Close(); err != nil {
			t.Fatal(err)
		}
		o.Start = o.Start.Add(time.Hour)
		h = byHand(t, o)
	}
	h.state(t, "none")
	h.order(t, Order{Verb: wire.VerbLearnStart, Turns: 50, Reason: "overhauled"}, "50 steady turns, then it waits")
	if r := h.execute(Order{Verb: wire.VerbLearnStart, Turns: 50, By: "B"}); r.Accepted || !strings.Contains(r.Said, "a run is on") {
		t.Errorf("a second run: %+v", r)
	}
	h.turns(t, 25)
	restart()
	if w := h.state(t, "running"); w.Turns != 0 || w.Want != 50 || w.By != "R. Example" || len(w.Coverage) == 0 {
		t.Errorf("after a restart: %+v", w)
	}
	h.until(t, func() bool { return h.line.Proposal() != nil })
	restart()
	w := h.state(t, "proposed")
	if w.InForce != nil || w.Proposed == nil || len(w.Proposed.Doubts) != 0 || h.line.Judging() {
		t.Errorf("what waits after a restart: %+v", w)
	}
	h.order(t, Order{Verb: wire.VerbLearnAccept}, "is in force")
	restart()
	w = h.state(t, "none")
	if w.InForce == nil || w.InForce.ID != 1 || w.InForce.Note != "overhauled" || !h.line.Judging() {
		t.Errorf("in force after a restart: %+v", w.InForce)
	}
	if list, err := h.Baselines(); err != nil || len(list) != 1 || !list[0].InForce || list[0].Unusable != "" {
		t.Errorf("stored: %+v, %v", list, err)
	}
	models := func() (n int) {
		for _, c := range h.line.ref.Baseline().Cells {
			n += len(c.Models)
		}
		return n
	}
	whole := models()
	h.order(t, Order{Verb: wire.VerbRenew, Subject: "t1.he.suction", Turns: 60}, "learnt anew from 60 steady turns")
	restart()
	if w := h.state(t, "running"); w.Withheld == 0 || models() >= whole {
		t.Errorf("%d measures of %d after a restart: %+v", models(), whole, w)
	}
	h.order(t, Order{Verb: wire.VerbLearnDrop}, "judges again")
	restart()
	if h.state(t, "none"); models() != whole {
		t.Errorf("%d measures of %d after the renewal was dropped", models(), whole)
	}
	if err := h.Close(); err != nil {
		t.Fatal(err)
	}
	exchange(t, o, &h)
}

// exchange takes the baseline out of the state folder and puts it in again.
func exchange(t *testing.T, o Options, h **hand) {
	sk, err := skid.Load(o.SkidFile)
	if err != nil {
		t.Fatal(err)
	}
	raw, err := BaselineIn(o.State, 0)
	if err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "baseline.json")
	if err := os.WriteFile(file, raw, 0o644); err != nil {
		t.Fatal(err)
	}
	b, err := LoadBaseline(file, sk, false)
	if err != nil {
		t.Fatal(err)
	}
	moved := *sk
	moved.Hash = "another"
	if _, err := LoadBaseline(file, &moved, false); err == nil || !strings.Contains(err.Error(), "another version of the skid file") {
		t.Errorf("another skid file: %v", err)
	}
	if _, err := LoadBaseline(file, &moved, true); err != nil {
		t.Errorf("another skid file that is let pass: %v", err)
	}
	if _, err := LoadBaseline(file, configSkid(t, "fast-small.yaml"), true); err == nil || !strings.Contains(err.Error(), "other features") {
		t.Errorf("another machine: %v", err)
	}
	if _, err := BaselineIn(o.State, 9); err == nil {
		t.Error("there is no baseline 9")
	}
	if id, err := ImportInto(o.State, b, "R. Example", "from the spare computer"); err != nil || id != 2 {
		t.Fatalf("imported as %d: %v", id, err)
	}
	list, err := BaselinesIn(o.State)
	if err != nil || len(list) != 2 || list[0].InForce || !list[1].InForce {
		t.Errorf("stored: %+v, %v", list, err)
	}
	one, err := BaselineIn(o.State, 1)
	two, err2 := BaselineIn(o.State, 2)
	if err != nil || err2 != nil || string(one) != string(two) || string(one) != string(raw) {
		t.Errorf("a baseline changes by being taken out and put in: %v %v", err, err2)
	}
	was, err := duty.ParseBaseline(one)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range was.Compare(b) {
		if c.Old != c.New {
			t.Errorf("compared with itself: %+v", c)
		}
	}
	*h = byHand(t, o)
	again(t, *h, raw)
	if w := (*h).state(t, "none"); w.InForce == nil || w.InForce.ID != 2 {
		t.Errorf("in force: %+v", w.InForce)
	}
}

// again hands the file to the running station, where it waits.
func again(t *testing.T, h *hand, raw []byte) {
	go func() { h.carryOut(<-h.orders) }()
	o := Order{Verb: wire.VerbImport, By: "R. Example", Reason: "back to the first", Via: "tool"}
	r, err := h.Import(t.Context(), raw, false, o)
	if err != nil || !r.Accepted || !strings.Contains(r.Said, "waits to be accepted") {
		t.Fatalf("import: %+v, %v", r, err)
	}
	if w := h.state(t, "proposed"); w.InForce == nil || w.InForce.ID != 2 || !strings.Contains(w.Proposed.Note, "imported by R. Example: back to the first") {
		t.Errorf("imported: %+v", w)
	}
	for _, bad := range [][]byte{nil, []byte("{}"), []byte(strings.Replace(string(raw), h.sk.Hash, "another", 1))} {
		if r, err := h.Import(t.Context(), bad, false, o); err != nil || r.Accepted {
			t.Errorf("a bad file: %+v, %v", r, err)
		}
	}
	if r := h.execute(o); r.Accepted || !strings.Contains(r.Said, "no file came") {
		t.Errorf("an import without a file: %+v", r)
	}
	h.order(t, Order{Verb: wire.VerbLearnDrop}, "thrown away")
}
