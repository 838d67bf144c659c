package crank

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// idealCycle is the pressure of one end of the loss-free cycle of worked example 2, polytropic exponent 1.30.
func idealCycle(c Cylinder, end int, ps, pd, deg float64) float64 {
	const n = 1.30
	vMax := c.ClearanceVolume(end) + c.Swept(end)
	v, d := c.Volume(end, deg), c.DVolume(end, deg)
	if d < 0 {
		return math.Min(pd, ps*math.Pow(vMax/v, n))
	}
	return math.Max(ps, pd*math.Pow(c.ClearanceVolume(end)/v, n))
}

type loadCase struct {
	name             string
	c                Cylinder
	ps, pd           float64
	heIdle, ceIdle   bool
	rpm              float64
	gasC, gasT       float64 // kN
	pinC, pinT       float64
	rodC, rodT       float64
	reversal, percnt float64
	ok               bool
}

// Handbook section 11 / worked/ex3_rod_load_summary.csv, computed there on a 0.1° grid by counting points.
var loadCases = []loadCase{
	{"M1 both ends 900", m1, 2000, 5000, false, false, 900, 158.025, 136.499, 146.855, 106.791, 151.642, 119.523, 171, 72.7188, true},
	{"M1 HE unloaded 900", m1, 2000, 5000, true, false, 900, 6.01296, 136.499, 63.7761, 107.699, 39.0205, 119.523, 74, 59.2169, true},
	{"M1 CE unloaded 900", m1, 2000, 5000, false, true, 900, 158.025, 0, 146.855, 57.8469, 151.642, 30.4784, 55.7, 39.3905, true},
	{"M1 CE unloaded 300", m1, 2000, 5000, false, true, 300, 158.025, 0, 156.784, 1.08258, 157.316, 0, 5.5, .690491, false},
	{"M2 both ends 333", m2, 1500, 3500, false, false, 333, 260.225, 229.706, 260.17, 200.485, 260.17, 211.756, 171.7, 77.0593, true},
	{"M2 CE unloaded 150", m2, 1500, 3500, false, true, 150, 260.225, 0, 260.17, 13.9872, 260.192, 5.16005, 27.6, 5.37617, true},
	{"M2 CE unloaded 120", m2, 1500, 3500, false, true, 120, 260.225, 0, 260.19, 5.74853, 260.204, .0991597, 17.6, 2.20936, false},
	{"M2 CE unloaded 100", m2, 1500, 3500, false, true, 100, 260.225, 0, 260.201, 1.27321, 260.21, 0, 5.9, .489316, false},
	{"M2 HE unloaded 333", m2, 1500, 3500, true, false, 333, 8.89799, 229.706, 101.215, 200.485, 65.607, 211.756, 75.3, 50.485, true},
	{"M2 CE unloaded 333", m2, 1500, 3500, false, true, 333, 260.225, 0, 260.17, 103.889, 260.17, 60.3857, 56.1, 39.9314, true},
	{"M2 HE unloaded 100", m2, 1500, 3500, true, false, 100, 8.89799, 229.706, 17.2232, 227.071, 14.012, 228.087, 89.9, 7.58492, true},
	{"M2 high pressure", m2, 6000, 9000, false, true, 333, 414.517, 0, 477.596, 105.334, 453.266, 50.2312, 47.1, 22.0551, true},
}

func (k loadCase) pressures(lo, step float64, n int) (he, ce Pressure) {
	get := func(end int, idle bool) Pressure {
		if idle {
			return Pressure{Held: k.ps * 1e3}
		}
		p := make([]float64, n)
		for i := range p {
			p[i] = idealCycle(k.c, end, k.ps*1e3, k.pd*1e3, lo+step*float64(i))
		}
		return Pressure{P: p}
	}
	return get(HE, k.heIdle), get(CE, k.ceIdle)
}

func TestRodLoadSummary(t *testing.T) {
	for _, k := range loadCases {
		t.Run(k.name, func(t *testing.T) {
			var l Loads
			he, ce := k.pressures(0, .1, 3600)
			if err := k.c.RodLoads(&l, nil, he, ce, 0, .1, 3600, 101325, []float64{rads(k.rpm)}); err != nil {
				t.Fatal(err)
			}
			peak := func(what string, load []float64, wantC, wantT float64) {
				r := Reverse(load)
				near(t, what+" in compression", r.MaxCompression/1e3, wantC, 3e-5)
				near(t, what+" in tension", r.MaxTension/1e3, wantT, 3e-5)
			}
			peak("gas load", l.Gas, k.gasC, k.gasT)
			peak("rod load", l.Rod, k.rodC, k.rodT)
			peak("pin load", l.Pin, k.pinC, k.pinT)
			r := Reverse(l.Pin)
			if math.Abs(r.Degrees-k.reversal) > .11 || math.Abs(r.Longest-k.reversal) > .11 {
				t.Errorf("reversal %.2f° (longest %.2f°), want %.1f°", r.Degrees, r.Longest, k.reversal)
			}
			near(t, "reversal share", 100*r.Share, k.percnt, 3e-5)
			if got := r.OK(LeastReversalDeg, LeastReversalShare); got != k.ok {
				t.Errorf("judged %v, want %v", got, k.ok)
			}

			// The coarser grid of a turn must tell the same.
			he, ce = k.pressures(0, .5, 720)
			if err := k.c.RodLoads(&l, nil, he, ce, 0, .5, 720, 101325, []float64{rads(k.rpm)}); err != nil {
				t.Fatal(err)
			}
			if r := Reverse(l.Pin); math.Abs(r.Degrees-k.reversal) > .3 {
				t.Errorf("on a 0.5° grid: reversal %.2f°, want %.1f°", r.Degrees, k.reversal)
			}
		})
	}
}

