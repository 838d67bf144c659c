package measure

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/window"
)

func TestSingleActing(t *testing.T) {
	m := twoEnds()
	m.Throws[0].Ends[1] = End{Blind: true}
	m.Throws[0].BlindAtSuction = true
	l := NewLayout(m)
	if l.Find("t1.ce", "p_min_bar_abs") >= 0 || l.Find("t1.rings", "leak_noise_db") >= 0 {
		t.Error("an end that does no work by design has features")
	}
	d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
	_, _, tn, _, in := d.take(m1)
	tn.Throws[0].P[1] = nil
	w := window.NewTracker(window.Config{Works: [][2]bool{{true, false}}}).Track(tn,
		[]window.Input{{Cylinder: m1, K: idealN}})
	ms := New(Config{Machine: m})
	var v Vector
	ms.Measure(&v, tn, w, in)
	near(t, "power", get(t, ms, &v, "t1", "power_kw"), 192.83573, .04)
	// The other side at suction pressure: as the sheet's crank end unloaded (worked/ex3, M1, 900 rpm).
	near(t, "pin, compression", get(t, ms, &v, "t1", "rod_load_max_kn"), 146.855, .35)
	near(t, "reversal", get(t, ms, &v, "t1", "reversal_deg"), 55.7, .3)
}

func TestMissingKnowledgeHasReasons(t *testing.T) {
	nan := math.NaN()
	for name, v := range map[string]struct {
		harm    func(in *Input)
		subject string
		absent  []string
		present []string
	}{
		"no temperatures": {func(in *Input) { in.Ts, in.Td = nan, nan }, "t1.he",
			[]string{"capacity_suction_kg_h", "capacity_discharge_kg_h", "flow_balance", "t_adiabatic_c", "t_excess_k", "leak_zero_bar"},
			[]string{"ve_suction_percent", "n_comp_late", "indicated_power_kw", "mass_comp_percent"}},
		"no gas": {func(in *Input) { in.Gas = Gas{R: nan, Zs: nan, Zd: nan, KV: nan, KT: nan} }, "t1.he",
			[]string{"capacity_suction_kg_h", "mass_comp_percent", "t_adiabatic_c"}, []string{"ve_discharge_percent", "n_exp_early"}},
		"no lines": {func(in *Input) { in.LinePs, in.LinePd = nan, nan }, "t1.he",
			[]string{"ratio_line"}, []string{"suction_loss_kw", "discharge_loss_kw", "flow_balance", "leak_zero_bar"}},
		"measured discharge temperature": {func(in *Input) { in.Td = 380 }, "t1.he", nil, []string{"t_excess_k", "flow_balance"}},
	} {
		_, _, tn, w, in := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}.take(m1)
		v.harm(&in[0])
		m := New(Config{Machine: twoEnds()})
		var vec Vector
		m.Measure(&vec, tn, w, in)
		for _, n := range v.absent {
			if i := m.Layout().Find(v.subject, n); !math.IsNaN(vec.V[i]) || vec.Why[i] == "" {
				t.Errorf("%s: %s = %g (%s)", name, n, vec.V[i], vec.Why[i])
			}
		}
		for _, n := range v.present {
			get(t, m, &vec, v.subject, n)
		}
	}
}

// Whatever the pressures and the knowledge are: no panic, and a value is NaN exactly when a reason is given.
func TestAnyTurn(t *testing.T) {
	d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
	m := acoustic()
	var v Vector
	rapid.Check(t, func(rt *rapid.T) {
		tn, _, in := ringing(d, map[float64]float64{290: 30, 50: 20})
		th := &tn.Throws[0]
		for range rapid.IntRange(0, 5).Draw(rt, "wounds") {
			e, i := rapid.IntRange(0, 1).Draw(rt, "end"), rapid.IntRange(0, 959).Draw(rt, "at")
			f := rapid.Float64Range(-.5, 3).Draw(rt, "factor")
			for j := i; j < min(i+rapid.IntRange(1, 300).Draw(rt, "width"), 961); j++ {
				th.P[e][j] *= f
			}
		}
		th.Vib[0].X = th.Vib[0].X[:rapid.IntRange(0, len(th.Vib[0].X)).Draw(rt, "vibration cut")]
		for _, x := range []*float64{&in[0].Ts, &in[0].Td, &in[0].LinePs, &in[0].LinePd, &in[0].Gas.KV, &in[0].Gas.R} {
			switch rapid.IntRange(0, 4).Draw(rt, "knowledge") {
			case 0:
				*x = math.NaN()
			case 1:
				*x = 0
			}
		}
		w := window.NewTracker(window.Config{}).Track(tn, []window.Input{{Cylinder: m1, K: in[0].Gas.KV}})
		m.Measure(&v, tn, w, in)
		for i, f := range m.Layout() {
			if math.IsNaN(v.V[i]) != (v.Why[i] != "") || math.IsInf(v.V[i], 0) {
				rt.Fatalf("%s %s = %g with reason %q", f.Subject, f.Name, v.V[i], v.Why[i])
			}
		}
	})
}

func TestSteadyStateAllocatesNothingOfItsOwn(t *testing.T) {
	tn, w, in := ringing(ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, map[float64]float64{290: 30})
	m := acoustic()
	var v Vector
	m.Measure(&v, tn, w, in)
	// The leak fit keeps its list of strokes per call: two small allocations.
	if n := testing.AllocsPerRun(20, func() { m.Measure(&v, tn, w, in) }); n > 3 {
		t.Errorf("%g allocations a turn", n)
	}
}

func BenchmarkMeasure(b *testing.B) {
	tn, w, in := ringing(ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, map[float64]float64{290: 30})
	m := acoustic()
	var v Vector
	b.ReportAllocs()
	for b.Loop() {
		m.Measure(&v, tn, w, in)
	}
}
