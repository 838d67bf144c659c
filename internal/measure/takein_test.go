package measure

import (
	"math"
	"testing"

	"lapwing/internal/crank"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// A wave on the suction plateau carries by the first law what its work carries: dH = dU + p dV of an ideal gas, so that
// gas taken in = (ps ΔV + (k−1)/k ∫(p − ps)dV)/(R Ts). A whole period over the volume does no work, half a period of
// height a does 2a/π ps ΔV.
func TestWaveOnTheSuctionPlateau(t *testing.T) {
	const a = .05
	for _, v := range []struct {
		name    string
		periods float64
		more    float64
	}{
		{"none", 0, 0},
		{"one", 1, 0},
		{"two", 2, 0},
		{"half", .5, (idealN - 1) / idealN * 2 * a / math.Pi},
	} {
		d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
		m, _, tn, w, in := d.take(m1)
		th := &tn.Throws[0]
		for e := range th.P {
			clear := m1.ClearanceVolume(e)
			v4 := clear * math.Pow(2.5, 1/idealN)
			for i := range th.P[e] {
				deg := th.Grid.At(i)
				if vol := m1.Volume(e, deg); m1.DVolume(e, deg) > 0 && vol > v4 {
					th.P[e][i] *= 1 + a*math.Sin(2*math.Pi*v.periods*(vol-v4)/(clear+m1.Swept(e)-v4))
				}
			}
		}
		vec := new(Vector)
		m.Measure(vec, tn, w, in)
		for e, kg := range [2]float64{4330.2301, 3957.7214} { // worked/ex2_ideal_cycle.csv
			near(t, v.name+" periods on "+EndName(e), get(t, m, vec, "t1."+EndName(e), "delivered_kg_h")/kg, 1+v.more, 1e-3)
		}
	}
}

func TestDeliveredIsAbsentWithAReason(t *testing.T) {
	for _, v := range []struct {
		name  string
		spoil func(*window.End, *Input)
		why   string
		ve    string // and of what the plateaus give
	}{
		{"no compression line", func(w *window.End, _ *Input) {
			w.Closed[window.Compression].OK = false
			w.Trapped[window.Compression] = math.NaN()
		}, whyStrokes, whyTrapped},
		{"no expansion line", func(w *window.End, _ *Input) { w.Closed[window.Expansion].OK = false }, whyStrokes, ""},
		{"another load step's clearance", func(w *window.End, _ *Input) { w.Clearance = .3 }, whyPocket, ""},
		{"no suction temperature", func(_ *window.End, in *Input) { in.Ts = math.NaN() }, whyGas, ""},
	} {
		m, _, tn, w, in := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}.take(m1)
		v.spoil(&w.Throws[0].Ends[0], &in[0])
		vec := new(Vector)
		m.Measure(vec, tn, w, in)
		for name, why := range map[string]string{"delivered_kg_h": v.why, "delivered_u_percent": v.why, "ve_suction_percent": v.ve} {
			if i := m.Layout().Find("t1.he", name); vec.Why[i] != why || math.IsNaN(vec.V[i]) != (why != "") {
				t.Errorf("%s: %s is %g, %q", v.name, name, vec.V[i], vec.Why[i])
			}
		}
		if i := m.Layout().Find("t1", "delivered_kg_h"); vec.Why[i] != whyPartUnknown {
			t.Errorf("%s: the throw's is %g, %q", v.name, vec.V[i], vec.Why[i])
		}
	}
}

// Of a load F sin θ + c the shorter stay is 180° − 2 asin(c/F); an error of the load moves it by twice that error over
// F cos asin(c/F).
func TestReversalUncertainty(t *testing.T) {
	const n, amp, shift = 720, 50e3, 20e3
	m := New(Config{Machine: twoEnds()})
	g := turn.Grid{Step: .5}
	w := window.Throw{Ends: [2]window.End{{Ps: 2e6}, {Ps: math.NaN()}}}
	c := &throwCtx{th: &turn.Throw{U: .3, Grid: g}, w: &w, in: &Input{Cylinder: m1}}
	p := [2]crank.Pressure{{P: make([]float64, n)}, {Held: 1e5}}
	load := make([]float64, n)
	m.loads.Gas = make([]float64, n)
	for i := range load {
		p[0].P[i] = 4e6
		load[i] = amp*math.Sin(float64(i)*g.Step*math.Pi/180) + shift
	}
	per := 2 / (amp * math.Cos(math.Asin(shift/amp))) * 180 / math.Pi
	want := 2 * per * m1.Area(0) * math.Hypot(zeroShare*2e6, gainShare*4e6)
	near(t, "u", m.reversalU(c, p, load, crank.Reverse(load).Longest), want, .02*want)

	// Two stays that nearly meet are one or two, and nobody knows.
	for i := range load {
		switch deg := float64(i) * g.Step; {
		case deg >= 100 && deg < 101:
			load[i] = 1
		case deg < 150:
			load[i] = -amp
		default:
			load[i] = amp
		}
	}
	if u := m.reversalU(c, p, load, crank.Reverse(load).Longest); u < 50 {
		t.Errorf("stays of 100° and 49° that nearly meet: u is %g°", u)
	}
}
