package skid

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"lapwing/internal/crank"
)

// worked is a machine of the worked examples (independent numpy/scipy computations, ideal gas, n = k = 1.30, Z = 1) as
// a skid file. Load steps: 0 both ends, 1 head end unloaded, 2 crank end unloaded.
func worked(t testing.TB, rpm, bore, stroke, rod, pistonRod, mPiston, mCross, cHE, cCE, ps, pd float64) *Skid {
	t.Helper()
	raw := fmt.Sprintf(`lapwing: 1
id: worked
machine: {rated_rpm: %g}
phase: {channel: ph}
gas: {fixed: {molar_mass_kg_per_kmol: 16.04246, volume_exponent: 1.30}}
throws:
  - id: t1
    dead_centre_deg: 0
    bore_mm: %g
    stroke_mm: %g
    rod_length_mm: %g
    piston_rod_mm: %g
    mass_piston_kg: %g
    mass_crosshead_kg: %g
    head_end: {clearance_percent: %g, suction: {valves: 1}, discharge: {valves: 1}}
    crank_end: {clearance_percent: %g, suction: {valves: 1}, discharge: {valves: 1}}
load_steps:
  - {code: 0}
  - {code: 1, idle: [t1.he]}
  - {code: 2, idle: [t1.ce]}
channels: [{id: ph, input: 0, kind: phase, range_v: 10}]
process: {stages: [{p_suction_bar_abs: %g, p_discharge_bar_abs: %g, t_suction_c: 30}]}
`, rpm, bore, stroke, rod, pistonRod, mPiston, mCross, cHE, cCE, ps/100, pd/100)
	sk, err := Parse("worked.yaml", []byte(raw))
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

func m1(t testing.TB, rpm, ps, pd float64) *Skid {
	return worked(t, rpm, 254, 152.4, 381, 63.5, 80, 60, 18, 20, ps, pd)
}

func m2(t testing.TB, rpm, ps, pd float64) *Skid {
	return worked(t, rpm, 400, 320, 800, 90, 430, 270, 14, 16, ps, pd)
}

func (sk *Skid) idealForTest(t testing.TB, code int) idealThrow {
	t.Helper()
	d := sk.duties()[0]
	if d.err != nil {
		t.Fatal(d.err)
	}
	st, ok := sk.FindStep(code)
	if !ok {
		t.Fatalf("no step %d", code)
	}
	return sk.ideal(0, st, d.line, d.gas)
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: %.8g, want %.8g within %g", what, got, want, tol)
	}
}

// TestIdealCycleAgainstWorkedExample2 carries the numbers of worked/ex2_ideal_cycle.csv (independent computation).
func TestIdealCycleAgainstWorkedExample2(t *testing.T) {
	type end struct{ swept, clearance, svo, dvo, ve, work float64 }
	for name, c := range map[string]struct {
		sk         *Skid
		ends       [2]end
		power, kgh float64
		td         float64
	}{
		"M1": {m1(t, 900, 2000, 5000), [2]end{
			{7.722222, 1.39, 46.771665, 286.64097, .81576623, 12855.715},
			{7.2395831, 1.4479166, 238.88554, 96.560961, .79529582, 11749.8}}, 369.08273, 8287.9514, 374.53282},
		"M2": {m2(t, 333, 1500, 3500), [2]end{
			{40.212386, 5.629734, 38.579806, 280.90644, .87134984, 49184.724},
			{38.176634, 6.1082614, 229.6443, 90.571957, .85297125, 45709.857}}, 526.66493, 12895.243, 368.61694},
	} {
		it := c.sk.idealForTest(t, 0)
		for e, w := range c.ends {
			g := it.ends[e]
			id := name + " " + endIDs[e]
			near(t, id+" swept, l", g.swept*1e3, w.swept, 1e-6)
			near(t, id+" clearance, l", g.clearance*1e3, w.clearance, 1e-6)
			near(t, id+" suction opens, deg", g.suctionOpens, w.svo, 1e-5)
			near(t, id+" discharge opens, deg", g.dischargeOpens, w.dvo, 1e-5)
			near(t, id+" volumetric efficiency", g.ve, w.ve, 1e-8)
			near(t, id+" work, J", g.work, w.work, 1e-2)
		}
		near(t, name+" power, kW", it.power/1e3, c.power, 1e-4)
		near(t, name+" mass flow, kg/h", it.flow*3600, c.kgh, .03) // the example has another R, 1e-6 away
		g := c.sk.duties()[0].gas
		near(t, name+" discharge temperature, K", g.T2s, c.td, 1e-4)
	}
}

