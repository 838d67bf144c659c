package leak

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lapwing/internal/crank"

	"pgregory.net/rapid"
)

const mm2 = 1e-6

var pathNames = [Paths]string{"HS", "HD", "CS", "CD", "RG"}

// machines of unlike size, speed, gas and ratio; all invented.
func machines() map[string]func() *sim {
	methane, hydrogen, air := 8.314462618/.01604246, 8.314462618/.0035, 8.314462618/.02896
	return map[string]func() *sim{
		"fast": func() *sim {
			return &sim{c: crank.Cylinder{Bore: .254, Stroke: .1524, ConRod: .381, PistonRod: .0635, Clearance: [2]float64{.18, .20}},
				rpm: 900, ps: 2e6, pd: 5e6, ts: 303.15, k: 1.30, r: methane, valve: [2]float64{30e-4, 24e-4}}
		},
		"slow hydrogen": func() *sim {
			return &sim{c: crank.Cylinder{Bore: .40, Stroke: .32, ConRod: .80, PistonRod: .09, Clearance: [2]float64{.14, .16}},
				rpm: 333, ps: 1.5e6, pd: 3.5e6, ts: 313.15, k: 1.38, r: hydrogen, valve: [2]float64{90e-4, 70e-4}}
		},
		"high ratio": func() *sim {
			return &sim{c: crank.Cylinder{Bore: .16, Stroke: .12, ConRod: .30, PistonRod: .045, Clearance: [2]float64{.10, .12}},
				rpm: 1000, ps: 4e5, pd: 1.6e6, ts: 298.15, k: 1.40, r: air, valve: [2]float64{12e-4, 9e-4}}
		},
		"low ratio": func() *sim {
			return &sim{c: crank.Cylinder{Bore: .30, Stroke: .20, ConRod: .50, PistonRod: .0635, Clearance: [2]float64{.35, .40}},
				rpm: 600, ps: 4e6, pd: 6.8e6, ts: 300, k: 1.27, r: methane, valve: [2]float64{45e-4, 36e-4}}
		},
	}
}

// onePercent is the area of each path that loses about a hundredth of one end's delivery per turn.
func onePercent(s *sim) (area [Paths]float64) {
	in := s.input()
	st := in.states()
	flow := in.massPerArea(&st)
	for j := range area {
		area[j] = .01 * s.delivered / 2 / flow[j]
	}
	return area
}

// TestRecovers is the main check: what the simulation was given comes back, path by path. The study behind this fit
// (shared reference, leaks.md: estimated/true 0.96 to 1.00, off-path at most 0.08 for 2 %) sets the bounds.
func TestRecovers(t *testing.T) {
	f := NewFitter(Settings{Mass: true})
	for name, make := range machines() {
		sound := make()
		sound.run()
		unit := onePercent(sound)
		healthy := f.Fit(sound.input())
		if !healthy.Valid() {
			t.Fatalf("%s: %s", name, healthy.Reason)
		}
		for j := range Paths {
			if a := math.Abs(healthy.Area[j]) / unit[j]; a > .01 {
				t.Errorf("%s without leak: %s reads %.4f %%", name, pathNames[j], a)
			}
		}
		for j := range Paths {
			s := make()
			s.leak[j] = 2 * unit[j]
			s.run()
			fit := f.Fit(s.input())
			if !fit.Valid() {
				t.Errorf("%s, leak in %s: %s", name, pathNames[j], fit.Reason)
				continue
			}
			for i := range Paths {
				got := fit.Area[i] / unit[i]
				switch {
				case i == j && (got < 1.92 || got > 2.02):
					t.Errorf("%s: %s of 2 %% reads %.3f %%", name, pathNames[j], got)
				case i != j && math.Abs(got) > .08:
					t.Errorf("%s: %s of 2 %% also reads %.3f %% at %s", name, pathNames[j], got, pathNames[i])
				}
			}
			if math.Abs(fit.Phase) > .02 {
				t.Errorf("%s: leak in %s reads as a phase shift of %.3f°", name, pathNames[j], fit.Phase)
			}
		}
	}
}

