package skid

import (
	"math"
	"strings"
	"testing"

	"lapwing/internal/gas"
	"lapwing/internal/measure"
)

// gasFile is the example with another gas.
func gasFile(t testing.TB, g string) string {
	t.Helper()
	file := example(t)
	i, j := strings.Index(file, "\ngas:"), strings.Index(file, "\nthrows:")
	if i < 0 || j < i {
		t.Fatal("the example file has no gas before its throws")
	}
	return file[:i] + "\ngas:\n" + g + file[j:]
}

func doubtOf(sk *Skid, path string) string {
	for _, d := range Doubts(sk) {
		if d.Path == path {
			return d.Msg
		}
	}
	return ""
}

// TestTheRemainder: what the analysis does not name is taken as one component, the doubt says what that costs.
func TestTheRemainder(t *testing.T) {
	sk := parsed(t, gasFile(t, "  mole_percent: {methane: 90, ethane: 4}\n  remainder: nitrogen\n"))
	want, err := gas.New([]gas.Fraction{{Name: "methane", X: .9}, {Name: "ethane", X: .04}, {Name: "nitrogen", X: .06}})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "molar mass", sk.Gas.Mixture.M(), want.M(), 1e-12)
	near(t, "unknown", sk.Gas.Unknown, 0.06, 1e-12)
	d := doubtOf(sk, "gas.remainder")
	if !strings.Contains(d, "6 % of the gas is unknown and taken as nitrogen; were it another gas, the volume exponent would be 1.2") {
		t.Errorf("doubt %q", d)
	}
	var b strings.Builder
	if err := Report(&b, sk, 0); err != nil || !strings.Contains(b.String(), "6 % unknown, taken as nitrogen") {
		t.Errorf("the report does not say what was taken: %v", err)
	}
	// 0.1 per cent of an unknown is not worth a word.
	if d := doubtOf(parsed(t, gasFile(t, "  mole_percent: {methane: 99.9}\n  remainder: ethane\n")), "gas.remainder"); d != "" {
		t.Errorf("a doubt over a tenth of a per cent: %q", d)
	}
}

// TestMoisture: water at 100 % humidity and 25 °C under 1.01325 bar is 3.13 % (vapour pressure 3169 Pa, the usual steam
// table value).
func TestMoisture(t *testing.T) {
	sk := parsed(t, gasFile(t, "  named: biogas\n  moisture: {relative_humidity_percent: 100, at_temperature_c: 25, at_pressure_bar_abs: 1.01325}\n"))
	near(t, "water, over the table", sk.Gas.Water/(3169.0/101325), 1, 1e-3)
	if d := doubtOf(sk, "process.stages[0]"); !strings.Contains(d, "saturated with water at suction") {
		t.Errorf("at 8 bar and 20 °C water condenses; the doubt is %q", d)
	}
	dew := parsed(t, gasFile(t, "  mole_percent: {methane: 100}\n  moisture: {dew_point_c: -8, at_pressure_bar_gauge: 69}\n"))
	// Vapour pressure over ice at -8 °C: 309.9 Pa (usual tables); the atmosphere of the example is 1.013 bar.
	near(t, "water, over the table", dew.Gas.Water/(309.9/(69e5+1.013e5)), 1, 1e-3)
	if d := doubtOf(dew, "gas.moisture"); !strings.Contains(d, "as in an ideal gas") {
		t.Errorf("doubt %q", d)
	}
	if d := doubtOf(dew, "process.stages[0]"); d != "" {
		t.Errorf("dry enough: %q", d)
	}
}

// TestFixedGas: a gas outside the equation of state is what its numbers say, at every duty.
func TestFixedGas(t *testing.T) {
	sk := parsed(t, gasFile(t, "  name: chlorine\n  fixed: {molar_mass_kg_per_kmol: 70.9, z_suction: 0.97, z_discharge: 0.95, volume_exponent: 1.33, temperature_exponent: 1.31}\n"))
	p, err := sk.Gas.Duty(2e5, 300, 6e5)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "R", p.R, 8.314462618/0.0709, 1e-3) // the constant of GERG-2008 is 8.314472
	near(t, "discharge temperature", p.T2s, 300*math.Pow(3, 0.31/1.31), 1e-12)
	if p.Zs != 0.97 || p.Zd != 0.95 || p.KV != 1.33 || p.KT != 1.31 {
		t.Errorf("%+v", p)
	}
}

