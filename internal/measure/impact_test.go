package measure

import (
	"encoding/json"
	"math"
	"reflect"
	"testing"

	"lapwing/internal/window"
)

// The figures for the eye against what a decaying sine of 6 kHz and 0.8 ms has in closed form.
func TestFiguresForTheEye(t *testing.T) {
	const at, amp, tau = 290.0, 40.0, 0.8
	tn, w, in := ringing(ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, map[float64]float64{at: amp})
	m := acoustic()
	var v Vector
	m.Measure(&v, tn, w, in)
	get := func(name string) float64 { return get(t, m, &v, "t1.he.discharge.opens", name) }
	onset := get("onset_deg")
	near(t, "onset", onset, at, .12)
	near(t, "ring-down", get("ringdown_ms"), tau, .03*tau)
	// Energy goes as exp(−2t/τ): its middle lies τ/2 after the onset, less what 3 ms cut off (e⁻⁷).
	near(t, "centroid", get("centroid_deg"), at+5.4*tau/2, .25)
	// Peak over √(τ/4T) of the amplitude.
	near(t, "crest", get("crest"), get("peak_g")*9.80665/(amp*math.Sqrt(tau/4/3)), .1)
	// A decaying sine is a Lorentz line of half-width 1/2πτ: some 5 % of it lie below 5 kHz and 2 % above 10.
	half := 1 / (2 * math.Pi * tau)
	share := (math.Atan((10-6)/half) + math.Atan((6-5)/half)) / math.Pi
	near(t, "5 to 10 kHz", get("band_mid_db"), 10*math.Log10(share*amp*amp*tau/4/3), .2)
	for _, b := range []string{"band_low_db", "band_high_db"} {
		if d := get("band_mid_db") - get(b); d < 11 {
			t.Errorf("%s is only %.1f dB below the band of the ring", b, d)
		}
	}
	// All of the energy is in the three bands, but for what lies below 2 kHz and above 20.
	sum := 0.0
	for _, b := range []string{"band_low_db", "band_mid_db", "band_high_db"} {
		sum += math.Pow(10, get(b)/10)
	}
	near(t, "sum of the bands", 10*math.Log10(sum), 20*math.Log10(math.Exp(get("impact_ln"))), .1)
}

// The slope ahead of an opening, against the polytropic line: dp/dt = −n p V'/V · 6 rpm.
func TestOpeningSlope(t *testing.T) {
	d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
	tn, w, in := ringing(d, map[float64]float64{290: 40})
	m := acoustic()
	var v Vector
	m.Measure(&v, tn, w, in)
	for e, end := range []string{"t1.he", "t1.ce"} {
		for k, ev := range map[window.Event]string{window.SuctionOpens: "suction.opens", window.DischargeOpens: "discharge.opens"} {
			a := w.Throws[0].Ends[e].W[k].Angle
			// Over the fitted stretch the mean slope is the secant's, to second order.
			want := math.Abs(d.pressure(e, a-slopeTo)-d.pressure(e, a-slopeFrom)) / ((slopeFrom - slopeTo) / (6 * d.rpm)) * 1e-5
			near(t, end+"."+ev, get(t, m, &v, end+"."+ev, "opening_slope_bar_s"), want, .02*want)
		}
	}
	impact, norm := get(t, m, &v, "t1.he.discharge.opens", "impact_ln"), get(t, m, &v, "t1.he.discharge.opens", "impact_norm_ln")
	near(t, "normalised impact", norm, impact-.45*math.Log(get(t, m, &v, "t1.he.discharge.opens", "opening_slope_bar_s")), 1e-12)
}