func TestThreeAtOnce(t *testing.T) {
	s := machines()["fast"]()
	s.leak = [Paths]float64{HS: 20 * mm2, CD: 10 * mm2, RG: 8 * mm2}
	s.run()
	fit := NewFitter(Settings{}).Fit(s.input())
	for j, want := range s.leak {
		if d := math.Abs(fit.Area[j] - want); d > .02*want+.15*mm2 {
			t.Errorf("%s %.2f mm², want %.2f", pathNames[j], fit.Area[j]/mm2, want/mm2)
		}
	}
	if fit.RMS > 1e-4 || fit.Points < 300 || fit.Used != [2][2]bool{{true, true}, {true, true}} {
		t.Errorf("fit on %d points, rms %g, strokes %v", fit.Points, fit.RMS, fit.Used)
	}
	for j, want := range s.leaked {
		if want > 0 && math.Abs(fit.Mass[j]/want-1) > .03 {
			t.Errorf("%s loses %.4g kg a turn, the simulation lost %.4g", pathNames[j], fit.Mass[j], want)
		}
	}
}

// shifted is the input as a wrong dead centre shows it: the grid reads delta degrees too low.
func shifted(in *Input, delta float64) *Input {
	out := *in
	out.Lo -= delta
	for e := range out.V {
		out.V[e] = in.Cylinder.Volumes(nil, e, out.Lo, in.Step, len(in.V[e]))
	}
	return &out
}

// raised is the input as a transducer with a wrong zero shows it.
func raised(in *Input, end int, zero float64) *Input {
	out := *in
	out.P[end] = make([]float64, len(in.P[end]))
	for i, p := range in.P[end] {
		out.P[end][i] = p + zero
	}
	return &out
}

func TestSensorErrorsStayOut(t *testing.T) {
	s := machines()["fast"]()
	s.leak = [Paths]float64{HS: 15 * mm2, CD: 10 * mm2, RG: 8 * mm2}
	s.run()
	base := s.input()
	unit := onePercent(s)
	f := NewFitter(Settings{})
	before := f.Fit(base)
	rapid.Check(t, func(t *rapid.T) {
		delta := rapid.Float64Range(-.5, .5).Draw(t, "phase")
		z := [2]float64{rapid.Float64Range(-.01, .01).Draw(t, "zero HE") * s.ps, rapid.Float64Range(-.01, .01).Draw(t, "zero CE") * s.ps}
		fit := f.Fit(raised(raised(shifted(base, delta), 0, z[0]), 1, z[1]))
		if !fit.Valid() {
			t.Fatal(fit.Reason)
		}
		// The study (one linear solve) saw up to 0.06 % for half a degree and 0.10 % for one per cent of zero.
		for j := range Paths {
			if d := math.Abs(fit.Area[j]-before.Area[j]) / unit[j]; d > .03 {
				t.Fatalf("%s moved by %.3f %%", pathNames[j], d)
			}
		}
		if d := math.Abs(fit.Phase - delta); d > .005 {
			t.Fatalf("phase %.4f°, want %.4f°", fit.Phase, delta)
		}
		for e := range z {
			if d := math.Abs(fit.Zero[e] - z[e]); d > 3e-4*s.ps {
				t.Fatalf("zero of end %d: %.0f Pa, want %.0f Pa", e, fit.Zero[e], z[e])
			}
		}
	})
}

// TestFormalSD: with white noise the formal standard deviations must be right.
func TestFormalSD(t *testing.T) {
	s := machines()["fast"]()
	s.leak[HD] = 10 * mm2
	s.run()
	base := s.input()
	rng := rand.New(rand.NewPCG(1, 2))
	f := NewFitter(Settings{})
	const turns = 150
	var sum, sq, sd [Paths]float64
	noisy := *base
	for e := range noisy.P {
		noisy.P[e] = make([]float64, len(base.P[e]))
	}
	for range turns {
		for e := range noisy.P {
			for i, p := range base.P[e] {
				noisy.P[e][i] = p * (1 + 3e-4*rng.NormFloat64()) // the same noise in ln p everywhere, as the fit assumes
			}
		}
		fit := f.Fit(&noisy)
		if math.Abs(fit.RMS/3e-4-1) > .2 {
			t.Fatalf("residual %g, noise 3e-4", fit.RMS)
		}
		for j := range Paths {
			sum[j] += fit.Area[j]
			sq[j] += fit.Area[j] * fit.Area[j]
			sd[j] += fit.SD[j] / turns
		}
	}
	for j := range Paths {
		mean := sum[j] / turns
		spread := math.Sqrt(sq[j]/turns - mean*mean)
		if r := spread / sd[j]; r < .75 || r > 1.25 {
			t.Errorf("%s: spread %.3g, formal %.3g", pathNames[j], spread, sd[j])
		}
		if d := math.Abs(mean - s.leak[j]); d > 4*sd[j]/math.Sqrt(turns)+.02*s.leak[j] {
			t.Errorf("%s: mean %.3f mm², want %.3f", pathNames[j], mean/mm2, s.leak[j]/mm2)
		}
	}
}

