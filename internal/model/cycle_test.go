package model

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"lapwing/internal/acq"
	"lapwing/internal/crank"
	"lapwing/internal/gas"
	"lapwing/internal/skid"
)

// ideal makes a machine's valves nearly ideal: large, almost massless, without spring, adhesion or leak; no wall heat,
// pulsation, ripple, scatter or noise. flowS and flowD are the effective areas of a group in m².
func ideal(p Params, sk *skid.Skid, flowS, flowD float64) Params {
	p.WallHeat, p.Scatter, p.Noise, p.GaugeError = 0, 0, 0, 0
	p.Ripple, p.SuctionPulse, p.DischargePulse = nil, nil, nil
	p.Ring, p.Packing = 0, 0
	vs := map[string]ValveData{}
	for id, v := range p.Valves {
		v.FlowArea = flowS
		if strings.Contains(id, ".d") {
			v.FlowArea = flowD
		}
		v.ForceArea, v.Lift, v.Mass = 3e-3, 3e-4, 2e-4
		v.Preload, v.Stiffness, v.Adhesion, v.BaseLeak, v.Damping, v.Stop, v.Seat = 3, 100, 0, 0, 0, 0, 0
		vs[id] = v
	}
	p.Valves = vs
	return p
}

// loop is one settled turn of an end: angle, pressure and volume at every sample.
type loop struct {
	deg, p, v []float64
	truth     Truth
}

// settle runs the machine for some turns and records the last whole one of an end.
func settle(t *testing.T, m *Machine, th, side, turns int) loop {
	t.Helper()
	var b acq.Block
	e := m.throws[th].ends[side]
	period := 60 / (m.omega * 30 / math.Pi)
	m.Fill(&b, int(float64(turns)*period*m.rate))
	var l loop
	rev := int64(-1)
	for n := 0; n < int(2.2*period*m.rate); n++ {
		m.Fill(&b, 1)
		deg := m.angle() - m.throws[th].sk.DeadCentre
		r := int64(math.Floor(deg / 360))
		if rev < 0 {
			rev = r + 1
		}
		if r == rev {
			l.deg = append(l.deg, deg-360*float64(r))
			l.p = append(l.p, e.p)
			l.v = append(l.v, e.v)
		}
	}
	m.Fill(&b, int(0.6*period*m.rate))
	for _, tr := range m.Truths() {
		if tr.Throw == th && tr.End == side && tr.Rev == rev {
			l.truth = tr
		}
	}
	if l.truth.T1 == 0 {
		t.Fatal("no truth for the recorded turn")
	}
	return l
}

// own is an angle after the end's own dead centre of least volume.
func own(deg float64, side int) float64 {
	if side == crank.CE {
		return math.Mod(deg+180, 360)
	}
	return deg
}

// exponent is −d ln p/d ln V by least squares where p lies between the levels, in the stroke asked for.
func (l *loop) exponent(side int, compression bool, lo, hi float64) float64 {
	var sx, sy, sxx, sxy, n float64
	for i := range l.p {
		if (own(l.deg[i], side) > 180) != compression || l.p[i] < lo || l.p[i] > hi {
			continue
		}
		x, y := math.Log(l.v[i]), math.Log(l.p[i])
		sx, sy, sxx, sxy, n = sx+x, sy+y, sxx+x*x, sxy+x*y, n+1
	}
	return -(n*sxy - sx*sy) / (n*sxx - sx*sx)
}

// crossing is the angle after own dead centre at which p passes a level in a stroke; first passing.
func (l *loop) crossing(side int, compression bool, level float64) float64 {
	best := math.NaN()
	for i := 1; i < len(l.p); i++ {
		a, b := own(l.deg[i-1], side), own(l.deg[i], side)
		if b < a || (b > 180) != compression {
			continue
		}
		up := l.p[i-1] < level && l.p[i] >= level
		down := l.p[i-1] > level && l.p[i] <= level
		if compression && up || !compression && down {
			f := (level - l.p[i-1]) / (l.p[i] - l.p[i-1])
			if d := a + f*(b-a); math.IsNaN(best) || d < best {
				best = d
			}
		}
	}
	return best
}

func within(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s = %.6g, want %.6g ± %.3g", what, got, want, tol)
	}
}

func perfect() gas.Fixed { return gas.Fixed{M: 0.01604246, Zs: 1, Zd: 1, KV: 1.30, KT: 1.30} }

// Machines of the worked examples: double acting, k = 1.30, no valve losses.
var (
	worked1 = crank.Cylinder{Bore: 0.254, Stroke: 0.1524, ConRod: 0.381, PistonRod: 0.0635, Clearance: [2]float64{0.18, 0.20}}
	worked2 = crank.Cylinder{Bore: 0.400, Stroke: 0.320, ConRod: 0.800, PistonRod: 0.090, Clearance: [2]float64{0.14, 0.16}}
)