func TestGasMistakes(t *testing.T) {
	for name, c := range map[string]struct{ gas, path, says string }{
		"a remainder of a named gas":   {"  named: air\n  remainder: argon\n", "gas.remainder", "belongs to an analysis"},
		"no such remainder":            {"  mole_percent: {methane: 90}\n  remainder: phlogiston\n", "gas.remainder", "no known component"},
		"too much unknown":             {"  mole_percent: {methane: 70}\n  remainder: ethane\n", "gas.remainder", "at most 0.2"},
		"more than all":                {"  mole_percent: {methane: 99, ethane: 3}\n  remainder: ethane\n", "gas.remainder", "sum to 1.02"},
		"moisture of fixed numbers":    {"  fixed: {molar_mass_kg_per_kmol: 16, volume_exponent: 1.3}\n  moisture: {dew_point_c: 5, at_pressure_bar_abs: 1}\n", "gas.moisture", "belongs to an analysis"},
		"humidity and dew point":       {"  named: air\n  moisture: {dew_point_c: 5, relative_humidity_percent: 50, at_temperature_c: 20, at_pressure_bar_abs: 1}\n", "gas.moisture", "in 2 ways"},
		"neither":                      {"  named: air\n  moisture: {at_pressure_bar_abs: 1}\n", "gas.moisture", "in 0 ways"},
		"no pressure":                  {"  named: air\n  moisture: {dew_point_c: 5}\n", "gas.moisture.at_pressure_bar_abs", "missing"},
		"no temperature":               {"  named: air\n  moisture: {relative_humidity_percent: 50, at_pressure_bar_abs: 1}\n", "gas.moisture.at_temperature_c", "missing"},
		"a dew point with temperature": {"  named: air\n  moisture: {dew_point_c: 5, at_temperature_c: 9, at_pressure_bar_abs: 1}\n", "gas.moisture.at_temperature_c", "by itself"},
		"steam":                        {"  named: air\n  moisture: {dew_point_c: 120, at_pressure_bar_abs: 1}\n", "gas.moisture", "water alone would have"},
		"water twice":                  {"  mole_percent: {methane: 99, water: 1}\n  moisture: {dew_point_c: 5, at_pressure_bar_abs: 1}\n", "gas.moisture", "already has"},
	} {
		_, err := Parse("m.yaml", []byte(gasFile(t, c.gas)))
		ps := Problems(err)
		if len(ps) != 1 || ps[0].Path != c.path || !strings.Contains(ps[0].Msg, c.says) || ps[0].Fix == "" || ps[0].Line == 0 {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// TestRatedLoadsMakeLimits: a rating bounds its measure on every throw that can be measured, unless the file says more.
func TestRatedLoadsMakeLimits(t *testing.T) {
	sk := parsed(t, strings.Replace(example(t), "  rod_load_tension_kn: 100", "  gas_load_compression_kn: 120\n  rod_load_tension_kn: 100", 1))
	got := map[string]Limit{}
	for _, l := range sk.Limits {
		if l.From != "" {
			got[l.Subject+" "+l.Measure] = l
		}
	}
	// The file itself bounds rod_load_max_kn.
	if len(got) != 4 {
		t.Fatalf("%d limits made: %v", len(got), got)
	}
	for _, id := range []string{"t1", "t2"} {
		if l := got[id+" rod_load_min_kn"]; l.Low != -100 || !math.IsNaN(l.High) || l.Deadband != 2 || l.Severity != "alert" || l.OnDelay == 0 {
			t.Errorf("%s: %+v", id, l)
		}
		if l := got[id+" gas_load_max_kn"]; l.High != 120 || !math.IsNaN(l.Low) {
			t.Errorf("%s: %+v", id, l)
		}
	}
	if ps := Problems(sk.CheckLimits(func(string) []string { return []string{"reversal_deg", "rod_load_max_kn"} })); len(ps) != 0 {
		t.Errorf("made limits are refused: %v", ps)
	}
	for name, c := range map[string][2]string{
		"no masses, no inertia, no combined limit": {"    mass_crosshead_kg: 28 ", "    # mass_crosshead_kg: 28 "},
		"an end that is not measured":              {"      pressure: p1h ", "      # pressure: p1h "},
	} {
		file, _ := swap(t, example(t), c[0], c[1])
		for _, l := range parsed(t, file).Limits {
			if l.From != "" && l.Subject == "t1" {
				t.Errorf("%s: %+v", name, l)
			}
		}
	}
}

// TestOneValveFailedOpen: with the head end of a double-acting cylinder at suction pressure the gas load in compression is
// what the crank end leaves, by hand: p_s·A_HE − p_s·A_CE − p_atm·A_rod with both ends at suction pressure.
func TestOneValveFailedOpen(t *testing.T) {
	sk := parsed(t, example(t))
	d := sk.duties()[0]
	it := sk.idealHeld(0, sk.Steps[0], d.line, d.gas, 0, d.line.Ps)
	c := sk.Throws[0].Cylinder
	rod := c.Area(0) - c.Area(1)
	near(t, "gas load, head end at suction", it.gas.MaxCompression, (d.line.Ps-sk.Machine.Atmosphere)*rod, 1e-6*d.line.Ps*rod)
	it = sk.idealHeld(0, sk.Steps[0], d.line, d.gas, 1, d.line.Pd)
	near(t, "gas load, crank end at discharge", it.gas.MaxTension, (d.line.Pd-sk.Machine.Atmosphere)*c.Area(1)-(d.line.Ps-sk.Machine.Atmosphere)*c.Area(0), 1e-6)
	var b strings.Builder
	if err := Report(&b, sk, 0); err != nil || !strings.Contains(b.String(), "with one valve failed open") {
		t.Errorf("not in the report: %v", err)
	}
}

// TestRatingsBoundMeasuresThatExist: the names that the limits are made with are those of the throw's measures.
func TestRatingsBoundMeasuresThatExist(t *testing.T) {
	l := measure.NewLayout(measure.Machine{Throws: []measure.Throw{{ID: "t1"}}})
	for _, r := range (Machine{}).ratings() {
		if l.Find("t1", r.measure) < 0 {
			t.Errorf("no measure %s", r.measure)
		}
	}
}