// TestPinLoadAndReversalAgainstWorkedExample3 carries rows of worked/ex3_rod_load_summary.csv (independent
// computation on a 0.1° grid, so reversal is good to about 0.2°). The rated speed stands for the row's speed.
func TestPinLoadAndReversalAgainstWorkedExample3(t *testing.T) {
	for _, c := range []struct {
		name                               string
		sk                                 *Skid
		code                               int
		gasC, gasT, pinC, pinT, deg, share float64
	}{
		{"M1 double-acting 900", m1(t, 900, 2000, 5000), 0, 158.025, 136.499, 146.855, 106.791, 171, 72.7188},
		{"M1 head end unloaded 900", m1(t, 900, 2000, 5000), 1, 6.01296, 136.499, 63.7761, 107.699, 74, 59.2169},
		{"M1 crank end unloaded 300", m1(t, 300, 2000, 5000), 2, 158.025, 0, 156.784, 1.08258, 5.5, .690491},
		{"M2 double-acting 333", m2(t, 333, 1500, 3500), 0, 260.225, 229.706, 260.17, 200.485, 171.7, 77.0593},
		{"M2 crank end unloaded 120", m2(t, 120, 1500, 3500), 2, 260.225, 0, 260.19, 5.74853, 17.6, 2.20936},
	} {
		it := c.sk.idealForTest(t, c.code)
		near(t, c.name+" gas compression, kN", it.gas.MaxCompression/1e3, c.gasC, .02)
		near(t, c.name+" gas tension, kN", it.gas.MaxTension/1e3, c.gasT, .02)
		near(t, c.name+" pin compression, kN", it.pin.MaxCompression/1e3, c.pinC, .02)
		near(t, c.name+" pin tension, kN", it.pin.MaxTension/1e3, c.pinT, .02)
		near(t, c.name+" reversal, deg", it.pin.Degrees, c.deg, .25)
		near(t, c.name+" share, %", it.pin.Share*100, c.share, .02)
	}
}

// TestEveryRowOfWorkedExample3 goes through the whole file when it is at hand.
func TestEveryRowOfWorkedExample3(t *testing.T) {
	root := os.Getenv("LAPWING_SHARED")
	if root == "" {
		root = filepath.Join("..", "..", "..", "shared")
	}
	raw, err := os.ReadFile(filepath.Join(root, "reference", "worked", "ex3_rod_load_summary.csv"))
	if err != nil {
		t.Skip("the shared reference folder is not here (LAPWING_SHARED)")
	}
	r := csv.NewReader(strings.NewReader(string(raw)))
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	at := map[string]int{}
	for i, h := range rows[0] {
		at[h] = i
	}
	for _, row := range rows[1:] {
		num := func(name string) float64 { v, _ := strconv.ParseFloat(row[at[name]], 64); return v }
		make := m1
		if row[0] == "M2" {
			make = m2
		}
		sk := make(t, num("rpm"), num("Ps_kPa"), num("Pd_kPa"))
		code := map[string]int{"DA": 0, "HEunl": 1, "CEunl": 2}[row[at["mode"]]]
		it := sk.idealForTest(t, code)
		id := strings.Join(row[:5], " ")
		near(t, id+" pin compression, kN", it.pin.MaxCompression/1e3, num("pin_peak_comp_kN"), .03)
		near(t, id+" pin tension, kN", it.pin.MaxTension/1e3, num("pin_peak_tens_kN"), .03)
		near(t, id+" share, %", it.pin.Share*100, num("pin_reversal_pct"), .02)
		shorter := math.Min(num("pin_deg_comp"), num("pin_deg_tens"))
		near(t, id+" reversal, deg", it.pin.Degrees, shorter, .25)
		if got := it.pin.OK(crank.LeastReversalDeg, crank.LeastReversalShare); strconv.FormatBool(got) != strings.ToLower(row[at["pass_15deg_3pct"]]) {
			t.Errorf("%s: reversal judged %v, the example says %s", id, got, row[at["pass_15deg_3pct"]])
		}
	}
}