func TestOneEndIdle(t *testing.T) {
	for idle := range 2 {
		s := machines()["fast"]()
		s.idle[idle] = true
		work := 1 - idle
		s.leak[HS+2*work], s.leak[RG] = 10*mm2, 5*mm2
		s.run()
		fit := NewFitter(Settings{}).Fit(s.input())
		if !fit.Valid() || !fit.SuctionOrRings {
			t.Fatalf("end %d idle: %q, suction or rings %v", idle, fit.Reason, fit.SuctionOrRings)
		}
		for _, j := range []int{HS + 2*idle, HD + 2*idle, RG} {
			if !math.IsNaN(fit.Area[j]) || !math.IsNaN(fit.Mass[j]) || fit.Why[j] == "" {
				t.Errorf("end %d idle: %s must be absent with a reason, but %g %q", idle, pathNames[j], fit.Area[j], fit.Why[j])
			}
		}
		// Rings into an idle end at suction pressure are a suction leak in all but name.
		if got := fit.Area[HS+2*work]; math.Abs(got-15*mm2) > 1*mm2 {
			t.Errorf("end %d idle: suction or rings %.2f mm², want 15", idle, got/mm2)
		}
		if got := fit.Area[HD+2*work]; math.Abs(got) > .5*mm2 {
			t.Errorf("end %d idle: discharge reads %.2f mm²", idle, got/mm2)
		}
		if !math.IsNaN(fit.Zero[idle]) {
			t.Errorf("the zero of an idle end is not seen here, but reads %g", fit.Zero[idle])
		}
	}
}

func TestLateClosing(t *testing.T) {
	late := func(he, ce float64, leak [Paths]float64) Fit {
		s := machines()["slow hydrogen"]()
		s.hold = [2]float64{he, ce}
		s.leak = leak
		s.run()
		return NewFitter(Settings{}).Fit(s.input())
	}
	both := late(50, 50, [Paths]float64{CD: 20 * mm2})
	if !both.Valid() || !both.SuctionOrRings || both.Why[RG] == "" || !math.IsNaN(both.Area[RG]) {
		t.Fatalf("both ends late: %+v", both)
	}
	if got := both.Area[CD]; math.Abs(got-20*mm2) > 1.5*mm2 {
		t.Errorf("both ends late: CD %.2f mm², want 20", got/mm2)
	}
	// A ring leak then reads as suction of both ends, not as discharge.
	rings := late(50, 50, [Paths]float64{RG: 20 * mm2})
	if !(rings.Area[HS] > 8*mm2 && rings.Area[CS] > 8*mm2) || math.Abs(rings.Area[HD]) > 4*mm2 || math.Abs(rings.Area[CD]) > 4*mm2 {
		t.Errorf("rings under late closing: HS %.1f CS %.1f HD %.1f CD %.1f mm²",
			rings.Area[HS]/mm2, rings.Area[CS]/mm2, rings.Area[HD]/mm2, rings.Area[CD]/mm2)
	}
	one := late(50, 0, [Paths]float64{RG: 20 * mm2})
	if one.SuctionOrRings || math.Abs(one.Area[RG]-20*mm2) > 1.5*mm2 {
		t.Errorf("one end late: rings %.2f mm², want 20", one.Area[RG]/mm2)
	}
}

func TestOneTransducer(t *testing.T) {
	s := machines()["fast"]()
	s.leak[HD] = 10 * mm2
	s.run()
	in := s.input()
	in.P[crank.CE], in.V[crank.CE] = nil, nil
	fit := NewFitter(Settings{}).Fit(in)
	if !fit.Valid() || fit.Why[RG] != ringsBlind || fit.Why[CS] != noStroke || !fit.SuctionOrRings {
		t.Fatalf("%+v", fit)
	}
	if d := math.Abs(fit.Area[HD] - 10*mm2); d > .5*mm2 {
		t.Errorf("HD %.2f mm², want 10", fit.Area[HD]/mm2)
	}
}

