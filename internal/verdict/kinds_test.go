package verdict

import (
	"strings"
	"testing"

	"lapwing/internal/duty"
)

// Errors of the instruments and of the process: a finding about them, and no valve above advisory.
func TestSensorErrorsAreNotLeaks(t *testing.T) {
	for name, c := range map[string]struct {
		do            func(s *synth)
		subject, kind string
	}{
		"dead centre 0.5° early":      {func(s *synth) { s.early = 0.5 }, "t1", DeadCentre},
		"dead centre 1.5° late":       {func(s *synth) { s.early = -1.5 }, "t1", DeadCentre},
		"head-end zero +2.5 % of Ps":  {func(s *synth) { s.zero[0] = 2.5 }, "p1", PressureZero},
		"crank-end zero −2 % of Ps":   {func(s *synth) { s.zero[1] = -2 }, "t1.ce", PressureZero},
		"head-end clearance 1 point":  {func(s *synth) { s.clear[0] = -1 }, "t1.he", Clearance},
		"another gas, exponent −0.02": {func(s *synth) { s.gas = -2 }, "t1", GasChanged},
		"accelerometer half as loud":  {func(s *synth) { s.louder = -0.7 }, "a1", AccelGain},
		"accelerometer twice as loud": {func(s *synth) { s.louder = 0.7 }, "a1", AccelGain},
	} {
		t.Run(name, func(t *testing.T) {
			s, r := commissioned(t, 5)
			r.judge = New(s.layout, Config{Channels: []ThrowChannel{{Pressure: [2]string{"p1", ""}, Accel: "a1"}}})
			c.do(s)
			named := false
			r.run(s, 240, nil, func(_ duty.Block, fs []Finding) {
				for _, f := range fs {
					if f.Subject == c.subject && f.Kind == c.kind {
						named = true
						if f.Grade > Advisory {
							t.Errorf("sensor finding of grade %v", f.Grade)
						}
						continue
					}
					if f.Grade > None {
						t.Errorf("%v on another: %s", f.Grade, f.Sentence)
					}
				}
			})
			if !named {
				t.Errorf("not found; standing: %v", r.judge.Findings())
			}
		})
	}
}

func TestOtherKinds(t *testing.T) {
	for name, c := range map[string]struct {
		do      func(s *synth)
		subject string
		kind    string
		grade   Grade
		valve   string
		part    string // of the sentence
	}{
		"a broken plate hits hard and leaks": {func(s *synth) { s.hit["t1.ce.discharge"], s.leak["t1.ce.discharge"] = 0.8, 4 },
			"t1.ce.discharge", ImpactingHard, Alert, "", "times the usual"},
		"hard impact alone is an advisory": {func(s *synth) { s.hit["t1.he.suction"] = 0.8 },
			"t1.he.suction", ImpactingHard, Advisory, "", "possible"},
		"sticking: late, hard, and costs work": {func(s *synth) { s.stick["t1.he.discharge"], s.hit["t1.he.discharge"] = 0.6, 0.5 },
			"t1.he.discharge", OpeningLate, Alert, "", "valve loss"},
		"flutter: late, no harder, extra hits": {func(s *synth) { s.stick["t1.ce.discharge"], s.rattle["t1.ce.discharge"] = 0.5, 20 },
			"t1.ce.discharge", Fluttering, Advisory, "", "extra hits"},
		"the cover names the valve": {func(s *synth) { s.leak["t1.he.suction"], s.cover["t1.he.s2"] = 4, 14 },
			"t1.he.suction", Leaking, Alert, "t1.he.s2", "cover of t1.he.s2 is 14 K above its group"},
		"a leak nobody hears stays an advisory": {func(s *synth) { s.leak["t1.he.discharge"], s.quiet = 4, true },
			"t1.he.discharge", Leaking, Advisory, "", "possible"},
		"packing: no noise, no heat": {func(s *synth) { s.leak["t1.packing"] = 4 },
			"t1.packing", Leaking, Advisory, "", "cannot be told from t1.ce.suction"},
		"a great leak is danger": {func(s *synth) { s.leak["t1.ce.suction"] = 22 },
			"t1.ce.suction", Leaking, Danger, "", "confirmed and severe"},
	} {
		t.Run(name, func(t *testing.T) {
			s, r := commissioned(t, 8)
			c.do(s)
			var last *Finding
			r.run(s, 300, nil, func(_ duty.Block, fs []Finding) {
				for _, f := range fs {
					if f.Subject == c.subject && f.Kind == c.kind {
						last = &f
					} else if f.Grade >= Alert && f.Subject != c.subject {
						t.Errorf("%v on another: %s", f.Grade, f.Sentence)
					}
				}
			})
			if last == nil {
				t.Fatalf("not found; standing: %+v", r.judge.Findings())
			}
			t.Log(last.Sentence)
			if last.Grade != c.grade || last.Valve != c.valve || !strings.Contains(last.Sentence, c.part) {
				t.Errorf("grade %v valve %q: %s", last.Grade, last.Valve, last.Sentence)
			}
		})
	}
}