// Hits after an opening are counted, other events are not, and 45 turns make a sum.
func TestExtraHits(t *testing.T) {
	d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
	hits := func(m *Measurer, onsets map[float64]float64) (float64, float64) {
		tn, w, in := ringing(d, onsets)
		var v Vector
		m.Measure(&v, tn, w, in)
		at := func(name string) float64 { return v.V[m.Layout().Find("t1.he.discharge.opens", name)] }
		return at("extra_hits"), at("extra_hits_45")
	}
	for name, c := range map[string]struct {
		onsets map[float64]float64
		want   float64
	}{
		"none":                 {map[float64]float64{290: 40}, 0},
		"one":                  {map[float64]float64{290: 40, 310: 12}, 1},
		"two":                  {map[float64]float64{290: 40, 306: 15, 322: 12}, 2},
		"still ringing":        {map[float64]float64{290: 40, 294: 6}, 0},
		"another event's time": {map[float64]float64{290: 40, 240: 15}, 0},
	} {
		if got, _ := hits(acoustic(), c.onsets); got != c.want {
			t.Errorf("%s: %g extra hits, want %g", name, got, c.want)
		}
	}
	m := acoustic()
	for i := range 60 {
		onsets := map[float64]float64{290: 40}
		if i%5 == 0 {
			onsets[310] = 12
		}
		_, sum := hits(m, onsets)
		if i < 44 != math.IsNaN(sum) || i >= 44 && sum != 9 {
			t.Fatalf("turn %d: %g hits in 45 turns", i, sum)
		}
	}
}

// A second throw, a quarter turn away, whose discharge opens loudly: what arrives of it here a millisecond later, where
// this throw's own valve stays silent, is known for what it is; a hit of the size of an own one is not.
func TestCrossTalkIsNoImpact(t *testing.T) {
	for peak, cross := range map[float64]bool{2.5: true, 30: false} {
		tn, w, in := ringing(ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, map[float64]float64{290: peak})
		loud, _, _ := ringing(ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, map[float64]float64{290 - 1.0*5.4: 40})
		other := loud.Throws[0]
		other.Vib[0].Channel = "a2"
		tn.Throws = append(tn.Throws, other)
		w.Throws = append(w.Throws, w.Throws[0])
		in = append(in, in[0])
		mac := twoEnds()
		mac.Throws = append(mac.Throws, mac.Throws[0])
		mac.Throws[1].ID = "t2"
		mac.Throws[0].Acoustic, mac.Throws[1].Acoustic = true, true
		m := New(Config{Machine: mac})
		var v Vector
		m.Measure(&v, tn, w, in)
		i := m.Layout().Find("t1.he.discharge.opens", "impact_ln")
		if got := v.Marks[0][0][window.DischargeOpens].Sharing == CrossTalk; got != cross || (v.Why[i] == whyCrossTalk) != cross {
			t.Errorf("peak %g: sharing %v, impact %g (%s)", peak, v.Marks[0][0][window.DischargeOpens].Sharing, v.V[i], v.Why[i])
		}
		get(t, m, &v, "t2.he.discharge.opens", "impact_ln")
	}
}

func TestSignChanges(t *testing.T) {
	sine := func(n int, of func(x float64) float64) (y []float64) {
		for i := range n {
			y = append(y, of(2*math.Pi*float64(i)/float64(n)))
		}
		return y
	}
	f, r, ok := signChanges(sine(720, func(x float64) float64 { return math.Sin(x - .5) }), .5)
	if !ok {
		t.Fatal("a sine changes its sign once each way")
	}
	near(t, "rises", r, .5*180/math.Pi, 1e-3)
	near(t, "falls", f, .5*180/math.Pi+180, 1e-3)
	if _, _, ok := signChanges(sine(720, func(x float64) float64 { return math.Sin(2 * x) }), .5); ok {
		t.Error("twice each way was taken for once")
	}
	if _, _, ok := signChanges(sine(720, func(x float64) float64 { return 2 + math.Sin(x) }), .5); ok {
		t.Error("never was taken for once")
	}
}

