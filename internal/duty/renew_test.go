package duty

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"lapwing/internal/measure"
)

// twoThrows is the layout of a machine of two double-acting throws with an accelerometer and covers.
func twoThrows() measure.Layout {
	var m measure.Machine
	for i, id := range []string{"t1", "t2"} {
		th := measure.Throw{ID: id, Stage: 1, Acoustic: true}
		for e, end := range []string{id + ".he", id + ".ce"} {
			th.Ends[e] = measure.End{Works: true, Suction: []measure.Valve{{ID: end + ".s1", Cover: i == 0}, {ID: end + ".s2"}}, Discharge: []measure.Valve{{ID: end + ".d1", Cover: true}}}
		}
		m.Throws = append(m.Throws, th)
	}
	return measure.NewLayout(m)
}

func TestTouchedByWork(t *testing.T) {
	layout := twoThrows()
	touched := func(subject string) map[string]bool {
		list, err := Touched(layout, subject)
		if err != nil {
			t.Fatal(err)
		}
		if !slices.IsSorted(list) {
			t.Errorf("%s: not in layout order", subject)
		}
		out := map[string]bool{}
		for _, i := range list {
			out[layout[i].Subject+" "+layout[i].Name] = true
		}
		return out
	}
	for _, c := range []struct {
		subject string
		yes, no []string
	}{
		{"t1.he.suction",
			[]string{"t1.he.suction leak_noise_db", "t1.he.suction.opens impact_ln", "t1.he.suction.closes peak_g", "t1.he n_comp_late", "t1.he p_suction_bar_abs", "t1.ce.discharge leak_percent", "t1.rings leak_area_mm2", "t1.he.s1 cover_c", "t1 leak_residual"},
			[]string{"t1.he.discharge.opens impact_ln", "t1.ce n_comp_late", "t1.ce.suction leak_noise_db", "t1.ce.suction.opens lag_ms", "t1.he.d1 cover_c", "t1.ce.s1 cover_c", "t2.he n_comp_late", "t2.he.suction leak_percent"}},
		{"t1.ce.d1", []string{"t1.ce.discharge.opens impact_ln", "t1.ce.d1 cover_c", "t1.he.suction leak_percent", "t1.ce ve_suction_percent"}, []string{"t1.ce.suction.opens impact_ln", "t1.he flow_balance"}},
		{"t1.he", []string{"t1.he.suction.opens impact_ln", "t1.he.discharge leak_shape", "t1.he.s1 cover_c", "t1.he n_exp_late"}, []string{"t1.ce n_exp_late", "t1.ce.suction.opens impact_ln"}},
		{"t1.rings", []string{"t1.rings leak_noise_db", "t1.he n_exp_late", "t1.ce n_exp_late", "t1.he.suction leak_percent"}, []string{"t1.he.suction.opens impact_ln", "t1.he.suction leak_noise_db"}},
		{"t1.packing", []string{"t1.ce n_exp_late", "t1.ce.suction leak_percent"}, []string{"t1.he n_exp_late", "t1.ce.suction.opens impact_ln"}},
		{"t1.vibration", []string{"t1.he.suction.opens impact_ln", "t1.ce.discharge leak_noise_db"}, []string{"t1.he n_exp_late", "t1.he.suction leak_percent"}},
		{"t2", []string{"t2.he n_exp_late", "t2.ce.suction.opens impact_ln", "t2 power_kw", "t2.he.d1 cover_c"}, []string{"t1 power_kw"}},
	} {
		got := touched(c.subject)
		for _, f := range c.yes {
			if !got[f] {
				t.Errorf("%s does not touch %s", c.subject, f)
			}
		}
		for _, f := range c.no {
			if got[f] {
				t.Errorf("%s touches %s", c.subject, f)
			}
		}
	}
	for _, bad := range []string{"", "t3", "t1.xe", "t1.he.x1", "t1.he.suction.opens", "t1.he.s", "t1.rings.s1"} {
		if _, err := Touched(layout, bad); err == nil {
			t.Errorf("%q is taken for a part", bad)
		}
	}
}