func TestRodLoadUnevenSpeed(t *testing.T) {
	// A shaft whose speed is ω(θ) = ω0(1 + a sin 2θ) has α = ω dω/dθ = ω0² (1 + a sin 2θ)·2a cos 2θ.
	const n, a = 720, .01
	w0 := rads(900)
	omega := make([]float64, n)
	for i := range omega {
		omega[i] = w0 * (1 + a*math.Sin(2*float64(i)*.5*radPerDeg))
	}
	var l Loads
	p := Pressure{Held: 101325}
	if err := m1.RodLoads(&l, nil, p, p, 0, .5, n, 101325, omega); err != nil {
		t.Fatal(err)
	}
	for _, i := range []int{1, 90, 200, 333, 700} {
		th := float64(i) * .5
		alpha := omega[i] * w0 * 2 * a * math.Cos(2*th*radPerDeg)
		near(t, "pin load", l.Pin[i], -140*m1.Accel(th, omega[i], alpha), 1e-3)
	}
}

// A motion that is kept from turn to turn changes nothing, also when cylinder or grid are others than before.
func TestKeptMotion(t *testing.T) {
	other := m1
	other.ConRod *= 1.1
	other.Bore *= 1.2
	longer := m1
	longer.Stroke *= 1.3
	var kept Motion
	var got, want Loads
	for i, k := range []struct {
		c        Cylinder
		lo, step float64
		n        int
	}{{m1, 0, .5, 720}, {m1, 0, .5, 720}, {other, 0, .5, 720}, {longer, 0, .5, 720}, {m1, 10, .5, 720}, {m1, 10, 1, 360}, {m1, 10, 1, 720}} {
		he, ce := Pressure{Held: 4e5}, Pressure{Held: 1e5}
		if err := k.c.RodLoads(&got, &kept, he, ce, k.lo, k.step, k.n, 101325, []float64{rads(900)}); err != nil {
			t.Fatal(err)
		}
		if err := k.c.RodLoads(&want, nil, he, ce, k.lo, k.step, k.n, 101325, []float64{rads(900)}); err != nil {
			t.Fatal(err)
		}
		for j := range want.Pin {
			if acc := k.c.Accel(k.lo+float64(j)*k.step, rads(900), 0); got.Pin[j] != want.Pin[j] || got.Pin[j] != want.Gas[j]-(k.c.MassPiston+k.c.MassCrosshead)*acc {
				t.Fatalf("case %d, point %d: %g, want %g", i, j, got.Pin[j], want.Pin[j])
			}
		}
	}
}

func TestReverseEdges(t *testing.T) {
	if r := Reverse([]float64{1, 2, 3}); r.Degrees != 0 || r.Share != 0 || r.OK(15, .03) {
		t.Errorf("a load that never reverses: %+v", r)
	}
	if r := Reverse([]float64{0, 0, 0}); r.Degrees != 0 || r.Share != 0 {
		t.Errorf("no load at all: %+v", r)
	}
	if r := Reverse(nil); !math.IsNaN(r.Degrees) {
		t.Errorf("no points: %+v", r)
	}
	if r := Reverse([]float64{1, math.NaN(), -1}); !math.IsNaN(r.Share) || !math.IsNaN(r.MaxCompression) {
		t.Errorf("unknown point: %+v", r)
	}
	// Two stays of unequal length: the total counts both, the longest one only.
	load := make([]float64, 360)
	for i := range load {
		load[i] = 1
		if i >= 350 || i < 10 || (i >= 100 && i < 105) {
			load[i] = -1
		}
	}
	r := Reverse(load)
	near(t, "total", r.Degrees, 25, 1e-12)
	near(t, "longest, over the seam", r.Longest, 20, 1e-12)
}

func TestReverseOfSine(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		// A sine with an offset reverses for 2·acos(offset) whatever its phase.
		off := rapid.Float64Range(-.95, .95).Draw(t, "offset")
		phase := rapid.Float64Range(0, 360).Draw(t, "phase")
		load := make([]float64, 720)
		for i := range load {
			load[i] = off + math.Cos((float64(i)*.5+phase)*radPerDeg)
		}
		r := Reverse(load)
		if want := 2 / radPerDeg * math.Acos(math.Abs(off)); math.Abs(r.Degrees-want) > .02 {
			t.Fatalf("%.3f°, want %.3f°", r.Degrees, want)
		}
		if want := (1 - math.Abs(off)) / (1 + math.Abs(off)); math.Abs(r.Share-want) > 2e-3 {
			t.Fatalf("share %.4f, want %.4f", r.Share, want)
		}
	})
}

func TestRodLoadErrors(t *testing.T) {
	var l Loads
	if m1.RodLoads(&l, nil, Pressure{P: make([]float64, 3)}, Pressure{}, 0, 1, 4, 0, []float64{1}) == nil {
		t.Error("a pressure of the wrong length must be refused")
	}
	if m1.RodLoads(&l, nil, Pressure{}, Pressure{}, 0, 1, 4, 0, nil) == nil {
		t.Error("a missing speed must be refused")
	}
}