func TestKnockIsMarked(t *testing.T) {
	d := ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}
	m := acoustic()
	var v Vector
	tn, w, in := ringing(d, map[float64]float64{290: 40})
	m.Measure(&v, tn, w, in)
	if v.Marks[0][0][window.DischargeOpens].Knock {
		t.Fatalf("marked, with the pin load's changes at %g and %g", get(t, m, &v, "t1", "pin_pulls_deg"), get(t, m, &v, "t1", "pin_pushes_deg"))
	}
	// Masses that bring the change of sign to the opening.
	best, mass := math.Inf(1), 0.0
	for x := 0.0; x < 3000; x += 10 {
		in[0].Cylinder.MassPiston = x
		m.Measure(&v, tn, w, in)
		for _, n := range []string{"pin_pulls_deg", "pin_pushes_deg"} {
			if a := v.V[m.Layout().Find("t1", n)]; math.Abs(a-289) < best {
				best, mass = math.Abs(a-289), x
			}
		}
	}
	if best > 2 {
		t.Fatalf("no mass brings a change of sign nearer than %.1f°: the test has lost its case", best)
	}
	in[0].Cylinder.MassPiston = mass
	m.Measure(&v, tn, w, in)
	if !v.Marks[0][0][window.DischargeOpens].Knock {
		t.Errorf("not marked, %.1f° from the change of sign", best)
	}
}

// What has been learnt survives a restart bit for bit; what is damaged is refused and changes nothing.
func TestMemory(t *testing.T) {
	tn, w, in := ringing(ideal{cyl: m1, ps: 2e6, pd: 5e6, rpm: 900}, map[float64]float64{290: 40, 50: 20, 310: 12})
	m := acoustic()
	var v Vector
	for range 30 {
		m.Measure(&v, tn, w, in)
	}
	raw, err := json.Marshal(m.Snapshot())
	if err != nil {
		t.Fatal(err)
	}
	var s Memory
	if err := json.Unmarshal(raw, &s); err != nil {
		t.Fatal(err)
	}
	if got := s.Throws[0].Ends[0][window.DischargeOpens]; got.Count != 30 || len(got.Hits) != 30 || len(got.Cells) == 0 {
		t.Fatalf("remembered: %d events, %d turns of hits, %d cells", got.Count, len(got.Hits), len(got.Cells))
	}
	again := acoustic()
	if err := again.Restore(s); err != nil {
		t.Fatal(err)
	}
	for range 20 {
		var u Vector
		m.Measure(&v, tn, w, in)
		again.Measure(&u, tn, w, in)
		for i := range v.V {
			if math.Float64bits(v.V[i]) != math.Float64bits(u.V[i]) || v.Why[i] != u.Why[i] {
				t.Fatalf("%s %s: %g (%s), after a restart %g (%s)", m.Layout()[i].Subject, m.Layout()[i].Name, v.V[i], v.Why[i], u.V[i], u.Why[i])
			}
		}
	}
	before := again.Snapshot()
	for name, harm := range map[string]func(x *EventMemory){
		"too many":   func(x *EventMemory) { x.Count = 1e6 },
		"cut off":    func(x *EventMemory) { x.Cells = x.Cells[:7] },
		"negative":   func(x *EventMemory) { x.Cells[3] = -1 },
		"wild hits":  func(x *EventMemory) { x.Hits[0] = -4 },
		"wild lag":   func(x *EventMemory) { x.LagMs = math.Inf(1) },
		"wild level": func(x *EventMemory) { x.Level = math.NaN() },
	} {
		bad := m.Snapshot()
		harm(&bad.Throws[0].Ends[0][window.DischargeOpens])
		if err := again.Restore(bad); err == nil {
			t.Errorf("%s: not refused", name)
		}
	}
	if !reflect.DeepEqual(before, again.Snapshot()) {
		t.Error("a refused snapshot has changed something")
	}
	if err := again.Restore(Memory{Throws: []ThrowMemory{{ID: "t9"}}}); err != nil {
		t.Errorf("a throw that is no more: %v", err)
	}
}