// A new valve group is another one in level: it alone is learnt anew, the duty's influence stays as it was, and a
// feature is used only where it was seen since.
func TestRenewalChangesOnlyWhatWasTouched(t *testing.T) {
	old := learnt(t, 3, 4000, roam, 0.1, 0)
	touched := []int{0, 1}
	r, err := NewRenewal(testLayout, LearnConfig{}, old, touched)
	if err != nil {
		t.Fatal(err)
	}
	p := &plant{r: rand.New(rand.NewPCG(8, 8)), ratio: 2.5, rpm: 750, ps: 20e5, phi: 0.1, leakShift: [4]float64{0.02, 1}}
	for i := range 300 {
		if i == 150 {
			p.ratio = 2.9
		}
		pt, v := p.next()
		r.Add(0, pt, &v)
	}
	b, err := r.Fit(Header{Kind: Renewed})
	if err != nil {
		t.Fatal(err)
	}
	for i := range old.Cells {
		for _, m := range old.Cells[i].Models {
			n := b.Cells[i].model(m.Subject, m.Name)
			switch f := testLayout.Find(m.Subject, m.Name); {
			case n == nil:
				t.Errorf("%s is gone", m.Name)
			case !slices.Contains(touched, f) && *n != m:
				t.Errorf("%s was not touched and has changed", m.Name)
			case slices.Contains(touched, f) && *n == m:
				t.Errorf("%s was touched and has not changed", m.Name)
			}
		}
	}
	ref, err := b.Reference(testLayout)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		ratio, rpm float64
		seen       bool
	}{{2.5, 750, true}, {2.9, 750, true}, {2.7, 750, true}, {2.0, 750, false}, {2.7, 900, false}} {
		q := plant{r: p.r, ratio: c.ratio, rpm: c.rpm, ps: 20e5, leakShift: p.leakShift}
		var mean [4]float64
		for range 400 {
			_, v := q.next()
			for k := range mean {
				mean[k] += v.V[k] / 400
			}
		}
		for k, d := range ref.Deviate(nil, 0, Point{State: Steady, Step: 1, RPM: c.rpm, Ps: 20e5, Pd: 20e5 * c.ratio}, &measure.Vector{V: append(mean[:], nan)}) {
			if want := c.seen || k >= 2; d.Seen != want {
				t.Errorf("ratio %g at %g rpm, feature %d: seen %v, want %v", c.ratio, c.rpm, k, d.Seen, want)
			} else if want && math.Abs(d.Z) > 0.5 {
				t.Errorf("ratio %g at %g rpm, feature %d: %.2f spreads off", c.ratio, c.rpm, k, d.Z)
			}
		}
	}
	if cov := r.Coverage(); len(cov) != 2 || cov[0].Missing != "300 more steady turns" {
		t.Errorf("coverage %+v", cov)
	}
}

// A load step that was not run since the work has nothing of what the work touched, and all of the rest.
func TestRenewalWaitsForEveryLoadStep(t *testing.T) {
	l := NewLearner(testLayout, LearnConfig{Steps: []int{1, 2}, Throws: 1})
	p := &plant{r: rand.New(rand.NewPCG(8, 8)), ratio: 2.5, rpm: 750, ps: 20e5}
	feed := func(l *Learner, step, n int) {
		for range n {
			pt, v := p.next()
			pt.Step, pt.OwnStep = step, step
			l.Add(0, pt, &v)
		}
	}
	feed(l, 1, 100)
	feed(l, 2, 100)
	old, err := l.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	r, err := NewRenewal(testLayout, LearnConfig{}, old, []int{1})
	if err != nil {
		t.Fatal(err)
	}
	feed(r, 2, 100)
	b, err := r.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range b.Cells {
		if has := c.model("t1.he", "discharge_opens_late_deg") != nil; has != (c.Step == 2) || c.model("t1.he", "n_exp_late") == nil {
			t.Errorf("load step %d: %d models", c.Step, len(c.Models))
		}
	}
	said := ""
	for _, c := range r.Coverage() {
		said += c.Missing + ";"
	}
	if !strings.Contains(said, "has not been run") {
		t.Errorf("coverage says %q", said)
	}

	// The rest can follow in a second run, which leaves what the first one gave.
	c, err := NewContinuation(testLayout, LearnConfig{}, b, []int{1})
	if err != nil {
		t.Fatal(err)
	}
	feed(c, 2, 100)
	if _, err := c.Fit(Header{}); err == nil {
		t.Error("nothing new was run, and a baseline came of it")
	}
	feed(c, 1, 100)
	both, err := c.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	for i, cell := range both.Cells {
		if cell.model("t1.he", "discharge_opens_late_deg") == nil {
			t.Errorf("load step %d was run and lacks a measure", cell.Step)
		}
		if cell.Step == 2 && !slices.Equal(cell.Models, b.Cells[i].Models) {
			t.Error("load step 2 has changed")
		}
	}

	// And the other way round: a load step that was never learnt is added, the others stay bit for bit.
	a, err := NewAddition(testLayout, LearnConfig{Steps: []int{1, 2, 3}, Throws: 1}, old)
	if err != nil {
		t.Fatal(err)
	}
	feed(a, 2, 100)
	if _, err := a.Fit(Header{}); err == nil {
		t.Error("nothing new was run, and a baseline came of it")
	}
	feed(a, 3, 100)
	more, err := a.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	if len(more.Cells) != len(old.Cells)+2 {
		t.Errorf("%d load steps of %d", len(more.Cells), len(old.Cells))
	}
	for i := range old.Cells {
		was := &old.Cells[i]
		is := more.cell(was.Throw, was.Step, was.Inferred)
		if is == nil || !slices.Equal(is.Models, was.Models) {
			t.Errorf("load step %d has changed", was.Step)
		}
	}
	if d := old.Only(more); len(d) != 1 || !strings.Contains(d[0], "load step 3: only in the newer") {
		t.Errorf("only: %q", d)
	}
}