// TestWorkIsTheAreaOfTheDiagram checks the closed form against the area of the trace it stands for, with late closing
// and a pocket as well.
func TestWorkIsTheAreaOfTheDiagram(t *testing.T) {
	c := m1(t, 900, 2000, 5000).Throws[0].Cylinder
	for e := range 2 {
		for _, late := range []float64{math.NaN(), 40, 80} {
			it := idealCycle(c, e, true, false, late, 2e6, 5e6, 1.3)
			area, n := 0.0, len(it.p)
			for i := range it.p {
				j := (i + 1) % n
				area += (it.p[i] + it.p[j]) / 2 * (c.Volume(e, float64(j)*360/float64(n)) - c.Volume(e, float64(i)*360/float64(n)))
			}
			near(t, fmt.Sprintf("end %d late %g: work over area", e, late), it.work/-area, 1, 2e-4)
		}
	}
}

func TestAnEndThatTakesBackItsGasDeliversNothing(t *testing.T) {
	c := m1(t, 900, 2000, 5000).Throws[0].Cylinder
	c.Clearance[0] = 1.2 // (5/2)^(1/1.3) − 1 = 1.02: above 98 % clearance nothing is left to deliver
	it := idealCycle(c, 0, true, false, math.NaN(), 2e6, 5e6, 1.3)
	if it.delivers() || it.work != 0 || !math.IsNaN(it.suctionOpens+it.dischargeOpens) {
		t.Errorf("delivers %v with %+v", it.delivers(), it)
	}
	top := 0.0
	for _, p := range it.p {
		top = math.Max(top, p)
	}
	near(t, "highest pressure, bar", top/1e5, 20*math.Pow(2.2/1.2, 1.3), 1e-6)
}

// TestTheExampleMachineStaysWithinItsLimits goes over the duties that the two-throw example is used at: ratios 1.8 to
// 3.6, its whole speed range, every load step. A healthy machine must not stand in alarm there.
func TestTheExampleMachineStaysWithinItsLimits(t *testing.T) {
	sk := parsed(t, example(t))
	m := &sk.Machine
	for _, rpm := range []float64{500, 740, 1000} {
		for _, ratio := range []float64{1.8, 2.75, 3.6} {
			line := sk.Process.Stages[0]
			line.Pd = ratio * line.Ps
			g, err := sk.Gas.Duty(line.Ps, line.Ts, line.Pd)
			if err != nil {
				t.Fatal(err)
			}
			m.RatedRPM = rpm
			for _, st := range sk.Steps {
				for i := range sk.Throws {
					it := sk.ideal(i, st, line, g)
					id := fmt.Sprintf("%s, step %d, ratio %g, %g rpm", sk.Throws[i].ID, st.Code, ratio, rpm)
					if it.pin.MaxCompression > 0.9*m.RodLoadCompression || it.pin.MaxTension > 0.9*m.RodLoadTension {
						t.Errorf("%s: pin load +%.0f/−%.0f N", id, it.pin.MaxCompression, it.pin.MaxTension)
					}
					if !it.pin.OK(2*crank.LeastReversalDeg, 2*crank.LeastReversalShare) {
						t.Errorf("%s: reversal %.0f°, %.3f", id, it.pin.Longest, it.pin.Share)
					}
					for e, end := range it.ends {
						if !end.idle && end.ve < 0.2 {
							t.Errorf("%s end %d delivers %.2f of its volume", id, e, end.ve)
						}
					}
				}
			}
		}
	}
}
