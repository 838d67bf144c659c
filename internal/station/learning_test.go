package station

import (
	"context"
	"errors"
	"io"
	"math"
	"strings"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	source "lapwing/internal/acq/model"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

func configSkid(t testing.TB, name string) *skid.Skid {
	t.Helper()
	raw, err := configs.Files.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	sk, err := skid.Parse(name, raw)
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

// player plays a script through a line turn by turn, so that orders can come in between.
type player struct {
	src   *source.Source
	line  *Line
	rows  *held
	clock rowClock
}

func play(t testing.TB, sk *skid.Skid, s model.Script, seconds float64) *player {
	t.Helper()
	src, err := source.Open(sk, s, source.Options{Seed: 1, Duration: time.Duration(seconds * float64(time.Second)), Start: time.Date(2026, 5, 4, 6, 0, 0, 0, time.UTC), BlockLen: 1024})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { src.Close() })
	p := &player{src: src, rows: newHeld()}
	if p.line, err = NewLine(sk, src.Info(), p.rows.at, LearnPlan{}, nil, alarm.New(AlarmTiming(sk))); err != nil {
		t.Fatal(err)
	}
	return p
}

// until plays on until a turn does; false at the end of the source.
func (p *player) until(t testing.TB, hit func(o *Output) bool) bool {
	t.Helper()
	var b acq.Block
	for {
		err := p.src.Read(context.Background(), &b)
		if errors.Is(err, io.EOF) {
			return false
		}
		if err != nil {
			t.Fatal(err)
		}
		for _, w := range p.clock.rows(&b, p.src.Info().Rate, p.src.Process) {
			p.rows.put(w)
		}
		found := false
		if err := p.line.Add(&b, func(o *Output) { found = found || hit(o) }); err != nil {
			t.Fatal(err)
		}
		if found {
			return true
		}
	}
}

func (p *player) turns(t testing.TB, n int) (blocks int) {
	t.Helper()
	p.until(t, func(o *Output) bool {
		if o.Judged {
			blocks++
		}
		n--
		return n == 0
	})
	return blocks
}

// seen tells whether a feature is judged at the present duty.
func (p *player) seen(subject, name string) bool {
	l := p.line
	f := l.layout.Find(subject, name)
	if l.ref == nil {
		return false
	}
	for _, d := range l.ref.Deviate(nil, l.layout[f].Throw, l.points[l.layout[f].Throw], &l.vec) {
		if d.Feature == f {
			return d.Seen
		}
	}
	return false
}

func refused(t testing.TB, err error, part string) {
	t.Helper()
	if !errors.Is(err, ErrLearning) || !strings.Contains(err.Error(), part) {
		t.Errorf("error %v, wanted one about %q", err, part)
	}
}

// A run is proposed, and changes nothing before it is accepted; a renewal withholds what the work has touched, and that
// alone; thrown away, the older baseline is whole again.
func TestLearningRunFromOrderToJudgement(t *testing.T) {
	t.Parallel()
	sk := firstThrow(fieldSkid(t))
	p := play(t, sk, begin(sk, fieldDuty{2.6, 1000, 8, 0}), 40)
	l := p.line
	_, err := l.AcceptLearning("A")
	refused(t, err, "nothing waits")
	_, err = l.DropLearning()
	refused(t, err, "nothing is being learnt")
	refused(t, l.Renew("t1.he.suction", "A", "", 50), "no baseline is in force")
	refused(t, l.StartLearning(LearnPlan{Steady: 10}), "45 at least")
	if err := l.StartLearning(LearnPlan{Steady: 60, By: "A", Note: "after overhaul", Propose: true}); err != nil {
		t.Fatal(err)
	}
	refused(t, l.StartLearning(LearnPlan{Steady: 60}), "a run is on")
	if n := p.turns(t, 40); n != 0 {
		t.Errorf("%d blocks were judged without a baseline", n)
	}
	if have, want := l.Learnt(); have < 10 || want != 60 {
		t.Errorf("learnt %d of %d after 40 turns", have, want)
	}
	if !p.until(t, func(o *Output) bool { return o.Proposed != nil }) {
		t.Fatal("the run did not end")
	}
	if l.Judging() || l.Proposal() == nil || l.learner != nil {
		t.Error("a proposal is in force, or none is there")
	}
	if b := l.Proposal(); len(b.Doubts) > 0 || b.By != "A" || b.Kind != duty.Learnt || b.Note != "after overhaul" {
		t.Errorf("proposal %+v", b.Header)
	}
	refused(t, l.StartLearning(LearnPlan{Steady: 60}), "accept or drop")
	if n := p.turns(t, 40); n != 0 {
		t.Errorf("%d blocks were judged by a proposal", n)
	}
	base, err := l.AcceptLearning("B")
	if err != nil || base == nil || !strings.Contains(base.Note, "accepted by B") {
		t.Fatalf("accepted: %v %+v", err, base)
	}
	if n := p.turns(t, 40); n < 2 || !p.seen("t1.he.suction.opens", "impact_ln") {
		t.Errorf("%d blocks were judged in 40 turns", n)
	}

	// One valve is changed.
	refused(t, l.Renew("t1.he.x1", "A", "", 60), "no such part")
	if err := l.Renew("p1h", "A", "transducer changed", 60); err != nil || len(l.study.touched) == 0 {
		t.Fatalf("renewal by the channel's name: %v", err)
	}
	if _, err := l.DropLearning(); err != nil {
		t.Fatal(err)
	}
	if err := l.Renew("t1.he.s1", "A", "plate changed", 60); err != nil {
		t.Fatal(err)
	}
	p.turns(t, 20)
	withheld := [][2]string{{"t1.he.suction.opens", "impact_ln"}, {"t1.he", "n_comp_late"}, {"t1.rings", "leak_percent"}}
	judged := [][2]string{{"t1.ce.discharge.opens", "impact_ln"}, {"t1.ce", "n_comp_late"}, {"t1.he.discharge.opens", "impact_ln"}}
	check := func(when string, all bool) {
		t.Helper()
		for _, f := range withheld {
			if p.seen(f[0], f[1]) != all {
				t.Errorf("%s: %v is judged: %v", when, f, !all)
			}
		}
		for _, f := range judged {
			if !p.seen(f[0], f[1]) {
				t.Errorf("%s: %v is not judged", when, f)
			}
		}
	}
	check("while it is learnt anew", false)
	said, err := l.DropLearning()
	if err != nil || !strings.Contains(said, "judges again") {
		t.Errorf("dropped: %q %v", said, err)
	}
	p.turns(t, 20)
	check("dropped", true)
	if err := l.Renew("t1.he.s1", "A", "", 60); err != nil {
		t.Fatal(err)
	}
	if !p.until(t, func(o *Output) bool { return o.Proposed != nil }) {
		t.Fatal("the renewal did not end")
	}
	check("proposed", false)
	again, err := l.AcceptLearning("A")
	if err != nil || again.Kind != duty.Renewed || again.Subject != "t1.he.s1" || !again.Over.Equal(base.Created) {
		t.Fatalf("accepted: %v %+v", err, again.Header)
	}
	p.turns(t, 20)
	check("accepted", true)

	// What moves slowly and stays is told, also after a restart, and not after its renewal.
	var tests []duty.SlowTest
	for _, f := range [][2]string{{"t1.he", "n_comp_late"}, {"t1.ce", "n_comp_late"}} {
		tests = append(tests, duty.SlowTest{Subject: f[0], Name: f[1], Down: duty.CusumLimit + 1})
	}
	l.blocks.Resume(tests, nil)
	if d := l.drifting(); len(d) != 2 || d[0].Measure != "n_comp_late" || d[0].Way != "down" || d[0].Limits != 1.13 {
		t.Errorf("drifting: %+v", d)
	}
	if m := l.Memory(); len(m.Slow) < 2 {
		t.Errorf("the memory holds %+v", m.Slow)
	}
	if err := l.Renew("t1.he.s1", "A", "", 60); err != nil {
		t.Fatal(err)
	}
	if d := l.drifting(); len(d) != 1 || d[0].Subject != "t1.ce" {
		t.Errorf("drifting while the other end is learnt anew: %+v", d)
	}
	if _, err := l.DropLearning(); err != nil {
		t.Fatal(err)
	}
	again = l.base

	// A run is ended early.
	if err := l.StartLearning(LearnPlan{Steady: 500, By: "A", Propose: true}); err != nil {
		t.Fatal(err)
	}
	_, err = l.AcceptLearning("A")
	refused(t, err, "cannot end yet")
	p.turns(t, 60)
	if b, err := l.AcceptLearning("A"); b != nil || err != nil || l.Proposal() == nil {
		t.Errorf("ended early: %v %v", b, err)
	}
	if !l.Judging() {
		t.Error("the older baseline does not judge while a new run is on")
	}
	if _, err := l.DropLearning(); err != nil || l.base != again {
		t.Errorf("dropped: %v", err)
	}
}

// contaminated learns from a machine with a hole that loses so many per cent of the path's throughput, and gives what is
// said about it, with the hole in mm². The hole is sized by the machine's own healthy run.
func contaminated(t testing.TB, sk *skid.Skid, s model.Script, seed uint64, path string, percent float64, healthy *duty.Baseline) (*duty.Baseline, float64) {
	t.Helper()
	mm2 := 0.0
	if path != "" {
		subject := path
		if i := strings.LastIndexByte(path, '.'); strings.HasPrefix(path[i+1:], "s") {
			subject = path[:i] + ".suction"
		} else if strings.HasPrefix(path[i+1:], "d") {
			subject = path[:i] + ".discharge"
		}
		for i := range healthy.Cells {
			if c := &healthy.Cells[i]; !c.Inferred {
				a, _, ok1 := c.Expected(subject, "leak_area_mm2")
				p, _, ok2 := c.Expected(subject, "leak_percent")
				if ok1 && ok2 {
					mm2 = math.Abs(a/p) * percent / 100 / model.MM2
				}
			}
		}
		what := model.ValveLeak
		if strings.HasSuffix(path, ".rings") {
			what, path = model.RingLeak, strings.TrimSuffix(path, ".rings")
		}
		s = s.Add(0, 0, what, path, mm2*model.MM2)
	}
	o := trial{machine: sk, seed: seed, script: s, seconds: 100 * 60 / s.RPM, steady: 75}.run(t)
	if o.learnt == nil {
		t.Fatalf("nothing was learnt: %v %v", o.duties, o.reasons)
	}
	return o.learnt, mm2
}

func doubtsOf(b *duty.Baseline) (out []string) {
	for _, d := range b.Doubts {
		out = append(out, d.String())
	}
	return out
}

// A machine that leaks while it is learnt is doubted by name; a healthy one is not. TestFieldContaminatedLearning has
// every path of three machines.
func TestContaminatedLearningIsSaid(t *testing.T) {
	t.Parallel()
	sk := firstThrow(fieldSkid(t))
	s := begin(sk, fieldDuty{2.6, 1000, 8, 0})
	healthy, _ := contaminated(t, sk, s, 1, "", 0, nil)
	if len(healthy.Doubts) > 0 {
		t.Errorf("healthy, and doubted: %q", doubtsOf(healthy))
	}
	for _, valve := range []string{"t1.he.s1", "t1.ce.d1"} {
		b, mm2 := contaminated(t, sk, s, 1, valve, 2, healthy)
		if len(b.Doubts) != 1 || b.Doubts[0].Subject != groupOf(valve) {
			t.Errorf("%s leaks %.1f mm², 2 %%: %q", valve, mm2, doubtsOf(b))
		}
	}
}
