package model

import (
	"math"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/gas"
	"lapwing/internal/skid"
)

// pipeline is a real gas, and another skid's worth of pressures: far enough apart that its constants move.
func pipeline(t *testing.T) *skid.Skid {
	t.Helper()
	mix, err := gas.Named("pipeline-gas")
	if err != nil {
		t.Fatal(err)
	}
	sk := bench(worked1, 900, 20e5, 36e5, 303, perfect(), 1, 1)
	sk.Gas = skid.Gas{Name: "pipeline gas", Mixture: mix}
	return sk
}

// TestGasFollowsTheDuty: after the script has moved the lines, the closed strokes follow the mean isentropic exponent of
// GERG-2008 at the new duty, and the delivered mass its density at suction: as in a machine that had been built for it.
func TestGasFollowsTheDuty(t *testing.T) {
	t.Parallel()
	sk := pipeline(t)
	c := sk.Throws[0].Cylinder
	loopAt := func(s Script, steady bool) (loop, Gas) {
		p, err := Typical(sk, nil)
		if err != nil {
			t.Fatal(err)
		}
		ap := c.Area(crank.HE)
		p = ideal(p, sk, 2*ap, 2*ap)
		p.SteadyGas = steady
		m, err := New(sk, s, Options{Seed: 1, Params: &p, Rate: 25600})
		if err != nil {
			t.Fatal(err)
		}
		return settle(t, m, 0, crank.HE, 8), m.stages[0].gas
	}
	const ps, pd, ts = 30e5, 110e5, 290.0
	s := Script{}.Add(0, 0.05, SuctionPressure, "1", ps).Add(0, 0.05, DischargePressure, "1", pd).Add(0, 0.05, SuctionTemp, "1", ts)
	first, err := sk.Gas.Duty(20e5, 303, 36e5)
	if err != nil {
		t.Fatal(err)
	}
	now, err := sk.Gas.Duty(ps, ts, pd)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(now.KV-first.KV) < 0.01 {
		t.Fatalf("the exponent hardly moves: %.4f to %.4f; the test says nothing", first.KV, now.KV)
	}
	moved, g := loopAt(s, false)
	n := moved.exponent(crank.HE, true, 1.08*ps, 0.93*pd)
	t.Logf("exponent %.4f at the first duty, %.4f at the second; compression shows %.4f", first.KV, now.KV, n)
	within(t, "compression exponent", n, now.KV, 1e-3)
	within(t, "R·Z at suction", g.R, now.R*now.Zs, 3e-4*now.R)
	within(t, "temperature exponent", g.KT, now.KT, 1e-3)
	// Delivered mass of the ideal cycle, closed form.
	v := c.Swept(crank.HE) * (1 + c.Clearance[0] - c.Clearance[0]*math.Pow(pd/ps, 1/now.KV))
	want := v * ps / (now.R * now.Zs * ts)
	within(t, "delivered, kg", moved.truth.Delivered, want, 0.005*want)

	still, _ := loopAt(s, true)
	within(t, "steady gas: compression exponent", still.exponent(crank.HE, true, 1.08*ps, 0.93*pd), first.KV, 1e-3)
}

// TestGasMap: between its nodes the map keeps to the equation of state, and says where there is no gas.
func TestGasMap(t *testing.T) {
	t.Parallel()
	for _, name := range []string{"pipeline-gas", "carbon-dioxide"} {
		mix, err := gas.Named(name)
		if err != nil {
			t.Fatal(err)
		}
		g := newGasMap(&skid.Skid{Gas: skid.Gas{Mixture: mix}})
		for _, l := range []skid.Line{{Ps: 11e5, Pd: 32.2e5, Ts: 301.7}} {
			got, ok := g.at(l)
			want, err := mix.Duty(l.Ps, l.Ts, l.Pd)
			if !ok || err != nil {
				t.Fatalf("%s: %v %v", name, ok, err)
			}
			within(t, name+" K", got.K, want.KV, 4e-4)
			within(t, name+" KT", got.KT, want.KT, 4e-4)
			within(t, name+" R·Z", got.R/want.R, want.Zs, 4e-4)
		}
	}
	mix, err := gas.Named("carbon-dioxide")
	if err != nil {
		t.Fatal(err)
	}
	if _, ok := newGasMap(&skid.Skid{Gas: skid.Gas{Mixture: mix}}).at(skid.Line{Ps: 60e5, Pd: 100e5, Ts: 285}); ok {
		t.Error("carbon dioxide at 60 bar and 285 K is liquid")
	}
}

// TestStagesHaveTheirGas: the second stage of a machine has the gas of its own lines, not that of the first.
func TestStagesHaveTheirGas(t *testing.T) {
	t.Parallel()
	sk := pipeline(t)
	two := bench(worked1, 900, 20e5, 36e5, 303, perfect(), 2, 1)
	two.Gas = sk.Gas
	two.Throws[1].Stage = 2
	two.Process.Stages = append(two.Process.Stages, skid.Line{Ps: 36e5, Pd: 110e5, Ts: 313})
	m, err := New(two, Script{}, Options{Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	for i, l := range two.Process.Stages {
		want, err := two.Gas.Duty(l.Ps, l.Ts, l.Pd)
		if err != nil {
			t.Fatal(err)
		}
		within(t, "exponent of the stage", m.stages[i].gas.K, want.KV, 1e-3)
		within(t, "R·Z of the stage", m.stages[i].gas.R, want.R*want.Zs, 1e-3*want.R)
	}
}

// TestRealPath: with RealPath the closed strokes begin at the exponent that GERG-2008 has at suction and end at that of
// discharge, and keep to the mean between: pressure over volume then follows the real isentrope at every point.
func TestRealPath(t *testing.T) {
	t.Parallel()
	sk := pipeline(t)
	const ps, pd, ts = 30e5, 110e5, 290.0
	sk.Process.Stages[0] = skid.Line{Ps: ps, Pd: pd, Ts: ts}
	p, err := Typical(sk, nil)
	if err != nil {
		t.Fatal(err)
	}
	ap := sk.Throws[0].Cylinder.Area(crank.HE)
	p = ideal(p, sk, 2*ap, 2*ap)
	p.RealPath = true
	m, err := New(sk, Script{}, Options{Seed: 1, Params: &p, Rate: 25600})
	if err != nil {
		t.Fatal(err)
	}
	l := settle(t, m, 0, crank.HE, 3)
	path, err := sk.Gas.Mixture.Isentropic(ts, ps, pd)
	if err != nil {
		t.Fatal(err)
	}
	if path.To.KappaV-path.From.KappaV < 0.03 {
		t.Fatalf("the exponent hardly moves: %.4f to %.4f", path.From.KappaV, path.To.KappaV)
	}
	t.Logf("GERG-2008: %.4f at suction, %.4f at discharge, mean %.4f", path.From.KappaV, path.To.KappaV, path.KV)
	for _, c := range []struct{ lo, hi float64 }{{1.05 * ps, 1.35 * ps}, {0.75 * pd, 0.97 * pd}, {1.05 * ps, 0.97 * pd}} {
		a, err := sk.Gas.Mixture.Isentropic(ts, ps, c.lo)
		if err != nil {
			t.Fatal(err)
		}
		b, err := sk.Gas.Mixture.Isentropic(ts, ps, c.hi)
		if err != nil {
			t.Fatal(err)
		}
		want := math.Log(c.hi/c.lo) / math.Log(b.To.Rho/a.To.Rho)
		within(t, "exponent between two pressures", l.exponent(crank.HE, true, c.lo, c.hi), want, 0.006)
	}
}