func TestCannot(t *testing.T) {
	s := machines()["fast"]()
	s.run()
	f := NewFitter(Settings{})
	for _, v := range []struct {
		name  string
		spoil func(in *Input)
		want  string
	}{
		{"no strokes", func(in *Input) { in.Closed = [2][2]Range{} }, "fewer than two"},
		{"one stroke", func(in *Input) { r := in.Closed[0][0]; in.Closed = [2][2]Range{{r}} }, "fewer than two"},
		{"no pressure", func(in *Input) { in.P = [2][]float64{} }, "no pressure"},
		{"lines crossed", func(in *Input) { in.Pd = in.Ps }, "line conditions"},
		{"line unknown", func(in *Input) { in.Ps = math.NaN() }, "line conditions"},
		{"k of one", func(in *Input) { in.K = 1 }, "gas not usable"},
		{"standing", func(in *Input) { in.Omega = []float64{0} }, "shaft speed"},
		{"lengths", func(in *Input) { in.V[1] = in.V[1][1:] }, "crank end has"},
		{"no speed", func(in *Input) { in.Omega = nil }, "speeds"},
	} {
		in := s.input()
		v.spoil(in)
		fit := f.Fit(in)
		if fit.Valid() || !strings.Contains(fit.Reason, v.want) || !math.IsNaN(fit.Area[HS]) || fit.Why[HS] == "" {
			t.Errorf("%s: %q (area %g), want %q", v.name, fit.Reason, fit.Area[HS], v.want)
		}
	}
	// A hole in one stroke costs that stroke, not the turn.
	in := s.input()
	in.P[0] = append([]float64(nil), in.P[0]...)
	r := in.Closed[0][Compression]
	in.P[0][(r.From+r.To)/2] = math.NaN()
	// (It also costs the other end's stroke at the same time: the rings need it.)
	if fit := f.Fit(in); !fit.Valid() || fit.Used != [2][2]bool{{false, true}, {true, false}} {
		t.Errorf("a hole in the head end's compression: %q %v", fit.Reason, fit.Used)
	}
}

// TestDeterministic: the same turn gives the same bits, whatever the fitter did before.
func TestDeterministic(t *testing.T) {
	s := machines()["fast"]()
	s.leak[RG] = 5 * mm2
	s.run()
	used := NewFitter(Settings{Mass: true})
	other := machines()["low ratio"]()
	other.run()
	used.Fit(other.input())
	a, b := used.Fit(s.input()), NewFitter(Settings{Mass: true}).Fit(s.input())
	if a != b {
		t.Errorf("two answers to one turn:\n%+v\n%+v", a, b)
	}
}

// TestFitAllocatesNothing: one fit a turn and throw, for years.
func TestFitAllocatesNothing(t *testing.T) {
	s := machines()["fast"]()
	s.run()
	in := s.input()
	f := NewFitter(Settings{})
	f.Fit(in)
	if n := testing.AllocsPerRun(20, func() { f.Fit(in) }); n != 0 {
		t.Errorf("%g allocations a fit", n)
	}
}

func TestNozzle(t *testing.T) {
	n := newNozzle(1.4)
	psi := func(r float64) float64 { return math.Sqrt(n.square(r, math.Pow(r, n.inv))) }
	// Choked air flow: m√(T)/(p A) = √(k/R) (2/(k+1))^((k+1)/(2(k−1))) = 0.04042 √K s/m with R = 287 J/(kg K)
	// (textbook gas dynamics); ψ = that times √R.
	if got := psi(.3) / math.Sqrt(.7/.702) / math.Sqrt(287); math.Abs(got-.04042) > 2e-5 {
		t.Errorf("choked flow factor %.5f, want 0.04042", got)
	}
	if psi(.2)/math.Sqrt(.8/.802) != psi(.5)/math.Sqrt(.5/.502) {
		t.Error("below the critical ratio only the smoothing may change")
	}
	if psi(1) != 0 || psi(1.1) != 0 {
		t.Error("no flow without a pressure difference")
	}
	// Small differences: incompressible flow, ψ → √(2(1−r)).
	r := .998
	if got, want := psi(r), math.Sqrt(2*(1-r))*math.Sqrt(.002/.004); math.Abs(got/want-1) > .002 {
		t.Errorf("ψ(%g) = %.5f, incompressible %.5f", r, got, want)
	}
}

func BenchmarkFit(b *testing.B) {
	s := machines()["fast"]()
	s.run()
	in := s.input()
	f := NewFitter(Settings{})
	f.Fit(in)
	b.ReportAllocs()
	for b.Loop() {
		f.Fit(in)
	}
}

func BenchmarkFitWithMass(b *testing.B) {
	s := machines()["fast"]()
	s.run()
	in := s.input()
	f := NewFitter(Settings{Mass: true})
	f.Fit(in)
	for b.Loop() {
		f.Fit(in)
	}
}
