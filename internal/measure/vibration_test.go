package measure

import (
	"math"
	"strings"
	"testing"

	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// ringing is an ideal cycle with an accelerometer: at each onset (degrees) a decaying sine begins.
func ringing(d ideal, onsets map[float64]float64) (*turn.Turn, window.Result, []Input) {
	_, _, tn, w, in := d.take(d.cyl)
	th := &tn.Throws[0]
	v := turn.Vib{Channel: "a1", Rate: 51200, Seq0: int64(math.Floor(th.Pos[0]))}
	n := int(th.Pos[th.Grid.N-1]) - int(v.Seq0) + 1
	v.X = make([]float64, n)
	for i := range v.X {
		v.X[i] = .2 * math.Sin(2.1*float64(i)) // background, 0.141 m/s² effective
		for deg, amp := range onsets {
			if ms := (float64(i) + float64(v.Seq0) - th.SampleAt(deg)) / 51.2; ms >= 0 {
				v.X[i] += amp * math.Exp(-ms/.8) * math.Sin(2*math.Pi*6*ms+.5)
			}
		}
	}
	v.Leak = make([]float64, th.Grid.N)
	for i := range v.Leak {
		v.Leak[i] = .04
	}
	th.Vib = []turn.Vib{v}
	return tn, w, in
}

func acoustic() *Measurer {
	m := twoEnds()
	m.Throws[0].Acoustic = true
	return New(Config{Machine: m})
}

func TestImpactIsMeasuredInTime(t *testing.T) {
	d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
	const at, amp = 290.0, 40.0
	tn, w, in := ringing(d, map[float64]float64{at: amp})
	m := acoustic()
	var v Vector
	m.Measure(&v, tn, w, in)
	get := func(name string) float64 { return get(t, m, &v, "t1.he.discharge.opens", name) }
	near(t, "onset", get("onset_deg"), at, .6) // 0.1 ms of smoothing is 0.5° here
	angle := w.Throws[0].Ends[0].W[window.DischargeOpens].Angle
	near(t, "lag", get("lag_ms"), (at-angle)/5.4, .1)
	peak := 0.0
	for ms := 0.0; ms < 1; ms += 1 / 51.2 / 8 {
		peak = max(peak, amp*math.Abs(math.Exp(-ms/.8)*math.Sin(2*math.Pi*6*ms+.5)))
	}
	near(t, "peak", get("peak_g")*9.80665, peak, .06*peak)
	// Mean of A² exp(−2t/τ) sin² over T = 3 ms is about A²τ/4T.
	near(t, "impact", get("impact_ln"), math.Log(amp*math.Sqrt(.8/4/3)), .05)

	// No impact: peak and effective value remain, the rest is absent with a reason.
	tn, w, in = ringing(d, nil)
	m.Measure(&v, tn, w, in)
	for name, want := range map[string]bool{"peak_g": true, "rms_g": true, "onset_deg": false, "lag_ms": false, "impact_ln": false} {
		i := m.Layout().Find("t1.he.discharge.opens", name)
		if math.IsNaN(v.V[i]) == want {
			t.Errorf("silence: %s = %g (%s)", name, v.V[i], v.Why[i])
		}
	}
	tn.Throws[0].Vib[0].Suspect = "cable open"
	m.Measure(&v, tn, w, in)
	for i, f := range m.Layout() {
		if f.Class == Vibration && (v.Why[i] != "cable open") {
			t.Errorf("suspect channel: %s %s = %g (%s)", f.Subject, f.Name, v.V[i], v.Why[i])
		}
	}
}

func TestSharedClosingsAreNotBooked(t *testing.T) {
	tn, w, in := ringing(ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, map[float64]float64{183: 20})
	m := acoustic()
	var v Vector
	m.Measure(&v, tn, w, in)
	for _, subject := range []string{"t1.he.suction.closes", "t1.ce.discharge.closes"} {
		if i := m.Layout().Find(subject, "impact_ln"); v.Why[i] != whySharedEvent {
			t.Errorf("%s: %g (%s)", subject, v.V[i], v.Why[i])
		}
		get(t, m, &v, subject, "peak_g")
	}
}

// A jet on path j adds a·S_j to the leak band: its own projection must rise most (or that of the path with the same
// shape on the other end), and its level must rise.
func TestLeakNoiseNamesThePath(t *testing.T) {
	for _, d := range []ideal{{cyl: m1, ps: 2e6, pd: 3.6e6, rpm: 600}, {cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, {cyl: m2, ps: 1.5e6, pd: 5.4e6, rpm: 333}} {
		tn, w, in := ringing(d, nil)
		m := acoustic()
		var quiet, loud Vector
		m.Measure(&quiet, tn, w, in)
		th := &tn.Throws[0]
		flow := func(j, i int) float64 {
			he, ce := th.P[0][i], th.P[1][i]
			up, down := [5]float64{he, d.pd, ce, d.pd, max(he, ce)}[j], [5]float64{d.ps, he, d.ps, ce, min(he, ce)}[j]
			if up <= down {
				return 0
			}
			// Saint-Venant and Wantzel, exact, as a check on the ellipse.
			k := idealN
			r := max(down/up, math.Pow(2/(k+1), k/(k-1)))
			return up / d.pd * math.Sqrt(2*k/(k-1)*(math.Pow(r, 2/k)-math.Pow(r, (k+1)/k)))
		}
		subjects := []string{"t1.he.suction", "t1.he.discharge", "t1.ce.suction", "t1.ce.discharge", "t1.rings"}
		for j := range subjects {
			for i := range th.Vib[0].Leak {
				th.Vib[0].Leak[i] = .04 * (1 + .5*flow(j, i))
			}
			m.Measure(&loud, tn, w, in)
			best, most := -1, math.Inf(-1)
			for i, s := range subjects {
				if r := get(t, m, &loud, s, "leak_shape") - get(t, m, &quiet, s, "leak_shape"); r > most {
					best, most = i, r
				}
			}
			if best != j {
				t.Errorf("ratio %.1f: noise on %s has the shape of %s", d.pd/d.ps, subjects[j], subjects[best])
			}
			if r := get(t, m, &loud, subjects[j], "leak_noise_db") - get(t, m, &quiet, subjects[j], "leak_noise_db"); r < .5 {
				t.Errorf("ratio %.1f: noise on %s raises its level by %.2f dB", d.pd/d.ps, subjects[j], r)
			}
		}
	}
}

func TestLeakNoiseReasons(t *testing.T) {
	d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
	m := acoustic()
	var v Vector
	i := m.Layout().Find("t1.he.suction", "leak_noise_db")
	for want, harm := range map[string]func(tn *turn.Turn, w window.Result){
		whyNoLeakBand:  func(tn *turn.Turn, _ window.Result) { tn.Throws[0].Vib[0].Leak = nil },
		whyNoVibration: func(tn *turn.Turn, _ window.Result) { tn.Throws[0].Vib = nil },
		whyBusy:        func(tn *turn.Turn, _ window.Result) { tn.Throws[0].RPM = 6000 },
		"lost": func(_ *turn.Turn, w window.Result) {
			w.Throws[0].Ends[1].W[1] = window.Window{State: window.Lost, Lo: math.NaN(), Why: "lost"}
		},
	} {
		tn, w, in := ringing(d, nil)
		harm(tn, w)
		m.Measure(&v, tn, w, in)
		if v.Why[i] != want || !math.IsNaN(v.V[i]) {
			t.Errorf("%q: got %g, %q", want, v.V[i], v.Why[i])
		}
	}
}

func TestJetFollowsTheNozzle(t *testing.T) {
	// Nozzle function of Saint-Venant and Wantzel, k = 1.3, relative to its choked value.
	const k = 1.3
	critical := math.Pow(2/(k+1), k/(k-1))
	psi := func(r float64) float64 { return math.Sqrt(math.Pow(r, 2/k) - math.Pow(r, (k+1)/k)) }
	for r := .1; r < .999; r += .01 {
		want := psi(max(r, critical)) / psi(critical)
		if got := jet(1, r, critical); math.Abs(got-want) > .015 {
			t.Errorf("at pressure ratio %.2f: %.4f, exact %.4f", r, got, want)
		}
	}
	if jet(1, 1, critical) != 0 || jet(1, 2, critical) != 0 {
		t.Error("no flow uphill")
	}
}

func TestCovers(t *testing.T) {
	mac := twoEnds()
	for e, end := range []string{"t1.he", "t1.ce"} {
		for _, k := range []string{"1", "2"} {
			mac.Throws[0].Ends[e].Suction = append(mac.Throws[0].Ends[e].Suction, Valve{ID: end + ".s" + k, Cover: true})
			mac.Throws[0].Ends[e].Discharge = append(mac.Throws[0].Ends[e].Discharge, Valve{ID: end + ".d" + k, Cover: k == "1"})
		}
	}
	m := New(Config{Machine: mac})
	_, _, tn, w, in := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}.take(m1)
	in[0].Covers = map[string]float64{"t1.he.s1": 310, "t1.he.s2": 325, "t1.ce.s1": 312, "t1.ce.s2": 311, "t1.he.d1": 370}
	var v Vector
	m.Measure(&v, tn, w, in)
	near(t, "cover", get(t, m, &v, "t1.he.s2", "cover_c"), 325-273.15, 1e-9)
	near(t, "hot cover above its group", get(t, m, &v, "t1.he.s2", "cover_above_group_k"), 325-311, 1e-9)
	near(t, "others", get(t, m, &v, "t1.he.s1", "cover_above_group_k"), 310-312, 1e-9)
	if i := m.Layout().Find("t1.he.d1", "cover_above_group_k"); !math.IsNaN(v.V[i]) || !strings.Contains(v.Why[i], "no other valve") {
		t.Errorf("a valve alone in its kind: %g (%s)", v.V[i], v.Why[i])
	}
	if i := m.Layout().Find("t1.ce.d1", "cover_c"); !math.IsNaN(v.V[i]) || v.Why[i] == "" {
		t.Errorf("unknown cover: %g (%s)", v.V[i], v.Why[i])
	}
	if i := m.Layout().Find("t1.he.d2", "cover_c"); i >= 0 {
		t.Error("a valve without a cover sensor has no feature")
	}
}