// With one end idle, rings blow and leak like the loaded end's suction (reference/leaks.md section 2), and two impacts
// are too few to tell an accelerometer by: what is known from before explains what is seen.
func TestWhatIsKnownExplainsOneEndedDuty(t *testing.T) {
	healthy := newSynth(11)
	baseline := commission(t, healthy, 800, func(i int) { healthy.idle[0] = (i/200)%2 == 1 })
	for name, c := range map[string]struct {
		both, one func(s *synth)
		subject   string
	}{
		"rings": {func(s *synth) { s.leak["t1.rings"] = 4 }, func(s *synth) { s.leak["t1.rings"], s.leak["t1.ce.suction"] = 0, 4 }, "t1.rings"},
		"gain":  {func(s *synth) { s.louder = 0.7 }, func(*synth) {}, "t1"},
	} {
		t.Run(name, func(t *testing.T) {
			s := newSynth(11)
			r := baseline.fresh()
			c.both(s)
			only := func(_ duty.Block, fs []Finding) {
				for _, f := range fs {
					if f.Subject != c.subject && f.Grade > None {
						t.Errorf("%s", f.Sentence)
					}
				}
			}
			r.run(s, 150, nil, only)
			if len(r.judge.Findings()) != 1 {
				t.Fatalf("not raised: %+v", r.judge.Findings())
			}
			s.idle[0] = true
			c.one(s)
			r.run(s, 300, nil, only)
			if fs := r.judge.Findings(); len(fs) != 1 || fs[0].Subject != c.subject {
				t.Errorf("left: %+v", fs)
			}
		})
	}
}

// What a standing leak explains raises nothing more: the warm cover, and a departure that it blurs.
func TestALeakExplainsItsCompany(t *testing.T) {
	for name, leak := range map[string]float64{"without a leak": 0, "with a leak": 4} {
		t.Run(name, func(t *testing.T) {
			s, r := commissioned(t, 11)
			s.leak["t1.he.suction"] = leak
			s.cover["t1.he.s1"] = 3 * leak
			r.run(s, 120, nil, func(duty.Block, []Finding) {})
			s.stick["t1.he.suction"] = 0.4
			late := false
			r.run(s, 150, nil, func(_ duty.Block, fs []Finding) {
				for _, f := range fs {
					late = late || f.Kind == OpeningLate
					if f.Grade > None && f.Kind != OpeningLate && f.Kind != Leaking {
						t.Error(f.Sentence)
					}
				}
			})
			if late != (leak == 0) {
				t.Errorf("opening late was said: %v", late)
			}
		})
	}
}

// A leak in one valve warms the gas of its whole throw against the stage's other throws: the covers' common part names none.
func TestCommonWarmthNamesNoValve(t *testing.T) {
	s, r := commissioned(t, 11)
	covers := 0
	for _, f := range s.layout {
		if f.Name == "cover_above_group_k" {
			s.cover[f.Subject] = 8
			covers++
		}
	}
	said := func(_ duty.Block, fs []Finding) {
		for _, f := range fs {
			t.Error(f.Sentence)
		}
	}
	r.run(s, 150, nil, said)
	s.cover["t1.he.s1"] += 8
	named := false
	r.run(s, 150, nil, func(_ duty.Block, fs []Finding) {
		for _, f := range fs {
			named = named || f.Subject == "t1.he.suction" && f.Valve == "t1.he.s1"
		}
	})
	if !named || covers < 4 {
		t.Errorf("one cover that stands out of %d is not named", covers)
	}
}

// A crank end's suction pattern that stands long with every cover cold speaks for the packing; a warm cover names the
// valve instead, and at first nothing is said either way.
func TestColdCoversSpeakForThePacking(t *testing.T) {
	for name, c := range map[string]struct {
		cover float64
		end   string
		turns int
		want  bool
	}{"cold": {0, "t1.ce.suction", 500, true}, "cold, but young": {0, "t1.ce.suction", 150, false}, "warm": {9, "t1.ce.suction", 500, false}, "the head end has no packing": {0, "t1.he.suction", 500, false}} {
		t.Run(name, func(t *testing.T) {
			s, r := commissioned(t, 11)
			s.leak[c.end] = 4
			s.cover["t1.ce.s1"] = c.cover
			last := ""
			r.run(s, c.turns, nil, func(_ duty.Block, fs []Finding) {
				for _, f := range fs {
					if f.Subject == c.end {
						last = f.Sentence
					}
				}
			})
			if got := strings.Contains(last, "speak for t1.packing"); got != c.want || last == "" {
				t.Error(last)
			}
		})
	}
}
