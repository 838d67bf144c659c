package station

import (
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"testing"

	"lapwing/configs"
	"lapwing/internal/alarm"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// limited is the example machine, sampled slowly, with limits of its own.
func limited(t *testing.T, limits ...string) *skid.Skid {
	t.Helper()
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		t.Fatal(err)
	}
	text := string(raw)
	for _, c := range [][2]string{{"sampling_hz: 51200", "sampling_hz: 20480"}, {"impact_band_hz: [2000, 20000]", "impact_band_hz: [2000, 8000]"}, {"leak_band_hz: [10000, 20000]", "leak_band_hz: [5000, 8000]"}} {
		if !strings.Contains(text, c[0]) {
			t.Fatalf("the example has no %q", c[0])
		}
		text = strings.Replace(text, c[0], c[1], 1)
	}
	head, rest, _ := strings.Cut(text, "\nlimits:")
	_, tail, ok := strings.Cut(rest, "\ntape:")
	if !ok {
		t.Fatal("the example has no tape behind its limits")
	}
	sk, err := skid.Parse("limits", []byte(head+"\nlimits:\n  - "+strings.Join(limits, "\n  - ")+"\n\ntape:"+tail))
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

// Rod load, reversal, discharge temperature and vibration peak have limits that need no baseline: those that the machine
// exceeds are raised, those that it does not are quiet, after the turns asked for, with numbers and advice.
func TestDirectLimitsWithoutABaseline(t *testing.T) {
	sk := limited(t,
		"{of: t1, measure: rod_load_max_kn, high: 10, deadband: 2, on_delay_s: 0, on_turns: 5, severity: alert}",
		"{of: t1, measure: rod_load_max_kn, high: 15, deadband: 2, on_delay_s: 0, on_turns: 5, severity: danger}",
		"{of: t2, measure: rod_load_max_kn, high: 500, deadband: 2, on_delay_s: 0, severity: alert}",
		"{of: t1, measure: reversal_deg, low: 170, deadband: 3, on_delay_s: 0, severity: alert}",
		"{of: t2, measure: reversal_deg, low: 15, deadband: 3, on_delay_s: 0, severity: alert}",
		"{of: t1.he, measure: t_discharge_c, high: 20, deadband: 3, on_delay_s: 1, severity: advisory}",
		"{of: t1.ce, measure: t_discharge_c, high: 200, deadband: 3, on_delay_s: 1, severity: advisory}",
		"{of: t1.he.suction.opens, measure: peak_g, high: 0.01, deadband: 0.001, on_delay_s: 0, severity: alert}",
		"{of: t1.ce.suction.opens, measure: peak_g, high: 5000, on_delay_s: 0, severity: alert}",
	)
	p := play(t, sk, model.Script{}, 2.5)
	first := map[string]alarm.Transition{}
	valid := 0
	began := map[string]int{}
	p.until(t, func(o *Output) bool {
		if o.Record.Valid {
			valid++
		}
		for _, tr := range o.Transitions {
			if _, again := first[tr.Key]; again {
				t.Errorf("%s: again %s", tr.Key, tr.Sentence)
			}
			first[tr.Key] = tr
			began[tr.Key] = valid
		}
		return false
	})
	if p.line.Judging() {
		t.Fatal("there is a baseline")
	}
	want := map[string]struct {
		sev  alarm.Severity
		said string
	}{
		"t1/rod_load_max_kn/high":         {alarm.Danger, "t1: largest combined rod load at the crosshead pin, compression: "},
		"t1/reversal_deg/low":             {alarm.Alert, "°, at or below its limit of 170°"},
		"t1.he/t_discharge_c/high":        {alarm.Advisory, " °C, at or above its limit of 20 °C"},
		"t1.he.suction.opens/peak_g/high": {alarm.Alert, " g, at or above its limit of 0.01 g"},
	}
	for key, w := range want {
		tr, ok := first[key]
		var d alarm.LimitDetail
		raw, err := json.Marshal(tr.Detail)
		if err == nil {
			err = json.Unmarshal(raw, &d)
		}
		if !ok || err != nil || tr.Severity != w.sev || tr.From != alarm.Normal || !strings.Contains(tr.Sentence, w.said) || d.Value == 0 || !slices.ContainsFunc(d.Next, func(s string) bool { return strings.Contains(s, "lock out") }) {
			t.Errorf("%s: %+v (%v), want %+v", key, tr, err, w)
		}
		delete(first, key)
	}
	for key, tr := range first {
		t.Errorf("%s is raised: %s", key, tr.Sentence)
	}
	if began["t1/rod_load_max_kn/high"] < 5 || began["t1/reversal_deg/low"] > began["t1/rod_load_max_kn/high"] {
		t.Errorf("raised at valid turns %v", began)
	}
}

// alone leaves a machine its first throw, with that throw's limits.
func alone(sk *skid.Skid) *skid.Skid {
	limits := slices.DeleteFunc(sk.Limits, func(l skid.Limit) bool { return l.Subject != "t1" })
	firstThrow(sk).Limits = limits
	return sk
}

// A limit returns only when the value has come back by its deadband: the load steps down a little, then a lot.
func TestDirectLimitReturns(t *testing.T) {
	sk := limited(t, "{of: t1, measure: rod_load_max_kn, high: 1, severity: alert}")
	var load [3]float64
	ratio := []float64{1, 0.93, 0.7}
	script := func() model.Script {
		s := model.Script{}
		pd := sk.Process.Stages[0].Pd
		return s.Add(1.2, 0.2, model.DischargePressure, "1", pd*ratio[1]).Add(2.4, 0.2, model.DischargePressure, "1", pd*ratio[2])
	}
	p := play(t, alone(sk), script(), 3.8)
	f := p.line.layout.Find("t1", "rod_load_max_kn")
	p.until(t, func(o *Output) bool {
		if at := o.Record.TimeS; o.Record.Valid {
			for i, until := range []float64{1.1, 2.3, 3.8} {
				if at < until {
					load[i] = o.Vector.V[f] * p.line.layout[f].Scale
					break
				}
			}
		}
		return false
	})
	if !(load[0] > load[1]+1 && load[1] > load[2]+2) {
		t.Fatalf("loads %v", load)
	}
	// between the first two loads, with a deadband that reaches under the second and not under the third
	high, dead := (load[0]+load[1])/2, (load[0]-load[1])/2+1
	sk = limited(t, fmt.Sprintf("{of: t1, measure: rod_load_max_kn, high: %.3f, deadband: %.3f, on_delay_s: 0, off_delay_s: 0, severity: alert}", high, dead))
	p = play(t, alone(sk), script(), 3.8)
	var got []string
	var when []float64
	p.until(t, func(o *Output) bool {
		for _, tr := range o.Transitions {
			if tr.Key == "t1/rod_load_max_kn/high" {
				got, when = append(got, tr.To.String()), append(when, o.Record.TimeS)
			}
		}
		return false
	})
	if len(got) != 2 || got[0] != "unacknowledged" || got[1] != "returned-unacknowledged" || when[1] < 2.35 || when[1] > 2.8 {
		t.Errorf("limit %.1f, deadband %.1f, loads %.1f: %q at %.2f s", high, dead, load, got, when)
	}
}