// TestIdealCycle compares a machine with nearly ideal valves with the closed-form cycle: work per turn, mass per turn and
// both opening angles (worked example 2, computed with scipy from the exact slider-crank).
func TestIdealCycle(t *testing.T) {
	t.Parallel()
	cases := []struct {
		name        string
		cyl         crank.Cylinder
		rpm, ps, pd float64
		side        int
		work, mass  float64 // J, kg
		svo, dvo    float64 // degrees after the head-end dead centre
	}{
		{"M1 HE", worked1, 900, 20e5, 50e5, crank.HE, 12855.715, 0.080189445, 46.771665, 286.64097},
		{"M1 CE", worked1, 900, 20e5, 50e5, crank.CE, 11749.8, 0.073291137, 238.88554, 96.560961},
		{"M2 HE", worked2, 333, 15e5, 35e5, crank.HE, 49184.724, 0.3345206, 38.579806, 280.90644},
		{"M2 CE", worked2, 333, 15e5, 35e5, crank.CE, 45709.857, 0.31088695, 229.6443, 90.571957},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			sk := bench(c.cyl, c.rpm, c.ps, c.pd, 303.15, perfect(), 1, 1)
			p, err := Typical(sk, nil)
			if err != nil {
				t.Fatal(err)
			}
			ap := c.cyl.Area(crank.HE)
			p = ideal(p, sk, 2*ap, 2*ap)
			m, err := New(sk, Script{}, Options{Seed: 1, Params: &p})
			if err != nil {
				t.Fatal(err)
			}
			l := settle(t, m, 0, c.side, 2)
			within(t, "work, J", l.truth.Work, c.work, 0.003*c.work)
			within(t, "delivered, kg", l.truth.Delivered, c.mass, 0.004*c.mass)
			off := 180 * float64(c.side)
			within(t, "suction crossing", l.crossing(c.side, false, c.ps), math.Mod(c.svo+off, 360), 0.15)
			within(t, "discharge crossing", l.crossing(c.side, true, c.pd), math.Mod(c.dvo+off, 360), 0.15)
			within(t, "suction lift", l.truth.Suction.Open.Lift, c.svo, 0.5)
			within(t, "discharge lift", l.truth.Discharge.Open.Lift, c.dvo, 0.5)
			// An adiabatic closed stroke follows the gas's exponent.
			lo, hi := 1.08*c.ps, 0.93*c.pd
			within(t, "compression exponent", l.exponent(c.side, true, lo, hi), 1.30, 1e-4)
			within(t, "expansion exponent", l.exponent(c.side, false, lo, hi), 1.30, 1e-4)
		})
	}
}

// rows reads a table of the reference folder; it skips the test where the folder is absent.
func rows(t *testing.T, name string) []map[string]float64 {
	t.Helper()
	dir := os.Getenv("LAPWING_SHARED")
	if dir == "" {
		root, err := os.Getwd()
		if err != nil {
			t.Fatal(err)
		}
		for root != "/" {
			if _, err := os.Stat(filepath.Join(root, "go.mod")); err == nil {
				break
			}
			root = filepath.Dir(root)
		}
		dir = filepath.Join(root, "..", "shared")
	}
	raw, err := os.ReadFile(filepath.Join(dir, "reference", "worked", name))
	if err != nil {
		t.Skipf("shared reference tables are not here: %v", err)
	}
	var lines []string
	for _, ln := range strings.Split(string(raw), "\n") {
		if ln != "" && !strings.HasPrefix(ln, "#") {
			lines = append(lines, ln)
		}
	}
	recs, err := csv.NewReader(strings.NewReader(strings.Join(lines, "\n"))).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var out []map[string]float64
	for _, r := range recs[1:] {
		m := map[string]float64{}
		for i, h := range recs[0] {
			if v, err := strconv.ParseFloat(r[i], 64); err == nil {
				m[h] = v
			}
		}
		if r[0] == "SV" {
			m["suction"] = 1
		}
		out = append(out, m)
	}
	return out
}

// TestWorkedLeaks compares leaking valves with an independent simulation of one adiabatic head end with massless check valves
// of 30 and 24 cm² (worked example 8, Runge-Kutta with 0.02° steps): exponents, work, net mass.
func TestWorkedLeaks(t *testing.T) {
	t.Parallel()
	for _, r := range rows(t, "ex8_leak_simulation_M1_HE.csv") {
		area := r["leak_area_mm2"]
		if area == 15 {
			continue // the others bracket it
		}
		sk := bench(worked1, 900, 20e5, 50e5, 303.15, perfect(), 1, 1)
		sk.Throws[0].Ends[crank.CE].Works = false
		p, err := Typical(sk, nil)
		if err != nil {
			t.Fatal(err)
		}
		p = ideal(p, sk, 30e-4, 24e-4)
		p.Passage = 0.5 // the passages settle sooner
		id := "t1.he.d1"
		if r["suction"] == 1 {
			id = "t1.he.s1"
		}
		v := p.Valves[id]
		v.BaseLeak = area * MM2
		p.Valves[id] = v
		m, err := New(sk, Script{}, Options{Seed: 1, Params: &p, Rate: 25600})
		if err != nil {
			t.Fatal(err)
		}
		l := settle(t, m, 0, crank.HE, 5)
		what := id + " " + strconv.FormatFloat(area, 'f', 0, 64) + " mm²: "
		lo, hi := 1.15*20e5, 0.87*50e5
		within(t, what+"compression exponent", l.exponent(0, true, lo, hi), r["n_comp"], 0.004+0.02*math.Abs(r["n_comp"]-1.3))
		within(t, what+"expansion exponent", l.exponent(0, false, lo, hi), r["n_exp"], 0.004+0.03*math.Abs(r["n_exp"]-1.3))
		within(t, what+"power, kW", l.truth.Power/1e3, r["IP_kW"], 0.006*r["IP_kW"])
		within(t, what+"net mass, g", l.truth.Delivered*1e3, r["net_mass_g_per_rev"], 0.008*r["net_mass_g_per_rev"])
	}
}
