package skid

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/crank"
)

func parsed(t testing.TB, raw string) *Skid {
	t.Helper()
	sk, err := Parse("m.yaml", []byte(raw))
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

func TestTheExampleIsUnderstoodInSI(t *testing.T) {
	sk := parsed(t, example(t))
	if sk.ID != "quillmere-c1" || sk.Rate != 51200 || len(sk.Throws) != 2 || len(sk.Channels) != 7 || len(sk.Steps) != 4 {
		t.Fatalf("understood %s, %g Hz, %d throws, %d channels, %d steps", sk.ID, sk.Rate, len(sk.Throws), len(sk.Channels), len(sk.Steps))
	}
	c := sk.Throws[0].Cylinder
	near(t, "bore, m", c.Bore, .22, 1e-15)
	near(t, "stroke, m", c.Stroke, .15, 1e-15)
	near(t, "connecting rod, m", c.ConRod, .375, 1e-15)
	near(t, "clearance", c.Clearance[crank.CE], .18, 1e-15)
	near(t, "dead centre of t2", sk.Throws[1].DeadCentre, 217, 0)
	near(t, "rated rod load, N", sk.Machine.RodLoadCompression, 110e3, 1e-9)
	near(t, "atmosphere, Pa", sk.Machine.Atmosphere, 101300, 1e-9)
	near(t, "suction pressure, Pa", sk.Process.Stages[0].Ps, 8e5, 1e-9)
	near(t, "suction temperature, K", sk.Process.Stages[0].Ts, 293.15, 1e-9)
	if !math.IsNaN(sk.Process.Stages[0].Td) {
		t.Errorf("discharge temperature %g was made up", sk.Process.Stages[0].Td)
	}
	v := sk.Throws[0].Ends[crank.HE].Discharge[1]
	if v.ID != "t1.he.d2" || v.Cover != "TT-1114" {
		t.Errorf("the second discharge valve is %+v", v)
	}
	near(t, "flow area, m²", v.FlowArea, 1.25e-3, 1e-15)
	near(t, "lift, m", v.Lift, 1.6e-3, 1e-15)
	if sk.Tape.MaxBytes != 20e9 || sk.Tape.Pre != 30*time.Second || sk.Uplink.Root != "lapwing" || sk.Panel.Listen != "127.0.0.1:8411" {
		t.Errorf("edges: %+v %+v %+v", sk.Tape, sk.Uplink, sk.Panel)
	}
	for i, c := range sk.Channels {
		if c.Input != i {
			t.Errorf("channel %d of the list is on input %d", i, c.Input)
		}
	}
}

// TestToothedWheels: the ways of writing a wheel.
func TestToothedWheels(t *testing.T) {
	for lines, want := range map[string]string{
		"":                            "one mark",
		"\n  marks_per_turn: 1":       "one mark",
		"\n  teeth: 60\n  missing: 2": "60-2",
		"\n  teeth: 24\n  extra: 1":   "24+1",
		"\n  teeth: 36\n  missing: 2\n  also_missing: [17]": "36-2-1",
	} {
		file, _ := swap(t, example(t), "  channel: phase", "  channel: phase"+lines)
		sk := parsed(t, file)
		if got := sk.Phase.Wheel.String(); got != want || sk.Phase.MarksPerTurn != sk.Phase.Wheel.Marks() {
			t.Errorf("%q is read as %s with %d marks, want %s", lines, got, sk.Phase.MarksPerTurn, want)
		}
		var report strings.Builder
		if err := Report(&report, sk, 0); err != nil {
			t.Fatal(err)
		}
		if says := strings.Contains(report.String(), "toothed wheel      "+want); says != (want != "one mark") {
			t.Errorf("%q: the report names a wheel: %v", lines, says)
		}
	}
}

func TestTeethTooFineToSampleAreRefused(t *testing.T) {
	file, _ := swap(t, example(t), "  channel: phase", "  channel: phase\n  teeth: 512\n  missing: 2")
	file, _ = swap(t, file, "max_rpm: 1000", "max_rpm: 1200")
	_, err := Parse("m.yaml", []byte(file))
	if err == nil || !strings.Contains(err.Error(), "3.3 samples from tooth to tooth at 1800 rpm are too few; raise sampling_hz to 61440") {
		t.Errorf("got %v", err)
	}
}

// TestScalingGivesTheCertificatesPoints: the two points of a transmitter must come back from its counts.
func TestScalingGivesTheCertificatesPoints(t *testing.T) {
	for name, c := range map[string]struct {
		scaling   string
		volts, pa float64
	}{
		"absolute, two points, upper": {"points: [{v: 1, bar_abs: 0}, {v: 5, bar_abs: 40}]", 5, 40e5},
		"absolute, two points, lower": {"points: [{v: 1, bar_abs: 0}, {v: 5, bar_abs: 40}]", 1, 0},
		"gauge, two points, upper":    {"points: [{v: 1, bar_gauge: 0}, {v: 5, bar_gauge: 40}]", 5, 40e5 + 101300},
		"gauge, two points, lower":    {"points: [{v: 1, bar_gauge: 0}, {v: 5, bar_gauge: 40}]", 1, 101300},
		"sensitivity, gauge zero":     {"mv_per_bar: 100\n    zero_v: 1\n    zero_is: gauge", 3, 20e5 + 101300},
		"sensitivity, absolute zero":  {"mv_per_bar: 100\n    zero_v: 1\n    zero_is: absolute", 3, 20e5},
	} {
		file, _ := swap(t, example(t), "points: [{v: 1, bar_abs: 0}, {v: 5, bar_abs: 40}]", c.scaling)
		ch, ok := parsed(t, file).ChannelByID("p1h")
		if !ok {
			t.Fatal("no channel p1h")
		}
		for _, bits := range []int{16, 24} {
			gain, offset := ch.Scale(bits)
			counts := c.volts / 10 * float64(int64(1)<<(bits-1))
			near(t, fmt.Sprintf("%s, %d bits", name, bits), gain*counts+offset, c.pa, 1e-6)
		}
	}
	a, _ := parsed(t, example(t)).ChannelByID("a1")
	gain, offset := a.Scale(16)
	near(t, "100 mV/g at 1 V of ±10 V, m/s²", gain*3276.8+offset, 98.0665, 1e-9)
}

func TestGaugeAndAbsoluteNameTheSamePressure(t *testing.T) {
	base := string(m1(t, 900, 2000, 5000).Raw)
	rapid.Check(t, func(rt *rapid.T) {
		gauge := rapid.Float64Range(0, 20).Draw(rt, "bar gauge")
		a, err := Parse("a", []byte(strings.Replace(base, "p_suction_bar_abs: 20", fmt.Sprintf("p_suction_bar_abs: %.9f", gauge+1.01325), 1)))
		if err != nil {
			rt.Fatal(err)
		}
		g, err := Parse("g", []byte(strings.Replace(base, "p_suction_bar_abs: 20", fmt.Sprintf("p_suction_bar_gauge: %.9f", gauge), 1)))
		if err != nil {
			rt.Fatal(err)
		}
		if d := a.Process.Stages[0].Ps - g.Process.Stages[0].Ps; math.Abs(d) > 1e-3 {
			rt.Errorf("%.9f bar gauge is %g Pa off", gauge, d)
		}
	})
}

// TestAnUnknownKeysConversionIsRight: what the message tells people to write must be the same quantity.
func TestAnUnknownKeysConversionIsRight(t *testing.T) {
	for _, c := range []struct{ key, value, known, want string }{
		{"bore_in", "10", "bore_mm", "bore_mm: 254"},
		{"bore_m", "0.254", "bore_mm", "bore_mm: 254"},
		{"t_suction_f", "68", "t_suction_c", "t_suction_c: 20"},
		{"t_suction_k", "293.15", "t_suction_c", "t_suction_c: 20"},
		{"rod_load_compression_lbf", "10000", "rod_load_compression_kn", "rod_load_compression_kn: 44.4822"},
		{"mass_piston_lb", "100", "mass_piston_kg", "mass_piston_kg: 45.3592"},
		{"rated_hz", "10", "rated_rpm", "rated_rpm: 600"},
		{"max_age_d", "3", "max_age_h", "max_age_h: 72"},
		{"flow_area_in2", "2", "flow_area_mm2", "flow_area_mm2: 1290.32"},
		{"clearance_frac", "0.16", "clearance_percent", "clearance_percent: 16"},
		{"p_suction_kpa_abs", "800", "p_suction_bar_abs", "p_suction_bar_abs: 8"},
	} {
		fix, meant := advise(c.key, c.value, []string{"other", c.known})
		if !strings.Contains(fix, c.want+" ") || len(meant) != 1 || meant[0] != c.known {
			t.Errorf("%s: %s: %q, want %q", c.key, c.value, fix, c.want)
		}
	}
}

func TestALoadStepOpensItsPocketsOnly(t *testing.T) {
	sk := parsed(t, example(t))
	closed, open := sk.CylinderAt(0, 0), sk.CylinderAt(0, 1)
	near(t, "added clearance volume, cm³", (open.ClearanceVolume(crank.HE)-closed.ClearanceVolume(crank.HE))*1e6, 1400, 1e-9)
	near(t, "clearance of the other end", open.Clearance[crank.CE], closed.Clearance[crank.CE], 0)
	if sk.CylinderAt(0, 99) != closed {
		t.Error("an unknown step opened something")
	}
	if s, ok := sk.FindStep(2); !ok || !s.Idle["t1.he"] || s.Idle["t2.he"] {
		t.Errorf("step 2 is %+v", s)
	}
	if sk.EndName(1, crank.CE) != "t2.ce" || sk.Stages() != 1 {
		t.Error("names or stages")
	}
}

func TestWithoutLoadStepsThereIsOneFullStep(t *testing.T) {
	sk := m1(t, 900, 2000, 5000)
	if len(sk.Steps) != 3 {
		t.Fatal("the worked machine has three")
	}
	raw, _, _ := strings.Cut(string(sk.Raw), "load_steps")
	_, rest, _ := strings.Cut(string(sk.Raw), "channels")
	one := parsed(t, raw+"channels"+rest)
	if len(one.Steps) != 1 || one.Steps[0].Code != 0 || one.Steps[0].Name != "full" {
		t.Errorf("steps %+v", one.Steps)
	}
}

func TestLimitsAreCheckedAgainstTheMeasures(t *testing.T) {
	base, _, _ := strings.Cut(example(t), "\nlimits:")
	file := base + `
limits:
  - {of: t1, measure: pin_reversal_deg, low: 15, on_delay_s: 30, severity: danger}
  - {of: t1.he.suction, measure: opens_dge, high: 60, severity: alert}
`
	sk := parsed(t, file)
	if l := sk.Limits[0]; l.Low != 15 || !math.IsNaN(l.High) || l.OnDelay != 30*time.Second || l.OffDelay != 30*time.Second {
		t.Errorf("limit %+v", l)
	}
	names := func(subject string) []string {
		if subject == "t1" {
			return []string{"pin_reversal_deg"}
		}
		return []string{"opens_deg", "closes_deg"}
	}
	ps := Problems(sk.CheckLimits(names))
	if len(ps) != 1 || ps[0].Path != "limits[1].measure" || ps[0].Fix != "did you mean opens_deg?" || ps[0].Line != strings.Count(file[:strings.Index(file, "opens_dge")], "\n")+1 {
		t.Errorf("problems %v", ps)
	}
	for _, bad := range []string{"{of: t9, measure: a, high: 1, severity: alert}", "{of: t1, measure: a, severity: alert}",
		"{of: t1, measure: a, high: 1, low: 2, severity: alert}", "{of: t1, measure: a, high: 1}", "{of: t1, measure: a, high: 1, severity: worse}"} {
		if _, err := Parse("m", []byte(base+"\nlimits:\n  - "+bad+"\n")); err == nil {
			t.Errorf("accepted %s", bad)
		}
	}
}

func TestASingleActingCylinder(t *testing.T) {
	for _, f := range configs(t) {
		if !strings.Contains(f, "fast-small") {
			continue
		}
		sk, err := Load(f)
		if err != nil {
			t.Fatal(err)
		}
		blind := sk.Throws[1]
		if blind.Ends[crank.CE].Works || !blind.BlindAtSuction || len(blind.Ends[crank.CE].Suction) != 0 {
			t.Errorf("the second throw is %+v", blind)
		}
		return
	}
	t.Fatal("the single-acting example is gone")
}

// FuzzParse: whatever the bytes, an answer comes soon, it is either a Skid or problems with places, and a Skid can be
// reported on and doubted.
func FuzzParse(f *testing.F) {
	for _, file := range configs(f) {
		sk, err := Load(file)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(sk.Raw)
	}
	for _, s := range []string{"", "lapwing: 1", "- [", "a: &a [*a]", "{{{{", "lapwing: 1\nthrows: [{id: t1, head_end: {suction: {valves: 16}}}]",
		"machine: {rated_rpm: 1e999}", "channels: [{id: 1, input: 0x7fffffffffffffff}]", "gas: {mole_percent: {H2: 100}}", "? [a]\n: b"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		begin := time.Now()
		sk, err := Parse("f", raw)
		if d := time.Since(begin); d > 20*time.Second {
			t.Errorf("%d bytes took %s", len(raw), d) // a hang, not a slow machine
		}
		if (sk == nil) == (err == nil) {
			t.Fatal("neither a skid nor an error")
		}
		for _, p := range Problems(err) {
			if p.Line < 1 || p.Msg == "" {
				t.Errorf("a problem without a place: %#v", p)
			}
		}
		if err != nil && len(Problems(err)) == 0 {
			t.Errorf("an error that is no problem: %v", err)
		}
		if sk != nil {
			var b strings.Builder
			if err := Report(&b, sk, 0); err != nil || strings.Contains(b.String(), "NaN") {
				t.Errorf("report: %v\n%s", err, b.String())
			}
		}
	})
}