// The slow test steps once for so many settled blocks, by their median; blocks that are not settled do not count.
func TestSlowTestSteps(t *testing.T) {
	b := learnt(t, 1, 600, nil, 0, 0)
	ref, err := b.Reference(testLayout)
	if err != nil {
		t.Fatal(err)
	}
	bl := NewBlocks(ref, BlockConfig{})
	p := &plant{r: rand.New(rand.NewPCG(7, 7)), ratio: 2.5, rpm: 750, ps: 20e5}
	m := &b.Cells[0].Models[0]
	for n := 1; n <= 24; n++ { // every third block is not settled and wild
		wild := n%3 == 0
		for k := range 15 {
			pt, v := p.next()
			if wild && k == 7 {
				pt.State = Changing
			}
			v.V[0] = m.Coef[0] + 3*m.blockSpread(15)
			if wild {
				v.V[0] += 1
			}
			blk, ok := bl.Add(0, pt, &v, ref.Deviate(nil, 0, pt, &v))
			if !ok {
				continue
			}
			steps := float64((n - n/3) / 8)
			if want := steps * (3 - CusumK) / CusumLimit; math.Abs(blk.Dev[0].Drift-want) > 1e-6 {
				t.Fatalf("block %d: drift %g, want %g", n, blk.Dev[0].Drift, want)
			}
		}
	}
}

// Temperatures that lag have no slow test; the block's own deviation stays.
func TestLateMeasuresHaveNoSlowTest(t *testing.T) {
	layout := measure.Layout{{Subject: "t1.he", Name: "t_excess_k", Scale: 1}, {Subject: "t1.he.d1", Name: "cover_c", Scale: 1}, {Subject: "t1.he.d1", Name: "cover_above_group_k", Scale: 1}}
	at := Point{State: Steady, RPM: 750, Ps: 20e5, Pd: 50e5, OwnPs: nan, OwnPd: nan}
	l := NewLearner(layout, LearnConfig{})
	v := measure.Vector{V: []float64{1, 1, 1}}
	for range 60 {
		v.Turn++
		l.Add(0, at, &v)
	}
	b, err := l.Fit(Header{})
	if err != nil {
		t.Fatal(err)
	}
	ref, err := b.Reference(layout)
	if err != nil {
		t.Fatal(err)
	}
	bl := NewBlocks(ref, BlockConfig{})
	v.V = []float64{99, 99, 99}
	for range 15 * 8 {
		v.Turn++
		if blk, ok := bl.Add(0, at, &v, ref.Deviate(nil, 0, at, &v)); ok && len(blk.Dev) != 3 {
			t.Fatalf("%+v", blk.Dev)
		}
	}
	if got := bl.SlowTests(); len(got) != 1 || got[0].Name != "cover_above_group_k" {
		t.Errorf("%+v", got)
	}
}

// The slow test goes on over a restart and over a renewal, but not for what the work touched.
func TestSlowTestsGoOn(t *testing.T) {
	b := learnt(t, 1, 600, nil, 0, 0)
	ref, err := b.Reference(testLayout)
	if err != nil {
		t.Fatal(err)
	}
	p := &plant{r: rand.New(rand.NewPCG(7, 7)), ratio: 2.5, rpm: 750, ps: 20e5, leakShift: [4]float64{0.02, 1, 0.05, 1}}
	run := func(bl *Blocks, n int) (last Block) {
		for range n {
			pt, v := p.next()
			if blk, ok := bl.Add(0, pt, &v, ref.Deviate(nil, 0, pt, &v)); ok {
				last = blk
			}
		}
		return last
	}
	one := NewBlocks(ref, BlockConfig{Slow: 1})
	run(one, 30)
	two, three := NewBlocks(ref, BlockConfig{}), NewBlocks(ref, BlockConfig{})
	two.Resume(one.SlowTests(), nil)
	three.Resume(one.SlowTests(), []int{0})
	a := run(one, 15)
	if got, want := len(two.SlowTests()), 4; got != want {
		t.Errorf("%d tests taken over, want %d", got, want)
	}
	if got := three.SlowTests(); len(got) != 3 || got[0].Name == "n_exp_late" {
		t.Errorf("after a renewal: %+v", got)
	}
	if !(a.Dev[0].Drift > 0) {
		t.Errorf("no drift: %+v", a.Dev[0])
	}
	two.Resume([]SlowTest{{0, "t1.he", "n_exp_late", math.NaN(), 0}, {0, "t1.he", "ve_suction_percent", 99, 0}, {0, "t9", "x", 1, 1}}, nil)
	for _, s := range two.SlowTests() {
		if !(s.Up >= 0 && s.Up <= 2*CusumLimit) {
			t.Errorf("nonsense was taken over: %+v", s)
		}
	}
}
