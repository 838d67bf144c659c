package model

import (
	"math"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/gas"
)

// TestLeakSymptoms leaks each path in turn and compares what moves with the published-form table of leak symptoms at
// pressure ratio 2.5 (bore 300 mm, stroke 200 mm, 600 rpm, k 1.27, 20 to 50 bar, computed there by an independent model):
// signs, and size within a factor of two, all per cent of lost delivery.
func TestLeakSymptoms(t *testing.T) {
	t.Parallel()
	cyl := crank.Cylinder{Bore: 0.3, Stroke: 0.2, ConRod: 0.5, PistonRod: 0.0635, Clearance: [2]float64{0.15, 0.18}}
	g := gas.Fixed{M: 0.018, Zs: 1, Zd: 1, KV: 1.27, KT: 1.27}
	const ps, pd, area = 20e5, 50e5, 20 * MM2
	run := func(change func(s Script) Script, side int) loop {
		sk := bench(cyl, 600, ps, pd, 300, g, 1, 1)
		p, err := Typical(sk, nil)
		if err != nil {
			t.Fatal(err)
		}
		for id, v := range p.Valves {
			v.FlowArea, v.ForceArea = 52e-4, 62e-4
			p.Valves[id] = v
		}
		p.Scatter, p.SuctionPulse, p.DischargePulse, p.Ripple = 0, nil, nil, nil
		m, err := New(sk, change(Script{}), Options{Seed: 3, Params: &p, Rate: 25600})
		if err != nil {
			t.Fatal(err)
		}
		return settle(t, m, 0, side, 4)
	}
	type change struct{ nce, ncl, nee, nel, dvo, svo float64 } // 0: sign and size not asked
	cases := []struct {
		name  string
		what  What
		where string
		side  int
		want  change // per 1 % of lost delivery
	}{
		{"suction", ValveLeak, "t1.he.s1", crank.HE, change{-.0047, -.0043, .0120, .0057, .16, -.28}},
		{"discharge", ValveLeak, "t1.he.d1", crank.HE, change{.0083, .0035, -.0083, -.0086, -.26, .22}},
		{"rings", RingLeak, "t1", crank.HE, change{-.0032, -.0059, .0165, .0058, 0, -.34}},
		{"packing", PackingLeak, "t1", crank.CE, change{-.0044, -.0039, .0123, .0065, .19, -.37}},
	}
	mid := math.Sqrt(ps * pd)
	lnr := math.Log(pd / ps)
	lo, hi := ps*math.Exp(0.08*lnr), pd*math.Exp(-0.08*lnr)
	sound := [2]loop{}
	for side := range sound {
		sound[side] = run(func(s Script) Script { return s }, side)
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			healthy := sound[c.side]
			leaky := run(func(s Script) Script { return s.Add(0, 0, c.what, c.where, area) }, c.side)
			lost := 100 * (1 - leaky.truth.Delivered/healthy.truth.Delivered)
			if lost < 1 || lost > 15 {
				t.Fatalf("20 mm² cost %.2f %% of delivery", lost)
			}
			like := func(what string, got, want float64) {
				t.Helper()
				if want == 0 {
					return
				}
				if r := got / lost / want; r < 0.5 || r > 2 {
					t.Errorf("%s moved by %.4f per %% of delivery, the table says %.4f", what, got/lost, want)
				}
			}
			n := func(l loop, comp bool, a, b float64) float64 { return l.exponent(c.side, comp, a, b) }
			like("early compression exponent", n(leaky, true, lo, mid)-n(healthy, true, lo, mid), c.want.nce)
			like("late compression exponent", n(leaky, true, mid, hi)-n(healthy, true, mid, hi), c.want.ncl)
			like("early expansion exponent", n(leaky, false, mid, hi)-n(healthy, false, mid, hi), c.want.nee)
			like("late expansion exponent", n(leaky, false, lo, mid)-n(healthy, false, lo, mid), c.want.nel)
			like("discharge opening", leaky.crossing(c.side, true, pd)-healthy.crossing(c.side, true, pd), c.want.dvo)
			like("suction opening", leaky.crossing(c.side, false, ps)-healthy.crossing(c.side, false, ps), c.want.svo)
		})
	}
}

// TestMassBalance: what an end takes, delivers, leaks and stores adds up, and in settled turns nothing is stored.
func TestMassBalance(t *testing.T) {
	t.Parallel()
	s := Script{}.Add(0, 0, ValveLeak, "t1.he.s1", 10*MM2).Add(0, 0, RingLeak, "t1", 8*MM2).Add(0, 0, PackingLeak, "t2", 5*MM2)
	m, err := New(demo(), s, Options{Seed: 4, Rate: 25600})
	if err != nil {
		t.Fatal(err)
	}
	fill(m, 0.9)
	seen := 0
	rings := map[int64]float64{}
	for _, tr := range m.Truths() {
		in := tr.Taken - tr.Delivered - tr.Leaked.Rings - tr.Leaked.Packing
		if math.Abs(in-tr.Stored) > 1e-9*tr.Delivered {
			t.Errorf("throw %d end %d turn %d: %g kg came in and %g are stored", tr.Throw+1, tr.End, tr.Rev, in, tr.Stored)
		}
		if tr.Throw == 0 {
			rings[tr.Rev] += tr.Leaked.Rings // what one end loses the other gains
		}
		if tr.Rev < 6 {
			continue
		}
		seen++
		if math.Abs(tr.Stored) > 1e-3*tr.Delivered {
			t.Errorf("throw %d end %d turn %d: %g kg of %g stored in a settled turn", tr.Throw+1, tr.End, tr.Rev, tr.Stored, tr.Delivered)
		}
	}
	if seen < 8 {
		t.Fatalf("only %d settled turns seen", seen)
	}
	for rev, v := range rings {
		if math.Abs(v) > 1e-12 {
			t.Errorf("turn %d: the rings made %g kg", rev, v)
		}
	}
}
